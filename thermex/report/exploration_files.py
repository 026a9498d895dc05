"""What sweeps, matches and calibrations write: data with units in the names, figures, a case."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Sequence
from typing import Any

import numpy as np

from thermex.case.parameters import parameter_value
from thermex.case.writer import case_to_toml
from thermex.exploration.calibrate import Calibration
from thermex.exploration.closed_forms import born_lande_modulus, gruneisen_forms, pressure_derivative
from thermex.exploration.match import Match
from thermex.exploration.sweep import Sweep
from thermex.report.caution import CAUTION
from thermex.report.document import plain
from thermex.report.record import run_record


def _json(document: dict[str, Any]) -> bytes:
    return (json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False) + "\n").encode()


def guides(result: Sweep) -> list[dict[str, float] | None] | None:
    """Return the closed forms beside a sweep of the exponent of a Born crystal of charged ions, else None."""
    case = result.case
    born = [p for p in case.potential.pairs if p.form == "Born"]
    charges = [abs(q) for q in case.potential.charges.values() if q]
    if len(born) != 1 or len(case.potential.pairs) != 1 or not charges or not result.parameters[0].endswith(".n"):
        return None
    rows: list[dict[str, float] | None] = []
    for value, point in zip(result.values, result.points, strict=True):
        row = {"bulk_modulus_derivative": pressure_derivative(value[0], 1.0), **gruneisen_forms(value[0], 1.0)}
        if case.crystal.prototype == "rock salt" and point.static_distance_A:
            row["Born–Landé static bulk modulus, GPa"] = born_lande_modulus(
                value[0], charges[0], point.static_distance_A
            )
        rows.append(row)
    return rows


def sweep_document(result: Sweep) -> dict[str, Any]:
    """Return a sweep as plain data, one row a value."""
    single = len(result.parameters) == 1
    points = result.points
    grid = next((p.temperature_K for p in points), ())
    return {
        "caution": CAUTION,
        "parameter": result.parameters[0] if single else list(result.parameters),
        "values": [v[0] for v in result.values] if single else [list(v) for v in result.values],
        "hold": result.hold,
        "temperature_K": list(grid),
        "alpha_linear_per_K": [list(p.alpha_linear_per_K) for p in points],
        "alpha_relative_error": [list(p.alpha_relative_error) for p in points],
        "alpha_kind": [p.kind for p in points],
        "gruneisen": [list(p.gruneisen) for p in points],
        "bulk_modulus_T_GPa": [list(p.bulk_modulus_T_GPa) for p in points],
        "lattice_A": [{k: list(v) for k, v in p.lattice_A.items()} for p in points],
        "static_distance_A": [p.static_distance_A for p in points],
        "static_bulk_modulus_GPa": [p.static_bulk_modulus_GPa for p in points],
        "valid_to_K": [p.valid_to_K for p in points],
        "reason": [p.reason for p in points],
        "answered": [p.answered for p in points],
        "closed_forms": guides(result),
    }


def sweep_files(
    result: Sweep, kelvin: float, measured: tuple[float, float] | None, command: Sequence[str]
) -> dict[str, bytes]:
    """Return file name → content of everything written for a sweep."""
    from thermex.report.exploration_figures import plot_sweep_curves, plot_sweep_cut, plot_sweep_map
    from thermex.report.style import png_bytes, svg_bytes

    curves = plot_sweep_curves(result)
    cut = plot_sweep_cut(result, kelvin, measured) if len(result.parameters) == 1 else plot_sweep_map(result, kelvin)
    return {
        "sweep.json": _json(sweep_document(result)),
        "sweep.csv": sweep_csv(result).encode(),
        "sweep-curves.png": png_bytes(curves),
        "sweep-curves.svg": svg_bytes(curves),
        "sweep-at-one-temperature.png": png_bytes(cut),
        "sweep-at-one-temperature.svg": svg_bytes(cut),
        "run.json": _json(run_record(result.case, command)),
    }


def sweep_csv(result: Sweep) -> str:
    """Return one row a value and temperature."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    heads = ["temperature_K", "alpha_linear_per_K", "alpha_relative_error", "gruneisen", "bulk_modulus_T_GPa"]
    writer.writerow([*result.parameters, *heads, "a_A", "valid_to_K", "reason"])
    for value, p in zip(result.values, result.points, strict=True):
        a = p.lattice_A.get("a", (None,) * len(p.temperature_K))
        for k, kelvin in enumerate(p.temperature_K):
            row = [p.alpha_linear_per_K[k], p.alpha_relative_error[k], p.gruneisen[k], p.bulk_modulus_T_GPa[k], a[k]]
            writer.writerow([*value, kelvin, *["" if v is None else v for v in row], p.valid_to_K or "", p.reason])
    return out.getvalue()


def sweep_text(result: Sweep, kelvin: float, measured: tuple[float, float] | None) -> str:
    """Return a sweep as a table for the terminal."""
    forms = guides(result)
    names = "  ".join(f"{n:>12}" for n in result.parameters)
    lines = [result.case.title, f"{names}   α({kelvin:g} K)     ±       γ     B_T       a    ends"]
    lines.append(" " * 12 + " 10⁻⁶/K       %             GPa       Å       K")
    for k, (value, p) in enumerate(zip(result.values, result.points, strict=True)):
        head = "  ".join(f"{v:12.6g}" for v in value)
        if not p.answered:
            lines.append(f"{head}   no answer: {p.reason}")
            continue
        cells = (
            _cell(1e6 * p.at("alpha_linear_per_K", kelvin), "9.3f"),
            _cell(100 * p.at("alpha_relative_error", kelvin), "7.2g"),
            _cell(p.at("gruneisen", kelvin), "7.3f"),
            _cell(p.at("bulk_modulus_T_GPa", kelvin), "7.1f"),
            _cell(p.at("lattice_A", kelvin), "8.4f"),
            _cell(p.valid_to_K or np.nan, "7.0f"),
        )
        lines.append(f"{head}   {' '.join(cells)}")
        row = forms[k] if forms else None
        if row:
            guide = ", ".join(f"{name} {number:.3g}" for name, number in row.items())
            lines.append(" " * 15 + f"guides: {guide}")
    if measured is not None:
        lines.append(f"Measured α at {kelvin:g} K: {1e6 * measured[0]:.2f} ± {1e6 * measured[1]:.2f} ·10⁻⁶/K")
    lines.extend(["", CAUTION])
    return "\n".join(lines) + "\n"


def _cell(value: float, shape: str) -> str:
    width = int(shape.split(".", maxsplit=1)[0])
    return f"{value:{shape}}" if np.isfinite(value) else "–".rjust(width)


def match_files(result: Match, command: Sequence[str]) -> dict[str, bytes]:
    """Return file name → content of everything written for a match."""
    document = {
        "caution": CAUTION,
        "parameter": result.parameter,
        "quantity": result.quantity,
        "temperature_K": result.temperature_K,
        "target": result.target,
        "target_uncertainty": result.target_uncertainty,
        "value": result.value,
        "interval": [result.low, result.high],
        "nearest": {"value": result.nearest_value, "quantity": result.nearest_quantity},
        "looked_at": [list(row) for row in result.looked_at],
        "words": result.words,
        "start": None,
    }
    files = {"match.json": _json(document), "run.json": _json(run_record(result.case, command))}
    if result.value is not None:
        files["matched-case.toml"] = case_to_toml(result.case).encode()
    return files


def calibration_document(result: Calibration) -> dict[str, Any]:
    """Return a calibration as plain data."""
    return {
        "caution": CAUTION,
        "parameters": list(result.parameters),
        "start": plain(result.start),
        "values": plain(result.values),
        "standard_deviations": plain(result.standard_deviations),
        "covariance": plain(result.covariance),
        "correlation": plain(result.correlation),
        "reduced_chi_squared": result.reduced_chi_squared,
        "converged": result.converged,
        "predictions": result.predictions,
        "warnings": list(result.warnings),
        "residuals": [
            {
                "quantity": d.quantity,
                "temperature_K": d.temperature_K,
                "measured": d.value,
                "uncertainty": d.uncertainty,
                "before": plain(result.before[k]),
                "after": plain(result.after[k]),
                "residual_in_uncertainties": plain(result.residuals[k]),
                "source": d.source,
            }
            for k, d in enumerate(result.data)
        ],
    }


def calibration_files(result: Calibration, command: Sequence[str]) -> dict[str, bytes]:
    """Return file name → content of everything written for a calibration."""
    return {
        "calibration.json": _json(calibration_document(result)),
        "calibrated-case.toml": case_to_toml(result.case).encode(),
        "run.json": _json(run_record(result.case, command)),
    }


def calibration_text(result: Calibration) -> str:
    """Return a calibration for the terminal: values, what got better and what got worse."""
    lines = [result.case.title, "", f"{'parameter':<24} {'start':>12} {'fitted':>12} {'± 1 s.d.':>10}"]
    for k, name in enumerate(result.parameters):
        deviation = result.standard_deviations[k]
        lines.append(f"{name:<24} {result.start[k]:12.6g} {parameter_value(result.case, name):12.6g} {deviation:10.2g}")
    lines.append(
        f"Reduced χ² {result.reduced_chi_squared:.3g} from {len(result.data)} data, {result.predictions} predictions."
    )
    lines.extend(["", f"{'quantity':<28} {'data':>5} {'rms before':>11} {'rms after':>10}"])
    measured = np.array([d.value for d in result.data])
    for quantity in dict.fromkeys(d.quantity for d in result.data):
        mine = np.array([d.quantity == quantity for d in result.data])
        before = _rms(result.before[mine] / measured[mine] - 1.0)
        after = _rms(result.after[mine] / measured[mine] - 1.0)
        word = "better" if after < before else "worse"
        lines.append(f"{quantity:<28} {mine.sum():5d} {100 * before:10.3g}% {100 * after:9.3g}%  {word}")
    lines.extend(f"Note: {w}" for w in result.warnings)
    lines.extend(["", CAUTION])
    return "\n".join(lines) + "\n"


def _rms(values: Any) -> float:
    good = values[np.isfinite(values)]
    return float(np.sqrt(np.mean(good**2))) if len(good) else float("nan")
