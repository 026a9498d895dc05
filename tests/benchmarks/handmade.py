"""The way of a competent user without thermex: ASE calculator, finite displacements, fitted equation of state.

The same rigid-ion MgO potential, the same volumes and a comparable mesh, with phonopy's usual calls.
"""

from __future__ import annotations

from dataclasses import dataclass
from time import perf_counter

import numpy as np
from ase import Atoms
from ase.calculators.calculator import Calculator, all_changes
from numpy.typing import NDArray
from scipy.optimize import curve_fit
from scipy.special import erfc

Array = NDArray[np.float64]

COULOMB = 14.399645
CHARGES = {"Mg": 2.0, "O": -2.0}
MASSES = {"Mg": 24.305, "O": 15.999}
#: All pairs of the 27 nearest images are summed: a set fixed in lattice terms, so that E(V) is smooth.
IMAGES = np.stack(np.meshgrid(*[[-1, 0, 1]] * 3, indexing="ij"), -1).reshape(-1, 3)
SPLIT = 0.4


class RigidMagnesia(Calculator):
    """Ewald sum and short-range pairs, vectorised over all pairs."""

    implemented_properties = ["energy", "forces"]  # noqa: RUF012

    def calculate(self, atoms=None, properties=("energy",), system_changes=all_changes):
        super().calculate(atoms, properties, system_changes)
        symbols = np.array(self.atoms.get_chemical_symbols())
        charge = np.array([CHARGES[s] for s in symbols])
        size = len(symbols)
        separation = self.atoms.positions[None, :, :] - self.atoms.positions[:, None, :]
        vector = (separation[None] + (IMAGES @ self.atoms.cell.array)[:, None, None, :]).reshape(-1, 3)
        i = np.tile(np.repeat(np.arange(size), size), len(IMAGES))
        j = np.tile(np.tile(np.arange(size), size), len(IMAGES))
        r = np.sqrt(np.einsum("pk,pk->p", vector, vector))
        apart = r > 1e-6
        i, j, r, vector = i[apart], j[apart], r[apart], vector[apart]
        q = COULOMB * charge[i] * charge[j]
        screened = erfc(SPLIT * r)
        energy = q * screened / r
        slope = -q * (screened / r**2 + 2 * SPLIT / np.sqrt(np.pi) * np.exp(-((SPLIT * r) ** 2)) / r)
        mixed, anions = symbols[i] != symbols[j], (symbols[i] == "O") & (symbols[j] == "O")
        born = 1428.5 * np.exp(-r / 0.2945) * mixed
        energy = energy + born
        slope = slope - born / 0.2945
        repulsion = 22764.3 * np.exp(-r / 0.149) * anions
        energy = energy + repulsion - 27.88 / r**6 * anions
        slope = slope - repulsion / 0.149 + 6 * 27.88 / r**7 * anions
        forces = np.zeros((len(symbols), 3))
        pull = (slope / r)[:, None] * vector
        for k in range(3):
            forces[:, k] = np.bincount(i, pull[:, k], minlength=len(symbols))
        total = 0.5 * energy.sum() - COULOMB * SPLIT / np.sqrt(np.pi) * (charge**2).sum()
        long_energy, long_forces = self._reciprocal(charge)
        self.results = {"energy": total + long_energy, "forces": forces + long_forces}

    def _reciprocal(self, charge):
        cell, volume = self.atoms.cell.array, self.atoms.get_volume()
        basis = 2 * np.pi * np.linalg.inv(cell).T
        reach = 2 * SPLIT * 5.5
        counts = np.ceil(reach * np.linalg.norm(cell, axis=1) / (2 * np.pi)).astype(int)
        grid = np.stack(np.meshgrid(*[np.arange(-n, n + 1) for n in counts], indexing="ij"), -1).reshape(-1, 3)
        k = grid @ basis
        k2 = (k**2).sum(axis=1)
        keep = (k2 > 1e-12) & (k2 < reach**2)
        k, k2 = k[keep], k2[keep]
        weight = 4 * np.pi / volume * np.exp(-k2 / (4 * SPLIT**2)) / k2
        phase = np.exp(1j * self.atoms.positions @ k.T)
        structure = charge @ phase
        energy = 0.5 * COULOMB * (weight * np.abs(structure) ** 2).sum()
        field = np.imag(phase * structure.conj()[None, :]) * weight
        return energy, COULOMB * charge[:, None] * (field @ k)


@dataclass(frozen=True)
class Handmade:
    """Result and time by stage."""

    temperature: Array
    alpha_linear: Array
    seconds: dict[str, float]

    @property
    def total(self) -> float:
        return sum(self.seconds.values())


def vinet(volume, e0, v0, b0, b1):
    y = np.cbrt(volume / v0)
    eta = 1.5 * (b1 - 1)
    return e0 + 9 * b0 * v0 / eta**2 * (1 - (1 - eta * (1 - y)) * np.exp(eta * (1 - y)))


def run(temperature: Array, lattice: Array, mesh: int = 20) -> Handmade:
    """Predict α(T) at the given volumes (cubic lattice parameters, Å)."""
    from phonopy import Phonopy
    from phonopy.structure.atoms import PhonopyAtoms

    seconds = dict.fromkeys(("phonopy objects", "forces", "force constants", "mesh", "fits"), 0.0)
    primitive = np.array([[0, 0.5, 0.5], [0.5, 0, 0.5], [0.5, 0.5, 0]])
    static, vibrational = [], []
    for a in lattice:
        cell = PhonopyAtoms(["Mg", "O"], cell=a * primitive, scaled_positions=[[0, 0, 0], [0.5, 0.5, 0.5]])
        start = perf_counter()
        phonopy = Phonopy(cell, supercell_matrix=np.diag([4, 4, 4]), primitive_matrix="P")
        phonopy.generate_displacements(distance=0.01)
        seconds["phonopy objects"] += perf_counter() - start
        start = perf_counter()
        forces = []
        for displaced in phonopy.supercells_with_displacements:
            atoms = Atoms(displaced.symbols, cell=displaced.cell, positions=displaced.positions, pbc=True)
            atoms.calc = RigidMagnesia()
            forces.append(atoms.get_forces())
        big = phonopy.supercell
        atoms = Atoms(big.symbols, cell=big.cell, positions=big.positions, pbc=True)
        atoms.calc = RigidMagnesia()
        static.append(atoms.get_potential_energy() / 64)
        seconds["forces"] += perf_counter() - start
        start = perf_counter()
        phonopy.forces = forces
        phonopy.produce_force_constants()
        phonopy.nac_params = {
            "born": np.array([np.eye(3) * 2.0, -np.eye(3) * 2.0]),
            "dielectric": np.eye(3),
            "factor": COULOMB,
            "method": "gonze",
        }
        seconds["force constants"] += perf_counter() - start
        start = perf_counter()
        phonopy.run_mesh([mesh] * 3, is_gamma_center=True)
        phonopy.run_thermal_properties(temperatures=temperature)
        found = phonopy.thermal_properties
        vibrational.append(np.array(found.free_energy) / 96.48533212)
        seconds["mesh"] += perf_counter() - start
    start = perf_counter()
    volume = lattice**3 / 4
    energies = np.array(static)[:, None] + np.array(vibrational)
    minimum = []
    for column in energies.T:
        guess = (column.min(), volume[np.argmin(column)], 1.3, 4.0)
        minimum.append(curve_fit(vinet, volume, column, p0=guess, maxfev=5000)[0][1])
    alpha = np.gradient(np.array(minimum), temperature) / np.array(minimum) / 3
    seconds["fits"] += perf_counter() - start
    return Handmade(temperature, alpha, seconds)
