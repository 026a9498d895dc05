"""Elementary radial functions: every pair form is a sum of these, with derivatives in closed form."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: Energy below which a short-ranged term is dropped, eV.
NEGLIGIBLE = 1e-13


class Term(Protocol):
    """A radial function φ(r), eV for r in Å. Anybody can add one."""

    def derivatives(self, r: Array, order: int) -> Array:
        """Return φ and its derivatives up to ``order`` (at most 4), shape (order + 1, *r.shape)."""
        ...

    def reach(self) -> float:
        """Distance beyond which the term is negligible, Å (inf for an inverse power)."""
        ...


@dataclass(frozen=True, slots=True)
class InversePower:
    """c / rⁿ, summed to infinity by the Ewald method for any real n > 3 (and n = 1 with charges)."""

    coefficient: float
    """eV·Åⁿ, signed."""
    exponent: float

    def derivatives(self, r: Array, order: int) -> Array:
        """Return φ and its derivatives up to ``order``."""
        out = np.empty((order + 1, *r.shape))
        out[0] = self.coefficient * r**-self.exponent
        for k in range(order):
            out[k + 1] = -(self.exponent + k) * out[k] / r
        return out

    def reach(self) -> float:
        """Infinite: an inverse power is never cut."""
        return float("inf")


@dataclass(frozen=True, slots=True)
class Exponential:
    """A exp(−r/ρ)."""

    amplitude: float
    """eV, signed."""
    rho: float
    """Å."""

    def derivatives(self, r: Array, order: int) -> Array:
        """Return φ and its derivatives up to ``order``."""
        value = self.amplitude * np.exp(-r / self.rho)
        return np.stack([value * (-1.0 / self.rho) ** k for k in range(order + 1)])

    def reach(self) -> float:
        """Distance at which the term has fallen to ``NEGLIGIBLE``."""
        return float(self.rho * max(np.log(max(abs(self.amplitude), 1e-300) / NEGLIGIBLE), 1.0))


@dataclass(frozen=True, slots=True)
class Spline:
    """A table (r, φ) joined by a quintic spline: φ to φ⁗ are continuous, zero past the last point.

    The last tenth of the table is multiplied by the switch of :class:`Tapered`, so that the energy
    and its first two derivatives reach zero at the end of the table.
    """

    distances: tuple[float, ...]
    """Å, increasing, at least six."""
    energies: tuple[float, ...]
    """eV."""

    def derivatives(self, r: Array, order: int) -> Array:
        """Return φ and its derivatives up to ``order``; infinite energy inside the first point."""
        from scipy.interpolate import make_interp_spline

        curve = make_interp_spline(np.array(self.distances), np.array(self.energies), k=5)
        inside = r < self.distances[-1]
        safe = np.where(inside, r, self.distances[-1])
        raw = np.stack([curve(safe, nu=k) for k in range(order + 1)])
        out = _product(raw, _switch(safe, 0.9 * self.distances[-1], self.distances[-1], order))
        out = np.where(inside, out, 0.0)
        out[0] = np.where(r < self.distances[0], np.inf, out[0])
        return out

    def reach(self) -> float:
        """End of the table."""
        return self.distances[-1]


@dataclass(frozen=True, slots=True)
class Tapered:
    """Terms that a publication defines with a cutoff, switched off between 0.9 r_c and r_c.

    The switch is the quintic 1 − 10 t³ + 15 t⁴ − 6 t⁵ with t = (r − 0.9 r_c)/(0.1 r_c): energy, force
    and force constant are continuous at both ends.
    """

    terms: tuple[Term, ...]
    cutoff: float
    """Å."""

    def derivatives(self, r: Array, order: int) -> Array:
        """Return φ and its derivatives up to ``order``."""
        raw = sum_of(self.terms, r, order)
        return _product(raw, _switch(r, 0.9 * self.cutoff, self.cutoff, order))

    def reach(self) -> float:
        """The cutoff."""
        return self.cutoff


def sum_of(terms: tuple[Term, ...], r: Array, order: int) -> Array:
    """Return the sum of several terms and its derivatives, shape (order + 1, *r.shape)."""
    total = np.zeros((order + 1, *r.shape))
    for term in terms:
        total += term.derivatives(r, order)
    return total


def _switch(r: Array, start: float, end: float, order: int) -> Array:
    """Return the quintic switch from 1 at ``start`` to 0 at ``end`` and its derivatives."""
    polynomial = np.polynomial.Polynomial([1.0, 0.0, 0.0, -10.0, 15.0, -6.0])
    width = end - start
    t = np.clip((r - start) / width, 0.0, 1.0)
    inside = (r > start) & (r < end)
    rows = [polynomial(t)]
    for k in range(1, order + 1):
        rows.append(np.where(inside, polynomial.deriv(k)(t) / width**k, 0.0))
    return np.stack(rows)


def _product(f: Array, g: Array) -> Array:
    """Return the derivatives of a product from those of its factors (Leibniz)."""
    from math import comb

    rows = [sum(comb(k, m) * f[m] * g[k - m] for m in range(k + 1)) for k in range(len(f))]
    return np.stack(rows)
