"""Figures: the lines hold the numbers of the prediction; nothing global is touched."""

from __future__ import annotations

import sys
from collections.abc import Callable

import numpy as np
import pytest
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from tests.synthetic import axial_prediction, invented_prediction, measured_beside, with_anharmonic
from thermex.prediction import Prediction
from thermex.report.figures import (
    plot_alpha,
    plot_bulk_modulus,
    plot_elongation,
    plot_gruneisen,
    plot_heat_capacity,
)
from thermex.report.mode_figures import density_of_states, plot_density_of_states, plot_mode_gruneisen
from thermex.report.pair_figures import plot_crystal_energy, plot_pair_curves, swing_of
from thermex.report.style import png_bytes, svg_bytes

AGAINST_TEMPERATURE = [plot_alpha, plot_elongation, plot_gruneisen, plot_bulk_modulus, plot_heat_capacity]
OTHERS = [plot_mode_gruneisen, plot_density_of_states, plot_pair_curves, plot_crystal_energy]


def line(axes: Axes, label: str) -> tuple[np.ndarray, np.ndarray]:
    found = next(drawn for drawn in axes.get_lines() if str(drawn.get_label()).startswith(label))
    return np.asarray(found.get_xdata(), dtype=float), np.asarray(found.get_ydata(), dtype=float)


def labels(axes: Axes) -> list[str]:
    return axes.get_legend_handles_labels()[1]


@pytest.mark.parametrize(
    ("plot", "label", "name", "scale"),
    [
        (plot_alpha, "quasi-harmonic", "alpha_linear_per_K", 1e6),
        (plot_elongation, "quasi-harmonic", "elongation", 100.0),
        (plot_gruneisen, "γ, quasi", "gruneisen", 1.0),
        (plot_bulk_modulus, "$B_T$, quasi", "bulk_modulus_T_GPa", 1.0),
        (plot_bulk_modulus, "$B_S$, quasi", "bulk_modulus_S_GPa", 1.0),
        (plot_heat_capacity, "$C_P$, quasi", "heat_capacity_P_J_per_mol_K", 1.0),
        (plot_heat_capacity, "$C_V$", "heat_capacity_V_J_per_mol_K", 1.0),
    ],
)
def test_line_holds_the_prediction(plot: Callable[..., Axes], label: str, name: str, scale: float) -> None:
    prediction = invented_prediction()
    x, y = line(plot(prediction), label)
    np.testing.assert_array_equal(x, prediction.temperature_K)
    np.testing.assert_allclose(y, getattr(prediction, name) * scale, rtol=1e-12)


@pytest.mark.parametrize("plot", [*AGAINST_TEMPERATURE, *OTHERS])
def test_draws_on_given_axes_and_returns_them(plot: Callable[..., Axes]) -> None:
    axes = Figure().add_subplot()
    assert plot(invented_prediction(), ax=axes) is axes
    assert axes.get_xlabel() and axes.get_ylabel() and axes.get_legend() is not None


@pytest.mark.parametrize("plot", AGAINST_TEMPERATURE)
def test_region_past_the_branch_end_is_marked(plot: Callable[..., Axes]) -> None:
    assert any("past the branch end, 1900 K" in label for label in labels(plot(invented_prediction())))
    short = invented_prediction(temperatures=(100.0, 200.0, 300.0))
    assert not any("branch end" in label for label in labels(plot(short)))


def test_measured_points_carry_their_source() -> None:
    prediction = invented_prediction()
    axes = plot_alpha(prediction, measured_beside(prediction))
    assert {"measured [1]", "measured [2]"} <= set(labels(axes))
    drawn = [bar for bar in axes.containers if bar.get_label() == "measured [1]"]
    np.testing.assert_allclose(drawn[0].lines[0].get_ydata(), [2.1, 10.4, 12.8, 14.9])


def test_divergence_does_not_flatten_the_rest() -> None:
    prediction = invented_prediction()
    top = plot_alpha(prediction).get_ylim()[1]
    early = prediction.alpha_linear_per_K[prediction.temperature_K <= 0.9 * prediction.valid_to_K]
    assert early.max() * 1e6 < top <= 1.5 * early.max() * 1e6


def test_correction_and_where_it_is_extrapolated() -> None:
    prediction = with_anharmonic(invented_prediction())
    axes = plot_alpha(prediction)
    x, y = line(axes, "with anharmonicity, leading order")
    assert x[np.isfinite(y)].min() >= 190.0 and x[np.isfinite(y)].max() <= 950.0
    assert "the same, extrapolated" in labels(axes)


def test_each_axis_has_its_line() -> None:
    prediction = axial_prediction()
    for axis in ("a", "c"):
        _, y = line(plot_alpha(prediction), f"along {axis}")
        np.testing.assert_allclose(y, prediction.alpha_axis_per_K[axis] * 1e6)


def test_density_of_states_counts_the_modes() -> None:
    sample = invented_prediction().modes[0]
    frequency, density = density_of_states(sample)
    # Definition of the density of states: its integral is the number of branches, 3n = 6.
    assert np.sum(density) * (frequency[1] - frequency[0]) == pytest.approx(6.0, rel=2e-3)


def test_pair_curves_mark_the_static_distance() -> None:
    prediction = invented_prediction()
    axes = plot_pair_curves(prediction)
    x, _ = line(axes, "static distance 2.100")
    assert set(x) == {2.1}
    assert {"Mg–O", "O–O"} <= set(labels(axes))


def test_swing_uses_relative_motion_of_independent_atoms() -> None:
    prediction = invented_prediction()
    swing = swing_of(prediction)
    each = 0.003 + 1e-5 * swing.temperature_K
    assert swing.temperature_K == 1900.0
    assert swing.spread == pytest.approx(np.sqrt(2.0 * each / 3.0))


def test_saved_twice_the_same_and_no_global_state() -> None:
    before = set(sys.modules)
    prediction: Prediction = invented_prediction()
    axes = plot_alpha(prediction)
    assert svg_bytes(axes) == svg_bytes(plot_alpha(prediction))
    assert png_bytes(axes)[:4] == b"\x89PNG"
    assert "matplotlib.pyplot" not in set(sys.modules) - before
