"""How the crystal at rest answers to fields: Born charges, dielectric constants and optic modes as text."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from thermex.prediction import Prediction, ZoneCentre
from thermex.report.numbers import fixed

Array = NDArray[np.float64]

#: Modes closer than this (THz) are shown as one with its multiplicity.
SAME = 5e-3

#: Most different frequencies that are listed one by one.
MOST = 8

#: Diagonal elements closer than this are shown once.
EQUAL = 5e-4


def response_rows(prediction: Prediction, measured: Sequence[str] = ()) -> list[tuple[str, str]]:
    """Return (quantity, values with units) of the crystal at rest, then what was measured; nothing without charges."""
    centre = prediction.zone_centre
    if centre is None:
        return []
    return [
        ("Born effective charge Z*", f"{_charges(prediction, centre)} e"),
        ("dielectric constant ε∞, electronic", _diagonal(centre.dielectric_high, 3)),
        ("dielectric constant ε₀, static", _diagonal(centre.dielectric_static, 3)),
        ("optic modes at Γ without field (TO)", f"{_modes(centre.transverse_THz)} THz"),
        ("optic modes for q → 0 along z (LO and TO)", f"{_modes(centre.longitudinal_THz)} THz"),
        *(("measured", said) for said in measured),
    ]


def response_lines(prediction: Prediction, measured: Sequence[str] = ()) -> list[str]:
    """Return the same in short for the terminal."""
    centre = prediction.zone_centre
    if centre is None:
        return []
    return [
        f"Response at rest: Z* {_charges(prediction, centre)} e; ε∞ {_diagonal(centre.dielectric_high, 3)}; "
        f"ε₀ {_diagonal(centre.dielectric_static, 3)}.",
        f"Optic modes at Γ: TO {_modes(centre.transverse_THz)} THz; with the field of q → 0 along z "
        f"{_modes(centre.longitudinal_THz)} THz.",
        *([f"Measured: {'; '.join(measured)}."] if measured else []),
    ]


def _charges(prediction: Prediction, centre: ZoneCentre) -> str:
    """Return the mean diagonal of Z* over the atoms of each element."""
    symbols = np.array(prediction.crystal.symbols)
    said = []
    for symbol in dict.fromkeys(prediction.crystal.symbols):
        mean = centre.born_charges[symbols == symbol].mean(axis=0)
        said.append(f"{symbol} {_diagonal(mean, 3, '+')}")
    return ", ".join(said)


def _diagonal(tensor: Array, digits: int, sign: str = "") -> str:
    """Return the diagonal of a tensor, once where all three are equal."""
    values = np.diag(tensor)
    texts = [f"{value:{sign}.{digits}f}" for value in values]
    if np.ptp(values) < EQUAL * max(1.0, float(np.abs(values).max())):
        return texts[0]
    return "(" + ", ".join(texts) + ")"


def _modes(frequencies: Array) -> str:
    """Return the optic frequencies, equal ones once with "×" and their number."""
    optic = np.sort(frequencies)
    optic = np.delete(optic, np.argsort(np.abs(optic), kind="stable")[:3])
    groups: list[list[float]] = []
    for value in optic:
        if groups and value - groups[-1][-1] < SAME:
            groups[-1].append(float(value))
        else:
            groups.append([float(value)])
    if not groups:
        return "none"
    if len(groups) > MOST:
        return f"{fixed(optic[0], 2)} to {fixed(optic[-1], 2)} ({len(optic)} modes)"
    return ", ".join(fixed(g[0], 2) + (f" ×{len(g)}" if len(g) > 1 else "") for g in groups)
