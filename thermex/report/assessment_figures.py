"""Figures of an assessment: deviations, budget bars, sensitivities, ranking."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from thermex.comparison.assessment import Assessment
from thermex.comparison.budget import parts_at
from thermex.comparison.deviation import EXPANSION
from thermex.comparison.ranking import Ranking
from thermex.report.style import BLACK, BLUE, GREY, LINES, MARKS, VERMILION, dress, legend, new_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes


def plot_assessment(a: Assessment, *, ax: Axes | None = None) -> Axes:
    """Draw the relative deviation of every expansion series against temperature, with the tolerance."""
    axes = ax if ax is not None else new_axes()
    axes.axhspan(-100 * a.tolerance, 100 * a.tolerance, color=BLUE, alpha=0.10, lw=0, label="tolerance")
    axes.axhline(0.0, color=BLACK, linewidth=0.8)
    shown = [d for d in a.deviations if d.series.quantity in EXPANSION and len(d.temperature_K) and d.series.usable]
    for k, d in enumerate(shown):
        marker, colour = MARKS[k % len(MARKS)]
        spread = 100 * np.where(np.isfinite(d.uncertainty), d.uncertainty, 0.0) * np.abs(d.model) / d.measured**2
        axes.errorbar(
            d.temperature_K,
            100 * d.relative,
            yerr=spread,
            fmt=marker,
            markersize=4,
            markerfacecolor="white",
            color=colour,
            ecolor=GREY,
            elinewidth=0.7,
            label=f"[{d.series.source_number}] {d.series.kind or d.series.quantity}",
        )
    values = np.concatenate([100 * d.relative for d in shown]) if shown else np.zeros(1)
    inner = np.percentile(np.abs(values), 95) if len(values) else 10.0
    limit = 100 * a.tolerance
    low, high = min(float(values.min()), -limit), max(float(values.max()), limit)
    low, high = max(low, -4.0 * max(inner, limit)), min(high, 4.0 * max(inner, limit))
    margin = 0.08 * (high - low)
    axes.set_ylim(low - margin, high + margin)
    dress(axes, x="Temperature / K", y="Predicted against measured / %")
    legend(axes)
    return axes


def plot_budget(a: Assessment, *, ax: Axes | None = None) -> Axes:
    """Draw the contributions of γ, C_V, B_T and V to ln(α model/α measured) as bars, by temperature."""
    axes = ax if ax is not None else new_axes()
    b = a.budget
    if b is None:
        return axes
    rows = list(range(len(b.temperature_K)))
    width = 0.16
    x = np.arange(len(rows))
    labels = {"Grüneisen parameter": "γ", "heat capacity": "C_V", "bulk modulus": "B_T", "volume": "V"}
    for j, (name, short) in enumerate(labels.items()):
        values = np.array([parts_at(b, k)[name] for k in rows])
        axes.bar(x + (j - 2) * width, np.nan_to_num(values), width, color=LINES[j], label=short)
    axes.bar(x + 2 * width, b.ln_method_ratio[rows], width, color=GREY, label="method (not in the sum)")
    axes.plot(x, b.ln_alpha_ratio[rows], "D", color=BLACK, markersize=6, label="α")
    axes.axhline(0.0, color=BLACK, linewidth=0.8)
    axes.set_xticks(x, [f"{b.temperature_K[k]:.0f}" for k in rows])
    dress(axes, x="Temperature / K", y="Contribution to ln(α predicted/α measured)")
    axes.legend(
        loc="lower center",
        bbox_to_anchor=(0.5, 1.0),
        ncols=6,
        columnspacing=1.0,
        handlelength=1.2,
        fontsize=8,
        frameon=False,
    )
    return axes


def plot_sensitivities(a: Assessment, *, ax: Axes | None = None) -> Axes:
    """Draw ∂ ln α/∂ ln p as bars, one group a parameter."""
    axes = ax if ax is not None else new_axes()
    y = np.arange(len(a.sensitivities))
    height = 0.8 / max(len(a.sensitivity_temperatures), 1)
    for k, kelvin in enumerate(a.sensitivity_temperatures):
        values = np.nan_to_num([s.slope[k] for s in a.sensitivities])
        errors = np.nan_to_num([s.error[k] for s in a.sensitivities])
        place = y + (k - (len(a.sensitivity_temperatures) - 1) / 2) * height
        axes.barh(place, values, height, xerr=errors, color=LINES[k % len(LINES)], label=f"{kelvin:.0f} K")
    axes.set_yticks(y, [s.parameter for s in a.sensitivities])
    axes.invert_yaxis()
    axes.axvline(0.0, color=BLACK, linewidth=0.8)
    dress(axes, x="∂ ln α / ∂ ln p", y="")
    legend(axes)
    return axes


def plot_ranking(ranked: Ranking, *, ax: Axes | None = None) -> Axes:
    """Draw the rms deviation of several cases, best first; those without an answer are marked."""
    axes = ax if ax is not None else new_axes((6.2, 1.2 + 0.45 * len(ranked)))
    y = np.arange(len(ranked))
    values = np.array([100 * r.rms for r in ranked])
    good = np.isfinite(values)
    axes.barh(y[good], values[good], 0.6, color=BLUE)
    if (~good).any():
        axes.plot(np.zeros((~good).sum()), y[~good], "x", color=VERMILION, clip_on=False, label="no answer")
    axes.axvline(100 * ranked.tolerance, color=BLACK, linewidth=1.0, linestyle="--", label="tolerance")
    axes.set_yticks(y, [f"{r.title[:40]}\n{r.kind}" for r in ranked], fontsize=8)
    axes.invert_yaxis()
    dress(axes, x="Rms deviation of expansion / %", y="")
    legend(axes)
    return axes
