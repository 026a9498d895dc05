"""Which corrected values are worth printing: those whose own error is small enough."""

from __future__ import annotations

from dataclasses import fields, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from thermex.prediction import Anharmonic

Array = NDArray[np.float64]

#: Corrected values whose own relative error of α, truncation included, exceeds this are left out: that of the
#: leading order does so from T_eff/T_end = 0.75 on.
LARGEST_ERROR = 0.34


def trusted(found: Anharmonic, temperature: Array) -> Anharmonic:
    """Leave out (NaN) corrected values whose own error exceeds ``LARGEST_ERROR``, and say so.

    Where that happens within the tested range nothing is kept; beyond it, nothing from there upward.

    Parameters
    ----------
    temperature
        Shape (nT,), K.
    """
    large = found.alpha_relative_error > LARGEST_ERROR
    if not large.any():
        return found
    first = float(temperature[large][0])
    poor = temperature >= (first if first > found.extrapolated_from_K else -np.inf)
    kept: dict[str, Any] = {f.name: _without(getattr(found, f.name), poor) for f in fields(found)}
    left = np.isfinite(kept["alpha_linear_per_K"]).any()
    where = f"from {first:.0f} K on" if left else "at every temperature"
    worst = float(np.nanmax(found.alpha_relative_error))
    note = (
        f"The {found.kind} correction is left out {where}: its own error there exceeds "
        f"{LARGEST_ERROR:.0%} of α (up to {worst:.0%})."
    )
    return replace(found, **{**kept, "notes": (note, *(found.notes if left else ()))})


def _without(value: Any, poor: NDArray[np.bool_]) -> Any:
    """Blank the rows of an array over temperature, or of a mapping of such arrays; leave the rest."""
    if isinstance(value, np.ndarray):
        return np.where(poor, np.nan, value)
    if isinstance(value, dict):
        return {name: np.where(poor, np.nan, row) for name, row in value.items()}
    return value
