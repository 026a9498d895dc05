"""How fine is fine enough: meshes, volumes and supercells chosen to reach the accuracy asked for."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from thermex import phonons
from thermex.branch import long_wave_scaled
from thermex.chebyshev import Box
from thermex.constants import BOLTZMANN, PLANCK_THZ
from thermex.equilibrium import Load, States, refine, states
from thermex.free_energy import FreeEnergy, Slice, TermValues, Vibrations
from thermex.lattice import Lattice, Motion
from thermex.mesh import Mesh, divisions_for, graded
from thermex.prediction import NumericalError

Array = NDArray[np.float64]

#: Stands in for an imaginary frequency, THz; no state of such a cell is kept.
TINY = 1e-9

#: Relative error that rounding and the lattice sums leave in α at least.
FLOOR = 3e-7

#: How much of the difference between two meshes is stated as error of the finer one. A graded mesh
#: converges as N⁻⁹ once it resolves the modes, which would leave (3/4)⁹ = 0.08 of it.
MESH_SHARE = 0.6

#: The same where the branch runs into soft sheets of modes, on which meshes converge slowly.
SOFT_SHARE = 2.0

#: How much of the two last Chebyshev coefficients is left as error: they fall three- to sixfold each.
VOLUME_SHARE = 0.1

#: Share of the interpolation difference on a small mesh that is stated as error of the supercell.
SUPERCELL_SHARE = 1.5


@dataclass(frozen=True, slots=True)
class Surface:
    """A free energy on one mesh, and its coarser companions for the error."""

    best: FreeEnergy
    coarse_mesh: FreeEnergy
    fewer_volumes: FreeEnergy
    mesh: Mesh
    box: Box
    frequencies: Array
    """Shape (cells, nq, 3n), THz."""
    lowest: Array
    """Shape (cells,): the lowest frequency of each cell on both meshes; negative where imaginary."""


@dataclass(frozen=True, slots=True)
class Solution:
    """States along the branch with their numerical error."""

    states: States
    error: NumericalError
    surface: Surface


def frequencies_over(motion: Motion, box: Box, mesh: Mesh) -> Array:
    """Return frequencies at every cell of a box, shape (cells, nq, 3n), THz."""
    rows = [long_wave_scaled(phonons.frequencies(motion(x)), mesh) for x in box.grid]
    return np.stack(rows)


def build(lattice: Lattice, box: Box, divisions: tuple[int, int, int], order: int) -> Surface:
    """Compute phonons on a graded mesh and on one of three quarters its size, at every cell of a box."""
    mesh = graded(lattice.crystal, divisions, order)
    coarse = graded(lattice.crystal, three_quarters(divisions), order)
    motion = lattice.motion(np.concatenate([mesh.points, coarse.points]))
    both = Mesh(
        divisions,
        np.concatenate([mesh.points, coarse.points]),
        np.concatenate([mesh.weights, coarse.weights]),
        np.concatenate([mesh.shrink, coarse.shrink]),
    )
    found = frequencies_over(motion, box, both)
    size = len(mesh.points)
    real = np.maximum(found, TINY)
    fine = Vibrations(box, real[:, :size], mesh.weights)
    rough = Vibrations(box, real[:, size:], coarse.weights)
    return Surface(
        FreeEnergy((lattice.static_over(box), fine)),
        FreeEnergy((lattice.static_over(box), rough)),
        FreeEnergy((lattice.static_over(box), replace(fine, truncated=True))),
        mesh,
        box,
        found[:, :size],
        found.min(axis=(1, 2)),
    )


def build_plain(lattice: Lattice, box: Box, divisions: tuple[int, int, int]) -> FreeEnergy:
    """Compute phonons on one graded mesh at every cell of a box, with no companion."""
    mesh = graded(lattice.crystal, divisions, 1)
    found = frequencies_over(lattice.motion(mesh.points), box, mesh)
    return FreeEnergy((lattice.static_over(box), Vibrations(box, np.maximum(found, TINY), mesh.weights)))


def three_quarters(divisions: tuple[int, int, int]) -> tuple[int, int, int]:
    """Return even divisions of about three quarters the size, at least 4."""
    a, b, c = (max(2 * round(0.375 * n), 4) for n in divisions)
    return (a, b, c)


def solve(surface: Surface, load: Load, temperature: Array, start: Array, mesh_share: float) -> Solution:
    """Find the minima and α on a surface and on its companions; the differences are the errors."""
    best = _states(surface.best, load, temperature, start)
    coarse = _states(surface.coarse_mesh, load, temperature, best.x)
    fewer = _states(surface.fewer_volumes, load, temperature, best.x)
    zero = np.zeros(len(temperature))
    error = NumericalError(
        mesh_share * envelope(temperature, relative(coarse, best)),
        VOLUME_SHARE * envelope(temperature, relative(fewer, best)),
        zero,
        zero + FLOOR,
    )
    return Solution(best, error, surface)


def envelope(temperature: Array, error: Array) -> Array:
    """Return the largest error from T/1.5 to T: a difference may pass through zero on its way."""
    ratio = np.maximum(temperature, 1e-9)[:, None] / np.maximum(temperature, 1e-9)[None, :]
    near = (ratio >= 1.0) & (ratio < 1.5)
    return np.asarray(np.where(near, error[None, :], 0.0).max(axis=1))


def _states(free_energy: FreeEnergy, load: Load, temperature: Array, start: Array) -> States:
    x, values = refine(free_energy.at(temperature), start, load)
    return states(values, x, load, temperature)


def relative(other: States, best: States) -> Array:
    """Return the largest relative difference of α over axes and volume; 0 where α is 0."""
    scale = np.maximum(np.abs(best.alpha_volume) / 3.0, 1e-300)
    axes = np.abs(other.alpha_axis - best.alpha_axis).max(axis=1) / scale
    return np.asarray(np.where(best.temperature > 0.0, axes, 0.0))


@dataclass(frozen=True, slots=True)
class _Difference:
    """One vibrational term less another, as a term."""

    plus: Vibrations
    minus: Vibrations

    def at(self, temperature: Array) -> Slice:
        first, second = self.plus.at(temperature), self.minus.at(temperature)

        def evaluate(x: Array) -> TermValues:
            a, b = first(x), second(x)
            return TermValues(*(getattr(a, f) - getattr(b, f) for f in TermValues.__slots__))

        return evaluate


def supercell_error(lattice: Lattice, solution: Solution, load: Load, divisions: int = 6, points: int = 5) -> Array:
    """Return the relative error of α by interpolation between commensurate q, shape (nT,).

    Phonons on one small mesh are computed twice, with phonopy's Φ(q) and with the direct lattice
    sums; the difference of the two free energies is added to the surface and α solved again.
    """
    box = Box(solution.surface.box.window, tuple(min(n, points) for n in solution.surface.box.counts))
    mesh = graded(lattice.crystal, divisions_for(lattice.crystal, divisions))
    found = [
        np.maximum(frequencies_over(motion, box, mesh), TINY)
        for motion in (lattice.exact_motion(mesh.points), lattice.motion(mesh.points))
    ]
    exact, interpolated = (Vibrations(box, f, mesh.weights) for f in found)
    shifted = solution.surface.best.plus(_Difference(exact, interpolated))
    temperature, start = solution.states.temperature, solution.states.x
    best = _states(solution.surface.best, load, temperature, start)
    difference = relative(_states(shifted, load, temperature, best.x), best)
    return SUPERCELL_SHARE * envelope(temperature, difference)


def joined(warm: Solution, cold: Solution, use_cold: NDArray[np.bool_]) -> Solution:
    """Take the cold solution where ``use_cold`` (nT,) is true, the warm one elsewhere."""

    def pick(a: Array, b: Array) -> Array:
        mask = use_cold if a.ndim == 1 else use_cold[:, None]
        return np.where(mask, b, a)

    merged = States(*(pick(getattr(warm.states, f), getattr(cold.states, f)) for f in States.__slots__))
    error = NumericalError(*(pick(getattr(warm.error, f), getattr(cold.error, f)) for f in NumericalError.__slots__))
    return Solution(merged, error, warm.surface)


def highest_phonon_K(frequencies: Array) -> float:
    """Return h ν_max / k_B, K."""
    return float(PLANCK_THZ * frequencies.max() / BOLTZMANN)
