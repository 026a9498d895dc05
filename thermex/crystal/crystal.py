"""The crystal: a primitive cell, its symmetry and what symmetry leaves free."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Crystal:
    """A primitive cell in the standard setting: conventional a along x, b in the xy plane, c along z.

    Everything is per primitive cell. A strain of this crystal is a vector x with one entry a free
    lattice parameter: the Cartesian directions ``axes[k]`` are stretched by exp(x[k]), so that
    x[k] = ln(lattice parameter k / its value in this crystal).
    """

    lattice: Array
    """Shape (3, 3), Å: primitive lattice vectors, one a row."""
    fractional: Array
    """Shape (n, 3): positions in units of the primitive lattice vectors."""
    symbols: tuple[str, ...]
    """n labels of the ions or atoms ("Mg", "O")."""
    masses: Array
    """Shape (n,), u."""
    conventional: NDArray[np.int64]
    """Shape (3, 3): conventional vectors = ``conventional @ lattice``."""
    axes: tuple[tuple[int, ...], ...]
    """Cartesian directions that stretch together: ((0, 1, 2),) cubic, ((0, 1), (2,)) axial."""
    axis_names: tuple[str, ...]
    """Name of each free lattice parameter: ("a",), ("a", "c"), ("a", "b", "c")."""
    rotations: NDArray[np.int64]
    """Shape (m, 3, 3): space-group operations r' = R r + t in fractional coordinates."""
    translations: Array
    """Shape (m, 3): their translations."""
    space_group: int
    """International number, 1 to 230."""
    formula: str
    """Formula unit, for example "Al2O3"."""
    formula_units: int
    """Formula units in the primitive cell."""
    displacements: Array
    """Shape (k, n, 3): orthonormal Cartesian basis of the inner displacements symmetry leaves free."""
    name: str = ""
    """Name of the structure type, or of the file it came from."""

    @property
    def size(self) -> int:
        """Number of atoms in the primitive cell."""
        return len(self.symbols)

    @property
    def volume(self) -> float:
        """Volume of the primitive cell, Å³."""
        return float(abs(np.linalg.det(self.lattice)))

    @property
    def cartesian(self) -> Array:
        """Positions, shape (n, 3), Å."""
        positions: Array = self.fractional @ self.lattice
        return positions

    @property
    def strain_trace(self) -> Array:
        """Shape (d,): d ln V / d x[k] (3 for cubic; 2 and 1 for a and c)."""
        return np.array([float(len(group)) for group in self.axes])

    @property
    def lattice_parameters(self) -> Array:
        """Shape (d,), Å: lengths of the conventional axes that are free."""
        lengths = np.linalg.norm(self.conventional @ self.lattice, axis=1)
        return np.array([lengths[group[0]] for group in self.axes])

    def strained(self, x: Array) -> Crystal:
        """Return the crystal stretched by exp(x[k]) along each free axis, fractions kept."""
        stretch = np.ones(3)
        for group, value in zip(self.axes, np.atleast_1d(x), strict=True):
            stretch[list(group)] = np.exp(value)
        return replace(self, lattice=self.lattice * stretch[None, :])

    def displaced(self, amplitudes: Array) -> Crystal:
        """Return the crystal with its free inner coordinates moved, amplitudes (k,) in Å."""
        shift = np.tensordot(amplitudes, self.displacements, axes=(0, 0))
        return replace(self, fractional=self.fractional + shift @ np.linalg.inv(self.lattice))
