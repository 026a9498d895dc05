"""Measured series as data of a calibration."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from thermex.case.case import Case
from thermex.errors import InputError
from thermex.exploration.calibrate import Datum
from thermex.measured import best_measured, load_material
from thermex.measured.series import Series


@dataclass(frozen=True, slots=True)
class Target:
    """A measured coefficient at one temperature."""

    value: float
    """1/K."""
    uncertainty: float
    """Standard deviation, 1/K; NaN where none is known."""
    source: str

    def words(self) -> str:
        """Return the value with uncertainty and source."""
        spread = f" ± {1e6 * self.uncertainty:.2f}" if np.isfinite(self.uncertainty) else ""
        return f"α = {1e6 * self.value:.2f}{spread} ·10⁻⁶/K ({self.source})"


def measured_alpha(case: Case, kelvin: float) -> Target | None:
    """Return the measured linear coefficient of the case's material at one temperature, if there is one."""
    if case.measured is None or not case.measured.material:
        return None
    try:
        found = best_measured(load_material(case.measured.material), "linear expansion coefficient", kelvin)
    except InputError:
        return None
    return None if found is None else Target(found.value, found.uncertainty, found.series.citation)


#: Name of the measured quantity (and kind) → quantity of a datum.
NAMES = {
    ("linear expansion coefficient", "instantaneous"): "alpha_linear_per_K",
    ("linear expansion coefficient", "mean"): "alpha_mean_per_K",
    ("elongation", ""): "elongation",
    ("lattice parameter", ""): "lattice_A",
    ("isothermal bulk modulus", ""): "bulk_modulus_T_GPa",
    ("heat capacity at constant pressure", ""): "heat_capacity_P_J_per_mol_K",
}

#: Relative uncertainty given to a value that states none.
UNSTATED = {
    "alpha_linear_per_K": 0.03,
    "alpha_mean_per_K": 0.03,
    "elongation": 0.03,
    "lattice_A": 2e-4,
    "bulk_modulus_T_GPa": 0.03,
    "heat_capacity_P_J_per_mol_K": 0.02,
}


def quantity_of(series: Series) -> str | None:
    """Return the quantity of a datum for a series, or None when it cannot be fitted."""
    for (name, kind), quantity in NAMES.items():
        if series.quantity == name and (not kind or series.kind == kind):
            return quantity
    return None


def data_of(
    series: Sequence[Series], quantities: Sequence[str], low: float, high: float, most: int = 40
) -> list[Datum]:
    """Return data of the chosen quantities between two temperatures, thinned evenly to ``most`` a series."""
    out = []
    for one in series:
        quantity = quantity_of(one)
        if quantity is None or quantity not in quantities or not one.usable or one.axis not in ("", "a"):
            continue
        inside = np.nonzero((one.temperature_K >= low) & (one.temperature_K <= high))[0]
        if len(inside) > most:
            inside = inside[np.unique(np.linspace(0, len(inside) - 1, most).astype(int))]
        t0 = one.reference_temperature_K
        for k in inside:
            value = float(one.value[k])
            stated = float(one.uncertainty[k])
            sigma = stated if np.isfinite(stated) and stated > 0.0 else UNSTATED[quantity] * abs(value)
            reference = float(t0) if t0 is not None and np.isfinite(t0) else 293.15
            if quantity in {"elongation", "alpha_mean_per_K"} and abs(one.temperature_K[k] - reference) < 20.0:
                continue
            if sigma > 0.0:
                out.append(Datum(quantity, float(one.temperature_K[k]), value, sigma, "a", reference, one.citation))
    return out
