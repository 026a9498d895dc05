"""Calibrate: least squares over parameters of a potential, the whole road inside the loop."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from thermex.case.case import Case
from thermex.case.parameters import parameter_value, with_parameter
from thermex.errors import InputError, NoAnswerError
from thermex.exploration.point import Point, evaluate

Array = NDArray[np.float64]
Progress = Callable[[str, int, int], None]

#: Quantities that a datum may be of.
QUANTITIES = (
    "alpha_linear_per_K",
    "alpha_mean_per_K",
    "elongation",
    "lattice_A",
    "bulk_modulus_T_GPa",
    "heat_capacity_P_J_per_mol_K",
)

#: Above this condition number of the scaled normal matrix parameters are not separately determined.
ILL_CONDITIONED = 1e6

#: Weighted residual of a datum at which a trial potential has no answer.
NO_ANSWER = 1e3


@dataclass(frozen=True, slots=True)
class Datum:
    """One measured value to fit."""

    quantity: str
    """One of ``QUANTITIES``."""
    temperature_K: float
    value: float
    uncertainty: float
    """Standard deviation, in the unit of the value."""
    axis: str = "a"
    reference_temperature_K: float = 293.15
    """T₀ of ΔL/L₀ and of a mean coefficient."""
    source: str = ""


@dataclass(frozen=True, slots=True)
class Calibration:
    """The fit and how far it can be trusted."""

    case: Case
    """With the fitted values put in."""
    parameters: tuple[str, ...]
    start: Array
    values: Array
    standard_deviations: Array
    covariance: Array
    correlation: Array
    data: tuple[Datum, ...]
    before: Array
    """Model values at the start, one a datum (NaN where there was no answer)."""
    after: Array
    """Model values of the fit."""
    reduced_chi_squared: float
    predictions: int
    converged: bool
    warnings: tuple[str, ...]
    at_bound: tuple[bool, ...]
    """Whether each parameter stopped at an end of its range; its standard deviation then means nothing."""
    kind: str
    """Which answer was fitted: "quasi-harmonic" or "leading order"."""
    held_out: tuple[Datum, ...] = ()
    """Measured values of other quantities, not fitted."""
    held_out_before: Array = field(default_factory=lambda: np.zeros(0))
    held_out_after: Array = field(default_factory=lambda: np.zeros(0))

    @property
    def residuals(self) -> Array:
        """(model − measured)/uncertainty of each datum."""
        measured = np.array([d.value for d in self.data])
        return np.asarray((self.after - measured) / np.array([d.uncertainty for d in self.data]))


def _silent(stage: str, done: int, total: int) -> None:
    """Report nothing."""


def model_value(point: Point, datum: Datum) -> float:
    """Return what a point predicts for a datum, in the datum's own convention."""
    if datum.quantity in {"elongation", "alpha_mean_per_K"}:
        length = point.at("log_length", datum.temperature_K, datum.axis)
        start = point.at("log_length", datum.reference_temperature_K, datum.axis)
        stretch = float(np.expm1(length - start))
        return (
            stretch
            if datum.quantity == "elongation"
            else stretch / (datum.temperature_K - datum.reference_temperature_K)
        )
    return point.at(datum.quantity, datum.temperature_K, datum.axis)


def calibrate(
    case: Case,
    parameters: Sequence[str],
    data: Sequence[Datum],
    *,
    bounds: Mapping[str, tuple[float, float]] | None = None,
    held_out: Sequence[Datum] = (),
    accuracy: float = 2e-3,
    executor: Executor | None = None,
    progress: Progress = _silent,
) -> Calibration:
    """Fit parameters of the potential to measured values (scipy.optimize.least_squares).

    Parameters
    ----------
    parameters
        Names such as "Mg-O.rho".
    bounds
        Lower and upper bound by name; by default 0.7 to 1.4 times the start.
    held_out
        Measured values that are not fitted, but shown before and after: what the fit does elsewhere.
    accuracy
        Numerical accuracy of α in the loop.
    executor
        Runs the blocks of a sampled anharmonicity; predictions follow one another.

    Raises
    ------
    InputError
        No data, fewer data than parameters, or an unknown quantity or parameter.
    NoAnswerError
        The potential of the case itself has no answer at the temperatures of the data.
    """
    from scipy.optimize import least_squares

    _refuse(parameters, data)
    start = np.array([parameter_value(case, name) for name in parameters])
    scale = np.where(start != 0.0, np.abs(start), 1.0)
    limits = np.array([(bounds or {}).get(n, _around(v)) for n, v in zip(parameters, start, strict=True)])
    base = replace(
        case,
        conditions=replace(case.conditions, temperatures=_temperatures((*data, *held_out))),
        accuracy=replace(case.accuracy, alpha=accuracy),
    )
    measured = np.array([d.value for d in data])
    sigma = np.array([d.uncertainty for d in data])
    seen: dict[bytes, Point] = {}

    def point_at(z: Array) -> Point:
        key = np.round(z, 12).tobytes()
        if key not in seen:
            trial = base
            for name, value in zip(parameters, z * scale, strict=True):
                trial = with_parameter(trial, name, float(value))
            seen[key] = evaluate(trial, executor)
            progress("predictions", len(seen), 20 * (len(parameters) + 1))
        return seen[key]

    def values_at(z: Array) -> Array:
        point = point_at(z)
        return np.array([model_value(point, d) for d in data])

    def residual(z: Array) -> Array:
        raw = (values_at(z) - measured) / sigma
        return np.where(np.isfinite(raw), raw, NO_ANSWER)

    before = values_at(start / scale)
    if not np.isfinite(before).any():
        raise NoAnswerError("the potential of the case has no answer at the temperatures of the data", where="data")
    fit = least_squares(
        residual,
        start / scale,
        bounds=(limits[:, 0] / scale, limits[:, 1] / scale),
        diff_step=2e-3,
        x_scale=1.0,
        xtol=1e-6,
        ftol=1e-6,
        max_nfev=25,
    )
    result = _result(case, parameters, data, start, scale, limits, fit, before, values_at(fit.x), len(seen))
    first, last = point_at(start / scale), point_at(fit.x)
    return replace(
        result,
        kind=last.kind,
        held_out=tuple(held_out),
        held_out_before=np.array([model_value(first, d) for d in held_out]),
        held_out_after=np.array([model_value(last, d) for d in held_out]),
    )


def _around(value: float) -> tuple[float, float]:
    low, high = sorted((0.7 * value, 1.4 * value))
    return (low, high) if high > low else (-1.0, 1.0)


def _refuse(parameters: Sequence[str], data: Sequence[Datum]) -> None:
    if not data or len(data) < len(parameters):
        raise InputError(
            f"{len(data)} data for {len(parameters)} parameters", where="calibrate", fix="give at least as many data"
        )
    for datum in data:
        if datum.quantity not in QUANTITIES:
            raise InputError(
                f'"{datum.quantity}" cannot be fitted', where="data", fix=f"one of {', '.join(QUANTITIES)}"
            )
        if not datum.uncertainty > 0.0:
            raise InputError(f"a datum at {datum.temperature_K:g} K has no uncertainty", where="data", fix="give one")


def _temperatures(data: Sequence[Datum]) -> tuple[float, ...]:
    needed = {d.temperature_K for d in data}
    needed |= {d.reference_temperature_K for d in data if d.quantity in {"elongation", "alpha_mean_per_K"}}
    return tuple(sorted(needed))


def _result(
    case: Case,
    parameters: Sequence[str],
    data: Sequence[Datum],
    start: Array,
    scale: Array,
    limits: Array,
    fit: object,
    before: Array,
    after: Array,
    predictions: int,
) -> Calibration:
    jacobian, z = fit.jac, fit.x  # type: ignore[attr-defined]
    values = z * scale
    normal = jacobian.T @ jacobian
    covariance = np.linalg.pinv(normal, rcond=1e-12) * np.outer(scale, scale)
    freedom = max(len(data) - len(parameters), 1)
    chi = float(2.0 * fit.cost / freedom)  # type: ignore[attr-defined]
    covariance = covariance * max(chi, 1.0)
    deviation = np.sqrt(np.maximum(np.diag(covariance), 0.0))
    correlation = covariance / np.maximum(np.outer(deviation, deviation), 1e-300)
    fitted = case
    for name, value in zip(parameters, values, strict=True):
        fitted = with_parameter(fitted, name, float(value))
    return Calibration(
        case=replace(fitted, title=f"{case.title}, calibrated"),
        parameters=tuple(parameters),
        start=start,
        values=values,
        standard_deviations=deviation,
        covariance=covariance,
        correlation=correlation,
        data=tuple(data),
        before=before,
        after=after,
        reduced_chi_squared=chi,
        predictions=predictions,
        converged=bool(fit.success),  # type: ignore[attr-defined]
        warnings=_warnings(parameters, values, limits, normal, correlation, chi),
        at_bound=tuple(_at_bound(v, low, high) for v, (low, high) in zip(values, limits, strict=True)),
        kind="quasi-harmonic",
    )


#: Above this reduced χ² the potential does not describe the data, however its parameters are chosen.
POOR = 4.0


def _at_bound(value: float, low: float, high: float) -> bool:
    return bool(min(abs(value - low), abs(value - high)) < 1e-4 * (high - low))


def _warnings(
    parameters: Sequence[str], values: Array, limits: Array, normal: Array, correlation: Array, chi: float
) -> tuple[str, ...]:
    out = []
    if chi > POOR:
        out.append(
            f"The fit is poor: reduced χ² {chi:.3g}. Within these ranges the potential does not describe the data, "
            "and the standard deviations are stretched by the root of it."
        )
    root = np.sqrt(np.maximum(np.diag(normal), 1e-300))
    if np.linalg.cond(normal / np.outer(root, root)) > ILL_CONDITIONED:
        out.append("The data do not determine the parameters separately: fix one, or add data of another kind.")
    for i in range(len(parameters)):
        for j in range(i):
            if abs(correlation[i, j]) > 0.98:
                out.append(f"{parameters[j]} and {parameters[i]} are correlated by {correlation[i, j]:+.3f}.")
    for name, value, (low, high) in zip(parameters, values, limits, strict=True):
        if _at_bound(value, low, high):
            out.append(f"{name} = {value:.5g} lies at the edge of its range ({low:.5g} to {high:.5g}).")
    return tuple(out)
