"""The minimum of F + PV over strain: states along the branch, and where the branch ends."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.constants import GPA_PER_EV_A3
from thermex.crystal.crystal import Crystal
from thermex.free_energy import FreeEnergy, Slice, TermValues

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Load:
    """The reference cell and the pressure on it."""

    volume_A3: float
    """Volume of the primitive cell at x = 0."""
    trace: Array
    """Shape (d,): d ln V/d x[k]."""
    pressure_GPa: float

    def volume(self, x: Array) -> Array:
        """Return V (nT,) at strains x (nT, d), Å³."""
        return np.asarray(self.volume_A3 * np.exp(x @ self.trace))

    def enthalpic(self, values: TermValues, x: Array) -> tuple[Array, Array]:
        """Return slope (nT, d) and curvature (nT, d, d) of F + PV, eV."""
        work = self.pressure_GPa / GPA_PER_EV_A3 * self.volume(x)
        slope = values.slope + work[:, None] * self.trace
        curvature = values.curvature + work[:, None, None] * np.outer(self.trace, self.trace)
        return slope, curvature


def load_on(crystal: Crystal, pressure_GPa: float) -> Load:
    """Return the load of a crystal under hydrostatic pressure."""
    return Load(crystal.volume, crystal.strain_trace, pressure_GPa)


@dataclass(frozen=True, slots=True)
class States:
    """Thermodynamic state at the minimum, per primitive cell; arrays over temperature."""

    temperature: Array
    """Shape (nT,), K."""
    x: Array
    """Shape (nT, d)."""
    volume: Array
    """Å³."""
    energy: Array
    """Helmholtz energy, eV."""
    entropy: Array
    """eV/K."""
    alpha_axis: Array
    """Shape (nT, d), 1/K: d x[k]/dT at constant pressure."""
    alpha_volume: Array
    """1/K."""
    bulk_modulus: Array
    """Isothermal, GPa."""
    bulk_modulus_adiabatic: Array
    """GPa."""
    heat_volume: Array
    """C_V, eV/K."""
    heat_pressure: Array
    """C_P, eV/K."""
    gruneisen: Array
    """α_V B_T V / C_V."""


def states(values: TermValues, x: Array, load: Load, temperature: Array) -> States:
    """Return α, B, C and γ from the derivatives of F at the minimum (no finite differences).

    α = (F_xx)⁻¹ S_x along the axes, 1/B_T = V t·(F_xx)⁻¹·t, C_P = C_x + T S_x·(F_xx)⁻¹·S_x and
    C_V = C_P − T V α_V² B_T, with t = d ln V/dx and F_xx the curvature of F + PV.
    """
    _, curvature = load.enthalpic(values, x)
    volume = load.volume(x)
    strain = np.linalg.solve(curvature, values.entropy_slope[:, :, None])[:, :, 0]
    squeeze = np.linalg.solve(curvature, np.broadcast_to(load.trace[:, None], (len(x), len(load.trace), 1)))
    bulk = 1.0 / (volume * (squeeze[:, :, 0] @ load.trace))
    alpha = strain @ load.trace
    heat_pressure = values.heat + temperature * np.einsum("tk,tk->t", values.entropy_slope, strain)
    heat_volume = heat_pressure - temperature * volume * alpha**2 * bulk
    with np.errstate(divide="ignore", invalid="ignore"):
        gruneisen = alpha * bulk * volume / heat_volume
    adiabatic = bulk * heat_pressure / np.where(heat_volume > 0.0, heat_volume, 1.0)
    return States(
        temperature,
        x,
        volume,
        values.energy,
        values.entropy,
        np.asarray(strain),
        np.asarray(alpha),
        bulk * GPA_PER_EV_A3,
        np.where(heat_volume > 0.0, adiabatic, bulk) * GPA_PER_EV_A3,
        heat_volume,
        heat_pressure,
        gruneisen,
    )


def refine(evaluate: Slice, x: Array, load: Load, steps: int = 12) -> tuple[Array, TermValues]:
    """Polish minima by Newton steps from a good start, all temperatures at once."""
    for _ in range(steps):
        values = evaluate(x)
        slope, curvature = load.enthalpic(values, x)
        step = np.linalg.solve(curvature, slope[:, :, None])[:, :, 0]
        x = x - np.clip(step, -0.01, 0.01)
        if len(step) == 0 or np.abs(step).max() < 1e-13:
            break
    return x, evaluate(x)


def temperature_at(free_energy: FreeEnergy, x: Array, load: Load, ceiling: float) -> Array:
    """Return, for one strain, the temperature at which each x (nx,) is stationary.

    The slope of F + PV falls with temperature and is concave in it, so Newton steps from the high
    side descend monotonically. NaN where x is stationary at no temperature (compressed below the
    zero-point state), inf above ``ceiling``.
    """
    column = x[:, None]
    cold, _ = load.enthalpic(free_energy.at(np.zeros(len(x)))(column), column)
    hot, _ = load.enthalpic(free_energy.at(np.full(len(x), ceiling))(column), column)
    temperature = np.full(len(x), ceiling)
    live = (cold[:, 0] > 0.0) & (hot[:, 0] <= 0.0)
    for _ in range(60):
        values = free_energy.at(temperature[live])(column[live])
        slope, _ = load.enthalpic(values, column[live])
        step = slope[:, 0] / np.maximum(values.entropy_slope[:, 0], 1e-300)
        temperature[live] = np.maximum(temperature[live] + step, 1e-3)
        if not live.any() or np.abs(step).max() < 1e-10 * ceiling:
            break
    out = np.where(hot[:, 0] > 0.0, np.inf, temperature)
    return np.where(cold[:, 0] > 0.0, out, np.nan)
