"""Solid argon and sodium chloride against measured values, with and without anharmonicity.

Potentials: Lennard-Jones argon (ε 0.0104 eV, σ 3.4 Å) and the sodium chloride of Tosi and Fumi (1964), as
shipped (lj58.json, tf64.json); neither was fitted to these numbers at temperature by us. Measured values are
those of shared/measured, marked there; what stands here from elsewhere is marked here.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from thermex.case.case import Accuracy
from thermex.case.published import case_from_published
from thermex.expansion import predict
from thermex.measured import load_material
from thermex.measured.series import Series
from thermex.prediction import Prediction


def series_of(material: str, quantity: str, kind: str, source: str) -> Series:
    """Return one usable series, found by its kind and words of its source."""
    (found,) = (
        s
        for s in load_material(material).series
        if s.quantity == quantity and s.kind == kind and source in s.source and s.usable
    )
    return found


@pytest.fixture(scope="module", params=["leading order", pytest.param("sampled", marks=pytest.mark.slow)])
def salt(request: pytest.FixtureRequest) -> Prediction:
    case = case_from_published("TF64 NaCl", (65.0, 283.0, 300.0, 400.0, 500.0, 600.0, 673.0))
    return predict(replace(case, accuracy=Accuracy(anharmonic=request.param, sampled_error=0.02, seed=3)))


# Linear α, 10⁻⁶/K. "Seen" is the equation of state of the first series of NaCl.csv, which holds no anharmonic
# term but was fitted to measurements; the two others are marked "from memory" (300 K confirmed).
#
#   T/K    quasi-harmonic   leading order   sampled   measured
#   283        42.54            38.19        38.74    39.5 ± 0.8 (from memory)
#   300        43.45            38.61        39.26    39.3 ± 0.6 (from memory, confirmed), 38.8 ± 1.2 (seen)
#   400        49.18            40.44        42.04    42.2 ± 1.3 (seen)
#   500        56.66            41.29        44.75    45.6 ± 1.4 (seen)
#   600        68.27            40.90        47.76    49.5 ± 1.5 (seen)
#   673        83.08            (39.57)      50.32    52.9 ± 1.6 (seen)
#
# In brackets: left out of the answer, for the own error of the leading order exceeds 34 % there.
#
# At 65 K no correction is given (it begins at 74 K): 17.28 against 15.8 ± 0.3 (from memory).
SALT = {"White": (283.0,), "Isaak": (300.0,), "Simultaneous": (300.0, 400.0, 500.0, 600.0, 673.0)}


@pytest.mark.parametrize("source", list(SALT))
def test_salt_comes_nearer_to_the_measured_expansion(salt: Prediction, source: str) -> None:
    measured = series_of("NaCl", "linear expansion coefficient", "instantaneous", source)
    corrected = salt.anharmonic
    assert corrected is not None
    for kelvin in SALT[source]:
        row = int(np.argmin(np.abs(salt.temperature_K - kelvin)))
        at = int(np.argmin(np.abs(measured.temperature_K - kelvin)))
        assert salt.temperature_K[row] == measured.temperature_K[at] == kelvin
        value, sigma = float(measured.value[at]), float(measured.uncertainty[at])
        plain, best = salt.alpha_linear_per_K[row], corrected.alpha_linear_per_K[row]
        if kelvin == 673.0 and corrected.kind == "leading order":
            assert np.isnan(best)
            continue
        assert abs(best - value) < 0.6 * abs(plain - value)
        # stated errors of prediction and measurement; 5 % for the potential is common practice, no source
        assert abs(best - value) < np.sqrt((corrected.alpha_relative_error[row] * best) ** 2 + sigma**2) + 0.05 * value
        assert plain - value > 3.0 * sigma or kelvin == 283.0
    assert np.isnan(corrected.alpha_linear_per_K[0])


@pytest.mark.slow
def test_salt_sampled_is_within_the_measured_uncertainty_to_500_K() -> None:
    """Twice the statistical error beside it: eight seeds gave 44.7 ± 0.8 at 500 K, each stating 0.6 to 0.9."""
    case = case_from_published("TF64 NaCl", (300.0, 400.0, 500.0))
    found = predict(replace(case, accuracy=Accuracy(anharmonic="sampled", sampled_error=0.02, seed=3))).anharmonic
    measured = series_of("NaCl", "linear expansion coefficient", "instantaneous", "Simultaneous")
    assert found is not None
    miss = found.alpha_linear_per_K - measured.value[:3]
    error = found.alpha_relative_error * found.alpha_linear_per_K
    assert (np.abs(miss) < measured.uncertainty[:3] + 2.0 * error).all()


def test_argon_at_80_K_has_the_measured_cell_only_with_anharmonicity() -> None:
    """Lattice parameter, Å: quasi-harmonic 5.579, sampled 5.465, measured 5.46; the leading order is left out."""
    # 5.46 Å at 80 K: from memory (about; 0.005 is our own reading of "about"). 5.3111 Å at 4.2 K: Ar.csv, from
    # memory; the model has 5.3065 there, so that its zero-point cell is 0.1 % small.
    case = case_from_published("LJ58 Ar", (4.2, 80.0))
    plainly = predict(case)
    sampled = predict(replace(case, accuracy=Accuracy(anharmonic="sampled", sampled_error=0.05, seed=3)))
    assert plainly.anharmonic is None and sampled.anharmonic is not None
    assert any("left out at every temperature" in note for note in plainly.notes)
    cold = series_of("Ar", "lattice parameter", "", "Peterson")
    plain = plainly.lattice_A["a"]
    assert plain[0] == pytest.approx(float(cold.value[0]), rel=1.5e-3)
    grown = {
        "measured": 5.46 / float(cold.value[0]),
        "quasi-harmonic": plain[1] / plain[0],
        "sampled": sampled.anharmonic.lattice_A["a"][1] / plain[0],
    }
    miss = {k: abs(v - grown["measured"]) for k, v in grown.items()}
    assert miss["sampled"] < miss["quasi-harmonic"]
    assert miss["sampled"] < 0.003
    assert miss["quasi-harmonic"] > 0.02
    assert sampled.anharmonic.lattice_A["a"][1] == pytest.approx(5.46, abs=0.015)


def test_cold_argon_gets_no_correction() -> None:
    """Below a quarter of θ_D (20 K) the classical term would not freeze out: Ar.csv ends at 6 K, nothing to compare."""
    found = predict(case_from_published("LJ58 Ar", (2.0, 6.0, 25.0))).anharmonic
    assert found is not None
    assert np.isfinite(found.alpha_linear_per_K).tolist() == [False, False, True]
