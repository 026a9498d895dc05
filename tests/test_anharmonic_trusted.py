"""Corrected values whose own error is too large are left out, and the rule is silent where it has no ground."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import synthetic

from thermex.anharmonic.trusted import LARGEST_ERROR, trusted
from thermex.case.published import case_from_published
from thermex.expansion import predict


def test_values_with_a_large_error_are_blanked_in_every_array() -> None:
    prediction = synthetic.with_anharmonic(synthetic.invented_prediction())
    found = prediction.anharmonic
    assert found is not None
    error = np.where(prediction.temperature_K > 1000.0, 2.0 * LARGEST_ERROR, 0.01)
    kept = trusted(replace(found, alpha_relative_error=error), prediction.temperature_K)
    hot = prediction.temperature_K > 1000.0
    assert np.isnan(kept.alpha_linear_per_K[hot]).all() and np.isnan(kept.lattice_A["a"][hot]).all()
    assert kept.alpha_linear_per_K[~hot] == pytest.approx(found.alpha_linear_per_K[~hot], nan_ok=True)
    assert "left out from 1050 K on" in kept.notes[0]
    cold = replace(found, alpha_relative_error=np.where(prediction.temperature_K == 500.0, 1.0, 0.01))
    nothing = trusted(cold, prediction.temperature_K)
    assert np.isnan(nothing.alpha_linear_per_K).all() and "at every temperature" in nothing.notes[0]
    assert trusted(replace(found, alpha_relative_error=0.0 * error), prediction.temperature_K).notes == found.notes


def test_urania_that_turns_soft_gets_neither_rule_nor_noise() -> None:
    # the branch of this set ends by imaginary phonons (converged.json says so of the UO2 sets)
    prediction = predict(case_from_published("UO2 Basak-03", (300.0, 1000.0, 1300.0)))
    assert "imaginary" in prediction.valid_to_reason
    assert prediction.rule is not None and np.isnan(prediction.rule.overestimate).all()
    assert prediction.anharmonic is None or np.nanmax(prediction.anharmonic.alpha_relative_error) <= LARGEST_ERROR
