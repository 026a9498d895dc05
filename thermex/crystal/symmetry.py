"""Symmetry of a structure: its primitive cell in the standard setting and what symmetry leaves free."""

from __future__ import annotations

from collections.abc import Sequence
from functools import reduce
from math import gcd

import numpy as np
import spglib
from numpy.typing import NDArray

from thermex.crystal.crystal import Crystal
from thermex.errors import InputError

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

#: Distance within which two positions are the same, Å.
TOLERANCE = 1e-4


def crystal_of(
    lattice: Array,
    fractional: Array,
    symbols: Sequence[str],
    masses: dict[str, float],
    order: Sequence[str],
    name: str,
    tolerance: float = TOLERANCE,
) -> Crystal:
    """Reduce any periodic cell to its primitive cell in the standard setting.

    Parameters
    ----------
    lattice
        Shape (3, 3), Å, rows.
    fractional
        Shape (n, 3).
    symbols
        n labels.
    masses
        u, by label.
    order
        Order of the labels in the formula.
    name
        Name of the structure, for messages.
    tolerance
        Å, within which symmetry is recognised.

    Raises
    ------
    InputError
        No symmetry can be found (overlapping atoms), or the crystal is monoclinic or triclinic.
    """
    labels = list(order)
    numbers = [labels.index(s) + 1 for s in symbols]
    cell = (np.asarray(lattice, float), np.asarray(fractional, float), numbers)
    try:
        dataset = spglib.get_symmetry_dataset(cell, symprec=tolerance)
        standard = spglib.standardize_cell(cell, to_primitive=False, no_idealize=False, symprec=tolerance)
        primitive = spglib.standardize_cell(cell, to_primitive=True, no_idealize=False, symprec=tolerance)
    except Exception as error:
        raise InputError(
            f"no symmetry was found ({error})", where=name, fix="look for overlapping atoms"
        ) from None
    if dataset is None or standard is None or primitive is None:
        raise InputError("no symmetry was found", where=name, fix="look for overlapping atoms")
    conventional = np.rint(standard[0] @ np.linalg.inv(primitive[0])).astype(np.int64)
    axes, names = _axes(int(dataset.number), name)
    sorting = np.argsort(primitive[2], kind="stable")
    positions = (primitive[1][sorting] + 1e-9) % 1.0 - 1e-9
    kinds = np.asarray(primitive[2])[sorting]
    operations = spglib.get_symmetry((primitive[0], positions, kinds), symprec=tolerance)
    chosen = tuple(labels[k - 1] for k in kinds)
    formula, units = _formula(chosen, labels)
    rotations = np.asarray(operations["rotations"], dtype=np.int64)
    translations = np.asarray(operations["translations"], dtype=float)
    return Crystal(
        lattice=np.asarray(primitive[0], dtype=float),
        fractional=positions,
        symbols=chosen,
        masses=np.array([masses[s] for s in chosen]),
        conventional=conventional,
        axes=axes,
        axis_names=names,
        rotations=rotations,
        translations=translations,
        space_group=int(dataset.number),
        formula=formula,
        formula_units=units,
        displacements=invariant_displacements(primitive[0], positions, rotations, translations),
        name=name,
    )


def _axes(number: int, name: str) -> tuple[tuple[tuple[int, ...], ...], tuple[str, ...]]:
    """Return which Cartesian directions stretch together, from the space-group number."""
    if number >= 195:
        return ((0, 1, 2),), ("a",)
    if number >= 75:
        return ((0, 1), (2,)), ("a", "c")
    if number >= 16:
        return ((0,), (1,), (2,)), ("a", "b", "c")
    system = "monoclinic" if number >= 3 else "triclinic"
    raise InputError(
        f"the crystal is {system} (space group {number})",
        where=name,
        fix="crystals with free angles are not supported: give an orthorhombic or more symmetric one",
    )


def _formula(symbols: Sequence[str], order: Sequence[str]) -> tuple[str, int]:
    """Return the formula unit and how many of them the cell holds."""
    counts = [symbols.count(s) for s in order if s in symbols]
    units = reduce(gcd, counts)
    present = [s for s in order if s in symbols]
    parts = [f"{s}{c // units}" if c // units > 1 else s for s, c in zip(present, counts, strict=True)]
    return "".join(parts), units


def site_mapping(fractional: Array, rotation: Ints, translation: Array) -> Ints:
    """Return which atom each atom is moved onto, shape (n,), by one operation."""
    moved = fractional @ rotation.T + translation
    difference = moved[:, None, :] - fractional[None, :, :]
    difference -= np.rint(difference)
    return np.asarray(np.argmin(np.abs(difference).sum(axis=2), axis=1))


def invariant_fields(lattice: Array, fractional: Array, rotations: Ints, translations: Array) -> Array:
    """Return an orthonormal basis (k, n, 3) of the vector fields on atoms that symmetry leaves unchanged."""
    n = len(fractional)
    to_cartesian, to_fractional = np.asarray(lattice).T, np.linalg.inv(np.asarray(lattice).T)
    projector = np.zeros((n, 3, n, 3))
    for rotation, translation in zip(rotations, translations, strict=True):
        matrix = to_cartesian @ rotation @ to_fractional
        target = site_mapping(fractional, rotation, translation)
        projector[target, :, np.arange(n), :] += matrix
    values, vectors = np.linalg.eigh(projector.reshape(3 * n, 3 * n) / len(rotations))
    return np.asarray(vectors[:, values > 0.5].T.reshape(-1, n, 3))


def invariant_displacements(lattice: Array, fractional: Array, rotations: Ints, translations: Array) -> Array:
    """Return the basis (k, n, 3) of symmetry-allowed inner displacements, rigid translations removed."""
    fields = invariant_fields(lattice, fractional, rotations, translations)
    n = len(fractional)
    rigid = np.tile(np.eye(3)[:, None, :], (1, n, 1)).reshape(3, 3 * n) / np.sqrt(n)
    flat = fields.reshape(-1, 3 * n)
    inner = flat - flat @ rigid.T @ rigid
    _, sizes, rows = np.linalg.svd(inner, full_matrices=False)
    return np.asarray(rows[sizes > 1e-6].reshape(-1, n, 3))
