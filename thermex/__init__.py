"""thermex: thermal expansion of crystals from the pair potential one is about to trust.

The face of the package: cases in, predictions out. Everything is imported when first used.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from thermex.case.case import Case
    from thermex.case.published import case_from_published, published, published_for, published_names
    from thermex.case.reader import case_from_dict, load_case
    from thermex.comparison.assessment import Assessment, assess
    from thermex.comparison.ranking import rank
    from thermex.errors import InputError, NoAnswerError, ThermexError
    from thermex.expansion import predict
    from thermex.exploration.calibrate import Calibration, Datum, calibrate
    from thermex.exploration.match import Match, match
    from thermex.exploration.sweep import Sweep, sweep
    from thermex.measured import load_material, load_series_file, materials
    from thermex.prediction import Prediction

__version__ = "0.1.0"

_HOMES = {
    "Calibration": "thermex.exploration.calibrate",
    "Match": "thermex.exploration.match",
    "Sweep": "thermex.exploration.sweep",
    "rank": "thermex.comparison.ranking",
    "assess": "thermex.comparison.assessment",
    "Assessment": "thermex.comparison.assessment",
    "Datum": "thermex.exploration.calibrate",
    "calibrate": "thermex.exploration.calibrate",
    "match": "thermex.exploration.match",
    "sweep": "thermex.exploration.sweep",
    "Case": "thermex.case.case",
    "InputError": "thermex.errors",
    "NoAnswerError": "thermex.errors",
    "Prediction": "thermex.prediction",
    "ThermexError": "thermex.errors",
    "case_from_dict": "thermex.case.reader",
    "case_from_published": "thermex.case.published",
    "load_case": "thermex.case.reader",
    "load_material": "thermex.measured",
    "load_series_file": "thermex.measured",
    "materials": "thermex.measured",
    "predict": "thermex.expansion",
    "published": "thermex.case.published",
    "published_for": "thermex.case.published",
    "published_names": "thermex.case.published",
}

__all__ = [
    "Assessment",
    "Calibration",
    "Case",
    "Datum",
    "InputError",
    "Match",
    "NoAnswerError",
    "Prediction",
    "Sweep",
    "ThermexError",
    "assess",
    "calibrate",
    "case_from_dict",
    "case_from_published",
    "load_case",
    "load_material",
    "load_series_file",
    "match",
    "materials",
    "predict",
    "published",
    "published_for",
    "published_names",
    "rank",
    "sweep",
]


def __getattr__(name: str) -> Any:
    """Import a public name on first use (PEP 562)."""
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'thermex' has no attribute {name!r}")


def __dir__() -> list[str]:
    """List the public names."""
    return sorted([*__all__, "__version__"])
