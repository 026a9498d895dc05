"""The classical quasi-harmonic crystal, to compare with classical simulations (tests only)."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from thermex import convergence
from thermex.anharmonic.correction import minimum, solved_states
from thermex.chebyshev import Box
from thermex.constants import BOLTZMANN, PLANCK_THZ
from thermex.convergence import Surface
from thermex.crystal.crystal import Crystal
from thermex.equilibrium import Load, States, load_on
from thermex.free_energy import FreeEnergy, Slice, Term, TermValues, Vibrations
from thermex.lattice import supercells_for, uniform_lattice
from thermex.mesh import divisions_for
from thermex.potential.model import PairModel
from thermex.road import Travelled, travel
from thermex.static import find_minimum, scaled_energy

Array = NDArray[np.float64]


@dataclass(frozen=True)
class ClassicalVibrations:
    """k_B T Σ ln(h ν/k_B T) over the modes of a quantum term."""

    box: Box
    coefficients: Array
    modes: int

    def at(self, temperature: Array) -> Slice:
        kt = BOLTZMANN * temperature

        def evaluate(x: Array) -> TermValues:
            rows = np.broadcast_to(self.coefficients, (len(x), len(self.coefficients)))
            f, f_x, f_xx = self.box.evaluate(rows, x)
            whole = f - self.modes * np.log(kt)
            heat = np.full(len(x), self.modes * BOLTZMANN)
            return TermValues(
                kt * whole,
                kt[:, None] * f_x,
                kt[:, None, None] * f_xx,
                -BOLTZMANN * whole + heat,
                -BOLTZMANN * f_x,
                heat,
            )

        return evaluate


def classical(term: Vibrations) -> ClassicalVibrations:
    """Return the classical limit of a vibrational term."""
    logs = np.einsum("pqm,q->p", np.log(PLANCK_THZ * term.frequencies), term.weights)
    return ClassicalVibrations(term.box, term.box.coefficients(logs[None, :])[0], term.frequencies.shape[2])


@dataclass(frozen=True)
class ClassicalCrystal:
    """A quasi-harmonic crystal with classical vibrations, followed to the highest temperature asked."""

    travelled: Travelled
    surface: Surface
    load: Load

    @property
    def crystal(self) -> Crystal:
        return self.travelled.lattice.crystal

    def states(self, temperature: Array, *terms: Term) -> States:
        """Return the states with further terms of the free energy; all must be minima."""
        known = self.travelled.solution.states
        start = np.interp(temperature, known.temperature, known.x[:, 0])[:, None]
        whole = self.surface.best.plus(*terms)
        found = solved_states(whole, self.load, temperature, start)
        assert minimum(whole, self.load, found, self.surface.box.window).all()
        return found

    def lattice_parameter(self, states: States) -> Array:
        return np.exp(states.x[:, 0]) * self.crystal.lattice_parameters[0]


def classical_crystal(model: PairModel, crystal: Crystal, highest: float) -> ClassicalCrystal:
    """Follow the branch to ``highest`` K and take the classical limit of its surface."""
    rough = scaled_energy(model, crystal)
    energy = scaled_energy(model, crystal.strained(np.array([find_minimum(rough, 0.0)])))
    load = load_on(energy.crystal, 0.0)
    travelled = travel(
        lambda span: uniform_lattice(model, energy, supercells_for(energy.crystal, span)),
        load,
        highest * np.linspace(0.0, 1.0, 9),
        1e-3,
        lambda stage, done, total: None,
    )
    # without zero-point motion the crystal is smaller: the window begins below the static lattice
    high = travelled.solution.surface.box.window[0, 1]
    box = Box(np.array([[-0.003, high]]), (11,))
    surface = convergence.build(travelled.lattice, box, divisions_for(energy.crystal, 16), 1)

    def lowered(free_energy: FreeEnergy) -> FreeEnergy:
        return FreeEnergy(tuple(classical(t) if isinstance(t, Vibrations) else t for t in free_energy.terms))

    surface = replace(
        surface,
        best=lowered(surface.best),
        coarse_mesh=lowered(surface.coarse_mesh),
        fewer_volumes=lowered(surface.fewer_volumes),
    )
    return ClassicalCrystal(travelled, surface, load)
