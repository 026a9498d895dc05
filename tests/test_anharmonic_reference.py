"""Leading order against anharmonic.json, classical against classical: where they differ, and who is right.

``D2_leading`` of that file is a sum at finite mesh and range which the file does not state; it lies above
ours by 1.4 to 1.6 % (Ar), 3.3 to 3.5 % (NaCl), 2.9 to 3.3 % (MgO), and by 0.10 to 0.15 in units in which
its two parts are 4 and −4 (Cu, where they cancel). The simulated forces of the same file decide: moved to
infinite size by the file's own correction and followed to T → 0 they lie 0.4, 0.1 and 0.7 % above our sum
and 1.0, 3.5 and 2.7 % below ``D2_leading``. With ``D2_leading`` put in place of our F₂′ our α is that of
the file within 0.01 %, so nothing else differs.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
from anharmonic_cases import case
from classical_crystal import ClassicalCrystal, classical_crystal
from numpy.typing import NDArray

from thermex.anharmonic.correction import TRUNCATION
from thermex.anharmonic.leading_order import leading_order
from thermex.anharmonic.term import AnharmonicTerm, term_through
from thermex.chebyshev import Box
from thermex.constants import BOLTZMANN

Array = NDArray[np.float64]
Rows = dict[str, Array]

NAMES = ("S1", "S2", "S3", "S5")


@dataclass(frozen=True)
class Compared:
    """A case up to t = 0.65: the classical crystal, our F₂ and the columns of the reference."""

    crystal: ClassicalCrystal
    term: AnharmonicTerm
    static_a: float
    rows: Rows

    def strain(self, name: str) -> Array:
        """Return ln(a/a₀) of a column of lattice parameters."""
        return np.log(self.rows[name] / self.static_a)

    def alpha(self, *terms: AnharmonicTerm) -> Array:
        return self.crystal.states(self.rows["T"], *terms).alpha_volume / 3.0

    def force_at_infinite_size(self) -> Array:
        """Return the simulated D/(k_BT)² moved to infinite size as the reference moved a: δD = −F″ δx."""
        x, t = self.strain("a_classical_exact"), self.rows["T"]
        whole = self.crystal.surface.best.at(t)(x[:, None])
        _, curvature = self.crystal.load.enthalpic(whole, x[:, None])
        squared = (BOLTZMANN * t) ** 2
        stiffness = curvature[:, 0, 0] / squared + self.term.value(x)[2]
        return self.rows["D_over_kT2"] - stiffness * (self.strain("a_classical_exact_inf") - x)


@cache
def compared(name: str) -> Compared:
    model, crystal, rows = case(name)
    rows = [r for r in rows if r["t"] < 0.65]
    columns = {k: np.array([r[k] for r in rows], dtype=float) for k in rows[0]}
    found = classical_crystal(model, crystal, 1.05 * float(columns["T"][-1]))
    term = leading_order(model, found.crystal, found.surface.box.window).best
    return Compared(found, term, float(crystal.lattice_parameters[0]), columns)


def term_of_reference(name: str) -> AnharmonicTerm:
    """Return a term whose F₂′ runs through ``D2_leading`` of all rows (a polynomial in x)."""
    _, crystal, rows = case(name)
    x = np.log([r["a_classical_exact"] / crystal.lattice_parameters[0] for r in rows])
    slope = np.polynomial.Polynomial.fit(x, [r["D2_leading"] for r in rows], 5)
    box = Box(np.array(compared(name).crystal.surface.box.window), (9,))
    return term_through(box, slope.integ()(box.grid[:, 0]))


@pytest.mark.parametrize("name", NAMES)
def test_quasiharmonic_alpha_is_that_of_the_reference(name: str) -> None:
    found = compared(name)
    np.testing.assert_allclose(found.alpha(), found.rows["alpha_QHA"], rtol=1e-4)


@pytest.mark.parametrize("name", NAMES)
def test_alpha_is_that_of_the_reference_given_its_force(name: str) -> None:
    found = compared(name)
    np.testing.assert_allclose(found.alpha(term_of_reference(name)), found.rows["alpha_leading_order"], rtol=1e-4)


def limit(found: Compared, sum_of: Array) -> float:
    """Return the simulated force over a sum, the four coldest rows extrapolated to T → 0."""
    ratio = found.force_at_infinite_size()[:4] / sum_of[:4]
    return float(np.polynomial.Polynomial.fit(found.rows["T"][:4], ratio, 2)(0.0))


@pytest.mark.parametrize("name", ["S1", "S2", "S3"])
def test_simulated_force_goes_to_our_sum_and_not_to_that_of_the_reference(name: str) -> None:
    found = compared(name)
    ours = limit(found, found.term.value(found.strain("a_classical_exact"))[1])
    theirs = limit(found, found.rows["D2_leading"])
    assert ours == pytest.approx(1.0, abs=0.008)
    assert abs(ours - 1.0) < 0.5 * abs(theirs - 1.0)


def test_simulated_force_of_copper_goes_to_our_sum_within_its_error() -> None:
    # cubic and quartic part are −3.7 and 3.6 at 300 K: a difference of 0.03 is 1 % of either; the
    # simulated values have 0.012 each, which makes 0.03 at T → 0
    found = compared("S5")
    t, force = found.rows["T"], found.force_at_infinite_size()

    def rest(sum_of: Array) -> float:
        return float(np.polynomial.Polynomial.fit(t[:4], (force - sum_of)[:4], 2)(0.0))

    ours = rest(found.term.value(found.strain("a_classical_exact"))[1])
    assert abs(ours) < 0.04
    assert abs(ours) < abs(rest(found.rows["D2_leading"]))


@pytest.mark.parametrize("name", NAMES)
def test_leading_order_alpha_beside_the_reference(name: str) -> None:
    """Within 0.5 % to t = 0.38; above it up to 0.8 %, for the difference in F₂′, and nearer to simulation."""
    found, rows = compared(name), compared(name).rows
    alpha = found.alpha(found.term)
    away = np.abs(alpha / rows["alpha_leading_order"] - 1.0)
    assert (away[rows["t"] < 0.38] < 0.005).all()
    assert (away[rows["t"] < 0.50] < 0.008).all()
    exact = rows["alpha_exact_inf"]
    assert (np.abs(alpha - exact) < np.abs(rows["alpha_leading_order"] - exact)).all()


@pytest.mark.parametrize("name", NAMES)
def test_stated_truncation_covers_what_simulation_finds(name: str) -> None:
    # alpha_exact_inf of anharmonic.json; the four crystals that the factor was taken from
    found, rows = compared(name), compared(name).rows
    short = 1.0 - found.alpha(found.term) / rows["alpha_exact_inf"]
    warm = rows["t"] > 0.15
    assert (short[warm] > 0.0).all()
    assert (short[warm] < TRUNCATION * rows["t"][warm] ** 3).all()
    assert short[-1] > 0.4 * TRUNCATION * rows["t"][-1] ** 3
