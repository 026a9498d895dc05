"""Thermal expansion of a case: from the words of a case to a prediction."""

from __future__ import annotations

from collections.abc import Mapping
from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex import modes, oscillators
from thermex.anharmonic.method import Method, method_error, refuse_sampling
from thermex.calculator_lattice import named_calculator
from thermex.case.case import Case
from thermex.chebyshev import Box
from thermex.constants import BOLTZMANN, J_PER_MOL_EV
from thermex.crystal.build import build_crystal
from thermex.crystal.crystal import Crystal
from thermex.errors import InputError
from thermex.free_energy import Vibrations
from thermex.ground import Ground, calculator_ground, fixed_ground, relaxed_ground
from thermex.memory import refuse_oversized
from thermex.mesh import Mesh, divisions_for, graded, long_wave_sphere
from thermex.potential.bonds import find_bonds
from thermex.potential.build import pair_model
from thermex.potential.model import PairModel
from thermex.prediction import Effort, ModeSample, NumericalError, Prediction, StaticLattice
from thermex.relaxation import freedom_of
from thermex.road import Progress, Travelled
from thermex.static import turning_points
from thermex.stopwatch import Stopwatch
from thermex.tour import LARGE
from thermex.volume_path import path_alpha
from thermex.zone_centre import zone_centre

Array = NDArray[np.float64]


#: Said of every prediction from an ASE calculator.
CALCULATOR_NOTE = (
    "Forces come from an ASE calculator by finite displacements of 0.01 Å; the error of the supercell is taken from "
    "one half as long again."
)


def _silent(stage: str, done: int, total: int) -> None:
    """Report nothing."""


def predict(case: Case, *, progress: Progress = _silent, executor: Executor | None = None) -> Prediction:
    """Predict the thermal expansion of a case.

    Parameters
    ----------
    case
        Crystal, potential, temperatures and accuracy; see :func:`thermex.load_case`.
    progress
        Told ``(stage, steps done, steps in all)``.
    executor
        Anything shaped like ``concurrent.futures.Executor``: runs the blocks of a sampled anharmonicity;
        two threads by default. Nothing else of a prediction is handed to it.

    Raises
    ------
    InputError
        What the case asks for does not fit together, or the start lies in a collapse.
    ResourceError
        The job would not fit into the memory of the machine; told before it starts.
    NoAnswerError
        No static minimum, an unstable crystal, or no temperature below the branch end.
    """
    watch = Stopwatch()
    crystal = build_crystal(case.crystal)
    refuse_untested(case, crystal)
    ground, model = ground_of(case, crystal)
    watch.lap("static lattice")
    asked = np.array(case.conditions.temperatures, dtype=float)
    grid = np.unique(np.concatenate([asked, [case.conditions.reference_temperature, 0.0]]))
    travelled = ground.travel(grid, case.accuracy.alpha, progress)
    watch.lap("phonons and equilibrium")
    sampled = sample_modes(travelled)
    watch.lap("modes")
    effective = effective_temperature(travelled)
    method = method_error(case.accuracy, model, travelled, asked, effective, sampled.debye_moment_K, progress, executor)
    watch.lap("anharmonic correction")
    return assemble(case, model, ground, travelled, sampled, method, grid, watch.seconds)


def refuse_untested(case: Case, crystal: Crystal) -> None:
    """Raise :class:`InputError` when sampling is asked for where it is not offered, before anything is computed."""
    if case.accuracy.anharmonic == "sampled":
        from_calculator = bool(case.potential.calculator) or not case.potential.pairs
        refuse_sampling(crystal, None if from_calculator else pair_model(case.potential, crystal), case.source)


def ground_of(case: Case, crystal: Crystal) -> tuple[Ground, PairModel | None]:
    """Find the static lattice of a case, and its pair model unless forces come from a calculator."""
    calculator = getattr(case.crystal.atoms, "calc", None) if not case.potential.pairs else None
    if case.potential.calculator:
        calculator = named_calculator(case.potential.calculator)
    if calculator is not None:
        return calculator_ground(case, crystal, calculator), None
    model = pair_model(case.potential, crystal)
    refuse_collapsed(model, crystal, case.source)
    refuse_oversized(model, crystal, case.accuracy.alpha, case.source)
    freedom = freedom_of(model, crystal)
    if len(crystal.axes) == 1 and len(freedom.inner) == 0:
        return fixed_ground(case, model, crystal), model
    return relaxed_ground(case, model, crystal, freedom), model


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


@dataclass(frozen=True, slots=True)
class SampledModes:
    """Modes on a small mesh at a few cells along the branch, and the long-wave limit at T = 0."""

    mesh: Mesh
    box: Box
    """Points in ln V along the branch."""
    cells: list[modes.CellModes]
    limit: modes.LongWaveLimit

    @property
    def debye_moment_K(self) -> float:
        """θ_D from the second moment of the frequencies of the coldest cell."""
        return oscillators.debye_temperature_of_moment(self.cells[0].frequencies, self.mesh.weights)


def sample_modes(travelled: Travelled) -> SampledModes:
    """Compute modes with their γ and amplitudes at a few cells along the branch (one for large cells)."""
    lattice, states = travelled.lattice, travelled.solution.states
    crystal = lattice.crystal
    mesh = graded(crystal, divisions_for(crystal, 10 if crystal.size <= 2 else 8 if crystal.size < 8 else 4))
    sphere = long_wave_sphere(crystal, 18 if crystal.size < 8 else 10 if crystal.size <= LARGE else 4)
    motion = lattice.motion(np.concatenate([mesh.points, sphere.points]))
    size = len(mesh.points)
    log_volume = states.x @ travelled.load.trace
    low, high = float(log_volume.min()), float(log_volume.max())
    margin = 0.05 * (high - low) + 1e-5
    count = 3 if crystal.size < 8 else 2 if crystal.size <= LARGE else 1
    box = Box(np.array([[low - margin, high + margin]]), (count,))
    direction = squeeze(travelled)
    order = np.argsort(log_volume)
    warm = []
    limit: modes.LongWaveLimit | None = None
    for point in box.grid[:, 0]:
        x = np.array([np.interp(point, log_volume[order], column[order]) for column in states.x.T])
        both = modes.cell_modes(motion, x, direction)
        warm.append(modes.on_mesh(both, mesh, slice(0, size)))
        if limit is None:
            sound = modes.on_mesh(both, sphere, slice(size, None))
            limit = modes.long_wave_limit(sound, sphere, float(travelled.load.volume(x[None])[0]))
    assert limit is not None
    return SampledModes(mesh, box, warm, limit)


def squeeze(travelled: Travelled) -> Array:
    """Return the change of x for a unit change of ln V under hydrostatic pressure, shape (d,)."""
    states, load = travelled.solution.states, travelled.load
    x = states.x[:1]
    values = travelled.solution.surface.best.at(states.temperature[:1])(x)
    _, curvature = load.enthalpic(values, x)
    response = np.linalg.solve(curvature[0], load.trace)
    return np.asarray(response / (load.trace @ response))


def assemble(
    case: Case,
    model: PairModel | None,
    ground: Ground,
    travelled: Travelled,
    sampled: SampledModes,
    method: Method,
    grid: Array,
    seconds: Mapping[str, float],
) -> Prediction:
    """Gather everything into a :class:`Prediction` at the temperatures that the case asks for."""
    static = ground.static
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
        sampled.cells,
        sampled.box,
        sampled.mesh,
        crystal.masses,
        (states.x @ travelled.load.trace)[:, None],
        states.temperature,
    )
    gamma, gamma_modes, debye = _cold_limits(travelled, sampled, averages.gruneisen)
    effective = effective_temperature(travelled)
    conventions = _conventions(case, travelled, lattice, grid)
    centre = zone_centre(model, ground.configuration.particles(model), crystal.masses) if model else None
    return Prediction(
        case=case,
        crystal=crystal,
        static=static,
        temperature_K=asked,
        lattice_A={n: spread(lattice[:, k]) for k, n in enumerate(names)},
        fractional=spread(positions_along(travelled)),
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
        debye_moment_K=sampled.debye_moment_K,
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
        equations_of_state=ground.fits,
        effort=_effort(travelled, seconds),
        modes=_mode_samples(travelled, sampled),
        zone_centre=centre,
        path_alpha_volume_per_K=spread(path_alpha(travelled)) if len(names) > 1 else None,
        rule=method.rule,
        anharmonic=method.anharmonic,
        notes=(*_notes(case, model, static, travelled), *method.notes),
    )


def positions_along(travelled: Travelled) -> Array:
    """Return fractional positions at every state, shape (nT, n, 3).

    Inner coordinates are relaxed at the coldest and the hottest cell and run straight in ln V between.
    """
    states = travelled.solution.states
    crystal = travelled.lattice.crystal
    if not len(crystal.displacements):
        return np.repeat(crystal.fractional[None], len(states.x), axis=0)
    log_volume = states.x @ travelled.load.trace
    rows = int(np.argmin(log_volume)), int(np.argmax(log_volume))
    low, high = (travelled.lattice.fractional_at(states.x[k]) for k in rows)
    span = log_volume[rows[1]] - log_volume[rows[0]]
    share = (log_volume - log_volume[rows[0]]) / (span if span > 0.0 else 1.0)
    return np.asarray(low[None] + share[:, None, None] * (high - low)[None])


def _spread_error(error: NumericalError, spread: object) -> NumericalError:
    return NumericalError(*(spread(getattr(error, f)) for f in NumericalError.__slots__))  # type: ignore[operator]


def _cold_limits(travelled: Travelled, sampled: SampledModes, mode_gamma: Array) -> tuple[Array, Array, Array]:
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


def effective_temperature(travelled: Travelled) -> Array:
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


def _effort(travelled: Travelled, seconds: Mapping[str, float]) -> Effort:
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
        log_volume = float(states.x[row] @ travelled.load.trace)
        cell = sampled.cells[int(np.argmin(np.abs(sampled.box.grid[:, 0] - log_volume)))]
        kelvin = float(states.temperature[row])
        out.append(ModeSample(label, kelvin, sampled.mesh.weights, cell.frequencies, cell.gruneisen))
    return tuple(out)


def _notes(case: Case, model: PairModel | None, static: StaticLattice, travelled: Travelled) -> tuple[str, ...]:
    notes = list(model.description) if model else [CALCULATOR_NOTE]
    for pair, distance in static.turning_points_A.items():
        notes.append(f"{pair}: the potential turns over towards collapse inside {distance:.3f} Å.")
    if travelled.ends:
        top = max(case.conditions.temperatures)
        if top > 0.9 * travelled.end_K:
            notes.append(
                f"Within 10 % of the branch end (above {0.9 * travelled.end_K:.0f} K) α runs away by nature of "
                "the quasi-harmonic approximation."
            )
    if case.conditions.reference_temperature > travelled.end_K and travelled.ends:
        notes.append("The reference temperature lies past the branch end: ΔL/L₀ and mean coefficients are empty.")
    if len(static.crystal.displacements):
        notes.append(
            "Inner coordinates follow the static forces at every cell (zero static internal stress approximation)."
        )
    return tuple(notes)
