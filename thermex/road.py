"""From a lattice with one free strain to states along its branch, converged to the accuracy asked."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from thermex import convergence
from thermex.branch import IMAGINARY, Branch, refine_end, survey
from thermex.chebyshev import Box
from thermex.convergence import Solution
from thermex.equilibrium import Load
from thermex.errors import BranchEndError
from thermex.free_energy import FreeEnergy
from thermex.lattice import Lattice, Supercells
from thermex.mesh import divisions_for

Array = NDArray[np.float64]

#: Told the stage, the steps done and the steps in all.
Progress = Callable[[str, int, int], None]

#: Meshes (divisions along the shortest axis) tried one after the other.
MESHES = (16, 24, 32)

#: Volumes tried one after the other.
VOLUMES = (9, 13, 17, 21)

#: Meshes (divisions, order of grading) for temperatures at which only long waves are excited.
COLD_MESHES = ((24, 1), (24, 2))

#: Supercells tried one after the other, each 1.4 times as long.
ATTEMPTS = 3

#: Temperatures tried between the last one with a minimum and the first one without.
PROBES = 8

#: Errors are judged only below this fraction of the branch end, where α runs away by nature.
JUDGED = 0.95


@dataclass(frozen=True, slots=True)
class Travelled:
    """The converged branch of one lattice."""

    lattice: Lattice
    load: Load
    solution: Solution
    """States at the valid temperatures."""
    valid: NDArray[np.bool_]
    """Shape (nT,): which of the temperatures asked for lie on the branch."""
    end_K: float
    end_x: Array
    """Shape (d,)."""
    ends: bool
    reason: str
    supercells: Supercells | None


def travel(
    make: Callable[[float], Lattice],
    load: Load,
    temperature: Array,
    accuracy: float,
    progress: Progress,
) -> Travelled:
    """Follow the branch of a crystal with one free strain at the temperatures asked for.

    Parameters
    ----------
    make
        Builds the lattice with supercells of a given span (in mean distances).
    accuracy
        Relative numerical error of α aimed at for T ≥ 100 K.

    Raises
    ------
    BranchEndError
        No temperature lies on the branch.
    """
    span = 4.6
    lattice = make(span)
    progress("survey of the branch", 0, 4)
    branch = survey(lattice, load, float(temperature.max()))
    progress("end of the branch", 1, 4)
    branch = _with_fine_end(branch, lattice, load)
    wanted = _on_branch(temperature, branch)
    for attempt in range(ATTEMPTS):
        progress("phonons", 2, 4)
        branch, solution = _settled(lattice, branch, load, wanted, accuracy)
        wanted = solution.states.temperature
        progress("supercell", 3, 4)
        excess = convergence.supercell_error(lattice, solution, load, 6, 3)
        solution = replace(solution, error=replace(solution.error, supercell=excess))
        limit = np.where(_judged(wanted, branch), 0.5 * accuracy, 0.7 * accuracy)
        coldest = convergence.highest_phonon_K(solution.surface.frequencies) / 100.0
        exempt = (branch.ends & (wanted > JUDGED * branch.end_K)) | (wanted < coldest)
        if attempt == ATTEMPTS - 1 or (exempt | (excess <= limit)).all():
            break
        span *= 1.4
        lattice = make(span)
    progress("supercell", 4, 4)
    supercells = getattr(lattice, "supercells", None)
    return Travelled(
        lattice,
        load,
        solution,
        temperature <= float(wanted[-1]),
        branch.end_K,
        np.array([branch.end_x]),
        branch.ends,
        branch.reason,
        supercells,
    )


def _on_branch(temperature: Array, branch: Branch) -> Array:
    """Return the temperatures that lie on the branch.

    Raises
    ------
    BranchEndError
        None does.
    """
    valid = temperature <= (branch.end_K if branch.ends else np.inf)
    if not valid.any():
        raise BranchEndError(
            f"every temperature asked for lies past the end of the branch at {branch.end_K:.0f} K",
            where="conditions.temperature",
            fix=f"ask below {branch.end_K:.0f} K ({branch.reason})",
        )
    return temperature[valid]


def _settled(lattice: Lattice, branch: Branch, load: Load, wanted: Array, accuracy: float) -> tuple[Branch, Solution]:
    """Solve, and end the branch earlier where the finer surface has no minimum at the highest temperatures.

    The end is found on a coarser mesh, which can be wrong by some kelvins where modes go soft.
    """
    while True:
        solution = _solve(lattice, branch, load, wanted, accuracy)
        if (solution.surface.lowest <= 0.0).any():
            branch = _before_soft(branch, solution)
            wanted = _on_branch(wanted, branch)
            continue
        good = minima(solution)
        if good.all():
            return branch, solution
        last = int(np.argmin(good))
        if not last:
            raise BranchEndError("no minimum of the free energy even at the lowest temperature", where="free energy")
        between = np.linspace(wanted[last - 1], wanted[last], PROBES + 2)[1:-1]
        trial = np.concatenate([wanted[:last], between])
        probed = _solve(lattice, _shortened(branch, float(trial[-1])), load, trial, accuracy)
        sound = minima(probed)
        end = trial[-1] if sound.all() else trial[max(int(np.argmin(sound)) - 1, 0)]
        branch, wanted = _shortened(branch, float(end)), wanted[wanted <= end]


def _before_soft(branch: Branch, solution: Solution) -> Branch:
    """End a branch at the last cell whose phonons are all real on the finer mesh.

    Raises
    ------
    BranchEndError
        There is none.
    """
    cells = solution.surface.box.grid[:, 0]
    soft = int(np.argmax(solution.surface.lowest <= 0.0))
    x = float(cells[max(soft - 1, 0)])
    if soft == 0 or x <= branch.x[0]:
        raise BranchEndError("phonons turn imaginary before the zero-point state", where="free energy")
    kelvin = float(np.interp(x, branch.x, branch.temperature))
    short = _shortened(branch, kelvin)
    return replace(short, reason=IMAGINARY, first_imaginary=float(cells[soft]))


def _shortened(branch: Branch, kelvin: float) -> Branch:
    """End a branch at a lower temperature."""
    x = float(branch.strain_at(np.array([kelvin]))[0])
    keep = (branch.temperature < kelvin) & (branch.x < x)
    xs, ts = np.append(branch.x[keep], x), np.append(branch.temperature[keep], kelvin)
    return replace(branch, x=xs, temperature=ts, ends=True, end_x=x, end_K=kelvin)


def minima(solution: Solution) -> NDArray[np.bool_]:
    """Return which states are minima of F + PV (B_T > 0) inside the window, shape (nT,)."""
    states = solution.states
    low, high = solution.surface.box.window[0]
    margin = 0.1 * (high - low)
    inside = (states.x[:, 0] > low - margin) & (states.x[:, 0] < high + margin)
    return np.asarray(inside & (states.bulk_modulus > 0.0) & (states.heat_pressure >= 0.0))


def _judged(temperature: Array, branch: Branch) -> NDArray[np.bool_]:
    """Return where the accuracy asked for is to be met."""
    end = branch.end_K if branch.ends else np.inf
    warm = temperature >= min(100.0, 0.5 * float(temperature.max()))
    return np.asarray(warm & (temperature < JUDGED * end))


def _with_fine_end(branch: Branch, lattice: Lattice, load: Load) -> Branch:
    """Refine the end of the branch on a better mesh over a narrow window."""
    if not branch.ends:
        return branch
    divisions = divisions_for(lattice.crystal, 12)

    def surface_on(low: float, high: float) -> FreeEnergy:
        return convergence.build_plain(lattice, Box(np.array([[low, high]]), (9,)), divisions)

    x, kelvin = refine_end(branch, load, surface_on)
    keep = (branch.x < x) & (branch.temperature < kelvin)
    xs, ts = np.append(branch.x[keep], x), np.append(branch.temperature[keep], kelvin)
    return replace(branch, x=xs, temperature=ts, end_x=x, end_K=kelvin)


def _window(branch: Branch, highest: float) -> Array:
    """Return the window of x, shape (1, 2), from below the zero-point state to past the highest T."""
    low = float(branch.x[0])
    high = float(branch.strain_at(np.array([highest]))[0])
    margin = 0.06 * (high - low) + 5e-4
    return np.array([[low - margin, min(high + margin, branch.first_imaginary - 1e-6)]])


def _solve(lattice: Lattice, branch: Branch, load: Load, wanted: Array, accuracy: float) -> Solution:
    """Refine mesh and volumes until the stated error meets the accuracy asked for."""
    window = _window(branch, float(wanted.max()))
    start = branch.strain_at(wanted)[:, None]
    judged = _judged(wanted, branch)
    mesh, volumes = 0, 0
    while True:
        box = Box(window, (VOLUMES[volumes],))
        surface = convergence.build(lattice, box, divisions_for(lattice.crystal, MESHES[mesh]), 1)
        solution = convergence.solve(surface, load, wanted, start, _mesh_share(branch))
        error = solution.error
        finer_mesh = judged.any() and error.mesh[judged].max() > 0.5 * accuracy and mesh + 1 < len(MESHES)
        more_volumes = judged.any() and error.volumes[judged].max() > 0.5 * accuracy and volumes + 1 < len(VOLUMES)
        if not (finer_mesh or more_volumes):
            break
        mesh, volumes = mesh + int(finer_mesh), volumes + int(more_volumes)
    far = wanted < JUDGED * (branch.end_K if branch.ends else np.inf)
    return _with_cold(lattice, solution, load, wanted, accuracy, far)


def _mesh_share(branch: Branch) -> float:
    soft = np.isfinite(branch.first_imaginary) and branch.end_x > branch.first_imaginary - 2e-3
    return convergence.SOFT_SHARE if soft else convergence.MESH_SHARE


def _with_cold(
    lattice: Lattice, solution: Solution, load: Load, wanted: Array, accuracy: float, far: NDArray[np.bool_]
) -> Solution:
    """Replace cold temperatures whose error exceeds the accuracy by solutions on finer meshes.

    Next to the end of the branch (where ``far`` is False) the error grows by nature and no mesh helps.
    First a finer graded mesh, then meshes graded twice, on which α ∝ T³ holds down to T → 0.
    """
    for divisions, order in COLD_MESHES:
        poor = (wanted > 0.0) & far & (solution.error.mesh > accuracy)
        if not poor.any():
            break
        highest = float(solution.states.x[poor, 0].max())
        window = solution.surface.box.window.copy()
        window[0, 1] = min(window[0, 1], max(highest + 1e-3, window[0, 0] + 3e-3))
        box = Box(window, (7,))
        surface = convergence.build(lattice, box, divisions_for(lattice.crystal, divisions), order)
        start = np.minimum(solution.states.x, highest)
        again = convergence.solve(surface, load, wanted, start, convergence.MESH_SHARE)
        solution = convergence.joined(solution, again, poor & (again.error.total < solution.error.total))
    return solution
