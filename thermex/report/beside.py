"""What was measured, laid beside a prediction: columns at its temperatures, curves for the figures."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

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

    def column(self, quantity: str, size: int) -> Column:
        """Return one column, empty when the quantity was not measured."""
        return self.columns.get(quantity, Column(np.full(size, np.nan), (0,) * size))

    def curves_of(self, quantity: str) -> tuple[Curve, ...]:
        """Return the series of one quantity."""
        return tuple(curve for curve in self.curves if curve.quantity == quantity)
