"""One measured value at one temperature: where a series reaches, and which series to believe."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator

from thermex.measured.conventions import polycrystal_average
from thermex.measured.library import Material
from thermex.measured.quantities import INSTANTANEOUS, LINEAR
from thermex.measured.series import Series

Array = NDArray[np.float64]

#: A single measured temperature stands for others this near: K, and as a share of it.
NEAR_K, NEAR_SHARE = 10.0, 0.03
#: Two measured temperatures are bridged when the upper is at most this many times the lower.
WIDEST_RATIO = 2.0

_CONFIDENCE = {"high": 0, "": 1, "medium": 1, "low": 2}


@dataclass(frozen=True, slots=True)
class Measured:
    """One measured value at one temperature, in the house unit of its series."""

    value: float
    uncertainty: float
    """Absolute; NaN when none is known."""
    source: str
    """Says "from memory" where that is so."""
    source_number: int
    series: Series
    """Where it comes from; the one along a when two axes were averaged."""
    averaged: bool = False
    """True for (2α_a + α_c)/3 made from two axes of one source."""


def value_at(series: Series, temperature_K: float) -> tuple[float, float] | None:
    """Return value and uncertainty of a series at a temperature, None where it does not reach.

    Between two measured temperatures whose ratio is at most 2 the value is interpolated by a
    monotone cubic: ln(value) over ln(T) where all values are positive (so that T³ laws stay so),
    else value over T. Outside the measured range, and across a wider gap, only a temperature
    within 10 K and 3 % of a measured one is given that one's value. Repeated temperatures are
    averaged. The uncertainty is interpolated likewise, linearly; NaN when unknown on either side.
    """
    grid, values, errors = _merged(series)
    if not (math.isfinite(temperature_K) and grid.size):
        return None
    above = int(np.searchsorted(grid, temperature_K))
    if above < grid.size and grid[above] == temperature_K:
        return float(values[above]), float(errors[above])
    if 0 < above < grid.size and 0.0 < grid[above] <= WIDEST_RATIO * grid[above - 1]:
        value = _interpolated(grid, values, temperature_K)
        return value, float(np.interp(temperature_K, grid[above - 1 : above + 1], errors[above - 1 : above + 1]))
    nearest = int(np.argmin(np.abs(grid - temperature_K)))
    if abs(grid[nearest] - temperature_K) <= min(NEAR_K, NEAR_SHARE * grid[nearest]):
        return float(values[nearest]), float(errors[nearest])
    return None


def _merged(series: Series) -> tuple[Array, Array, Array]:
    grid, place = np.unique(series.temperature_K, return_inverse=True)
    if len(grid) == len(series.temperature_K):
        return series.temperature_K, series.value, series.uncertainty
    count = np.bincount(place)
    mean = np.bincount(place, weights=series.value) / count
    error = np.bincount(place, weights=series.uncertainty) / count
    return grid, mean, error


def _interpolated(grid: Array, values: Array, temperature_K: float) -> float:
    if grid[0] > 0.0 and bool((values > 0.0).all()):
        return float(np.exp(PchipInterpolator(np.log(grid), np.log(values))(math.log(temperature_K))))
    return float(PchipInterpolator(grid, values)(temperature_K))


def best_measured(
    material: Material, quantity: str, temperature_K: float, axis: str = "", kind: str = ""
) -> Measured | None:
    """Return the most trustworthy usable value of a quantity at a temperature, None when there is none.

    Values that were seen go before values from memory that a source confirms, and those before
    values from memory; then high before medium before low confidence, instantaneous before mean,
    then the smaller relative uncertainty, then the order of the file. A coefficient is the
    instantaneous one unless ``kind`` asks for "mean". Where a crystal has axes a = b and c, the
    average (2α_a + α_c)/3 of two series of one source stands beside averages measured as such.

    Parameters
    ----------
    material
        From ``load_material``.
    quantity
        Name as in ``thermex.measured.quantities``.
    temperature_K
        Temperature, K.
    axis
        "a", "b", "c", or "" for a cubic crystal or the polycrystal average.
    kind
        "instantaneous" or "mean" for a coefficient; "" is "instantaneous".
    """
    found = _found(material, quantity, temperature_K, axis, kind)
    if not axis and not material.is_cubic and quantity == LINEAR.name:
        along_a = _found(material, quantity, temperature_K, "a", kind)
        along_c = _found(material, quantity, temperature_K, "c", kind)
        found += [_average(a, c) for a in along_a for c in along_c if a.source == c.source]
    return min(found, key=_distrust, default=None)


def _found(material: Material, quantity: str, temperature_K: float, axis: str, kind: str) -> list[Measured]:
    found = []
    for series in material.of(quantity, axis):
        if not series.usable or (series.kind and series.kind != (kind or INSTANTANEOUS)):
            continue
        pair = value_at(series, temperature_K)
        if pair is not None:
            found.append(Measured(*pair, series.citation, series.source_number, series))
    return found


def _average(a: Measured, c: Measured) -> Measured:
    value = float(polycrystal_average(a.value, c.value))
    error = math.hypot(2.0 * a.uncertainty, c.uncertainty) / 3.0
    return Measured(value, error, a.source, a.source_number, a.series, averaged=True)


def trust_order(series: Series) -> tuple[int, int]:
    """Return a key that sorts series, the most trustworthy first: how it was read, then confidence."""
    how = 0 if not series.from_memory else 1 if "confirmed" in series.how else 2
    return how, _CONFIDENCE.get(series.confidence, 1)


def _distrust(measured: Measured) -> tuple[int, int, float]:
    size = abs(measured.uncertainty / measured.value) if measured.value else math.inf
    return (*trust_order(measured.series), size if math.isfinite(size) else math.inf)
