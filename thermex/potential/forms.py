"""Pair forms: the published functional forms, each a value made of elementary terms.

A pair form is any object with ``terms()`` and ``amplitude_name``; ``derivatives`` comes with it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from thermex.errors import InputError
from thermex.potential.terms import Exponential, InversePower, Spline, Term, sum_of

Array = NDArray[np.float64]


class PairForm:
    """Base of the pair forms: φ(r) in eV as a sum of elementary terms."""

    __slots__ = ()

    def terms(self) -> tuple[Term, ...]:
        """Return the elementary terms of the form."""
        raise NotImplementedError

    def derivatives(self, r: Array, order: int = 2) -> Array:
        """Return φ(r) and its derivatives up to ``order`` ≤ 4, shape (order + 1, *r.shape)."""
        return sum_of(self.terms(), np.asarray(r, dtype=float), order)


@dataclass(frozen=True, slots=True)
class Born(PairForm):
    """B/rⁿ (M. Born and A. Landé 1918)."""

    B: float
    """eV·Åⁿ."""
    n: float

    def terms(self) -> tuple[Term, ...]:
        """Return the elementary terms of the form."""
        return (InversePower(self.B, self.n),)


@dataclass(frozen=True, slots=True)
class BornMayer(PairForm):
    """A exp(−r/ρ) (M. Born and J. E. Mayer 1932)."""

    A: float
    """eV."""
    rho: float
    """Å."""

    def terms(self) -> tuple[Term, ...]:
        """Return the elementary terms of the form."""
        return (Exponential(self.A, self.rho),)


@dataclass(frozen=True, slots=True)
class Buckingham(PairForm):
    """A exp(−r/ρ) − C/r⁶ − D/r⁸ (R. A. Buckingham 1938)."""

    A: float
    """eV."""
    rho: float
    """Å."""
    C: float = 0.0
    """eV·Å⁶."""
    D: float = 0.0
    """eV·Å⁸."""

    def terms(self) -> tuple[Term, ...]:
        """Return the elementary terms of the form."""
        tail = [InversePower(-c, n) for c, n in ((self.C, 6.0), (self.D, 8.0)) if c]
        return (Exponential(self.A, self.rho), *tail)


@dataclass(frozen=True, slots=True)
class Mie(PairForm):
    """General n–m form with well depth ε and zero at σ (G. Mie 1903)."""

    epsilon: float
    """eV."""
    sigma: float
    """Å."""
    n: float = 12.0
    m: float = 6.0

    def terms(self) -> tuple[Term, ...]:
        """Return the elementary terms of the form."""
        n, m = self.n, self.m
        scale = self.epsilon * n / (n - m) * (n / m) ** (m / (n - m))
        return (InversePower(scale * self.sigma**n, n), InversePower(-scale * self.sigma**m, m))


@dataclass(frozen=True, slots=True)
class LennardJones(PairForm):
    """4ε[(σ/r)¹² − (σ/r)⁶] (J. E. Lennard-Jones)."""

    epsilon: float
    """eV."""
    sigma: float
    """Å."""

    def terms(self) -> tuple[Term, ...]:
        """Return the elementary terms of the form."""
        return Mie(self.epsilon, self.sigma).terms()


@dataclass(frozen=True, slots=True)
class LennardJonesAB(PairForm):
    """B/r¹² − A/r⁶, the same function in its other parameters."""

    A: float
    """eV·Å⁶."""
    B: float
    """eV·Å¹²."""

    def terms(self) -> tuple[Term, ...]:
        """Return the elementary terms of the form."""
        return (InversePower(self.B, 12.0), InversePower(-self.A, 6.0))


@dataclass(frozen=True, slots=True)
class Morse(PairForm):
    """D[exp(−2a(r − r₀)) − 2 exp(−a(r − r₀))] (P. M. Morse 1929)."""

    D: float
    """eV."""
    a: float
    """1/Å."""
    r0: float
    """Å."""

    def terms(self) -> tuple[Term, ...]:
        """Return the elementary terms of the form."""
        wall = Exponential(self.D * np.exp(2.0 * self.a * self.r0), 0.5 / self.a)
        well = Exponential(-2.0 * self.D * np.exp(self.a * self.r0), 1.0 / self.a)
        return (wall, well)


@dataclass(frozen=True, slots=True)
class Tabulated(PairForm):
    """A table (r, φ) joined by a quintic spline."""

    distances: tuple[float, ...]
    """Å, increasing."""
    energies: tuple[float, ...]
    """eV."""

    def terms(self) -> tuple[Term, ...]:
        """Return the elementary terms of the form."""
        return (Spline(self.distances, self.energies),)


_BY_NAME: dict[str, type[PairForm]] = {
    "Born": Born,
    "Born-Mayer": BornMayer,
    "Buckingham": Buckingham,
    "Lennard-Jones": LennardJones,
    "Mie": Mie,
    "Morse": Morse,
}

#: The parameter that ``static_distance`` replaces, by form.
AMPLITUDE: Mapping[str, str] = {
    "Born": "B",
    "Born-Mayer": "A",
    "Buckingham": "A",
    "Lennard-Jones": "epsilon",
    "Mie": "epsilon",
    "Morse": "D",
}


def make_form(name: str, parameters: Mapping[str, float], file: Path | None = None) -> PairForm:
    """Build a pair form from its name and parameters (the words of a case file).

    Raises
    ------
    InputError
        An unknown form, or parameters that do not fit it.
    """
    if name == "tabulated":
        if file is None:
            raise InputError("a tabulated pair needs a file", fix='give file = "table.txt"')
        return read_table(file)
    if name == "Lennard-Jones" and "A" in parameters:
        return LennardJonesAB(**dict(parameters))
    try:
        return _BY_NAME[name](**dict(parameters))
    except KeyError:
        raise InputError(f'no pair form is named "{name}"', fix=f"use one of {', '.join(_BY_NAME)}") from None
    except TypeError:
        given = ", ".join(parameters)
        raise InputError(f"{name} does not take the parameters {given}", where="potential.pair") from None


def read_table(file: Path) -> Tabulated:
    """Read two columns r (Å) and φ (eV) from a text file.

    Raises
    ------
    InputError
        The file cannot be read, is not two columns of finite numbers, or r does not increase.
    """
    try:
        table = np.loadtxt(file, ndmin=2)
    except (OSError, ValueError, UnicodeError) as error:
        raise InputError(f"cannot be read as two columns of numbers ({error})", where=file.name) from None
    if table.shape[1] != 2 or len(table) < 8 or not np.isfinite(table).all():
        raise InputError(
            f"holds {table.shape[0]} rows of {table.shape[1]} columns",
            where=file.name,
            fix="give at least 8 rows of finite r (Å) and energy (eV)",
        )
    if table[0, 0] <= 0.0 or not (np.diff(table[:, 0]) > 0).all():
        raise InputError("r does not increase from row to row", where=file.name, fix="sort it by r > 0")
    return Tabulated(tuple(map(float, table[:, 0])), tuple(map(float, table[:, 1])))
