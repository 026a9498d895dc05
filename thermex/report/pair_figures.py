"""The pair curves in one picture: φ(r), where the ions rest, where heat puts them, how far they swing."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from thermex.constants import GPA_PER_EV_A3
from thermex.potential.build import pair_model
from thermex.potential.model import PairModel
from thermex.prediction import Prediction
from thermex.report.style import BLACK, BLUE, DASHES, GREY, LINES, VERMILION, dress, legend, new_axes
from thermex.static import scaled_energy

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class PairCurve:
    """The interaction of one pair of kinds."""

    pair: tuple[str, str]
    energy: Callable[[Array], Array]
    """φ(r) in eV for r in Å, charges included."""


@dataclass(frozen=True, slots=True)
class Swing:
    """Where the nearest neighbours are, Å."""

    static: float
    mean: float
    """Mean distance at the temperature, by the expansion of the cell."""
    spread: float
    """Root mean square of the motion along the bond, as of independent atoms."""
    temperature_K: float


def plot_pair_curves(prediction: Prediction, *, ax: Axes | None = None) -> Axes:
    """Draw φ(r) of every pair, charges included, eV against Å.

    Marked are the static distance of nearest neighbours, their mean distance at the highest valid
    temperature and the spread of the vibration there (atoms taken as moving independently).
    """
    axes = ax if ax is not None else new_axes()
    swing = swing_of(prediction)
    distance = np.linspace(0.6 * swing.static, 2.2 * swing.static, 400)
    curves = pair_curves(pair_model(prediction.case.potential, prediction.crystal))
    inner: list[Array] = []
    for k, curve in enumerate(curves):
        energy = curve.energy(distance)
        colour, dash = LINES[k % len(LINES)], DASHES[k % len(DASHES)]
        axes.plot(distance, energy, color=colour, linestyle=dash, linewidth=1.7, label="–".join(curve.pair))
        inner.append(energy[(distance > 0.85 * swing.static) & np.isfinite(energy)])
    _mark(axes, swing)
    axes.axhline(0.0, color=GREY, linewidth=0.7)
    dress(axes, x="Distance r / Å", y="Pair energy φ(r) / eV")
    axes.set_xlim(float(distance[0]), float(distance[-1]))
    _range(axes, inner)
    legend(axes)
    return axes


def plot_crystal_energy(prediction: Prediction, *, ax: Axes | None = None) -> Axes:
    """Draw the energy of the whole crystal at rest against its nearest-neighbour distance.

    The cell is scaled uniformly, inner coordinates kept as fractions; U + PV per formula unit, in eV
    above its minimum, beside the parabola of the same curvature: the difference is why heat expands
    the crystal.
    """
    axes = ax if ax is not None else new_axes()
    swing = swing_of(prediction)
    scale = np.linspace(np.log(0.88), np.log(1.22), 240)
    energy, curvature = _energy_over(prediction, scale)
    distance = swing.static * np.exp(scale)
    parabola = 0.5 * curvature * (np.exp(scale) - 1.0) ** 2
    axes.plot(distance, energy, color=BLUE, linewidth=1.8, label="crystal")
    axes.plot(distance, parabola, color=GREY, linestyle="-.", linewidth=1.2, label="parabola of the same curvature")
    _mark(axes, swing)
    dress(axes, x="Nearest-neighbour distance / Å", y="Energy above rest / eV per formula unit")
    axes.set_xlim(float(distance[0]), float(distance[-1]))
    axes.set_ylim(0.0, 1.15 * float(np.nanmax(energy[scale > 0.0])))
    legend(axes)
    return axes


def _energy_over(prediction: Prediction, scale: Array) -> tuple[Array, float]:
    """Return U + PV above its value at rest, and its second derivative in the scale; per formula unit."""
    crystal = prediction.static.crystal
    surface = scaled_energy(pair_model(prediction.case.potential, prediction.crystal), crystal)
    press = prediction.case.conditions.pressure / GPA_PER_EV_A3 * crystal.volume
    rest = surface.derivatives(np.zeros(1), 2)[:, 0]
    energy = surface.derivatives(scale, 0)[0] - rest[0] + press * (np.exp(3.0 * scale) - 1.0)
    curvature = float(rest[2]) + 9.0 * press
    return energy / crystal.formula_units, (curvature - float(rest[1]) - 3.0 * press) / crystal.formula_units


def swing_of(prediction: Prediction) -> Swing:
    """Return static distance, mean distance and spread at the highest temperature that has a result."""
    static = prediction.static.nearest_distance_A
    good = np.flatnonzero(np.isfinite(prediction.volume_A3))
    if not good.size:
        return Swing(static, static, 0.0, float("nan"))
    k = int(good[-1])
    stretch = float(prediction.volume_A3[k] / prediction.static.crystal.volume) ** (1.0 / 3.0)
    squares = np.sort(prediction.mean_square_displacement_A2[k])[-2:]
    relative = float(squares.sum()) if squares.size > 1 else 2.0 * float(squares[0])
    return Swing(static, static * stretch, float(np.sqrt(relative / 3.0)), float(prediction.temperature_K[k]))


def _mark(axes: Axes, swing: Swing) -> None:
    axes.axvline(swing.static, color=BLACK, linewidth=1.2, label=f"static distance {swing.static:.3f} Å")
    if not np.isfinite(swing.temperature_K):
        return
    hot = f"{swing.temperature_K:.4g} K"
    axes.axvline(swing.mean, color=VERMILION, linestyle="--", linewidth=1.2, label=f"{hot}: mean {swing.mean:.3f} Å")
    axes.axvspan(
        swing.mean - swing.spread,
        swing.mean + swing.spread,
        color=VERMILION,
        alpha=0.13,
        linewidth=0.0,
        label=f"{hot}: spread ±{swing.spread:.3f} Å",
    )


def _range(axes: Axes, inner: list[Array]) -> None:
    """Set the vertical range from the part of the curves outside the hard core."""
    finite = np.concatenate(inner) if inner else np.zeros(0)
    if finite.size:
        low, high = float(finite.min()), float(finite.max())
        margin = 0.08 * max(high - low, 1e-6)
        axes.set_ylim(low - margin, high + margin)


def pair_curves(model: PairModel) -> tuple[PairCurve, ...]:
    """Return the interaction of every pair of symbols, core and shell of an ion on one spot."""
    symbols = tuple(dict.fromkeys(kind.symbol for kind in model.kinds))
    pairs = [(one, two) for k, one in enumerate(symbols) for two in symbols[k:]]
    return tuple(PairCurve(pair, _energy_of(model, pair)) for pair in pairs if _acts(model, pair))


def _members(model: PairModel, symbol: str) -> list[int]:
    return [k for k, kind in enumerate(model.kinds) if kind.symbol == symbol]


def _acts(model: PairModel, pair: tuple[str, str]) -> bool:
    """Whether the pair has a term of its own, or is charged."""
    named = {frozenset((model.kinds[i.first].symbol, model.kinds[i.second].symbol)) for i in model.interactions}
    return frozenset(pair) in named or model.has_charges


def _energy_of(model: PairModel, pair: tuple[str, str]) -> Callable[[Array], Array]:
    def energy(distance: Array) -> Array:
        total = np.zeros_like(distance)
        for one in _members(model, pair[0]):
            for two in _members(model, pair[1]):
                total += model.pair_derivatives(one, two, distance, 0)[0]
        return total

    return energy
