"""Derivatives of the pair forms against sympy, and energies and forces against ASE's own calculators."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import sympy
from ase import Atoms
from ase.build import bulk
from ase.calculators.lj import LennardJones as AseLennardJones
from ase.calculators.morse import MorsePotential

from thermex.potential.forms import (
    Born,
    BornMayer,
    Buckingham,
    LennardJones,
    LennardJonesAB,
    Mie,
    Morse,
    PairForm,
    Tabulated,
    read_table,
)
from thermex.potential.lattice_sums import lattice_response
from thermex.potential.model import Interaction, Kind, PairModel, Particles
from thermex.potential.terms import Tapered

pytestmark = pytest.mark.crosscheck

DISTANCES = np.array([1.7, 2.3, 3.1, 4.7])
R = sympy.Symbol("r", positive=True)


def exact(expression: sympy.Expr, order: int) -> np.ndarray:
    """Evaluate a sympy expression and its derivatives with 30 digits, shape (order + 1, 4)."""
    rows = [sympy.diff(expression, R, k) if k else expression for k in range(order + 1)]
    values = [[float(row.evalf(30, subs={R: sympy.Float(str(r), 30)})) for r in DISTANCES] for row in rows]
    return np.array(values)


def number(value: float) -> sympy.Rational:
    return sympy.Rational(str(value))


def mie(epsilon: float, sigma: float, n: float, m: float) -> sympy.Expr:
    """Return the n–m form as G. Mie wrote it (well depth ε, zero at σ)."""
    e, s, n_, m_ = map(number, (epsilon, sigma, n, m))
    front = n_ / (n_ - m_) * (n_ / m_) ** (m_ / (n_ - m_))
    return front * e * ((s / R) ** n_ - (s / R) ** m_)


FORMS: dict[str, tuple[PairForm, sympy.Expr]] = {
    "Born": (Born(620.0, 8.5), 620 * R ** -number(8.5)),
    "Born-Mayer": (BornMayer(1428.5, 0.2945), number(1428.5) * sympy.exp(-R / number(0.2945))),
    "Buckingham": (
        Buckingham(22764.3, 0.149, 27.88, 3.5),
        number(22764.3) * sympy.exp(-R / number(0.149)) - number(27.88) / R**6 - number(3.5) / R**8,
    ),
    "Mie": (Mie(0.0104, 3.4, 9.0, 6.0), mie(0.0104, 3.4, 9, 6)),
    "Mie, real exponents": (Mie(0.02, 3.0, 11.5, 5.5), mie(0.02, 3.0, 11.5, 5.5)),
    "Lennard-Jones": (
        LennardJones(0.0104, 3.4),
        4 * number(0.0104) * ((number(3.4) / R) ** 12 - (number(3.4) / R) ** 6),
    ),
    "Lennard-Jones AB": (LennardJonesAB(64.0, 1.0e5), number(1.0e5) / R**12 - 64 / R**6),
    "Morse": (
        Morse(0.3429, 1.3588, 2.866),
        number(0.3429)
        * (sympy.exp(-2 * number(1.3588) * (R - number(2.866))) - 2 * sympy.exp(-number(1.3588) * (R - number(2.866)))),
    ),
}


@pytest.mark.parametrize("name", FORMS)
def test_derivatives_of_closed_forms(name: str) -> None:
    form, expression = FORMS[name]
    expected = exact(expression, 4)
    # a sum of two cancelling terms loses digits: the floor is a share of the largest value of the row
    floor = 1e-12 * np.abs(expected).max(axis=1, keepdims=True)
    assert np.all(np.abs(form.derivatives(DISTANCES, 4) - expected) <= 1e-11 * np.abs(expected) + floor)


def test_derivatives_of_a_tapered_form() -> None:
    cutoff = number(5)
    start = cutoff * sympy.Rational(9, 10)
    t = (R - start) / (cutoff - start)
    switch = 1 - 10 * t**3 + 15 * t**4 - 6 * t**5
    body = FORMS["Buckingham"][1]
    expected = exact(body * switch, 4)[:, 3]
    plain = exact(body, 4)[:, :3]
    found = Tapered(FORMS["Buckingham"][0].terms(), 5.0).derivatives(DISTANCES, 4)
    assert found[:, 3] == pytest.approx(expected, rel=1e-10)
    assert found[:, :3] == pytest.approx(plain, rel=1e-11)


def test_taper_joins_smoothly_at_both_ends() -> None:
    """Energy, force and force constant are continuous (the switch is quintic)."""
    term = Tapered(FORMS["Born-Mayer"][0].terms(), 2.5)
    for edge in (2.25, 2.5):
        sides = term.derivatives(np.array([edge - 1e-9, edge + 1e-9]), 2)
        assert sides[:, 0] == pytest.approx(sides[:, 1], rel=1e-5, abs=1e-5)
    assert not term.derivatives(np.array([2.5, 3.0]), 2).any()


def test_a_table_gives_the_form_it_was_made_from(tmp_path: Path) -> None:
    """A fine table of a Morse curve returns the curve and its derivatives (sympy)."""
    r = np.linspace(1.0, 7.0, 1201)
    form, expression = FORMS["Morse"]
    np.savetxt(tmp_path / "curve.txt", np.column_stack([r, form.derivatives(r, 0)[0]]), fmt="%.16e")
    table = read_table(tmp_path / "curve.txt")
    assert isinstance(table, Tabulated)
    expected, found = exact(expression, 4), table.derivatives(DISTANCES, 4)
    for order, tolerance in enumerate((1e-10, 1e-9, 1e-7, 1e-5, 1e-3)):
        scale = np.abs(expected[order]).max()
        assert np.abs(found[order] - expected[order]).max() < tolerance * scale


def energy_and_forces(form: PairForm, atoms: Atoms) -> tuple[float, np.ndarray]:
    model = PairModel((Kind("X", False, 0.0),), tuple(Interaction(0, 0, term) for term in form.terms()))
    zeros = np.zeros(len(atoms), dtype=int)
    particles = Particles(atoms.cell.array, atoms.positions, zeros, np.arange(len(atoms)))
    response = lattice_response(model, particles)
    return response.energy, -response.gradient[6:].reshape(-1, 3)


def rattled(symbol: str, a: float) -> Atoms:
    atoms = bulk(symbol, "fcc", a=a, cubic=True)
    atoms.rattle(0.08, seed=3)
    return atoms


def test_ase_lennard_jones() -> None:
    """ASE cuts at r_c; a long cutoff and its r⁻³ tail bring it to the complete sum."""
    atoms = rattled("Ar", 5.3)
    epsilon, sigma = 0.0104, 3.4
    energy, forces = energy_and_forces(LennardJones(epsilon, sigma), atoms)
    cutoff = 45.0
    atoms.calc = AseLennardJones(epsilon=epsilon, sigma=sigma, rc=cutoff, smooth=False)
    # ASE shifts every pair by φ(r_c): take the shift off, and add what lies beyond, both of a continuum
    # (the sum of φ − φ(r_c) hardly feels which atoms lie just inside r_c)
    density = len(atoms) / atoms.get_volume()
    shift = 4.0 * epsilon * ((sigma / cutoff) ** 12 - (sigma / cutoff) ** 6)
    within = 4.0 / 3.0 * np.pi * density * cutoff**3 - 1.0
    beyond = -16.0 / 3.0 * np.pi * density * epsilon * sigma**6 / cutoff**3
    expected = atoms.get_potential_energy() + 0.5 * len(atoms) * (within * shift + beyond)
    assert energy == pytest.approx(expected, rel=1e-6)
    assert forces == pytest.approx(atoms.get_forces(), abs=1e-6)


def test_ase_morse() -> None:
    """ASE's ρ₀ is a·r₀ and its curve is switched off between r₁ and r₂; these lie where it has died out."""
    atoms = rattled("Cu", 3.61)
    depth, a, r0 = 0.3429, 1.3588, 2.866
    energy, forces = energy_and_forces(Morse(depth, a, r0), atoms)
    atoms.calc = MorsePotential(epsilon=depth, r0=r0, rho0=a * r0, rcut1=17.0 / r0, rcut2=18.0 / r0)
    assert energy == pytest.approx(atoms.get_potential_energy(), rel=1e-6)
    assert forces == pytest.approx(atoms.get_forces(), abs=1e-6)


def test_forces_are_the_slope_of_the_energy() -> None:
    """Common practice, no source: a finite difference of the energy."""
    _, forces = energy_and_forces(LennardJones(0.0104, 3.4), rattled("Ar", 5.3))
    assert -(_moved(1e-4) - _moved(-1e-4)) / 2e-4 == pytest.approx(forces[1, 0], abs=1e-8)


def _moved(h: float) -> float:
    atoms = rattled("Ar", 5.3)
    atoms.positions[1, 0] += h
    return energy_and_forces(LennardJones(0.0104, 3.4), atoms)[0]
