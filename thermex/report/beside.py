"""What was measured, laid beside a prediction: columns at its temperatures, curves for the figures."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from thermex.case.case import Case
from thermex.errors import InputError
from thermex.measured import Material, best_measured, load_material, load_series_file
from thermex.measured.lookup import trust_order
from thermex.measured.quantities import RESPONSE
from thermex.prediction import Prediction
from thermex.report.doubts import doubts

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Column:
    """One measured quantity at the temperatures of a prediction."""

    value: Array
    """Shape (nT,), NaN where nothing was measured."""
    source: tuple[int, ...]
    """Length nT: number of the source of each value, 0 where there is none."""


@dataclass(frozen=True, slots=True)
class Curve:
    """One measured series, as measured, in the units of a prediction."""

    quantity: str
    """Name of the quantity as in the JSON of a prediction, for example "alpha_linear_per_K"."""
    axis: str
    """Axis name, or "" for the polycrystal average."""
    temperature_K: Array
    value: Array
    uncertainty: Array
    """Absolute, NaN where not stated."""
    source: int
    """Number of its source."""


@dataclass(frozen=True, slots=True)
class Beside:
    """Everything measured that a report shows beside a prediction."""

    sources: tuple[str, ...] = ()
    """Source texts, numbered from 1; each says "from memory" where that is so."""
    columns: dict[str, Column] = field(default_factory=dict)
    """By quantity (the names of the JSON)."""
    curves: tuple[Curve, ...] = ()
    response: tuple[str, ...] = ()
    """Measured dielectric constants and optic frequencies in words, each with its source number."""
    doubts: tuple[str, ...] = ()
    """What the measured values say against the prediction as a whole."""

    def column(self, quantity: str, size: int) -> Column:
        """Return one column, empty when the quantity was not measured."""
        return self.columns.get(quantity, Column(np.full(size, np.nan), (0,) * size))

    def curves_of(self, quantity: str) -> tuple[Curve, ...]:
        """Return the series of one quantity."""
        return tuple(curve for curve in self.curves if curve.quantity == quantity)


#: Quantity of a measured series → name in the JSON of a prediction.
NAMES = {
    "linear expansion coefficient": "alpha_linear_per_K",
    "elongation": "elongation",
    "Grüneisen parameter": "gruneisen",
    "isothermal bulk modulus": "bulk_modulus_T_GPa",
    "adiabatic bulk modulus": "bulk_modulus_S_GPa",
    "heat capacity at constant pressure": "heat_capacity_P_J_per_mol_K",
}

#: Elongations are drawn together when their reference temperatures differ by less than this, K.
SAME_REFERENCE_K = 10.0


def beside_of(prediction: Prediction) -> Beside:
    """Return what was measured on the material that the case names; empty when it names none.

    The most trustworthy value that reaches a temperature is taken (:func:`thermex.measured.best_measured`);
    every usable series in the convention of the prediction becomes a curve. A user's own file stands
    before the shipped values.

    Raises
    ------
    InputError
        The material is not known, or the file cannot be read.
    """
    material = material_of(prediction.case)
    if material is None:
        return Beside()
    kelvin = prediction.temperature_K
    columns = {}
    for quantity, name in NAMES.items():
        if quantity == "elongation":
            continue
        found = [best_measured(material, quantity, float(value)) for value in kelvin]
        if any(found):
            value = np.array([f.value if f else np.nan for f in found])
            columns[name] = Column(value, tuple(f.source_number if f else 0 for f in found))
    return Beside(
        material.sources,
        columns,
        tuple(_curves(material, prediction)),
        tuple(_response(material)),
        doubts(prediction, material),
    )


def _response(material: Material) -> Iterator[str]:
    """Say what was measured of the answer to fields: quantity, value, temperature, source."""
    for quantity in RESPONSE:
        for series in sorted(material.series, key=trust_order):
            if series.quantity != quantity.name or not series.usable:
                continue
            unit = "" if quantity.unit == "1" else f" {quantity.unit}"
            along = f" along {series.axis}" if series.axis else ""
            for kelvin, value in zip(series.temperature_K, series.value, strict=True):
                yield f"{quantity.name}{along} {value:.4g}{unit} at {kelvin:.0f} K [{series.source_number}]"


def material_of(case: Case) -> Material | None:
    """Return the material of a case with the series of the user's own file put before its own.

    Raises
    ------
    InputError
        The material is not known, or the file cannot be read.
    """
    asked = case.measured
    if asked is None:
        return None
    own = load_series_file(asked.file) if asked.file is not None else ()
    if asked.material is None:
        structure = case.crystal.prototype or ""
        return Material("", "own values", (), structure, own) if own else None
    try:
        material = load_material(asked.material)
    except InputError as error:
        where = f"{case.source}: measured.material" if case.source else "measured.material"
        raise InputError(error.what, where=where, fix=error.fix) from None
    first = max((series.source_number for series in own), default=0)
    shifted = [replace(series, source_number=series.source_number + first) for series in material.series]
    return replace(material, series=(*own, *shifted))


def _curves(material: Material, prediction: Prediction) -> Iterator[Curve]:
    """Return the usable series that a figure may draw, the most trustworthy first."""
    for series in sorted(material.series, key=trust_order):
        name = NAMES.get(series.quantity)
        if name is None or not series.usable or series.kind not in ("", "instantaneous"):
            continue
        reference = series.reference_temperature_K
        if reference is not None and abs(reference - prediction.reference_temperature_K) > SAME_REFERENCE_K:
            continue
        axis = "" if material.is_cubic else series.axis
        yield Curve(name, axis, series.temperature_K, series.value, series.uncertainty, series.source_number)


#: How far from a single measured temperature a value still stands for it, K.
SAME_TEMPERATURE_K = 2.5
#: Longest gap between two measured temperatures that a straight line may bridge: K, or a share of T.
LONGEST_GAP_K, LONGEST_GAP_SHARE = 100.0, 0.3


def lay_beside(temperature_K: Array, curves: Sequence[Curve], sources: Sequence[str]) -> Beside:
    """Lay measured series beside the temperatures of a prediction.

    At each temperature the first series of a quantity (in the order given, best first) that has a
    value there is taken: one within 2.5 K, or a straight line between two neighbours no further
    apart than 100 K or 30 % of T. Series along one axis are drawn but not laid into columns.
    """
    columns: dict[str, Column] = {}
    for quantity in dict.fromkeys(curve.quantity for curve in curves if not curve.axis):
        chosen = [curve for curve in curves if curve.quantity == quantity and not curve.axis]
        column = _column(temperature_K, chosen)
        if np.isfinite(column.value).any():
            columns[quantity] = column
    return Beside(tuple(sources), columns, tuple(curves))


def _column(temperature_K: Array, curves: Sequence[Curve]) -> Column:
    value = np.full(len(temperature_K), np.nan)
    source = np.zeros(len(temperature_K), dtype=int)
    for curve in curves:
        found = value_at(curve, temperature_K)
        new = np.isnan(value) & np.isfinite(found)
        value[new], source[new] = found[new], curve.source
    return Column(value, tuple(int(number) for number in source))


def value_at(curve: Curve, temperature_K: Array) -> Array:
    """Return the measured value at each temperature, NaN where the series does not reach; shape (nT,)."""
    good = np.isfinite(curve.value) & np.isfinite(curve.temperature_K)
    order = np.argsort(curve.temperature_K[good], kind="stable")
    grid, values = curve.temperature_K[good][order], curve.value[good][order]
    if not grid.size:
        return np.full(len(temperature_K), np.nan)
    above = np.clip(np.searchsorted(grid, temperature_K), 1, max(len(grid) - 1, 1))
    below = above - 1
    above = np.minimum(above, len(grid) - 1)
    gap = grid[above] - grid[below]
    inside = (temperature_K >= grid[below]) & (temperature_K <= grid[above])
    bridged = inside & (gap <= np.maximum(LONGEST_GAP_K, LONGEST_GAP_SHARE * temperature_K))
    nearest = np.where(np.abs(grid[below] - temperature_K) <= np.abs(grid[above] - temperature_K), below, above)
    close = np.abs(grid[nearest] - temperature_K) <= SAME_TEMPERATURE_K
    line: Array = np.interp(temperature_K, grid, values)
    found: Array = np.where(bridged, line, np.where(close, values[nearest], np.nan))
    return found
