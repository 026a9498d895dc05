"""The conventional cell of a cubic crystal and the bonds of a supercell made of it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from thermex.anharmonic.vertices import BareBonds, bare_bonds
from thermex.crystal.crystal import Crystal
from thermex.potential.model import PairModel

Array = NDArray[np.float64]


def conventional_crystal(crystal: Crystal) -> Crystal:
    """Return the same cubic crystal described by its conventional cell (translations as operations).

    The space-group operations kept are the pure translations of the centring and the identity alone:
    enough for lattice sums, not for symmetry analysis.
    """
    cell = crystal.conventional @ crystal.lattice
    multiple = round(abs(float(np.linalg.det(crystal.conventional))))
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


def supercell_bonds(model: PairModel, cell: Crystal, repeat: int, reach: float) -> BareBonds:
    """List the bonds of ``repeat``³ cells, atoms numbered as (index of the cell)·n + atom.

    Parameters
    ----------
    reach
        Å, at x = 0.
    """
    axis = np.arange(repeat)
    cells = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1).reshape(-1, 3)
    fractional = (cells[:, None, :] + cell.fractional[None, :, :]).reshape(-1, 3) / repeat
    whole = replace(
        cell,
        lattice=cell.lattice * repeat,
        fractional=fractional,
        symbols=cell.symbols * len(cells),
        masses=np.tile(cell.masses, len(cells)),
    )
    return bare_bonds(model, model.particles(whole), reach)
