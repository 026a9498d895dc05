"""Which published potential may be believed for the window of a cold infrared instrument, 300 K down to 20 K?

Each candidate window has one or more published potentials. A potential is believed for the job when its expansion
coefficient is within a tolerance of the measured one at every temperature at which there is a measured value.
The shrinkage of the window and of its mount on cooling then comes from the potential that was believed, if any.

Run it from anywhere: ``python cases/choose_a_cold_window.py``.
"""

from __future__ import annotations

import thermex
from thermex.measured import best_measured
from thermex.report.caution import CAUTION

WINDOWS = {
    "CaF2": ("Gillan 1986 CaF2", "de Leeuw-Cooper 2003 CaF2"),
    "NaCl": ("TF64 NaCl", "BMNN NaCl"),
    "KBr": ("TF64 KBr",),
    "BaF2": ("Catlow 1977 BaF2",),
}
MOUNTS = {"Cu": ("GW59 Cu", "ZD83 Cu")}
TEMPERATURES = (20.0, 30.0, 50.0, 75.0, 100.0, 150.0, 200.0, 250.0, 293.15, 300.0)
WARM_FROM, TOLERANCE = 75.0, 0.15


def differences(prediction: thermex.Prediction, formula: str) -> dict[float, float]:
    """Return predicted over measured α, less one, at the temperatures that were measured."""
    material = thermex.load_material(formula)
    found = {}
    for kelvin, alpha in zip(prediction.temperature_K, prediction.alpha_linear_per_K, strict=True):
        measured = best_measured(material, "linear expansion coefficient", float(kelvin))
        if measured is not None and measured.value > 0.0:
            found[float(kelvin)] = float(alpha / measured.value - 1.0)
    return found


def judge(name: str, formula: str) -> bool:
    """Predict with one published potential, say how it does, and return whether it may be believed."""
    case = thermex.case_from_published(name, TEMPERATURES)
    prediction = thermex.predict(case)
    shrinkage = -prediction.at(prediction.elongation, 20.0) * 1e6
    found = differences(prediction, formula)
    warm = [value for kelvin, value in found.items() if kelvin >= WARM_FROM]
    worst = max(warm, key=abs, default=0.0)
    believed = bool(warm) and abs(worst) <= TOLERANCE
    if warm:
        verdict = f"α is {worst:+.0%} off at worst ({len(warm)} values): {'may' if believed else 'not to'} be believed"
    else:
        verdict = "nothing measured to judge it by"
    print(f"  {name:26s} shrinks {shrinkage:5.0f}·10⁻⁶ from 293 K to 20 K; {verdict}")
    return believed


def main() -> dict[str, list[str]]:
    """Judge every candidate; return the potentials that may be believed, by compound."""
    believed: dict[str, list[str]] = {}
    for part, candidates in (("window", WINDOWS), ("mount", MOUNTS)):
        for formula, names in candidates.items():
            print(f"{part} of {formula}")
            believed[formula] = [name for name in names if judge(name, formula)]
    print(CAUTION)
    return believed


if __name__ == "__main__":
    main()
