"""Measured values: series of the shipped materials and of the user's own files, each with its source."""

from __future__ import annotations

from thermex.measured.library import Material, load_material, materials
from thermex.measured.lookup import Measured, best_measured, value_at
from thermex.measured.reader import load_series_file
from thermex.measured.series import Series

__all__ = [
    "Material",
    "Measured",
    "Series",
    "best_measured",
    "load_material",
    "load_series_file",
    "materials",
    "value_at",
]
