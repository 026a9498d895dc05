"""The vibrating lattice of any crystal under a pair model: cells relaxed one by one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import product

import numpy as np
from numpy.typing import NDArray

from thermex.chebyshev import Box
from thermex.crystal.crystal import Crystal
from thermex.free_energy import Slice, Term, temperature_free
from thermex.lattice import Motion, Supercells
from thermex.phonons import MassWeighting, direct, interpolate, supercell
from thermex.potential.model import PairModel
from thermex.relaxation import (
    Configuration,
    Freedom,
    Reduced,
    inner_response,
    moved,
    relax_inner,
    strain_derivatives,
)

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class GeneralLattice:
    """A crystal with free axes or inner coordinates.

    At every strain the inner coordinates follow the static forces (zero static internal stress
    approximation), and the complete force constants go to phonopy.
    """

    model: PairModel
    origin: Configuration
    """The static minimum, x = 0."""
    freedom: Freedom
    supercells: Supercells
    inner_slope: Array
    """Shape (k + s, d), Å: first-order response of the inner variables to a strain."""
    known: dict[bytes, tuple[Configuration, Reduced]] = field(default_factory=dict, compare=False, repr=False)
    """Cells already relaxed, by strain."""

    @property
    def crystal(self) -> Crystal:
        """The crystal at x = 0."""
        return self.origin.crystal

    def relaxed(self, x: Array) -> tuple[Configuration, Reduced]:
        """Return the cell at strain x with inner coordinates relaxed."""
        key = np.round(x, 12).tobytes()
        if key not in self.known:
            start = self.origin.strained(x)
            if self.inner_slope.size:
                start = moved(start, self.freedom, self.inner_slope @ x)
            self.known[key] = relax_inner(self.model, start, self.freedom)
        return self.known[key]

    def static_over(self, box: Box) -> Term:
        """Return U over a box, from its value, slopes and curvatures at the points of the box."""
        rows = [strain_derivatives(self.relaxed(x)[1]) for x in box.grid]
        return fitted_energy(box, rows)

    def fractional_at(self, x: Array) -> Array:
        """Return the fractional positions (n, 3) at strain x, relaxed."""
        return self.relaxed(x)[0].crystal.fractional

    def motion(self, points: Array) -> Motion:
        """Return the dynamical matrices through phonopy, a supercell at every strain."""
        weighting = MassWeighting(self.crystal.masses)

        def motion(x: Array) -> Complex:
            particles = self.relaxed(x)[0].particles(self.model)
            cell = supercell(particles, self.supercells.short)
            return weighting.dynamical(interpolate(self.model, particles, cell)(points))

        return motion

    def exact_motion(self, points: Array) -> Motion:
        """Return the dynamical matrices by direct and Ewald sums."""
        weighting = MassWeighting(self.crystal.masses)

        def motion(x: Array) -> Complex:
            particles = self.relaxed(x)[0].particles(self.model)
            return weighting.dynamical(direct(self.model, particles)(points))

        return motion


def general_lattice(
    model: PairModel, origin: Configuration, point: Reduced, freedom: Freedom, supercells: Supercells
) -> GeneralLattice:
    """Build the lattice of a crystal from its static minimum."""
    return GeneralLattice(model, origin, freedom, supercells, inner_response(point))


@dataclass(frozen=True, slots=True)
class FittedEnergy:
    """A polynomial in the strains, in Chebyshev form over a box."""

    box: Box
    coefficients: Array
    """Shape (1, n1, …, nd)."""

    def at(self, temperature: Array) -> Slice:
        """Return the energy as a term without entropy."""
        repeated = np.repeat(self.coefficients, len(temperature), axis=0)
        return temperature_free(lambda x: self.box.evaluate(repeated, x))


def fitted_energy(box: Box, rows: Sequence[tuple[float, Array, Array | None]]) -> FittedEnergy:
    """Fit a polynomial to values, slopes and (where given) curvatures at the points of a box.

    Its total degree is the highest for which the data leave twice as many equations as unknowns.
    """
    d = len(box.counts)
    curved = rows[0][2] is not None
    degree = _degree(d, len(rows), 1 + d + (d * (d + 1) // 2 if curved else 0))
    wide = Box(box.window, (degree + 1,) * d)
    exponents = [e for e in product(range(degree + 1), repeat=d) if sum(e) <= degree]
    width = 0.5 * (box.window[:, 1] - box.window[:, 0])
    points = box.grid
    columns = []
    for e in exponents:
        one = np.zeros((1, *wide.counts))
        one[(0, *e)] = 1.0
        value, slope, curvature = wide.evaluate(np.repeat(one, len(points), axis=0), points)
        bent = curvature * np.outer(width, width) if curved else None
        columns.append(_stacked(value, slope * width, bent, d))
    value, slope = np.array([row[0] for row in rows]), np.array([row[1] for row in rows])
    bent = np.array([row[2] for row in rows]) * np.outer(width, width) if curved else None
    data = _stacked(value - value.mean(), slope * width, bent, d)
    solution, *_ = np.linalg.lstsq(np.array(columns).T, data, rcond=None)
    coefficients = np.zeros((1, *wide.counts))
    for e, c in zip(exponents, solution, strict=True):
        coefficients[(0, *e)] = c
    coefficients[(0, *([0] * d))] += value.mean()
    return FittedEnergy(wide, coefficients)


def _degree(d: int, points: int, each: int) -> int:
    from math import comb

    equations = points * each
    degree = 2
    while comb(degree + 1 + d, d) * 2 <= equations and degree < 14:
        degree += 1
    return degree


def _stacked(value: Array, slope: Array, curvature: Array | None, d: int) -> Array:
    upper = [] if curvature is None else [curvature[:, a, b] for a in range(d) for b in range(a, d)]
    return np.concatenate([value, *slope.T, *upper])
