"""Displacement correlations of the classical harmonic crystal at any scale, on a Γ-centred mesh."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.crystal.crystal import Crystal
from thermex.potential.dynamical import folded_bonds, supercell_force_constants
from thermex.potential.lattice_sums import BondTable, bond_table, radial_of
from thermex.potential.model import PairModel

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

#: Axes of the three cell indices in arrays (n, 3, n, 3, N₁, N₂, N₃).
CELLS = (4, 5, 6)


@dataclass(frozen=True, slots=True)
class PeriodicCrystal:
    """Force constants of a periodic supercell of a cubic crystal with fixed sites, at any scale.

    Exact: all lattice sums complete. Every inverse power is a pure power of the scale.
    """

    crystal: Crystal
    repeat: tuple[int, int, int]
    powers: Mapping[float, Array]
    """Exponent → force constants (n, n, N₁, N₂, N₃, 3, 3) at x = 0, eV/Å²."""
    table: BondTable
    """Bonds of the short-ranged terms at x = 0."""

    @property
    def cells(self) -> int:
        """Primitive cells in the supercell."""
        return int(np.prod(self.repeat))

    def force_constants(self, x: float) -> Array:
        """Return Φ_ij(0, L) at ln(scale) = x, shape (n, n, N₁, N₂, N₃, 3, 3), eV/Å²."""
        size = self.crystal.size
        out = np.zeros((size, size, *self.repeat, 3, 3))
        for exponent, values in self.powers.items():
            out += np.exp(-(exponent + 2.0) * x) * values
        if len(self.table.bonds.first):
            out += folded_bonds(radial_of(self.table, float(np.exp(x))), size, self.repeat)
        return out

    def force_constant_slope(self, x: float) -> Array:
        """Return dΦ/dx, same shape; powers in closed form, the rest by a fourth-order difference."""
        size, step = self.crystal.size, 1e-3
        out = np.zeros((size, size, *self.repeat, 3, 3))
        for exponent, values in self.powers.items():
            out -= (exponent + 2.0) * np.exp(-(exponent + 2.0) * x) * values
        if len(self.table.bonds.first):
            for shift, weight in ((1, 8.0), (-1, -8.0), (2, -1.0), (-2, 1.0)):
                radial = radial_of(self.table, float(np.exp(x + shift * step)))
                out += weight / (12.0 * step) * folded_bonds(radial, size, self.repeat)
        return out


def periodic_crystal(model: PairModel, crystal: Crystal, repeat: tuple[int, int, int]) -> PeriodicCrystal:
    """Do the lattice sums of a periodic supercell once, for all scales."""
    particles = model.particles(crystal)
    powers = {n: supercell_force_constants(model.power_model(n), particles, repeat) for n in model.powers()}
    return PeriodicCrystal(crystal, repeat, powers, bond_table(model.short_model(), particles))


def fourier(values: Array) -> Complex:
    """Return Σ_L f(L) e^{iq·L} over the cell axes of an array (…, N₁, N₂, N₃)."""
    axes = (-3, -2, -1)
    return np.asarray(np.fft.ifftn(values, axes=axes) * np.prod(values.shape[-3:]))


def inverse_fourier(values: Complex) -> Array:
    """Return f(L) from its transform, real part; the inverse of :func:`fourier`."""
    return np.asarray(np.fft.fftn(values, axes=(-3, -2, -1)).real / np.prod(values.shape[-3:]))


def susceptibility(force_constants: Array) -> Complex:
    """Return G(q) = Φ(q)⁻¹ on the mesh, uniform displacements left out at Γ.

    Parameters
    ----------
    force_constants
        Shape (n, n, N₁, N₂, N₃, 3, 3), eV/Å².

    Returns
    -------
    Shape (N₁, N₂, N₃, 3n, 3n), Å²/eV, periodic in q; ⟨u u⟩ = k_B T G.

    Raises
    ------
    numpy.linalg.LinAlgError
        Φ(q) is not positive definite somewhere on the mesh.
    """
    size, repeat = len(force_constants), force_constants.shape[2:5]
    moved = fourier(force_constants.transpose(0, 5, 1, 6, 2, 3, 4).reshape(3 * size, 3 * size, *repeat))
    matrices = moved.transpose(2, 3, 4, 0, 1)
    matrices = 0.5 * (matrices + matrices.conj().swapaxes(-1, -2))
    uniform = np.tile(np.eye(3), (size, 1)) / np.sqrt(size)
    stiff = float(np.abs(matrices).max())
    rigid = uniform @ uniform.T
    matrices[0, 0, 0] += stiff * rigid
    np.linalg.cholesky(matrices)
    out = np.linalg.inv(matrices)
    out[0, 0, 0] -= rigid / stiff
    return np.asarray(out)
