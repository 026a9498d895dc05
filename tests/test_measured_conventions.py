"""The conventions of expansion: each way and back, on laws whose answers are known."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import constants

from thermex.measured import conventions as way

T = np.linspace(100.0, 1300.0, 61)
#: A smooth length with a known coefficient: α(T) = p + q T, L = exp(p T + q T²/2).
P, Q = 8e-6, 6e-9
ALPHA = P + Q * T
LENGTH = 4.2 * np.exp(P * T + 0.5 * Q * T**2)


def exact_elongation(reference: float) -> np.ndarray:
    return np.expm1(P * (T - reference) + 0.5 * Q * (T**2 - reference**2))


def test_temperatures() -> None:
    assert way.kelvin([20.0, -273.15]) == pytest.approx([293.15, 0.0])
    assert way.celsius(way.kelvin([451.0])) == pytest.approx([451.0])
    assert constants.zero_Celsius == way.ZERO_CELSIUS_K


@pytest.mark.parametrize("reference", [100.0, 293.15, 700.0])
def test_from_lengths(reference: float) -> None:
    stretch = way.elongation(T, LENGTH, reference)
    assert stretch == pytest.approx(exact_elongation(reference), abs=1e-9)
    mean = way.mean_coefficient(T, LENGTH, reference)
    away = np.abs(T - reference) > 1.0
    assert mean[away] == pytest.approx((exact_elongation(reference) / (T - reference + 1e-30))[away], rel=1e-4)
    assert np.isfinite(mean).all()
    assert way.instantaneous_coefficient(T, LENGTH) == pytest.approx(ALPHA, rel=1e-4)


def test_the_mean_at_its_reference_is_the_instantaneous_one() -> None:
    mean = way.mean_coefficient(T, LENGTH, 700.0)
    assert mean[T == 700.0] == pytest.approx(ALPHA[T == 700.0], rel=1e-5)


def test_there_and_back() -> None:
    stretch = way.elongation_from_instantaneous(T, ALPHA, 293.15)
    assert stretch == pytest.approx(exact_elongation(293.15), abs=1e-12)
    assert way.instantaneous_from_elongation(T, stretch) == pytest.approx(ALPHA, rel=1e-4)
    mean = way.mean_from_elongation(T, stretch, 293.15)
    assert way.elongation_from_mean(T, mean, 293.15) == pytest.approx(stretch, abs=1e-15)
    length = way.length_from_elongation(stretch, 4.2)
    assert way.elongation_from_length(length, 4.2) == pytest.approx(stretch, abs=1e-15)


def test_a_reference_can_be_changed() -> None:
    stretch = exact_elongation(293.15)
    at_500 = float(np.expm1(P * (500 - 293.15) + 0.5 * Q * (500**2 - 293.15**2)))
    assert way.elongation_from_other_reference(stretch, at_500) == pytest.approx(exact_elongation(500.0))


def test_outside_the_temperatures_there_is_no_reference() -> None:
    assert np.isnan(way.elongation(T, LENGTH, 20.0)).all()
    assert np.isnan(way.mean_coefficient(T, LENGTH, 20.0)).all()
    assert np.isnan(way.elongation_from_instantaneous(T, ALPHA, 20.0)).all()


def test_logarithmic_mean_of_sodium_chloride() -> None:
    """Wang & Reeber 1996 and Walker 2004: a = 5.6401 Å at 298.15 K and 5.8447 Å at 1000 K."""
    logarithmic = np.log(5.8447 / 5.6401) / (1000.0 - 298.15)
    mean = way.mean_from_logarithmic(np.array([1000.0]), logarithmic, 298.15)
    assert mean == pytest.approx([(5.8447 / 5.6401 - 1.0) / (1000.0 - 298.15)], rel=1e-12)
    assert mean == pytest.approx([51.7e-6], abs=0.05e-6)


def test_molar_volume_of_sodium_fluoride() -> None:
    """J. Appl. Cryst. 58 (2025): a = 4.6330 Å and V = 14.9724 cm³/mol at 295 K."""
    assert way.molar_volume(4.6330**3, 4) == pytest.approx(14.9724, rel=1e-4)


def test_polycrystal_average_of_zinc() -> None:
    """CRC Handbook 30.2e-6/K; McCammon & White 1965: 14.5 (a), 61.5 (c): the two agree within 3 %."""
    assert way.polycrystal_average(14.5, 61.5) == pytest.approx(30.2, rel=0.03)
