"""Energy of a lattice and its derivatives to strain and displacement, exact, per primitive cell."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.potential import ewald
from thermex.potential.bonds import Bonds, find_bonds
from thermex.potential.model import PairModel, Particles
from thermex.potential.terms import Term, sum_of

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

#: Voigt order of the six strains: xx, yy, zz, yz, xz, xy (engineering shear).
VOIGT = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))

#: Symmetric 3×3 matrix of each Voigt strain of unit size, shape (6, 3, 3).
STRAINS = np.zeros((6, 3, 3))
for _k, (_a, _b) in enumerate(VOIGT):
    STRAINS[_k, _a, _b] += 0.5
    STRAINS[_k, _b, _a] += 0.5

_PAIR_A, _PAIR_B = (np.array([pair[k] for pair in VOIGT]) for k in (0, 1))

#: Where the Voigt product stands in the square matrix.
_SQUARE = np.array([[0, 5, 4], [5, 1, 3], [4, 3, 2]])

#: The ten products x_a x_b x_c as (Voigt product, c), and where each of the 6×3 stands among them.
_TRIPLES = sorted({tuple(sorted((*pair, c))) for pair in VOIGT for c in range(3)})
_CUBIC = np.array([(_SQUARE[a, b], c) for a, b, c in _TRIPLES]).T
_CUBE = np.array([[_TRIPLES.index(tuple(sorted((*pair, c)))) for c in range(3)] for pair in VOIGT])


@dataclass(frozen=True, slots=True)
class Response:
    """Energy of a cell and its first and second derivatives.

    The variables are the six Voigt strains ε (the deformation gradient is exp ε) followed by the
    3m Cartesian displacements of the particles, in the cell as it is.
    """

    energy: float
    """eV."""
    gradient: Array
    """Shape (6 + 3m,): eV and eV/Å."""
    hessian: Array
    """Shape (6 + 3m, 6 + 3m)."""


@dataclass(frozen=True, slots=True)
class RadialBonds:
    """Bonds with the radial derivatives of all that acts along them."""

    bonds: Bonds
    energy: Array
    """Shape (nb,): φ."""
    tension: Array
    """Shape (nb,): φ′/r, eV/Å²."""
    curvature: Array
    """Shape (nb,): (φ″ − φ′/r)/r², eV/Å⁴, so that Φ = curvature x xᵀ + tension I."""


@dataclass(frozen=True, slots=True)
class BondTable:
    """The directly summed pairs of a cell and the terms that act along them."""

    bonds: Bonds
    groups: tuple[tuple[NDArray[np.int64], tuple[Term, ...]], ...]
    """(indices of bonds, terms)."""
    own: RadialBonds
    """Core–own shell pairs."""


def bond_table(model: PairModel, particles: Particles) -> BondTable:
    """List the directly summed pairs: short-ranged terms and the real parts of all powers."""
    eta = ewald.split_parameter(particles.volume, particles.size)
    bonds = find_bonds(particles.lattice, particles.positions, direct_range(model, particles))
    bonds = _without(bonds, list(model.excluded_pairs(particles)))
    groups = tuple(_groups(model, particles, bonds, bonds.length, eta))
    return BondTable(bonds, groups, _own_shell_bonds(model, particles, eta))


def radial_of(table: BondTable, scale: float = 1.0) -> RadialBonds:
    """Evaluate the terms along the bonds of a table, all bonds stretched by ``scale``."""
    bonds = table.bonds
    if scale != 1.0:
        bonds = Bonds(bonds.first, bonds.second, bonds.cell, bonds.vector * scale)
    length = bonds.length
    radial = np.zeros((3, len(length)))
    for chosen, terms in table.groups:
        radial[:, chosen] += sum_of(terms, length[chosen], 2)
    tension = radial[1] / length
    direct = RadialBonds(bonds, radial[0], tension, (radial[2] - tension) / length**2)
    return _joined(direct, table.own)


def radial_bonds(model: PairModel, particles: Particles) -> RadialBonds:
    """Collect the directly summed pairs with their radial derivatives."""
    return radial_of(bond_table(model, particles))


def _own_shell_bonds(model: PairModel, particles: Particles, eta: float) -> RadialBonds:
    """Bonds core–own shell: the spring, less what the reciprocal sums hold of the pair.

    Finite where core and shell coincide.
    """
    pairs = list(model.excluded_pairs(particles))
    both = np.array([*pairs, *((b, a) for a, b in pairs)], dtype=int).reshape(-1, 2)
    vector = particles.positions[both[:, 1]] - particles.positions[both[:, 0]]
    bonds = Bonds(both[:, 0], both[:, 1], np.zeros((len(both), 3), dtype=int), vector)
    squared = np.einsum("bk,bk->b", vector, vector)
    shell_kind = np.maximum(particles.kind[both[:, 0]], particles.kind[both[:, 1]])
    springs = {s.shell: s for s in model.springs}
    k2 = np.array([springs[int(k)].constant if int(k) in springs else 0.0 for k in shell_kind])
    k4 = np.array([springs[int(k)].quartic if int(k) in springs else 0.0 for k in shell_kind])
    out = np.array([0.5 * k2 * squared + k4 * squared**2 / 24.0, k2 + k4 * squared / 6.0, k4 / 3.0])
    for n, coupling in model.powers().items():
        c = coupling[particles.kind[both[:, 0]], particles.kind[both[:, 1]]]
        out -= c * np.array(ewald.smooth_part(n, eta, np.sqrt(squared)))
    return RadialBonds(bonds, out[0], out[1], out[2])


def _joined(one: RadialBonds, two: RadialBonds) -> RadialBonds:
    """Put two lists of bonds together."""
    names = ("first", "second", "cell", "vector")
    bonds = Bonds(*(np.concatenate([getattr(one.bonds, k), getattr(two.bonds, k)]) for k in names))
    return RadialBonds(
        bonds,
        np.concatenate([one.energy, two.energy]),
        np.concatenate([one.tension, two.tension]),
        np.concatenate([one.curvature, two.curvature]),
    )


def direct_range(model: PairModel, particles: Particles) -> float:
    """Return the distance up to which pairs are summed directly, Å."""
    eta = ewald.split_parameter(particles.volume, particles.size)
    short = [i.term.reach() for i in model.short_ranged() if np.isfinite(i.term.reach())]
    long = [ewald.SPAN / eta] if model.powers() else []
    nearest = [2.5 / eta] if any(i.nearest_only for i in model.interactions) else []
    return max([*short, *long, *nearest], default=1.0)


def _without(bonds: Bonds, excluded: list[tuple[int, int]]) -> Bonds:
    """Drop the pairs core–own shell in the home cell."""
    if not excluded:
        return bonds
    home = (bonds.cell == 0).all(axis=1)
    drop = np.zeros(len(home), dtype=bool)
    for core, shell in excluded:
        drop |= home & (bonds.first == core) & (bonds.second == shell)
        drop |= home & (bonds.first == shell) & (bonds.second == core)
    return Bonds(bonds.first[~drop], bonds.second[~drop], bonds.cell[~drop], bonds.vector[~drop])


def _groups(
    model: PairModel, particles: Particles, bonds: Bonds, length: Array, eta: float
) -> Iterator[tuple[NDArray[np.int64], tuple[Term, ...]]]:
    """Yield (indices of bonds, terms) for every pair of kinds."""
    low = np.minimum(particles.kind[bonds.first], particles.kind[bonds.second])
    high = np.maximum(particles.kind[bonds.first], particles.kind[bonds.second])
    powers = model.powers()
    real_range = ewald.SPAN / eta
    for a in range(len(model.kinds)):
        for b in range(a, len(model.kinds)):
            chosen = np.nonzero((low == a) & (high == b))[0]
            if not len(chosen):
                continue
            real = tuple(ewald.RealPart(m[a, b], n, eta) for n, m in powers.items() if m[a, b])
            if real:
                yield chosen[length[chosen] < real_range], real
            for link in model.short_ranged():
                if (link.first, link.second) != (a, b):
                    continue
                limit = 1.2 * length[chosen].min() if link.nearest_only else link.term.reach()
                yield chosen[length[chosen] < limit], (link.term,)


def pair_matrices(radial: RadialBonds) -> Array:
    """Return Φ of every bond, shape (nb, 3, 3): d²φ/dx dx."""
    x = radial.bonds.vector
    out: Array = radial.curvature[:, None, None] * x[:, :, None] * x[:, None, :]
    out += radial.tension[:, None, None] * np.eye(3)
    return out


def lattice_response(model: PairModel, particles: Particles) -> Response:
    """Return the energy of the cell with all first and second derivatives.

    Every pair counts once (half of the ordered pairs); self terms of the powers included.
    """
    size = 6 + 3 * particles.size
    gradient, hessian = np.zeros(size), np.zeros((size, size))
    energy = _direct_response(model, particles, gradient, hessian)
    eta = ewald.split_parameter(particles.volume, particles.size)
    for n, coupling in model.powers().items():
        energy += _reciprocal_response(n, coupling, eta, particles, gradient, hessian)
    return Response(energy, gradient, 0.5 * (hessian + hessian.T))


def _direct_response(model: PairModel, particles: Particles, gradient: Array, hessian: Array) -> float:
    """Add the directly summed pairs and return their energy.

    Bonds come in both directions, so sums over odd functions of x need be gathered at one end alone.
    """
    radial = radial_bonds(model, particles)
    bonds, x = radial.bonds, radial.bonds.vector
    m = particles.size
    products = x[:, _PAIR_A] * x[:, _PAIR_B]  # xx, yy, zz, yz, xz, xy: xᵀ ε x of each Voigt strain
    pulled = radial.curvature[:, None] * products
    moment = radial.tension @ products
    gradient[:6] += 0.5 * moment
    # x moves by εx + ½ε²x: the second derivative of ½|x|² is that of ½xᵀ(1 + 2ε + 2ε²)x
    square = np.einsum("eac,fcb->efab", STRAINS, STRAINS)
    hessian[:6, :6] += 0.5 * pulled.T @ products
    hessian[:6, :6] += np.einsum("efab,ab->ef", square + square.swapaxes(0, 1), 0.5 * moment[_SQUARE])
    # displacements: dx = u_j − u_i
    force = _gathered(bonds.first, radial.tension[:, None] * x, m)
    gradient[6:] -= force.ravel()
    _add_pairs(hessian, bonds, np.column_stack([pulled, radial.tension]), m)
    cubic = _gathered(bonds.first, pulled[:, _CUBIC[0]] * x[:, _CUBIC[1]], m)[:, _CUBE]
    mixed = cubic.transpose(1, 0, 2) + 2.0 * np.einsum("eab,ib->eia", STRAINS, force)
    flat = -mixed.reshape(6, 3 * m)
    hessian[:6, 6:] += flat
    hessian[6:, :6] += flat.T
    return float(0.5 * radial.energy.sum())


def _gathered(index: NDArray[np.int64], values: Array, size: int) -> Array:
    """Sum rows of values (nb, k) by index, shape (size, k)."""
    columns = [np.bincount(index, values[:, k], minlength=size) for k in range(values.shape[1])]
    return np.asarray(np.stack(columns, axis=-1), dtype=float)


def _add_pairs(hessian: Array, bonds: Bonds, radial: Array, m: int) -> None:
    """Add ½ Σ (u_j − u_i)Φ(u_j − u_i) over ordered pairs to the displacement block.

    ``radial`` has seven columns: curvature times the six products of x, and the tension.
    """
    sums = _gathered(bonds.first * m + bonds.second, radial, m * m)
    pairs = (sums[:, _SQUARE] + sums[:, 6, None, None] * np.eye(3)).reshape(m, m, 3, 3)
    blocks = -pairs
    blocks[np.arange(m), np.arange(m)] += pairs.sum(axis=1)
    hessian[6:, 6:] += blocks.transpose(0, 2, 1, 3).reshape(3 * m, 3 * m)


def _reciprocal_response(
    n: float, coupling: Array, eta: float, particles: Particles, gradient: Array, hessian: Array
) -> float:
    """Add the reciprocal part of one power and return its energy, self terms taken off."""
    c = coupling[np.ix_(particles.kind, particles.kind)]
    k = ewald.reciprocal_vectors(particles.lattice, eta)
    k = k[np.einsum("ga,ga->g", k, k) > 1e-16]
    squared = np.einsum("ga,ga->g", k, k)
    g0, g1, g2 = (part / particles.volume for part in ewald.kernel(n, eta, squared))
    phases = np.exp(1j * k @ particles.positions.T)
    field = phases.conj() @ c.T
    pairs = np.real(phases * field).sum(axis=1)
    energy = 0.5 * float(g0 @ pairs)
    if n > 3.0:
        energy += 0.5 * ewald.at_zero(n, eta) / particles.volume * float(c.sum())
    # strain: d(k²) = −2 kεk, and 1/V
    kek = np.einsum("ga,eab,gb->ge", k, STRAINS, k)
    trace = np.trace(STRAINS, axis1=1, axis2=2)
    double = np.einsum("eac,fcb->efab", STRAINS, STRAINS)
    keek = np.einsum("ga,efab,gb->gef", k, double + double.swapaxes(0, 1), k)
    reciprocal_gradient = 0.5 * (pairs * g1) @ (-2.0 * kek)
    weight = 0.5 * pairs
    block = np.einsum("g,ge,gf->ef", 4.0 * weight * g2, kek, kek)
    block += np.einsum("g,gef->ef", 2.0 * weight * g1, keek)
    block -= np.outer(trace, reciprocal_gradient) + np.outer(reciprocal_gradient, trace)
    block += np.outer(trace, trace) * energy
    gradient[:6] += reciprocal_gradient - trace * energy
    hessian[:6, :6] += block
    _reciprocal_displacements(k, g0, g1, phases, field, c, kek, trace, gradient, hessian)
    return energy - 0.5 * ewald.self_energy(n, eta) * float(np.trace(c))


def _reciprocal_displacements(
    k: Array,
    g0: Array,
    g1: Array,
    phases: Complex,
    field: Complex,
    c: Array,
    kek: Array,
    trace: Array,
    gradient: Array,
    hessian: Array,
) -> None:
    """Add displacement derivatives of ½ Σ g Σ c_ij cos k·(r_i − r_j) at fixed cell, and mixed ones.

    The displacement is taken in the deformed cell, x = exp(ε)(x₀ + w): phases depend on w alone, and
    w enters through the same matrix as for the direct sum.
    """
    m = phases.shape[1]
    slope = -np.imag(phases * field)  # d pairs/2 / d(k·u_i)
    moves = np.einsum("g,gi,ga->ia", g0, slope, k)
    gradient[6:] += moves.ravel()
    mixed = np.einsum("ge,gi,ga->eia", -2.0 * g1[:, None] * kek, slope, k, optimize=True)
    mixed -= trace[:, None, None] * moves[None]
    flat = mixed.reshape(6, 3 * m)
    hessian[:6, 6:] += flat
    hessian[6:, :6] += flat.T
    waves = (phases.conj()[:, :, None] * k[:, None, :]).reshape(len(k), 3 * m)
    outer = np.real((waves * g0[:, None]).T @ waves.conj())
    blocks = outer.reshape(m, 3, m, 3) * c[:, None, :, None]
    diagonal = np.einsum("g,gi,ga,gb->iab", g0, np.real(phases * field), k, k, optimize=True)
    for i in range(m):
        blocks[i, :, i, :] -= diagonal[i]
    hessian[6:, 6:] += blocks.reshape(3 * m, 3 * m)
