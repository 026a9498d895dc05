"""From what the user wrote about the crystal to the crystal itself."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from itertools import product

import numpy as np
from numpy.typing import NDArray

from thermex.case.case import CrystalSpec
from thermex.crystal.crystal import Crystal
from thermex.crystal.elements import element_of, formula_in_order, mass_of
from thermex.crystal.prototypes import Prototype, find_prototype
from thermex.crystal.symmetry import (
    TOLERANCE,
    conventional_lattice,
    orbit,
    primitive_vectors,
    symmetric_crystal,
    symmetry_dataset,
    tabulated_operations,
)
from thermex.errors import Fault, InputError

Array = NDArray[np.float64]

#: Elements that touch at van der Waals distance.
NOBLE = ("He", "Ne", "Ar", "Kr", "Xe", "Rn")


def build_crystal(spec: CrystalSpec, source: str = "") -> Crystal:
    """Build the crystal of a case at its start values, from a prototype, a file or ASE Atoms.

    Parameters
    ----------
    source
        Name of the case file, for messages.

    Raises
    ------
    InputError
        Anything about the crystal is wrong; all faults found at once.
    """
    given = [spec.prototype is not None, spec.file is not None, spec.atoms is not None]
    if sum(given) != 1:
        what = "no structure is given" if not any(given) else "more than one structure is given"
        raise _error(source, [Fault("crystal", what, "give prototype or file, one of them")])
    if spec.prototype is not None:
        return _on_prototype(spec, source)
    from thermex.crystal.structure import crystal_from_atoms, crystal_from_file

    crystal = crystal_from_file(spec.file) if spec.file is not None else crystal_from_atoms(spec.atoms)
    faults = [
        *(Fault(f"crystal.inner.{key}", "only a prototype takes inner coordinates") for key in spec.inner),
        *_lattice_faults(spec.lattice, crystal.axis_names),
        *_mass_faults(spec.masses, crystal.symbols),
    ]
    if faults:
        raise _error(source, faults)
    return _with_masses(_with_lattice(crystal, spec.lattice), spec.masses)


def _error(source: str, faults: Sequence[Fault]) -> InputError:
    return InputError.of(source or "case", faults)


def _on_prototype(spec: CrystalSpec, source: str) -> Crystal:
    """Place species on a structure type."""
    where = f"{source}: crystal.prototype" if source else "crystal.prototype"
    prototype = find_prototype(spec.prototype or "", where)
    faults = [
        *_site_faults(prototype, spec.sites),
        *_lattice_faults(spec.lattice, prototype.parameter_names),
        *_inner_faults(prototype, spec.inner),
        *_mass_faults(spec.masses, spec.sites),
    ]
    if faults:
        raise _error(source, faults)
    crystal = prototype_crystal(prototype, spec.sites, spec.lattice, spec.inner)
    if fault := _merging_fault(prototype, spec.sites, crystal):
        raise _error(source, [fault])
    return _with_masses(crystal, spec.masses)


def prototype_crystal(
    prototype: Prototype,
    sites: tuple[str, ...],
    lattice: Mapping[str, float],
    inner: Mapping[str, float],
) -> Crystal:
    """Return a structure type with given species and the standard atomic weights that ASE carries.

    Parameters
    ----------
    sites
        Element symbols, or labels that begin with one ("Fe3"), in the order of the prototype's sites.
    lattice
        a and c, Å. What is missing follows from the default c/a; without any, the nearest atoms are
        put at the sum of their covalent radii (van der Waals radii for rare gases), a rough start
        within about 15 % for the static relaxation.
    inner
        Inner coordinates; what is missing has the default of the prototype.
    """
    values = {coordinate.name: coordinate.start for coordinate in prototype.inner} | dict(inner)
    operations = tabulated_operations(prototype.hall, prototype.centring)
    primitive = primitive_vectors(prototype.centring)
    points = np.array([_point(site.position, values) for site in prototype.sites]) @ np.linalg.inv(primitive)
    groups = [orbit(point, *operations) for point in points]
    symbols = tuple(s for s, group in zip(sites, groups, strict=True) for _ in group)
    fractional = np.concatenate(groups)
    ratio = lattice["c"] / lattice["a"] if len(lattice) == 2 else prototype.axial_ratio or 1.0
    unit = primitive @ conventional_lattice(prototype.space_group, (1.0, 1.0, ratio))
    counts = [(symbol, len(group)) for symbol, group in zip(sites, groups, strict=True)]
    return symmetric_crystal(
        unit * _start_length(lattice, ratio, lambda: _touching(unit, fractional, symbols)),
        np.rint(np.linalg.inv(primitive)).astype(np.int64),
        fractional,
        symbols,
        np.array([mass_of(s, {}) for s in symbols]),
        prototype.space_group,
        operations,
        formula_in_order(counts),
        prototype.name,
    )


def _point(position: Sequence[float | str], values: Mapping[str, float]) -> Array:
    return np.array([values[p] if isinstance(p, str) else p for p in position])


def _start_length(lattice: Mapping[str, float], ratio: float, touching: Callable[[], float]) -> float:
    """Return a, from a, from c, or from touching atoms."""
    if "a" in lattice:
        return lattice["a"]
    return lattice["c"] / ratio if "c" in lattice else touching()


def _touching(lattice: Array, fractional: Array, symbols: tuple[str, ...]) -> float:
    """Return the factor on ``lattice`` at which no two atoms are closer than their radii allow."""
    from ase.data import atomic_numbers, covalent_radii, vdw_radii

    elements = [element_of(s) for s in symbols]
    radii = np.array([(vdw_radii if e in NOBLE else covalent_radii)[atomic_numbers[e]] for e in elements])
    gap = fractional[:, None] - fractional[None]
    gap -= np.rint(gap)
    images = np.array(list(product((-1, 0, 1), repeat=3)))
    distance = np.linalg.norm((gap[:, :, None] + images) @ lattice, axis=-1)
    distance[distance < 1e-9] = np.inf
    return float(np.max((radii[:, None] + radii[None]) / distance.min(axis=-1)))


def _merging_fault(prototype: Prototype, sites: tuple[str, ...], crystal: Crystal) -> Fault | None:
    """Find species that make a simpler crystal of the structure type (one element on rock salt)."""
    if len(set(sites)) == len(sites):
        return None
    types = [crystal.symbols.index(symbol) for symbol in crystal.symbols]
    data = symmetry_dataset((crystal.lattice, crystal.fractional, types), crystal.name, TOLERANCE)
    if data.number == prototype.space_group and len(set(data.mapping_to_primitive)) == crystal.size:
        return None
    what = f"{', '.join(sites)} on {prototype.name} is another crystal, of space group {data.number}"
    return Fault("crystal.sites", what, "name the structure type with that symmetry, or give a file")


def _site_faults(prototype: Prototype, sites: tuple[str, ...]) -> list[Fault]:
    if len(sites) != len(prototype.sites):
        what = f"{prototype.name} has {len(prototype.sites)} sites, {len(sites)} given"
        return [Fault("crystal.sites", what, f"give one element each, in the order: {prototype.meaning}")]
    faults = []
    for label in sites:
        try:
            element_of(label)
        except InputError as error:
            faults.append(Fault("crystal.sites", error.what, error.fix))
    return faults


def _lattice_faults(lattice: Mapping[str, float], names: tuple[str, ...]) -> list[Fault]:
    faults = []
    for key, value in lattice.items():
        if key not in names:
            fix = f"give {' and '.join(names)} alone"
            faults.append(Fault(f"crystal.{key}", f"{key} is not free in this crystal", fix))
        elif not (math.isfinite(value) and value > 0.0):
            faults.append(Fault(f"crystal.{key}", f"{value} is not a length", "give a positive number, Å"))
    return faults


def _inner_faults(prototype: Prototype, inner: Mapping[str, float]) -> list[Fault]:
    known = {coordinate.name: coordinate for coordinate in prototype.inner}
    remark = f" ({prototype.remark})" if prototype.remark else ""
    faults = []
    for key, value in inner.items():
        if key not in known:
            names = f"it has {', '.join(known)}" if known else "all its sites are fixed"
            faults.append(Fault(f"crystal.inner.{key}", f"{prototype.name} has no {key}", names))
        elif not known[key].low <= value <= known[key].high:
            fix = f"start between {known[key].low} and {known[key].high}{remark}"
            faults.append(Fault(f"crystal.inner.{key}", f"{value} is far from {prototype.name}", fix))
    return faults


def _mass_faults(masses: Mapping[str, float], symbols: tuple[str, ...]) -> list[Fault]:
    faults = []
    for symbol, value in masses.items():
        key = f"crystal.masses.{symbol}"
        if symbol not in symbols:
            here = ", ".join(dict.fromkeys(symbols))
            faults.append(Fault(key, f"{symbol} is not in the crystal", f"it holds {here}"))
        elif not (math.isfinite(value) and value > 0.0):
            faults.append(Fault(key, f"{value} is not a mass", "give a positive number, u"))
    return faults


def _with_masses(crystal: Crystal, masses: Mapping[str, float]) -> Crystal:
    if not masses:
        return crystal
    values = [masses.get(s, m) for s, m in zip(crystal.symbols, crystal.masses, strict=True)]
    return replace(crystal, masses=np.array(values, dtype=float))


def _with_lattice(crystal: Crystal, lattice: Mapping[str, float]) -> Crystal:
    """Stretch a crystal read from a file to the lattice parameters given."""
    own = dict(zip(crystal.axis_names, crystal.lattice_parameters, strict=True))
    ratios = [lattice.get(name, own[name]) / own[name] for name in crystal.axis_names]
    return crystal.strained(np.log(ratios))
