"""The rule for the error of the quasi-harmonic α."""

from __future__ import annotations

import numpy as np
import pytest
from anharmonic_cases import reference

from thermex.anharmonic.rule import anharmonic_rule, overestimate


@pytest.mark.parametrize("name", ["S1", "S2", "S3"])
def test_covers_the_simulated_overestimate(name: str) -> None:
    # alpha_QHA/alpha_exact of anharmonic.json (classical simulation), inside the scatter of the rule
    rows = [r for r in reference("anharmonic.json")[name]["rows"] if 0.15 < r["t"] < 0.8]
    t = np.array([r["t"] for r in rows])
    actual = np.array([r["alpha_QHA"] / r["alpha_exact"] - 1.0 for r in rows])
    found = anharmonic_rule(t * 500.0, 500.0)
    np.testing.assert_allclose(found.t, t)
    assert (actual > 0.97 * found.low).all()
    assert (actual < 1.03 * found.high).all()


def test_five_ten_and_twenty_per_cent() -> None:
    # anharmonic.md, first table: 5 % at t = 0.16-0.22, 10 % at 0.28-0.36, 20 % at 0.46-0.55
    for low, high, size in ((0.16, 0.22, 0.05), (0.28, 0.36, 0.10), (0.46, 0.55, 0.20)):
        t = np.linspace(0.01, 0.99, 2000)
        at = t[np.argmin(np.abs(overestimate(t) - size))]
        assert low < at < high


def test_says_nothing_past_the_end_or_without_one() -> None:
    found = anharmonic_rule(np.array([100.0, np.nan, 600.0]), 500.0)
    assert np.isfinite(found.overestimate).tolist() == [True, False, False]
    none = anharmonic_rule(np.array([100.0]), np.inf)
    assert np.isnan(none.overestimate).all()
    assert "not reached" in none.words


def test_words_name_what_is_not_covered() -> None:
    words = anharmonic_rule(np.array([100.0]), 500.0).words
    for word in ("fluorite", "Morse", "polarisable", "axial", "too high", "too low"):
        assert word in words
