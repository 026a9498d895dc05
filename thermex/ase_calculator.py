"""thermex's pair model as an ASE calculator: energy, forces and stress, for use elsewhere."""

from __future__ import annotations

from typing import Any

import numpy as np
from ase.calculators.calculator import Calculator, all_changes
from numpy.typing import NDArray

from thermex.case.case import PotentialSpec
from thermex.errors import InputError, PolarisationError
from thermex.potential.build import closed_model
from thermex.potential.lattice_sums import Response, lattice_response
from thermex.potential.model import PairModel, Particles

Array = NDArray[np.float64]


class PairCalculator(Calculator):  # type: ignore[misc]
    """Energy (eV), forces (eV/Å) and stress (eV/Å³) of a pair model, all lattice sums complete.

    Shells follow the cores adiabatically. Only crystals, periodic in three directions, are accepted.

    Parameters
    ----------
    potential
        The potential of a case (``load_case(...).potential``), or a pair model. Where an amplitude is
        given by ``static_distance``, the pair model built on the crystal at rest is needed.
    """

    implemented_properties = ["energy", "forces", "stress", "free_energy"]  # noqa: RUF012

    def __init__(self, potential: PotentialSpec | PairModel, **keywords: Any) -> None:
        super().__init__(**keywords)
        self._potential = potential

    def calculate(self, atoms: Any = None, properties: Any = ("energy",), system_changes: Any = all_changes) -> None:
        """Evaluate the pair model on the atoms."""
        super().calculate(atoms, properties, system_changes)
        if not all(self.atoms.pbc):
            raise InputError("the cell is not periodic in three directions", where="atoms")
        model = self._model()
        particles = _place(model, self.atoms)
        response, particles = _settled(model, particles, len(self.atoms))
        n = len(self.atoms)
        energy = response.energy
        self.results["energy"] = self.results["free_energy"] = energy
        self.results["forces"] = -response.gradient[6 : 6 + 3 * n].reshape(n, 3)
        self.results["stress"] = response.gradient[:6] / particles.volume

    def _model(self) -> PairModel:
        if isinstance(self._potential, PairModel):
            return self._potential
        return closed_model(self._potential, self.atoms.get_chemical_symbols())


def _place(model: PairModel, atoms: Any) -> Particles:
    """Put cores, then shells, on the atoms."""
    cores = {k.symbol: i for i, k in enumerate(model.kinds) if not k.is_shell}
    shells = {k.symbol: i for i, k in enumerate(model.kinds) if k.is_shell}
    symbols = atoms.get_chemical_symbols()
    missing = sorted(set(symbols) - set(cores))
    if missing:
        raise InputError(f"the potential knows nothing of {', '.join(missing)}", where="atoms")
    with_shell = [i for i, s in enumerate(symbols) if s in shells]
    kind = [cores[s] for s in symbols] + [shells[symbols[i]] for i in with_shell]
    site = [*range(len(symbols)), *with_shell]
    positions = np.array(atoms.positions)[site]
    return Particles(np.array(atoms.cell), positions, np.array(kind), np.array(site))


def _settled(model: PairModel, particles: Particles, cores: int) -> tuple[Response, Particles]:
    """Let the shells come to rest by Newton steps, and hand their share of the core forces back."""
    response = lattice_response(model, particles)
    start = 6 + 3 * cores
    for _ in range(30):
        force = response.gradient[start:]
        if len(force) == 0 or np.abs(force).max() < 1e-9:
            return response, particles
        step = -np.linalg.solve(response.hessian[start:, start:], force)
        positions = particles.positions.copy()
        positions[cores:] += np.clip(step, -0.1, 0.1).reshape(-1, 3)
        particles = Particles(particles.lattice, positions, particles.kind, particles.site)
        response = lattice_response(model, particles)
    raise PolarisationError("the shells do not come to rest", where="ASE calculator")
