"""Expansion with the axes locked to the static hydrostatic path: the volume-only approximation."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from thermex.constants import GPA_PER_EV_A3
from thermex.free_energy import Slice, TermValues
from thermex.road import Travelled

Array = NDArray[np.float64]


def static_path(travelled: Travelled, log_volume: Array, static: Slice) -> Array:
    """Return x (nT, d) of the static lattice under the hydrostatic pressure that gives each ln V.

    Parameters
    ----------
    log_volume
        Shape (nT,): ln(V/V_static).
    static
        The static energy as a function of x (nT, d).
    """
    trace = travelled.load.trace
    x = np.repeat(log_volume[:, None] / trace.sum(), len(trace), axis=1)
    for _ in range(30):
        values = static(x)
        # stationary in the directions that keep ln V: slope + λ t = 0
        inverse_trace = np.linalg.solve(values.curvature, np.broadcast_to(trace[:, None], (*x.shape, 1)))[..., 0]
        inverse_slope = np.linalg.solve(values.curvature, values.slope[..., None])[..., 0]
        error = x @ trace - log_volume
        multiplier = (error - inverse_slope @ trace) / (inverse_trace @ trace)
        step = -inverse_slope - multiplier[:, None] * inverse_trace
        x = x + np.clip(step, -0.01, 0.01)
        if np.abs(step).max() < 1e-12:
            break
    return x


def path_alpha(travelled: Travelled) -> Array:
    """Return α_V (nT,) with the axes locked to the static path, 1/K; NaN where it has no minimum."""
    states, load = travelled.solution.states, travelled.load
    temperature = states.temperature
    surface = travelled.solution.surface.best
    static = surface.terms[0].at(temperature)
    full = surface.at(temperature)
    log_volume = states.x @ load.trace
    step = 1e-4
    pressure = load.pressure_GPa / GPA_PER_EV_A3
    for _ in range(8):
        slopes, direction, values = _along(travelled, log_volume, static, full, step)
        volumes = _offsets(log_volume, step)
        force = [s + pressure * np.exp(v) * load.volume_A3 for s, v in zip(slopes, volumes, strict=True)]
        curvature = (force[2] - force[0]) / (2.0 * step)
        change = -force[1] / curvature
        log_volume = log_volume + np.clip(change, -0.005, 0.005)
        if np.abs(change).max() < 1e-10:
            break
    entropy_slope = np.einsum("td,td->t", values.entropy_slope, direction)
    return np.asarray(np.where(curvature > 0.0, entropy_slope / curvature, np.nan))


def _offsets(log_volume: Array, step: float) -> tuple[Array, Array, Array]:
    return log_volume - step, log_volume, log_volume + step


def _along(
    travelled: Travelled, log_volume: Array, static: Slice, full: Slice, step: float
) -> tuple[list[Array], Array, TermValues]:
    """Return dF/d ln V along the path at three neighbouring volumes, and direction and values there."""
    points = [static_path(travelled, log_volume + k * step, static) for k in (-2, -1, 0, 1, 2)]
    slopes = []
    for k in (1, 2, 3):
        direction = (points[k + 1] - points[k - 1]) / (2.0 * step)
        slopes.append(np.einsum("td,td->t", full(points[k]).slope, direction))
    return slopes, (points[3] - points[1]) / (2.0 * step), full(points[2])
