"""Figures of a prediction against temperature, each drawn on given axes or on its own.

Every function returns the axes, shows nothing and leaves no global state behind. ``measured`` is
what :func:`thermex.report.beside.beside_of` gives, or None.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from thermex.prediction import Prediction
from thermex.report.beside import Beside, Curve
from thermex.report.style import BLUE, DASHES, GREY, LINES, MARKS, ORANGE, SKY, VERMILION, dress, legend, new_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Array = NDArray[np.float64]
KELVIN = "Temperature / K"


def plot_alpha(prediction: Prediction, measured: Beside | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw the instantaneous linear coefficient α(T), 10⁻⁶/K, with every band that is known.

    The band around the line is its numerical error; the wider shade is what the rule expects without
    the quasi-harmonic approximation; the corrected line, where there is one, carries its own error.
    """
    axes = ax if ax is not None else new_axes()
    kelvin, alpha = prediction.temperature_K, prediction.alpha_linear_per_K * 1e6
    many = len(prediction.alpha_axis_per_K) > 1
    _rule_band(axes, prediction)
    _error_band(axes, kelvin, alpha, prediction.alpha_relative_error, BLUE)
    axes.plot(kelvin, alpha, color=BLUE, linewidth=1.8, label="quasi-harmonic" + (", mean of axes" if many else ""))
    if many:
        for k, (axis, values) in enumerate(prediction.alpha_axis_per_K.items()):
            _axis_line(axes, kelvin, values * 1e6, axis, k)
    _corrected(axes, prediction)
    curves = _draw_curves(axes, measured, "alpha_linear_per_K", 1e6)
    _draw_curves(axes, measured, "alpha_axis_per_K", 1e6, first_mark=len(curves))
    dress(axes, x=KELVIN, y="Linear expansion coefficient α / 10⁻⁶ K⁻¹")
    _keep_in_sight(axes, prediction, alpha, [curve.value * 1e6 for curve in curves])
    return _finished(axes, prediction)


def plot_elongation(prediction: Prediction, measured: Beside | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw ΔL/L₀ from the reference temperature, per cent."""
    axes = ax if ax is not None else new_axes()
    kelvin = prediction.temperature_K
    many = len(prediction.elongation_axis) > 1
    label = "quasi-harmonic" + (", V^(1/3)" if many else "")
    axes.plot(kelvin, prediction.elongation * 100.0, color=BLUE, linewidth=1.8, label=label)
    if many:
        for k, (axis, values) in enumerate(prediction.elongation_axis.items()):
            _axis_line(axes, kelvin, values * 100.0, axis, k)
    _draw_curves(axes, measured, "elongation", 100.0)
    axes.axvline(prediction.reference_temperature_K, color=GREY, linewidth=0.7, linestyle=":")
    axes.axhline(0.0, color=GREY, linewidth=0.7, linestyle=":")
    dress(axes, x=KELVIN, y=f"ΔL/L₀ from {prediction.reference_temperature_K:g} K / %")
    return _finished(axes, prediction)


def plot_gruneisen(prediction: Prediction, measured: Beside | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw the thermodynamic Grüneisen parameter γ(T)."""
    axes = ax if ax is not None else new_axes()
    kelvin = prediction.temperature_K
    axes.plot(kelvin, prediction.gruneisen, color=BLUE, linewidth=1.8, label="γ, quasi-harmonic")
    if prediction.anharmonic is not None:
        label = f"γ, {prediction.anharmonic.kind}"
        axes.plot(
            kelvin,
            prediction.anharmonic.gruneisen,
            color=VERMILION,
            linestyle="--",
            linewidth=1.6,
            label=label,
        )
    _draw_curves(axes, measured, "gruneisen", 1.0)
    dress(axes, x=KELVIN, y="Grüneisen parameter γ")
    _calm(axes, prediction.gruneisen)
    return _finished(axes, prediction)


def plot_bulk_modulus(prediction: Prediction, measured: Beside | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw the isothermal and the adiabatic bulk modulus, GPa."""
    axes = ax if ax is not None else new_axes()
    kelvin = prediction.temperature_K
    axes.plot(kelvin, prediction.bulk_modulus_T_GPa, color=BLUE, linewidth=1.8, label="$B_T$, quasi-harmonic")
    axes.plot(
        kelvin,
        prediction.bulk_modulus_S_GPa,
        color=SKY,
        linestyle="-.",
        linewidth=1.6,
        label="$B_S$, quasi-harmonic",
    )
    if prediction.anharmonic is not None:
        found = prediction.anharmonic
        label = f"$B_T$, {found.kind}"
        axes.plot(kelvin, found.bulk_modulus_T_GPa, color=VERMILION, linestyle="--", linewidth=1.6, label=label)
        # B_S = B_T (1 + α_V γ T)
        adiabatic = found.bulk_modulus_T_GPa * (1.0 + found.alpha_volume_per_K * found.gruneisen * kelvin)
        label = f"$B_S$, {found.kind}"
        axes.plot(kelvin, adiabatic, color=ORANGE, linestyle=":", linewidth=1.6, label=label)
    curves = _draw_curves(axes, measured, "bulk_modulus_T_GPa", 1.0, prefix="$B_T$ ")
    _draw_curves(axes, measured, "bulk_modulus_S_GPa", 1.0, prefix="$B_S$ ", first_mark=len(curves))
    dress(axes, x=KELVIN, y="Bulk modulus / GPa")
    axes.set_ylim(bottom=0.0)
    return _finished(axes, prediction)


def plot_heat_capacity(prediction: Prediction, measured: Beside | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw C_P and C_V, J/(mol K), per mole of formula units."""
    axes = ax if ax is not None else new_axes()
    kelvin = prediction.temperature_K
    constant_pressure, constant_volume = (
        prediction.heat_capacity_P_J_per_mol_K,
        prediction.heat_capacity_V_J_per_mol_K,
    )
    axes.plot(kelvin, constant_pressure, color=BLUE, linewidth=1.8, label="$C_P$, quasi-harmonic")
    axes.plot(kelvin, constant_volume, color=SKY, linestyle="-.", linewidth=1.6, label="$C_V$")
    if prediction.anharmonic is not None:
        values, label = (
            prediction.anharmonic.heat_capacity_P_J_per_mol_K,
            f"$C_P$, {prediction.anharmonic.kind}",
        )
        axes.plot(kelvin, values, color=VERMILION, linestyle="--", linewidth=1.6, label=label)
    curves = _draw_curves(axes, measured, "heat_capacity_P_J_per_mol_K", 1.0)
    dress(axes, x=KELVIN, y=f"Heat capacity / J (mol {prediction.crystal.formula})⁻¹ K⁻¹")
    _keep_in_sight(axes, prediction, constant_pressure, [curve.value for curve in curves])
    return _finished(axes, prediction)


def _axis_line(axes: Axes, kelvin: Array, values: Array, axis: str, k: int) -> None:
    colour, dash = LINES[(k + 2) % len(LINES)], DASHES[(k + 1) % len(DASHES)]
    axes.plot(kelvin, values, color=colour, linestyle=dash, linewidth=1.6, label=f"along {axis}")


def _error_band(axes: Axes, kelvin: Array, alpha: Array, error: Array, colour: str) -> None:
    half = np.abs(alpha * error)
    axes.fill_between(kelvin, alpha - half, alpha + half, color=colour, alpha=0.25, linewidth=0.0)


def _rule_band(axes: Axes, prediction: Prediction) -> None:
    """Shade α/(1 + expected overestimate) over the scatter of the rule."""
    rule = prediction.rule
    if rule is None or not np.isfinite(rule.low).any():
        return
    alpha = prediction.alpha_linear_per_K * 1e6
    low, high = alpha / (1.0 + rule.high), alpha / (1.0 + rule.low)
    axes.fill_between(
        prediction.temperature_K,
        np.maximum(low, 0.0),
        high,
        color=ORANGE,
        alpha=0.25,
        linewidth=0.0,
        label="expected without the approximation (rule)",
    )


def _corrected(axes: Axes, prediction: Prediction) -> None:
    """Draw the corrected α; dotted where it is extrapolated."""
    found = prediction.anharmonic
    if found is None:
        return
    kelvin, alpha = prediction.temperature_K, found.alpha_linear_per_K * 1e6
    _error_band(axes, kelvin, alpha, found.alpha_relative_error, VERMILION)
    inside = kelvin <= found.extrapolated_from_K
    axes.plot(
        kelvin,
        np.where(inside, alpha, np.nan),
        color=VERMILION,
        linestyle="--",
        linewidth=1.8,
        label=f"with anharmonicity, {found.kind}",
    )
    beyond = np.where(kelvin >= _last(kelvin[inside]), alpha, np.nan)
    if np.isfinite(beyond).sum() > 1:
        axes.plot(kelvin, beyond, color=VERMILION, linestyle=":", linewidth=1.8, label="the same, extrapolated")


def _last(values: Array) -> float:
    return float(values[-1]) if values.size else -np.inf


def _draw_curves(
    axes: Axes, measured: Beside | None, quantity: str, scale: float, *, prefix: str = "", first_mark: int = 0
) -> tuple[Curve, ...]:
    """Draw every measured series of one quantity as open marks; many points become small ones."""
    curves = measured.curves_of(quantity) if measured is not None else ()
    for k, curve in enumerate(curves):
        marker, colour = MARKS[(k + first_mark) % len(MARKS)]
        crowded = curve.value.size > 40
        along = f" along {curve.axis}" if curve.axis else ""
        bars = np.where(np.isfinite(curve.uncertainty), curve.uncertainty, 0.0) * scale
        axes.errorbar(
            curve.temperature_K,
            curve.value * scale,
            yerr=bars if bars.any() and not crowded else None,
            fmt=marker,
            markersize=2.5 if crowded else 4.5,
            markerfacecolor="none",
            color=colour,
            elinewidth=0.7,
            markeredgewidth=0.6 if crowded else 1.0,
            capsize=0.0 if crowded else 2.0,
            zorder=3,
            label=f"{prefix}measured{along} [{curve.source}]",
        )
    return curves


def _keep_in_sight(axes: Axes, prediction: Prediction, values: Array, measured: list[Array]) -> None:
    """Stop the vertical axis before the divergence at the branch end flattens everything else."""
    early = prediction.temperature_K <= 0.9 * prediction.valid_to_K
    heights = [values[early & np.isfinite(values)], *measured]
    finite = np.concatenate([part[np.isfinite(part)] for part in heights])
    everything = values[np.isfinite(values)]
    if prediction.branch_ends and finite.size and everything.max() > 1.4 * finite.max() > 0.0:
        axes.set_ylim(top=1.4 * float(finite.max()))
    if finite.size and finite.min() >= 0.0:
        axes.set_ylim(bottom=0.0)


def _calm(axes: Axes, values: Array) -> None:
    """Give a nearly constant curve at least a range of 0.4, so that noise is not magnified."""
    bottom, top = axes.get_ylim()
    if np.isfinite(values).any() and top - bottom < 0.4:
        middle = 0.5 * (top + bottom)
        axes.set_ylim(middle - 0.2, middle + 0.2)


def _finished(axes: Axes, prediction: Prediction) -> Axes:
    """Set the range of temperature, shade what lies beyond the branch, add the legend."""
    kelvin = prediction.temperature_K
    low, high = float(kelvin[0]), float(kelvin[-1])
    if high > low:
        axes.set_xlim(low, high)
    if prediction.branch_ends and prediction.valid_to_K < high:
        end = prediction.valid_to_K
        axes.axvspan(end, high, color="#BBBBBB", alpha=0.45, linewidth=0.0, label=f"past the branch end, {end:.0f} K")
        axes.axvline(end, color=GREY, linewidth=1.0)
    legend(axes)
    return axes
