"""Match: the value of one parameter at which a predicted quantity equals a measured one."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from thermex.case.case import Case
from thermex.case.parameters import parameter_value, with_parameter
from thermex.errors import InputError
from thermex.exploration.point import Point, evaluate
from thermex.exploration.sweep import _held

Progress = Callable[[str, int, int], None]

#: What can be matched: its symbol, the factor to the unit shown, the unit, decimals.
QUANTITIES = {
    "alpha_linear_per_K": ("α", 1e6, "·10⁻⁶/K", 2),
    "lattice_A": ("a", 1.0, " Å", 4),
    "bulk_modulus_T_GPa": ("B_T", 1.0, " GPa", 1),
}

#: Points of the first look over the range.
LOOKS = 9


@dataclass(frozen=True, slots=True)
class Match:
    """The value found, or why there is none."""

    case: Case
    """With the value found (or nearest) put in."""
    parameter: str
    quantity: str
    temperature_K: float
    target: float
    target_uncertainty: float
    value: float | None
    """None when no value in the range meets the target."""
    low: float | None
    """Value at which the quantity is one uncertainty to one side; None when not within the range."""
    high: float | None
    nearest_value: float
    nearest_quantity: float
    looked_at: tuple[tuple[float, float], ...]
    """(parameter, quantity) of every point with an answer."""
    words: str
    kind: str
    """Which answer was matched: "quasi-harmonic", "leading order" or "sampled"."""
    extrapolated: bool
    """Whether the temperature lies past the range in which that method was tested."""
    source: str = ""
    """Where the target comes from."""


def shown(quantity: str, value: float) -> str:
    """Return a value with its symbol's unit and sensible digits."""
    _, factor, unit, decimals = QUANTITIES[quantity]
    return f"{value * factor:.{decimals}f}{unit}"


def rounded_to(value: float, low: float | None, high: float | None) -> str:
    """Return a value with the digits that its interval allows: two of half its width."""
    half = 0.5 * abs(high - low) if low is not None and high is not None else 0.0
    if half <= 0.0:
        return f"{value:.5g}"
    return f"{value:.{max(1 - int(np.floor(np.log10(half))), 0)}f}"


def _silent(stage: str, done: int, total: int) -> None:
    """Report nothing."""


def match(
    case: Case,
    parameter: str,
    *,
    quantity: str,
    temperature_K: float,
    target: float,
    uncertainty: float = 0.0,
    low: float | None = None,
    high: float | None = None,
    hold: str = "parameters",
    source: str = "",
    executor: Executor | None = None,
    progress: Progress = _silent,
) -> Match:
    """Find the value of one parameter at which a quantity at one temperature equals a measured one.

    Parameters
    ----------
    quantity
        "alpha_linear_per_K", "lattice_A" (axis a) or "bulk_modulus_T_GPa".
    low, high
        Range searched; by default 0.8 to 1.25 times the present value.
    executor
        Runs the blocks of a sampled anharmonicity; predictions follow one another.

    Raises
    ------
    InputError
        An unknown quantity or parameter, or an empty range.
    """
    if quantity not in QUANTITIES:
        raise InputError(f'"{quantity}" cannot be matched', where="quantity", fix=f"one of {', '.join(QUANTITIES)}")
    now = parameter_value(case, parameter)
    start, stop = sorted((0.8 * now if low is None else low, 1.25 * now if high is None else high))
    if not stop > start:
        raise InputError(f"the range {start:g} to {stop:g} is empty", where="match")
    base = _held(case, parameter) if hold == "distance" else case
    asked = tuple(sorted({0.0, 0.5 * temperature_K, temperature_K}))
    base = replace(base, conditions=replace(base.conditions, temperatures=asked))
    seen: dict[float, float] = {}
    points: dict[float, Point] = {}

    def found(value: float) -> float:
        if value not in seen:
            points[value] = evaluate(with_parameter(base, parameter, value), executor)
            seen[value] = points[value].at(quantity, temperature_K)
        return seen[value]

    values = np.linspace(start, stop, LOOKS)
    for k, value in enumerate(values):
        found(float(value))
        progress("look over the range", k + 1, LOOKS)
    at = _root(found, values, target)
    ends = [_root(found, values, target + s * uncertainty) for s in (-1.0, 1.0)] if uncertainty > 0.0 else [at, at]
    edges = sorted(e for e in ends if e is not None)
    answered = [(v, q) for v, q in sorted(seen.items()) if np.isfinite(q)]
    if not answered:
        raise InputError(
            f"no value of {parameter} from {start:g} to {stop:g} has an answer at {temperature_K:g} K",
            where="match",
            fix="look elsewhere, or at a lower temperature",
        )
    nearest = min(answered, key=lambda row: abs(row[1] - target))
    best = at if at is not None else nearest[0]
    low_end, high_end = (edges[0], edges[1]) if at is not None and len(edges) == 2 else (None, None)
    point = points[min(points, key=lambda v: abs(v - best))]
    return Match(
        case=with_parameter(replace(base, conditions=case.conditions), parameter, best),
        parameter=parameter,
        quantity=quantity,
        temperature_K=temperature_K,
        target=target,
        target_uncertainty=uncertainty,
        value=at,
        low=low_end,
        high=high_end,
        nearest_value=nearest[0],
        nearest_quantity=nearest[1],
        looked_at=tuple(answered),
        words=_words(parameter, quantity, temperature_K, target, at, nearest, (start, stop), (low_end, high_end)),
        kind=point.kind,
        extrapolated=point.extrapolated(temperature_K),
        source=source,
    )


def _root(found: Callable[[float], float], values: np.ndarray, target: float) -> float | None:
    """Return the root nearest to the middle of the range, or None."""
    from scipy.optimize import brentq

    rows = [(float(v), found(float(v)) - target) for v in values]
    good = [(v, d) for v, d in rows if np.isfinite(d)]
    brackets = [(a[0], b[0]) for a, b in pairwise(good) if a[1] * b[1] <= 0.0]
    if not brackets:
        return None
    middle = 0.5 * (values[0] + values[-1])
    a, b = min(brackets, key=lambda pair: abs(0.5 * (pair[0] + pair[1]) - middle))
    return float(brentq(lambda v: found(float(v)) - target, a, b, rtol=1e-5, xtol=1e-6 * abs(b)))


def _words(
    parameter: str,
    quantity: str,
    kelvin: float,
    target: float,
    value: float | None,
    nearest: tuple[float, float],
    span: tuple[float, float],
    interval: tuple[float | None, float | None],
) -> str:
    symbol = QUANTITIES[quantity][0]
    if value is not None:
        number = rounded_to(value, *interval)
        return f"{parameter} = {number} gives {symbol} = {shown(quantity, target)} at {kelvin:g} K."
    return (
        f"No {parameter} from {span[0]:g} to {span[1]:g} gives {symbol} = {shown(quantity, target)} at {kelvin:g} K; "
        f"nearest is {shown(quantity, nearest[1])} at {nearest[0]:.5g}."
    )
