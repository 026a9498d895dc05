"""Which published potential may be believed for the lining of a kiln, 300 to 1500 K?

For two oxides with measured values at hand, all the rigid-ion potentials that ship with thermex are tried. Each line
shows the mean coefficient from room temperature to 1500 K, the difference of α from the measured one at 1200 K as the
quasi-harmonic approximation gives it and with its expected excess taken off, and where the answer ends. A potential
that agrees only with the excess left in is right for the wrong reason; the ranking takes the excess off.

Run it from anywhere: ``python cases/choose_a_kiln_lining.py``.
"""

from __future__ import annotations

import math

import thermex
from thermex.measured import best_measured
from thermex.report.caution import CAUTION

LININGS = ("MgO", "CaO")
TEMPERATURES = tuple(float(kelvin) for kelvin in range(300, 1501, 100))
HOT = 1200.0


def try_one(name: str, formula: str) -> float:
    """Predict with one potential and show it; return its difference from measured α, NaN without an answer."""
    case = thermex.case_from_published(name, TEMPERATURES)
    try:
        prediction = thermex.predict(case)
    except thermex.NoAnswerError as error:
        print(f"  {name:26s} no answer: {error}")
        return math.nan
    alpha = prediction.at(prediction.alpha_linear_per_K, HOT)
    mean = prediction.at(prediction.alpha_mean_per_K, TEMPERATURES[-1])
    measured = best_measured(thermex.load_material(formula), "linear expansion coefficient", HOT)
    plain = alpha / measured.value - 1.0 if measured else math.nan
    excess = prediction.at(prediction.rule.overestimate, HOT) if prediction.rule else math.nan
    less = (1.0 + plain) / (1.0 + excess) - 1.0
    whole = "no answer at 1500 K  " if math.isnan(mean) else f"mean α {mean * 1e6:4.1f}·10⁻⁶/K"
    print(
        f"  {name:26s} {whole}; at {HOT:.0f} K {plain:+.0%} of measured, {less:+.0%} with the expected excess"
        f" of {excess:.0%} taken off; valid to {prediction.valid_to_K:.0f} K"
    )
    return less


def main() -> dict[str, str]:
    """Try every rigid-ion potential of each lining; return the nearest to the measured values, by compound."""
    nearest: dict[str, str] = {}
    for formula in LININGS:
        print(f"lining of {formula}, room temperature to {TEMPERATURES[-1]:.0f} K")
        rigid = [known.name for known in thermex.published_for(formula) if not known.potential.polarisable]
        tried = {name: abs(try_one(name, formula)) for name in rigid}
        found = {name: size for name, size in tried.items() if math.isfinite(size)}
        nearest[formula] = min(found, key=found.__getitem__)
        print(f"  nearest to the measured α at {HOT:.0f} K: {nearest[formula]}")
    print(CAUTION)
    return nearest


if __name__ == "__main__":
    main()
