"""What an assessment writes: data, figures and a page."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Sequence
from typing import Any

import numpy as np

from thermex.comparison.assessment import Assessment
from thermex.comparison.budget import Budget
from thermex.report.caution import CAUTION
from thermex.report.document import plain
from thermex.report.record import run_record


def json_bytes(document: Any) -> bytes:
    """Return plain data as JSON text."""
    return (json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False) + "\n").encode()


def assessment_document(a: Assessment) -> dict[str, Any]:
    """Return an assessment as plain data."""
    return {
        "caution": CAUTION,
        "title": a.case.title,
        "tolerance": a.tolerance,
        "verdict": a.verdict,
        "why": a.why,
        "alpha_kind": a.modelled.kind,
        "corrected_from_K": plain(a.modelled.starts_K),
        "tested_to_K": plain(a.modelled.tested_to_K),
        "not_compared": list(a.not_compared),
        "series": [
            {
                "source": d.source,
                "quantity": d.quantity,
                "from_memory": d.series.from_memory,
                "alpha_kind": d.alpha_kind,
                "tolerance": d.tolerance,
                "verdict": d.verdict,
                "why": d.why,
                "mean_relative_deviation": plain(d.mean_relative_deviation),
                "rms_relative_deviation": plain(d.rms_relative_deviation),
                "mean_deviation_in_uncertainties": plain(d.mean_in_uncertainties),
                "worst": {"temperature_K": plain(d.worst_K), "relative_deviation": plain(d.worst_relative)},
                "points_left_out": d.left_out,
                "temperature_K": plain(d.temperature_K),
                "measured": plain(d.measured),
                "uncertainty": plain(d.uncertainty),
                "model": plain(d.model),
            }
            for d in a.deviations
        ],
        "budget": _budget(a.budget),
        "sensitivity": {
            "temperature_K": plain(a.sensitivity_temperatures),
            "parameters": [
                {
                    "parameter": s.parameter,
                    "value": s.value,
                    "dln_alpha_dln_parameter": plain(s.slope),
                    "numerical_error": plain(s.error),
                }
                for s in a.sensitivities
            ],
            "alpha_relative_band_1_sigma": plain(a.band) if a.band is not None else None,
        },
        "trust": a.trust,
        "static_fit": a.static_fit,
    }


def _budget(b: Budget | None) -> dict[str, Any] | None:
    if b is None:
        return None
    return {
        "temperature_K": plain(b.temperature_K),
        "ln_alpha_ratio": plain(b.ln_alpha_ratio),
        "ln_gruneisen_ratio": plain(b.ln_gruneisen_ratio),
        "ln_heat_capacity_ratio": plain(b.ln_heat_capacity_ratio),
        "ln_bulk_modulus_ratio": plain(b.ln_bulk_modulus_ratio),
        "ln_volume_ratio": plain(b.ln_volume_ratio),
        "ln_method_ratio": plain(b.ln_method_ratio),
        "uncertainty": {k: plain(v) for k, v in b.uncertainty.items()},
        "missing": list(b.missing),
        "words": b.words,
    }


def assessment_csv(a: Assessment) -> str:
    """Return one row a measured point."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(
        ["series", "quantity", "temperature_K", "measured", "uncertainty", "model", "relative_deviation", "source"]
    )
    for k, d in enumerate(a.deviations, 1):
        for row in zip(d.temperature_K, d.measured, d.uncertainty, d.model, d.relative, strict=True):
            writer.writerow([k, d.quantity, *["" if not np.isfinite(v) else v for v in row], d.source])
    return out.getvalue()


def assessment_files(a: Assessment, command: Sequence[str]) -> dict[str, bytes]:
    """Return file name → content of everything written for an assessment."""
    from thermex.report.assessment_figures import plot_assessment, plot_budget, plot_sensitivities
    from thermex.report.assessment_page import assessment_page
    from thermex.report.beside import beside_of
    from thermex.report.figures import plot_alpha
    from thermex.report.style import png_bytes, svg_bytes

    record = run_record(a.case, command)
    files = {
        "assessment.json": json_bytes(assessment_document(a)),
        "assessment.csv": assessment_csv(a).encode(),
        "run.json": json_bytes(record),
    }
    prediction = a.modelled.prediction
    figures = {"expansion": plot_alpha(prediction, beside_of(prediction)), "deviation": plot_assessment(a)}
    if a.budget is not None:
        figures["budget"] = plot_budget(a)
    if a.sensitivities:
        figures["sensitivity"] = plot_sensitivities(a)
    for name, axes in figures.items():
        files[f"{name}.png"], files[f"{name}.svg"] = png_bytes(axes), svg_bytes(axes)
    files["report.html"] = assessment_page(a, figures).encode("utf-8", "replace")
    return files
