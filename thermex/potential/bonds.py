"""Pairs of particles within a distance, periodic images included."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Bonds:
    """Every ordered pair (i in the home cell, j in any cell) closer than a cutoff, r > 0."""

    first: Ints
    """Shape (nb,): index of i."""
    second: Ints
    """Shape (nb,): index of j."""
    cell: Ints
    """Shape (nb, 3): lattice translation of j."""
    vector: Array
    """Shape (nb, 3), Å: r_j + translation − r_i."""

    @property
    def length(self) -> Array:
        """Shape (nb,), Å."""
        return np.asarray(np.sqrt(np.einsum("bk,bk->b", self.vector, self.vector)))


def find_bonds(lattice: Array, positions: Array, cutoff: float) -> Bonds:
    """List every ordered pair with 0 < r < cutoff.

    Parameters
    ----------
    lattice
        Shape (3, 3), Å, rows.
    positions
        Shape (m, 3), Å; particles may coincide (r = 0 is left out).
    cutoff
        Å.
    """
    heights = 1.0 / np.linalg.norm(np.linalg.inv(lattice), axis=0)
    fractional = positions @ np.linalg.inv(lattice)
    spread = fractional.max(axis=0) - fractional.min(axis=0)
    reach = np.ceil(cutoff / heights + spread).astype(int)
    ranges = [np.arange(-n, n + 1) for n in reach]
    cells = np.stack(np.meshgrid(*ranges, indexing="ij"), axis=-1).reshape(-1, 3)
    shifts = cells @ lattice
    parts: list[tuple[Ints, Ints, Ints, Array]] = []
    for i in range(len(positions)):
        separation = positions[None, :, :] - positions[i] + shifts[:, None, :]
        squared = np.einsum("cjk,cjk->cj", separation, separation)
        where, j = np.nonzero((squared < cutoff**2) & (squared > 1e-12))
        parts.append((np.full(len(j), i), j, cells[where], separation[where, j]))
    first, second, cell, vector = (np.concatenate(column) for column in zip(*parts, strict=True))
    return Bonds(first, second, cell, vector)
