"""The equilibrium with an anharmonic term in the free energy: α, a, B_T, γ and C_P."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from thermex import convergence
from thermex.constants import J_PER_MOL_EV
from thermex.convergence import Surface
from thermex.crystal.crystal import Crystal
from thermex.equilibrium import Load, States, refine, states
from thermex.free_energy import FreeEnergy, Term
from thermex.prediction import Anharmonic

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: The correction freezes out at low temperature and the classical one does not: none is printed below
#: this fraction of the Debye temperature.
COLDEST = 0.25

#: Above this t = T_eff/T_end the leading order is called extrapolated.
TESTED_TO = 0.5

#: A change of α by more than this is pointed out.
NOTABLE = 0.03

#: The leading order is itself the first term of a series: α differs from the simulated one by at most this
#: times t³. The factor is 0.70 to 0.78 in copper (Morse), 0.47 to 0.66 in argon, 0.42 to 0.58 in magnesia
#: and 0.32 to 0.35 in sodium chloride, all too low, by 0.4 to 11 % for t from 0.19 to 0.65. Held out: six
#: sets for UO₂, from 9 % too low to 8 % too high for t from 0.31 to 0.74, all inside.
TRUNCATION = 0.8

#: How far past the window of the quasi-harmonic surface a solution may lie, in ln(scale).
OUTSIDE = 2e-3


class Source(Protocol):
    """An anharmonic term with companions that differ from it by one source of error each."""

    @property
    def best(self) -> Term:
        """The term itself."""
        ...

    @property
    def companions(self) -> Sequence[Term]:
        """The term moved by each source of its error."""
        ...


@dataclass(frozen=True, slots=True)
class Quasiharmonic:
    """What the correction needs of the quasi-harmonic answer, at ascending temperatures."""

    crystal: Crystal
    surface: Surface
    load: Load
    temperature: Array
    """Shape (nT,), K."""
    x: Array
    """Shape (nT, 1): start of the search; the quasi-harmonic minimum where there is one."""
    alpha: Array
    """Shape (nT,): quasi-harmonic α_V, 1/K; NaN past its end."""
    supercell_error: Array
    """Shape (nT,): relative error of α from the supercell."""
    effective: Array
    """Shape (nT,): T_eff, K."""
    end_K: float
    """T_end; inf when not reached."""
    debye_K: float
    """θ_D that says where classical statistics begin to hold."""


def correct(base: Quasiharmonic, source: Source, kind: str, notes: tuple[str, ...] = ()) -> Anharmonic:
    """Solve the equilibrium with an anharmonic term added to the quasi-harmonic free energy.

    The relative error of α holds, in quadrature, mesh, volumes and supercell of the quasi-harmonic part
    and the companions of ``source`` (mesh, range and volumes of F₂, or the statistics of a sampling);
    for the leading order also its truncation, :func:`truncation`. Classical statistics of the term
    (0.25 % of α from 0.2 θ_D on) and the finite cell of a sampling are not in it.

    Parameters
    ----------
    kind
        "leading order" or "sampled".
    notes
        What is to be said of the term besides what is found here.
    """
    starts = COLDEST * base.debye_K
    warm = base.temperature >= starts
    found, error, good = _solved(base, source, warm)
    if kind == "leading order":
        good &= np.isfinite(base.alpha[warm])  # it corrects a quasi-harmonic answer, and past its end there is none
    if kind == "leading order" and np.isfinite(base.end_K):
        error = np.hypot(error, truncation(base)[warm])
    crystal, size = base.crystal, len(base.temperature)

    def spread(values: Array) -> Array:
        out = np.full(size, np.nan)
        out[np.nonzero(warm)[0][good]] = values[good]
        return out

    a = np.exp(found.x[:, 0]) * crystal.lattice_parameters[0]
    alpha = spread(found.alpha_volume)
    extrapolated = extrapolated_from(base) if kind == "leading order" else float("inf")
    return Anharmonic(
        kind=kind,
        starts_K=starts,
        extrapolated_from_K=extrapolated,
        lattice_A={crystal.axis_names[0]: spread(a)},
        volume_A3=spread(found.volume),
        alpha_linear_per_K=alpha / 3.0,
        alpha_volume_per_K=alpha,
        alpha_relative_error=spread(error),
        gruneisen=spread(found.gruneisen),
        bulk_modulus_T_GPa=spread(found.bulk_modulus),
        heat_capacity_P_J_per_mol_K=spread(found.heat_pressure) * J_PER_MOL_EV / crystal.formula_units,
        notes=(*notes, *_found_notes(base, alpha, extrapolated), _error_note(base, alpha, kind)),
    )


def _solved(base: Quasiharmonic, source: Source, warm: Mask) -> tuple[States, Array, Mask]:
    """Return states, relative error of α and where the solution is a minimum within reach."""
    temperature, start = base.temperature[warm], base.x[warm]
    surface = replace(
        base.surface,
        best=base.surface.best.plus(source.best),
        coarse_mesh=base.surface.coarse_mesh.plus(source.best),
        fewer_volumes=base.surface.fewer_volumes.plus(source.best),
    )
    with np.errstate(all="ignore"):
        solution = convergence.solve(surface, base.load, temperature, start, convergence.MESH_SHARE)
        error = replace(solution.error, supercell=base.supercell_error[warm])
        total = error.total**2
        for companion in source.companions:
            moved = solved_states(base.surface.best.plus(companion), base.load, temperature, solution.states.x)
            total += convergence.relative(moved, solution.states) ** 2
    good = minimum(surface.best, base.load, solution.states, base.surface.box.window)
    return solution.states, np.sqrt(total), good


def solved_states(free_energy: FreeEnergy, load: Load, temperature: Array, start: Array) -> States:
    """Return the states at the minima near ``start`` (nT, 1)."""
    x, values = refine(free_energy.at(temperature), start, load)
    return states(values, x, load, temperature)


def minimum(free_energy: FreeEnergy, load: Load, found: States, window: Array) -> Mask:
    """Return where states are true minima of F + PV inside a window of strains (1, 2)."""
    slope, curvature = load.enthalpic(free_energy.at(found.temperature)(found.x), found.x)
    low, high = window[0]
    inside = (found.x[:, 0] > low - OUTSIDE) & (found.x[:, 0] < high + OUTSIDE)
    flat = np.abs(slope[:, 0]) < 1e-6 * np.abs(curvature[:, 0, 0])
    return np.asarray(inside & flat & (curvature[:, 0, 0] > 0.0))


def extrapolated_from(base: Quasiharmonic) -> float:
    """Return the temperature at which T_eff reaches half of T_end; inf without an end."""
    if not np.isfinite(base.end_K):
        return float("inf")
    limit = TESTED_TO * base.end_K
    good = np.isfinite(base.effective)
    effective, temperature = base.effective[good], base.temperature[good]
    if not len(effective) or limit < effective[0]:
        return 0.0
    if limit > effective[-1]:
        return float(temperature[-1] + limit - effective[-1])
    return float(np.interp(limit, effective, temperature))


def truncation(base: Quasiharmonic) -> Array:
    """Return the relative error of α left by ending the series at the leading order, TRUNCATION · t³ (nT,).

    Past the end of the quasi-harmonic branch, where T_eff is not known, it is taken as T.
    """
    effective = np.where(np.isfinite(base.effective), base.effective, base.temperature)
    return np.asarray(TRUNCATION * (effective / base.end_K) ** 3)


def _error_note(base: Quasiharmonic, alpha: Array, kind: str) -> str:
    """Say what the stated error of α covers."""
    if kind == "sampled":
        return (
            "The error of the sampled α is numerical and statistical. Not in it: the finite cell (0.6 % of α up to "
            "0.8 T_end between 32 and 108 atoms, 64 and 216 ions) and the classical treatment of the correction "
            "(0.25 % from a fifth of the Debye temperature on)."
        )
    shown = np.nonzero(np.isfinite(alpha))[0]
    if not np.isfinite(base.end_K) or not len(shown):
        return (
            "The error of the leading-order α is numerical alone: the end of the quasi-harmonic branch is not "
            "known, and with it the size of what the leading order leaves out."
        )
    last = int(shown[-1])
    return (
        f"The error of the leading-order α holds what higher orders would add, {TRUNCATION} (T_eff/T_end)³ "
        f"({truncation(base)[last]:.2g} of α at {base.temperature[last]:.0f} K), besides the numerical error. It "
        "was taken from simulated argon, sodium chloride, magnesia and copper up to T_eff/T_end = 0.65, where α comes "
        "out too low, and holds for published simulations of six UO₂ potentials up to 0.74; fluorite-type crystals "
        "err either way."
    )


def _found_notes(base: Quasiharmonic, alpha: Array, extrapolated: float) -> tuple[str, ...]:
    """Say where the correction is large and where it is extrapolated."""
    change = alpha / base.alpha - 1.0
    notes = []
    large = np.nonzero(np.abs(change) > NOTABLE)[0]
    if len(large):
        worst = int(large[np.argmax(np.abs(change[large]))])
        notes.append(
            f"Anharmonicity changes α by more than {NOTABLE:.0%} from {base.temperature[large[0]]:.0f} K on "
            f"({change[worst]:+.0%} at {base.temperature[worst]:.0f} K)."
        )
    beyond = np.isfinite(alpha) & (base.temperature > extrapolated)
    if beyond.any():
        notes.append(
            f"Above {extrapolated:.0f} K (T_eff/T_end = {TESTED_TO}) the leading-order correction is "
            "extrapolated: it was tested to 6 % of α below, and falls 20 % short at T_eff/T_end = 0.73."
        )
    return tuple(notes)
