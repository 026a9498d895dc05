"""Displacement correlations of the classical harmonic crystal at any scale, on a Γ-centred mesh."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.crystal.crystal import Crystal
from thermex.potential.dynamical import commensurate_points, folded_bonds, force_constants_at
from thermex.potential.lattice_sums import BondTable, bond_table, radial_of
from thermex.potential.model import PairModel

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
Ints = NDArray[np.int64]

#: Step in ln(scale) of the five-point difference of the short-ranged force constants.
STEP = 1e-3


@dataclass(frozen=True, slots=True)
class PeriodicCrystal:
    """Force constants of a periodic supercell of a cubic crystal with fixed sites, at any scale.

    Exact: all lattice sums complete. Every inverse power is a pure power of the scale.
    """

    crystal: Crystal
    repeat: tuple[int, int, int]
    powers: Mapping[float, Complex]
    """Exponent → Φ(q) on the mesh at x = 0, shape (N₁, N₂, N₃, 3n, 3n), eV/Å², periodic in q."""
    table: BondTable
    """Bonds of the short-ranged terms at x = 0."""

    @property
    def cells(self) -> int:
        """Cells in the supercell."""
        return int(np.prod(self.repeat))

    def force_constants(self, x: float) -> Complex:
        """Return Φ(q) at ln(scale) = x, shape (N₁, N₂, N₃, 3n, 3n), eV/Å²."""
        parts = [np.exp(-(n + 2.0) * x) * values for n, values in self.powers.items()]
        if len(self.table.bonds.first):
            parts.append(self._short(x))
        return np.asarray(sum(parts))

    def force_constant_slope(self, x: float) -> Complex:
        """Return dΦ(q)/dx, same shape; powers in closed form, the rest by a five-point difference."""
        parts = [-(n + 2.0) * np.exp(-(n + 2.0) * x) * values for n, values in self.powers.items()]
        if len(self.table.bonds.first):
            for shift, weight in ((1, 8.0), (-1, -8.0), (2, -1.0), (-2, 1.0)):
                parts.append(weight / (12.0 * STEP) * self._short(x + shift * STEP))
        return np.asarray(sum(parts))

    def _short(self, x: float) -> Complex:
        size = self.crystal.size
        folded = folded_bonds(radial_of(self.table, float(np.exp(x))), size, self.repeat)
        moved = folded.transpose(0, 5, 1, 6, 2, 3, 4).reshape(3 * size, 3 * size, *self.repeat)
        return fourier(moved).transpose(2, 3, 4, 0, 1)


def periodic_crystal(model: PairModel, crystal: Crystal, repeat: tuple[int, int, int]) -> PeriodicCrystal:
    """Do the lattice sums of a periodic supercell once, for all scales."""
    particles = model.particles(crystal)
    powers = {n: on_mesh(model.power_model(n), crystal, repeat) for n in model.powers()}
    return PeriodicCrystal(crystal, repeat, powers, bond_table(model.short_model(), particles))


def on_mesh(model: PairModel, crystal: Crystal, repeat: tuple[int, int, int]) -> Complex:
    """Return Φ(q) on a Γ-centred mesh, shape (N₁, N₂, N₃, 3n, 3n), summed at irreducible q alone."""
    q = commensurate_points(repeat)
    size = crystal.size
    symmetry = mesh_symmetry(crystal, repeat)
    found = force_constants_at(model, model.particles(crystal), q[symmetry.kept])
    full = np.empty((len(q), size, 3, size, 3), dtype=complex)
    blocks = found.reshape(-1, size, 3, size, 3)
    for operation in np.unique(symmetry.operation):
        targets = np.nonzero(symmetry.operation == operation)[0]
        rotation, sites = symmetry.rotations[operation], symmetry.sites[operation]
        turned = np.einsum("ab,qibjc,dc->qiajd", rotation, blocks[symmetry.source[targets]], rotation)
        if symmetry.reverses[operation]:
            turned = turned.conj()
        moved = np.empty_like(turned)
        moved[:, sites[:, None], :, sites[None, :]] = turned.transpose(1, 3, 0, 2, 4)
        full[targets] = moved
    # take the phases of the positions off: Φ(q) e^{−iq·(r_j − r_i)} is periodic in q
    phase = np.exp(2j * np.pi * symmetry.points @ crystal.fractional.T)
    full *= phase[:, :, None, None, None] * phase.conj()[:, None, None, :, None]
    return np.asarray(full.reshape(*repeat, 3 * size, 3 * size))


@dataclass(frozen=True, slots=True)
class MeshSymmetry:
    """Which points of a mesh are computed, and which operation turns them into the others."""

    kept: Ints
    """Indices of the irreducible points."""
    source: Ints
    """Shape (nq,): place in ``kept`` from which each point follows."""
    operation: Ints
    """Shape (nq,): by which operation."""
    points: Array
    """Shape (nq, 3): the wave vectors so reached, which may differ from the mesh by a reciprocal vector."""
    rotations: Array
    """Shape (m, 3, 3): Cartesian."""
    sites: Ints
    """Shape (m, n): image of each atom."""
    reverses: NDArray[np.bool_]
    """Shape (m,): whether q → −q (complex conjugation) goes with it."""


def mesh_symmetry(crystal: Crystal, repeat: tuple[int, int, int]) -> MeshSymmetry:
    """Reduce a Γ-centred mesh by the point group and by q → −q."""
    _, first = np.unique(crystal.rotations, axis=0, return_index=True)
    rotations, translations = crystal.rotations[first], crystal.translations[first]
    basis = crystal.lattice.T
    cartesian = basis @ rotations @ np.linalg.inv(basis)
    sites = np.stack([_images(crystal, r, t) for r, t in zip(rotations, translations, strict=True)])
    index = np.rint(commensurate_points(repeat) * np.array(repeat)).astype(int)
    counts = np.array(repeat)
    inverse = np.rint(np.linalg.inv(rotations)).astype(int)
    turned = np.rint((index / counts) @ inverse * counts).astype(int)
    moved = np.concatenate([turned, -turned])
    images = np.ravel_multi_index(tuple(np.moveaxis(moved % counts, -1, 0)), repeat)
    kept = np.unique(images.min(axis=0))
    source, operation = np.zeros(len(index), dtype=int), np.zeros(len(index), dtype=int)
    points = np.zeros((len(index), 3))
    for number in range(len(images) - 1, -1, -1):
        targets = images[number, kept]
        source[targets], operation[targets] = np.arange(len(kept)), number
        points[targets] = moved[number, kept] / counts
    half = len(rotations)
    return MeshSymmetry(
        kept,
        source,
        operation,
        points,
        np.concatenate([cartesian, cartesian]),
        np.concatenate([sites, sites]),
        np.arange(2 * half) >= half,
    )


def _images(crystal: Crystal, rotation: NDArray[np.int64], translation: Array) -> Ints:
    """Return the atom on which each atom lands under an operation of the space group."""
    moved = crystal.fractional @ rotation.T + translation
    offset = moved[:, None, :] - crystal.fractional[None, :, :]
    return np.asarray(np.argmin(np.abs(offset - np.rint(offset)).sum(axis=2), axis=1))


def fourier(values: Array) -> Complex:
    """Return Σ_L f(L) e^{iq·L} over the cell axes of an array (…, N₁, N₂, N₃)."""
    axes = (-3, -2, -1)
    return np.asarray(np.fft.ifftn(values, axes=axes) * np.prod(values.shape[-3:]))


def inverse_fourier(values: Complex) -> Array:
    """Return f(L) from its transform, real part; the inverse of :func:`fourier`."""
    return np.asarray(np.fft.fftn(values, axes=(-3, -2, -1)).real / np.prod(values.shape[-3:]))


def susceptibility(force_constants: Complex) -> Complex:
    """Return G(q) = Φ(q)⁻¹ on the mesh, uniform displacements left out at Γ.

    Parameters
    ----------
    force_constants
        Shape (N₁, N₂, N₃, 3n, 3n), eV/Å².

    Returns
    -------
    Same shape, Å²/eV; ⟨u u⟩ = k_B T G.

    Raises
    ------
    numpy.linalg.LinAlgError
        Φ(q) is not positive definite somewhere on the mesh.
    """
    matrices = 0.5 * (force_constants + force_constants.conj().swapaxes(-1, -2))
    size = matrices.shape[-1] // 3
    uniform = np.tile(np.eye(3), (size, 1)) / np.sqrt(size)
    stiff = float(np.abs(matrices).max())
    rigid = uniform @ uniform.T
    matrices[0, 0, 0] += stiff * rigid
    np.linalg.cholesky(matrices)
    out = np.linalg.inv(matrices)
    out[0, 0, 0] -= rigid / stiff
    return np.asarray(out)
