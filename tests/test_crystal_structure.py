"""Structure files and ASE Atoms: round trips, reduction to the primitive cell, every refusal."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from ase import Atoms
from ase.build import bulk, make_supercell, molecule
from ase.io import write
from ase.spacegroup import crystal as grown

from thermex.case.case import CrystalSpec
from thermex.crystal.build import build_crystal
from thermex.crystal.elements import conventional_formula, element_of, mass_of
from thermex.crystal.structure import crystal_from_atoms, crystal_from_file, to_atoms, to_conventional_atoms
from thermex.errors import InputError

# Pnma perovskite with axes a > c, near CaTiO3 (rounded; only the symmetry matters here)
ORTHORHOMBIC = grown(
    ("Ca", "Ti", "O", "O"),
    [(0.036, 0.25, 0.993), (0.0, 0.0, 0.5), (0.484, 0.25, 0.071), (0.289, 0.037, 0.711)],
    spacegroup=62,
    cellpar=[5.44, 7.64, 5.38, 90, 90, 90],
)

HEXAGONAL = """data_x
_cell_length_a 3.2094
_cell_length_b 3.2094
_cell_length_c 5.2105
_cell_angle_alpha 90
_cell_angle_beta 90
_cell_angle_gamma 120
_symmetry_space_group_name_H-M 'P 63/m m c'
_symmetry_Int_Tables_number 194
loop_
_atom_site_label
_atom_site_type_symbol
_atom_site_fract_x
_atom_site_fract_y
_atom_site_fract_z
_atom_site_occupancy
{rows}
"""


def cif(folder: Path, rows: str) -> Path:
    path = folder / "metal.cif"
    path.write_text(HEXAGONAL.format(rows=rows))
    return path


PROTOTYPES = [
    ("rock salt", ("Mg", "O"), {"a": 4.21}),
    ("wurtzite", ("Zn", "O"), {"a": 3.2495, "c": 5.2069}),
    ("rutile", ("Ti", "O"), {"a": 4.5937, "c": 2.9587}),
    ("corundum", ("Al", "O"), {"a": 4.759, "c": 12.991}),
    ("alpha-quartz", ("Si", "O"), {"a": 4.9137, "c": 5.4047}),
    ("spinel", ("Mg", "Al", "O"), {"a": 8.083}),
    ("garnet", ("Mg", "Al", "Si", "O"), {"a": 11.459}),
]


@pytest.mark.parametrize("suffix", ["cif", "xyz", "vasp", "json", "traj"])
@pytest.mark.parametrize(("name", "sites", "lattice"), PROTOTYPES)
def test_round_trip_through_files(
    tmp_path: Path, name: str, sites: tuple[str, ...], lattice: dict[str, float], suffix: str
) -> None:
    crystal = build_crystal(CrystalSpec(name, sites, lattice))
    path = tmp_path / f"cell.{suffix}"
    write(path, to_conventional_atoms(crystal))
    again = crystal_from_file(path)
    assert again.space_group == crystal.space_group
    assert again.size == crystal.size
    assert again.name == path.name
    assert np.allclose(again.lattice_parameters, crystal.lattice_parameters, rtol=1e-5)
    assert len(again.rotations) == len(crystal.rotations)
    assert len(again.displacements) == len(crystal.displacements)


def test_supercell_in_any_orientation_is_reduced() -> None:
    cell = make_supercell(bulk("NaCl", "rocksalt", 5.64), [[2, 0, 0], [1, 2, 0], [0, 0, 1]])
    cell.rotate(37, (1, 2, 3), rotate_cell=True)
    cell.positions += 0.123
    crystal = crystal_from_atoms(cell)
    assert (crystal.size, crystal.space_group) == (2, 225)
    assert crystal.lattice_parameters == pytest.approx([5.64])
    assert np.allclose(crystal.conventional @ crystal.lattice, 5.64 * np.eye(3), atol=1e-9)


def test_rhombohedral_input_gets_hexagonal_axes() -> None:
    # bismuth: rhombohedral a 4.746 Å, α 57.23°, z 0.234 → hexagonal a 4.546, c 11.862 Å
    # (Cucka & Barrett, Acta Cryst. 15 (1962) 865, from memory)
    cell = Atoms("Bi2", scaled_positions=[[0.234] * 3, [-0.234] * 3], cell=[4.746] * 3 + [57.23] * 3, pbc=True)
    crystal = crystal_from_atoms(cell)
    assert (crystal.space_group, crystal.size, crystal.axis_names) == (166, 2, ("a", "c"))
    assert crystal.lattice_parameters == pytest.approx([4.546, 11.862], abs=0.01)
    assert len(crystal.displacements) == 1


@pytest.mark.parametrize("order", [(0, 1, 2), (1, 2, 0), (2, 0, 1), (1, 0, 2), (0, 2, 1), (2, 1, 0)])
def test_orthorhombic_axes_keep_their_names(order: tuple[int, int, int]) -> None:
    lengths = ORTHORHOMBIC.cell.lengths()[list(order)]
    cell = Atoms(
        ORTHORHOMBIC.symbols,
        scaled_positions=ORTHORHOMBIC.get_scaled_positions()[:, list(order)],
        cell=lengths,
        pbc=True,
    )
    crystal = crystal_from_atoms(cell)
    assert (crystal.space_group, crystal.size, crystal.formula) == (62, 20, "CaTiO3")
    assert crystal.axis_names == ("a", "b", "c")
    assert crystal.lattice_parameters == pytest.approx(lengths)
    assert np.allclose(crystal.conventional @ crystal.lattice, np.diag(lengths))
    assert np.linalg.det(crystal.lattice) > 0
    assert len(crystal.displacements) == 7  # Ca x z, O1 x z, O2 x y z
    own, given = to_atoms(crystal).get_all_distances(mic=True), cell.get_all_distances(mic=True)
    assert np.allclose(np.sort(own.ravel()), np.sort(given.ravel()), atol=1e-6)


@pytest.mark.parametrize("order", [(0, 1, 2), (1, 2, 0), (2, 1, 0)])
def test_base_centred_orthorhombic(order: tuple[int, int, int]) -> None:
    # α-uranium, Cmcm: a 2.854, b 5.870, c 4.955 Å, y 0.1025
    # (Barrett, Mueller & Hitterman, Phys. Rev. 129 (1963) 625, from memory)
    cell = grown("U", [(0, 0.1025, 0.25)], spacegroup=63, cellpar=[2.854, 5.870, 4.955, 90, 90, 90])
    turned = Atoms(
        cell.symbols,
        scaled_positions=cell.get_scaled_positions()[:, list(order)],
        cell=cell.cell.lengths()[list(order)],
        pbc=True,
    )
    crystal = crystal_from_atoms(turned)
    assert (crystal.space_group, crystal.size, len(crystal.rotations)) == (63, 2, 8)
    assert crystal.lattice_parameters == pytest.approx(cell.cell.lengths()[list(order)])
    assert len(crystal.displacements) == 1
    assert len(to_conventional_atoms(crystal)) == 4


def test_coordinates_of_few_digits(tmp_path: Path) -> None:
    crystal = crystal_from_file(cif(tmp_path, "Mg1 Mg2+ 0.333 0.667 0.25 1.0"))
    assert (crystal.space_group, crystal.size, crystal.symbols) == (194, 2, ("Mg", "Mg"))
    assert crystal.lattice_parameters == pytest.approx([3.2094, 5.2105])
    assert np.allclose(np.abs(crystal.fractional[0] - crystal.fractional[1]), [1 / 3, 1 / 3, 0.5], atol=1e-9)


def test_masses_and_lattice_of_a_case_go_on_a_file(tmp_path: Path) -> None:
    path = tmp_path / "oxide.cif"
    write(path, bulk("MgO", "rocksalt", 4.2))
    crystal = build_crystal(CrystalSpec(None, (), {"a": 4.3}, file=path, masses={"O": 17.999}))
    assert crystal.lattice_parameters == pytest.approx([4.3])
    assert dict(zip(crystal.symbols, crystal.masses, strict=True)) == pytest.approx(
        {"Mg": 24.305, "O": 17.999}  # IUPAC 2016, abridged
    )


def test_masses_of_atoms_are_kept() -> None:
    cell = bulk("LiF", "rocksalt", 4.03)
    cell.set_masses([6.015, 18.998])
    assert crystal_from_atoms(cell).masses == pytest.approx([6.015, 18.998])
    assert to_atoms(crystal_from_atoms(cell)).get_masses() == pytest.approx([6.015, 18.998])


def test_standard_masses() -> None:
    # IUPAC, Pure Appl. Chem. 88 (2016) 265, abridged
    assert mass_of("O", {}) == 15.999
    assert mass_of("O", {"O": 17.999}) == 17.999


@pytest.mark.parametrize(
    ("label", "element"), [("Fe", "Fe"), ("Fe3", "Fe"), ("Fe3+", "Fe"), ("O2-", "O"), ("O_a", "O")]
)
def test_labels(label: str, element: str) -> None:
    assert element_of(label) == element


@pytest.mark.parametrize("label", ["MgO", "mg", "X", "", "Xx", "D", "3Fe"])
def test_labels_that_are_no_element(label: str) -> None:
    with pytest.raises(InputError, match="is not an element"):
        element_of(label)


@pytest.mark.parametrize(
    ("symbols", "formula"),
    [("OOOAlAl", "Al2O3"), ("OSiO", "SiO2"), ("ClNa", "NaCl"), ("HHO", "H2O"), ("FSnF", "SnF2")],
)
def test_formula_order(symbols: str, formula: str) -> None:
    assert conventional_formula(tuple(Atoms(symbols).symbols))[0] == formula


def refused(atoms: object, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        crystal_from_atoms(atoms, name="sample")
    assert str(caught.value).startswith("sample: ")
    assert "\n" not in str(caught.value)


def test_refuses_what_is_not_atoms() -> None:
    refused("MgO", "str is not an ASE Atoms object")


def test_refuses_what_is_not_a_crystal() -> None:
    refused(Atoms(cell=[3, 3, 3], pbc=True), "holds no atoms")
    refused(molecule("H2O"), "not periodic")
    refused(Atoms("Cu", cell=[3, 3, 3], pbc=(True, True, False)), "not periodic")
    refused(Atoms("Cu", cell=[[3, 0, 0], [3, 0, 0], [0, 0, 3]], pbc=True), "without volume")
    refused(Atoms("X", cell=[3, 3, 3], pbc=True), "no element")
    refused(Atoms("Cu", positions=[[0, 0, np.nan]], cell=[3, 3, 3], pbc=True), "not numbers")
    refused(Atoms("Cu", cell=[np.inf, 3, 3], pbc=True), "not numbers")


def test_refuses_overlaps() -> None:
    refused(Atoms("Cu2", positions=[[0, 0, 0], [0, 0, 0.3]], cell=[3, 3, 3], pbc=True), "Cu and Cu overlap")
    refused(Atoms("CuAg", positions=[[0, 0, 0], [0, 0, 0]], cell=[3, 3, 3], pbc=True), "overlap, 0.000 Å")
    refused(Atoms("Cu", cell=[0.3, 4, 4.5], pbc=True), "overlap")


def test_refuses_free_angles() -> None:
    monoclinic = Atoms("ZrO", scaled_positions=[[0.1, 0.2, 0.3], [0.5, 0.5, 0.45]], cell=[5.1, 5.2, 5.3, 90, 99, 90])
    monoclinic.pbc = True
    refused(monoclinic, r"triclinic \(space group 1\)")
    refused(Atoms("Zr", cell=[5.1, 5.2, 5.3, 90, 99, 90], pbc=True), r"monoclinic \(space group 10\)")


def test_refuses_two_masses() -> None:
    cell = bulk("Cu", "fcc", 3.6, cubic=True)
    cell.set_masses([63, 63, 63, 65])
    refused(cell, "Cu has two masses")


def test_refuses_large_cells() -> None:
    rng = np.random.default_rng(1)
    box = make_supercell(Atoms("Ne", cell=[3.0, 3.1, 3.2], pbc=True), np.diag([8, 8, 8]))
    box.symbols[: len(box) // 2] = "Ar"
    box.positions[:, 2] += 0.3 * np.sign(rng.normal(size=len(box)))
    with pytest.raises(InputError):
        crystal_from_atoms(box)
    layers = make_supercell(Atoms("Ne", cell=[3.0, 3.1, 3.2], pbc=True), np.diag([1, 1, 401]))
    layers.symbols[0] = "Ar"
    refused(layers, "401 atoms in the primitive cell; at most 400")
    many = make_supercell(bulk("Cu", "fcc", 3.6), np.diag([15, 15, 15]))
    refused(many, "3375 atoms in its cell")


@pytest.mark.parametrize(
    ("rows", "words"),
    [
        ("Mg1 Mg2+ 0.3333333 0.6666667 0.25 0.9", r"partly occupied \(Mg 0.9\)"),
        (
            "Mg1 Mg2+ 0.3333333 0.6666667 0.25 0.5\nFe1 Fe2+ 0.3333333 0.6666667 0.25 0.5",
            "partly occupied",
        ),
    ],
)
def test_refuses_partial_occupancy(tmp_path: Path, rows: str, words: str) -> None:
    with pytest.raises(InputError, match=f"metal.cif: a site is {words}"):
        crystal_from_file(cif(tmp_path, rows))


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("empty.cif", b""),
        ("prose.cif", b"this is not a structure\n"),
        ("broken.cif", HEXAGONAL.format(rows="Mg1 Mg2+ 0.333 oops 0.25 1.0").encode()),
        ("unknown.abc", b"this is not a structure\n"),
        ("noise.cif", bytes(range(256))),
        ("noise.json", b"{"),
        ("noise.traj", b"- of Ulm" + bytes(range(200))),
        ("code.py", b"raise SystemExit(7)\n"),
        ("pickle.traj", b"PickleTrajectory" + b"cos\nsystem\n(S'exit 7'\ntR."),
    ],
)
def test_unreadable_files_give_one_line(tmp_path: Path, name: str, content: bytes) -> None:
    path = tmp_path / name
    path.write_bytes(content)
    with pytest.raises(InputError, match=name) as caught:
        crystal_from_file(path)
    assert "\n" not in str(caught.value)


def test_missing_file_and_folder(tmp_path: Path) -> None:
    for path in (tmp_path / "none.cif", tmp_path):
        with pytest.raises(InputError, match="there is no such structure file"):
            crystal_from_file(path)


def test_several_structures_in_one_file(tmp_path: Path) -> None:
    path = tmp_path / "run.xyz"
    write(path, [bulk("Cu", "fcc", 3.6), bulk("Cu", "fcc", 3.7)])
    with pytest.raises(InputError, match="holds 2 structures"):
        crystal_from_file(path)


def test_at_sign_in_a_file_name(tmp_path: Path) -> None:
    path = tmp_path / "cell@1.cif"
    write(path, bulk("Cu", "fcc", 3.6))
    assert crystal_from_file(path).formula == "Cu"


ROCK_SALT = CrystalSpec("rock salt", ("Mg", "O"), {"a": 4.2})


@pytest.mark.parametrize(
    ("spec", "key", "words"),
    [
        (replace(ROCK_SALT, prototype=None), "crystal", "no structure is given"),
        (replace(ROCK_SALT, file=Path("x.cif")), "crystal", "more than one structure"),
        (replace(ROCK_SALT, sites=("Mg",)), "crystal.sites", "has 2 sites, 1 given"),
        (replace(ROCK_SALT, sites=("Mg", "Oo")), "crystal.sites", '"Oo" is not an element'),
        (replace(ROCK_SALT, sites=("Ar", "Ar")), "crystal.sites", "of space group 221"),
        (
            replace(ROCK_SALT, prototype="zinc blende", sites=("C", "C")),
            "crystal.sites",
            "of space group 227",
        ),
        (replace(ROCK_SALT, lattice={"a": 4.2, "c": 4.2}), "crystal.c", "c is not free"),
        (replace(ROCK_SALT, lattice={"a": -4.2}), "crystal.a", "-4.2 is not a length"),
        (replace(ROCK_SALT, lattice={"a": float("nan")}), "crystal.a", "nan is not a length"),
        (replace(ROCK_SALT, inner={"u": 0.3}), "crystal.inner.u", "rock salt has no u"),
        (replace(ROCK_SALT, masses={"Fe": 56.0}), "crystal.masses.Fe", "not in the crystal"),
        (replace(ROCK_SALT, masses={"O": 0.0}), "crystal.masses.O", "0.0 is not a mass"),
        (
            CrystalSpec("spinel", ("Mg", "Al", "O"), {"a": 8.1}, {"u": 0.387}),
            "crystal.inner.u",
            "far from spinel.*larger by 1/8",
        ),
        (
            CrystalSpec("rutile", ("Ti", "O"), {"a": 4.6}, {"u": float("nan")}),
            "crystal.inner.u",
            "nan is far from rutile",
        ),
    ],
)
def test_faults_of_a_case(spec: CrystalSpec, key: str, words: str) -> None:
    with pytest.raises(InputError, match=f"^my.toml: {key}: .*{words}"):
        build_crystal(spec, "my.toml")


def test_all_faults_at_once() -> None:
    spec = replace(ROCK_SALT, sites=("Mg", "Q"), lattice={"a": 0.0}, inner={"u": 1.0})
    with pytest.raises(InputError) as caught:
        build_crystal(spec, "my.toml")
    assert len(caught.value.faults) == 3


def test_file_takes_no_inner_coordinates(tmp_path: Path) -> None:
    path = tmp_path / "oxide.cif"
    write(path, bulk("MgO", "rocksalt", 4.2))
    with pytest.raises(InputError, match="only a prototype takes inner coordinates"):
        build_crystal(CrystalSpec(None, (), {}, {"u": 0.3}, file=path))
