"""The pair curves in one picture: φ(r), where the ions rest, where heat puts them, how far they swing."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from thermex.potential.model import PairModel
from thermex.prediction import Prediction
from thermex.report.style import BLACK, DASHES, GREY, LINES, VERMILION, dress, legend, new_axes

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
    curves = pair_curves(model_of(prediction))
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
    axes.axvline(
        swing.mean, color=VERMILION, linestyle="--", linewidth=1.2, label=f"{hot}: mean {swing.mean:.3f} Å"
    )
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
    named = {
        frozenset((model.kinds[i.first].symbol, model.kinds[i.second].symbol)) for i in model.interactions
    }
    return frozenset(pair) in named or model.has_charges


def _energy_of(model: PairModel, pair: tuple[str, str]) -> Callable[[Array], Array]:
    def energy(distance: Array) -> Array:
        total = np.zeros_like(distance)
        for one in _members(model, pair[0]):
            for two in _members(model, pair[1]):
                total += model.pair_derivatives(one, two, distance, 0)[0]
        return total

    return energy
