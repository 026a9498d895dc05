"""What an assessment shows and writes: text, data, figures and a page."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Sequence
from typing import Any

import numpy as np

from thermex.comparison.assessment import Assessment, Ranked
from thermex.comparison.budget import Budget
from thermex.report.caution import CAUTION
from thermex.report.document import plain
from thermex.report.record import run_record


def _json(document: Any) -> bytes:
    return (json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False) + "\n").encode()


def assessment_document(a: Assessment) -> dict[str, Any]:
    """Return an assessment as plain data."""
    return {
        "caution": CAUTION,
        "title": a.case.title,
        "tolerance": a.tolerance,
        "verdict": a.verdict,
        "alpha_kind": a.modelled.kind,
        "series": [
            {
                "source": d.source,
                "quantity": d.quantity,
                "from_memory": d.series.from_memory,
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


def assessment_text(a: Assessment) -> str:
    """Return an assessment for the terminal."""
    lines = [a.case.title, f"Verdict: {a.verdict} measured expansion within {a.tolerance:.0%} (rms).", ""]
    lines.append(f"{'mean':>7} {'rms':>7} {'worst':>7} {'at K':>6}  verdict             series")
    for d in a.deviations:
        cells = [_share(d.mean_relative_deviation), _share(d.rms_relative_deviation), _share(d.worst_relative)]
        kelvin = f"{d.worst_K:6.0f}" if np.isfinite(d.worst_K) else "     –"
        lines.append(f"{cells[0]} {cells[1]} {cells[2]} {kelvin}  {d.verdict:<19} {d.quantity}: {d.source}"[:160])
        if d.verdict == "undecided":
            lines.append(" " * 33 + d.why[:120])
    if a.budget is not None:
        lines.extend(["", "Expansion budget, ln of model/measured (α = γ + C_V − B_T − V):"])
        lines.append("     T      α      γ    C_V    B_T      V   method")
        b = a.budget
        for k, kelvin in enumerate(b.temperature_K):
            row = (
                b.ln_alpha_ratio[k],
                b.ln_gruneisen_ratio[k],
                b.ln_heat_capacity_ratio[k],
                b.ln_bulk_modulus_ratio[k],
                b.ln_volume_ratio[k],
                b.ln_method_ratio[k],
            )
            lines.append(f"{kelvin:6.0f} " + " ".join(f"{v:6.3f}" if np.isfinite(v) else "     –" for v in row))
        lines.append(b.words)
    if a.sensitivities:
        heads = " ".join(f"{t:>9.0f} K" for t in a.sensitivity_temperatures)
        lines.extend(["", f"{'∂ ln α/∂ ln p':<26}{heads}"])
        for s in a.sensitivities:
            lines.append(f"{s.parameter:<26}" + " ".join(f"{v:11.2f}" for v in s.slope))
    if a.band is not None:
        lines.append("1σ of α from the covariance: " + ", ".join(f"{v:.1%}" for v in a.band))
    lines.extend(["", f"Trust. {a.trust}"])
    if a.static_fit:
        lines.append(a.static_fit)
    lines.extend(["", CAUTION])
    return "\n".join(lines) + "\n"


def _share(value: float) -> str:
    return f"{100 * value:+6.1f}%" if np.isfinite(value) else "      –"


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
        "assessment.json": _json(assessment_document(a)),
        "assessment.csv": assessment_csv(a).encode(),
        "run.json": _json(record),
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


def ranking_text(ranked: Sequence[Ranked]) -> str:
    """Return several cases as a table, best first."""
    lines = ["Rms deviation from the same measurements over the same temperatures, best first:", ""]
    lines.append(f"{'rms':>7} {'ends K':>8}  potential")
    for r in ranked:
        rms = f"{100 * r.rms:6.1f}%" if np.isfinite(r.rms) else "      –"
        end = f"{r.end_K:8.0f}" if np.isfinite(r.end_K) else "       –"
        lines.append(f"{rms} {end}  {r.title}: {r.reason}"[:170])
        if r.source:
            lines.append(" " * 18 + r.source[:150])
    lines.extend(["", CAUTION])
    return "\n".join(lines) + "\n"


def ranking_files(ranked: Sequence[Ranked], command: Sequence[str]) -> dict[str, bytes]:
    """Return file name → content of everything written for a ranking."""
    from thermex.report.assessment_figures import plot_ranking
    from thermex.report.style import png_bytes, svg_bytes

    axes = plot_ranking(ranked)
    document = {
        "caution": CAUTION,
        "command": list(command),
        "ranking": [
            {
                "title": r.title,
                "source": r.source,
                "rms_relative_deviation": plain(r.rms),
                "reason": r.reason,
                "valid_to_K": plain(r.end_K),
                "assessment": assessment_document(r.assessment) if r.assessment else None,
            }
            for r in ranked
        ],
    }
    return {"ranking.json": _json(document), "ranking.png": png_bytes(axes), "ranking.svg": svg_bytes(axes)}
