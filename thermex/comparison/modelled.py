"""The best answer of a prediction: with the anharmonic correction where one was computed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator

from thermex.prediction import Prediction

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Modelled:
    """Arrays over temperature, NaN where there is no answer; one choice of α for all comparisons."""

    prediction: Prediction
    kind: str
    """"quasi-harmonic", or "leading order"/"sampled" where corrected (quasi-harmonic below its start)."""
    temperature: Array
    alpha: Array
    alpha_quasiharmonic: Array
    alpha_axis: dict[str, Array]
    lattice: dict[str, Array]
    volume: Array
    gruneisen: Array
    bulk_modulus: Array
    heat_pressure: Array
    heat_volume: Array
    relative_error: Array

    def at(self, values: Array, kelvin: Array) -> Array:
        """Interpolate an array at temperatures (nT,); NaN outside the answer."""
        good = np.isfinite(values)
        if good.sum() < 2:
            return np.full(len(kelvin), np.nan)
        grid = self.temperature[good]
        curve = PchipInterpolator(grid, values[good])
        inside = (kelvin >= grid[0] - 1e-9) & (kelvin <= grid[-1] + 1e-9)
        return np.asarray(np.where(inside, curve(np.clip(kelvin, grid[0], grid[-1])), np.nan))


def modelled(prediction: Prediction) -> Modelled:
    """Choose the best arrays of a prediction."""
    c, p = prediction.anharmonic, prediction
    there = np.isfinite(c.alpha_linear_per_K) if c is not None else np.zeros(len(p.temperature_K), dtype=bool)

    def best(plain: Array, corrected: Array | None) -> Array:
        return plain if corrected is None else np.where(there, corrected, plain)

    alpha = best(p.alpha_linear_per_K, c.alpha_linear_per_K if c else None)
    bulk = best(p.bulk_modulus_T_GPa, c.bulk_modulus_T_GPa if c else None)
    gamma = best(p.gruneisen, c.gruneisen if c else None)
    volume = best(p.volume_A3, c.volume_A3 if c else None)
    heat = best(p.heat_capacity_P_J_per_mol_K, c.heat_capacity_P_J_per_mol_K if c else None)
    lattice = {k: best(v, c.lattice_A[k] if c else None) for k, v in p.lattice_A.items()}
    scale = np.where(
        p.alpha_linear_per_K > 0.0, alpha / np.where(p.alpha_linear_per_K != 0, p.alpha_linear_per_K, 1), 1.0
    )
    axes = {k: v * scale for k, v in p.alpha_axis_per_K.items()}
    return Modelled(
        prediction=p,
        kind=c.kind if c is not None and there.any() else "quasi-harmonic",
        temperature=p.temperature_K,
        alpha=alpha,
        alpha_quasiharmonic=p.alpha_linear_per_K,
        alpha_axis=axes,
        lattice=lattice,
        volume=volume,
        gruneisen=gamma,
        bulk_modulus=bulk,
        heat_pressure=heat,
        heat_volume=heat / (1.0 + 3.0 * alpha * gamma * p.temperature_K),
        relative_error=best(p.alpha_relative_error, c.alpha_relative_error if c else None),
    )
