"""Structure types against International Tables, handbook lattice sums and neighbour counts."""

from __future__ import annotations

import json

import numpy as np
import pytest
import spglib

from thermex import data
from thermex.case.case import CrystalSpec
from thermex.constants import COULOMB
from thermex.crystal.build import build_crystal
from thermex.crystal.crystal import Crystal
from thermex.crystal.prototypes import find_prototype, prototype_names, site_counts
from thermex.crystal.structure import crystal_from_atoms, to_atoms, to_conventional_atoms
from thermex.crystal.symmetry import site_mapping, treated_as_tetragonal
from thermex.errors import InputError
from thermex.potential.bonds import find_bonds
from thermex.potential.lattice_sums import lattice_response
from thermex.potential.model import Interaction, Kind, PairModel
from thermex.potential.terms import Exponential, InversePower

pytestmark = pytest.mark.filterwarnings("ignore:Set OLD_ERROR_HANDLING:DeprecationWarning")

SITES = {
    "rock salt": ("Mg", "O"),
    "caesium chloride": ("Cs", "Cl"),
    "zinc blende": ("Zn", "S"),
    "fluorite": ("Ca", "F"),
    "antifluorite": ("Li", "O"),
    "diamond": ("Si",),
    "fcc": ("Cu",),
    "bcc": ("W",),
    "simple cubic": ("Po",),
    "perovskite": ("Sr", "Ti", "O"),
    "spinel": ("Mg", "Al", "O"),
    "garnet": ("Mg", "Al", "Si", "O"),
    "wurtzite": ("Zn", "O"),
    "hcp": ("Mg",),
    "rutile": ("Ti", "O"),
    "corundum": ("Al", "O"),
    "alpha-quartz": ("Si", "O"),
}

# space group, atoms in the primitive cell, order of the point group, free inner displacements:
# International Tables for Crystallography A (space-group pages; the last from the free coordinates)
TABLES = {
    "rock salt": (225, 2, 48, 0),
    "caesium chloride": (221, 2, 48, 0),
    "zinc blende": (216, 2, 24, 0),
    "fluorite": (225, 3, 48, 0),
    "antifluorite": (225, 3, 48, 0),
    "diamond": (227, 2, 48, 0),
    "fcc": (225, 1, 48, 0),
    "bcc": (229, 1, 48, 0),
    "simple cubic": (221, 1, 48, 0),
    "perovskite": (221, 5, 48, 0),
    "spinel": (227, 14, 48, 1),
    "garnet": (230, 80, 48, 3),
    "wurtzite": (186, 4, 12, 1),
    "hcp": (194, 2, 24, 0),
    "rutile": (136, 6, 16, 1),
    "corundum": (167, 10, 12, 2),
    "alpha-quartz": (154, 9, 6, 4),
}


def built(name: str, sites: tuple[str, ...] | None = None, **values: float) -> Crystal:
    lattice = {key: value for key, value in values.items() if key in ("a", "c")}
    inner = {key: value for key, value in values.items() if key not in ("a", "c")}
    return build_crystal(CrystalSpec(name, sites or SITES[name], lattice, inner))


def test_every_structure_type_is_tested() -> None:
    assert set(prototype_names()) == set(SITES) == set(TABLES)


@pytest.mark.parametrize("name", SITES)
def test_space_group_and_counts(name: str) -> None:
    crystal = built(name)
    number, atoms, operations, free = TABLES[name]
    assert (crystal.space_group, crystal.size, len(crystal.rotations)) == (number, atoms, operations)
    assert len(crystal.displacements) == free == len(find_prototype(name).inner)
    types = [crystal.symbols.index(s) for s in crystal.symbols]
    found = spglib.get_symmetry_dataset((crystal.lattice, crystal.fractional, types), symprec=1e-5)
    assert found.number == number
    assert len(set(found.mapping_to_primitive)) == crystal.size
    # spglib may move the origin, which renames equivalent positions: only their number is sure
    assert len(set(found.crystallographic_orbits)) == len(SITES[name])


@pytest.mark.parametrize("name", SITES)
def test_operations_map_the_crystal_to_itself(name: str) -> None:
    crystal = built(name)
    names = np.array(crystal.symbols)
    assert len({r.tobytes() for r in crystal.rotations}) == len(crystal.rotations)
    for rotation, translation in zip(crystal.rotations, crystal.translations, strict=True):
        target = site_mapping(crystal.fractional, rotation, translation)
        gap = crystal.fractional @ rotation.T + translation - crystal.fractional[target]
        assert np.abs(gap - np.rint(gap)).max() < 1e-9
        assert sorted(target) == list(range(crystal.size))
        assert (names[target] == names).all()
        cartesian = crystal.lattice.T @ rotation @ np.linalg.inv(crystal.lattice.T)
        assert np.allclose(cartesian @ cartesian.T, np.eye(3), atol=1e-12)


@pytest.mark.parametrize("name", ["rock salt", "spinel", "garnet", "corundum", "wurtzite"])
def test_operations_form_the_group_spglib_finds(name: str) -> None:
    crystal = built(name)
    types = [crystal.symbols.index(s) for s in crystal.symbols]
    found = spglib.get_symmetry((crystal.lattice, crystal.fractional, types), symprec=1e-5)
    ours = {
        (r.astype(int).tobytes(), tuple(np.rint(24 * t).astype(int) % 24))
        for r, t in zip(crystal.rotations, crystal.translations, strict=True)
    }
    theirs = {
        (r.astype(int).tobytes(), tuple(np.rint(24 * t).astype(int) % 24))
        for r, t in zip(found["rotations"], found["translations"], strict=True)
    }
    assert ours == theirs


def test_conventional_cell_of_rock_salt_has_192_operations() -> None:
    # International Tables A, Fm-3m: multiplicity of the general position 192
    atoms = to_conventional_atoms(built("rock salt"))
    cell = (atoms.cell.array, atoms.get_scaled_positions(), atoms.numbers)
    assert len(spglib.get_symmetry(cell)["rotations"]) == 192


@pytest.mark.parametrize("name", SITES)
def test_standard_orientation_and_strain(name: str) -> None:
    crystal = built(name)
    box = crystal.conventional @ crystal.lattice
    assert np.allclose(box[0, 1:], 0) and np.allclose(box[1, 2], 0) and np.allclose(box[2, :2], 0)
    assert (np.diag(box) > 0).all() and np.linalg.det(crystal.lattice) > 0
    x = 0.01 * np.arange(1, len(crystal.axes) + 1)
    strained = crystal.strained(x)
    assert np.allclose(strained.lattice_parameters, crystal.lattice_parameters * np.exp(x))
    types = [crystal.symbols.index(s) for s in crystal.symbols]
    found = spglib.get_symmetry_dataset((strained.lattice, strained.fractional, types), symprec=1e-5)
    assert found.number == crystal.space_group


@pytest.mark.parametrize("name", SITES)
def test_free_displacements_keep_the_symmetry(name: str) -> None:
    crystal = built(name)
    flat = crystal.displacements.reshape(len(crystal.displacements), 3 * crystal.size)
    assert np.allclose(flat @ flat.T, np.eye(len(flat)), atol=1e-12)
    assert np.allclose(crystal.displacements.sum(axis=1), 0.0, atol=1e-12)
    amplitudes = 0.02 * np.array([1.0, -0.7, 0.5, 0.3])[: len(flat)]
    moved = crystal.displaced(amplitudes)
    types = [crystal.symbols.index(s) for s in crystal.symbols]
    found = spglib.get_symmetry_dataset((moved.lattice, moved.fractional, types), symprec=1e-5)
    assert found.number == crystal.space_group


@pytest.mark.parametrize("name", [n for n in SITES if find_prototype(n).inner])
def test_free_displacements_span_the_inner_coordinates(name: str) -> None:
    for coordinate in find_prototype(name).inner:
        before = built(name, a=8.0)
        after = built(name, a=8.0, **{coordinate.name: coordinate.start + 1e-5})
        shift = after.fractional - before.fractional
        shift = (shift - np.rint(shift)) @ before.lattice
        shift = (shift - shift.mean(axis=0)).ravel()
        flat = before.displacements.reshape(-1, shift.size)
        assert np.linalg.norm(shift) > 1e-5
        assert np.allclose(flat.T @ (flat @ shift), shift, atol=1e-12)


# ratio of charges; Madelung constant on the nearest distance and unit charge (fluorite on the charges
# +2, -1): Tosi, Solid State Physics 16 (1964) 1, table; wurtzite with c/a = √(8/3), u = 3/8
MADELUNG = [
    ("rock salt", (1, -1), 1.747564595),
    ("caesium chloride", (1, -1), 1.762674773),
    ("zinc blende", (1, -1), 1.638055053),
    ("wurtzite", (1, -1), 1.641321627),
    ("fluorite", (2, -1), 5.038784880),
    ("antifluorite", (1, -2), 5.038784880),
]


def coulomb_energy(crystal: Crystal, charges: dict[str, float]) -> float:
    """Electrostatic energy of a formula unit in e²/Å."""
    model = PairModel(tuple(Kind(s, False, float(q)) for s, q in charges.items()), ())
    energy = lattice_response(model, model.particles(crystal)).energy
    return energy / COULOMB / crystal.formula_units


def nearest(crystal: Crystal) -> float:
    return float(find_bonds(crystal.lattice, crystal.cartesian, crystal.volume ** (1 / 3) * 1.3).length.min())


@pytest.mark.parametrize(("name", "charges", "constant"), MADELUNG)
def test_madelung(name: str, charges: tuple[int, int], constant: float) -> None:
    crystal = built(name, a=5.0)
    energy = coulomb_energy(crystal, dict(zip(SITES[name], charges, strict=True)))
    assert -energy * nearest(crystal) == pytest.approx(constant, rel=2e-9)


@pytest.mark.parametrize(
    ("name", "charges", "values", "energy"),
    [
        # shared/reference/potentials.md, "Madelung" (separate program); e²/Å a formula unit
        ("rutile", (4, -2), {"a": 4.5937, "c": 2.9587, "u": 0.3048}, -9.80459),
        ("corundum", (3, -2), {"a": 4.759, "c": 12.991, "z": 0.3522, "x": 0.3063}, -13.120795),
    ],
)
def test_electrostatic_energy_of_axial_oxides(
    name: str, charges: tuple[int, int], values: dict[str, float], energy: float
) -> None:
    crystal = built(name, **values)
    assert coulomb_energy(crystal, dict(zip(SITES[name], charges, strict=True))) == pytest.approx(energy, abs=6e-6)


# coordination numbers (centre, neighbour, number): Wells, Structural Inorganic Chemistry, from memory
COORDINATION = [
    ("rock salt", "Mg", "O", 6),
    ("caesium chloride", "Cs", "Cl", 8),
    ("zinc blende", "Zn", "S", 4),
    ("fluorite", "Ca", "F", 8),
    ("fluorite", "F", "Ca", 4),
    ("antifluorite", "Li", "O", 4),
    ("antifluorite", "O", "Li", 8),
    ("diamond", "Si", "Si", 4),
    ("fcc", "Cu", "Cu", 12),
    ("hcp", "Mg", "Mg", 12),
    ("bcc", "W", "W", 8),
    ("simple cubic", "Po", "Po", 6),
    ("perovskite", "Sr", "O", 12),
    ("perovskite", "Ti", "O", 6),
    ("spinel", "Mg", "O", 4),
    ("spinel", "Al", "O", 6),
    ("garnet", "Mg", "O", 8),
    ("garnet", "Al", "O", 6),
    ("garnet", "Si", "O", 4),
    ("wurtzite", "Zn", "O", 4),
    ("rutile", "Ti", "O", 6),
    ("rutile", "O", "Ti", 3),
    ("corundum", "Al", "O", 6),
    ("corundum", "O", "Al", 4),
    ("alpha-quartz", "Si", "O", 4),
    ("alpha-quartz", "O", "Si", 2),
]


@pytest.mark.parametrize(("name", "centre", "other", "number"), COORDINATION)
def test_coordination(name: str, centre: str, other: str, number: int) -> None:
    crystal = built(name)
    bonds = find_bonds(crystal.lattice, crystal.cartesian, 9.0 if crystal.size < 9 else 5.0)
    names = np.array(crystal.symbols)
    for atom in np.nonzero(names == centre)[0]:
        lengths = np.sort(bonds.length[(bonds.first == atom) & (names[bonds.second] == other)])
        assert lengths[number - 1] < 1.18 * lengths[0]
        assert lengths[number] > 1.12 * lengths[number - 1]


def test_relaxed_corundum_of_a_separate_program() -> None:
    # shared/reference/converged.json, case S7: cell, inner coordinates and energy of the static minimum
    case = json.loads((data.root() / "reference" / "converged.json").read_text())["cases"]["S7"]
    static, given = case["static"], np.array(case["static"]["frac"])
    crystal = built("corundum", a=static["a0"], c=static["c0"], z=0.359525905, x=0.631065425 - 1 / 3)
    assert np.allclose(crystal.lattice, case["phonons_static_THz"]["primitive_cell"], atol=1e-9)
    gap = crystal.fractional[:, None] - given[None]
    gap = np.abs(gap - np.rint(gap)).max(axis=-1)
    assert sorted(gap.argmin(axis=1)) == list(range(10))
    assert gap.min(axis=1).max() < 1e-7
    model = PairModel(
        (Kind("Al", False, 3.0), Kind("O", False, -2.0)),
        (
            Interaction(0, 1, Exponential(1114.9, 0.3118)),
            Interaction(1, 1, Exponential(22764.3, 0.149)),
            Interaction(1, 1, InversePower(-27.88, 6.0)),
        ),
    )
    response = lattice_response(model, model.particles(crystal))
    # that program rounds e²/4πε₀ to 14.399645 eV Å, 3.3e-8 of the Coulomb energy
    assert response.energy == pytest.approx(static["U0_eV_per_cell"], rel=6e-8)
    assert np.abs(response.gradient).max() < 1e-4


def test_interatomic_distances_of_silicates() -> None:
    # pyrope, a 11.459 Å: Novak & Gibbs, Am. Mineral. 56 (1971) 791, from memory: Si-O 1.635, Al-O 1.886,
    # Mg-O 2.198 and 2.343 Å. Quartz: Levien, Prewitt & Weidner, Am. Mineral. 65 (1980) 920, from memory:
    # a 4.916, c 5.4054, Si-O 1.605 and 1.614 Å (with z + 2/3: their silicon is at height 0)
    pyrope = built("garnet", a=11.459, x=0.0329, y=0.0502, z=0.6534)
    quartz = built("alpha-quartz", a=4.916, c=5.4054, u=0.4697, x=0.4135, y=0.2669, z=0.1191 + 2 / 3)
    assert shortest(pyrope, "Si", 4) == pytest.approx([1.635] * 4, abs=0.004)
    assert shortest(pyrope, "Al", 6) == pytest.approx([1.886] * 6, abs=0.004)
    assert shortest(pyrope, "Mg", 8) == pytest.approx([2.198] * 4 + [2.343] * 4, abs=0.006)
    assert shortest(quartz, "Si", 4) == pytest.approx([1.605] * 2 + [1.614] * 2, abs=0.003)


def shortest(crystal: Crystal, centre: str, count: int) -> list[float]:
    bonds = find_bonds(crystal.lattice, crystal.cartesian, 3.0)
    names = np.array(crystal.symbols)
    atom = crystal.symbols.index(centre)
    return list(np.sort(bonds.length[(bonds.first == atom) & (names[bonds.second] == "O")])[:count])


def test_volumes_of_handbook_cells() -> None:
    # Al2O3 a 4.7592, c 12.992 (298 K) → 25.57 cm³/mol, CRC Handbook molar volume of corundum;
    # MgO a 4.2115 → 11.25 cm³/mol: shared/reference/measured.csv and measured.md
    corundum, magnesia = built("corundum", a=4.7592, c=12.992), built("rock salt", a=4.2115)
    per_mole = 0.602214076
    assert corundum.volume / corundum.formula_units * per_mole == pytest.approx(25.57, abs=0.02)
    assert magnesia.volume / magnesia.formula_units * per_mole == pytest.approx(11.25, abs=0.01)


@pytest.mark.parametrize("name", SITES)
def test_round_trip_through_atoms(name: str) -> None:
    crystal = built(name)
    for atoms in (to_atoms(crystal), to_conventional_atoms(crystal)):
        again = crystal_from_atoms(atoms)
        assert again.volume == pytest.approx(crystal.volume, rel=1e-9)
        assert again.space_group == crystal.space_group
        assert again.formula_units == crystal.formula_units
        assert np.allclose(again.lattice_parameters, crystal.lattice_parameters, rtol=1e-9)
        assert np.allclose(sorted(again.masses), sorted(crystal.masses))
        assert len(again.displacements) == len(crystal.displacements)
        assert np.allclose(distances(again), distances(crystal), atol=1e-6)
    count = len(to_conventional_atoms(crystal))
    assert count == sum(site.multiplicity for site in find_prototype(name).sites)


def distances(crystal: Crystal) -> np.ndarray:
    return np.sort(find_bonds(crystal.lattice, crystal.cartesian, 3.7).length)


@pytest.mark.parametrize(
    ("alias", "name"),
    [
        ("rocksalt", "rock salt"),
        ("Rock-Salt", "rock salt"),
        ("cesium chloride", "caesium chloride"),
        ("Zincblende", "zinc blende"),
        ("face-centred cubic", "fcc"),
        ("body centered cubic", "bcc"),
        ("cubic perovskite", "perovskite"),
        ("α-quartz", "alpha-quartz"),
        ("alpha quartz", "alpha-quartz"),
        ("hexagonal close-packed", "hcp"),
    ],
)
def test_aliases(alias: str, name: str) -> None:
    assert find_prototype(alias).name == name


def test_names_are_unique() -> None:
    words = [word for name in prototype_names() for word in (name, *find_prototype(name).aliases)]
    assert len(words) == len(set(words))


@pytest.mark.parametrize(
    ("name", "counts", "formula", "units"),
    [
        ("antifluorite", (2, 1), "Li2O", 1),
        ("corundum", (2, 3), "Al2O3", 2),
        ("spinel", (1, 2, 4), "MgAl2O4", 2),
        ("garnet", (3, 2, 3, 12), "Mg3Al2Si3O12", 4),
        ("alpha-quartz", (1, 2), "SiO2", 3),
        ("diamond", (1,), "Si", 2),
    ],
)
def test_formula(name: str, counts: tuple[int, ...], formula: str, units: int) -> None:
    crystal = built(name)
    assert site_counts(name) == counts
    assert (crystal.formula, crystal.formula_units) == (formula, units)


def test_one_element_on_two_sites() -> None:
    # yttrium aluminium garnet and magnetite, whose labels tell the iron ions apart
    assert built("garnet", ("Y", "Al", "Al", "O")).formula == "Y3Al5O12"
    magnetite = built("spinel", ("Fe3", "Fe2", "O"))
    assert magnetite.formula == "Fe3O4"
    assert magnetite.symbols.count("Fe2") == 4
    assert magnetite.masses[0] == pytest.approx(55.845, abs=1e-3)  # IUPAC 2016


@pytest.mark.parametrize(
    ("name", "site", "a"),
    [
        # nearest distances in shared/reference/measured.csv: the rough start is within 20 %
        ("rock salt", ("Mg", "O"), 4.2115),
        ("rock salt", ("Na", "Cl"), 5.640),
        ("fluorite", ("Ca", "F"), 5.463),
        ("fluorite", ("U", "O"), 5.471),
        ("fcc", ("Cu",), 3.615),
        ("fcc", ("Ar",), 5.31),
        ("fcc", ("Xe",), 6.13),
        ("bcc", ("W",), 3.165),
        ("corundum", ("Al", "O"), 4.759),
        ("rutile", ("Ti", "O"), 4.594),
        ("wurtzite", ("Zn", "O"), 3.2495),
    ],
)
def test_rough_start(name: str, site: tuple[str, ...], a: float) -> None:
    assert built(name, site).lattice_parameters[0] == pytest.approx(a, rel=0.2)


def test_axial_ratio_completes_the_lattice() -> None:
    crystal = built("wurtzite", c=5.2)
    assert crystal.lattice_parameters == pytest.approx([5.2 / np.sqrt(8 / 3), 5.2])
    assert built("rutile", a=4.6, c=2.95).lattice_parameters == pytest.approx([4.6, 2.95])


def test_tetragonal_view_of_a_cubic_crystal() -> None:
    view = treated_as_tetragonal(built("spinel", a=8.08))
    assert view.axis_names == ("a", "c")
    assert len(view.rotations) == 16  # 4/mmm
    assert len(view.displacements) == 2  # anion 16h (0, y, z) of I4_1/amd
    stretched = view.strained(np.array([0.0, 0.02]))
    types = [view.symbols.index(s) for s in view.symbols]
    found = spglib.get_symmetry_dataset((stretched.lattice, stretched.fractional, types), symprec=1e-5)
    assert found.number == 141


def test_unknown_name_suggests_the_nearest() -> None:
    with pytest.raises(InputError, match=r'no structure type "rutil".*did you mean "rutile"'):
        find_prototype("rutil")
