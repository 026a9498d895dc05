"""Measured values laid beside a prediction. Rules of the project, no outside source."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from thermex import InputError, load_case, predict
from thermex.measured import best_measured, load_material
from thermex.report.beside import Curve, beside_of, lay_beside, material_of, value_at

NAN = float("nan")


def curve(points: dict[float, float], source: int = 1, quantity: str = "gruneisen", axis: str = "") -> Curve:
    return Curve(quantity, axis, np.array([*points]), np.array([*points.values()]), np.full(len(points), NAN), source)


@pytest.mark.parametrize(
    ("points", "kelvin", "expected"),
    [
        ({300.0: 1.5}, 300.0, 1.5),
        ({298.15: 1.5}, 300.0, 1.5),
        ({293.0: 1.5}, 300.0, NAN),
        ({300.0: 1.0, 400.0: 2.0}, 350.0, 1.5),
        ({400.0: 2.0, 300.0: 1.0}, 325.0, 1.25),
        ({300.0: 1.0, 600.0: 2.0}, 450.0, NAN),
        ({300.0: 1.0, 600.0: 2.0}, 599.0, 2.0),
        ({1200.0: 1.0, 1500.0: 2.0}, 1350.0, 1.5),
        ({300.0: 1.0, 400.0: 2.0}, 500.0, NAN),
        ({300.0: 1.0, 400.0: 2.0}, 100.0, NAN),
        ({300.0: NAN}, 300.0, NAN),
    ],
)
def test_value_at(points: dict[float, float], kelvin: float, expected: float) -> None:
    assert value_at(curve(points), np.array([kelvin]))[0] == pytest.approx(expected, nan_ok=True)


def test_first_series_that_reaches_wins_and_is_named() -> None:
    found = lay_beside(
        np.array([100.0, 300.0, 900.0]),
        [curve({300.0: 1.5}, source=1), curve({100.0: 1.1, 200.0: 1.2, 300.0: 9.0}, source=2)],
        ("one", "two"),
    )
    column = found.column("gruneisen", 3)
    assert column.source == (2, 1, 0)
    np.testing.assert_allclose(column.value, [1.1, 1.5, NAN])


def test_a_series_along_one_axis_is_not_an_average() -> None:
    found = lay_beside(np.array([300.0]), [curve({300.0: 1.5}, axis="c")], ("one",))
    assert found.columns == {} and len(found.curves) == 1


CASES = Path(__file__).resolve().parent.parent / "cases"


def test_what_is_shipped_stands_beside_a_prediction() -> None:
    case = load_case(CASES / "kiln-lining-magnesia-shell.toml")
    prediction = predict(case)
    found = beside_of(prediction)
    assert found.sources == load_material("MgO").sources
    column = found.column("alpha_linear_per_K", len(prediction.temperature_K))
    for k, kelvin in enumerate(prediction.temperature_K):
        expected = best_measured(load_material("MgO"), "linear expansion coefficient", float(kelvin))
        assert expected is not None and column.value[k] == expected.value
        assert column.source[k] == expected.source_number
    assert {curve.quantity for curve in found.curves} >= {"alpha_linear_per_K", "gruneisen", "bulk_modulus_S_GPa"}
    assert all(1 <= curve.source <= len(found.sources) for curve in found.curves)
    assert beside_of(replace(prediction, case=replace(case, measured=None))).sources == ()


def test_an_own_file_stands_alone_or_before_what_is_shipped() -> None:
    case = load_case(CASES / "cold-window-caf2-gillan.toml")
    own = material_of(case)
    assert own is not None and len(own.series) == 1 and "INVENTED" in own.sources[0]
    assert case.measured is not None
    both = material_of(replace(case, measured=replace(case.measured, material="CaF2")))
    assert both is not None and both.sources[0] == own.sources[0]
    assert both.sources[1:] == load_material("CaF2").sources


def test_an_unknown_material_is_told() -> None:
    case = load_case(CASES / "cold-window-caf2.toml")
    assert case.measured is not None
    with pytest.raises(InputError, match="did you mean"):
        material_of(replace(case, measured=replace(case.measured, material="CaF3")))
