"""Force constants of the pair model: at any wave vector directly, and folded into a supercell."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from thermex.potential import ewald
from thermex.potential.lattice_sums import RadialBonds, pair_matrices, radial_bonds
from thermex.potential.model import PairModel, Particles

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

#: The six products k_a k_b, and where each stands in the square matrix.
_PRODUCTS = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))
_SQUARE = np.array([[0, 5, 4], [5, 1, 3], [4, 3, 2]])

#: Largest number of phases e^{iG·(r_i − r_j)} held at a time.
MOST_PHASES = 500_000


def force_constants_at(model: PairModel, particles: Particles, q: Array) -> Complex:
    """Return Φ_ij(q) = Σ_R Φ_ij(0, R) e^{iq·(R + r_j − r_i)} by direct and Ewald sums.

    Parameters
    ----------
    q
        Shape (nq, 3), in units of the primitive reciprocal vectors.

    Returns
    -------
    Shape (nq, 3m, 3m), eV/Å², not divided by masses. At q = 0 the macroscopic field is left out
    (transverse limit).
    """
    radial = radial_bonds(model, particles)
    wave = 2.0 * np.pi * np.atleast_2d(q) @ np.linalg.inv(particles.lattice).T
    out = _direct(radial, particles.size, wave)
    eta = ewald.split_parameter(particles.volume, particles.size)
    m = particles.size
    everywhere = np.concatenate([np.zeros((1, 3)), wave])
    for n, coupling in model.powers().items():
        found = _reciprocal(n, coupling[np.ix_(particles.kind, particles.kind)], eta, particles, everywhere)
        out += found[1:]
        own = found[0].reshape(m, 3, m, 3).sum(axis=2).real
        for i in range(m):
            out[:, 3 * i : 3 * i + 3, 3 * i : 3 * i + 3] -= own[i]
    return out


def _direct(radial: RadialBonds, m: int, wave: Array) -> Complex:
    """Sum −Φ_b e^{iq·x} over the bonds i→j, and the self term by the acoustic sum rule."""
    matrices = pair_matrices(radial).reshape(-1, 9)
    flat = radial.bonds.first * m + radial.bonds.second
    order = np.argsort(flat, kind="stable")
    edges = np.searchsorted(flat[order], np.arange(m * m + 1))
    phases = np.exp(1j * (wave @ radial.bonds.vector[order].T))
    sorted_matrices = matrices[order]
    out = np.zeros((len(wave), m * m, 9), dtype=complex)
    rest = np.zeros((m, 9))
    for pair in range(m * m):
        part = slice(edges[pair], edges[pair + 1])
        if part.stop > part.start:
            out[:, pair] = -phases[:, part] @ sorted_matrices[part]
            rest[pair // m] += sorted_matrices[part].sum(axis=0)
    for i in range(m):
        out[:, i * m + i] += rest[i]
    blocks = out.reshape(-1, m, m, 3, 3).transpose(0, 1, 3, 2, 4)
    return np.ascontiguousarray(blocks).reshape(-1, 3 * m, 3 * m)


def _reciprocal(n: float, c: Array, eta: float, particles: Particles, wave: Array) -> Complex:
    """Reciprocal part of one power without its self term, shape (nq, 3m, 3m).

    The sum over R of e^{iq·(R + r_j − r_i)} leaves Σ_G g(|q + G|) (q + G)(q + G)ᵀ e^{iG·(r_i − r_j)}, whose
    phases serve every q at once.
    """
    vectors = ewald.reciprocal_vectors(particles.lattice, eta, float(np.linalg.norm(wave, axis=1).max()))
    first, second = np.triu_indices(particles.size)
    out = np.zeros((len(wave) * len(_PRODUCTS), len(first)), dtype=complex)
    for part in np.array_split(vectors, 1 + len(vectors) * len(first) // MOST_PHASES):
        weights = _weighted_products(n, eta, wave[:, None, :] + part) / particles.volume
        single = np.exp(1j * part @ particles.positions.T)
        out += weights @ (single[:, first] * single[:, second].conj())
    blocks = (out * c[first, second]).reshape(len(wave), len(_PRODUCTS), len(first))[:, _SQUARE]
    whole = np.empty((len(wave), particles.size, 3, particles.size, 3), dtype=complex)
    # advanced indices come first: (pairs, nq, 3, 3)
    whole[:, second, :, first] = blocks.conj().transpose(3, 0, 1, 2)
    whole[:, first, :, second] = blocks.transpose(3, 0, 1, 2)
    return whole.reshape(len(wave), 3 * particles.size, 3 * particles.size)


def _weighted_products(n: float, eta: float, k: Array) -> Array:
    """Return g(|k|) k_a k_b for the six a ≤ b, shape (nq·6, nG), of k (nq, nG, 3); 0 at k = 0 and far out."""
    squared = np.einsum("qga,qga->qg", k, k)
    near = (squared > 1e-24) & (squared < (2.0 * ewald.SPAN * eta) ** 2)
    g = np.zeros_like(squared)
    g[near] = ewald.kernel_value(n, eta, squared[near])
    products = np.stack([g * k[..., a] * k[..., b] for a, b in _PRODUCTS], axis=1)
    return np.asarray(products.reshape(-1, k.shape[1]))


def direct_force_constants(radial: RadialBonds, size: int, wave: Array) -> Complex:
    """Return Φ(q) of bonds alone, shape (nq, 3m, 3m); ``wave`` (nq, 3) in 1/Å."""
    return _direct(radial, size, wave)


def folded_bonds(radial: RadialBonds, size: int, repeat: tuple[int, int, int]) -> Array:
    """Fold the force constants of bonds into a supercell: exact for terms that end inside it.

    Returns
    -------
    Shape (m, m, n1, n2, n3, 3, 3), like :func:`supercell_force_constants`.
    """
    matrices = pair_matrices(radial).reshape(-1, 9)
    cell = radial.bonds.cell % np.array(repeat)
    shape = (size, size, *repeat)
    flat = np.ravel_multi_index((radial.bonds.first, radial.bonds.second, *cell.T), shape)
    total = int(np.prod(shape))
    out = np.stack([np.bincount(flat, -matrices[:, k], minlength=total) for k in range(9)], axis=-1)
    out = out.reshape(*shape, 9)
    own = np.stack([np.bincount(radial.bonds.first, matrices[:, k], minlength=size) for k in range(9)], axis=-1)
    for i in range(size):
        out[i, i, 0, 0, 0] += own[i]
    return np.ascontiguousarray(out.reshape(*shape, 3, 3))


def commensurate_points(repeat: tuple[int, int, int]) -> Array:
    """Return the wave vectors that a supercell of ``repeat`` primitive cells holds, shape (N, 3)."""
    axes = [np.arange(n) / n for n in repeat]
    return np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3)


def supercell_force_constants(model: PairModel, particles: Particles, repeat: tuple[int, int, int]) -> Array:
    """Return the force constants of a periodic supercell, all lattice sums complete.

    Found from Φ(q) at the commensurate wave vectors by a Fourier transform, which is exact.

    Returns
    -------
    Shape (m, m, n1, n2, n3, 3, 3), eV/Å²: particle i of the home cell with particle j of cell
    (l1, l2, l3).
    """
    q = commensurate_points(repeat)
    q -= np.rint(q)
    m = particles.size
    half, mirror = _half(repeat)
    values = force_constants_at(model, particles, q[half])
    # take the phases of the positions off: Φ(q) e^{−iq·(r_j − r_i)} is periodic in q
    fractional = particles.positions @ np.linalg.inv(particles.lattice)
    phase = np.exp(2j * np.pi * q[half] @ fractional.T)
    blocks = values.reshape(-1, m, 3, m, 3).transpose(0, 1, 3, 2, 4)
    periodic = np.empty((len(q), m, m, 3, 3), dtype=complex)
    periodic[half] = blocks * (phase[:, :, None] * phase.conj()[:, None, :])[..., None, None]
    rest = mirror >= 0
    periodic[rest] = periodic[mirror[rest]].conj()
    grid = periodic.reshape(*repeat, m, m, 3, 3)
    folded = np.fft.fftn(grid, axes=(0, 1, 2)).real / len(q)
    return np.ascontiguousarray(folded.transpose(3, 4, 0, 1, 2, 5, 6))


def _half(repeat: tuple[int, int, int]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the indices computed and, for the others, the index of −q (else −1)."""
    shape = np.array(repeat)
    index = np.stack(np.meshgrid(*[np.arange(n) for n in repeat], indexing="ij"), axis=-1).reshape(-1, 3)
    opposite = np.ravel_multi_index(tuple(((-index) % shape).T), repeat)
    own = np.arange(len(index))
    mirror = np.where(opposite < own, opposite, -1)
    return own[mirror < 0], mirror
