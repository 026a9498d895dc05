"""Structures from outside: files and ASE Atoms in, the primitive crystal out, and back again.

Only data are taken from a file; nothing in it is ever run. Charges in labels are ignored: they come from
the case alone.
"""

from __future__ import annotations

import warnings
from collections.abc import Mapping
from itertools import product
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from thermex.crystal.crystal import Crystal
from thermex.crystal.elements import element_of
from thermex.crystal.symmetry import crystal_of, distinct, wrapped
from thermex.errors import InputError

if TYPE_CHECKING:
    from ase import Atoms

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

#: Å: positions this far from a symmetric one still count as symmetric (coordinates of few digits).
FILE_TOLERANCE = 5e-3

#: Å: two atoms of one element this close are one, written with few digits.
MERGED = 0.02

#: Å: atoms closer than this cannot both be there.
OVERLAP = 0.5

#: Most atoms in a primitive cell.
MOST_ATOMS = 400

#: Most atoms in a cell whose symmetry is looked for.
MOST_IN_CELL = 3200


def crystal_from_file(path: Path, masses: Mapping[str, float] | None = None) -> Crystal:
    """Read a structure file (anything ASE reads) and reduce it to its primitive cell.

    Raises
    ------
    InputError
        The file cannot be read, holds no crystal or several, or :func:`crystal_from_atoms` refuses it.
    """
    if not path.is_file():
        raise InputError("there is no such structure file", where=str(path), fix="check crystal.file")
    frames = _frames(path)
    if len(frames) != 1:
        raise InputError(
            f"holds {len(frames)} structures", where=path.name, fix="give a file with the one that is meant"
        )
    return crystal_from_atoms(frames[0], masses, path.name)


def _frames(path: Path) -> list[Any]:
    from ase.io import read

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            found = read(str(path), index=":", do_not_split_by_at_sign=True)
    except Exception as error:  # readers of some hundred formats fail in as many ways
        reason = " ".join(str(error).split())[:200] or type(error).__name__
        raise InputError(
            f"cannot be read as a structure ({reason})",
            where=path.name,
            fix="give a CIF or another format that ASE reads",
        ) from error
    return found if isinstance(found, list) else [found]


def crystal_from_atoms(atoms: object, masses: Mapping[str, float] | None = None, name: str = "atoms") -> Crystal:
    """Reduce ASE Atoms to the primitive cell in the standard setting.

    Symmetry is found to within 0.005 Å and the positions are made exactly symmetric.

    Parameters
    ----------
    masses
        u, by element, in place of those of the Atoms.
    name
        Name of the structure in messages; also the name of the crystal.

    Raises
    ------
    InputError
        Not Atoms, not periodic, no volume, overlapping atoms, a partly occupied site, monoclinic or
        triclinic, too large, or two masses for one element.
    """
    from ase import Atoms

    if not isinstance(atoms, Atoms):
        raise InputError(f"{type(atoms).__name__} is not an ASE Atoms object", where=name, fix="give one")
    _refuse_no_crystal(atoms, name)
    _refuse_partial(atoms, name)
    whole = _without_repeats(atoms, name)
    symbols = list(whole.symbols)
    own = _masses(whole, name) | dict(masses or {})
    crystal = crystal_of(
        np.array(whole.cell.array),
        whole.get_scaled_positions(),
        symbols,
        own,
        list(dict.fromkeys(symbols)),
        name,
        FILE_TOLERANCE,
    )
    if crystal.size > MOST_ATOMS:
        raise InputError(
            f"{crystal.size} atoms in the primitive cell",
            where=name,
            fix=f"at most {MOST_ATOMS} can be treated",
        )
    return crystal


def _refuse_no_crystal(atoms: Any, name: str) -> None:
    """Refuse what is not a three-dimensional crystal of elements at finite positions."""
    checks = (
        (len(atoms) == 0, "holds no atoms", "give a crystal"),
        (
            not (np.isfinite(atoms.positions).all() and np.isfinite(atoms.cell.array).all()),
            "holds positions or a cell that are not numbers",
            "mend them",
        ),
        (not atoms.pbc.all(), "is not periodic in three directions", "give a crystal with its cell"),
        (
            abs(np.linalg.det(atoms.cell.array)) < 1e-3,
            "has a cell without volume",
            "give three independent cell vectors",
        ),
        (bool((atoms.numbers < 1).any()), "holds an atom that is no element", "give every atom its element"),
        (
            len(atoms) > MOST_IN_CELL,
            f"has {len(atoms)} atoms in its cell",
            f"give the unit cell, at most {MOST_IN_CELL}",
        ),
    )
    for wrong, what, fix in checks:
        if wrong:
            raise InputError(what, where=name, fix=fix)


def _refuse_partial(atoms: Any, name: str) -> None:
    """Refuse sites that are shared or not always occupied."""
    table = atoms.info.get("occupancy") or {}
    shares = table.values() if isinstance(table, dict) else []
    for share in shares:
        if len(share) != 1 or any(abs(float(value) - 1.0) > 1e-3 for value in share.values()):
            words = ", ".join(f"{symbol} {float(value):g}" for symbol, value in share.items())
            raise InputError(f"a site is partly occupied ({words})", where=name, fix="give an ordered structure")


def _without_repeats(atoms: Any, name: str) -> Any:
    """Put atoms written several times for want of digits at their mean; refuse others that overlap."""
    from ase import neighborlist

    search: Any = neighborlist.neighbor_list
    first, second, distance, vector = search("ijdD", atoms, OVERLAP)
    if not len(first):
        return atoms
    numbers = atoms.numbers
    wrong = (distance > MERGED) | (first == second) | (numbers[first] != numbers[second])
    if wrong.any():
        k = int(np.argmax(wrong))
        raise InputError(
            f"{atoms.symbols[first[k]]} and {atoms.symbols[second[k]]} overlap, {distance[k]:.3f} Å apart",
            where=name,
            fix="check the positions and the space group",
        )
    whole = atoms.copy()
    shift = np.zeros((len(atoms), 3))
    np.add.at(shift, first, vector)
    whole.positions += shift / (1.0 + np.bincount(first, minlength=len(atoms)))[:, None]
    repeated = set(np.maximum(first, second).tolist())
    return whole[[i for i in range(len(atoms)) if i not in repeated]]


def _masses(atoms: Any, name: str) -> dict[str, float]:
    """Return the mass of each element, u, in order of appearance."""
    masses: dict[str, float] = {}
    for symbol, mass in zip(atoms.symbols, atoms.get_masses(), strict=True):
        if abs(masses.setdefault(symbol, float(mass)) - mass) > 1e-9:
            raise InputError(
                f"{symbol} has two masses, {masses[symbol]:g} and {mass:g} u",
                where=name,
                fix="give one mass an element",
            )
    return masses


def to_atoms(crystal: Crystal) -> Atoms:
    """Return the primitive cell as ASE Atoms, masses included."""
    return _atoms(crystal, crystal.lattice, crystal.fractional, np.arange(crystal.size))


def to_conventional_atoms(crystal: Crystal) -> Atoms:
    """Return the conventional cell as ASE Atoms, the images of each atom one after the other."""
    inverse = np.linalg.inv(crystal.conventional)
    steps = np.array(list(product(range(-2, 3), repeat=3)))
    steps = steps[np.argsort(np.abs(steps).sum(axis=1), kind="stable")]
    shifts = wrapped(steps @ inverse)
    shifts = shifts[distinct(shifts)]
    fractional = wrapped((crystal.fractional @ inverse)[:, None] + shifts[None]).reshape(-1, 3)
    owner = np.arange(crystal.size).repeat(len(shifts))
    return _atoms(crystal, crystal.conventional @ crystal.lattice, fractional, owner)


def _atoms(crystal: Crystal, cell: Array, fractional: Array, owner: Ints) -> Atoms:
    from ase import Atoms

    symbols = [element_of(crystal.symbols[i]) for i in owner]
    return Atoms(symbols, scaled_positions=fractional, cell=cell, pbc=True, masses=crystal.masses[owner])
