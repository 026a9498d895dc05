"""The quasi-harmonic branch of a crystal with one free strain: where it runs and where it ends."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex import phonons
from thermex.chebyshev import Box
from thermex.equilibrium import Load, refine, temperature_at
from thermex.errors import UnstableCrystalError
from thermex.free_energy import FreeEnergy, Vibrations
from thermex.lattice import Lattice
from thermex.mesh import Mesh, divisions_for, graded, stability_probes

Array = NDArray[np.float64]

#: Width in ln(scale) and number of volumes of each window of the first survey.
WINDOW, POINTS = 0.03, 7

#: Largest ln(scale) above the static lattice that is looked at.
FARTHEST = 0.25

#: Why a branch ends, where it does not end by B_T → 0.
IMAGINARY = "phonons turn imaginary"


@dataclass(frozen=True, slots=True)
class Branch:
    """Strain against temperature along the branch, from a survey on a small mesh."""

    x: Array
    """Shape (ns,), ascending."""
    temperature: Array
    """Shape (ns,), K, ascending."""
    ends: bool
    """Whether the end was found."""
    end_x: float
    """ln(scale) at the end, or at the highest temperature examined."""
    end_K: float
    reason: str
    first_imaginary: float
    """ln(scale) at which phonons first turn imaginary (inf when not met)."""

    def strain_at(self, temperature: Array) -> Array:
        """Interpolate x (nT,) at temperatures within the branch."""
        from scipy.interpolate import PchipInterpolator

        curve = PchipInterpolator(self.temperature, self.x)
        clipped = np.clip(temperature, self.temperature[0], self.temperature[-1])
        return np.asarray(curve(clipped))


class Sampler:
    """Frequencies of a lattice on one mesh and at the stability probes, at any x."""

    def __init__(self, lattice: Lattice, mesh: Mesh) -> None:
        probes = stability_probes(lattice.crystal)
        self.mesh = mesh
        self.points = np.concatenate([mesh.points, probes])
        self._motion = lattice.motion(self.points)

    def all_frequencies(self, x: float) -> Array:
        """Return frequencies at mesh and probes, shape (nq + np, 3n), THz."""
        return phonons.frequencies(self._motion(np.array([x])))

    def on_mesh(self, found: Array) -> Array:
        """Return the mesh part, acoustic frequencies of long-wave points scaled back."""
        return long_wave_scaled(found[: len(self.mesh.points)], self.mesh)


def long_wave_scaled(found: Array, mesh: Mesh) -> Array:
    """Scale the three lowest frequencies by ``mesh.shrink`` (elastic limit near Γ)."""
    out = found.copy()
    out[..., :3] *= mesh.shrink[:, None]
    return out


def survey(lattice: Lattice, load: Load, highest_K: float) -> Branch:
    """Follow the branch from the static minimum upward in volume until it ends.

    Windows of volumes are examined one after the other on a small mesh; in each, the temperature
    at which a volume is stationary is a smooth function of ln(scale), and the branch ends at its
    first maximum (B_T → 0) or where a phonon turns imaginary.

    Raises
    ------
    UnstableCrystalError
        Phonons are imaginary at the static lattice itself.
    """
    sampler = Sampler(lattice, graded(lattice.crystal, divisions_for(lattice.crystal, 6)))
    refuse_unstable(sampler.points, sampler.all_frequencies(0.0), "at the static lattice")
    ceiling = max(3.0 * highest_K, 1.0e4)
    xs: list[float] = []
    ts: list[float] = []
    low, limit = -0.003, np.inf
    while low < FARTHEST:
        high = low + WINDOW
        found = [sampler.all_frequencies(x) for x in Box(np.array([[low, high]]), (POINTS,)).grid[:, 0]]
        if min(f.min() for f in found) < 0.0 or sampler.all_frequencies(high).min() < 0.0:
            limit = _first_imaginary(sampler, low, high)
            high = limit - 1e-6
            if high - low < 1e-4:
                return _ended(xs, ts, limit, IMAGINARY)
            found = [sampler.all_frequencies(x) for x in Box(np.array([[low, high]]), (POINTS,)).grid[:, 0]]
        box = Box(np.array([[low, high]]), (POINTS,))
        surface = FreeEnergy((lattice.static_over(box), _vibrations(sampler, box, found)))
        fine = np.linspace(low, high, 17)
        temperatures = temperature_at(surface, fine, load, ceiling)
        warm = ~np.isnan(temperatures)
        if not xs and warm.any():
            xs.append(coldest(surface, load, float(fine[warm][0])))
            ts.append(0.0)
        for x, t in zip(fine, temperatures, strict=True):
            if np.isnan(t) or (xs and x <= xs[-1]):
                continue
            if np.isinf(t):
                xs.append(float(x))
                ts.append(ceiling)
                return Branch(
                    np.array(xs),
                    np.array(ts),
                    False,
                    xs[-1],
                    ts[-1],
                    f"the branch goes on beyond {ts[-1]:.0f} K",
                    limit,
                )
            if ts and t <= ts[-1]:
                return _ended(xs, ts, limit, "the minimum of the free energy disappears (B_T → 0)")
            xs.append(float(x))
            ts.append(float(t))
        if np.isfinite(limit):
            return _ended(xs, ts, limit, IMAGINARY)
        low = high
    reason = f"the branch was followed to {np.exp(FARTHEST) - 1:.0%} linear expansion"
    return Branch(np.array(xs), np.array(ts), False, xs[-1], ts[-1], reason, limit)


def coldest(surface: FreeEnergy, load: Load, start: float) -> float:
    """Return x of the minimum at T = 0, near a warmer state."""
    x, _ = refine(surface.at(np.zeros(1)), np.array([[start]]), load)
    return min(float(x[0, 0]), start)


def _ended(xs: list[float], ts: list[float], limit: float, reason: str) -> Branch:
    if len(xs) < 2:
        raise UnstableCrystalError(
            "zero-point motion alone carries the crystal past the end of the quasi-harmonic branch",
            where="free energy",
            fix="the quasi-harmonic approximation has no answer for this potential",
        )
    return Branch(np.array(xs), np.array(ts), True, xs[-1], ts[-1], reason, limit)


def _vibrations(sampler: Sampler, box: Box, found: list[Array]) -> Vibrations:
    values = np.stack([np.maximum(sampler.on_mesh(f), 1e-9) for f in found])
    return Vibrations(box, values, sampler.mesh.weights)


def _first_imaginary(sampler: Sampler, low: float, high: float) -> float:
    """Bisect ln(scale) at which the lowest frequency crosses zero."""
    for _ in range(24):
        middle = 0.5 * (low + high)
        if sampler.all_frequencies(middle).min() < 0.0:
            high = middle
        else:
            low = middle
    return high


def refuse_unstable(points: Array, found: Array, where: str) -> None:
    """Raise :class:`UnstableCrystalError` when any frequency is imaginary."""
    fault = phonons.soft_mode(points, found)
    if fault:
        raise UnstableCrystalError(
            fault, where=where, fix="this structure is not a minimum of the potential: check both"
        )


def refine_end(branch: Branch, load: Load, surface_on: Callable[[float, float], FreeEnergy]) -> tuple[float, float]:
    """Return (x, T) of the branch end on a better surface, built on a window around it.

    Parameters
    ----------
    surface_on
        Gives the free energy interpolated over a window (low, high) of ln(scale).
    """
    half = max(0.01, 3.0 * float(np.diff(branch.x[-2:])[0]))
    high = min(branch.end_x + half, branch.first_imaginary - 1e-6)
    low = max(branch.end_x - half, branch.x[0])
    surface = surface_on(low, high)
    ceiling = 1.5 * branch.end_K + 10.0
    angle = np.linspace(0.0, np.pi, 25)
    x = 0.5 * (low + high) - 0.5 * (high - low) * np.cos(angle)
    t = temperature_at(surface, x, load, ceiling)
    good = np.isfinite(t)
    best = int(np.nanargmax(np.where(good, t, -np.inf)))
    if best == len(x) - 1:
        return float(x[-1]), float(t[-1])
    near = np.arange(max(best - 2, 0), min(best + 3, len(x)))
    near = near[good[near]]
    if len(near) < 3:
        return float(x[best]), float(t[best])
    curve = np.polynomial.Polynomial.fit(x[near], t[near], min(4, len(near) - 1))
    roots = curve.deriv().roots()
    real = roots[np.abs(roots.imag) < 1e-9].real
    if not len(real):
        return float(x[best]), float(t[best])
    peak = float(real[np.argmin(np.abs(real - x[best]))])
    return (peak, float(curve(peak))) if abs(peak - x[best]) < half else (float(x[best]), float(t[best]))
