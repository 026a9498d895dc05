"""The sampled anharmonic term: the leading order times a smooth function of T, and how it is fitted."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.polynomial import Polynomial
from numpy.typing import NDArray

from thermex.anharmonic.term import AnharmonicTerm
from thermex.constants import BOLTZMANN
from thermex.free_energy import Slice, TermValues

Array = NDArray[np.float64]

#: Where the sampled force stays within this share of the leading order it is fitted as a multiple of
#: it; elsewhere (fluorite-type crystals, Morse metals) a polynomial in T is added to it.
PROPORTIONAL = 0.7

#: Powers of T in either, and in place of them when those leave a misfit above ``MISFIT``.
ORDER, HIGHER_ORDER, MISFIT = 2, 3, 1.5


@dataclass(frozen=True, slots=True)
class SampledTerm:
    """(k_B T)² [F₂(x) R(T) + x c(T) + h(T)] with R(0) = 1 and c(0) = h(0) = 0."""

    leading: AnharmonicTerm
    """F₂ of the infinite crystal."""
    ratio: Polynomial
    """R(T)."""
    tilt: Polynomial
    """c(T), 1/eV."""
    offset: Polynomial
    """h(T), 1/eV; without effect on the expansion."""

    def at(self, temperature: Array) -> Slice:
        """Fix the temperatures (nT,), K; see :class:`thermex.free_energy.Term`."""
        t = temperature
        ratio, tilt, offset = ([p(t), p.deriv(1)(t), p.deriv(2)(t)] for p in (self.ratio, self.tilt, self.offset))

        def evaluate(x: Array) -> TermValues:
            f, f_x, f_xx = self.leading.value(x[:, 0])
            whole = [f * r + x[:, 0] * c + h for r, c, h in zip(ratio, tilt, offset, strict=True)]
            slope = [f_x * r + c for r, c in zip(ratio, tilt, strict=True)]
            squared = BOLTZMANN**2 * t**2
            entropy = -(BOLTZMANN**2) * (2.0 * t * whole[0] + t**2 * whole[1])
            heat = -(BOLTZMANN**2) * t * (2.0 * whole[0] + 4.0 * t * whole[1] + t**2 * whole[2])
            entropy_slope = -(BOLTZMANN**2) * (2.0 * t * slope[0] + t**2 * slope[1])
            curvature = squared * f_xx * ratio[0]
            return TermValues(
                squared * whole[0],
                (squared * slope[0])[:, None],
                curvature[:, None, None],
                entropy,
                entropy_slope[:, None],
                heat,
            )

        return evaluate


@dataclass(frozen=True, slots=True)
class Points:
    """Sampled averages along the branch, per primitive cell, and F₂ of the supercell they came from."""

    temperature: Array
    """Shape (np,), K."""
    x: Array
    """Shape (np,)."""
    force: Array
    """Shape (np,): ∂F_anh/∂x, eV."""
    force_error: Array
    energy: Array
    """Shape (np,): anharmonic part of the mean energy, eV."""
    energy_error: Array
    leading: AnharmonicTerm
    """F₂ of the supercell with the bonds that were sampled."""


@dataclass(frozen=True, slots=True)
class SampledFit:
    """The term and its companions, one for each independent direction of its statistical error."""

    best: SampledTerm
    companions: Sequence[SampledTerm]
    proportional: bool
    """Whether the force was fitted as a multiple of the leading order."""
    misfit: float
    """√(χ²/degrees of freedom) of the force; errors are widened by it where it exceeds 1."""


def fit(points: Points, infinite: AnharmonicTerm) -> SampledFit:
    """Fit sampled forces and energies through a few temperatures.

    The supercell's own leading order is taken out exactly, so that its finite size and the cutoff of
    the sampled residuals leave only their effect on R(T), for which see :func:`_ratio_of_infinite`.
    """
    squared = (BOLTZMANN * points.temperature) ** 2
    value, slope, _ = points.leading.value(points.x)
    scaled, error = points.force / squared, points.force_error / squared
    proportional = bool((np.abs(scaled / slope - 1.0) < PROPORTIONAL).all())
    if proportional:
        change, error = _ratio_of_infinite(scaled / slope, slope, infinite.value(points.x)[1]), error / slope
    else:
        change = scaled - slope
    coefficients, covariance, misfit = _through_zero(points.temperature, change, np.abs(error))
    one, zero = Polynomial([1.0]), Polynomial([0.0])

    def term(coefficients: Array) -> SampledTerm:
        power = Polynomial([0.0, *coefficients])
        ratio, tilt = (one + power, zero) if proportional else (one, power)
        return SampledTerm(infinite, ratio, tilt, zero)

    best = term(coefficients)
    offset = _offset(points, best, value)
    spread, directions = np.linalg.eigh(covariance)
    moved = [
        replace(term(coefficients + np.sqrt(max(s, 0.0)) * d), offset=offset)
        for s, d in zip(spread, directions.T, strict=True)
    ]
    return SampledFit(replace(best, offset=offset), tuple(moved), proportional, misfit)


def _ratio_of_infinite(ratio: Array, slope: Array, limit: Array) -> Array:
    """Return R − 1 of the infinite crystal from R of the supercell, whose F₂′ is ``slope``.

    Between 32 and 108 atoms (argon at 40 and 60 K) and 64 and 216 ions (NaCl at 300 and 600 K) the
    sampled force was seen to change by R² times what the leading order changes by, against R times
    for plain proportion; the difference is a few tenths of a per cent of α.
    """
    return np.asarray(ratio - 1.0 + (slope / limit - 1.0) * (ratio - ratio**2))


def _through_zero(temperature: Array, values: Array, error: Array) -> tuple[Array, Array, float]:
    """Fit Σ_{n ≥ 1} c_n Tⁿ by weighted least squares: coefficients, covariance, √(χ²/dof)."""
    found = _of_order(temperature, values, error, min(ORDER, len(temperature)))
    if found[2] > MISFIT and len(temperature) > HIGHER_ORDER:
        found = _of_order(temperature, values, error, HIGHER_ORDER)
    return found


def _of_order(temperature: Array, values: Array, error: Array, order: int) -> tuple[Array, Array, float]:
    highest = float(temperature.max())
    design = (temperature[:, None] / highest) ** np.arange(1, order + 1)
    weighted = design / error[:, None]
    covariance = np.linalg.inv(weighted.T @ weighted)
    coefficients = covariance @ (weighted.T @ (values / error))
    freedom = len(values) - order
    chi = float(np.sum(((values - design @ coefficients) / error) ** 2))
    misfit = float(np.sqrt(chi / freedom)) if freedom > 0 else 1.0
    unit = highest ** -np.arange(1.0, order + 1.0)
    widened = covariance * max(misfit, 1.0) ** 2
    return coefficients * unit, widened * np.outer(unit, unit), misfit


def _offset(points: Points, best: SampledTerm, value: Array) -> Polynomial:
    """Return h(T) from the sampled energies: E = −(k_B T)² (φ + T ∂φ/∂T) at fixed x."""
    t = points.temperature
    squared = (BOLTZMANN * t) ** 2
    known = value * (best.ratio(t) + t * best.ratio.deriv()(t))
    known += points.x * (best.tilt(t) + t * best.tilt.deriv()(t))
    rest = -points.energy / squared - known
    coefficients, _, _ = _through_zero(t, rest, points.energy_error / squared)
    orders = np.arange(1, len(coefficients) + 1)
    return Polynomial([0.0, *(coefficients / (orders + 1.0))])
