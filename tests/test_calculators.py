"""The pair model as an ASE calculator, and ASE calculators as force sources."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from ase import Atoms
from ase.build import bulk
from ase.units import GPa

from thermex.ase_calculator import PairCalculator
from thermex.case.case import CrystalSpec
from thermex.case.published import case_from_published
from thermex.case.reader import case_from_dict
from thermex.errors import InputError
from thermex.expansion import predict
from thermex.measured import best_measured, load_material

pytestmark = pytest.mark.crosscheck

STEP = 1e-4
SETS = ("TF64 NaCl", "LC85 MgO shell", "BKS90 SiO2", "GW59 Cu")


def rattled(name: str) -> Atoms:
    """Return the crystal of a published set, strained and with displaced atoms, under its pair model."""
    case = case_from_published(name, (300.0,))
    atoms = predict_free_cell(name)
    random = np.random.default_rng(7)
    atoms.set_cell(atoms.cell.array @ (np.eye(3) + 0.01 * random.standard_normal((3, 3))), scale_atoms=True)
    atoms.positions += 0.03 * random.standard_normal(atoms.positions.shape)
    atoms.calc = PairCalculator(case.potential)
    return atoms


def predict_free_cell(name: str) -> Atoms:
    """Return the start cell of a published set as ASE Atoms."""
    from thermex.crystal.build import build_crystal

    crystal = build_crystal(case_from_published(name, (300.0,)).crystal)
    return Atoms(crystal.symbols, cell=crystal.lattice, scaled_positions=crystal.fractional, pbc=True)


@pytest.mark.parametrize("name", SETS)
def test_forces_are_the_slope_of_the_energy(name: str) -> None:
    """Central differences of the energy (common practice, no source)."""
    atoms = rattled(name)
    forces = atoms.get_forces()
    for atom, axis in ((0, 0), (len(atoms) - 1, 2)):
        energies = []
        for sign in (1.0, -1.0):
            moved = atoms.copy()
            moved.positions[atom, axis] += sign * STEP
            moved.calc = atoms.calc
            energies.append(moved.get_potential_energy())
        assert forces[atom, axis] == pytest.approx(-(energies[0] - energies[1]) / (2.0 * STEP), abs=2e-6)


@pytest.mark.parametrize("name", SETS)
def test_stress_is_the_slope_of_the_energy(name: str) -> None:
    """Against ASE's own finite differences of the energy under strain."""
    from ase.calculators.fd import calculate_numerical_stress

    atoms = rattled(name)
    assert atoms.get_stress() == pytest.approx(calculate_numerical_stress(atoms, eps=1e-5), abs=1e-6)


def test_a_slab_is_refused() -> None:
    slab = bulk("Cu", cubic=True)
    slab.pbc = (True, True, False)
    slab.calc = PairCalculator(case_from_published("GW59 Cu", (300.0,)).potential)
    with pytest.raises(InputError, match="not periodic in three directions"):
        slab.get_potential_energy()


def test_analytic_forces_and_the_same_potential_as_a_calculator_agree() -> None:
    """α of the two force sources differs by less than the errors that both state."""
    case = case_from_published("GW59 Cu", (200.0, 300.0), accuracy=5e-3)
    plain = predict(replace(case, accuracy=replace(case.accuracy, anharmonic="none")))
    atoms = bulk("Cu", a=plain.static.lattice_A["a"])
    atoms.calc = PairCalculator(case.potential)
    empty = replace(case.potential, pairs=(), published=None)
    given = CrystalSpec(None, (), {}, atoms=atoms)
    other = predict(replace(case, crystal=given, potential=empty))
    difference = np.abs(other.alpha_linear_per_K / plain.alpha_linear_per_K - 1.0)
    assert (difference < other.alpha_relative_error + plain.alpha_relative_error).all()
    assert difference.max() < case.accuracy.alpha


def test_effective_medium_copper_beside_measured_values() -> None:
    """ASE's effective-medium Cu (K. W. Jacobsen et al., Surf. Sci. 366, 394 (1996), from memory) lies within
    30 % of the measured value of the shipped file (common practice for such potentials, no source)."""
    case = case_from_dict(
        {
            "crystal": {"prototype": "fcc", "sites": ["Cu"], "a": 3.6},
            "potential": {"calculator": "effective medium"},
            "conditions": {"temperature": [293.0]},
            "accuracy": {"alpha": 5e-3},
            "measured": {"material": "Cu"},
        }
    )
    found = predict(case)
    measured = best_measured(load_material("Cu"), "linear expansion coefficient", 293.0)
    assert measured is not None
    assert found.alpha_linear_per_K[0] == pytest.approx(measured.value, rel=0.3)
    # ASE's own energies at three volumes give the same static modulus
    atoms = bulk("Cu", a=found.static.lattice_A["a"])
    from ase.calculators.emt import EMT

    energies = []
    for scale in (0.998, 1.0, 1.002):
        scaled = atoms.copy()
        scaled.set_cell(atoms.cell * scale, scale_atoms=True)
        scaled.calc = EMT()
        energies.append(scaled.get_potential_energy())
    curvature = (energies[0] - 2.0 * energies[1] + energies[2]) / 0.002**2
    assert found.static.bulk_modulus_GPa == pytest.approx(curvature / 9.0 / atoms.get_volume() / GPa, rel=5e-3)


def test_a_crystal_is_returned_as_atoms_at_any_temperature() -> None:
    prediction = predict(case_from_published("TF64 NaCl", (100.0, 300.0)))
    atoms = prediction.structure(300.0)
    assert isinstance(atoms, Atoms) and atoms.get_volume() == pytest.approx(prediction.volume_A3[1])
    assert sorted(atoms.get_chemical_symbols()) == ["Cl", "Na"]
