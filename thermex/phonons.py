"""Phonons: force constants in, frequencies out. The only room that knows phonopy."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from phonopy.harmonic.dynamical_matrix import (
    diagonalize_dynamical_matrices,
    get_dynamical_matrices_at_qpoints,
    get_dynamical_matrix,
)
from phonopy.structure.atoms import PhonopyAtoms
from phonopy.structure.cells import Primitive, get_supercell

from thermex.constants import COULOMB, THZ_PER_ROOT
from thermex.mesh import first_zone
from thermex.potential.dynamical import force_constants_at, supercell_force_constants
from thermex.potential.model import PairModel, Particles

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

#: Gives Φ(q), shape (nq, 3m, 3m), eV/Å², at wave vectors (nq, 3) in primitive reciprocal units.
Dynamics = Callable[[Array], Complex]

#: A shell is set off from its core by this much (Å) in the cell given to phonopy, which tells atoms
#: apart by position. It changes phases alone, and those are taken off again.
_OFFSET = 1e-4


class _HomeCell(Primitive):  # type: ignore[misc]
    """Phonopy's primitive cell without its search for permutations under translations.

    They serve to complete force constants, and ours are complete from the start.
    """

    def _get_atomic_permutations(self, *supercell: Any) -> NDArray[np.int64]:
        return np.zeros((0, sum(len(one) for one in supercell)), dtype=np.int64)


@dataclass(frozen=True, slots=True)
class Supercell:
    """Phonopy's supercell for one cell and repetition, and how our force constants map onto it."""

    supercell: Any
    primitive: Any
    lattice: Array
    repeat: tuple[int, int, int]
    owner: NDArray[np.int64]
    """Shape (Ns,): centre of the home cell to which each centre of the supercell belongs."""
    index: NDArray[np.int64]
    """Shape (Ns, 3): its cell."""
    shift: Array
    """Shape (m, 3): fractional set-off of coinciding centres."""

    def dynamics(self, folded: Array, charges: Array | None = None) -> Dynamics:
        """Return phonopy's interpolation Φ(q) of folded force constants, for q in the first zone.

        Parameters
        ----------
        folded
            Shape (m, m, n1, n2, n3, 3, 3), eV/Å².
        charges
            Shape (m,), e; with them phonopy's dipole–dipole term (X. Gonze and C. Lee,
            Phys. Rev. B 55, 10355 (1997), doi:10.1103/PhysRevB.55.10355) carries the long-ranged
            part, with ε∞ = 1.
        """
        compact = folded[:, self.owner, self.index[:, 0], self.index[:, 1], self.index[:, 2]]
        parameters = None
        if charges is not None:
            born = charges[:, None, None] * np.eye(3)
            parameters = {"born": born, "dielectric": np.eye(3), "factor": COULOMB, "method": "gonze"}
        matrices = get_dynamical_matrix(
            np.ascontiguousarray(compact, dtype="double"), self.supercell, self.primitive, parameters
        )
        if parameters is not None:
            matrices.make_Gonze_nac_dataset()

        def dynamics(q: Array) -> Complex:
            values = np.asarray(get_dynamical_matrices_at_qpoints(matrices, q))
            if not self.shift.any():
                return values
            phase = np.repeat(np.exp(2j * np.pi * q @ self.shift.T), 3, axis=1)
            return np.asarray(values * phase[:, :, None] * phase.conj()[:, None, :])

        return dynamics


def supercell(particles: Particles, repeat: tuple[int, int, int]) -> Supercell:
    """Build phonopy's supercell; centres (cores and shells) enter with unit mass."""
    inverse = np.linalg.inv(particles.lattice)
    shift = _offsets(particles) @ inverse
    cell = PhonopyAtoms(
        symbols=["H"] * particles.size,
        cell=particles.lattice,
        scaled_positions=particles.positions @ inverse + shift,
        masses=np.ones(particles.size),
    )
    big = get_supercell(cell, np.diag(repeat))
    primitive = _HomeCell(big, np.diag(1.0 / np.array(repeat)))
    owner = np.array([big.u2u_map[k] for k in big.s2u_map])
    cells = big.scaled_positions * np.array(repeat) - cell.scaled_positions[owner]
    index = np.rint(cells).astype(int) % np.array(repeat)
    return Supercell(big, primitive, particles.lattice, repeat, owner, index, shift)


def interpolate(model: PairModel, particles: Particles, cell: Supercell) -> Dynamics:
    """Hand the force constants of a supercell, all lattice sums complete, to phonopy; any q."""
    folded = supercell_force_constants(model, particles, cell.repeat)
    charges = np.array([model.kinds[k].charge for k in particles.kind])
    dynamics = cell.dynamics(folded, charges if model.has_charges else None)
    return lambda q: dynamics(first_zone(particles.lattice, np.atleast_2d(q)))


def _offsets(particles: Particles) -> Array:
    """Return how far each centre is moved so that no two of a cell coincide, shape (m, 3)."""
    shifts = np.zeros_like(particles.positions)
    seen: dict[int, int] = {}
    for i, site in enumerate(particles.site):
        repeats = seen.get(int(site), 0)
        shifts[i, 0] = _OFFSET * repeats
        seen[int(site)] = repeats + 1
    return shifts


def displaced_dynamics(atoms: Any, calculator: Any, repeat: tuple[int, int, int], points: Array) -> Complex:
    """Return dynamical matrices (nq, 3n, 3n) from forces on displaced supercells, symmetry used.

    Parameters
    ----------
    atoms
        Primitive cell, ASE Atoms with the masses to use.
    calculator
        ASE calculator.
    points
        Shape (nq, 3), primitive reciprocal units.
    """
    from ase import Atoms
    from phonopy import Phonopy

    cell = PhonopyAtoms(
        symbols=atoms.get_chemical_symbols(),
        cell=atoms.cell.array,
        scaled_positions=atoms.get_scaled_positions(),
        masses=atoms.get_masses(),
    )
    phonopy = Phonopy(cell, supercell_matrix=np.diag(repeat), primitive_matrix="P")
    phonopy.generate_displacements(distance=0.01)
    forces = []
    for displaced in phonopy.supercells_with_displacements:
        big = Atoms(displaced.symbols, cell=displaced.cell, positions=displaced.positions, pbc=True)
        big.calc = calculator
        found = big.get_forces()
        forces.append(found - found.mean(axis=0))
    phonopy.forces = forces
    phonopy.produce_force_constants()
    phonopy.symmetrize_force_constants()
    inside = first_zone(atoms.cell.array, points)
    return np.asarray(get_dynamical_matrices_at_qpoints(phonopy.dynamical_matrix, inside))


def direct(model: PairModel, particles: Particles) -> Dynamics:
    """Return Φ(q) by direct and Ewald sums, with no supercell: the independent check."""
    return lambda q: force_constants_at(model, particles, q)


@dataclass(frozen=True, slots=True)
class MassWeighting:
    """Turns Φ(q) over centres into the dynamical matrix of the cores."""

    masses: Array
    """Shape (n,), u."""

    def dynamical(self, values: Complex) -> Complex:
        """Eliminate the massless shells and divide by the masses: shape (nq, 3n, 3n).

        Φ_eff = Φ_cc − Φ_cs Φ_ss⁻¹ Φ_sc (B. G. Dick and A. W. Overhauser, Phys. Rev. 112, 90 (1958)).
        """
        size = 3 * len(self.masses)
        core = values[:, :size, :size]
        if values.shape[1] > size:
            coupling = values[:, :size, size:]
            response = np.linalg.solve(values[:, size:, size:], values[:, size:, :size])
            core = core - coupling @ response
        root = np.repeat(np.sqrt(self.masses), 3)
        matrix = core / (root[:, None] * root[None, :])
        return np.asarray(0.5 * (matrix + matrix.conj().swapaxes(-1, -2)))


def frequencies(dynamical: Complex) -> Array:
    """Return frequencies in THz, shape (nq, 3n), ascending; imaginary ones as negative numbers."""
    squared, _ = diagonalize_dynamical_matrices(np.ascontiguousarray(dynamical), with_eigenvectors=False)
    return np.asarray(np.sign(squared) * np.sqrt(np.abs(squared)) * THZ_PER_ROOT)


def eigenmodes(dynamical: Complex) -> tuple[Array, Complex]:
    """Return frequencies (nq, 3n) and eigenvectors (nq, 3n, 3n), one a column."""
    squared, vectors = np.linalg.eigh(dynamical)
    return np.sign(squared) * np.sqrt(np.abs(squared)) * THZ_PER_ROOT, vectors


def soft_mode(q: Array, found: Array) -> str | None:
    """Describe the deepest imaginary mode among frequencies (nq, 3n) in THz, or return None."""
    lowest = found.min(axis=1)
    worst = int(np.argmin(lowest))
    if lowest[worst] >= 0.0:
        return None
    share = float((lowest < 0.0).mean())
    place = ", ".join(f"{value:.3f}" for value in q[worst])
    return f"imaginary mode of {-lowest[worst]:.3f}i THz at q = ({place}); {share:.0%} of the q examined are soft"
