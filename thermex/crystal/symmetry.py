"""Symmetry of a crystal: settings, operations in the primitive cell, free axes and free displacements."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from dataclasses import replace
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from thermex.crystal.crystal import Crystal
from thermex.crystal.elements import conventional_formula
from thermex.errors import InputError

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

#: Two fractional positions closer than this are one.
SAME = 1e-4

#: Å within which a position counts as symmetric, where nothing else is said.
TOLERANCE = 1e-4

#: Primitive vectors (rows) in units of the conventional ones, by centring letter.
PRIMITIVE: dict[str, tuple[tuple[float, float, float], ...]] = {
    "P": ((1, 0, 0), (0, 1, 0), (0, 0, 1)),
    "I": ((-0.5, 0.5, 0.5), (0.5, -0.5, 0.5), (0.5, 0.5, -0.5)),
    "F": ((0, 0.5, 0.5), (0.5, 0, 0.5), (0.5, 0.5, 0)),
    "A": ((1, 0, 0), (0, 0.5, -0.5), (0, 0.5, 0.5)),
    "B": ((0.5, 0, -0.5), (0, 1, 0), (0.5, 0, 0.5)),
    "C": ((0.5, -0.5, 0), (0.5, 0.5, 0), (0, 0, 1)),
    "R": ((2 / 3, 1 / 3, 1 / 3), (-1 / 3, 1 / 3, 1 / 3), (-1 / 3, -2 / 3, 1 / 3)),
}


def primitive_vectors(centring: str) -> Array:
    """Return primitive vectors (rows) in units of the conventional ones, shape (3, 3)."""
    return np.array(PRIMITIVE[centring], dtype=float)


def conventional_lattice(space_group: int, lengths: tuple[float, float, float]) -> Array:
    """Return conventional vectors (rows), Å: a along x, b in the xy plane, c along z.

    Trigonal and hexagonal crystals have hexagonal axes (120° between a and b).
    """
    a, b, c = lengths
    if 143 <= space_group <= 194:
        return np.array([[a, 0.0, 0.0], [-0.5 * a, np.sqrt(0.75) * a, 0.0], [0.0, 0.0, c]])
    return np.diag([a, b, c])


def free_axes(space_group: int, where: str = "") -> tuple[tuple[tuple[int, ...], ...], tuple[str, ...]]:
    """Return the groups of Cartesian directions that stretch together, and the names of the axes.

    Raises
    ------
    InputError
        Monoclinic or triclinic: the cell angles would be free too.
    """
    if space_group < 16:
        system = "triclinic" if space_group < 3 else "monoclinic"
        raise InputError(
            f"the crystal is {system} (space group {space_group})",
            where=where,
            fix="only crystals whose cell angles symmetry fixes can be treated (orthorhombic, tetragonal, "
            "trigonal, hexagonal, cubic)",
        )
    if space_group < 75:
        return ((0,), (1,), (2,)), ("a", "b", "c")
    if space_group < 195:
        return ((0, 1), (2,)), ("a", "c")
    return ((0, 1, 2),), ("a",)


@lru_cache(maxsize=32)
def tabulated_operations(hall: int, centring: str) -> tuple[Ints, Array]:
    """Return the operations of a tabulated setting in the fractional coordinates of the primitive cell.

    Parameters
    ----------
    hall
        Hall number of the setting, 1 to 530.
    centring
        Letter that picks the primitive cell.

    Returns
    -------
    rotations, translations
        Shapes (m, 3, 3) and (m, 3), read-only: r' = R r + t, each operation of the primitive cell once.
    """
    import spglib

    table = _quietly(spglib.get_symmetry_from_database, hall)
    primitive = primitive_vectors(centring)
    change = np.linalg.inv(primitive).T
    rotations = np.rint(change @ table["rotations"] @ primitive.T).astype(np.int64)
    translations = wrapped(table["translations"] @ change.T)
    steps = np.rint(24 * translations).astype(np.int64) % 24
    keys = np.concatenate([rotations.reshape(-1, 9), steps], axis=1)
    first = np.sort(np.unique(keys, axis=0, return_index=True)[1])
    rotations, translations = rotations[first], translations[first]
    rotations.flags.writeable = translations.flags.writeable = False
    return rotations, translations


def wrapped(fractional: Array) -> Array:
    """Bring fractions into [0, 1), with values a rounding error below 1 taken as 0."""
    inside = np.mod(fractional, 1.0)
    return np.where(np.abs(inside - 1.0) < 1e-9, 0.0, inside)


def distinct(fractional: Array) -> Ints:
    """Return the indices of the positions that repeat no earlier one (modulo the lattice)."""
    gap = fractional[:, None] - fractional[None]
    same = (np.abs(gap - np.rint(gap)) < SAME).all(axis=-1)
    first = same.argmax(axis=1)
    return np.nonzero(first == np.arange(len(fractional)))[0]


def orbit(point: Array, rotations: Ints, translations: Array) -> Array:
    """Return all positions that symmetry makes of one, shape (n, 3), fractions of the same cell."""
    images = wrapped(rotations @ point + translations)
    return images[distinct(images)]


def site_mapping(fractional: Array, rotation: Ints, translation: Array) -> Ints:
    """Return the atom onto which one operation carries each atom, shape (n,)."""
    target, _ = _mapping(fractional, rotation, translation)
    return target


def _mapping(fractional: Array, rotation: Ints, translation: Array) -> tuple[Ints, float]:
    """Return the atom each atom is carried onto, and the worst miss as a fraction of the cell."""
    gap = (fractional @ rotation.T + translation)[:, None] - fractional[None]
    miss = np.abs(gap - np.rint(gap)).max(axis=-1)
    target = miss.argmin(axis=1)
    return target, float(miss[np.arange(len(target)), target].max())


def invariant_fields(lattice: Array, fractional: Array, rotations: Ints, translations: Array) -> Array:
    """Return an orthonormal Cartesian basis of the vector fields on atoms that symmetry leaves unchanged.

    Parameters
    ----------
    lattice
        Shape (3, 3), Å, rows.
    fractional
        Shape (n, 3).
    rotations, translations
        Shapes (m, 3, 3) and (m, 3): operations in fractional coordinates.

    Returns
    -------
    Array
        Shape (k, n, 3).
    """
    return _range_of(_group_average(lattice, fractional, rotations, translations))


def invariant_displacements(lattice: Array, fractional: Array, rotations: Ints, translations: Array) -> Array:
    """Return the basis (k, n, 3) of the free inner displacements; see :func:`invariant_fields`.

    Uniform shifts of the whole crystal, which polar groups leave free, are removed with equal weight
    on all atoms. k = 0 where symmetry fixes all sites.
    """
    average = _group_average(lattice, fractional, rotations, translations)
    size = len(fractional)
    shift = np.tile(np.eye(3), (size, 1)) / np.sqrt(size)
    return _range_of(average - shift @ (shift.T @ average))


def _group_average(lattice: Array, fractional: Array, rotations: Ints, translations: Array) -> Array:
    """Return the projector on invariant vector fields, shape (3n, 3n)."""
    size = len(fractional)
    cartesian = lattice.T @ rotations @ np.linalg.inv(lattice.T)
    average = np.zeros((size, 3, size, 3))
    for rotation, translation, matrix in zip(rotations, translations, cartesian, strict=True):
        target = site_mapping(fractional, rotation, translation)
        average[target, :, np.arange(size), :] += matrix / len(rotations)
    return average.reshape(3 * size, 3 * size)


def _range_of(projector: Array) -> Array:
    """Return an orthonormal basis (k, n, 3) of the range of a projector, earlier columns first."""
    rank = round(float(np.trace(projector)))
    rows: list[Array] = []
    for column in projector.T:
        if len(rows) == rank:
            break
        for row in rows:
            column = column - (row @ column) * row
        length = float(np.linalg.norm(column))
        if length > 1e-3:
            rows.append(column / length)
    return np.array(rows).reshape(rank, len(projector) // 3, 3)


def symmetric_crystal(
    lattice: Array,
    conventional: Ints,
    fractional: Array,
    symbols: tuple[str, ...],
    masses: Array,
    space_group: int,
    operations: tuple[Ints, Array],
    formula: tuple[str, int],
    name: str,
) -> Crystal:
    """Put a crystal together: check its operations and find what symmetry leaves free.

    Parameters
    ----------
    operations
        Rotations (m, 3, 3) and translations (m, 3) in the primitive cell.
    formula
        Formula unit, and how many of them the primitive cell holds.

    Raises
    ------
    InputError
        The atoms do not obey the operations, or the crystal system is not supported.
    """
    axes, axis_names = free_axes(space_group, name)
    _refuse_asymmetric(fractional, symbols, operations, name)
    return Crystal(
        lattice=lattice,
        fractional=fractional,
        symbols=symbols,
        masses=masses,
        conventional=conventional,
        axes=axes,
        axis_names=axis_names,
        rotations=operations[0],
        translations=operations[1],
        space_group=space_group,
        formula=formula[0],
        formula_units=formula[1],
        displacements=invariant_displacements(lattice, fractional, *operations),
        name=name,
    )


def _refuse_asymmetric(fractional: Array, symbols: tuple[str, ...], operations: tuple[Ints, Array], name: str) -> None:
    names = np.array(symbols)
    for rotation, translation in zip(*operations, strict=True):
        target, miss = _mapping(fractional, rotation, translation)
        if miss > SAME or (names[target] != names).any():
            raise InputError(
                "the atoms do not obey the symmetry found for them",
                where=name,
                fix="give the positions with more digits",
            )


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

    Positions are made exactly symmetric. An orthorhombic crystal given in a conventional cell keeps the
    names of its axes (Pbnm stays Pbnm); otherwise the standard setting rules.

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
        Order of the labels in the cell.
    name
        Name of the structure, for messages.
    tolerance
        Å, within which symmetry is recognised.

    Raises
    ------
    InputError
        No symmetry can be found, or the crystal is monoclinic or triclinic.
    """
    labels = list(order)
    types = [labels.index(symbol) for symbol in symbols]
    data = symmetry_dataset((lattice, fractional, types), name, tolerance)
    number, centring = int(data.number), str(data.international)[0]
    free_axes(number, name)
    primitive = primitive_vectors(centring)
    positions = wrapped(np.array(data.std_positions, dtype=float) @ np.linalg.inv(primitive))
    kept = distinct(positions)
    kept = kept[np.argsort(np.array(data.std_types)[kept], kind="stable")]
    chosen = tuple(labels[t] for t in np.array(data.std_types)[kept])
    a, b, c = (float(length) for length in np.linalg.norm(data.std_lattice, axis=1))
    integers = np.rint(np.linalg.inv(primitive)).astype(np.int64)
    change = np.array(data.transformation_matrix)
    integers, box = _with_own_axes(integers, conventional_lattice(number, (a, b, c)), change, number)
    return symmetric_crystal(
        np.linalg.inv(integers) @ box,
        integers,
        positions[kept],
        chosen,
        np.array([masses[s] for s in chosen]),
        number,
        tabulated_operations(int(data.hall_number), centring),
        conventional_formula(chosen),
        name,
    )


def symmetry_dataset(cell: tuple[Array, Array, list[int]], name: str, tolerance: float) -> Any:
    """Return what spglib finds for a cell (lattice, fractional positions, types).

    Raises
    ------
    InputError
        It finds nothing (overlapping atoms), or the cell is not made of finite numbers.
    """
    import spglib

    try:
        finite = np.isfinite(cell[0]).all() and np.isfinite(cell[1]).all()
        data = _quietly(spglib.get_symmetry_dataset, cell, tolerance) if finite else None
    except Exception as error:  # spglib has a dozen reasons; all mean the same here
        raise _no_symmetry(name) from error
    if data is None:
        raise _no_symmetry(name)
    return data


def _quietly(function: Any, *arguments: object) -> Any:
    """Call spglib, which announces the end of its old way with errors at every call."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        return function(*arguments)


def _no_symmetry(name: str) -> InputError:
    return InputError("no symmetry was found", where=name, fix="look for overlapping atoms")


def _with_own_axes(integers: Ints, box: Array, change: Array, number: int) -> tuple[Ints, Array]:
    """Give the axes of an orthorhombic crystal the order they have in the input cell.

    ``change`` takes fractions of the input cell to the standard one: a signed permutation where the
    input cell is conventional.
    """
    absolute = np.abs(change)
    source = np.rint(absolute).astype(int)
    single = np.allclose(absolute, source, atol=1e-3)
    single = single and (source.sum(axis=0) == 1).all() and (source.sum(axis=1) == 1).all()
    if not (16 <= number <= 74 and single):
        return integers, box
    order = source.argmax(axis=0)
    sign = np.ones(3, dtype=np.int64)
    sign[2] = round(float(np.linalg.det(np.eye(3)[order])))
    return integers[order] * sign[:, None], np.diag(np.diag(box)[order])


def treated_as_tetragonal(crystal: Crystal) -> Crystal:
    """Return a cubic crystal with c free of a, for comparing the general road with the cubic one."""
    return _with_axes(crystal, ((0, 1), (2,)), ("a", "c"))


def treated_as_orthorhombic(crystal: Crystal) -> Crystal:
    """Return a cubic crystal with a, b and c free of one another."""
    return _with_axes(crystal, ((0,), (1,), (2,)), ("a", "b", "c"))


def _with_axes(crystal: Crystal, axes: tuple[tuple[int, ...], ...], names: tuple[str, ...]) -> Crystal:
    """Free some axes of a crystal; only the operations that keep each group of axes to itself remain."""
    lattice = crystal.lattice.T
    cartesian = lattice @ crystal.rotations @ np.linalg.inv(lattice)
    group = np.repeat(np.arange(len(axes)), [len(axis) for axis in axes])
    apart = group[:, None] != group[None, :]
    keep = (np.abs(cartesian[:, apart]) < 1e-6).all(axis=1)
    rotations, translations = crystal.rotations[keep], crystal.translations[keep]
    return replace(
        crystal,
        axes=axes,
        axis_names=names,
        rotations=rotations,
        translations=translations,
        displacements=invariant_displacements(crystal.lattice, crystal.fractional, rotations, translations),
    )
