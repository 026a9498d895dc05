"""The vibrating lattice: what a force source gives the rest of the road, at any strain.

A :class:`Lattice` answers two questions about a crystal strained by x: its static energy (a term of
the free energy) and its dynamical matrices. :class:`UniformLattice` answers them for cubic crystals
with fixed sites, where every inverse power of the energy and of the force constants is a pure power
of the scale, so that its lattice sum is done once.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from thermex.chebyshev import Box
from thermex.crystal.crystal import Crystal
from thermex.free_energy import Term
from thermex.mesh import first_zone
from thermex.phonons import Dynamics, MassWeighting, Supercell, direct, interpolate, supercell
from thermex.potential.dynamical import direct_force_constants, folded_bonds
from thermex.potential.lattice_sums import BondTable, bond_table, radial_of
from thermex.potential.model import PairModel
from thermex.static import ScaledEnergy

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

#: Gives the dynamical matrices (nq, 3n, 3n) at a strain x (d,), for a list of q fixed beforehand.
Motion = Callable[[Array], Complex]


class Lattice(Protocol):
    """A crystal with a force source."""

    @property
    def crystal(self) -> Crystal:
        """The crystal at x = 0, the static minimum."""
        ...

    def static_over(self, box: Box) -> Term:
        """The static energy as a term of the free energy, good over a box of strains."""
        ...

    def fractional_at(self, x: Array) -> Array:
        """Return the fractional positions (n, 3) at strain x."""
        ...

    def motion(self, points: Array) -> Motion:
        """Return the dynamical matrices at wave vectors (nq, 3) as a function of x, by phonopy."""
        ...

    def exact_motion(self, points: Array) -> Motion:
        """The same without interpolation between wave vectors (the check on the supercell)."""
        ...


class BoxLattice(Lattice, Protocol):
    """A lattice whose static energy is known over boxes of strains, with supercells of its own."""

    @property
    def supercells(self) -> Supercells:
        """The supercells in use."""
        ...


#: Largest number of atoms in a supercell.
MOST = 2000


@dataclass(frozen=True, slots=True)
class Supercells:
    """Primitive cells along each axis in the force constants given to phonopy, by kind of term."""

    short: tuple[int, int, int]
    """Short-ranged terms and charges."""
    dispersion: tuple[int, int, int]
    """r⁻⁶, r⁻⁸ and other inverse powers, which reach further."""


def supercells_for(crystal: Crystal, span: float) -> Supercells:
    """Return supercells whose height is at least ``span`` times the mean distance (V/n)^{1/3}.

    Dispersion terms get one and a half times that. No supercell holds more than ``MOST`` centres.
    """
    spacing = (crystal.volume / crystal.size) ** (1.0 / 3.0)
    heights = 1.0 / np.linalg.norm(np.linalg.inv(crystal.lattice), axis=0)
    short = _counts(span * spacing / heights, crystal.size)
    return Supercells(short, _counts(1.5 * span * spacing / heights, crystal.size))


def _counts(values: Array, size: int) -> tuple[int, int, int]:
    """Round up to whole counts, then shrink the largest until the supercell is small enough."""
    counts = np.maximum(np.ceil(np.round(values, 6)), 2).astype(int)
    while np.prod(counts) * size > MOST and counts.max() > 2:
        counts[counts == counts.max()] -= 1
    return (int(counts[0]), int(counts[1]), int(counts[2]))


@dataclass(frozen=True, slots=True)
class UniformLattice:
    """A cubic crystal with fixed sites under a pair model (build it with :func:`uniform_lattice`)."""

    model: PairModel
    energy: ScaledEnergy
    supercells: Supercells
    scaled: Mapping[float, Dynamics]
    """Exponent → Φₙ(q) of that inverse power at x = 0, through phonopy."""
    cell: Supercell
    """Supercell of the short-ranged rest."""
    table: BondTable
    """Bonds of the short-ranged rest at x = 0."""

    @property
    def crystal(self) -> Crystal:
        """The crystal at x = 0."""
        return self.energy.crystal

    def static_over(self, box: Box) -> Term:
        """The static energy, exact everywhere."""
        del box
        return self.energy

    def fractional_at(self, x: Array) -> Array:
        """Return the fractional positions, fixed by symmetry."""
        del x
        return self.crystal.fractional

    def motion(self, points: Array) -> Motion:
        """Return the dynamical matrices through phonopy; see :class:`Lattice`."""
        scaled = {n: dynamics(points) for n, dynamics in self.scaled.items()}
        size, repeat = len(self.cell.shift), self.supercells.short
        inside = first_zone(self.crystal.lattice, points)

        def short(scale: float) -> Complex:
            return self.cell.dynamics(folded_bonds(radial_of(self.table, scale), size, repeat))(inside)

        return self._assembled(scaled, short)

    def exact_motion(self, points: Array) -> Motion:
        """Return the dynamical matrices by direct and Ewald sums."""
        origin = self.model.particles(self.crystal)
        scaled = {n: direct(self.model.power_model(n), origin)(points) for n in self.model.powers()}
        wave = 2.0 * np.pi * points @ np.linalg.inv(self.crystal.lattice).T

        def short(scale: float) -> Complex:
            return direct_force_constants(radial_of(self.table, scale), origin.size, wave / scale)

        return self._assembled(scaled, short)

    def _assembled(self, scaled: Mapping[float, Complex], short: Callable[[float], Complex]) -> Motion:
        """Add the powers, Φₙ(x) = Φₙ(0) e^{−(n+2)x}, to the short-ranged rest summed at each x."""
        weighting = MassWeighting(self.crystal.masses)
        has_short = len(self.table.bonds.first) > 0 or len(self.table.own.energy) > 0

        def motion(x: Array) -> Complex:
            scale = float(x[0])
            parts = [np.exp(-(n + 2.0) * scale) * values for n, values in scaled.items()]
            if has_short or not parts:
                parts.append(short(np.exp(scale)))
            return weighting.dynamical(np.asarray(sum(parts)))

        return motion


def uniform_lattice(model: PairModel, energy: ScaledEnergy, supercells: Supercells) -> UniformLattice:
    """Do every lattice sum that serves all volumes, once, at the crystal of ``energy``."""
    origin = model.particles(energy.crystal)
    repeats = {n: supercells.short if n == 1.0 or n > 9.0 else supercells.dispersion for n in model.powers()}
    cells = {r: supercell(origin, r) for r in {supercells.short, *repeats.values()}}
    scaled = {n: interpolate(model.power_model(n), origin, cells[r]) for n, r in repeats.items()}
    table = bond_table(model.short_model(), origin)
    return UniformLattice(model, energy, supercells, scaled, cells[supercells.short], table)
