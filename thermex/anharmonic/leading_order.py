"""Leading-order anharmonicity of the classical crystal: F_anh = (k_B T)² F₂(x).

F₂ (k_B T)² = ⟨V₄⟩ − ⟨V₃²⟩/(2 k_B T), Gaussian averages over the harmonic crystal at the same volume.
With cubic sites free of inner coordinates the mean thermal force on every atom vanishes, so that only
the fully connected part of ⟨V₃²⟩ counts.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.anharmonic.correlation import (
    PeriodicCrystal,
    fourier,
    inverse_fourier,
    periodic_crystal,
    susceptibility,
)
from thermex.anharmonic.term import AnharmonicTerm, term_through
from thermex.anharmonic.vertices import BareBonds, bare_bonds, cubic_tensors, quartic_mean, radial_factors
from thermex.chebyshev import Box, without_highest
from thermex.crystal.crystal import Crystal
from thermex.errors import UnstableCrystalError
from thermex.potential.bonds import find_bonds
from thermex.potential.model import PairModel
from thermex.potential.terms import Spline, Tapered

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

#: Γ-centred meshes (divisions along each primitive axis). F₂ converges as 1/N³ on them: the last two
#: give the extrapolated value, the first two the one it is compared with.
MESHES = (4, 6, 8)

#: Bonds with a vertex, in nearest-neighbour distances, and the shorter range for the error.
REACH, SHORT_REACH = 6.05, 4.05

#: Share of the difference between the two extrapolations that is stated as error of the finer one.
MESH_SHARE = 0.3

#: Volumes at which F₂ is computed.
VOLUMES = 9


@dataclass(frozen=True, slots=True)
class LeadingOrder:
    """F₂ over a window of volumes, with companions from which its error is found."""

    best: AnharmonicTerm
    coarse_mesh: AnharmonicTerm
    """Moved by the error of the mesh."""
    shorter_range: AnharmonicTerm
    """Moved by what the bonds between the two ranges give."""
    fewer_volumes: AnharmonicTerm
    """Without the highest coefficients."""

    @property
    def companions(self) -> tuple[AnharmonicTerm, AnharmonicTerm, AnharmonicTerm]:
        """Terms that differ from the best one by about one source of error each."""
        return self.coarse_mesh, self.shorter_range, self.fewer_volumes


def applicable(crystal: Crystal, model: PairModel) -> str | None:
    """Return why the leading order is not offered for a crystal, or None when it is."""
    if len(crystal.axes) != 1:
        return "it was tested on cubic crystals only"
    if len(crystal.displacements):
        return "it was not tested on crystals with free inner coordinates"
    if model.has_shells:
        return "it was not tested on polarisable ions"
    if any(isinstance(link.term, Tapered) for link in model.interactions):
        return "it needs fourth derivatives, which a potential with a cutoff lacks"
    if any(isinstance(link.term, Spline) for link in model.interactions):
        return "it needs fourth derivatives, which a table does not give"
    return None


def leading_order(model: PairModel, crystal: Crystal, window: Array) -> LeadingOrder:
    """Compute F₂ over a window of volumes.

    Parameters
    ----------
    crystal
        Cubic, at x = 0.
    window
        Shape (1, 2): range of x = ln(lattice parameter / that of ``crystal``).

    Raises
    ------
    UnstableCrystalError
        Phonons are imaginary somewhere in the window.
    """
    nearest = nearest_bond(crystal)
    far = bare_bonds(model, model.particles(crystal), REACH * nearest)
    near = far.within(SHORT_REACH * nearest)
    box = Box(np.asarray(window, dtype=float), (VOLUMES,))
    meshes = [periodic_crystal(model, crystal, (n, n, n)) for n in MESHES]
    x = box.grid[:, 0]
    rows = np.array([[sum(leading_parts(mesh, far, float(v))) for v in x] for mesh in meshes])
    short = np.array([sum(leading_parts(meshes[1], near, float(v))) for v in x])
    fine = extrapolated(rows[1], rows[2], MESHES[1], MESHES[2])
    rough = extrapolated(rows[0], rows[1], MESHES[0], MESHES[1])
    best = term_through(box, fine)
    return LeadingOrder(
        best,
        term_through(box, fine + MESH_SHARE * (rough - fine)),
        term_through(box, fine + short - rows[1]),
        AnharmonicTerm(box, without_highest(best.coefficients[None, :])[0]),
    )


def extrapolated(coarse: Array, fine: Array, coarse_n: int, fine_n: int) -> Array:
    """Return the limit of values that converge as 1/N³, from two meshes."""
    a, b = float(coarse_n) ** 3, float(fine_n) ** 3
    return np.asarray((b * fine - a * coarse) / (b - a))


def nearest_bond(crystal: Crystal) -> float:
    """Return the distance of nearest neighbours, Å."""
    reach = 1.01 * float(np.linalg.norm(crystal.lattice, axis=1).min())
    return float(find_bonds(crystal.lattice, crystal.cartesian, reach).length.min())


def leading_parts(periodic: PeriodicCrystal, bare: BareBonds, x: float) -> tuple[float, float]:
    """Return the cubic and the quartic part of F₂ at ln(scale) = x, 1/eV per primitive cell."""
    scale = float(np.exp(x))
    size, repeat = periodic.crystal.size, periodic.repeat
    try:
        response = susceptibility(periodic.force_constants(x))
    except np.linalg.LinAlgError as error:
        raise UnstableCrystalError(
            f"phonons are imaginary at {100.0 * (scale - 1.0):+.2f} % in the lattice parameter",
            where="anharmonic correction",
            fix="it needs a stable harmonic crystal at every volume on the way",
        ) from error
    spread = inverse_fourier(response.transpose(3, 4, 0, 1, 2)).reshape(size, 3, size, 3, *repeat)
    vector, length = bare.bonds.vector * scale, bare.bonds.length * scale
    _, g2, g3, g4 = radial_factors(bare.radial(scale, 4), length)
    quartic = 0.5 * quartic_mean(vector, g2, g3, g4, bond_spread(spread, bare, repeat)).sum()
    tensors = folded_cubic(bare, cubic_tensors(vector, g2, g3), size, repeat)
    return cubic_part(tensors, response, spread), float(quartic)


def bond_spread(spread: Array, bare: BareBonds, repeat: tuple[int, int, int]) -> Array:
    """Return Λ = ⟨Δu Δu⟩/k_BT of every bond, shape (nb, 3, 3), from C (n, 3, n, 3, N₁, N₂, N₃)."""
    i, j = bare.bonds.first, bare.bonds.second
    l1, l2, l3 = (bare.bonds.cell % np.array(repeat)).T
    own = spread[:, :, :, :, 0, 0, 0]
    mixed = spread[i, :, j, :, l1, l2, l3]
    return np.asarray(own[i, :, i, :] + own[j, :, j, :] - mixed - mixed.swapaxes(1, 2))


def folded_cubic(bare: BareBonds, tensors: Array, size: int, repeat: tuple[int, int, int]) -> Array:
    """Fold the cubic vertices into the supercell: V₃ = ½ Σ Ψ_iab,jc u_ia u_ib u_jc.

    Returns
    -------
    Shape (n, 3, 3, n, 3, N₁, N₂, N₃), eV/Å³; the entry of an atom with itself is −⅓ of the sum over
    its bonds.
    """
    bonds = bare.bonds
    shape = (size, size, *repeat)
    flat = np.ravel_multi_index((bonds.first, bonds.second, *(bonds.cell % np.array(repeat)).T), shape)
    total = int(np.prod(shape))
    rows = tensors.reshape(-1, 27)
    out: Array = np.stack([np.bincount(flat, rows[:, k], minlength=total) for k in range(27)])
    own = np.stack([np.bincount(bonds.first, rows[:, k], minlength=size) for k in range(27)])
    blocks: Array = out.reshape(3, 3, 3, *shape)
    for i in range(size):
        blocks[:, :, :, i, i, 0, 0, 0] = blocks[:, :, :, i, i, 0, 0, 0] - own[:, i].reshape(3, 3, 3) / 3.0
    return np.ascontiguousarray(blocks.transpose(3, 0, 1, 4, 2, 5, 6, 7))


def cubic_part(tensors: Array, response: Complex, spread: Array) -> float:
    """Return −⟨V₃²⟩/2 per primitive cell with ⟨u u⟩ = G (k_B T = 1), 1/eV.

    With B_iab = Σ Ψ_iab,jc u_jc, ⟨V₃²⟩ = ¼ Σ [2 C_ik C_ik ⟨B_i B_k⟩ + 4 C_ik ⟨u_i B_k⟩ ⟨B_i u_k⟩]: products
    in real space of convolutions done on the mesh.
    """
    size, repeat = len(tensors), tensors.shape[5:]
    vertex = fourier(tensors.reshape(9 * size, 3 * size, *repeat)).transpose(2, 3, 4, 0, 1)
    mixed = vertex @ response
    double = mixed @ vertex.conj().swapaxes(-1, -2)
    force = inverse_fourier(mixed.transpose(3, 4, 0, 1, 2)).reshape(size, 3, 3, size, 3, -1)
    back = inverse_fourier(mixed.conj().transpose(4, 3, 0, 1, 2)).reshape(size, 3, size, 3, 3, -1)
    both = inverse_fourier(double.transpose(3, 4, 0, 1, 2)).reshape(size, 3, 3, size, 3, 3, -1)
    own = spread.reshape(size, 3, size, 3, -1)
    # first kind: both free ends meet
    half = np.einsum("iakcL,iabkcdL->ibkdL", own, both, optimize=True)
    direct = 2.0 * float(np.einsum("ibkdL,ibkdL->", own, half))
    # second kind: each free end meets the far end of the other vertex
    half = np.einsum("iabkdL,ibkcdL->iakcL", force, back)
    crossed = 4.0 * float(np.einsum("iakcL,iakcL->", own, half))
    return -0.125 * (direct + crossed)
