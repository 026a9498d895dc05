"""Structures from files and from ASE, and back."""

from __future__ import annotations

import warnings
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from thermex.crystal.crystal import Crystal
from thermex.crystal.symmetry import crystal_of
from thermex.errors import InputError

#: Largest primitive cell accepted, atoms.
MOST_ATOMS = 400

#: Distance below which two atoms overlap, Å.
OVERLAP = 0.5

#: Symmetry tolerance for structures from files, whose coordinates are rounded, Å.
FILE_TOLERANCE = 1e-3


def crystal_from_file(path: Path, masses: Mapping[str, float]) -> Crystal:
    """Read a structure file (anything ASE reads) and reduce it to its primitive cell.

    Raises
    ------
    InputError
        The file cannot be read, is not a crystal, or holds partially occupied sites.
    """
    import ase.io

    if path.suffix.lower() in {".py", ".db", ".traj", ".json"}:
        raise InputError(f"{path.suffix} files are not read as structures", where=path.name, fix="give a CIF")
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            atoms = ase.io.read(str(path))
    except Exception as error:  # every reader of ASE fails in its own way
        reason = " ".join(str(error).split())[:200] or type(error).__name__
        raise InputError(
            f"cannot be read as a structure ({reason})",
            where=path.name,
            fix="give a CIF or another file ASE reads",
        ) from None
    return crystal_from_atoms(atoms[-1] if isinstance(atoms, list) else atoms, masses, path.name)


def crystal_from_atoms(atoms: Any, masses: Mapping[str, float], name: str = "atoms") -> Crystal:
    """Reduce ASE atoms to a primitive crystal; masses as given, else those of the atoms."""
    _refuse(atoms, name)
    symbols = list(atoms.get_chemical_symbols())
    own = dict(zip(symbols, map(float, atoms.get_masses()), strict=True))
    crystal = crystal_of(
        np.array(atoms.cell),
        atoms.get_scaled_positions(),
        symbols,
        {**own, **masses},
        list(dict.fromkeys(symbols)),
        name,
        FILE_TOLERANCE,
    )
    if crystal.size > MOST_ATOMS:
        raise InputError(
            f"{crystal.size} atoms in the primitive cell", where=name, fix=f"at most {MOST_ATOMS}"
        )
    return crystal


def _refuse(atoms: Any, name: str) -> None:
    if not hasattr(atoms, "get_scaled_positions"):
        raise InputError(f"{type(atoms).__name__} is not an ASE Atoms object", where=name)
    if len(atoms) == 0 or not np.isfinite(np.array(atoms.positions)).all():
        raise InputError("holds no atoms, or positions that are not numbers", where=name)
    if not all(atoms.pbc) or abs(atoms.cell.volume) < 1.0:
        raise InputError("is not periodic in three directions: not a crystal", where=name, fix="give a cell")
    occupancy = atoms.info.get("occupancy") or {}
    for site, shares in occupancy.items():
        if len(shares) > 1 or any(abs(float(v) - 1.0) > 1e-6 for v in shares.values()):
            raise InputError(
                f"site {site} is partially occupied ({shares})", where=name, fix="give an ordered structure"
            )
    if len(atoms) > 1 and len(atoms) <= 2000:
        distances = atoms.get_all_distances(mic=True)
        np.fill_diagonal(distances, np.inf)
        if distances.min() < OVERLAP:
            raise InputError(
                f"two atoms are {distances.min():.3f} Å apart", where=name, fix="remove the double"
            )


def to_atoms(crystal: Crystal) -> Any:
    """Return the primitive cell as ASE Atoms."""
    from ase import Atoms

    from thermex.crystal.build import element_of

    return Atoms(
        [element_of(s) for s in crystal.symbols],
        cell=crystal.lattice,
        scaled_positions=crystal.fractional,
        masses=crystal.masses,
        pbc=True,
    )


def to_conventional_atoms(crystal: Crystal) -> Any:
    """Return the conventional cell as ASE Atoms."""
    from ase.build import make_supercell

    return make_supercell(to_atoms(crystal), crystal.conventional)
