"""Measured values laid beside a prediction. Rules of the project, no outside source."""

from __future__ import annotations

import numpy as np
import pytest

from thermex.report.beside import Curve, lay_beside, value_at

NAN = float("nan")


def curve(points: dict[float, float], source: int = 1, quantity: str = "gruneisen", axis: str = "") -> Curve:
    return Curve(
        quantity, axis, np.array([*points]), np.array([*points.values()]), np.full(len(points), NAN), source
    )


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
