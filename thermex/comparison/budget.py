"""The expansion budget: which factor of α_V = γ C_V/(B_T V) carries the miss.

ln(α/α_measured) = ln(γ ratio) + ln(C_V ratio) − ln(B_T ratio) − ln(V ratio), an identity.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.comparison.modelled import Modelled
from thermex.constants import GPA_PER_EV_A3, J_PER_MOL_EV
from thermex.measured import Material, best_measured
from thermex.measured.library import FORMULA_UNITS

Array = NDArray[np.float64]

ALPHA, LATTICE, MOLAR_VOLUME = "linear expansion coefficient", "lattice parameter", "molar volume"
B_T, B_S, C_P = "isothermal bulk modulus", "adiabatic bulk modulus", "heat capacity at constant pressure"

#: A part smaller than this (in ln) is not worth a sentence.
SMALL = 0.03


@dataclass(frozen=True, slots=True)
class Budget:
    """Parts of ln(α ratio) at temperatures; NaN where a measured quantity is missing."""

    temperature_K: Array
    ln_alpha_ratio: Array
    ln_gruneisen_ratio: Array
    ln_heat_capacity_ratio: Array
    ln_bulk_modulus_ratio: Array
    """ln(B_T/B_T measured); it enters the sum with a minus sign."""
    ln_volume_ratio: Array
    """ln(V/V measured); it enters the sum with a minus sign."""
    ln_method_ratio: Array
    """ln(quasi-harmonic α/corrected α): what the method alone would have added; 0 without a correction."""
    uncertainty: dict[str, Array]
    """Uncertainty of the parts of α, γ, C_V and B_T that the measurements imply, by name."""
    missing: tuple[str, ...]
    words: str


@dataclass(frozen=True, slots=True)
class _Facts:
    """Measured α_V, B_T, C_V and V (per formula unit) at one temperature, with relative uncertainties."""

    alpha: float
    bulk: float
    heat: float
    volume: float
    gamma: float
    spread: dict[str, float]


def facts(material: Material, kelvin: float, fallback_volume: float) -> _Facts | None:
    """Collect what was measured at one temperature; B_S and C_P are turned into B_T and C_V.

    With B_T = B_S/(1 + α_V γ T), C_V = C_P/(1 + α_V γ T) and γ = α_V B_S V/C_P.
    """
    alpha = best_measured(material, ALPHA, kelvin)
    if alpha is None or not alpha.value > 0.0:
        return None
    alpha_v = 3.0 * alpha.value
    volume = _volume(material, kelvin)
    adiabatic, isothermal = best_measured(material, B_S, kelvin), best_measured(material, B_T, kelvin)
    heat = best_measured(material, C_P, kelvin)
    v = volume if np.isfinite(volume) else fallback_volume
    per_mole = v / GPA_PER_EV_A3 * J_PER_MOL_EV  # GPa → J/mol over one formula unit
    gamma = bulk = heat_volume = float("nan")
    if heat is not None and adiabatic is not None:
        gamma = alpha_v * adiabatic.value * per_mole / heat.value
        factor = 1.0 + alpha_v * gamma * kelvin
        bulk, heat_volume = adiabatic.value / factor, heat.value / factor
    elif heat is not None and isothermal is not None:
        heat_volume = heat.value - kelvin * alpha_v**2 * isothermal.value * per_mole
        gamma, bulk = alpha_v * isothermal.value * per_mole / heat_volume, isothermal.value
    elif isothermal is not None:
        bulk = isothermal.value
    elif heat is not None:
        heat_volume = float("nan")
    modulus = adiabatic or isothermal
    spread = {
        "alpha": _share(alpha),
        "bulk": _share(modulus) if modulus else float("nan"),
        "heat": _share(heat) if heat else float("nan"),
    }
    return _Facts(alpha_v, bulk, heat_volume, volume, gamma, spread)


def _share(measured: object) -> float:
    value, sigma = float(getattr(measured, "value")), float(getattr(measured, "uncertainty"))  # noqa: B009
    return abs(sigma / value) if np.isfinite(sigma) and value else float("nan")


def _volume(material: Material, kelvin: float) -> float:
    """Return the measured volume per formula unit, Å³, from the lattice parameter; NaN where not measured."""
    units = FORMULA_UNITS.get(material.structure)
    a = best_measured(material, LATTICE, kelvin, "a")
    if a is None or units is None:
        return float("nan")
    if material.is_cubic:
        return a.value**3 / units
    c = best_measured(material, LATTICE, kelvin, "c")
    if c is None:
        return float("nan")
    shape = 1.0 if material.structure in {"rutile", "tetragonal"} else np.sqrt(0.75)
    return float(shape * a.value**2 * c.value / units)


def budget(m: Modelled, material: Material, temperatures: Array) -> Budget | None:
    """Split ln(α model/α measured) at the temperatures where α was measured and the model holds."""
    units = m.prediction.crystal.formula_units
    rows, kept = [], []
    for kelvin in temperatures:
        at = np.array([kelvin])
        model = [float(m.at(v, at)[0]) for v in (m.alpha, m.gruneisen, m.heat_volume, m.bulk_modulus, m.volume)]
        quasi = float(m.at(m.alpha_quasiharmonic, at)[0])
        if not np.isfinite(model[0]) or model[0] <= 0.0:
            continue
        found = facts(material, float(kelvin), model[4] / units)
        if found is None:
            continue
        measured = [found.alpha / 3.0, found.gamma, found.heat, found.bulk, found.volume]
        model[4] /= units
        with np.errstate(invalid="ignore", divide="ignore"):
            logs = np.log(np.array(model) / np.array(measured))
        method = float(np.log(quasi / model[0])) if quasi > 0.0 else 0.0
        rows.append([*logs, method, found.spread["alpha"], found.spread["bulk"], found.spread["heat"]])
        kept.append(float(kelvin))
    if not rows:
        return None
    table = np.array(rows)
    table[:, 4] = np.where(np.isfinite(table[:, 4]), table[:, 4], np.nan)
    sigma = {
        "alpha": table[:, 6],
        "bulk_modulus": table[:, 7],
        "heat_capacity": table[:, 8],
        "gruneisen": np.sqrt(table[:, 6] ** 2 + table[:, 7] ** 2 + table[:, 8] ** 2),
    }
    names = ("Grüneisen parameter", "heat capacity", "bulk modulus", "volume")
    missing = tuple(n for k, n in enumerate(names) if not np.isfinite(table[:, 1 + k]).any())
    return Budget(
        np.array(kept),
        table[:, 0],
        table[:, 1],
        table[:, 2],
        table[:, 3],
        table[:, 4],
        table[:, 5],
        sigma,
        missing,
        _words(np.array(kept), table, missing, m.kind),
    )


def closure(b: Budget) -> Array:
    """Return ln α ratio less the sum of its parts: zero to rounding where V was measured too."""
    parts = b.ln_gruneisen_ratio + b.ln_heat_capacity_ratio - b.ln_bulk_modulus_ratio - b.ln_volume_ratio
    return np.asarray(b.ln_alpha_ratio - parts)


def parts_at(b: Budget, index: int) -> dict[str, float]:
    """Return the signed contribution of each factor to ln(α ratio) at one temperature."""
    return {
        "Grüneisen parameter": float(b.ln_gruneisen_ratio[index]),
        "heat capacity": float(b.ln_heat_capacity_ratio[index]),
        "bulk modulus": -float(b.ln_bulk_modulus_ratio[index]),
        "volume": -float(b.ln_volume_ratio[index]),
    }


def largest_part(b: Budget) -> str:
    """Name the factor that carries most of the miss at the temperature with most known parts."""
    index = _best_row(b)
    parts = {k: v for k, v in parts_at(b, index).items() if np.isfinite(v)}
    if not parts:
        return "not known: the factors were not measured"
    name = max(parts, key=lambda k: abs(parts[k]))
    change = f"{'raises' if parts[name] > 0 else 'lowers'} α by {abs(np.expm1(parts[name])):.0%}"
    return f"{name} {change} at {b.temperature_K[index]:.0f} K"


def _best_row(b: Budget) -> int:
    known = np.isfinite(np.stack([b.ln_gruneisen_ratio, b.ln_heat_capacity_ratio, b.ln_bulk_modulus_ratio])).sum(axis=0)
    score = known - 0.001 * np.abs(b.temperature_K - 300.0) / 300.0
    return int(np.argmax(score))


def _words(kelvin: Array, table: Array, missing: tuple[str, ...], kind: str) -> str:
    known = np.isfinite(table[:, 1:4]).sum(axis=1) - 0.001 * np.abs(kelvin - 300.0) / 300.0
    row = table[int(np.argmax(known))]
    total = np.expm1(row[0])
    at = kelvin[int(np.argmax(known))]
    direction = "above" if total > 0 else "below"
    sentences = [f"At {at:.0f} K the predicted α ({kind}) is {abs(total):.0%} {direction} the measured one."]
    parts = {"γ": row[1], "C_V": row[2], "B_T": -row[3], "the volume": -row[4]}
    good = {k: v for k, v in parts.items() if np.isfinite(v) and abs(v) > SMALL}
    for name, part in sorted(good.items(), key=lambda item: -abs(item[1])):
        ratio = np.expm1(-part if name in {"B_T", "the volume"} else part)
        side = "high" if ratio > 0 else "low"
        verb = "raises" if part > 0 else "lowers"
        sentences.append(
            f"{name} is {abs(ratio):.0%} too {side}, and that alone {verb} α by {abs(np.expm1(part)):.0%}."
        )
    if len({np.sign(v) for v in good.values()}) == 2:
        sentences.append("Errors of opposite sign cancel in part.")
    if abs(row[5]) > 0.01:
        higher = "higher" if row[5] > 0.0 else "lower"
        sentences.append(f"The quasi-harmonic α would be {abs(np.expm1(row[5])):.0%} {higher} than this corrected one.")
    if missing:
        sentences.append(f"Not measured here, so not split: {', '.join(missing)}.")
    return " ".join(sentences)
