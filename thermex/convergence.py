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
from thermex.free_energy import FreeEnergy, Vibrations
from thermex.lattice import Lattice, Motion
from thermex.mesh import Mesh, divisions_for, graded
from thermex.prediction import NumericalError

Array = NDArray[np.float64]

#: Relative error that rounding and the lattice sums leave in α at least.
FLOOR = 3e-7

#: How much of the difference between two meshes is left as error of the finer one: a graded mesh
#: converges as N⁻⁹, so (3/4)⁹ = 0.08 of it; a quarter is stated.
MESH_SHARE = 0.25

#: How much of the last Chebyshev coefficients is left as error: they fall about fivefold each.
VOLUME_SHARE = 0.3

#: Temperatures below this fraction of the highest phonon temperature use the twice-graded mesh.
COLD = 1.0 / 40.0


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
    fine = Vibrations(box, found[:, :size], mesh.weights)
    rough = Vibrations(box, found[:, size:], coarse.weights)
    return Surface(
        FreeEnergy((lattice.static, fine)),
        FreeEnergy((lattice.static, rough)),
        FreeEnergy((lattice.static, replace(fine, truncated=True))),
        mesh,
        box,
        found[:, :size],
    )


def three_quarters(divisions: tuple[int, int, int]) -> tuple[int, int, int]:
    """Return even divisions of about three quarters the size, at least 4."""
    a, b, c = (max(2 * round(0.375 * n), 4) for n in divisions)
    return (a, b, c)


def solve(surface: Surface, load: Load, temperature: Array, start: Array) -> Solution:
    """Find the minima and α on a surface and on its companions; the differences are the errors."""
    best = _states(surface.best, load, temperature, start)
    coarse = _states(surface.coarse_mesh, load, temperature, best.x)
    fewer = _states(surface.fewer_volumes, load, temperature, best.x)
    zero = np.zeros(len(temperature))
    error = NumericalError(
        MESH_SHARE * relative(coarse, best),
        VOLUME_SHARE * relative(fewer, best),
        zero,
        zero + FLOOR,
    )
    return Solution(best, error, surface)


def _states(free_energy: FreeEnergy, load: Load, temperature: Array, start: Array) -> States:
    x, values = refine(free_energy.at(temperature), start, load)
    return states(values, x, load, temperature)


def relative(other: States, best: States) -> Array:
    """Return the largest relative difference of α over axes and volume; 0 where α is 0."""
    scale = np.maximum(np.abs(best.alpha_volume) / 3.0, 1e-300)
    axes = np.abs(other.alpha_axis - best.alpha_axis).max(axis=1) / scale
    return np.asarray(np.where(best.temperature > 0.0, axes, 0.0))


def supercell_error(lattice: Lattice, box: Box, load: Load, temperature: Array, start: Array) -> Array:
    """Return the relative error of α by phonopy's interpolation, shape (nT,).

    α is solved twice on one small mesh: with phonopy's Φ(q), and with the direct lattice sums.
    """
    mesh = graded(lattice.crystal, divisions_for(lattice.crystal, 4))
    pair = []
    for motion in (lattice.motion(mesh.points), lattice.exact_motion(mesh.points)):
        vibrations = Vibrations(box, np.maximum(frequencies_over(motion, box, mesh), 1e-9), mesh.weights)
        pair.append(_states(FreeEnergy((lattice.static, vibrations)), load, temperature, start))
    return relative(pair[0], pair[1])


def joined(warm: Solution, cold: Solution, use_cold: Array) -> Solution:
    """Take the cold solution where ``use_cold`` (nT,) is true, the warm one elsewhere."""

    def pick(a: Array, b: Array) -> Array:
        mask = use_cold if a.ndim == 1 else use_cold[:, None]
        return np.where(mask, b, a)

    merged = States(*(pick(getattr(warm.states, f), getattr(cold.states, f)) for f in States.__slots__))
    error = NumericalError(
        *(pick(getattr(warm.error, f), getattr(cold.error, f)) for f in NumericalError.__slots__)
    )
    return Solution(merged, error, warm.surface)


def highest_phonon_K(frequencies: Array) -> float:
    """Return h ν_max / k_B, K."""
    return float(PLANCK_THZ * frequencies.max() / BOLTZMANN)
