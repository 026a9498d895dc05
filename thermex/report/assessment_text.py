"""An assessment in words and tables for the terminal."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from thermex.comparison.assessment import Assessment
from thermex.comparison.budget import Budget
from thermex.comparison.deviation import UNDECIDED, Deviation
from thermex.report.caution import CAUTION
from thermex.report.numbers import ABSENT, fixed
from thermex.report.table import wrapped


def assessment_text(a: Assessment, *, width: int = 100) -> str:
    """Return an assessment for the terminal, lines of at most ``width`` characters where words allow."""
    lines = [*wrapped([a.case.title, verdict_line(a), kind_line(a)], width), ""]
    lines += [f"{'mean':>7} {'rms':>6} {'worst':>7} {'at':>5} {'points':>6}  verdict"]
    lines += [f"{'%':>7} {'%':>6} {'%':>7} {'K':>5}"]
    for d in a.deviations:
        lines += wrapped([series_row(d)], width) if len(series_row(d)) > width else [series_row(d)]
    lines += ["", *wrapped(undecided_lines(a), width)]
    if a.not_compared:
        lines += wrapped([f"Not compared, for the prediction has no such number: {', '.join(a.not_compared)}."], width)
    if a.budget is not None:
        lines += ["", "Expansion budget, ln of model/measured (α = γ + C_V − B_T − V):", *budget_rows(a.budget)]
        lines += wrapped([a.budget.words], width)
    lines += sensitivity_rows(a)
    lines += ["", *wrapped([f"Trust. {a.trust}", *([a.static_fit] if a.static_fit else [])], width)]
    lines += ["", "Measured:", *wrapped(source_lines(a), width), "", *wrapped([CAUTION], width)]
    return "\n".join(lines) + "\n"


def verdict_line(a: Assessment) -> str:
    """Return the verdict with what it rests on."""
    if a.verdict == UNDECIDED:
        return f"Verdict: undecided; {a.why}."
    return f"Verdict: {a.verdict} measured expansion within {a.tolerance:.0%}: {a.why}."


def kind_line(a: Assessment) -> str:
    """Return which α is compared."""
    if a.modelled.kind == "quasi-harmonic":
        return "Compared: the quasi-harmonic answer."
    kind = a.modelled.kind.replace(" ", "-")
    said = f"Compared: the {kind} answer from {a.modelled.starts_K:.0f} K on, the quasi-harmonic one below"
    limit = a.modelled.tested_to_K
    return said + (f"; extrapolated above {limit:.0f} K." if np.isfinite(limit) else ".")


#: How quantities are written in a narrow table.
SHORT = {
    "linear expansion coefficient": "α",
    "volume expansion coefficient": "α_V",
    "elongation": "ΔL/L₀",
    "lattice parameter, axis ": "lattice parameter ",
    "isothermal bulk modulus": "B_T",
    "adiabatic bulk modulus": "B_S",
    "heat capacity at constant pressure": "C_P",
    "Grüneisen parameter": "γ",
}


def short(quantity: str) -> str:
    """Return the label of a series with the symbol in place of the long name."""
    for long, symbol in SHORT.items():
        if quantity.startswith(long):
            return symbol + quantity[len(long) :]
    return quantity


def per_cent(value: float, signed: bool = True) -> str:
    """Return a deviation in per cent: one decimal, two below one per cent."""
    if not np.isfinite(value):
        return ABSENT
    text = fixed(100.0 * value, 2 if abs(value) < 0.01 else 1)
    return f"+{text}" if signed and float(text) > 0.0 else text


def series_row(d: Deviation) -> str:
    """Return one series as a line: mean, rms and worst deviation, verdict, quantity and source number."""
    kelvin = fixed(d.worst_K, 0) if np.isfinite(d.worst_K) else ABSENT
    return (
        f"{per_cent(d.mean_relative_deviation):>7} {per_cent(d.rms_relative_deviation, False):>6} "
        f"{per_cent(d.worst_relative):>7} {kelvin:>5} {len(d.temperature_K):>6}  {d.verdict:<18}  "
        f"{short(d.quantity)} [{d.series.source_number}]"
    )


def undecided_lines(a: Assessment) -> list[str]:
    """Return why series are undecided, each reason once, and how deviations are judged."""
    reasons: dict[str, list[str]] = {}
    for d in a.deviations:
        if d.verdict == UNDECIDED:
            reasons.setdefault(d.why, []).append(f"{short(d.quantity)} [{d.series.source_number}]")
    said = [f"Undecided: {'; '.join(dict.fromkeys(names))}: {why}." for why, names in reasons.items()]
    left = [
        f"{d.left_out} of {d.left_out + len(d.temperature_K)} of {short(d.quantity)} [{d.series.source_number}]"
        for d in a.deviations
        if d.left_out and len(d.temperature_K)
    ]
    if left:
        said.append(f"Left out, for the prediction has no value at their temperatures: {'; '.join(left)}.")
    judged = f"A series is reproduced when its rms deviation is within {a.tolerance:.0%}"
    if any(d.series.quantity == "lattice parameter" for d in a.deviations):
        judged += f" (lattice parameters {a.tolerance / 20.0:.1%})"
    return [*said, judged + "; the whole by the rms over all points of the decided expansion series."]


def budget_rows(b: Budget) -> list[str]:
    """Return the budget as a table, one line a temperature."""
    lines = [f"{'T':>6} {'α':>7} {'γ':>7} {'C_V':>7} {'B_T':>7} {'V':>7} {'method':>8}"]
    for k, kelvin in enumerate(b.temperature_K):
        parts = (b.ln_gruneisen_ratio, b.ln_heat_capacity_ratio, b.ln_bulk_modulus_ratio, b.ln_volume_ratio)
        row = " ".join(f"{fixed(float(part[k]), 3):>7}" for part in (b.ln_alpha_ratio, *parts))
        lines.append(f"{kelvin:6.0f} {row} {fixed(float(b.ln_method_ratio[k]), 3):>8}")
    return lines


def sensitivity_rows(a: Assessment) -> list[str]:
    """Return the sensitivities as a table, and the band that a covariance implies."""
    lines: list[str] = []
    if a.sensitivities:
        heads = " ".join(f"{t:>9.0f} K" for t in a.sensitivity_temperatures)
        lines += ["", f"{'∂ ln α/∂ ln p':<26}{heads}"]
        for s in a.sensitivities:
            lines.append(f"{s.parameter:<26}" + " ".join(f"{v:11.2f}" for v in s.slope))
    if a.band is not None:
        lines.append("1σ of α from the covariance: " + ", ".join(f"{v:.1%}" for v in a.band))
    return lines


def source_lines(a: Assessment) -> Sequence[str]:
    """Return the sources, numbered as in the table."""
    found = {d.series.source_number: d.source for d in a.deviations}
    return [f"[{number}] {found[number]}" for number in sorted(found)]
