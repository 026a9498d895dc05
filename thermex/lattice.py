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

from thermex.crystal.crystal import Crystal
from thermex.free_energy import Term
from thermex.phonons import MassWeighting, direct, interpolate, supercell
from thermex.potential.dynamical import direct_force_constants, folded_bonds
from thermex.potential.lattice_sums import bond_table, radial_of
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

    @property
    def static(self) -> Term:
        """The static energy as a term of the free energy."""
        ...

    def motion(self, points: Array) -> Motion:
        """Return the dynamical matrices at wave vectors (nq, 3) as a function of x, by phonopy."""
        ...

    def exact_motion(self, points: Array) -> Motion:
        """The same without interpolation between wave vectors (the check on the supercell)."""
        ...


@dataclass(frozen=True, slots=True)
class Supercells:
    """Primitive cells along each axis in the force constants given to phonopy, by kind of term."""

    short: tuple[int, int, int]
    """Short-ranged terms and charges."""
    dispersion: tuple[int, int, int]
    """r⁻⁶, r⁻⁸ and other inverse powers, which reach further."""


def supercells_for(crystal: Crystal, span: float) -> Supercells:
    """Return supercells whose height is at least ``span`` times the mean distance (V/n)^{1/3}.

    Dispersion terms get one and a half times that.
    """
    spacing = (crystal.volume / crystal.size) ** (1.0 / 3.0)
    heights = 1.0 / np.linalg.norm(np.linalg.inv(crystal.lattice), axis=0)
    short = _even(span * spacing / heights)
    return Supercells(short, _even(1.5 * span * spacing / heights))


def _even(values: Array) -> tuple[int, int, int]:
    counts = np.maximum(2 * np.ceil(np.round(values, 6) / 2.0), 2).astype(int)
    return (int(counts[0]), int(counts[1]), int(counts[2]))


@dataclass(frozen=True, slots=True)
class UniformLattice:
    """A cubic crystal with fixed sites under a pair model."""

    model: PairModel
    energy: ScaledEnergy
    supercells: Supercells

    @property
    def crystal(self) -> Crystal:
        """The crystal at x = 0."""
        return self.energy.crystal

    @property
    def static(self) -> Term:
        """The static energy."""
        return self.energy

    def motion(self, points: Array) -> Motion:
        """Return the dynamical matrices through phonopy; see :class:`Lattice`."""
        origin = self.model.particles(self.crystal)
        scaled = {
            n: interpolate(self.model.power_model(n), origin, self._repeat(n))(points)
            for n in self.model.powers()
        }
        if not self._has_short:
            return self._assembled(scaled, None)
        cell = supercell(origin, self.supercells.short)
        table = bond_table(self.model.short_model(), origin)

        def short(scale: float) -> Complex:
            folded = folded_bonds(radial_of(table, scale), origin.size, self.supercells.short)
            return cell.dynamics(folded)(points)

        return self._assembled(scaled, short)

    def exact_motion(self, points: Array) -> Motion:
        """Return the dynamical matrices by direct and Ewald sums."""
        origin = self.model.particles(self.crystal)
        scaled = {n: direct(self.model.power_model(n), origin)(points) for n in self.model.powers()}
        if not self._has_short:
            return self._assembled(scaled, None)
        table = bond_table(self.model.short_model(), origin)
        wave = 2.0 * np.pi * points @ np.linalg.inv(self.crystal.lattice).T

        def short(scale: float) -> Complex:
            return direct_force_constants(radial_of(table, scale), origin.size, wave / scale)

        return self._assembled(scaled, short)

    @property
    def _has_short(self) -> bool:
        model = self.model.short_model()
        return bool(model.interactions or model.springs)

    def _repeat(self, exponent: float) -> tuple[int, int, int]:
        return self.supercells.short if exponent == 1.0 or exponent > 9.0 else self.supercells.dispersion

    def _assembled(self, scaled: Mapping[float, Complex], short: Callable[[float], Complex] | None) -> Motion:
        """Add the powers, Φₙ(x) = Φₙ(0) e^{−(n+2)x}, to the short-ranged rest summed at each x."""
        weighting = MassWeighting(self.crystal.masses)

        def motion(x: Array) -> Complex:
            scale = float(x[0])
            parts = [np.exp(-(n + 2.0) * scale) * values for n, values in scaled.items()]
            if short is not None:
                parts.append(short(np.exp(scale)))
            return weighting.dynamical(np.asarray(sum(parts)))

        return motion
