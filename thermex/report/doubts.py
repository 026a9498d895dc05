"""Doubts that measured values cast on a prediction before any expansion is compared."""

from __future__ import annotations

import numpy as np

from thermex.measured import Material, best_measured
from thermex.prediction import Prediction
from thermex.report.numbers import fixed, percent, temperature

#: A lattice parameter that is off by more than this makes every comparison doubtful.
FAR_OFF = 0.03

#: Two temperatures closer than this count as the same, K.
NEAR_K = 30.0


def doubts(prediction: Prediction, material: Material) -> tuple[str, ...]:
    """Return what a careful reader should be told first; nothing when all is well."""
    return (*_other_formula(prediction, material), *_size(prediction, material))


def _other_formula(prediction: Prediction, material: Material) -> tuple[str, ...]:
    formula = prediction.crystal.formula
    if not material.formula or _counted(formula) == _counted(material.formula):
        return ()
    return (f"Doubt: the crystal is {formula}, and the measured values beside it are those of {material.formula}.",)


def _counted(formula: str) -> str:
    """Return the letters and digits of a formula in one order, so that ClNa and NaCl agree."""
    return "".join(sorted(formula))


def _size(prediction: Prediction, material: Material) -> tuple[str, ...]:
    """Compare each lattice parameter with the measured one nearest to room temperature."""
    said = []
    kelvin = prediction.temperature_K
    for axis, values in prediction.lattice_A.items():
        good = np.flatnonzero(np.isfinite(values))
        if not good.size:
            continue
        k = int(good[np.argmin(np.abs(kelvin[good] - 298.15))])
        found = best_measured(material, "lattice parameter", float(kelvin[k]), axis)
        if found is None and abs(kelvin[k] - 298.15) < NEAR_K:
            found = best_measured(material, "lattice parameter", 298.15, axis)
        if found is None:
            continue
        off = float(values[k]) / found.value - 1.0
        if abs(off) > FAR_OFF:
            said.append(
                f"Doubt: {axis} = {fixed(float(values[k]), 4)} Å at {temperature(float(kelvin[k]))} K is "
                f"{percent(off)} % off the measured {fixed(found.value, 4)} Å: check the parameters and their units "
                "before anything else."
            )
    return tuple(said)
