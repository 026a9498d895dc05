"""Crystals with two free axes: identities between the axes, and close packing in its two stackings."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from reference_models import reference_case

from thermex.case.case import Conditions, CrystalSpec
from thermex.expansion import predict
from thermex.prediction import Prediction

pytestmark = pytest.mark.crosscheck

GRID = (0.0, 20.0, 29.6, 29.8, 30.0, 30.2, 30.4)
MIDDLE = GRID.index(30.0)


@cache
def packed(prototype: str) -> Prediction:
    """Predict Lennard-Jones argon in fcc or hcp stacking."""
    case = reference_case("S3")
    lattice = {"a": 3.75, "c": 6.1} if prototype == "hcp" else case.crystal.lattice
    crystal = CrystalSpec(prototype, ("Ar",), lattice, masses=case.crystal.masses)
    return predict(replace(case, crystal=crystal, conditions=Conditions(GRID)))


def test_static_hcp_lattice() -> None:
    """hcp lies 0.010 % below fcc for 12–6 (T. Kihara and S. Koba, J. Phys. Soc. Japan 7, 348 (1952))."""
    hcp, fcc = packed("hcp").static, packed("fcc").static
    assert hcp.energy_eV / 2.0 / fcc.energy_eV == pytest.approx(8.611070 / 8.610200, abs=3e-6)
    ratio = hcp.lattice_A["c"] / hcp.lattice_A["a"]
    assert ratio == pytest.approx(np.sqrt(8.0 / 3.0), rel=5e-4)


def test_volume_expansion_is_the_sum_of_the_axes() -> None:
    p = packed("hcp")
    total = 2.0 * p.alpha_axis_per_K["a"] + p.alpha_axis_per_K["c"]
    assert total == pytest.approx(p.alpha_volume_per_K, rel=1e-9, abs=1e-15)


@pytest.mark.parametrize("axis", ["a", "c"])
def test_alpha_is_the_slope_of_the_axis(axis: str) -> None:
    """Common practice, no source: five-point derivative."""
    p = packed("hcp")
    v = np.log(p.lattice_A[axis])[MIDDLE - 2 : MIDDLE + 3]
    slope = (v[0] - 8.0 * v[1] + 8.0 * v[3] - v[4]) / (12.0 * 0.2)
    assert slope == pytest.approx(p.alpha_axis_per_K[axis][MIDDLE], rel=1e-6)


def test_stacking_hardly_matters_to_close_packed_argon() -> None:
    """hcp and fcc share their first two shells: a general and a cubic road to nearly one number."""
    hcp, fcc = packed("hcp"), packed("fcc")
    assert hcp.volume_A3 / 2.0 == pytest.approx(fcc.volume_A3, rel=1e-3)
    assert hcp.alpha_volume_per_K[1:] == pytest.approx(fcc.alpha_volume_per_K[1:], rel=2e-2)
    assert hcp.bulk_modulus_T_GPa == pytest.approx(fcc.bulk_modulus_T_GPa, rel=1e-2)
