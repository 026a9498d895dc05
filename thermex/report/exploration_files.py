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
from thermex.exploration.calibrate import Calibration, Datum
from thermex.exploration.closed_forms import born_lande_modulus, gruneisen_forms, pressure_derivative
from thermex.exploration.match import Match
from thermex.exploration.measured_data import Target
from thermex.exploration.sweep import Sweep
from thermex.report.caution import CAUTION
from thermex.report.document import plain
from thermex.report.record import run_record
from thermex.report.table import wrapped


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
        "valid_to_reason": [p.valid_to_reason for p in points],
        "corrected_from_K": [p.starts_K for p in points],
        "tested_to_K": [p.tested_to_K for p in points],
        "answered": [p.answered for p in points],
        "closed_forms": guides(result),
    }


def sweep_files(result: Sweep, kelvin: float, measured: Target | None, command: Sequence[str]) -> dict[str, bytes]:
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
    tail = ["lattice_a_A", "alpha_kind", "extrapolated", "valid_to_K", "valid_to_reason"]
    writer.writerow([*result.parameters, *heads, *tail])
    for value, p in zip(result.values, result.points, strict=True):
        a = p.lattice_A.get("a", (None,) * len(p.temperature_K))
        for k, kelvin in enumerate(p.temperature_K):
            row = [p.alpha_linear_per_K[k], p.alpha_relative_error[k], p.gruneisen[k], p.bulk_modulus_T_GPa[k], a[k]]
            corrected = p.starts_K is not None and kelvin >= p.starts_K
            state = [p.kind if corrected or not p.answered else "quasi-harmonic", p.extrapolated(kelvin)]
            blank = ["" if v is None else v for v in row]
            writer.writerow([*value, kelvin, *blank, *state, p.valid_to_K or "", p.valid_to_reason])
    return out.getvalue()


def sweep_text(result: Sweep, kelvin: float, measured: Target | None) -> str:
    """Return a sweep as a table for the terminal, the closed forms in a second one."""
    names = "  ".join(f"{n:>12}" for n in result.parameters)
    lines = [result.case.title, f"{names}   α({kelvin:g} K)     ±       γ     B_T       a    ends"]
    lines.append(" " * 12 + " 10⁻⁶/K       %             GPa       Å       K")
    for value, p in zip(result.values, result.points, strict=True):
        head = "  ".join(f"{v:12.6g}" for v in value)
        if not p.answered:
            lines.append(f"{head}   no answer: {p.valid_to_reason}")
            continue
        cells = (
            _cell(1e6 * p.at("alpha_linear_per_K", kelvin), "8.3f") + ("*" if p.extrapolated(kelvin) else " "),
            _cell(100 * p.at("alpha_relative_error", kelvin), "7.2g"),
            _cell(p.at("gruneisen", kelvin), "7.3f"),
            _cell(p.at("bulk_modulus_T_GPa", kelvin), "7.1f"),
            _cell(p.at("lattice_A", kelvin), "8.4f"),
            _cell(p.valid_to_K or np.nan, "7.0f"),
        )
        lines.append(f"{head}   {' '.join(cells)}")
    lines += ["", *wrapped(sweep_words(result, kelvin, measured), 100), *_guide_table(result)]
    lines.extend(["", *wrapped([CAUTION], 100)])
    return "\n".join(lines) + "\n"


def sweep_words(result: Sweep, kelvin: float, measured: Target | None) -> list[str]:
    """Return what the table holds, and the measured value beside it."""
    answered = [p for p in result.points if p.answered]
    kinds = sorted({p.kind if p.starts_K is None or kelvin >= p.starts_K else "quasi-harmonic" for p in answered})
    said = [f"α: {' or '.join(kinds)}; ±: its numerical error alone."] if kinds else []
    if any(p.extrapolated(kelvin) for p in answered):
        said.append(
            "*: beyond the range in which the method was tested (T_eff/T_end above 0.5): the correction runs away as "
            "the branch end comes near, and no trend should be read from these values."
        )
    if measured is not None:
        said.append(f"Measured at {kelvin:g} K: {measured.words()}.")
    return said


def _guide_table(result: Sweep) -> list[str]:
    """Return the closed forms as a table of their own."""
    forms = guides(result)
    if not forms or not any(forms):
        return []
    names = list(next(row for row in forms if row))
    heads = {"bulk_modulus_derivative": "B₀′", "Born–Landé static bulk modulus, GPa": "B₀ / GPa (Born–Landé)"}
    shown = [heads.get(n, f"γ {n}") for n in names]
    widths = [max(len(text), 8) for text in shown]
    lines = ["", "Closed forms for the same exponent (static lattice):"]
    lines.append(f"{result.parameters[0]:>12}  " + "  ".join(t.rjust(w) for t, w in zip(shown, widths, strict=True)))
    for value, row in zip(result.values, forms, strict=True):
        if row:
            cells = [_cell(row[n], f"{w}.3f") for n, w in zip(names, widths, strict=True)]
            lines.append(f"{value[0]:12.6g}  " + "  ".join(cells))
    return lines


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
        "alpha_kind": result.kind,
        "extrapolated": result.extrapolated,
        "source": result.source,
        "words": result.words,
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
        "at_bound": list(result.at_bound),
        "alpha_kind": result.kind,
        "held_out": [
            {
                "quantity": d.quantity,
                "temperature_K": d.temperature_K,
                "measured": d.value,
                "before": plain(result.held_out_before[k]),
                "after": plain(result.held_out_after[k]),
                "source": d.source,
            }
            for k, d in enumerate(result.held_out)
        ],
    }


def calibration_files(result: Calibration, command: Sequence[str]) -> dict[str, bytes]:
    """Return file name → content of everything written for a calibration."""
    return {
        "calibration.json": _json(calibration_document(result)),
        "calibrated-case.toml": case_to_toml(result.case).encode(),
        "run.json": _json(run_record(result.case, command)),
    }


#: How fitted quantities are written.
SYMBOLS = {
    "alpha_linear_per_K": "α",
    "alpha_mean_per_K": "mean α",
    "elongation": "ΔL/L₀",
    "lattice_A": "a",
    "bulk_modulus_T_GPa": "B_T",
    "heat_capacity_P_J_per_mol_K": "C_P",
}


def calibration_text(result: Calibration) -> str:
    """Return a calibration for the terminal: values, what got better and what got worse, fitted or not."""
    lines = [result.case.title, "", f"{'parameter':<24} {'start':>12} {'fitted':>12}  {'± 1 s.d.'}"]
    for k, name in enumerate(result.parameters):
        deviation = "at its bound" if result.at_bound[k] else f"{result.standard_deviations[k]:.2g}"
        lines.append(f"{name:<24} {result.start[k]:12.6g} {parameter_value(result.case, name):12.6g}  {deviation}")
    lines.append(
        f"Reduced χ² {result.reduced_chi_squared:.3g} from {len(result.data)} data, {result.predictions} evaluations; "
        f"α: {result.kind}."
    )
    lines += ["", f"{'':<20} {'data':>5} {'rms before':>11} {'rms after':>10}"]
    lines += _before_and_after(result.data, result.before, result.after, "fitted")
    lines += _before_and_after(result.held_out, result.held_out_before, result.held_out_after, "not fitted")
    lines += ["", *wrapped([f"Note: {w}" for w in (*result.warnings, *_damage(result))], 100)]
    lines.extend(["", *wrapped([CAUTION], 100)])
    return "\n".join(lines) + "\n"


def _before_and_after(data: Sequence[Datum], before: Any, after: Any, state: str) -> list[str]:
    """Return one line a quantity: the rms deviation from its data before and after the fit."""
    measured, lines = np.array([d.value for d in data]), []
    for quantity in dict.fromkeys(d.quantity for d in data):
        mine = np.array([d.quantity == quantity for d in data])
        first, last = _rms(before[mine] / measured[mine] - 1.0), _rms(after[mine] / measured[mine] - 1.0)
        word = "better" if last < first else "worse"
        name = f"{SYMBOLS[quantity]}, {state}"
        lines.append(f"{name:<20} {mine.sum():5d} {100 * first:10.3g}% {100 * last:9.3g}%  {word}")
    return lines


#: A quantity left out of the fit that ends further off than this (relative) deserves a warning.
DAMAGED = {"lattice_A": 0.01}


def _damage(result: Calibration) -> list[str]:
    """Warn of quantities that were not fitted and that the fit drove away."""
    said = []
    for quantity in dict.fromkeys(d.quantity for d in result.held_out):
        rows = [k for k, d in enumerate(result.held_out) if d.quantity == quantity]
        measured = np.array([result.held_out[k].value for k in rows])
        first = _rms(result.held_out_before[rows] / measured - 1.0)
        last = _rms(result.held_out_after[rows] / measured - 1.0)
        if last > max(DAMAGED.get(quantity, 0.1), 1.2 * first):
            said.append(
                f"{SYMBOLS[quantity]} was not fitted and is now {last:.1%} off ({first:.1%} before): "
                "put it among --data."
            )
    return said


def _rms(values: Any) -> float:
    good = values[np.isfinite(values)]
    return float(np.sqrt(np.mean(good**2))) if len(good) else float("nan")
