"""Thermal expansion of a case: from the words of a case to a prediction."""

from __future__ import annotations

from dataclasses import dataclass
from time import perf_counter

import numpy as np
from numpy.typing import NDArray

from thermex import elastic, equation_of_state, modes, oscillators
from thermex.case.case import Case
from thermex.chebyshev import Box
from thermex.constants import BOLTZMANN, J_PER_MOL_EV
from thermex.crystal.build import build_crystal
from thermex.crystal.crystal import Crystal
from thermex.equilibrium import load_on
from thermex.errors import InputError
from thermex.free_energy import Vibrations
from thermex.lattice import supercells_for, uniform_lattice
from thermex.mesh import Mesh, divisions_for, graded, long_wave_sphere
from thermex.potential.bonds import find_bonds
from thermex.potential.build import nearest_distance, pair_model
from thermex.potential.lattice_sums import lattice_response
from thermex.potential.model import PairModel
from thermex.prediction import Effort, EquationOfState, ModeSample, NumericalError, Prediction, StaticLattice
from thermex.road import Progress, Travelled, travel
from thermex.static import ScaledEnergy, bulk_modulus, find_minimum, scaled_energy, turning_points
from thermex.zone_centre import zone_centre

Array = NDArray[np.float64]


def _silent(stage: str, done: int, total: int) -> None:
    """Report nothing."""


def predict(case: Case, *, progress: Progress = _silent) -> Prediction:
    """Predict the thermal expansion of a case.

    Parameters
    ----------
    case
        Crystal, potential, temperatures and accuracy; see :func:`thermex.load_case`.
    progress
        Told ``(stage, steps done, steps in all)``.

    Raises
    ------
    InputError
        What the case asks for does not fit together, or the start lies in a collapse.
    NoAnswerError
        No static minimum, an unstable crystal, or no temperature below the branch end.
    """
    started = perf_counter()
    crystal = build_crystal(case.crystal)
    model = pair_model(case.potential, crystal)
    refuse_collapsed(model, crystal, case.source)
    energy = static_energy(model, crystal, case)
    static = static_lattice(model, energy, case.conditions.pressure)
    seconds = {"static lattice": perf_counter() - started}
    asked = np.array(case.conditions.temperatures, dtype=float)
    reference = case.conditions.reference_temperature
    grid = np.unique(np.concatenate([asked, [reference, 0.0]]))
    started = perf_counter()
    load = load_on(energy.crystal, case.conditions.pressure)
    travelled = travel(
        lambda span: uniform_lattice(model, energy, supercells_for(energy.crystal, span)),
        load,
        grid,
        case.accuracy.alpha,
        progress,
    )
    seconds["phonons and equilibrium"] = perf_counter() - started
    started = perf_counter()
    sampled = sample_modes(travelled)
    seconds["modes"] = perf_counter() - started
    return assemble(case, model, static, travelled, sampled, grid, seconds, _fits(energy, static))


def static_energy(model: PairModel, crystal: Crystal, case: Case) -> ScaledEnergy:
    """Return U(x) of a cubic crystal with its static minimum under pressure as the origin."""
    if len(crystal.axes) != 1 or len(crystal.displacements):
        raise InputError("only cubic crystals with fixed sites", where="crystal")
    rough = scaled_energy(model, crystal)
    x = find_minimum(rough, case.conditions.pressure, case.source)
    return scaled_energy(model, crystal.strained(np.array([x])))


def static_lattice(model: PairModel, energy: ScaledEnergy, pressure: float) -> StaticLattice:
    """Describe the crystal at rest, and refuse one that is elastically unstable."""
    crystal = energy.crystal
    response = lattice_response(model, model.particles(crystal))
    stiff = elastic.stiffness(response, crystal.volume, pressure)
    modulus, slope = bulk_modulus(energy, pressure)
    elastic.refuse_soft(stiff, "at the static lattice")
    return StaticLattice(
        crystal=crystal,
        energy_eV=float(energy.derivatives(np.zeros(1), 0)[0, 0]),
        bulk_modulus_GPa=modulus,
        bulk_modulus_derivative=slope,
        elastic_GPa=stiff,
        lowest_elastic_eigenvalue_GPa=elastic.lowest_eigenvalue(stiff),
        nearest_distance_A=nearest_distance(crystal),
        turning_points_A=turning_points(model),
    )


def refuse_collapsed(model: PairModel, crystal: Crystal, where: str) -> None:
    """Raise :class:`InputError` when atoms of the start cell sit inside a turning point."""
    turns = turning_points(model)
    if not turns:
        return
    bonds = find_bonds(crystal.lattice, crystal.cartesian, max(turns.values()))
    for first, second, length in zip(bonds.first, bonds.second, bonds.length, strict=True):
        pair = "-".join(sorted((crystal.symbols[first], crystal.symbols[second])))
        if length < turns.get(pair, 0.0):
            raise InputError(
                f"{pair} are {length:.3f} Å apart in the start cell, inside the collapse of the potential "
                f"that begins at {turns[pair]:.3f} Å",
                where=f"{where}: crystal.a" if where else "crystal.a",
                fix="start from a larger cell",
            )


def _fits(energy: ScaledEnergy, static: StaticLattice) -> tuple[EquationOfState, ...]:
    x = np.linspace(-0.02, 0.02, 21)
    volume = energy.crystal.volume * np.exp(3.0 * x)
    values = energy.derivatives(x, 0)[0]
    if static.bulk_modulus_derivative <= 1.0:
        return ()
    return equation_of_state.fit(volume, values, static.bulk_modulus_GPa, static.bulk_modulus_derivative)


@dataclass(frozen=True, slots=True)
class SampledModes:
    """Modes on a small mesh over the strains of the branch, and the long-wave limit at T = 0."""

    mesh: Mesh
    box: Box
    cells: list[modes.CellModes]
    limit: modes.LongWaveLimit


def sample_modes(travelled: Travelled) -> SampledModes:
    """Compute modes with their γ and amplitudes at a few cells along the branch."""
    lattice, states = travelled.lattice, travelled.solution.states
    mesh = graded(lattice.crystal, divisions_for(lattice.crystal, 8))
    sphere = long_wave_sphere(lattice.crystal)
    motion = lattice.motion(np.concatenate([mesh.points, sphere.points]))
    size = len(mesh.points)
    window = travelled.solution.surface.box.window
    box = Box(window, (4,) * len(window))
    direction = np.full(len(window), 1.0 / travelled.load.trace.sum())
    warm = [modes.cell_modes(lambda x: motion(x)[:size], mesh, x, direction) for x in box.grid]
    cold = modes.cell_modes(lambda x: motion(x)[size:], sphere, states.x[0], direction)
    volume = float(travelled.load.volume(states.x[:1])[0])
    return SampledModes(mesh, box, warm, modes.long_wave_limit(cold, sphere, volume))


def assemble(
    case: Case,
    model: PairModel,
    static: StaticLattice,
    travelled: Travelled,
    sampled: SampledModes,
    grid: Array,
    seconds: dict[str, float],
    fits: tuple[EquationOfState, ...],
) -> Prediction:
    """Gather everything into a :class:`Prediction` at the temperatures that the case asks for."""
    asked = np.array(case.conditions.temperatures, dtype=float)
    states = travelled.solution.states
    rows = np.searchsorted(grid, asked)
    index = np.cumsum(travelled.valid) - 1

    def spread(values: Array) -> Array:
        out = np.full((len(asked), *values.shape[1:]), np.nan)
        good = travelled.valid[rows]
        out[good] = values[index[rows[good]]]
        return out

    crystal = static.crystal
    units = crystal.formula_units
    per_mole = J_PER_MOL_EV / units
    names = crystal.axis_names
    lattice = np.exp(states.x) * crystal.lattice_parameters
    averages = modes.averages(
        sampled.cells, sampled.box, sampled.mesh, crystal.masses, states.x, states.temperature
    )
    gamma, gamma_modes, debye = _cold_limits(travelled, sampled, averages.gruneisen)
    effective = _effective_temperature(travelled)
    conventions = _conventions(case, travelled, lattice, grid)
    centre = zone_centre(model, model.particles(crystal), crystal.masses)
    return Prediction(
        case=case,
        crystal=crystal,
        static=static,
        temperature_K=asked,
        lattice_A={n: spread(lattice[:, k]) for k, n in enumerate(names)},
        volume_A3=spread(states.volume),
        alpha_volume_per_K=spread(states.alpha_volume),
        alpha_axis_per_K={n: spread(states.alpha_axis[:, k]) for k, n in enumerate(names)},
        alpha_linear_per_K=spread(states.alpha_volume / 3.0),
        alpha_relative_error=spread(travelled.solution.error.total),
        numerical_error=_spread_error(travelled.solution.error, spread),
        gruneisen=spread(gamma),
        gruneisen_mode_average=spread(gamma_modes),
        bulk_modulus_T_GPa=spread(states.bulk_modulus),
        bulk_modulus_S_GPa=spread(states.bulk_modulus_adiabatic),
        heat_capacity_V_J_per_mol_K=spread(states.heat_volume) * per_mole,
        heat_capacity_P_J_per_mol_K=spread(states.heat_pressure) * per_mole,
        entropy_J_per_mol_K=spread(states.entropy) * per_mole,
        free_energy_eV=spread(states.energy),
        debye_temperature_K=spread(debye),
        debye_moment_K=oscillators.debye_temperature_of_moment(
            sampled.cells[0].frequencies, sampled.mesh.weights
        ),
        mean_square_displacement_A2=spread(averages.square_displacement),
        effective_temperature_K=spread(effective),
        reference_temperature_K=case.conditions.reference_temperature,
        elongation=spread(conventions["elongation"][:, -1]),
        elongation_axis={n: spread(conventions["elongation"][:, k]) for k, n in enumerate(names)},
        alpha_mean_per_K=spread(conventions["mean"][:, -1]),
        alpha_mean_axis_per_K={n: spread(conventions["mean"][:, k]) for k, n in enumerate(names)},
        valid_to_K=travelled.end_K,
        valid_to_reason=travelled.reason,
        branch_ends=travelled.ends,
        branch_end_lattice_A=_end_lattice(travelled, crystal),
        zero_point_lattice_A=dict(zip(names, map(float, lattice[0]), strict=True)),
        equations_of_state=fits,
        effort=_effort(travelled, seconds),
        modes=_mode_samples(travelled, sampled),
        zone_centre=centre,
        path_alpha_volume_per_K=None,
        rule=None,
        anharmonic=None,
        notes=_notes(case, model, static, travelled),
    )


def _spread_error(error: NumericalError, spread: object) -> NumericalError:
    return NumericalError(*(spread(getattr(error, f)) for f in NumericalError.__slots__))  # type: ignore[operator]


def _cold_limits(
    travelled: Travelled, sampled: SampledModes, mode_gamma: Array
) -> tuple[Array, Array, Array]:
    """Return γ, mode-average γ and θ_D with their T → 0 limits, from long waves alone, at T = 0."""
    states = travelled.solution.states
    size = travelled.lattice.crystal.size
    fraction = states.heat_volume / (3.0 * size * BOLTZMANN)
    debye = oscillators.debye_temperature_of_heat(fraction, states.temperature)
    gamma, averaged = states.gruneisen.copy(), mode_gamma.copy()
    at_rest = states.temperature < 1e-9
    gamma[at_rest] = averaged[at_rest] = sampled.limit.gruneisen
    debye[at_rest] = sampled.limit.debye_K
    return gamma, averaged, debye


def _effective_temperature(travelled: Travelled) -> Array:
    """Return T_eff = E_vib/(3n k_B) at every state."""
    states = travelled.solution.states
    vibrations = next(t for t in travelled.solution.surface.best.terms if isinstance(t, Vibrations))
    values = vibrations.at(states.temperature)(states.x)
    energy = values.energy + states.temperature * values.entropy
    return np.asarray(energy / (3.0 * travelled.lattice.crystal.size * BOLTZMANN))


def _conventions(case: Case, travelled: Travelled, lattice: Array, grid: Array) -> dict[str, Array]:
    """Return ΔL/L₀ and the mean coefficient, one column an axis and the volume-equivalent length last."""
    states = travelled.solution.states
    lengths = np.column_stack([lattice, np.cbrt(states.volume)])
    instantaneous = np.column_stack([states.alpha_axis, states.alpha_volume / 3.0])
    t0 = case.conditions.reference_temperature
    position = int(np.searchsorted(grid, t0))
    if not travelled.valid[position]:
        nothing = np.full_like(lengths, np.nan)
        return {"elongation": nothing, "mean": nothing}
    origin = int(np.cumsum(travelled.valid)[position] - 1)
    elongation = np.expm1(np.log(lengths / lengths[origin]))
    difference = (states.temperature - t0)[:, None]
    with np.errstate(divide="ignore", invalid="ignore"):
        mean = np.where(np.abs(difference) > 1e-9, elongation / difference, instantaneous)
    return {"elongation": elongation, "mean": mean}


def _end_lattice(travelled: Travelled, crystal: Crystal) -> dict[str, float]:
    if not travelled.ends:
        return {}
    lengths = np.exp(travelled.end_x) * crystal.lattice_parameters
    return dict(zip(crystal.axis_names, map(float, lengths), strict=True))


def _effort(travelled: Travelled, seconds: dict[str, float]) -> Effort:
    surface = travelled.solution.surface
    cells = travelled.supercells
    return Effort(
        mesh=surface.mesh.divisions,
        irreducible_q=len(surface.mesh.points),
        cells=len(surface.frequencies),
        supercell=cells.short if cells else (1, 1, 1),
        strain_window=surface.box.window,
        seconds=seconds,
    )


def _mode_samples(travelled: Travelled, sampled: SampledModes) -> tuple[ModeSample, ...]:
    """Return the modes at the cells nearest to the coldest and the hottest state."""
    states = travelled.solution.states
    out = []
    for label, row in (("cold", 0), ("hot", len(states.temperature) - 1)):
        nearest = int(np.argmin(np.abs(sampled.box.grid - states.x[row]).sum(axis=1)))
        cell = sampled.cells[nearest]
        kelvin = float(states.temperature[row])
        out.append(ModeSample(label, kelvin, sampled.mesh.weights, cell.frequencies, cell.gruneisen))
    return tuple(out)


def _notes(case: Case, model: PairModel, static: StaticLattice, travelled: Travelled) -> tuple[str, ...]:
    notes = list(model.description)
    for pair, distance in static.turning_points_A.items():
        notes.append(f"{pair}: the potential turns over towards collapse inside {distance:.3f} Å.")
    if travelled.ends:
        top = max(case.conditions.temperatures)
        if top > travelled.end_K:
            notes.append(
                f"Temperatures above {travelled.end_K:.0f} K are left empty: {travelled.reason}."
            )
        if top > 0.9 * travelled.end_K:
            notes.append(
                f"Within 10 % of the branch end (above {0.9 * travelled.end_K:.0f} K) α runs away by nature of "
                "the quasi-harmonic approximation."
            )
    if case.conditions.reference_temperature > travelled.end_K and travelled.ends:
        notes.append(
            "The reference temperature lies past the branch end: ΔL/L₀ and mean coefficients are empty."
        )
    return tuple(notes)
