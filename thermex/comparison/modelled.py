"""The best answer of a prediction: with the anharmonic correction where one was computed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator

from thermex.prediction import Anharmonic, Prediction

Array = NDArray[np.float64]

#: T_eff/T_end up to which the leading order and the rule were tested.
TESTED = 0.5


@dataclass(frozen=True, slots=True)
class Modelled:
    """Arrays over temperature, NaN where there is no answer; one choice of α for all comparisons.

    Below the start of a correction the quasi-harmonic values stand. From there on only corrected ones
    do: where a corrected value was left out there is none here either.
    """

    prediction: Prediction
    kind: str
    """"quasi-harmonic", "leading order" or "sampled"."""
    starts_K: float
    """From here on values are corrected; inf without a correction."""
    tested_to_K: float
    """Above this temperature the correction is extrapolated, or the quasi-harmonic α far off by the rule."""
    temperature: Array
    alpha: Array
    alpha_quasiharmonic: Array
    alpha_axis: dict[str, Array]
    lattice: dict[str, Array]
    log_length: dict[str, Array]
    """ln L by axis, "" for the length of the cube root of V; without a step where the correction begins."""
    volume: Array
    gruneisen: Array
    bulk_modulus: Array
    bulk_modulus_adiabatic: Array
    heat_pressure: Array
    heat_volume: Array
    relative_error: Array

    def at(self, values: Array, kelvin: Array) -> Array:
        """Interpolate an array at temperatures (nT,); NaN outside the answer and inside its gaps."""
        good = np.isfinite(values)
        if good.sum() < 2:
            return np.full(len(kelvin), np.nan)
        grid = self.temperature[good]
        curve = PchipInterpolator(grid, values[good])
        inside = (kelvin >= grid[0] - 1e-9) & (kelvin <= grid[-1] + 1e-9)
        below = np.clip(np.searchsorted(self.temperature, kelvin + 1e-9) - 1, 0, len(good) - 1)
        above = np.clip(np.searchsorted(self.temperature, kelvin - 1e-9), 0, len(good) - 1)
        inside &= good[below] & good[above]
        return np.asarray(np.where(inside, curve(np.clip(kelvin, grid[0], grid[-1])), np.nan))

    def kind_over(self, kelvin: Array) -> str:
        """Return which α stands at the highest of some temperatures."""
        return self.kind if len(kelvin) and float(kelvin.max()) >= self.starts_K else "quasi-harmonic"


def modelled(prediction: Prediction) -> Modelled:
    """Choose the best arrays of a prediction."""
    p, c = prediction, prediction.anharmonic
    if c is not None and not np.isfinite(c.alpha_linear_per_K).any():
        c = None
    starts = c.starts_K if c is not None else float("inf")
    warm = p.temperature_K >= starts

    def best(plain: Array, corrected: Array | None) -> Array:
        return plain if corrected is None else np.where(warm, corrected, plain)

    alpha = best(p.alpha_linear_per_K, c.alpha_linear_per_K if c else None)
    gamma = best(p.gruneisen, c.gruneisen if c else None)
    bulk = best(p.bulk_modulus_T_GPa, c.bulk_modulus_T_GPa if c else None)
    heat = best(p.heat_capacity_P_J_per_mol_K, c.heat_capacity_P_J_per_mol_K if c else None)
    axes = {k: best(v, c.alpha_linear_per_K if c else None) for k, v in p.alpha_axis_per_K.items()}
    adiabatic = 1.0 + 3.0 * alpha * gamma * p.temperature_K
    return Modelled(
        prediction=p,
        kind=c.kind if c is not None else "quasi-harmonic",
        starts_K=starts,
        tested_to_K=_tested_to(p, c),
        temperature=p.temperature_K,
        alpha=alpha,
        alpha_quasiharmonic=p.alpha_linear_per_K,
        alpha_axis=axes,
        lattice={k: best(v, c.lattice_A[k] if c else None) for k, v in p.lattice_A.items()},
        log_length=_log_lengths(p, c, warm),
        volume=best(p.volume_A3, c.volume_A3 if c else None),
        gruneisen=gamma,
        bulk_modulus=bulk,
        bulk_modulus_adiabatic=bulk * adiabatic,
        heat_pressure=heat,
        heat_volume=heat / adiabatic,
        relative_error=best(p.alpha_relative_error, c.alpha_relative_error if c else None),
    )


def _log_lengths(p: Prediction, c: Anharmonic | None, warm: NDArray[np.bool_]) -> dict[str, Array]:
    """Return ln L: quasi-harmonic up to the start of the correction, its increments from there on."""
    plain = {**p.lattice_A, "": np.cbrt(p.volume_A3)}
    if c is None:
        return {k: np.log(v) for k, v in plain.items()}
    corrected = {**c.lattice_A, "": np.cbrt(c.volume_A3)}
    out = {}
    for name, length in plain.items():
        with np.errstate(invalid="ignore"):
            cold, hot = np.log(length), np.log(corrected[name])
        first = int(np.argmax(warm & np.isfinite(hot)))
        out[name] = np.where(warm, hot - hot[first] + cold[first], cold)
    return out


def _tested_to(p: Prediction, c: Anharmonic | None) -> float:
    if c is not None and c.kind == "leading order":
        return c.extrapolated_from_K
    if c is not None or p.rule is None:
        return float("inf")
    beyond = np.isfinite(p.rule.t) & (p.rule.t > TESTED)
    return float(p.temperature_K[beyond][0]) if beyond.any() else float("inf")
