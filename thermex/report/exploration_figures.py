"""Figures of sweeps: α against temperature coloured by the parameter, and against the parameter."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib import colormaps
from matplotlib.cm import ScalarMappable
from matplotlib.colors import Normalize

from thermex.exploration.measured_data import Target
from thermex.exploration.point import Point
from thermex.exploration.sweep import Sweep
from thermex.report.style import BLACK, BLUE, GREY, VERMILION, dress, legend, new_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes


def plot_sweep_curves(result: Sweep, *, ax: Axes | None = None) -> Axes:
    """Draw α(T) of every answered point, coloured by the (first) parameter, with a scale."""
    axes = ax if ax is not None else new_axes()
    firsts = [v[0] for v in result.values]
    norm = Normalize(min(firsts), max(firsts) if max(firsts) > min(firsts) else min(firsts) + 1.0)
    shade = colormaps["viridis"]
    for value, point in zip(result.values, result.points, strict=True):
        if point.answered:
            alpha = np.array([np.nan if v is None else 1e6 * v for v in point.alpha_linear_per_K])
            _curve(axes, point, alpha, shade(norm(value[0])))
    dress(axes, x="Temperature / K", y="Linear expansion coefficient α / 10⁻⁶ K⁻¹")
    _key_of_lines(axes, result)
    figure: Any = axes.figure
    figure.colorbar(ScalarMappable(norm, shade), ax=axes, label=result.parameters[0])
    return axes


def _curve(axes: Axes, point: Point, alpha: Any, colour: Any) -> None:
    """Draw one curve: thin where quasi-harmonic below a correction, dotted where extrapolated."""
    kelvin = np.array(point.temperature_K)
    starts = point.starts_K if point.starts_K is not None else -np.inf
    limit = point.tested_to_K if point.tested_to_K is not None else np.inf
    for part, width, style in (
        (kelvin < starts, 0.8, "-"),
        ((kelvin >= starts) & (kelvin <= limit), 1.6, "-"),
        ((kelvin >= starts) & (kelvin >= _last_before(kelvin, limit)), 1.4, ":"),
    ):
        axes.plot(kelvin, np.where(part, alpha, np.nan), color=colour, linewidth=width, linestyle=style)


def _last_before(kelvin: Any, limit: float) -> float:
    inside = kelvin[kelvin <= limit]
    return float(inside[-1]) if inside.size and limit < kelvin[-1] else float("inf") if limit >= kelvin[-1] else -np.inf


def _key_of_lines(axes: Axes, result: Sweep) -> None:
    """Say what the kinds of line mean."""
    answered = [p for p in result.points if p.answered]
    kinds = sorted({p.kind for p in answered})
    axes.plot([], [], "-", color=GREY, linewidth=1.6, label=" or ".join(kinds) or "no answer")
    if any(p.starts_K is not None for p in answered):
        axes.plot([], [], "-", color=GREY, linewidth=0.8, label="quasi-harmonic, below the correction")
    if any(p.tested_to_K is not None and p.tested_to_K < p.temperature_K[-1] for p in answered):
        axes.plot([], [], ":", color=GREY, linewidth=1.4, label="beyond the tested range")
    legend(axes)


def plot_sweep_cut(result: Sweep, kelvin: float, measured: Target | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw α at one temperature against the parameter; points without an answer as crosses on the axis.

    Parameters
    ----------
    measured
        Measured α at that temperature, drawn as a line with a band.
    """
    axes = ax if ax is not None else new_axes()
    x = np.array([v[0] for v in result.values])
    y = np.array([1e6 * p.at("alpha_linear_per_K", kelvin) for p in result.points])
    good = np.isfinite(y)
    axes.plot(x[good], y[good], "o-", color=BLUE, label=f"predicted, {kelvin:g} K")
    open_marks = good & np.array([p.extrapolated(kelvin) for p in result.points])
    if open_marks.any():
        label = "beyond the tested range"
        axes.plot(x[open_marks], y[open_marks], "o", color=BLUE, markerfacecolor="white", label=label)
    if (~good).any():
        axes.plot(x[~good], np.zeros((~good).sum()), "x", color=VERMILION, label="no answer here", clip_on=False)
    if measured is not None:
        axes.axhline(1e6 * measured.value, color=BLACK, linewidth=1.0, label="measured")
        if np.isfinite(measured.uncertainty):
            low, high = measured.value - measured.uncertainty, measured.value + measured.uncertainty
            axes.axhspan(1e6 * low, 1e6 * high, color=GREY, alpha=0.25, lw=0)
    axes.set_ylim(bottom=0.0)
    dress(axes, x=result.parameters[0], y=f"α at {kelvin:g} K / 10⁻⁶ K⁻¹")
    legend(axes)
    return axes


def plot_sweep_map(result: Sweep, kelvin: float, *, ax: Axes | None = None) -> Axes:
    """Draw α at one temperature over two parameters."""
    axes = ax if ax is not None else new_axes()
    xs = sorted({v[0] for v in result.values})
    ys = sorted({v[1] for v in result.values})
    grid = np.full((len(ys), len(xs)), np.nan)
    for value, point in zip(result.values, result.points, strict=True):
        grid[ys.index(value[1]), xs.index(value[0])] = 1e6 * point.at("alpha_linear_per_K", kelvin)
    picture = axes.pcolormesh(xs, ys, grid, cmap="viridis", shading="nearest")
    figure: Any = axes.figure
    figure.colorbar(picture, ax=axes, label=f"α at {kelvin:g} K / 10⁻⁶ K⁻¹")
    dress(axes, x=result.parameters[0], y=result.parameters[1])
    return axes
