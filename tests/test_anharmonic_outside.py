"""The correction against published molecular dynamics of the same potentials, classical against classical."""

from __future__ import annotations

import json
from functools import cache
from typing import Any

import numpy as np
import pytest
from classical_crystal import ClassicalCrystal, classical_crystal

from thermex import data
from thermex.anharmonic.correction import TRUNCATION
from thermex.anharmonic.leading_order import leading_order
from thermex.case.published import case_from_published
from thermex.crystal.build import build_crystal
from thermex.potential.build import pair_model


def check_of(family: str, name: str) -> dict[str, Any]:
    """Return what was published for a shipped set, beside its parameters."""
    sets = json.loads((data.root() / "potentials" / f"{family}.json").read_text())["sets"]
    found: dict[str, Any] = next(s["check"] for s in sets if s["name"] == name)
    return found


@cache
def followed(name: str, highest: float) -> ClassicalCrystal:
    case = case_from_published(name, (300.0,))
    crystal = build_crystal(case.crystal)
    return classical_crystal(pair_model(case.potential, crystal), crystal, highest)


def corrected_and_not(name: str, temperature: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Return α and a (quasi-harmonic), α and a (leading order) at temperatures of a classical crystal."""
    found = followed(name, 1.05 * temperature[-1])
    lattice = found.travelled.lattice
    window = found.surface.box.window
    term = leading_order(lattice.model, lattice.crystal, window).best
    plain, corrected = found.states(temperature), found.states(temperature, term)
    return (
        plain.alpha_volume / 3.0,
        found.lattice_parameter(plain),
        corrected.alpha_volume / 3.0,
        found.lattice_parameter(corrected),
    )


# S. I. Potashnikov et al., J. Nucl. Mater. 419, 217 (2011): polynomials a(T) of classical molecular
# dynamics with each set (uo2.json). α (10⁻⁶/K) at 1000 and 1500 K by molecular dynamics, quasi-harmonic,
# leading order: Busker-02 6.90 7.03 6.75, 7.06 7.78 7.20; Arima-05 10.51 11.71 11.00, 12.07 14.29 12.58;
# Yakub-09 12.90 13.19 12.80, 15.49 15.97 15.07; Lewis-85 7.10 7.64 7.20, 7.08 8.58 7.64;
# Nekrasov-08 (1000 K) 9.73 12.77 8.90; Basak-03 (1000 K) 12.48 12.56 12.29. The other three sets have
# imaginary phonons or none of the two temperatures on their branch. Busker-02 and Basak-03 at 1000 K
# are the two in which the quasi-harmonic α is the nearer one; all of theirs agree within 2.5 %.
NEARER = {
    "UO2 Busker-02": (1500.0,),
    "UO2 Arima-05": (1000.0, 1500.0),
    "UO2 Yakub-09": (1000.0, 1500.0),
    "UO2 Lewis-85": (1000.0, 1500.0),
    "UO2 Nekrasov-08": (1000.0,),
}


@pytest.mark.parametrize("name", list(NEARER))
def test_urania_comes_nearer_to_molecular_dynamics(name: str) -> None:
    polynomial = np.poly1d(check_of("uo2", name)["molecular_dynamics_a_A"]["polynomial_T3_T2_T1_T0"])
    temperature = np.array(NEARER[name])
    published = polynomial.deriv()(temperature) / polynomial(temperature)
    plain, _, corrected, a = corrected_and_not(name, temperature)
    assert (np.abs(corrected - published) < np.abs(plain - published)).all()
    np.testing.assert_allclose(a, polynomial(temperature), rtol=5e-4)


@pytest.mark.parametrize("name", ["UO2 Busker-02", "UO2 Basak-03"])
def test_urania_where_anharmonicity_is_small(name: str) -> None:
    polynomial = np.poly1d(check_of("uo2", name)["molecular_dynamics_a_A"]["polynomial_T3_T2_T1_T0"])
    temperature = np.array([1000.0])
    published = polynomial.deriv()(temperature) / polynomial(temperature)
    plain, _, corrected, _ = corrected_and_not(name, temperature)
    np.testing.assert_allclose(plain, published, rtol=0.025)
    np.testing.assert_allclose(corrected, published, rtol=0.025)


@pytest.mark.parametrize("name", [*NEARER, "UO2 Basak-03"])
def test_urania_is_within_the_stated_truncation(name: str) -> None:
    """Held out when the factor was chosen. Stated against found, %: Busker-02 8.0 2.0; Arima-05 5.5 4.7 and
    18.5 4.1; Yakub-09 5.5 −0.8 and 18.7 −2.7; Lewis-85 2.5 1.3 and 8.4 8.0; Nekrasov-08 32.9 −8.7;
    Basak-03 25.4 −1.5."""
    polynomial = np.poly1d(check_of("uo2", name)["molecular_dynamics_a_A"]["polynomial_T3_T2_T1_T0"])
    temperature = np.array(NEARER.get(name, (1000.0,)))
    published = polynomial.deriv()(temperature) / polynomial(temperature)
    _, _, corrected, _ = corrected_and_not(name, temperature)
    t = temperature / followed(name, 1.05 * temperature[-1]).travelled.end_K
    assert (np.abs(corrected / published - 1.0) < TRUNCATION * t**3).all()


# S. Grieshammer et al., Solid State Ionics 355, 115405 (2020), tables: mean α between 300 and 1000 K by
# molecular dynamics with rigid ions, two digits printed (ceo2.json). MD, quasi-harmonic, leading order:
# B1a 6.4 6.59 6.44; B1b 5.7 5.67 5.60; B2 5.8 6.05 5.95.
@pytest.mark.parametrize("name", ["CEO2 B1a", "CEO2 B2"])
def test_ceria_comes_nearer_to_molecular_dynamics(name: str) -> None:
    published = check_of("ceo2", name)["published_mean_alpha_300_1000K_molecular_dynamics_per_K"]
    _, plain, _, corrected = corrected_and_not(name, np.array([300.0, 1000.0]))

    def mean(a: np.ndarray) -> float:
        return float((a[1] - a[0]) / a[0] / 700.0)

    assert abs(mean(corrected) - published) < abs(mean(plain) - published)
    assert mean(corrected) == pytest.approx(published, rel=0.03)


def test_ceria_b1b_within_the_printed_digits() -> None:
    published = check_of("ceo2", "CEO2 B1b")["published_mean_alpha_300_1000K_molecular_dynamics_per_K"]
    _, _, _, a = corrected_and_not("CEO2 B1b", np.array([300.0, 1000.0]))
    assert (a[1] - a[0]) / a[0] / 700.0 == pytest.approx(published, rel=0.025)
