"""What single modes do: Grüneisen parameters by first-order perturbation, and mean displacements."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex import oscillators, phonons
from thermex.branch import long_wave_scaled
from thermex.chebyshev import Box
from thermex.constants import BOLTZMANN, HBAR2_PER_U, PLANCK_THZ, THZ_PER_ROOT
from thermex.lattice import Motion
from thermex.mesh import LONG_WAVE, Mesh

Array = NDArray[np.float64]

#: Step in strain of the central difference of the dynamical matrix.
STEP = 1e-4


@dataclass(frozen=True, slots=True)
class CellModes:
    """Modes of one cell on a mesh."""

    frequencies: Array
    """Shape (nq, 3n), THz."""
    gruneisen: Array
    """Shape (nq, 3n): −d ln ν/d ln V along the direction given."""
    amplitudes: Array
    """Shape (nq, 3n, n): |e|² of each atom in each mode."""


def cell_modes(motion: Motion, x: Array, direction: Array) -> CellModes:
    """Return modes and their γ = −⟨e|dD/d ln V|e⟩/2ω² at strain x.

    Parameters
    ----------
    direction
        Shape (d,): change of x for a unit change of ln V.
    """
    plus, minus = motion(x + STEP * direction), motion(x - STEP * direction)
    # their mean is D(x) to a relative error of about STEP²
    raw, vectors = phonons.eigenmodes(0.5 * (plus + minus))
    change = (plus - minus) / (2.0 * STEP)
    slope = np.einsum("qam,qab,qbm->qm", vectors.conj(), change, vectors, optimize=True).real
    squared = np.maximum((raw / THZ_PER_ROOT) ** 2, 1e-300)
    weights = np.abs(vectors) ** 2
    per_atom = weights.reshape(len(raw), -1, 3, raw.shape[1]).sum(axis=2).swapaxes(1, 2)
    return CellModes(raw, -0.5 * slope / squared, per_atom)


def on_mesh(modes: CellModes, mesh: Mesh, part: slice) -> CellModes:
    """Return the modes of one mesh among the points computed, long waves scaled back."""
    scaled = long_wave_scaled(modes.frequencies[part], mesh)
    return CellModes(scaled, modes.gruneisen[part], modes.amplitudes[part])


def average_gruneisen(modes: CellModes, weights: Array, kelvin: float) -> float:
    """Return the mean γ weighted by the heat capacity of each mode (zero-point weights at T = 0)."""
    if kelvin > 0.0:
        heat = oscillators.mode_heat(modes.frequencies, kelvin) * weights[:, None]
    else:
        heat = modes.frequencies * weights[:, None]
    total = float(heat.sum())
    return float((heat * modes.gruneisen).sum() / total) if total > 0.0 else float("nan")


@dataclass(frozen=True, slots=True)
class LongWaveLimit:
    """The limit T → 0, where only sound waves are excited."""

    gruneisen: float
    debye_K: float


def long_wave_limit(modes: CellModes, sphere: Mesh, volume: float) -> LongWaveLimit:
    """Average γ over sound waves with weight v⁻³, and turn their mean speed into θ_D(0).

    θ_D³ = (h/k_B)³ · 9n/(4πV) / Σ⟨v⁻³⟩ (P. Debye, Ann. Phys. 344, 789 (1912)), n atoms in volume V.
    """
    speed = modes.frequencies[:, :3] / (LONG_WAVE / volume ** (1.0 / 3.0))
    weight = sphere.weights[:, None] * speed**-3
    gamma = float((weight * modes.gruneisen[:, :3]).sum() / weight.sum())
    atoms = modes.amplitudes.shape[2]
    debye = (9.0 * atoms / (4.0 * np.pi * volume) / weight.sum()) ** (1.0 / 3.0) * PLANCK_THZ / BOLTZMANN
    return LongWaveLimit(gamma, float(debye))


def square_displacements(modes: CellModes, masses: Array, weights: Array, kelvin: float) -> Array:
    """Return ⟨u²⟩ of each atom, shape (n,), Å² (sum over three directions)."""
    quantum = PLANCK_THZ * np.maximum(modes.frequencies, 1e-6)
    half = 0.5 / np.tanh(np.minimum(0.5 * quantum / (BOLTZMANN * max(kelvin, 1e-6)), 350.0))
    per_mode = HBAR2_PER_U * half / quantum * weights[:, None]
    return np.asarray(np.einsum("qm,qma->a", per_mode, modes.amplitudes) / masses)


@dataclass(frozen=True, slots=True)
class ModeAverages:
    """Averages over modes along the branch."""

    gruneisen: Array
    """Shape (nT,)."""
    square_displacement: Array
    """Shape (nT, n), Å²."""


def averages(cells: list[CellModes], box: Box, mesh: Mesh, masses: Array, x: Array, temperature: Array) -> ModeAverages:
    """Average γ and ⟨u²⟩ at every temperature, interpolated between the cells of a box.

    Parameters
    ----------
    cells
        One entry a point of ``box``.
    x
        Shape (nT, d).
    """
    gamma = np.array([[average_gruneisen(c, mesh.weights, t) for c in cells] for t in temperature])
    moved = np.array([[square_displacements(c, masses, mesh.weights, t) for c in cells] for t in temperature])
    at_x, _, _ = box.evaluate(box.coefficients(gamma), x)
    columns = [box.evaluate(box.coefficients(moved[:, :, a]), x)[0] for a in range(len(masses))]
    return ModeAverages(at_x, np.stack(columns, axis=1))
