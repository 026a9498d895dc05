"""The table on the terminal: text out of a prediction and what was measured, nothing else."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.prediction import Prediction
from thermex.report.beside import Beside, Column
from thermex.report.caution import CAUTION
from thermex.report.numbers import ABSENT, error_percent, fixed, micro, percent, rounded, significant, temperature
from thermex.report.response import response_lines
from thermex.report.words import heading, limits

Array = NDArray[np.float64]
GAPS = ("  ", " ")


@dataclass(frozen=True, slots=True)
class Field:
    """One column of the table: two lines of heading, the texts, and how readily it is given up."""

    head: str
    unit: str
    cells: tuple[str, ...]
    rank: int = 0
    """0 is always shown; of the others the highest goes first when the line is too long."""

    @property
    def width(self) -> int:
        """Characters that the column needs."""
        return max(len(self.head), len(self.unit), *(len(cell) for cell in self.cells), 1)


def prediction_text(prediction: Prediction, beside: Beside, *, width: int = 100, rows: int = 16) -> str:
    """Return the whole text for the terminal.

    Parameters
    ----------
    prediction
        The result.
    beside
        Measured values at its temperatures.
    width
        Longest line in characters.
    rows
        Most temperatures shown; the files hold all of them.
    """
    chosen = chosen_rows(prediction, beside, rows)
    shown, left_out, gap = fitted(fields(prediction, beside, chosen), width)
    parts = [
        *wrapped(heading(prediction), width),
        "",
        *lines_of(shown, gap),
        *_left_out(prediction, left_out, len(chosen), width),
        "",
        *wrapped(legend(prediction, shown), width),
        *wrapped(conventions(prediction), width),
        *_sources(beside, shown, width),
        "",
        *_section(wrapped(response_lines(prediction, beside.response), width)),
        *wrapped([*beside.doubts, *limits(prediction)], width),
        "",
        *wrapped([CAUTION], width),
    ]
    return "\n".join(parts) + "\n"


def _section(lines: list[str]) -> list[str]:
    """Return lines with an empty one after them, or nothing."""
    return [*lines, ""] if lines else []


def chosen_rows(prediction: Prediction, beside: Beside, most: int) -> list[int]:
    """Return the indices of the temperatures to show, at most ``most`` of them, ends included.

    Among close temperatures that of a room, the last valid one and those with a measured α come first. Of
    the temperatures past the end of the branch one is enough, to show that there is nothing.
    """
    good = np.flatnonzero(np.isfinite(prediction.alpha_linear_per_K))
    size = min(len(prediction.temperature_K), int(good[-1]) + 2) if good.size else len(prediction.temperature_K)
    if size <= most:
        return list(range(size))
    anchors = _anchors(prediction)
    measured = np.isfinite(beside.column("alpha_linear_per_K", len(prediction.temperature_K)).value)
    reach = (size - 1) / (most - 1) / 2.0
    picked = [0]
    for middle in np.linspace(0, size - 1, most)[1:-1]:
        near = [k for k in range(picked[-1] + 1, size - 1) if abs(k - middle) <= reach]
        if near:
            picked.append(min(near, key=lambda k: (k not in anchors, not measured[k], abs(k - middle))))
    for anchor in anchors - {*picked, size - 1}:
        picked[min(range(1, len(picked)), key=lambda k: abs(picked[k] - anchor))] = anchor
    return [*sorted(set(picked)), size - 1]


def _anchors(prediction: Prediction) -> set[int]:
    """Return the temperature nearest to 298.15 K and the last one that has a result."""
    kelvin = prediction.temperature_K
    good = np.flatnonzero(np.isfinite(prediction.alpha_linear_per_K))
    room = int(np.argmin(np.abs(kelvin - 298.15)))
    return {room, int(good[-1])} if good.size else {room}


def fields(prediction: Prediction, beside: Beside, rows: Sequence[int]) -> list[Field]:
    """Return every column that this prediction has, cells for the chosen rows."""
    size = len(prediction.temperature_K)
    alpha = beside.column("alpha_linear_per_K", size)
    gamma = beside.column("gruneisen", size)
    columns = [
        Field("T", "K", _each(rows, prediction.temperature_K, temperature)),
        *_lattice_fields(prediction, rows),
        *_alpha_fields(prediction, rows),
    ]
    if np.isfinite(alpha.value).any():
        columns += [
            Field("α meas.", "10⁻⁶/K", _with_source(rows, alpha, micro)),
            Field("diff.", "%", _each(rows, best_alpha(prediction) / alpha.value - 1.0, percent)),
        ]
    columns.append(Field("γ", "", _each(rows, prediction.gruneisen, lambda v: fixed(v, 3))))
    if np.isfinite(gamma.value).any():
        columns.append(Field("γ meas.", "", _with_source(rows, gamma, lambda v: fixed(v, 2)), rank=1))
    columns += [
        Field("B_T", "GPa", _each(rows, prediction.bulk_modulus_T_GPa, lambda v: significant(v, 4)), rank=2),
        Field("C_P", "J/mol K", _each(rows, prediction.heat_capacity_P_J_per_mol_K, _heat), rank=3),
    ]
    return columns


def _heat(value: float) -> str:
    return fixed(value, 2 if abs(value) < 1000.0 else 1)


def _each(rows: Sequence[int], values: Array, form: object) -> tuple[str, ...]:
    assert callable(form)
    return tuple(str(form(float(values[k]))) for k in rows)


def _with_source(rows: Sequence[int], column: Column, form: object) -> tuple[str, ...]:
    texts = _each(rows, column.value, form)
    numbers = [f" [{column.source[k]}]" if column.source[k] else "" for k in rows]
    room = max((len(number) for number in numbers), default=0)
    return tuple(text + number.ljust(room) for text, number in zip(texts, numbers, strict=True))


def _lattice_fields(prediction: Prediction, rows: Sequence[int]) -> list[Field]:
    return [
        Field(axis, "Å", _each(rows, values, lambda v: fixed(v, 4)), rank=0 if axis == "a" else 5)
        for axis, values in prediction.lattice_A.items()
    ]


def _alpha_fields(prediction: Prediction, rows: Sequence[int]) -> list[Field]:
    found = [Field("α", "10⁻⁶/K", _each(rows, prediction.alpha_linear_per_K, micro))]
    if len(prediction.alpha_axis_per_K) > 1:
        found = [
            Field(f"α_{axis}", "10⁻⁶/K", _each(rows, values, micro))
            for axis, values in prediction.alpha_axis_per_K.items()
        ] + [Field("α avg.", "10⁻⁶/K", found[0].cells)]
    error = np.where(prediction.alpha_linear_per_K == 0.0, np.nan, prediction.alpha_relative_error)
    found.append(Field("±", "%", _each(rows, error, error_percent)))
    if prediction.rule is not None and np.isfinite(prediction.rule.overestimate).any():
        found.append(Field("rule", "%", _each(rows, prediction.rule.overestimate, lambda v: percent(v, 0)), rank=4))
    if prediction.anharmonic is not None:
        corrected = prediction.anharmonic.alpha_linear_per_K
        found.append(Field("α corr.", "10⁻⁶/K", _corrected_cells(prediction, corrected, rows)))
    return found


def _corrected_cells(prediction: Prediction, corrected: Array, rows: Sequence[int]) -> tuple[str, ...]:
    """Corrected α, an asterisk where it is extrapolated."""
    assert prediction.anharmonic is not None
    start = prediction.anharmonic.extrapolated_from_K
    texts = _each(rows, corrected, micro)
    marks = [
        "*" if text != ABSENT and prediction.temperature_K[k] > start else " "
        for text, k in zip(texts, rows, strict=True)
    ]
    return tuple(text + mark for text, mark in zip(texts, marks, strict=True))


def best_alpha(prediction: Prediction) -> Array:
    """Return the corrected α where there is one, else the quasi-harmonic one; shape (nT,), 1/K."""
    plain = prediction.alpha_linear_per_K
    if prediction.anharmonic is None:
        return plain
    corrected = prediction.anharmonic.alpha_linear_per_K
    best: Array = np.where(np.isfinite(corrected), corrected, plain)
    return best


def fitted(columns: Sequence[Field], width: int) -> tuple[list[Field], list[Field], str]:
    """Return the columns that fit on a line, those given up for it, and the gap between columns."""
    shown = list(columns)
    gone: list[Field] = []
    while _length(shown, GAPS[-1]) > width and any(column.rank for column in shown):
        worst = max(shown, key=lambda column: column.rank)
        shown.remove(worst)
        gone.append(worst)
    gap = next((gap for gap in GAPS if _length(shown, gap) <= width), GAPS[-1])
    return shown, gone, gap


def _length(columns: Sequence[Field], gap: str) -> int:
    return sum(column.width for column in columns) + len(gap) * (len(columns) - 1)


def lines_of(columns: Sequence[Field], gap: str = GAPS[0]) -> list[str]:
    """Return the lines of the table: heads, units, a rule, one line a row; all right-aligned."""
    heads = gap.join(column.head.rjust(column.width) for column in columns)
    units = gap.join(column.unit.rjust(column.width) for column in columns)
    body = [
        gap.join(cell.rjust(column.width) for cell, column in zip(row, columns, strict=True))
        for row in zip(*(column.cells for column in columns), strict=True)
    ]
    return [heads.rstrip(), units.rstrip(), "─" * _length(columns, gap), *(line.rstrip() for line in body)]


def _left_out(prediction: Prediction, gone: Sequence[Field], rows: int, width: int) -> list[str]:
    size = len(prediction.temperature_K)
    said = []
    if rows < size:
        said.append(f"{rows} of {size} temperatures")
    if gone:
        said.append("without " + ", ".join(column.head for column in gone))
    return wrapped([f"Shown: {'; '.join(said)}. The files of --out hold all."], width) if said else []


def legend(prediction: Prediction, shown: Sequence[Field]) -> list[str]:
    """Return one sentence for each heading that does not explain itself."""
    heads = {column.head for column in shown}
    said = ["α: instantaneous linear coefficient (1/L)(dL/dT); ±: its numerical error alone, relative."]
    if "α avg." in heads:
        said.append("α avg.: polycrystal average, a third of the volume coefficient.")
    if prediction.rule is not None:
        said.append(_rule_words(prediction, "rule" in heads))
    if "α corr." in heads and prediction.anharmonic is not None:
        said.append(_correction_words(prediction))
    if "diff." in heads:
        which = "α corr. where printed, else α," if "α corr." in heads else "α"
        said.append(f"diff.: {which} over α meas., minus one. [n]: number of the source below.")
    said.append("C_P per mole of formula units.")
    return said


def _rule_words(prediction: Prediction, shown: bool) -> str:
    """Return the rule in one sentence; the page and the files hold all of its words."""
    assert prediction.rule is not None
    if not shown:
        return prediction.rule.words.strip()
    return (
        "rule: how much the quasi-harmonic α is expected to be too high, 0.22 t/(1 − t)^0.8 with t = T_eff/T_end; "
        "fitted to simulations of Lennard-Jones, rock-salt and CsCl-type crystals alone."
    )


def _correction_words(prediction: Prediction) -> str:
    assert prediction.anharmonic is not None
    kind, start = prediction.anharmonic.kind, prediction.anharmonic.starts_K
    words = f"α corr.: with the anharmonic correction ({kind}), from {rounded(start)} K on"
    end = prediction.anharmonic.extrapolated_from_K
    if np.isfinite(end) and end < prediction.temperature_K[-1]:
        words += f"; *: extrapolated (above {rounded(end)} K)"
    return words + "."


def conventions(prediction: Prediction) -> list[str]:
    """Return the other two conventions at a few temperatures, one line each."""
    kelvin = prediction.temperature_K
    good = [k for k in range(len(kelvin)) if np.isfinite(prediction.elongation[k])]
    if len(good) < 2:
        return []
    picked = sorted({good[round(step)] for step in np.linspace(0, len(good) - 1, 5)})
    start = temperature(prediction.reference_temperature_K)
    length = ", ".join(f"{fixed(100 * prediction.elongation[k], 3)} ({temperature(kelvin[k])} K)" for k in picked)
    mean = ", ".join(f"{micro(prediction.alpha_mean_per_K[k])} ({temperature(kelvin[k])} K)" for k in picked)
    return [
        f"Quasi-harmonic ΔL/L₀ from {start} K, %: {length}.",
        f"Quasi-harmonic mean coefficient between {start} K and T, 10⁻⁶/K: {mean}.",
        *_corrected_conventions(prediction, picked),
    ]


def _corrected_conventions(prediction: Prediction, picked: Sequence[int]) -> list[str]:
    """Return ΔL/L₀ with the anharmonic correction, where T₀ and T both have one."""
    found = prediction.anharmonic
    if found is None:
        return []
    kelvin, length = prediction.temperature_K, np.cbrt(found.volume_A3)
    good = np.isfinite(length)
    start = prediction.reference_temperature_K
    if good.sum() < 4 or not kelvin[good][0] <= start <= kelvin[good][-1]:
        return []
    from scipy.interpolate import PchipInterpolator

    origin = float(PchipInterpolator(kelvin[good], length[good])(start))
    said = [f"{fixed(100 * (length[k] / origin - 1.0), 3)} ({temperature(kelvin[k])} K)" for k in picked if good[k]]
    return [f"The same with the anharmonic correction, ΔL/L₀, %: {', '.join(said)}."] if said else []


def _sources(beside: Beside, shown: Sequence[Field], width: int) -> list[str]:
    """Number the sources whose values are in the table."""
    text = " ".join(cell for column in shown for cell in column.cells)
    used = [n for n in range(1, len(beside.sources) + 1) if f"[{n}]" in text]
    if not used:
        return ["", "Measured: nothing to compare with at these temperatures."]
    return ["", "Measured:", *wrapped([f"[{n}] {beside.sources[n - 1]}" for n in used], width)]


def wrapped(sentences: Sequence[str], width: int) -> list[str]:
    """Break each sentence into lines of at most ``width`` characters, continuation indented.

    What a terminal would act on (control characters) becomes a space.
    """
    lines: list[str] = []
    for raw in sentences:
        sentence = "".join(c if c.isprintable() else " " for c in raw)
        lines += textwrap.wrap(sentence, width, subsequent_indent="  ", break_long_words=True) or [""]
    return lines
