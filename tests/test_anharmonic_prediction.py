"""The rule and the correction in a prediction: what is printed, where it starts and what is said."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from thermex.anharmonic.correction import TRUNCATION
from thermex.case.case import Accuracy, Case
from thermex.case.published import case_from_published
from thermex.case.reader import case_from_dict
from thermex.errors import InputError
from thermex.expansion import predict
from thermex.prediction import Prediction

SALT = "TF64 NaCl"
TEMPERATURES = (50.0, 100.0, 200.0, 300.0, 400.0, 600.0, 700.0)


def salt(**accuracy: Any) -> Case:
    return replace(case_from_published(SALT, TEMPERATURES), accuracy=Accuracy(**accuracy))


@pytest.fixture(scope="module")
def by_default() -> Prediction:
    return predict(salt())


def test_leading_order_is_the_default(by_default: Prediction) -> None:
    found = by_default.anharmonic
    assert found is not None
    assert found.kind == "leading order"
    assert found.starts_K == pytest.approx(by_default.debye_moment_K / 4.0)
    cold = np.array(TEMPERATURES) < found.starts_K
    assert cold.any()
    for values in (found.alpha_linear_per_K, found.lattice_A["a"], found.gruneisen, found.bulk_modulus_T_GPa):
        # 700 K is T_eff/T_end = 0.85: the own error of the leading order is too large there to print it
        assert (np.isfinite(values) != (cold | (np.array(TEMPERATURES) == 700.0))).all()


def test_salt_with_anharmonicity_meets_the_measured_value(by_default: Prediction) -> None:
    # NaCl at 300 K: anharmonic.md: quasi-harmonic 43.4, corrected 39.3, measured 39.3 to 39.6 (from memory)
    assert by_default.anharmonic is not None
    assert by_default.alpha_linear_per_K[3] == pytest.approx(43.4e-6, rel=0.005)
    assert by_default.anharmonic.alpha_linear_per_K[3] == pytest.approx(39.45e-6, rel=0.03)


def test_rule_agrees_with_what_the_correction_finds(by_default: Prediction) -> None:
    rule, found = by_default.rule, by_default.anharmonic
    assert rule is not None and found is not None
    assert rule.end_K == pytest.approx(by_default.valid_to_K)
    change = by_default.alpha_linear_per_K / found.alpha_linear_per_K - 1.0
    for k in (2, 3, 4):  # t below 0.5
        assert rule.low[k] - 0.02 < change[k] < rule.high[k] + 0.02


def test_says_where_it_is_large_and_where_extrapolated(by_default: Prediction) -> None:
    found = by_default.anharmonic
    assert found is not None
    assert 380.0 < found.extrapolated_from_K < 420.0  # half of T_end, which is 821 K in converged.json
    assert any("changes α by more than 3%" in note for note in found.notes)
    assert any("extrapolated" in note for note in found.notes)


def test_error_holds_numerical_part_and_truncation(by_default: Prediction) -> None:
    found, rule = by_default.anharmonic, by_default.rule
    assert found is not None and rule is not None
    good = np.isfinite(found.alpha_relative_error)
    left_out = TRUNCATION * rule.t[good] ** 3
    numerical = np.sqrt(found.alpha_relative_error[good] ** 2 - left_out**2)
    assert (numerical > 0.0).all()
    assert numerical[2] < 1e-3  # 300 K
    assert left_out[2] == pytest.approx(0.8 * (313.5 / 820.8) ** 3, rel=0.01)  # T_eff/T_end
    assert any("higher orders" in note and "fluorite" in note for note in found.notes)


def test_thermodynamic_identities_hold_with_the_term(by_default: Prediction) -> None:
    """C_P − C_V = T V α² B_T, with C_V from γ = α V B_T/C_V."""
    found = by_default.anharmonic
    assert found is not None
    k, t = 4, TEMPERATURES[4]
    alpha, volume = found.alpha_volume_per_K[k], found.volume_A3[k]
    modulus = found.bulk_modulus_T_GPa[k]
    work = volume * modulus * 6.02214076e23 * 1e-30 * 1e9  # J/mol of formula units, one a cell
    heat_volume = alpha * work / found.gruneisen[k]
    assert found.heat_capacity_P_J_per_mol_K[k] - heat_volume == pytest.approx(t * alpha**2 * work, rel=1e-6)


def test_none_gives_the_rule_alone() -> None:
    found = predict(salt(anharmonic="none"))
    assert found.anharmonic is None
    assert found.rule is not None
    assert np.isfinite(found.rule.overestimate).all()


def test_untested_crystals_get_the_rule_and_the_reason() -> None:
    found = predict(case_from_published("CEO2 B1a shell", (300.0,)))
    assert found.anharmonic is None
    assert any("polarisable" in note for note in found.notes)
    assert found.rule is not None


def test_sampled_is_refused_where_it_is_not_offered() -> None:
    case = replace(case_from_published("CEO2 B1a shell", (300.0,)), accuracy=Accuracy(anharmonic="sampled"))
    with pytest.raises(InputError, match="polarisable"):
        predict(case)


def rutile() -> Case:
    return case_from_published("MA91 TiO2", (300.0,))


def copper_from_ase() -> Case:
    crystal = {"prototype": "fcc", "sites": ["Cu"], "a": 3.6}
    forces = {"calculator": "effective medium"}
    return case_from_dict({"crystal": crystal, "potential": forces, "conditions": {"temperature": [300.0]}})


@pytest.mark.parametrize(
    ("case", "reason"),
    [
        (lambda: case_from_published("CEO2 B1a shell", (300.0,)), "polarisable"),
        (rutile, "cubic"),
        (copper_from_ase, "analytic pair potential"),
    ],
)
def test_refusal_comes_before_any_work(case: Callable[[], Case], reason: str, monkeypatch: pytest.MonkeyPatch) -> None:
    def never(*_: object) -> None:
        raise AssertionError("work was done before the refusal")

    monkeypatch.setattr("thermex.expansion.ground_of", never)
    asked = replace(case(), accuracy=Accuracy(anharmonic="sampled"), source="some.toml")
    with pytest.raises(InputError, match=reason) as caught:
        predict(asked)
    line = str(caught.value)
    assert line.startswith('some.toml: accuracy.anharmonic: "sampled" is not offered')
    assert '"none"' in line and "\n" not in line


def test_sampled_is_reproducible_and_agrees_with_leading_order_in_the_cold() -> None:
    argon = case_from_published("LJ58 Ar", (25.0, 35.0))
    accuracy = Accuracy(anharmonic="sampled", sampled_error=0.03, seed=7)
    first, second = (predict(replace(argon, accuracy=accuracy)).anharmonic for _ in range(2))
    leading = predict(argon).anharmonic
    assert first is not None and second is not None and leading is not None
    assert first.kind == "sampled"
    np.testing.assert_array_equal(first.alpha_linear_per_K, second.alpha_linear_per_K)
    assert any("seed 7" in note for note in first.notes)
    assert any("statistical" in note and "finite cell" in note for note in first.notes)
    np.testing.assert_allclose(first.lattice_A["a"], leading.lattice_A["a"], rtol=3e-4)
    assert (first.alpha_linear_per_K > leading.alpha_linear_per_K).all()
