"""Sensitivity of α to every parameter of the potential, and the band that a covariance gives."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from thermex.case.case import Case
from thermex.case.parameters import parameter_names, parameter_value, with_parameter
from thermex.exploration.point import evaluate

Array = NDArray[np.float64]
Progress = Callable[[str, int, int], None]

#: Relative steps of the two central differences; their disagreement is the stated error.
STEPS = (2e-3, 4e-3)


@dataclass(frozen=True, slots=True)
class Sensitivity:
    """∂ ln α/∂ ln p of one parameter at chosen temperatures."""

    parameter: str
    value: float
    slope: Array
    """Shape (nT,)."""
    error: Array
    """Numerical error of the slope, from two step sizes."""


def _silent(stage: str, done: int, total: int) -> None:
    """Report nothing."""


def sensitivities(case: Case, temperatures: Array, *, progress: Progress = _silent) -> tuple[Sensitivity, ...]:
    """Perturb every parameter and run the whole road again; sorted by size.

    Parameters
    ----------
    temperatures
        Shape (nT,), K.
    """
    base = replace(
        case,
        conditions=replace(case.conditions, temperatures=tuple(map(float, temperatures))),
        accuracy=replace(case.accuracy, anharmonic="none", alpha=1e-3),
    )
    names = [n for n in parameter_names(base) if parameter_value(base, n) != 0.0]
    out = []
    for k, name in enumerate(names):
        value = parameter_value(base, name)
        slopes = []
        for step in STEPS:
            logs = []
            for sign in (1.0, -1.0):
                point = evaluate(with_parameter(base, name, value * (1.0 + sign * step)))
                alpha = np.array([np.nan if v is None else v for v in point.alpha_linear_per_K], dtype=float)
                with np.errstate(divide="ignore", invalid="ignore"):
                    logs.append(np.log(alpha))
            slopes.append((logs[0] - logs[1]) / (np.log1p(step) - np.log1p(-step)))
        progress("sensitivities", k + 1, len(names))
        best = slopes[0] + (slopes[0] - slopes[1]) / 3.0
        out.append(Sensitivity(name, value, best, np.abs(slopes[0] - slopes[1]) / 3.0 + 1e-3))
    return tuple(sorted(out, key=lambda s: -float(np.nanmax(np.abs(s.slope), initial=0.0))))


def band(case: Case, found: tuple[Sensitivity, ...]) -> Array | None:
    """Return the relative 1σ band of α (nT,) that the case's covariance implies (linear), or None."""
    if case.potential.covariance is None:
        return None
    names, matrix = case.potential.covariance
    by_name = {s.parameter: s for s in found}
    if not all(n in by_name for n in names):
        return None
    gradient = np.array([by_name[n].slope / by_name[n].value for n in names])
    return np.asarray(np.sqrt(np.maximum(np.einsum("it,ij,jt->t", gradient, np.array(matrix), gradient), 0.0)))
