"""Wave vectors: graded meshes of the Brillouin zone, reduced by symmetry, and probes of stability."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import numpy as np
from numpy.typing import NDArray

from thermex.crystal.crystal import Crystal

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

#: Below this fraction of 2π/V^{1/3} acoustic frequencies are taken from the long-wave limit ν ∝ |q|.
LONG_WAVE = 5e-3


@dataclass(frozen=True, slots=True)
class Mesh:
    """Points of the Brillouin zone with weights.

    A point too close to Γ for the lattice sums to resolve is moved out along its direction to the
    long-wave radius, and its three acoustic frequencies are scaled back by ``shrink`` (elastic limit).
    """

    divisions: tuple[int, int, int]
    points: Array
    """Shape (nq, 3), in units of the primitive reciprocal vectors."""
    weights: Array
    """Shape (nq,), sum 1."""
    shrink: Array
    """Shape (nq,): factor on the three lowest frequencies, 1 for ordinary points."""


def graded(crystal: Crystal, divisions: tuple[int, int, int], order: int = 1) -> Mesh:
    """Return a half-shifted mesh crowded towards Γ, reduced by the symmetry it keeps.

    Along each primitive reciprocal axis u = (i + ½)/N is mapped ``order`` times by
    u → u − sin(2πu)/2π, with the derivative as weight: a periodic change of variable that removes
    the singularity at Γ, so that the error falls as N⁻⁹ instead of N⁻³. Two maps reach the lowest
    temperatures.
    """
    axes, jacobians = zip(*(_axis(n, order) for n in divisions), strict=True)
    index, weights = _orbits(crystal, divisions)
    points = np.stack([axes[k][index[:, k]] for k in range(3)], axis=1)
    weights = weights * np.prod([jacobians[k][index[:, k]] for k in range(3)], axis=0)
    return _with_long_wave(crystal, divisions, points, weights / weights.sum())


def _axis(n: int, order: int) -> tuple[Array, Array]:
    """Return the mapped points in (−½, ½) and their weights."""
    u = (np.arange(n) + 0.5) / n
    u = np.where(u > 0.5, u - 1.0, u)
    jacobian = np.ones(n)
    for _ in range(order):
        jacobian = jacobian * 2.0 * np.sin(np.pi * u) ** 2
        u = _crowded(u)
    return u, jacobian


def _crowded(u: Array) -> Array:
    """Return u − sin(2πu)/2π without cancellation near 0."""
    x = 2.0 * np.pi * u
    series = x**3 / 6.0 * (1.0 - x**2 / 20.0 * (1.0 - x**2 / 42.0 * (1.0 - x**2 / 72.0)))
    return np.asarray(np.where(np.abs(x) < 0.3, series, x - np.sin(x)) / (2.0 * np.pi))


def _orbits(crystal: Crystal, divisions: tuple[int, int, int]) -> tuple[Ints, Array]:
    """Return one index triple an orbit, and the size of the orbit, under the operations of the mesh."""
    shape = np.array(divisions)
    index = np.stack(np.meshgrid(*[np.arange(n) for n in divisions], indexing="ij"), axis=-1).reshape(-1, 3)
    lowest = np.arange(len(index))
    for operation in mesh_operations(crystal, divisions):
        source = np.argmax(np.abs(operation), axis=1)
        sign = operation[np.arange(3), source]
        image = index[:, source]
        image = np.where(sign > 0, image, shape - 1 - image)
        lowest = np.minimum(lowest, np.ravel_multi_index(tuple(image.T), divisions))
    representatives, counts = np.unique(lowest, return_counts=True)
    return index[representatives], counts.astype(float)


def mesh_operations(crystal: Crystal, divisions: tuple[int, int, int]) -> list[Ints]:
    """Return the point-group operations (time reversal included) that map the graded mesh to itself.

    In reciprocal fractional coordinates they are signed permutations of axes with equal divisions.
    """
    found: dict[bytes, Ints] = {}
    for rotation in crystal.rotations:
        matrix = np.rint(np.linalg.inv(rotation).T).astype(np.int64)
        for candidate in (matrix, -matrix):
            absolute = np.abs(candidate)
            if (absolute.sum(axis=0) != 1).any() or (absolute.sum(axis=1) != 1).any():
                continue
            source = np.argmax(absolute, axis=1)
            if all(divisions[k] == divisions[source[k]] for k in range(3)):
                found[candidate.tobytes()] = candidate
    return list(found.values())


def _with_long_wave(crystal: Crystal, divisions: tuple[int, int, int], points: Array, weights: Array) -> Mesh:
    reciprocal = 2.0 * np.pi * np.linalg.inv(crystal.lattice).T
    norm = np.linalg.norm(points @ reciprocal, axis=1)
    least = LONG_WAVE * 2.0 * np.pi / crystal.volume ** (1.0 / 3.0)
    stretch = np.maximum(least / np.maximum(norm, 1e-300), 1.0)
    return Mesh(divisions, points * stretch[:, None], weights, 1.0 / stretch)


def long_wave_sphere(crystal: Crystal, order: int = 24) -> Mesh:
    """Return directions over half a sphere at the long-wave radius, weights for the mean over the sphere.

    Gauss–Legendre of the given order in cos θ times equal steps in φ; ``shrink`` is 1.
    """
    cosines, weights = np.polynomial.legendre.leggauss(order)
    upper = cosines > 0.0
    cosines, weights = cosines[upper], weights[upper]
    steps = 4 * order // 3
    angles = 2.0 * np.pi * (np.arange(steps) + 0.5) / steps
    sines = np.sqrt(1.0 - cosines**2)
    x = sines[:, None] * np.cos(angles)
    y = sines[:, None] * np.sin(angles)
    z = np.broadcast_to(cosines[:, None], x.shape)
    directions = np.stack([x, y, z], axis=-1).reshape(-1, 3)
    radius = LONG_WAVE / crystal.volume ** (1.0 / 3.0)
    share = np.repeat(weights, len(angles)) / (weights.sum() * len(angles))
    return Mesh((1, 1, 1), directions * radius @ crystal.lattice.T, share, np.ones(len(share)))


def divisions_for(crystal: Crystal, along_shortest: int) -> tuple[int, int, int]:
    """Return even divisions in proportion to the reciprocal lengths, equal for equivalent axes."""
    reciprocal = np.linalg.norm(np.linalg.inv(crystal.lattice), axis=0)
    wanted = along_shortest * reciprocal / reciprocal.max()
    counts = np.maximum(2 * np.ceil(wanted / 2.0 - 1e-6), 4).astype(int)
    return (int(counts[0]), int(counts[1]), int(counts[2]))


def stability_probes(crystal: Crystal) -> Array:
    """Return wave vectors at which soft sheets show, shape (nq, 3), primitive reciprocal units.

    The thirteen ⟨100⟩, ⟨110⟩, ⟨111⟩ directions of the conventional cell at the long-wave radius and
    along the zone, and the corners and face centres of the zone: a half-shifted mesh can miss thin
    sheets of soft shear modes.
    """
    directions = _distinct_directions(crystal)
    conventional = np.linalg.inv(crystal.conventional @ crystal.lattice).T  # rows: reciprocal / 2π
    to_primitive = crystal.lattice.T  # q_fractional = q_cartesian/2π · lattice^T
    cartesian = np.array(directions, dtype=float) @ conventional
    radius = LONG_WAVE / crystal.volume ** (1.0 / 3.0)
    long_wave = cartesian / np.linalg.norm(cartesian, axis=1)[:, None] * radius
    fractions = np.array([0.05, 0.125, 0.25, 0.375, 0.5, 0.625, 0.75, 0.875, 1.0])
    along = (cartesian[:, None, :] * fractions[None, :, None]).reshape(-1, 3)
    corners = np.array([c for c in product((0.0, 0.5), repeat=3) if any(c)])
    points = np.concatenate([np.concatenate([long_wave, along]) @ to_primitive, corners])
    inside = first_zone(crystal.lattice, points)
    away = np.linalg.norm(inside @ np.linalg.inv(crystal.lattice).T, axis=1) > 0.9 * radius
    return np.asarray(points[away])


def _distinct_directions(crystal: Crystal) -> list[tuple[int, int, int]]:
    """Return one of each set of equivalent ⟨100⟩, ⟨110⟩, ⟨111⟩ directions, conventional reciprocal."""
    to_primitive = np.linalg.inv(crystal.conventional).T @ np.eye(3)
    operations = [np.linalg.inv(r).T for r in np.unique(crystal.rotations, axis=0)]
    kept: list[tuple[int, int, int]] = []
    seen: set[tuple[float, ...]] = set()
    for a, b, c in product((-1, 0, 1), repeat=3):
        direction = (a, b, c)
        if direction <= (0, 0, 0):
            continue
        vector = np.array(direction) @ to_primitive
        if tuple(np.round(vector, 6) + 0.0) in seen:
            continue
        kept.append(direction)
        for operation in operations:
            image = operation @ vector
            seen.add(tuple(np.round(image, 6) + 0.0))
            seen.add(tuple(np.round(-image, 6) + 0.0))
    return kept


def first_zone(lattice: Array, q: Array) -> Array:
    """Move wave vectors (nq, 3) to the nearest equivalent ones, within the first Brillouin zone.

    The reciprocal dipole–dipole sum is cut at |G|, so it is exact only there.
    """
    reciprocal = np.linalg.inv(lattice).T
    near = q - np.rint(q)
    shifts = np.stack(np.meshgrid(*[[-1, 0, 1]] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
    candidates = near[:, None, :] + shifts[None]
    lengths = np.linalg.norm(candidates @ reciprocal, axis=2)
    # a tie at the zone boundary goes to the first shift, whatever the rounding
    best = np.argmin(np.round(lengths, 9), axis=1)
    return np.ascontiguousarray(candidates[np.arange(len(q)), best], dtype="double")
