"""The leading-order anharmonic term of the free energy, (k_B T)² F₂(x)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.chebyshev import Box
from thermex.constants import BOLTZMANN
from thermex.free_energy import Slice, TermValues

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class AnharmonicTerm:
    """(k_B T)² F₂(x) of a crystal with one free strain, F₂ interpolated in x; classical."""

    box: Box
    """One axis: ln(lattice parameter / static one)."""
    coefficients: Array
    """Shape (n,): Chebyshev coefficients of F₂, 1/eV per primitive cell."""

    def value(self, x: Array) -> tuple[Array, Array, Array]:
        """Return F₂ and its first two derivatives at x (nx,), shape (nx,) each, 1/eV."""
        rows = np.broadcast_to(self.coefficients, (len(x), len(self.coefficients)))
        value, slope, curvature = self.box.evaluate(rows, np.asarray(x, dtype=float)[:, None])
        return value, slope[:, 0], curvature[:, 0, 0]

    def at(self, temperature: Array) -> Slice:
        """Fix the temperatures (nT,), K; see :class:`thermex.free_energy.Term`."""
        squared = (BOLTZMANN * temperature) ** 2
        linear = -2.0 * BOLTZMANN**2 * temperature

        def evaluate(x: Array) -> TermValues:
            f, f_x, f_xx = self.value(x[:, 0])
            return TermValues(
                squared * f,
                (squared * f_x)[:, None],
                (squared * f_xx)[:, None, None],
                linear * f,
                (linear * f_x)[:, None],
                linear * f,
            )

        return evaluate


def term_through(box: Box, values: Array) -> AnharmonicTerm:
    """Interpolate values of F₂ (n,) at the points of a box with one axis."""
    return AnharmonicTerm(box, box.coefficients(np.asarray(values)[None, :])[0])
