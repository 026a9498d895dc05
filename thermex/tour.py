"""The branch of a crystal with free axes or inner coordinates: few, well-chosen cells.

F is interpolated over a box of strains that just holds the path of thermal expansion. A coarse box is
moved and stretched until the path lies inside; then the phonons are computed on a fine mesh at the
points of the final box.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from thermex import convergence, phonons
from thermex.branch import IMAGINARY, refuse_unstable
from thermex.chebyshev import Box
from thermex.convergence import Solution
from thermex.crystal.crystal import Crystal
from thermex.equilibrium import Load, refine
from thermex.errors import BranchEndError, UnstableCrystalError
from thermex.free_energy import FreeEnergy, Vibrations
from thermex.lattice import BoxLattice
from thermex.mesh import divisions_for, graded, stability_probes
from thermex.road import Progress, Travelled

Array = NDArray[np.float64]

#: Points along each axis of the coarse and of the final box, by number of free axes.
COARSE_POINTS = {1: 5, 2: 3, 3: 3}
FINAL_POINTS = {1: 7, 2: 5, 3: 4}

#: The same where an error of a few tenths of a percent in α is allowed.
LEAN_POINTS = {1: 5, 2: 4, 3: 3}

#: First guess of the box: from a little below the static lattice to this expansion.
FIRST_WINDOW = (-0.004, 0.012)

#: Farther than this (ln of an axis) from the static lattice the branch is not followed.
FARTHEST = 0.12


@dataclass(frozen=True, slots=True)
class Path:
    """The path of thermal expansion on one surface."""

    temperature: Array
    """Shape (ns,), the temperatures at which a minimum was found."""
    x: Array
    """Shape (ns, d)."""
    lost: bool
    """Whether the minimum was lost before the highest temperature."""


def follow(surface: FreeEnergy, load: Load, temperature: Array, start: Array) -> Path:
    """Follow the minimum from the lowest temperature upward, each from the one before."""
    found: list[Array] = []
    x = start[None, :]
    for kelvin in temperature:
        evaluate = surface.at(np.array([kelvin]))
        guess = x if len(found) < 2 else x + np.clip(found[-1] - found[-2], -0.004, 0.004)[None, :]
        trial, values = refine(evaluate, guess, load, 30)
        slope, curvature = load.enthalpic(values, trial)
        settled = np.isfinite(trial).all() and np.abs(slope).max() < 1e-7 * np.abs(curvature).max()
        if not settled or np.linalg.eigvalsh(curvature[0])[0] <= 0.0 or np.abs(trial - x).max() > 0.02:
            return Path(temperature[: len(found)], np.array(found).reshape(-1, len(start)), True)
        x = trial
        found.append(x[0])
    return Path(temperature, np.array(found), False)


def tour(lattice: BoxLattice, load: Load, temperature: Array, accuracy: float, progress: Progress) -> Travelled:
    """Find states at the temperatures asked for, converged to the accuracy asked for.

    Raises
    ------
    UnstableCrystalError
        Phonons are imaginary at the static lattice.
    BranchEndError
        No temperature lies on the branch.
    """
    d = len(load.trace)
    probes = stability_probes(lattice.crystal)
    refuse_unstable(probes, phonons.frequencies(lattice.motion(probes)(np.zeros(d))), "at the static lattice")
    progress("search for the path", 0, 3)
    _box, path, reason = _search(lattice, load, float(temperature.max()))
    if not len(path.temperature):
        raise BranchEndError("no minimum of the free energy even at 0 K", where="free energy")
    end = float(path.temperature[-1])
    lost = path.lost or bool(reason)
    valid = temperature <= (end if lost else np.inf)
    wanted = temperature[valid]
    progress("phonons", 1, 3)
    window = _tight(path.x[path.temperature <= max(float(wanted.max()), path.temperature[0])])
    points = LEAN_POINTS[d] if accuracy > 2e-3 else FINAL_POINTS[d]
    points = 4 if lattice.crystal.size > LARGE else points
    solution = _final(lattice, Box(window, (points,) * d), load, wanted, path, accuracy)
    progress("supercell", 2, 3)
    excess = convergence.supercell_error(lattice, solution, load, 4, 2)
    solution = replace(solution, error=replace(solution.error, supercell=excess))
    progress("supercell", 3, 3)
    return Travelled(
        lattice=lattice,
        load=load,
        solution=solution,
        valid=valid,
        end_K=end,
        end_x=path.x[-1],
        ends=lost,
        reason=reason
        or (
            "the minimum of the free energy disappears"
            if lost
            else f"the branch was followed to {end:.0f} K and goes on"
        ),
        supercells=lattice.supercells,
    )


#: Cells with more atoms than this are treated with fewer points and coarser meshes.
LARGE = 40


def _search(lattice: BoxLattice, load: Load, highest: float) -> tuple[Box, Path, str]:
    """Move and stretch a coarse box until the path lies inside it."""
    d = len(load.trace)
    window = np.tile(np.array(FIRST_WINDOW), (d, 1))
    grid = np.concatenate([[0.0], np.linspace(0.05, 1.1, 22) * highest])
    divisions = divisions_for(lattice.crystal, 4)
    stop = ""
    points = 3 if lattice.crystal.size > LARGE else COARSE_POINTS[d]
    box, path = Box(window, (points,) * d), Path(np.zeros(0), np.zeros((0, d)), True)
    for _ in range(7):
        box = Box(window, (points,) * d)
        mesh = graded(lattice.crystal, divisions)
        found = convergence.frequencies_over(lattice.motion(mesh.points), box, mesh)
        if found.min() < 0.0:
            middle = window.mean(axis=1)
            window = np.column_stack([window[:, 0], middle + 0.2 * (window[:, 1] - middle)])
            stop = IMAGINARY
            continue
        surface = FreeEnergy((lattice.static_over(box), Vibrations(box, found, mesh.weights)))
        path = follow(surface, load, grid, np.zeros(d))
        inside = _inside(path.x, window, 0.15)
        if stop:
            keep = _inside(path.x, window, 0.1)
            lost = not keep.all()
            return box, Path(path.temperature[keep], path.x[keep], lost or path.lost), stop if lost else ""
        if inside.all() and len(path.x):
            return box, path, ""
        window = _stretched(path.x, window)
        if np.abs(window).max() > FARTHEST:
            keep = _inside(path.x, box.window, 0.3)
            return (
                box,
                Path(path.temperature[keep], path.x[keep], True),
                "the crystal leaves the range examined",
            )
    keep = _inside(path.x, box.window, 0.3)
    return box, Path(path.temperature[keep], path.x[keep], True), "the path could not be followed further"


def _inside(x: Array, window: Array, slack: float) -> NDArray[np.bool_]:
    """Return which points lie in the window, stretched by a share of its width."""
    margin = slack * (window[:, 1] - window[:, 0])
    return np.asarray(((x >= window[:, 0] - margin) & (x <= window[:, 1] + margin)).all(axis=1))


def _stretched(x: Array, window: Array) -> Array:
    """Return a window that holds the path, no more than two and a half times as wide as before."""
    width = window[:, 1] - window[:, 0]
    low = np.maximum(x.min(axis=0), window[:, 0] - width) if len(x) else window[:, 0] - 0.5 * width
    high = np.minimum(x.max(axis=0), window[:, 1] + 1.5 * width) if len(x) else window[:, 1] + 0.5 * width
    margin = 0.08 * (high - low) + 5e-4
    return np.column_stack([low - margin, high + margin])


def _tight(x: Array) -> Array:
    """Return a window just around the path, at least 0.003 wide."""
    low, high = x.min(axis=0), x.max(axis=0)
    margin = 0.06 * (high - low) + np.maximum(5e-4, 0.5 * (0.003 - (high - low)))
    return np.column_stack([low - margin, high + margin])


def meshes_for(crystal: Crystal, accuracy: float) -> tuple[int, ...]:
    """Return the meshes tried one after the other: coarser for large cells, whose zone is small."""
    if crystal.size > LARGE:
        return (4, 6)
    if crystal.size > 12:
        return (6, 8)
    return (10, 12, 16) if accuracy > 2e-3 else (12, 16)


def _final(lattice: BoxLattice, box: Box, load: Load, wanted: Array, path: Path, accuracy: float) -> Solution:
    """Compute phonons at the points of the final box, refining the mesh to the accuracy asked for."""
    d = len(load.trace)
    start = np.column_stack([np.interp(wanted, path.temperature, path.x[:, k]) for k in range(d)])
    judged = wanted >= min(100.0, 0.5 * float(wanted.max()))
    if lattice.supercells.short and path.lost:
        judged &= wanted < 0.95 * path.temperature[-1]
    meshes = meshes_for(lattice.crystal, accuracy)
    for divisions in meshes:
        surface = convergence.build(lattice, box, divisions_for(lattice.crystal, divisions), 1)
        solution = convergence.solve(surface, load, wanted, start, convergence.MESH_SHARE)
        if not judged.any() or solution.error.mesh[judged].max() < 0.5 * accuracy:
            break
    if not np.isfinite(solution.states.alpha_volume).all():
        raise UnstableCrystalError("the free energy has no minimum on the fine mesh", where="free energy")
    return solution
