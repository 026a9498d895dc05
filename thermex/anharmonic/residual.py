"""The anharmonic part of the energy of a small supercell: the full pair energy less its harmonic part.

Everything is written in displacements w at the static scale: positions at ln(scale) = x are
e^x (R + w). The harmonic part is exact elsewhere (all tails summed); what is summed here falls off
faster and ends at a cutoff fixed in units of the lattice parameter, complete shells of neighbours.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_matrix

from thermex.anharmonic.vertices import BareBonds, radial_factors
from thermex.potential.bonds import Bonds
from thermex.potential.terms import Exponential, InversePower, Term

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Residual:
    """Pair residuals of a supercell at one scale, for many walkers at once."""

    size: int
    """Atoms."""
    first: Ints
    """Shape (np,)."""
    second: Ints
    """Shape (np,)."""
    vector: Array
    """Shape (3, np, 1), Å: bond vectors at the static scale."""
    squared: Array
    """Shape (np, 1): their lengths squared."""
    groups: tuple[tuple[slice, tuple[Term, ...]], ...]
    """(pairs, terms) for each pair of kinds."""
    incidence: csr_matrix
    """Shape (atoms, np): +1 at the second atom of a pair, −1 at the first."""
    scale: float
    """e^x."""
    taylor: Array
    """Shape (3, np, 1): φ, e^{2x} g₁, e^{4x} g₂ of the undisplaced bonds."""
    taylor_slope: Array
    """Shape (3, np, 1): their derivatives to x."""

    def parts(self, w: Array) -> tuple[Array, Array, Array, Array, Array]:
        """Return for displacements w (3, atoms, walkers): Δ, d·Δ, Δ², φ and φ′/r (np, walkers) each."""
        moved = w.take(self.second, axis=1)
        moved -= w.take(self.first, axis=1)
        along = self.vector[0] * moved[0]
        along += self.vector[1] * moved[1]
        along += self.vector[2] * moved[2]
        square = moved[0] ** 2
        square += moved[1] ** 2
        square += moved[2] ** 2
        r2 = 2.0 * along
        r2 += square
        r2 += self.squared
        r2 *= self.scale**2
        energy, tension = np.empty_like(r2), np.empty_like(r2)
        for part, terms in self.groups:
            energy[part], tension[part] = pair_values(terms, r2[part])
        return moved, along, square, energy, tension

    def force(self, w: Array) -> tuple[Array, Array]:
        """Return U_res (walkers,), eV, and its gradient (3, atoms, walkers), eV/Å."""
        moved, along, square, energy, tension = self.parts(w)
        _, g1, g2 = self.taylor
        bend = g2 * along
        total = energy.sum(axis=0) - self.taylor[0].sum()
        total -= (g1 * (along + 0.5 * square)).sum(axis=0)
        total -= 0.5 * np.einsum("pw,pw->w", bend, along)
        tension *= self.scale**2
        tension -= g1
        straight = tension - bend
        gradient = np.empty_like(w)
        for axis in range(3):
            flow = straight * self.vector[axis]
            flow += tension * moved[axis]
            gradient[axis] = self.incidence @ flow
        return total, gradient

    def strain_slope(self, w: Array) -> Array:
        """Return ∂U_res/∂x at fixed w (walkers,), eV."""
        _moved, along, square, _, tension = self.parts(w)
        r2 = (2.0 * along + square + self.squared) * self.scale**2
        slope0, g1, g2 = self.taylor_slope
        total = (tension * r2).sum(axis=0) - slope0.sum()
        total -= (g1 * (along + 0.5 * square)).sum(axis=0)
        return np.asarray(total - 0.5 * (g2 * along**2).sum(axis=0))


def pair_values(terms: tuple[Term, ...], r2: Array) -> tuple[Array, Array]:
    """Return φ and φ′/r of a sum of terms at squared distances (any shape)."""
    inverse = 1.0 / r2
    r = np.sqrt(r2)
    energy, tension = np.zeros_like(r2), np.zeros_like(r2)
    for term in terms:
        if isinstance(term, InversePower):
            value = term.coefficient * _power(inverse, r, term.exponent)
            energy += value
            tension -= term.exponent * (value * inverse)
        elif isinstance(term, Exponential):
            value = np.exp(r * (-1.0 / term.rho))
            value *= term.amplitude
            energy += value
            tension -= value / (term.rho * r)
        else:
            zeroth, slope = term.derivatives(r, 1)
            energy += zeroth
            tension += slope / r
    return energy, tension


def _power(inverse: Array, r: Array, exponent: float) -> Array:
    """Return r^{−n} from 1/r² and r by products where n is whole."""
    whole = round(exponent)
    if whole != exponent or not 1 <= whole <= 16:
        return np.asarray(r**-exponent)
    out = r * inverse if whole % 2 else np.ones_like(r)
    base, half = inverse, whole // 2
    while half:
        if half % 2:
            out = out * base
        half //= 2
        if half:
            base = base * base
    return np.asarray(out)


def residual_at(bare: BareBonds, size: int, x: float) -> Residual:
    """Prepare the pair residuals of a supercell at ln(scale) = x.

    Parameters
    ----------
    bare
        Bonds of the supercell at the static scale, both directions; an atom with its own images drops out.
    """
    first, second, kept, groups = [], [], [], []
    start = 0
    for chosen, terms in _merged(bare):
        part = chosen[bare.bonds.first[chosen] < bare.bonds.second[chosen]]
        first.append(bare.bonds.first[part])
        second.append(bare.bonds.second[part])
        kept.append(part)
        groups.append((slice(start, start + len(part)), terms))
        start += len(part)
    index = np.concatenate(kept)
    bonds = Bonds(np.concatenate(first), np.concatenate(second), bare.bonds.cell[index], bare.bonds.vector[index])
    scale = float(np.exp(x))
    taylor, slope = _taylor(BareBonds(bonds, tuple((np.arange(g.start, g.stop), t) for g, t in groups)), scale)
    pairs = np.arange(start)
    ones = np.ones(start)
    incidence = csr_matrix((ones, (bonds.second, pairs)), shape=(size, start)) - csr_matrix(
        (ones, (bonds.first, pairs)), shape=(size, start)
    )
    vector = np.ascontiguousarray(bonds.vector.T)[:, :, None]
    return Residual(
        size,
        bonds.first,
        bonds.second,
        vector,
        (bonds.length**2)[:, None],
        tuple(groups),
        incidence,
        scale,
        taylor,
        slope,
    )


def _merged(bare: BareBonds) -> list[tuple[Ints, tuple[Term, ...]]]:
    """Return disjoint groups of bonds with all the terms that act along them."""
    acting: list[tuple[Term, ...]] = [()] * len(bare.bonds.first)
    for chosen, terms in bare.groups:
        for k in chosen:
            acting[k] = acting[k] + terms
    distinct = list(dict.fromkeys(acting))
    number = {terms: k for k, terms in enumerate(distinct)}
    which = np.array([number[terms] for terms in acting])
    return [(np.nonzero(which == k)[0], terms) for k, terms in enumerate(distinct) if terms]


def _taylor(bare: BareBonds, scale: float) -> tuple[Array, Array]:
    """Return φ, e^{2x} g₁, e^{4x} g₂ of the bonds and their derivatives to x, shape (3, np, 1) each."""
    derivatives = bare.radial(scale, 4)
    r = bare.bonds.length * scale
    g1, g2, g3, _ = radial_factors(derivatives, r)
    values = np.stack([derivatives[0], scale**2 * g1, scale**4 * g2])
    slopes = np.stack([r * derivatives[1], scale**2 * (2.0 * g1 + r**2 * g2), scale**4 * (4.0 * g2 + r**2 * g3)])
    return values[:, :, None], slopes[:, :, None]
