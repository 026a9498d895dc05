"""The ground of a prediction: the static lattice of a case, described, and the road onward from it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from thermex import calculator_lattice, elastic, equation_of_state
from thermex.case.case import Case
from thermex.chebyshev import Box
from thermex.constants import GPA_PER_EV_A3
from thermex.crystal.crystal import Crystal
from thermex.equilibrium import load_on
from thermex.errors import NoMinimumError
from thermex.general_lattice import general_lattice
from thermex.lattice import supercells_for, uniform_lattice
from thermex.potential.build import nearest_distance
from thermex.potential.lattice_sums import Response, lattice_response
from thermex.potential.model import PairModel
from thermex.potential.terms import Exponential
from thermex.prediction import EquationOfState, StaticLattice
from thermex.relaxation import (
    Configuration,
    Freedom,
    relax_cell,
    start_configuration,
    strain_derivatives,
)
from thermex.road import Progress, Travelled, travel
from thermex.static import ScaledEnergy, bulk_modulus, find_minimum, scaled_energy, turning_points
from thermex.tour import tour
from thermex.zone_centre import refuse_runaway_shells

Array = NDArray[np.float64]

#: Goes from the static lattice to converged states: (temperatures, accuracy, progress).
Onward = Callable[[Array, float, Progress], Travelled]

#: Span of the supercell of a general crystal, in mean distances.
GENERAL_SPAN = 4.6

#: The same for a crystal under an ASE calculator, whose supercells are displaced one by one.
CALCULATOR_SPAN = 4.0


@dataclass(frozen=True, slots=True)
class Ground:
    """The static lattice and what leads on from it."""

    configuration: Configuration
    static: StaticLattice
    fits: tuple[EquationOfState, ...]
    travel: Onward


def fixed_ground(case: Case, model: PairModel, crystal: Crystal) -> Ground:
    """Find the static lattice of a cubic crystal with fixed sites."""
    pressure = case.conditions.pressure
    rough = scaled_energy(model, crystal)
    x = find_minimum(rough, pressure, case.source)
    energy = scaled_energy(model, crystal.strained(np.array([x])))
    configuration = start_configuration(model, energy.crystal)
    response = lattice_response(model, configuration.particles(model))
    static = _described(model, configuration, response, pressure, *bulk_modulus(energy, pressure))
    load = load_on(energy.crystal, pressure)
    widening = range_factor(model, energy.crystal)

    def onward(temperature: Array, accuracy: float, progress: Progress) -> Travelled:
        return travel(
            lambda span: uniform_lattice(model, energy, supercells_for(energy.crystal, widening * span)),
            load,
            temperature,
            accuracy,
            progress,
        )

    return Ground(configuration, static, _uniform_fits(energy, static), onward)


def range_factor(model: PairModel, crystal: Crystal) -> float:
    """Return by how much the supercell must grow for slowly falling exponentials (1 for ions, more for Morse)."""
    spacing = (crystal.volume / crystal.size) ** (1.0 / 3.0)
    ranges = [i.term.rho for i in model.short_ranged() if isinstance(i.term, Exponential)]
    return float(np.clip(max(ranges, default=0.0) / spacing / 0.2, 1.0, 1.6))


def relaxed_ground(case: Case, model: PairModel, crystal: Crystal, freedom: Freedom) -> Ground:
    """Find the static lattice of a crystal with free axes, inner coordinates or shells."""
    pressure = case.conditions.pressure
    d = len(crystal.axes)
    rough = scaled_energy(model, crystal)
    x = find_minimum(rough, pressure, case.source)
    start = start_configuration(model, crystal.strained(np.full(d, x)))
    state, point = relax_cell(model, start, freedom, pressure, case.source)
    modulus = _modulus(state, strain_derivatives(point)[2], pressure)
    around = _pressed(model, state, freedom, pressure, max(0.01 * modulus, 0.05))
    slope = (around[1][1] - around[0][1]) / (2.0 * max(0.01 * modulus, 0.05)) if len(around) == 2 else np.nan
    static = _described(model, state, point.response, pressure, modulus, float(slope))
    load = load_on(state.crystal, pressure)
    lattice = general_lattice(model, state, point, freedom, supercells_for(state.crystal, GENERAL_SPAN))

    def onward(temperature: Array, accuracy: float, progress: Progress) -> Travelled:
        return tour(lattice, load, temperature, accuracy, progress)

    return Ground(state, static, (), onward)


def calculator_ground(case: Case, crystal: Crystal, calculator: Any) -> Ground:
    """Find the static lattice of any crystal under an ASE calculator."""
    pressure = case.conditions.pressure
    settled = calculator_lattice.relax_cell(crystal, calculator, pressure / GPA_PER_EV_A3)
    configuration = Configuration(settled, np.zeros((0, 3)))
    supercells = supercells_for(settled, CALCULATOR_SPAN)
    lattice = calculator_lattice.CalculatorLattice(settled, calculator, supercells)
    d = len(settled.axes)
    window = np.tile([-0.01, 0.01], (d, 1))
    energy = lattice.static_over(Box(window, (4,) * d)).at(np.zeros(1))
    values = energy(np.zeros((1, d)))
    modulus = _modulus(configuration, values.curvature[0], pressure)
    static = StaticLattice(
        crystal=settled,
        energy_eV=float(values.energy[0]),
        bulk_modulus_GPa=modulus,
        bulk_modulus_derivative=float("nan"),
        elastic_GPa=np.full((6, 6), np.nan),
        lowest_elastic_eigenvalue_GPa=float("nan"),
        nearest_distance_A=nearest_distance(settled),
        turning_points_A={},
    )
    load = load_on(settled, pressure)

    def onward(temperature: Array, accuracy: float, progress: Progress) -> Travelled:
        return tour(lattice, load, temperature, accuracy, progress)

    return Ground(configuration, static, (), onward)


def _modulus(state: Configuration, curvature: Array, pressure: float) -> float:
    """Return the bulk modulus under hydrostatic pressure, GPa."""
    trace = state.crystal.strain_trace
    load = pressure / GPA_PER_EV_A3 * state.crystal.volume * np.outer(trace, trace)
    squeeze = np.linalg.solve(curvature + load, trace)
    return float(GPA_PER_EV_A3 / (state.crystal.volume * (squeeze @ trace)))


def _pressed(
    model: PairModel, state: Configuration, freedom: Freedom, pressure: float, step: float
) -> list[tuple[float, float]]:
    """Return (pressure, bulk modulus) at a little less and a little more pressure."""
    out = []
    for p in (pressure - step, pressure + step):
        try:
            pressed, point = relax_cell(model, state, freedom, p)
        except NoMinimumError:
            continue
        out.append((p, _modulus(pressed, strain_derivatives(point)[2], p)))
    return out


def _described(
    model: PairModel,
    configuration: Configuration,
    response: Response,
    pressure: float,
    modulus: float,
    slope: float,
) -> StaticLattice:
    """Describe the crystal at rest, and refuse one that is unstable."""
    crystal = configuration.crystal
    refuse_runaway_shells(model, configuration.particles(model), response)
    stiff = elastic.stiffness(response, crystal.volume, pressure)
    elastic.refuse_soft(stiff, "at the static lattice")
    return StaticLattice(
        crystal=crystal,
        energy_eV=response.energy,
        bulk_modulus_GPa=modulus,
        bulk_modulus_derivative=slope,
        elastic_GPa=stiff,
        lowest_elastic_eigenvalue_GPa=elastic.lowest_eigenvalue(stiff),
        nearest_distance_A=nearest_distance(crystal),
        turning_points_A=turning_points(model),
    )


def _uniform_fits(energy: ScaledEnergy, static: StaticLattice) -> tuple[EquationOfState, ...]:
    x = np.linspace(-0.02, 0.02, 21)
    volume = energy.crystal.volume * np.exp(3.0 * x)
    values = energy.derivatives(x, 0)[0]
    if static.bulk_modulus_derivative <= 1.0:
        return ()
    return equation_of_state.fit(volume, values, static.bulk_modulus_GPa, static.bulk_modulus_derivative)
