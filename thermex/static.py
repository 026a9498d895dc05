"""The static lattice of a cubic crystal with fixed sites: U(x) exact, its minimum and stability."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.constants import GPA_PER_EV_A3
from thermex.crystal.crystal import Crystal
from thermex.errors import InputError, NoMinimumError
from thermex.free_energy import Slice, temperature_free
from thermex.potential.bonds import find_bonds
from thermex.potential.lattice_sums import lattice_response
from thermex.potential.model import Interaction, PairModel
from thermex.potential.terms import InversePower, Term, sum_of

Array = NDArray[np.float64]

#: Range of ln(scale) about the start over which a static minimum is looked for.
SEARCH = 0.7


@dataclass(frozen=True, slots=True)
class Shells:
    """Neighbour shells of one short-ranged term: U = Σ count · φ(distance)."""

    term: Term
    distances: Array
    """Shape (ns,), Å."""
    counts: Array
    """Shape (ns,): pairs per primitive cell (each pair once)."""


@dataclass(frozen=True, slots=True)
class ScaledEnergy:
    """U of a cubic crystal whose scale is exp(x) times that of ``crystal``; no fit, no cutoff.

    Inverse powers scale as exp(−n x); short-ranged terms are summed over shells of neighbours fixed
    in lattice-translation terms.
    """

    crystal: Crystal
    exponents: Array
    """Shape (np,)."""
    energies: Array
    """Shape (np,), eV per primitive cell at x = 0."""
    shells: tuple[Shells, ...]

    def derivatives(self, x: Array, order: int) -> Array:
        """Return U(x) and its derivatives up to ``order`` ≤ 3, shape (order + 1, nx), eV."""
        x = np.atleast_1d(np.asarray(x, dtype=float))
        decay = self.energies * np.exp(-self.exponents * x[:, None])
        out = np.stack([(decay * (-self.exponents) ** k).sum(axis=1) for k in range(order + 1)])
        for shell in self.shells:
            r = shell.distances * np.exp(x)[:, None]
            radial = shell.term.derivatives(r, order)
            for k, row in enumerate(_logarithmic(radial, r)):
                out[k] += row @ shell.counts
        return out

    def at(self, temperature: Array) -> Slice:
        """Return U as a term of the free energy (see :class:`thermex.free_energy.Term`)."""
        del temperature

        def energy(x: Array) -> tuple[Array, Array, Array]:
            value = self.derivatives(x[:, 0], 2)
            return value[0], value[1][:, None], value[2][:, None, None]

        return temperature_free(energy)


def _logarithmic(radial: Array, r: Array) -> list[Array]:
    """Turn derivatives in r into derivatives in ln r (up to the third)."""
    rows = [radial[0]]
    if len(radial) > 1:
        rows.append(r * radial[1])
    if len(radial) > 2:
        rows.append(r**2 * radial[2] + r * radial[1])
    if len(radial) > 3:
        rows.append(r**3 * radial[3] + 3.0 * r**2 * radial[2] + r * radial[1])
    return rows


def scaled_energy(model: PairModel, crystal: Crystal) -> ScaledEnergy:
    """Prepare U(x) of a crystal scaled uniformly; the crystal given is the origin x = 0."""
    particles = model.particles(crystal)
    exponents, energies = [], []
    for n in model.powers():
        exponents.append(n)
        energies.append(lattice_response(model.power_model(n), particles).energy)
    short = model.short_ranged()
    reach = [i.term.reach() for i in short if np.isfinite(i.term.reach())]
    nearest = [4.0 * crystal.volume ** (1.0 / 3.0)] if any(i.nearest_only for i in short) else []
    shells: list[Shells] = []
    if short:
        bonds = find_bonds(crystal.lattice, particles.positions, np.exp(SEARCH) * max([*reach, *nearest]))
        length = bonds.length
        low = np.minimum(particles.kind[bonds.first], particles.kind[bonds.second])
        high = np.maximum(particles.kind[bonds.first], particles.kind[bonds.second])
        for link in short:
            chosen = length[(low == link.first) & (high == link.second)]
            shells.extend(_shells(link, chosen))
    return ScaledEnergy(crystal, np.array(exponents), np.array(energies), tuple(shells))


def _shells(link: Interaction, lengths: Array) -> list[Shells]:
    if not len(lengths):
        return []
    if link.nearest_only:
        lengths = lengths[lengths < 1.2 * lengths.min()]
    else:
        lengths = lengths[lengths < np.exp(SEARCH) * link.term.reach()]
    distances, counts = np.unique(np.round(lengths, 8), return_counts=True)
    return [Shells(link.term, distances, np.asarray(0.5 * counts, dtype=float))] if len(distances) else []


def find_minimum(energy: ScaledEnergy, pressure_GPa: float, where: str = "") -> float:
    """Return x of the minimum of U + PV that lies downhill from x = 0.

    Raises
    ------
    InputError
        The start lies on the collapsing side of the barrier of a Buckingham-type potential.
    NoMinimumError
        The energy falls without limit on shrinking or on expanding.
    """
    x = np.linspace(-SEARCH, SEARCH, 1401)
    slope = _enthalpy_slope(energy, x, pressure_GPa)
    rising = np.nonzero((slope[:-1] < 0.0) & (slope[1:] >= 0.0))[0]
    a = energy.crystal.lattice_parameters[0]
    start = int(np.argmin(np.abs(x)))
    if not len(rising):
        word = "shrinks" if slope[start] > 0.0 else "expands"
        raise NoMinimumError(
            f"no static minimum between a = {a * np.exp(x[0]):.3f} and {a * np.exp(x[-1]):.3f} Å: "
            f"the energy falls as the cell {word}",
            where=where,
            fix="check the charges and the repulsive terms, or the start value of a",
        )
    downhill = [k for k in rising if (k >= start) == (slope[start] < 0.0)]
    if slope[start] >= 0.0:
        downhill = [k for k in downhill if (slope[k + 1 : start + 1] > 0.0).all()]
    else:
        downhill = [k for k in downhill if (slope[start : k + 1] < 0.0).all()]
    if not downhill:
        best = a * np.exp(x[rising[-1]])
        raise InputError(
            f"the start a = {a:.4f} Å lies inside the collapse of the potential",
            where=where,
            fix=f"start near the minimum at a = {best:.3f} Å",
        )
    return _polish(energy, float(x[downhill[0]]), float(x[downhill[0] + 1]), pressure_GPa)


def _enthalpy_slope(energy: ScaledEnergy, x: Array, pressure_GPa: float) -> Array:
    volume = energy.crystal.volume * np.exp(3.0 * x)
    return np.asarray(energy.derivatives(x, 1)[1] + 3.0 * pressure_GPa / GPA_PER_EV_A3 * volume)


def _polish(energy: ScaledEnergy, low: float, high: float, pressure_GPa: float) -> float:
    from scipy.optimize import brentq

    def slope(x: float) -> float:
        return float(_enthalpy_slope(energy, np.array([x]), pressure_GPa)[0])

    return float(brentq(slope, low, high, xtol=1e-15, rtol=1e-14))


def bulk_modulus(energy: ScaledEnergy, pressure_GPa: float) -> tuple[float, float]:
    """Return B (GPa) and dB/dP of the static lattice at x = 0, where its pressure is P.

    With x = ln(scale): p = −U′/3V, B = −dp/dx/3, dB/dP = (dB/dx)/(dp/dx).
    """
    _, u1, u2, u3 = energy.derivatives(np.zeros(1), 3)[:, 0]
    volume = energy.crystal.volume
    p1 = -(u2 - 3.0 * u1) / (3.0 * volume)
    p2 = -(u3 - 6.0 * u2 + 9.0 * u1) / (3.0 * volume)
    del pressure_GPa
    return float(-p1 / 3.0 * GPA_PER_EV_A3), float((-p2 / 3.0) / p1)


def turning_points(model: PairModel, floor: float = 0.3) -> dict[str, float]:
    """Return where a pair with an attractive r⁻⁶ or r⁻⁸ term turns over towards collapse, Å, by pair."""
    found: dict[str, float] = {}
    r = np.linspace(floor, 4.0, 3701)
    for a in range(len(model.kinds)):
        for b in range(a, len(model.kinds)):
            terms = tuple(i.term for i in model.interactions if (i.first, i.second) == (a, b))
            powers = [t for t in terms if isinstance(t, InversePower)]
            if not powers or max(powers, key=lambda t: t.exponent).coefficient > 0.0:
                continue
            slope = sum_of(terms, r, 1)[1]
            falls = np.nonzero((slope[:-1] > 0.0) & (slope[1:] <= 0.0))[0]
            if len(falls):
                name = "-".join(sorted((model.kinds[a].symbol, model.kinds[b].symbol)))
                found[name] = max(found.get(name, 0.0), float(r[falls[0]]))
    return found
