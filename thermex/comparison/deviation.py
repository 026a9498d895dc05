"""Deviation of a prediction from one measured series, in the series' own convention."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.comparison.modelled import Modelled
from thermex.measured import Series
from thermex.measured.series import FROM_MEMORY

Array = NDArray[np.float64]

#: Measured quantities that a verdict on expansion can rest on.
EXPANSION = ("linear expansion coefficient", "volume expansion coefficient", "elongation")

#: The lattice parameter moves by a few tenths of a percent where α moves by tens: its share of the tolerance.
TOLERANCE_SHARE = {"lattice parameter": 0.05}

REPRODUCES, FAILS, UNDECIDED = "reproduces", "does not reproduce", "undecided"


@dataclass(frozen=True, slots=True)
class Deviation:
    """How one measured series compares."""

    series: Series
    source: str
    quantity: str
    """With kind and axis, as shown."""
    temperature_K: Array
    """Where both hold."""
    measured: Array
    uncertainty: Array
    """Absolute, NaN where not stated."""
    model: Array
    relative: Array
    """model/measured − 1."""
    mean_relative_deviation: float
    rms_relative_deviation: float
    mean_in_uncertainties: float
    """Mean of |model − measured| in units of the combined uncertainty; NaN where none is stated."""
    worst_K: float
    worst_relative: float
    left_out: int
    """Measured points at which there is no answer to compare with."""
    alpha_kind: str
    """Which answer was compared: "quasi-harmonic", "leading order" or "sampled"."""
    tolerance: float
    """What the rms deviation of this quantity is judged by."""
    verdict: str
    why: str


def model_of(m: Modelled, series: Series) -> Array | None:
    """Return the model's values (nT,) for a series, in its own convention; None when it has none."""
    kelvin = series.temperature_K
    axis = series.axis if series.axis in m.lattice else ""
    if series.quantity == "lattice parameter":
        return m.at(m.lattice[axis or "a"], kelvin)
    volumetric = series.quantity == "volume expansion coefficient"
    if volumetric and series.kind == "instantaneous":
        return 3.0 * m.at(m.alpha, kelvin)
    if series.quantity == "linear expansion coefficient" and series.kind == "instantaneous":
        return m.at(m.alpha_axis[axis] if axis else m.alpha, kelvin)
    if series.quantity == "elongation" or series.kind == "mean":
        t0 = 293.15 if series.reference_temperature_K is None else float(series.reference_temperature_K)
        length = m.log_length["" if volumetric else axis]
        stretch = np.expm1((3.0 if volumetric else 1.0) * (m.at(length, kelvin) - m.at(length, np.array([t0]))[0]))
        if series.quantity == "elongation":
            return np.asarray(stretch)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(stretch / (kelvin - t0))
    plain = {
        "isothermal bulk modulus": m.bulk_modulus,
        "adiabatic bulk modulus": m.bulk_modulus_adiabatic,
        "heat capacity at constant pressure": m.heat_pressure,
        "Grüneisen parameter": m.gruneisen,
    }.get(series.quantity)
    return None if plain is None else m.at(plain, kelvin)


def deviation(m: Modelled, series: Series, tolerance: float) -> Deviation | None:
    """Compare one series; None when the prediction says nothing of its quantity."""
    model = model_of(m, series)
    if model is None:
        return None
    usable = np.isfinite(model) & np.isfinite(series.value) & (series.value != 0.0)
    kelvin, measured, model = series.temperature_K[usable], series.value[usable], model[usable]
    sigma = series.uncertainty[usable]
    relative = model / measured - 1.0
    numerical = m.at(m.relative_error, kelvin) * np.abs(model) if len(kelvin) else np.zeros(0)
    combined = np.sqrt(sigma**2 + np.where(np.isfinite(numerical), numerical, 0.0) ** 2)
    units = np.abs(model - measured) / combined
    mean, rms = (float(relative.mean()), float(np.sqrt(np.mean(relative**2)))) if len(kelvin) else (np.nan, np.nan)
    worst = int(np.argmax(np.abs(relative))) if len(kelvin) else -1
    own = tolerance * TOLERANCE_SHARE.get(series.quantity, 1.0)
    verdict, why = decide(series, relative, sigma / np.abs(measured), own)
    return Deviation(
        series=series,
        source=series.citation,
        quantity=series.label,
        temperature_K=kelvin,
        measured=measured,
        uncertainty=sigma,
        model=model,
        relative=relative,
        mean_relative_deviation=mean,
        rms_relative_deviation=rms,
        mean_in_uncertainties=float(np.nanmean(units)) if np.isfinite(units).any() else float("nan"),
        worst_K=float(kelvin[worst]) if worst >= 0 else float("nan"),
        worst_relative=float(relative[worst]) if worst >= 0 else float("nan"),
        left_out=int(len(series.temperature_K) - len(kelvin)),
        alpha_kind=m.kind_over(kelvin),
        tolerance=own,
        verdict=verdict,
        why=why,
    )


def decide(series: Series, relative: Array, spread: Array, tolerance: float) -> tuple[str, str]:
    """Return the verdict on one series and its reason.

    Undecided when nothing overlaps, the series is contradicted elsewhere or was held fixed in a fit, it was
    recalled from memory and confirmed by nobody, or its own uncertainty exceeds the tolerance; else the
    rms deviation decides.
    """
    if not len(relative):
        return UNDECIDED, "no temperature where both the measurement and the prediction hold"
    if not series.usable:
        return UNDECIDED, f"the series is kept out of verdicts: {series.remark}"
    if held_fixed(series):
        return UNDECIDED, "the value was held fixed in the fit it comes from"
    if series.how == FROM_MEMORY:
        return UNDECIDED, "the values are from memory, confirmed by no source"
    typical = float(np.nanmedian(spread)) if np.isfinite(spread).any() else float("nan")
    if typical > tolerance:
        return UNDECIDED, f"the measurement's own uncertainty ({typical:.1%}) exceeds the tolerance ({tolerance:.1%})"
    rms = float(np.sqrt(np.mean(relative**2)))
    if rms <= tolerance:
        return REPRODUCES, f"rms deviation {share(rms)} within {share(tolerance)}"
    return FAILS, f"rms deviation {share(rms)} beyond {share(tolerance)}"


def held_fixed(series: Series) -> bool:
    """Whether the source of a series did not measure its quantity but held it fixed."""
    said = f"{series.source} {series.remark}".lower()
    if "held fixed" not in said and "fixed there" not in said:
        return False
    if series.quantity == "Grüneisen parameter":
        return "gamma" in said or "held fixed in that" in said
    return "bulk modulus" in series.quantity and ("k_0t" in said or "k_t0" in said)


def share(value: float) -> str:
    """Return a fraction as per cent: one decimal, two below half a percent."""
    return f"{100.0 * value:.2f} %" if abs(value) < 0.005 else f"{100.0 * value:.1f} %"
