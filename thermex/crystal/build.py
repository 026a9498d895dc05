"""From the words of a case to a crystal."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from thermex.case.case import CrystalSpec
from thermex.crystal.crystal import Crystal
from thermex.crystal.prototypes import Prototype, cell_of, find_prototype
from thermex.crystal.symmetry import crystal_of
from thermex.errors import InputError

Array = NDArray[np.float64]


def build_crystal(spec: CrystalSpec) -> Crystal:
    """Build the crystal of a case, from a prototype, a structure file or ASE atoms.

    Raises
    ------
    InputError
        The structure cannot be read or is not one that thermex can treat.
    """
    if spec.atoms is not None or spec.file is not None:
        from thermex.crystal.structure import crystal_from_atoms, crystal_from_file

        if spec.file is not None:
            return crystal_from_file(spec.file, spec.masses)
        return crystal_from_atoms(spec.atoms, spec.masses)
    if spec.prototype is None:
        raise InputError("no structure is given", where="crystal", fix="give prototype, file or atoms")
    prototype = find_prototype(spec.prototype)
    if len(spec.sites) != len(prototype.counts):
        raise InputError(
            f"{prototype.name} has {len(prototype.counts)} sites, {len(spec.sites)} given",
            where="crystal.sites",
            fix=f"name what sits on them{': ' + prototype.meaning if prototype.meaning else ''}",
        )
    masses = {s: mass_of(s, spec.masses) for s in spec.sites}
    lattice = dict(spec.lattice) or {"a": estimated_a(prototype, spec.sites)}
    vectors, positions, owners = cell_of(prototype, lattice, spec.inner)
    symbols = [spec.sites[k] for k in owners]
    order = list(dict.fromkeys(spec.sites))
    return crystal_of(vectors, positions, symbols, masses, order, prototype.name)


def element_of(label: str) -> str:
    """Return the chemical symbol at the head of a label ("Fe3" → "Fe").

    Raises
    ------
    InputError
        The label does not begin with a chemical symbol.
    """
    from ase.data import atomic_numbers

    for length in (2, 1):
        if label[:length] in atomic_numbers and label[:length] != "X":
            return label[:length]
    raise InputError(f'"{label}" does not begin with a chemical symbol', where="crystal.sites")


def mass_of(label: str, given: Mapping[str, float]) -> float:
    """Return the mass of a species in u: the one given, or the standard atomic weight ASE carries."""
    if label in given:
        return float(given[label])
    from ase.data import atomic_masses, atomic_numbers

    return float(atomic_masses[atomic_numbers[element_of(label)]])


def estimated_a(prototype: Prototype, sites: Sequence[str]) -> float:
    """Return a rough lattice parameter from the covalent radii that ASE carries (a start, no more)."""
    from ase.data import atomic_numbers, covalent_radii

    from thermex.potential.bonds import find_bonds

    vectors, positions, owners = cell_of(prototype, {"a": 1.0}, {})
    bonds = find_bonds(vectors, positions @ vectors, 1.1)
    radii = np.array([covalent_radii[atomic_numbers[element_of(sites[k])]] for k in owners])
    needed = (radii[bonds.first] + radii[bonds.second]) / bonds.length
    return 1.1 * float(needed.max())
