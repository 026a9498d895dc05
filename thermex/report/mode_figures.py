"""Figures of the vibrations: mode Grüneisen parameters and the phonon density of states."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from thermex.prediction import ModeSample, Prediction
from thermex.report.style import BLUE, DASHES, GREY, VERMILION, dress, legend, new_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Array = NDArray[np.float64]
COLOURS = (BLUE, VERMILION)
POINTS = 500
#: Width of the Gaussian that smooths the density of states, of the highest frequency.
SMOOTHING = 0.014


def plot_mode_gruneisen(prediction: Prediction, *, ax: Axes | None = None) -> Axes:
    """Draw γ of every mode of the mesh against its frequency, at the cold and the hot cell.

    The vertical axis holds all but the most extreme 0.2 % of the modes.
    """
    axes = ax if ax is not None else new_axes()
    shown = []
    for k, sample in enumerate(prediction.modes):
        frequency, gamma = sample.frequencies_THz.ravel(), sample.gruneisen.ravel()
        size = 9.0 if frequency.size < 3000 else 3.0
        axes.scatter(
            frequency,
            gamma,
            s=size,
            marker="o" if k == 0 else "^",
            facecolors="none" if k else COLOURS[0],
            edgecolors=COLOURS[k % 2],
            linewidths=0.5,
            alpha=0.55,
            rasterized=True,
            label=_label(sample),
        )
        shown.append(gamma[np.isfinite(gamma)])
    _hold(axes, shown)
    axes.axhline(0.0, color=GREY, linewidth=0.7)
    dress(axes, x="Frequency ν / THz", y="Mode Grüneisen parameter −d ln ν/d ln V")
    axes.set_xlim(left=0.0)
    legend(axes)
    return axes


def plot_density_of_states(prediction: Prediction, *, ax: Axes | None = None) -> Axes:
    """Draw the phonon density of states at the cold and the hot cell, modes per THz and primitive cell."""
    axes = ax if ax is not None else new_axes()
    for k, sample in enumerate(prediction.modes):
        frequency, density = density_of_states(sample)
        axes.plot(
            frequency,
            density,
            color=COLOURS[k % 2],
            linestyle=DASHES[k % 2],
            linewidth=1.5,
            label=_label(sample),
        )
        if k == 0:
            axes.fill_between(frequency, 0.0, density, color=COLOURS[0], alpha=0.12, linewidth=0.0)
    dress(axes, x="Frequency ν / THz", y="Density of states / modes THz⁻¹ cell⁻¹")
    axes.set_xlim(left=0.0)
    axes.set_ylim(bottom=0.0)
    legend(axes)
    return axes


def density_of_states(sample: ModeSample) -> tuple[Array, Array]:
    """Return frequency (THz) and density; the integral is the number of modes per primitive cell.

    A sum of Gaussians on the modes of the mesh, narrow against the spectrum; imaginary modes are left out.
    """
    weights = np.broadcast_to(sample.weights[:, None], sample.frequencies_THz.shape)
    real = sample.frequencies_THz > 0.0
    values, weights = sample.frequencies_THz[real], weights[real]
    if not values.size:
        return np.zeros(0), np.zeros(0)
    width = SMOOTHING * float(values.max())
    edges = np.linspace(0.0, float(values.max()) + 5.0 * width, POINTS + 1)
    counts, _ = np.histogram(values, bins=edges, weights=weights)
    step = float(edges[1] - edges[0])
    reach = np.arange(-int(5.0 * width / step) - 1, int(5.0 * width / step) + 2) * step
    kernel = np.exp(-0.5 * (reach / width) ** 2)
    density = np.convolve(counts, kernel / kernel.sum(), mode="same") / step
    return 0.5 * (edges[1:] + edges[:-1]), density


def _label(sample: ModeSample) -> str:
    return f"{sample.label}, cell of {sample.temperature_K:.4g} K"


def _hold(axes: Axes, shown: list[Array]) -> None:
    """Set the vertical range from the bulk of the modes."""
    everything = np.concatenate(shown) if shown else np.zeros(0)
    if everything.size:
        low, high = np.quantile(everything, [0.001, 0.999])
        margin = 0.08 * max(high - low, 0.2)
        axes.set_ylim(min(low - margin, 0.0), high + margin)
