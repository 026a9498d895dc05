"""The conventions in which laboratories report expansion, and the ways between them.

Terms as in ASTM E228 (push-rod dilatometry) and ISO 7991 (mean coefficient of linear expansion):

- **elongation**, linear thermal expansion ΔL/L₀: (L − L₀)/L₀, dimensionless, from a reference
  temperature T₀ that must be stated (E228 and most tables: 293.15 K; ISO 7991 quotes
  20 °C to 300 °C);
- **mean coefficient** of linear expansion between T₀ and T: (L − L₀)/(L₀ (T − T₀)), 1/K;
- **instantaneous coefficient** at T: (1/L) dL/dT, 1/K (E228 also divides by L₀; the two differ by
  the factor 1 + ΔL/L₀, and this program always divides by L);
- **lattice parameter** against T, from diffraction: a length L in the sense above.

Every function is pure: arrays in, arrays out. Temperatures are in K, shape (n,), increasing.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import constants as _si
from scipy.interpolate import CubicSpline

Array = NDArray[np.float64]

#: 0 °C in K.
ZERO_CELSIUS_K: float = _si.zero_Celsius

#: How close to T₀ the mean coefficient is replaced by its limit, K.
SAME_TEMPERATURE_K = 1e-6


def kelvin(temperature_C: ArrayLike) -> Array:
    """Return temperatures in K for temperatures in °C."""
    return _array(temperature_C) + ZERO_CELSIUS_K


def celsius(temperature_K: ArrayLike) -> Array:
    """Return temperatures in °C for temperatures in K."""
    return _array(temperature_K) - ZERO_CELSIUS_K


def elongation(temperature_K: ArrayLike, length: ArrayLike, reference_K: float) -> Array:
    """Return ΔL/L₀ from a smooth length; NaN when T₀ lies outside the temperatures.

    Parameters
    ----------
    temperature_K
        Shape (n,), increasing, n ≥ 2.
    length
        Shape (n,), any unit: a length or a lattice parameter.
    reference_K
        T₀; L₀ is interpolated there by a cubic spline.
    """
    values = _array(length)
    reference = _at(temperature_K, values, reference_K)
    return (values - reference) / reference


def mean_coefficient(temperature_K: ArrayLike, length: ArrayLike, reference_K: float) -> Array:
    """Return the mean coefficient between T₀ and each T, 1/K; at T₀ itself its limit (1/L₀) dL/dT."""
    stretch = elongation(temperature_K, length, reference_K)
    mean = mean_from_elongation(temperature_K, stretch, reference_K)
    here = np.isnan(mean) & np.isfinite(stretch)
    limit = instantaneous_coefficient(temperature_K, length) * (1.0 + stretch)
    return np.where(here, limit, mean)


def instantaneous_coefficient(temperature_K: ArrayLike, length: ArrayLike) -> Array:
    """Return (1/L) dL/dT, 1/K, from the spline through a smooth length (noise is not smoothed)."""
    values = _array(length)
    slope: Array = _spline(temperature_K, values)(_array(temperature_K), 1)
    return slope / values


def mean_from_elongation(temperature_K: ArrayLike, stretch: ArrayLike, reference_K: float) -> Array:
    """Return (ΔL/L₀)/(T − T₀), 1/K; NaN at T₀, where it is not defined."""
    span = _array(temperature_K) - reference_K
    span = np.where(np.abs(span) < SAME_TEMPERATURE_K, np.nan, span)
    result: Array = _array(stretch) / span
    return result


def elongation_from_mean(temperature_K: ArrayLike, mean_per_K: ArrayLike, reference_K: float) -> Array:
    """Return ΔL/L₀ from the mean coefficient (1/K) between T₀ and each T."""
    result: Array = _array(mean_per_K) * (_array(temperature_K) - reference_K)
    return result


def instantaneous_from_elongation(temperature_K: ArrayLike, stretch: ArrayLike) -> Array:
    """Return (1/L) dL/dT, 1/K, from ΔL/L₀; the reference temperature drops out."""
    return instantaneous_coefficient(temperature_K, 1.0 + _array(stretch))


def elongation_from_instantaneous(temperature_K: ArrayLike, alpha_per_K: ArrayLike, reference_K: float) -> Array:
    """Return ΔL/L₀ = exp(∫α dT from T₀ to T) − 1; NaN when T₀ lies outside the temperatures."""
    temperature = _array(temperature_K)
    integral = _spline(temperature, _array(alpha_per_K)).antiderivative()
    if not temperature[0] <= reference_K <= temperature[-1]:
        return np.full(len(temperature), np.nan)
    result: Array = np.expm1(integral(temperature) - integral(reference_K))
    return result


def elongation_from_length(length: ArrayLike, reference_length: float) -> Array:
    """Return ΔL/L₀ for lengths (or lattice parameters) and L₀ in the same unit."""
    result: Array = _array(length) / reference_length - 1.0
    return result


def length_from_elongation(stretch: ArrayLike, reference_length: float) -> Array:
    """Return the length (or lattice parameter) in the unit of L₀."""
    result: Array = reference_length * (1.0 + _array(stretch))
    return result


def elongation_from_other_reference(stretch: ArrayLike, stretch_at_new_reference: float) -> Array:
    """Return ΔL/L₀ from a new reference temperature, given its ΔL/L₀ from the old one."""
    result: Array = (1.0 + _array(stretch)) / (1.0 + stretch_at_new_reference) - 1.0
    return result


def mean_from_logarithmic(temperature_K: ArrayLike, logarithmic_per_K: ArrayLike, reference_K: float) -> Array:
    """Return the mean coefficient from ln(L/L₀)/(T − T₀), as some X-ray papers report it, 1/K."""
    span = _array(temperature_K) - reference_K
    stretch = np.expm1(_array(logarithmic_per_K) * span)
    return mean_from_elongation(temperature_K, stretch, reference_K)


def polycrystal_average(alpha_a: ArrayLike, alpha_c: ArrayLike) -> Array:
    """Return (2α_a + α_c)/3, one third of the volume coefficient of a crystal with axes a = b and c."""
    return (2.0 * _array(alpha_a) + _array(alpha_c)) / 3.0


def molar_volume(cell_volume_A3: ArrayLike, formula_units: int) -> Array:
    """Return cm³ per mole of formula units for the volume (Å³) of a cell that holds ``formula_units``."""
    per_unit: Array = _array(cell_volume_A3) * (_si.N_A * 1e-24 / formula_units)
    return per_unit


def _array(values: ArrayLike) -> Array:
    array: Array = np.asarray(values, dtype=float)
    return array


def _spline(temperature_K: ArrayLike, values: Array) -> CubicSpline:
    return CubicSpline(_array(temperature_K), values)


def _at(temperature_K: ArrayLike, values: Array, wanted_K: float) -> float:
    temperature = _array(temperature_K)
    if not temperature[0] <= wanted_K <= temperature[-1]:
        return float("nan")
    return float(_spline(temperature, values)(wanted_K))
