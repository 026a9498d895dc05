"""The pair model: charges, pair terms between kinds of centre, and springs of polarisable ions."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from thermex.constants import COULOMB
from thermex.crystal.crystal import Crystal
from thermex.potential.terms import InversePower, Term, sum_of

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Kind:
    """A kind of centre: the core of an ion (or a whole atom), or its shell."""

    symbol: str
    is_shell: bool
    charge: float
    """e."""


@dataclass(frozen=True, slots=True)
class Interaction:
    """A radial term between two kinds of centre (indices into ``PairModel.kinds``, first ≤ second)."""

    first: int
    second: int
    term: Term
    nearest_only: bool = False
    """True for a potential defined between nearest neighbours alone."""


@dataclass(frozen=True, slots=True)
class Spring:
    """Core–shell spring ½ k₂ d² + k₄ d⁴/24 of a polarisable ion."""

    core: int
    shell: int
    constant: float
    """k₂, eV/Å²."""
    quartic: float = 0.0
    """k₄, eV/Å⁴."""


@dataclass(frozen=True, slots=True)
class Particles:
    """Cores and shells of one crystal: what the lattice sums run over."""

    lattice: Array
    """Shape (3, 3), Å."""
    positions: Array
    """Shape (m, 3), Å: all cores in the order of the crystal, then the shells."""
    kind: Ints
    """Shape (m,): index into ``PairModel.kinds``."""
    site: Ints
    """Shape (m,): the atom of the crystal to which the centre belongs."""

    @property
    def size(self) -> int:
        """Number of centres."""
        return len(self.kind)

    @property
    def volume(self) -> float:
        """Volume of the cell, Å³."""
        return float(abs(np.linalg.det(self.lattice)))


@dataclass(frozen=True, slots=True)
class PairModel:
    """A complete potential: kinds of centre, radial interactions and springs."""

    kinds: tuple[Kind, ...]
    interactions: tuple[Interaction, ...]
    springs: tuple[Spring, ...] = ()
    description: tuple[str, ...] = ()
    """Remarks that the report repeats (a cutoff and how it is smoothed, and so on)."""

    @property
    def has_charges(self) -> bool:
        """Whether any centre is charged."""
        return any(kind.charge != 0.0 for kind in self.kinds)

    @property
    def has_shells(self) -> bool:
        """Whether any ion is polarisable."""
        return bool(self.springs)

    def particles(self, crystal: Crystal, shell_shift: Array | None = None) -> Particles:
        """Place cores and shells on a crystal.

        Parameters
        ----------
        shell_shift
            Shape (number of shells, 3), Å: displacement of each shell from its core (default 0).
        """
        cores = {k.symbol: i for i, k in enumerate(self.kinds) if not k.is_shell}
        shells = {k.symbol: i for i, k in enumerate(self.kinds) if k.is_shell}
        with_shell = [i for i, symbol in enumerate(crystal.symbols) if symbol in shells]
        kind = [cores[s] for s in crystal.symbols] + [shells[crystal.symbols[i]] for i in with_shell]
        site = [*range(crystal.size), *with_shell]
        positions = crystal.cartesian[site]
        if shell_shift is not None and with_shell:
            positions[crystal.size :] += shell_shift
        return Particles(crystal.lattice, positions, np.array(kind), np.array(site))

    def powers(self) -> dict[float, Array]:
        """Return the infinite-ranged part: exponent → coupling matrix (kinds, kinds), eV·Åⁿ.

        The Coulomb energy is the entry 1.0.
        """
        out: dict[float, Array] = {}
        size = len(self.kinds)
        if self.has_charges:
            charges = np.array([kind.charge for kind in self.kinds])
            out[1.0] = COULOMB * np.outer(charges, charges)
        for link in self.interactions:
            if isinstance(link.term, InversePower) and not link.nearest_only:
                matrix = out.setdefault(link.term.exponent, np.zeros((size, size)))
                matrix[link.first, link.second] += link.term.coefficient
                if link.first != link.second:
                    matrix[link.second, link.first] += link.term.coefficient
        return out

    def short_ranged(self) -> tuple[Interaction, ...]:
        """Return the interactions that are summed directly over a finite neighbourhood."""
        return tuple(i for i in self.interactions if i.nearest_only or not isinstance(i.term, InversePower))

    def pair_derivatives(self, first: int, second: int, r: Array, order: int) -> Array:
        """Return the bare pair energy φ(r), Coulomb included, and its derivatives up to ``order`` ≤ 4.

        Shape (order + 1, *r.shape), eV/Åᵏ. A term defined between nearest neighbours alone is
        included at every r: the caller picks the distances.
        """
        low, high = sorted((first, second))
        terms = [i.term for i in self.interactions if (i.first, i.second) == (low, high)]
        coulomb = COULOMB * self.kinds[first].charge * self.kinds[second].charge
        if coulomb:
            terms.append(InversePower(coulomb, 1.0))
        return sum_of(tuple(terms), np.asarray(r, dtype=float), order)

    def excluded_pairs(self, particles: Particles) -> Iterator[tuple[int, int]]:
        """Yield (core, shell) particle pairs of the same ion, which do not interact."""
        cores = {int(s): i for i, s in enumerate(particles.site) if not self.kinds[particles.kind[i]].is_shell}
        for i, k in enumerate(particles.kind):
            if self.kinds[k].is_shell:
                yield cores[int(particles.site[i])], i

    def power_model(self, exponent: float) -> PairModel:
        """Return the model that holds only the inverse powers of one exponent (1 = Coulomb)."""
        if exponent == 1.0:
            return replace(self, interactions=(), springs=())
        kept = tuple(
            i
            for i in self.interactions
            if not i.nearest_only and isinstance(i.term, InversePower) and i.term.exponent == exponent
        )
        return PairModel(tuple(replace(k, charge=0.0) for k in self.kinds), kept)

    def short_model(self) -> PairModel:
        """Return the model that holds only the short-ranged terms (and the springs)."""
        bare = tuple(replace(k, charge=0.0) for k in self.kinds)
        return PairModel(bare, self.short_ranged(), self.springs)
