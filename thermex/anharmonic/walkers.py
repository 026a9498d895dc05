"""Hybrid Monte Carlo of a small supercell in the normal coordinates of its harmonic crystal.

S. Duane, A. D. Kennedy, B. J. Pendleton and D. Roweth, Phys. Lett. B 195, 216 (1987), with the mass
matrix equal to the force-constant matrix, so that every mode turns at one frequency: the harmonic
part is rotated exactly and kicks come from the anharmonic residual alone. Averages are harmonically
mapped: S. G. Moustafa, A. J. Schultz and D. A. Kofke, Phys. Rev. E 92, 043303 (2015).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.anharmonic.correlation import PeriodicCrystal, inverse_fourier
from thermex.anharmonic.residual import Residual, residual_at
from thermex.anharmonic.vertices import BareBonds
from thermex.constants import BOLTZMANN
from thermex.errors import UnstableCrystalError

Array = NDArray[np.float64]

#: Walkers may not leave the perfect crystal: no atom goes farther from its site than this many
#: nearest-neighbour distances (an interstitial site lies at 0.7 in fcc, at 0.87 in rock salt).
WALL = 0.6

#: Kicks in a quarter turn.
KICKS = 4

#: Trajectories thrown away when walkers start from rest.
WARMING = 6


@dataclass(frozen=True, slots=True)
class Cell:
    """A supercell at one scale: residual energy, normal coordinates and the harmonic mapping."""

    residual: Residual
    modes: Array
    """Shape (3·atoms, modes): w = modes · y with ⟨y y⟩ = k_B T; rows component-major."""
    half_slope: Array
    """Shape (3·atoms, 3·atoms): ½ dΦ/dx, eV/Å², Φ of the displacements at the static scale."""
    mapping: Array
    """Shape (3·atoms, 3·atoms): A = Φ⁻¹ ½ dΦ/dx; w → −A w follows the harmonic crystal in x."""
    wall: float
    """Å at the static scale: an atom never goes farther than this from its site."""

    @property
    def size(self) -> int:
        """Number of modes."""
        return int(self.modes.shape[1])

    def displacements(self, y: Array) -> Array:
        """Return w (3, atoms, walkers) of normal coordinates (modes, walkers)."""
        return np.asarray((self.modes @ y).reshape(3, self.residual.size, -1))

    def force(self, y: Array) -> tuple[Array, Array]:
        """Return U_res (walkers,) and its gradient to y (modes, walkers)."""
        energy, gradient = self.residual.force(self.displacements(y))
        return energy, self.modes.T @ gradient.reshape(3 * self.residual.size, -1)


@dataclass(frozen=True, slots=True)
class Observed:
    """What one block of trajectories gave, one row an antithetic pair of walkers; eV per supercell."""

    mapped_force: Array
    """Shape (pairs,): ∂F_anh/∂x, harmonically mapped."""
    direct_force: Array
    """Shape (pairs,): the same by the virial, for checks: far noisier."""
    mapped_energy: Array
    """Shape (pairs,): anharmonic part of the mean energy, harmonically mapped."""
    accepted: float
    """Share of trajectories accepted."""
    y: Array
    """Shape (modes, walkers): where the walkers stand, to go on from."""


def cell_at(periodic: PeriodicCrystal, bare: BareBonds, x: float) -> Cell:
    """Diagonalise the harmonic supercell at ln(scale) = x.

    Parameters
    ----------
    periodic
        Force constants of the supercell as ``repeat`` cells of ``periodic.crystal``.
    bare
        Bonds of the whole supercell, atoms in the order of :func:`full_matrix`.

    Raises
    ------
    UnstableCrystalError
        The harmonic crystal is not stable there.
    """
    grow = float(np.exp(2.0 * x))
    stiffness = grow * full_matrix(periodic.force_constants(x))
    slope = 2.0 * stiffness + grow * full_matrix(periodic.force_constant_slope(x))
    values, vectors = np.linalg.eigh(stiffness)
    if values[3] < 1e-8 * values[-1] or values[0] < -1e-6 * values[-1]:
        raise UnstableCrystalError(
            f"phonons of the supercell are imaginary at {100.0 * np.expm1(x):+.2f} % in the lattice parameter",
            where="sampled anharmonicity",
            fix="sampling needs a stable harmonic crystal at every volume on the way",
        )
    modes = vectors[:, 3:] / np.sqrt(values[3:])
    size = len(stiffness) // 3
    wall = WALL * float(bare.bonds.length.min())
    return Cell(residual_at(bare, size, x), modes, 0.5 * slope, modes @ (modes.T @ (0.5 * slope)), wall)


def full_matrix(on_mesh: NDArray[np.complex128]) -> Array:
    """Return the matrix of a supercell, component-major, from Φ(q) on its mesh (N₁, N₂, N₃, 3n, 3n).

    Atom (i, L) has the number (cell index of L)·n + i.
    """
    repeat, size = on_mesh.shape[:3], on_mesh.shape[3] // 3
    real = inverse_fourier(on_mesh.transpose(3, 4, 0, 1, 2)).reshape(size, 3, size, 3, *repeat)
    cells = np.stack(np.meshgrid(*[np.arange(n) for n in repeat], indexing="ij"), axis=-1).reshape(-1, 3)
    offset = (cells[None, :, :] - cells[:, None, :]) % np.array(repeat)
    blocks = real[:, :, :, :, offset[..., 0], offset[..., 1], offset[..., 2]]
    count = len(cells) * size
    out = blocks.transpose(1, 4, 0, 3, 5, 2).reshape(3 * count, 3 * count)
    return np.asarray(0.5 * (out + out.T))


def at_rest(cell: Cell, pairs: int) -> Array:
    """Return antithetic walkers on their sites, shape (modes, 2·pairs).

    A quarter turn gives every mode its thermal amplitude. Drawn from the harmonic crystal instead,
    walkers would start inside one another's repulsion at high temperature and take long to leave it.
    """
    return np.zeros((cell.size, 2 * pairs))


def run(cell: Cell, kelvin: float, y: Array, trajectories: int, random: np.random.Generator) -> Observed:
    """Run trajectories of a quarter turn each and average over them.

    Walkers k and k + pairs get opposite momenta, so that what is odd in the displacements cancels.
    """
    kt, pairs = BOLTZMANN * kelvin, y.shape[1] // 2
    energy, gradient = cell.force(y)
    sums = np.zeros((3, 2 * pairs))
    taken = 0
    for _ in range(trajectories):
        half = np.sqrt(kt) * random.normal(size=(cell.size, pairs))
        momentum = np.concatenate([half, -half], axis=1)
        dice = np.tile(np.log(random.uniform(size=pairs)), 2)
        new_y, new_energy, new_gradient, rise = _turned(cell, y, momentum, energy, gradient)
        accept = (dice < -rise / kt) & _inside(cell, new_y)
        y = np.where(accept, new_y, y)
        energy, gradient = np.where(accept, new_energy, energy), np.where(accept, new_gradient, gradient)
        taken += int(accept.sum())
        sums += _measured(cell, kt, y, energy, gradient)
    means = sums.reshape(3, 2, pairs).mean(axis=1) / trajectories
    return Observed(means[0], means[1], means[2], taken / (2 * pairs * trajectories), y)


def _turned(cell: Cell, y: Array, momentum: Array, energy: Array, gradient: Array) -> tuple[Array, Array, Array, Array]:
    """Follow a quarter turn: return the new y, U_res, gradient and the change of the whole energy."""
    step = 0.5 * np.pi / KICKS
    cosine, sine = np.cos(step), np.sin(step)
    before = energy + 0.5 * (y**2).sum(axis=0) + 0.5 * (momentum**2).sum(axis=0)
    for _ in range(KICKS):
        momentum = momentum - 0.5 * step * gradient
        y, momentum = cosine * y + sine * momentum, cosine * momentum - sine * y
        energy, gradient = cell.force(y)
        momentum -= 0.5 * step * gradient
    after = energy + 0.5 * (y**2).sum(axis=0) + 0.5 * (momentum**2).sum(axis=0)
    return y, energy, gradient, after - before


def _inside(cell: Cell, y: Array) -> NDArray[np.bool_]:
    """Return which walkers have every atom near its site."""
    far = (cell.displacements(y) ** 2).sum(axis=0).max(axis=0)
    return np.asarray(far < cell.wall**2)


def _measured(cell: Cell, kt: float, y: Array, energy: Array, gradient: Array) -> Array:
    """Return mapped force, direct force and mapped energy of every walker, shape (3, walkers)."""
    w = cell.modes @ y
    strain = cell.residual.strain_slope(w.reshape(3, cell.residual.size, -1))
    # gradient to y is modesᵀ ∇U; the mapped flow A w = modes (modesᵀ ½Φ′ w)
    pulled = cell.modes.T @ (cell.half_slope @ w)
    mapped = strain - np.einsum("mw,mw->w", pulled, gradient)
    harmonic = np.einsum("kw,kw->w", w, cell.half_slope @ w) - kt * np.trace(cell.mapping)
    return np.stack([mapped, strain + harmonic, energy - 0.5 * np.einsum("mw,mw->w", y, gradient)])
