"""The result folder of a prediction: every file made in memory, then written all or none."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path

from thermex.case.writer import case_to_toml
from thermex.prediction import Prediction
from thermex.report.beside import Beside
from thermex.report.document import csv_text, json_text, prediction_document
from thermex.report.figures import plot_alpha
from thermex.report.files import write_folder
from thermex.report.prediction_page import prediction_page
from thermex.report.record import run_record
from thermex.report.style import png_bytes, svg_bytes


def prediction_files(prediction: Prediction, beside: Beside, command: Sequence[str]) -> dict[str, bytes]:
    """Return file name → content of everything that is written for a prediction."""
    record = run_record(prediction.case, command)
    alpha = plot_alpha(prediction, beside)
    return {
        "prediction.json": json_text(prediction_document(prediction, beside)).encode(),
        "prediction.csv": csv_text(prediction, beside).encode(),
        "expansion.png": png_bytes(alpha),
        "expansion.svg": svg_bytes(alpha),
        "report.html": prediction_page(prediction, beside, record).encode("utf-8", "replace"),
        "run.json": (json.dumps(record, indent=2, ensure_ascii=False, allow_nan=False) + "\n").encode(),
        "case.toml": case_to_toml(prediction.case).encode(),
    }


def write_prediction(
    folder: str | Path, prediction: Prediction, beside: Beside, command: Sequence[str] = ("thermex.predict",)
) -> tuple[Path, ...]:
    """Write a prediction into a folder: data, table, figure, page, record and the case.

    Raises
    ------
    InputError
        When the folder cannot be written; old results are then as they were.
    """
    return write_folder(folder, prediction_files(prediction, beside, command))
