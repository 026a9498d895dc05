"""The vibrating lattice of any ASE calculator: finite displacements, symmetry used.

The same road as for pair models: energies and stresses over a box of strains, force constants from
forces on displaced supercells through phonopy.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from thermex.chebyshev import Box
from thermex.crystal.crystal import Crystal
from thermex.crystal.structure import to_atoms
from thermex.errors import NoMinimumError
from thermex.free_energy import Term
from thermex.general_lattice import fitted_energy
from thermex.lattice import Motion, Supercells
from thermex.phonons import displaced_dynamics

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

#: Names of the ASE calculators that thermex itself constructs for a case.
NAMED = ("effective medium",)


def named_calculator(name: str) -> Any:
    """Construct one of the calculators on the fixed list ``NAMED``; a case never names code."""
    if name == "effective medium":
        from ase.calculators.emt import EMT

        return EMT()
    raise ValueError(name)


@dataclass(frozen=True, slots=True)
class CalculatorLattice:
    """A crystal whose forces come from an ASE calculator."""

    crystal: Crystal
    """The static minimum, x = 0."""
    calculator: Any
    supercells: Supercells
    known: dict[bytes, Crystal] = field(default_factory=dict, compare=False, repr=False)
    """Cells already relaxed, by strain."""

    def relaxed(self, x: Array) -> Crystal:
        """Return the cell at strain x with inner coordinates following the static forces."""
        key = np.round(x, 12).tobytes()
        if key not in self.known:
            self.known[key] = relax_inner(self.crystal.strained(x), self.calculator)
        return self.known[key]

    def static_over(self, box: Box) -> Term:
        """Return U over a box, from energies and stresses at twice as many points along each axis."""
        dense = Box(box.window, tuple(2 * n for n in box.counts))
        rows = [energy_and_slope(self.relaxed(x), self.calculator) for x in dense.grid]
        return fitted_energy(dense, [(u, slope, None) for u, slope in rows])

    def fractional_at(self, x: Array) -> Array:
        """Return the fractional positions (n, 3) at strain x, relaxed."""
        return self.relaxed(x).fractional

    def motion(self, points: Array) -> Motion:
        """Return the dynamical matrices from displaced supercells."""
        return self._motion(points, self.supercells.short)

    def exact_motion(self, points: Array) -> Motion:
        """Return the dynamical matrices from larger supercells, as a measure of their error."""
        return self._motion(points, self.supercells.dispersion)

    def _motion(self, points: Array, repeat: tuple[int, int, int]) -> Motion:
        def motion(x: Array) -> Complex:
            return displaced_dynamics(to_atoms(self.relaxed(x)), self.calculator, repeat, points)

        return motion


def energy_and_slope(crystal: Crystal, calculator: Any) -> tuple[float, Array]:
    """Return U (eV) and ∂U/∂x (d,) of a cell from the energy and stress of the calculator."""
    atoms = to_atoms(crystal)
    atoms.calc = calculator
    stress = atoms.get_stress(voigt=True)
    slope = [crystal.volume * sum(stress[k] for k in group) for group in crystal.axes]
    return float(atoms.get_potential_energy()), np.array(slope)


def relax_inner(crystal: Crystal, calculator: Any) -> Crystal:
    """Relax the inner coordinates that symmetry leaves free, at fixed cell."""
    if not len(crystal.displacements):
        return crystal
    from scipy.optimize import minimize

    def fun(amplitudes: Array) -> tuple[float, Array]:
        atoms = to_atoms(crystal.displaced(amplitudes))
        atoms.calc = calculator
        forces = atoms.get_forces()
        return float(atoms.get_potential_energy()), -np.tensordot(crystal.displacements, forces, axes=2)

    found = minimize(fun, np.zeros(len(crystal.displacements)), jac=True, method="BFGS", options={"gtol": 1e-6})
    return crystal.displaced(found.x)


def relax_cell(crystal: Crystal, calculator: Any, pressure_eV_A3: float) -> Crystal:
    """Relax the free lattice parameters under pressure, inner coordinates following.

    Raises
    ------
    NoMinimumError
        The cell does not settle within ±30 % of the start.
    """
    from scipy.optimize import minimize

    trace = crystal.strain_trace

    def fun(x: Array) -> tuple[float, Array]:
        if np.abs(x).max() > 0.3:
            return 1e6, np.sign(x) * 1e3
        cell = relax_inner(crystal.strained(x), calculator)
        energy, slope = energy_and_slope(cell, calculator)
        work = pressure_eV_A3 * cell.volume
        return energy + work, slope + work * trace

    found = minimize(fun, np.zeros(len(trace)), jac=True, method="BFGS", options={"gtol": 1e-7})
    if np.abs(found.x).max() > 0.29 or np.abs(found.jac).max() > 1e-3:
        raise NoMinimumError("the static lattice does not settle", where="calculator", fix="check the start cell")
    return relax_inner(crystal.strained(found.x), calculator)
