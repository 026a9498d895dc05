"""The static lattice of any crystal: cell and inner coordinates relaxed by Newton steps, exactly."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from thermex.constants import GPA_PER_EV_A3
from thermex.crystal.crystal import Crystal
from thermex.crystal.symmetry import invariant_fields
from thermex.errors import NoMinimumError
from thermex.potential.lattice_sums import VOIGT, Response, lattice_response
from thermex.potential.model import PairModel, Particles

Array = NDArray[np.float64]

#: Longest Newton step in strain and in position (Å).
STRAIN_STEP, POSITION_STEP = 0.03, 0.08


@dataclass(frozen=True, slots=True)
class Configuration:
    """A crystal with the static displacement of its shells."""

    crystal: Crystal
    shell_shift: Array
    """Shape (shells, 3), Å."""

    def particles(self, model: PairModel) -> Particles:
        """Place cores and shells."""
        return model.particles(self.crystal, self.shell_shift)

    def strained(self, x: Array) -> Configuration:
        """Stretch the crystal and the shell displacements with it."""
        stretch = np.ones(3)
        for group, value in zip(self.crystal.axes, x, strict=True):
            stretch[list(group)] = np.exp(value)
        return Configuration(self.crystal.strained(x), self.shell_shift * stretch)


@dataclass(frozen=True, slots=True)
class Freedom:
    """The variables that symmetry leaves free, as vectors over (6 strains, 3m displacements)."""

    strains: Array
    """Shape (d, 6): Voigt strain of each free lattice parameter."""
    cores: Array
    """Shape (k, n, 3): inner displacements of the atoms."""
    shells: Array
    """Shape (s, shells, 3): displacements of shells from their cores."""
    owners: NDArray[np.int64]
    """Shape (shells,): atom of each shell."""

    @property
    def inner(self) -> Array:
        """Shape (k + s, 3m): displacement of every particle for each inner variable."""
        with_shells = np.concatenate([self.cores, self.cores[:, self.owners]], axis=1)
        alone = np.concatenate([np.zeros((len(self.shells), self.cores.shape[1], 3)), self.shells], axis=1)
        return np.concatenate([with_shells, alone]).reshape(
            len(self.cores) + len(self.shells), 3 * (self.cores.shape[1] + len(self.owners))
        )


def freedom_of(model: PairModel, crystal: Crystal) -> Freedom:
    """Find the free lattice parameters, inner coordinates and shell displacements of a crystal."""
    strains = np.zeros((len(crystal.axes), 6))
    for k, group in enumerate(crystal.axes):
        for direction in group:
            strains[k, VOIGT.index((direction, direction))] = 1.0
    polarisable = {kind.symbol for kind in model.kinds if kind.is_shell}
    owners = np.array([i for i, s in enumerate(crystal.symbols) if s in polarisable], dtype=np.int64)
    shells = np.zeros((0, len(owners), 3))
    if len(owners):
        fields = invariant_fields(crystal.lattice, crystal.fractional, crystal.rotations, crystal.translations)
        flat = fields[:, owners].reshape(len(fields), 3 * len(owners))
        if len(flat):
            _, sizes, rows = np.linalg.svd(flat, full_matrices=False)
            shells = rows[sizes > 1e-6].reshape(-1, len(owners), 3)
    return Freedom(strains, crystal.displacements, shells, owners)


@dataclass(frozen=True, slots=True)
class Reduced:
    """Energy and derivatives in the free variables (d strains, then inner ones)."""

    response: Response
    gradient: Array
    hessian: Array
    strains: int


def reduced(model: PairModel, configuration: Configuration, freedom: Freedom) -> Reduced:
    """Evaluate energy, gradient and Hessian in the free variables."""
    response = lattice_response(model, configuration.particles(model))
    inner = freedom.inner
    d = len(freedom.strains)
    basis = np.zeros((d + len(inner), len(response.gradient)))
    basis[:d, :6] = freedom.strains
    basis[d:, 6:] = inner
    return Reduced(response, basis @ response.gradient, basis @ response.hessian @ basis.T, d)


def moved(configuration: Configuration, freedom: Freedom, inner: Array) -> Configuration:
    """Move inner coordinates and shells by amplitudes (k + s,), Å."""
    k = len(freedom.cores)
    crystal = configuration.crystal.displaced(inner[:k])
    shift = configuration.shell_shift + np.tensordot(inner[k:], freedom.shells, axes=(0, 0))
    return Configuration(crystal, shift)


def relax_inner(model: PairModel, start: Configuration, freedom: Freedom) -> tuple[Configuration, Reduced]:
    """Relax the inner coordinates at fixed cell (zero static internal stress)."""
    state = start
    point = reduced(model, state, freedom)
    d = point.strains
    for _ in range(40):
        force = point.gradient[d:]
        if len(force) == 0 or np.abs(force).max() < 1e-9:
            break
        step = _descent(point.hessian[d:, d:], force, np.full(len(force), POSITION_STEP))
        state = moved(state, freedom, step)
        point = reduced(model, state, freedom)
    return state, point


def relax_cell(
    model: PairModel, start: Configuration, freedom: Freedom, pressure_GPa: float, where: str = ""
) -> tuple[Configuration, Reduced]:
    """Relax lattice parameters and inner coordinates under pressure.

    Raises
    ------
    NoMinimumError
        The cell collapses, flies apart or does not settle.
    """
    state, origin = start, start.crystal.volume
    load = pressure_GPa / GPA_PER_EV_A3
    trace = start.crystal.strain_trace
    for _ in range(200):
        point = reduced(model, state, freedom)
        d = point.strains
        work = load * state.crystal.volume
        gradient, hessian = point.gradient.copy(), point.hessian.copy()
        gradient[:d] += work * trace
        hessian[:d, :d] += work * np.outer(trace, trace)
        if not np.isfinite(gradient).all() or not 0.1 < state.crystal.volume / origin < 10.0:
            break
        if np.abs(gradient).max() < 1e-9 * max(1.0, state.crystal.size):
            return state, point
        limits = np.concatenate([np.full(d, STRAIN_STEP), np.full(len(gradient) - d, POSITION_STEP)])
        step = _descent(hessian, gradient, limits)
        state = moved(state.strained(step[:d]), freedom, step[d:])
    raise NoMinimumError(
        f"the static lattice does not settle (volume now {state.crystal.volume / origin:.3f} of the start)",
        where=where,
        fix="check the charges and the repulsive terms, or start nearer to the structure expected",
    )


def _descent(hessian: Array, gradient: Array, limits: Array) -> Array:
    """Return a Newton step made downhill (|eigenvalues|) and no longer than the limits."""
    values, vectors = np.linalg.eigh(hessian)
    floor = 1e-6 * max(float(np.abs(values).max()), 1e-12)
    step = -vectors @ ((vectors.T @ gradient) / np.maximum(np.abs(values), floor))
    return np.asarray(step / max(1.0, float((np.abs(step) / limits).max())))


def strain_derivatives(point: Reduced) -> tuple[float, Array, Array]:
    """Return U, ∂U/∂x (d,) and ∂²U/∂x∂x (d, d) with inner coordinates following the static forces."""
    d = point.strains
    hessian = point.hessian[:d, :d]
    if len(point.gradient) > d:
        coupling = point.hessian[:d, d:]
        hessian = hessian - coupling @ np.linalg.solve(point.hessian[d:, d:], coupling.T)
    return point.response.energy, point.gradient[:d], hessian


def inner_response(point: Reduced) -> Array:
    """Return d(inner variables)/dx at constant static inner forces, shape (k + s, d), Å."""
    d = point.strains
    return np.asarray(-np.linalg.solve(point.hessian[d:, d:], point.hessian[d:, :d]))


def start_configuration(model: PairModel, crystal: Crystal) -> Configuration:
    """Return the crystal with every shell on its core."""
    owners = freedom_of(model, crystal).owners
    return Configuration(replace(crystal), np.zeros((len(owners), 3)))
