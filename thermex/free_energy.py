"""The Helmholtz energy F(x, T) over strain and temperature, a sum of terms.

x[k] = ln(lattice parameter k / its static value). Every term gives value, slopes and curvatures in x
and the entropy with its slopes, so that the equilibrium and α need no finite difference.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from thermex import oscillators
from thermex.chebyshev import Box, without_highest

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class TermValues:
    """A term of F at one strain a temperature; per primitive cell."""

    energy: Array
    """Shape (nT,), eV."""
    slope: Array
    """Shape (nT, d): ∂F/∂x."""
    curvature: Array
    """Shape (nT, d, d): ∂²F/∂x∂x."""
    entropy: Array
    """Shape (nT,), eV/K."""
    entropy_slope: Array
    """Shape (nT, d): ∂S/∂x."""
    heat: Array
    """Shape (nT,): T ∂S/∂T at constant x, eV/K."""

    def __add__(self, other: TermValues) -> TermValues:
        """Add two terms."""
        return TermValues(
            self.energy + other.energy,
            self.slope + other.slope,
            self.curvature + other.curvature,
            self.entropy + other.entropy,
            self.entropy_slope + other.entropy_slope,
            self.heat + other.heat,
        )


#: Gives the term at strains x (nT, d), one a temperature.
Slice = Callable[[Array], TermValues]


class Term(Protocol):
    """A term of F(x, T)."""

    def at(self, temperature: Array) -> Slice:
        """Fix the temperatures (nT,), K, and return the term as a function of x (nT, d)."""
        ...


@dataclass(frozen=True, slots=True)
class FreeEnergy:
    """A sum of terms."""

    terms: tuple[Term, ...]

    def at(self, temperature: Array) -> Slice:
        """Fix the temperatures and return the sum as a function of x."""
        slices = [term.at(temperature) for term in self.terms]

        def evaluate(x: Array) -> TermValues:
            total = slices[0](x)
            for one in slices[1:]:
                total = total + one(x)
            return total

        return evaluate

    def plus(self, *terms: Term) -> FreeEnergy:
        """Return the free energy with further terms."""
        return FreeEnergy((*self.terms, *terms))


@dataclass(frozen=True, slots=True)
class Vibrations:
    """Harmonic phonons at the points of a box of strains, interpolated by Chebyshev polynomials."""

    box: Box
    frequencies: Array
    """Shape (points, nq, modes), THz, positive."""
    weights: Array
    """Shape (nq,), sum 1."""
    truncated: bool = False
    """True for the variant without the highest coefficients, from which the error is estimated."""
    known: dict[bytes, oscillators.OscillatorSums] = field(default_factory=dict, compare=False, repr=False)
    """Sums over modes already done, by temperatures; the variants of one set of frequencies share them."""

    def at(self, temperature: Array) -> Slice:
        """Fix the temperatures; see :class:`Term`."""
        key = temperature.tobytes()
        if key not in self.known:
            self.known[key] = oscillators.sums(self.frequencies, self.weights, temperature)
        totals = self.known[key]
        energy, entropy, heat = (self._coefficients(part) for part in (totals.energy, totals.entropy, totals.heat))

        def evaluate(x: Array) -> TermValues:
            f, f_x, f_xx = self.box.evaluate(energy, x)
            s, s_x, _ = self.box.evaluate(entropy, x)
            c, _, _ = self.box.evaluate(heat, x)
            return TermValues(f, f_x, f_xx, s, s_x, c)

        return evaluate

    def _coefficients(self, values: Array) -> Array:
        coefficients = self.box.coefficients(values)
        return without_highest(coefficients) if self.truncated else coefficients


def temperature_free(
    energy: Callable[[Array], tuple[Array, Array, Array]],
) -> Callable[[Array], TermValues]:
    """Turn a function x → (U, ∂U, ∂²U) into a slice without entropy."""

    def evaluate(x: Array) -> TermValues:
        value, slope, curvature = energy(x)
        zero = np.zeros(len(x))
        return TermValues(value, slope, curvature, zero, np.zeros_like(slope), zero)

    return evaluate
