"""Cubic and quartic vertices of the pair energy, written per bond so that translations drop out.

For a bond vector x with radial derivatives g₁ = φ′/r, g₂ = (φ″ − g₁)/r², g₃ = (φ‴ − 3 r g₂)/r³ and
g₄ = (φ⁗ − 6 r² g₃ − 3 g₂)/r⁴ the third derivative of φ(|x|) is
T_abc = g₃ x_a x_b x_c + g₂ (δ_ab x_c + 2 permutations), the fourth
Q_abcd = g₄ x_a x_b x_c x_d + g₃ (δ_ab x_c x_d + 5 permutations) + g₂ (δ_ab δ_cd + 2 permutations).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.constants import COULOMB
from thermex.potential.bonds import Bonds, find_bonds
from thermex.potential.model import PairModel, Particles
from thermex.potential.terms import InversePower, Term, sum_of

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

#: A term defined between nearest neighbours alone acts on bonds up to this multiple of the shortest.
NEAREST = 1.2


@dataclass(frozen=True, slots=True)
class BareBonds:
    """Ordered bonds of a crystal at x = 0 with the whole bare pair energy along them."""

    bonds: Bonds
    groups: tuple[tuple[Ints, tuple[Term, ...]], ...]
    """(indices of bonds, terms that act along them, Coulomb included)."""

    def radial(self, scale: float, order: int) -> Array:
        """Return φ and its derivatives on all bonds stretched by ``scale``, shape (order + 1, nb)."""
        length = self.bonds.length * scale
        out = np.zeros((order + 1, len(length)))
        for chosen, terms in self.groups:
            out[:, chosen] += sum_of(terms, length[chosen], order)
        return out

    def within(self, reach: float) -> BareBonds:
        """Return the bonds shorter than ``reach`` (Å, at x = 0)."""
        keep = self.bonds.length < reach
        number = np.cumsum(keep) - 1
        bonds = Bonds(*(getattr(self.bonds, k)[keep] for k in ("first", "second", "cell", "vector")))
        groups = tuple((number[chosen[keep[chosen]]], terms) for chosen, terms in self.groups)
        return BareBonds(bonds, groups)


def bare_bonds(model: PairModel, particles: Particles, reach: float) -> BareBonds:
    """List every ordered bond shorter than ``reach`` (Å) with the terms that act along it."""
    bonds = find_bonds(particles.lattice, particles.positions, reach)
    length = bonds.length
    low = np.minimum(particles.kind[bonds.first], particles.kind[bonds.second])
    high = np.maximum(particles.kind[bonds.first], particles.kind[bonds.second])
    groups: list[tuple[Ints, tuple[Term, ...]]] = []
    for a in range(len(model.kinds)):
        for b in range(a, len(model.kinds)):
            chosen = np.nonzero((low == a) & (high == b))[0]
            if len(chosen):
                groups.extend(_terms_between(model, a, b, chosen, length[chosen]))
    return BareBonds(bonds, tuple(groups))


def _terms_between(
    model: PairModel, a: int, b: int, chosen: Ints, length: Array
) -> list[tuple[Ints, tuple[Term, ...]]]:
    """Return the groups of one pair of kinds: terms on all bonds, and those on the nearest alone."""
    links = [i for i in model.interactions if (i.first, i.second) == (a, b)]
    everywhere: list[Term] = [i.term for i in links if not i.nearest_only]
    coulomb = COULOMB * model.kinds[a].charge * model.kinds[b].charge
    if coulomb:
        everywhere.append(InversePower(coulomb, 1.0))
    found: list[tuple[Ints, tuple[Term, ...]]] = [(chosen, tuple(everywhere))] if everywhere else []
    nearest: tuple[Term, ...] = tuple(i.term for i in links if i.nearest_only)
    if nearest:
        found.append((chosen[length < NEAREST * length.min()], nearest))
    return found


def radial_factors(derivatives: Array, length: Array) -> tuple[Array, Array, Array, Array]:
    """Return g₁ … g₄ (nb,) from φ′ … φ⁗; see the head of the module."""
    _, d1, d2, d3, d4 = derivatives
    g1 = d1 / length
    g2 = (d2 - g1) / length**2
    g3 = (d3 - 3.0 * length * g2) / length**3
    g4 = (d4 - 6.0 * length**2 * g3 - 3.0 * g2) / length**4
    return g1, g2, g3, g4


def cubic_tensors(vector: Array, g2: Array, g3: Array) -> Array:
    """Return T_abc of every bond, shape (nb, 3, 3, 3), eV/Å³."""
    eye = np.eye(3)
    out = np.einsum("n,na,nb,nc->nabc", g3, vector, vector, vector)
    along = g2[:, None] * vector
    out += np.einsum("ab,nc->nabc", eye, along)
    out += np.einsum("ac,nb->nabc", eye, along)
    out += np.einsum("bc,na->nabc", eye, along)
    return np.asarray(out)


def quartic_mean(vector: Array, g2: Array, g3: Array, g4: Array, spread: Array) -> Array:
    """Return ⟨φ⁽⁴⁾ Δu⁴⟩/24 of every bond for Gaussian Δu with covariance ``spread``, shape (nb,).

    ⅛ [g₄ (x·Λx)² + g₃ (2 tr Λ x·Λx + 4 x·Λ²x) + g₂ ((tr Λ)² + 2 tr Λ²)], Λ of shape (nb, 3, 3).
    """
    moved = np.einsum("nab,nb->na", spread, vector)
    along = np.einsum("na,na->n", vector, moved)
    trace = np.einsum("naa->n", spread)
    squared = np.einsum("nab,nba->n", spread, spread)
    value = g4 * along**2 + g3 * (2.0 * trace * along + 4.0 * np.einsum("na,na->n", moved, moved))
    return np.asarray(0.125 * (value + g2 * (trace**2 + 2.0 * squared)))
