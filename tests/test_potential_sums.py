"""Lattice sums and Madelung constants against printed values."""

from __future__ import annotations

import numpy as np
import pytest

from thermex.case.case import CrystalSpec
from thermex.constants import COULOMB
from thermex.crystal.build import build_crystal
from thermex.crystal.crystal import Crystal
from thermex.potential.lattice_sums import lattice_response
from thermex.potential.model import Interaction, Kind, PairModel
from thermex.potential.terms import InversePower

pytestmark = pytest.mark.literature


def crystal(prototype: str, sites: tuple[str, ...], inner: dict[str, float] | None = None, **lattice: float) -> Crystal:
    return build_crystal(CrystalSpec(prototype, sites, lattice, inner=inner or {}))


def power_sum(built: Crystal, exponent: float, nearest: float) -> float:
    """Return Σ (r₁/r)ⁿ around one atom of an elemental crystal."""
    symbol = built.symbols[0]
    model = PairModel((Kind(symbol, False, 0.0),), (Interaction(0, 0, InversePower(1.0, exponent)),))
    energy = lattice_response(model, model.particles(built)).energy
    return 2.0 * energy * nearest**exponent / built.size


# J. E. Lennard-Jones and A. E. Ingham, Proc. R. Soc. A 107, 636 (1925), and, for hcp, T. Kihara and
# S. Koba, J. Phys. Soc. Japan 7, 348 (1952); digits recomputed by direct summation apart from thermex.
SUMS = {
    "fcc": {
        4: 25.33830431, 5: 16.96751846, 6: 14.45392104, 7: 13.35938770, 8: 12.80193723, 9: 12.49254670,
        10: 12.31124567, 11: 12.20092035, 12: 12.13188020, 13: 12.08772632, 14: 12.05899194, 16: 12.02735484,
        18: 12.01299831,
    },
    "hcp": {
        4: 25.33908234, 5: 16.96843635, 6: 14.45489728, 7: 13.36034678, 8: 12.80282185, 9: 12.49332173,
        10: 12.31189623, 11: 12.20144710, 12: 12.13229377, 13: 12.08804255, 14: 12.05922826, 16: 12.02747942,
        18: 12.01306002,
    },
    "bcc": {
        4: 22.63872164, 5: 14.75850937, 6: 12.25366787, 7: 11.05424348, 8: 10.35519791, 9: 9.89458966,
        10: 9.56440062, 11: 9.31326254, 12: 9.11418327, 13: 8.95180732, 14: 8.81677023, 16: 8.60625405,
        18: 8.45250317,
    },
    "simple cubic": {
        4: 16.53231596, 5: 10.37752483, 6: 8.40192398, 7: 7.46705778, 8: 6.94580793, 9: 6.62885920,
        10: 6.42611910, 11: 6.29229450, 12: 6.20214905, 13: 6.14059958, 14: 6.09818413, 16: 6.04826347,
        18: 6.02388171,
    },
}  # fmt: skip
NEAREST = {"fcc": np.sqrt(0.5), "hcp": 1.0, "bcc": np.sqrt(0.75), "simple cubic": 1.0}


@pytest.mark.parametrize("structure", SUMS)
def test_inverse_power_sums(structure: str) -> None:
    a = 3.0
    ideal = {"c": a * np.sqrt(8.0 / 3.0)} if structure == "hcp" else {}
    built = crystal(structure, ("Ar",), a=a, **ideal)
    for exponent, printed in SUMS[structure].items():
        assert power_sum(built, exponent, a * NEAREST[structure]) == pytest.approx(printed, abs=2e-8)


def coulomb_energy(built: Crystal, charges: dict[str, float]) -> float:
    """Return Σ q q/r per formula unit, e²/Å."""
    kinds = tuple(Kind(symbol, False, charge) for symbol, charge in charges.items())
    model = PairModel(kinds, ())
    return lattice_response(model, model.particles(built)).energy / COULOMB / built.formula_units


# Nearest-neighbour Madelung constants: D. H. Lide (ed.), CRC Handbook of Chemistry and Physics,
# table "Lattice energies"; more digits from Y. Sakamoto, J. Chem. Phys. 28, 164 (1958) (from memory).
@pytest.mark.parametrize(
    ("prototype", "sites", "charge", "nearest", "printed"),
    [
        ("rock salt", ("Na", "Cl"), 1.0, 0.5, 1.747564595),
        ("caesium chloride", ("Cs", "Cl"), 1.0, np.sqrt(0.75), 1.762674773),
        ("zincblende", ("Zn", "S"), 1.0, np.sqrt(3.0) / 4.0, 1.638055053),
    ],
)
def test_madelung_of_binary_crystals(
    prototype: str, sites: tuple[str, str], charge: float, nearest: float, printed: float
) -> None:
    built = crystal(prototype, sites, a=5.0)
    energy = coulomb_energy(built, {sites[0]: charge, sites[1]: -charge})
    assert -energy * 5.0 * nearest == pytest.approx(printed, abs=2e-9)


def test_madelung_of_ideal_wurtzite() -> None:
    a = 3.0
    built = crystal("wurtzite", ("Zn", "O"), {"u": 0.375}, a=a, c=a * np.sqrt(8.0 / 3.0))
    nearest = 0.375 * a * np.sqrt(8.0 / 3.0)
    assert -coulomb_energy(built, {"Zn": 1.0, "O": -1.0}) * nearest == pytest.approx(1.641321627, abs=2e-9)


def test_madelung_of_fluorite() -> None:
    built = crystal("fluorite", ("Ca", "F"), a=5.0)
    energy = coulomb_energy(built, {"Ca": 2.0, "F": -1.0})
    assert -energy * 5.0 * np.sqrt(3.0) / 4.0 == pytest.approx(5.038784880, abs=5e-9)


# Computed apart from thermex by an Ewald sum at these coordinates.
def test_electrostatic_energy_of_rutile() -> None:
    built = crystal("rutile", ("Ti", "O"), {"u": 0.3048}, a=4.5937, c=2.9587)
    energy = coulomb_energy(built, {"Ti": 4.0, "O": -2.0})
    assert energy == pytest.approx(-9.80459, rel=1e-6)
    assert energy * COULOMB == pytest.approx(-141.18, abs=0.006)


def test_electrostatic_energy_of_corundum() -> None:
    built = crystal("corundum", ("Al", "O"), {"z": 0.3522, "x": 0.3063}, a=4.759, c=12.991)
    energy = coulomb_energy(built, {"Al": 3.0, "O": -2.0})
    assert energy == pytest.approx(-13.12080, rel=1e-6)
    assert energy * COULOMB == pytest.approx(-188.93, abs=0.006)
