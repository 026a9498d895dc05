"""Chebyshev interpolation of smooth functions over a box of one to three strains."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

Array = NDArray[np.float64]


def nodes(low: float, high: float, count: int) -> Array:
    """Return the Chebyshev points of the first kind in (low, high), ascending."""
    angle = (np.arange(count) + 0.5) * np.pi / count
    return 0.5 * (low + high) - 0.5 * (high - low) * np.cos(angle)


@dataclass(frozen=True, slots=True)
class Box:
    """A box of strains with Chebyshev points along each axis."""

    window: Array
    """Shape (d, 2): low and high end of each axis."""
    counts: tuple[int, ...]
    """Points along each axis."""

    @property
    def grid(self) -> Array:
        """All points, shape (n1·…·nd, d), the last axis fastest."""
        axes = [nodes(low, high, n) for (low, high), n in zip(self.window, self.counts, strict=True)]
        return np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, len(self.counts))

    def coefficients(self, values: Array) -> Array:
        """Return Chebyshev coefficients of values (nT, n1·…·nd), shape (nT, n1, …, nd)."""
        out = values.reshape(len(values), *self.counts)
        for axis, n in enumerate(self.counts):
            angle = (np.arange(n) + 0.5) * np.pi / n
            matrix = 2.0 / n * np.cos(np.arange(n)[:, None] * angle[None, ::-1])
            matrix[0] *= 0.5
            out = np.moveaxis(np.tensordot(matrix, out, axes=(1, axis + 1)), 0, axis + 1)
        return out

    def evaluate(self, coefficients: Array, x: Array) -> tuple[Array, Array, Array]:
        """Return value (nT,), slope (nT, d) and curvature (nT, d, d), one point x (nT, d) a row."""
        d = len(self.counts)
        basis = [self._basis(k, x[:, k]) for k in range(d)]
        value = _contract(coefficients, [b[0] for b in basis])
        slope = np.empty((len(x), d))
        curvature = np.empty((len(x), d, d))
        for k in range(d):
            slope[:, k] = _contract(coefficients, [b[int(j == k)] for j, b in enumerate(basis)])
            for m in range(k, d):
                order = [int(j == k) + int(j == m) for j in range(d)]
                mixed = _contract(coefficients, [b[o] for b, o in zip(basis, order, strict=True)])
                curvature[:, k, m] = curvature[:, m, k] = mixed
        return value, slope, curvature

    def _basis(self, axis: int, x: Array) -> tuple[Array, Array, Array]:
        """Return T_k and its first two derivatives in x, shape (nT, n) each."""
        low, high = self.window[axis]
        factor = 2.0 / (high - low)
        scaled = factor * (x - 0.5 * (low + high))
        n = self.counts[axis]
        identity = np.eye(n)
        first = chebyshev.chebder(identity, axis=0) if n > 1 else np.zeros((1, n))
        second = chebyshev.chebder(identity, 2, axis=0) if n > 2 else np.zeros((1, n))
        return (
            chebyshev.chebvander(scaled, n - 1),
            factor * chebyshev.chebvander(scaled, max(len(first) - 1, 0)) @ first,
            factor**2 * chebyshev.chebvander(scaled, max(len(second) - 1, 0)) @ second,
        )


def _contract(coefficients: Array, factors: list[Array]) -> Array:
    """Contract (nT, n1, …, nd) with one vector (nT, nk) along each axis."""
    out = coefficients
    for factor in reversed(factors):
        out = np.einsum("t...k,tk->t...", out, factor)
    return out


def without_highest(coefficients: Array) -> Array:
    """Return coefficients without the two highest orders along every axis (one where there are few)."""
    out = coefficients.copy()
    for axis in range(1, out.ndim):
        index = [slice(None)] * out.ndim
        index[axis] = slice(-2 if out.shape[axis] >= 7 else -1, None)
        out[tuple(index)] = 0.0
    return out
