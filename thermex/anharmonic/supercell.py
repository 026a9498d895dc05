"""The conventional cell of a cubic crystal, and how many of them a periodic supercell should hold."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from thermex.crystal.crystal import Crystal

Array = NDArray[np.float64]


def conventional_crystal(crystal: Crystal) -> Crystal:
    """Return the same cubic crystal described by its conventional cell (translations as operations).

    The space-group operations kept are the pure translations of the centring and the identity alone:
    enough for lattice sums, not for symmetry analysis.
    """
    cell = crystal.conventional @ crystal.lattice
    multiple = int(round(abs(float(np.linalg.det(crystal.conventional)))))
    reach = np.arange(-3, 4)
    shifts = np.stack(np.meshgrid(reach, reach, reach, indexing="ij"), axis=-1).reshape(-1, 3)
    fractional: list[Array] = []
    symbols: list[str] = []
    for position, symbol in zip(crystal.fractional, crystal.symbols, strict=True):
        images = (shifts + position) @ crystal.lattice @ np.linalg.inv(cell)
        inside = images[((images > -1e-6) & (images < 1.0 - 1e-6)).all(axis=1)]
        fractional.extend(inside)
        symbols.extend([symbol] * len(inside))
    return replace(
        crystal,
        lattice=cell,
        fractional=np.array(fractional),
        symbols=tuple(symbols),
        masses=np.repeat(crystal.masses, multiple),
        conventional=np.eye(3, dtype=np.int64),
        rotations=np.eye(3, dtype=np.int64)[None],
        translations=np.zeros((1, 3)),
        formula_units=crystal.formula_units * multiple,
        displacements=np.zeros((0, len(symbols), 3)),
    )
