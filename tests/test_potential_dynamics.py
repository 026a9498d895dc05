"""Force constants and lattice response: invariances, finite differences, and the two roads to Φ(q)."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from reference_models import reference_case
from scipy.linalg import expm

from thermex import phonons
from thermex.case.case import CrystalSpec
from thermex.case.published import published
from thermex.crystal.build import build_crystal
from thermex.crystal.crystal import Crystal
from thermex.elastic import sound_speeds, stiffness
from thermex.ground import GENERAL_SPAN, fixed_ground
from thermex.lattice import supercells_for, uniform_lattice
from thermex.potential.build import pair_model
from thermex.potential.dynamical import commensurate_points, force_constants_at
from thermex.potential.lattice_sums import STRAINS, lattice_response
from thermex.potential.model import PairModel, Particles
from thermex.static import scaled_energy

pytestmark = pytest.mark.crosscheck

# S1: ions and a dispersion term; S3: inverse powers alone; S5: exponentials alone; S6: shells
NAMES = ("S1", "S3", "S5", "S6")


def at_rest(name: str) -> tuple[PairModel, Crystal]:
    """Return the pair model and the crystal at its static minimum."""
    case = reference_case(name)
    start = build_crystal(case.crystal)
    model = pair_model(case.potential, start)
    return model, fixed_ground(case, model, start).static.crystal


def rutile() -> tuple[PairModel, Crystal]:
    known = published("MA91 TiO2")
    spec = CrystalSpec("rutile", ("Ti", "O"), {"a": 4.4926, "c": 3.0083}, inner={"u": 0.3033})
    crystal = build_crystal(spec)
    return pair_model(known.potential, crystal), crystal


def random_points(count: int, seed: int = 5) -> np.ndarray:
    return np.random.default_rng(seed).uniform(-0.5, 0.5, (count, 3))


def disturbed(name: str) -> tuple[PairModel, Particles]:
    """Return a strained cell with every centre, shells included, off its place."""
    model, crystal = at_rest(name)
    rng = np.random.default_rng(1)
    particles = model.particles(crystal)
    lattice = particles.lattice @ (np.eye(3) + 0.02 * rng.normal(size=(3, 3)))
    positions = particles.positions + 0.03 * rng.normal(size=particles.positions.shape)
    return model, replace(particles, lattice=lattice, positions=positions)


def moved(particles: Particles, change: np.ndarray) -> Particles:
    """Displace the centres, then deform the cell by exp ε."""
    deformation = expm(np.einsum("e,eab->ab", change[:6], STRAINS))
    positions = particles.positions + change[6:].reshape(-1, 3)
    return replace(particles, lattice=particles.lattice @ deformation.T, positions=positions @ deformation.T)


@pytest.mark.parametrize("name", NAMES)
def test_gradient_and_hessian_by_finite_differences(name: str) -> None:
    """Common practice, no source: central differences, five points for the curvature."""
    model, particles = disturbed(name)
    response = lattice_response(model, particles)
    size = len(response.gradient)

    def energy(change: np.ndarray) -> float:
        return lattice_response(model, moved(particles, change)).energy

    h = 1e-4
    numeric = [(energy(h * row) - energy(-h * row)) / (2.0 * h) for row in np.eye(size)]
    scale = np.abs(response.gradient).max()
    assert np.abs(np.array(numeric) - response.gradient).max() < 1e-6 * max(scale, 1e-2)
    h = 2e-3
    for direction in np.random.default_rng(2).normal(size=(4, size)):
        e = [energy(k * h * direction) for k in (-2, -1, 0, 1, 2)]
        curvature = (-e[0] + 16.0 * e[1] - 30.0 * e[2] + 16.0 * e[3] - e[4]) / (12.0 * h * h)
        assert curvature == pytest.approx(direction @ response.hessian @ direction, rel=1e-5)


@pytest.mark.parametrize("name", NAMES)
def test_force_constants_are_hermitian_and_obey_the_acoustic_sum_rule(name: str) -> None:
    """M. Born and K. Huang, Dynamical Theory of Crystal Lattices (1954), §§23-24."""
    model, crystal = at_rest(name)
    particles = model.particles(crystal)
    values = force_constants_at(model, particles, np.vstack([np.zeros(3), random_points(5)]))
    scale = np.abs(values).max()
    assert np.abs(values - values.conj().swapaxes(1, 2)).max() < 1e-11 * scale
    blocks = values[0].reshape(particles.size, 3, particles.size, 3)
    assert np.abs(blocks.sum(axis=2)).max() < 1e-10 * scale
    opposite = force_constants_at(model, particles, -random_points(5))
    assert np.abs(values[1:].conj() - opposite).max() < 1e-11 * scale


@pytest.mark.parametrize("name", NAMES)
def test_rotation_leaves_energy_and_frequencies(name: str) -> None:
    model, crystal = at_rest(name)
    particles = model.particles(crystal)
    turn = np.linalg.qr(np.random.default_rng(4).normal(size=(3, 3)))[0]
    turned = replace(particles, lattice=particles.lattice @ turn.T, positions=particles.positions @ turn.T)
    assert lattice_response(model, turned).energy == pytest.approx(lattice_response(model, particles).energy)
    q = random_points(4)
    one = phonons.frequencies(phonons.MassWeighting(crystal.masses).dynamical(force_constants_at(model, particles, q)))
    two = phonons.frequencies(phonons.MassWeighting(crystal.masses).dynamical(force_constants_at(model, turned, q)))
    assert two == pytest.approx(one, rel=1e-8, abs=1e-6)


@pytest.mark.parametrize("name", NAMES)
def test_a_doubled_cell_has_twice_the_energy_and_the_same_waves(name: str) -> None:
    model, crystal = at_rest(name)
    particles = model.particles(crystal)
    # cores first, then shells: a doubled cell keeps that order
    order = np.argsort(np.tile(particles.kind, 2), kind="stable")
    positions = np.vstack([particles.positions, particles.positions + particles.lattice[0]])[order]
    lattice = particles.lattice * np.array([[2.0], [1.0], [1.0]])
    site = np.concatenate([particles.site, particles.site + crystal.size])[order]
    double = Particles(lattice, positions, np.tile(particles.kind, 2)[order], site)
    response = lattice_response(model, double)
    assert response.energy == pytest.approx(2.0 * lattice_response(model, particles).energy, rel=1e-10)
    q = np.array([[0.13, 0.21, -0.34]])
    small = np.linalg.eigvalsh(force_constants_at(model, particles, q)[0])
    big = np.linalg.eigvalsh(force_constants_at(model, double, q * np.array([2.0, 1.0, 1.0]))[0])
    for value in small:
        assert np.abs(big - value).min() < 1e-8 * np.abs(small).max()


def test_lengths_and_energies_scale() -> None:
    """LJ of doubled σ on a doubled cell: same energy, a quarter of every force constant (dimensions)."""
    case = reference_case("S3")
    crystal = build_crystal(case.crystal)
    pairs = tuple(
        replace(p, parameters={**p.parameters, "B": p.parameters["B"] * 2.0 ** p.parameters["n"]})
        for p in case.potential.pairs
    )
    one, two = pair_model(case.potential, crystal), pair_model(replace(case.potential, pairs=pairs), crystal)
    large = crystal.strained(np.array([np.log(2.0)]))
    here, there = one.particles(crystal), two.particles(large)
    assert lattice_response(two, there).energy == pytest.approx(lattice_response(one, here).energy, rel=1e-11)
    q = random_points(3)
    assert 4.0 * force_constants_at(two, there, q) == pytest.approx(
        force_constants_at(one, here, q), rel=1e-9, abs=1e-10
    )


@pytest.mark.parametrize("name", ["S1", "S2", "S3", "S5", "S6"])
def test_phonopy_road_against_ewald_at_random_q(name: str) -> None:
    """Below 10⁻³ THz everywhere, at the supercell that a prediction begins with.

    Copper's Morse tail (decay length 0.74 Å) needs the next one, to which a prediction goes by itself.
    """
    case = reference_case(name)
    model, crystal = at_rest(name)
    q = random_points(60, seed=11)
    span = GENERAL_SPAN * (1.4 if name == "S5" else 1.0)
    lattice = uniform_lattice(model, scaled_energy(model, crystal), supercells_for(crystal, span))
    through_phonopy = phonons.frequencies(lattice.motion(q)(np.zeros(1)))
    exact = phonons.frequencies(lattice.exact_motion(q)(np.zeros(1)))
    assert np.abs(through_phonopy - exact).max() < 1e-3, case.title


@pytest.mark.parametrize("name", NAMES)
def test_phonopy_road_is_exact_at_commensurate_q(name: str) -> None:
    """A supercell holds the waves that fit into it exactly, dipole term or not."""
    model, crystal = at_rest(name)
    particles = model.particles(crystal)
    q = commensurate_points((4, 4, 4))[1:]
    cell = phonons.supercell(particles, (4, 4, 4))
    weighting = phonons.MassWeighting(crystal.masses)
    through_phonopy = weighting.dynamical(phonons.interpolate(model, particles, cell)(q))
    exact = weighting.dynamical(force_constants_at(model, particles, phonons.first_zone(crystal.lattice, q)))
    assert phonons.frequencies(through_phonopy) == pytest.approx(phonons.frequencies(exact), rel=1e-6)


@pytest.mark.parametrize("name", [*NAMES, "rutile"])
def test_long_waves_travel_with_the_speed_of_sound(name: str) -> None:
    """Slopes of the acoustic branches against the Christoffel equation of the elastic constants."""
    model, crystal = rutile() if name == "rutile" else at_rest(name)
    if name == "rutile":
        from thermex.case.published import case_from_published
        from thermex.expansion import ground_of

        crystal = ground_of(case_from_published("MA91 TiO2", (300.0,)), crystal)[0].static.crystal
    particles = model.particles(crystal)
    constants = stiffness(lattice_response(model, particles), crystal.volume, 0.0)
    density = crystal.masses.sum() / crystal.volume
    weighting = phonons.MassWeighting(crystal.masses)
    for direction in random_points(4, seed=8):
        unit = direction / np.linalg.norm(direction)
        step = 2e-3  # 1/Å
        q = (step * unit @ crystal.lattice.T)[None]
        found = phonons.frequencies(weighting.dynamical(force_constants_at(model, particles, q)))[0, :3]
        # ν = v |q| with |q| in 1/Å: 1 THz Å = 0.1 km/s
        assert found / step * 0.1 == pytest.approx(sound_speeds(constants, density, unit), rel=2e-4)


@pytest.mark.parametrize("name", ["S1", "S2", "S3", "S5"])
def test_cauchy_relation(name: str) -> None:
    """C₁₂ = C₄₄ for central forces with every atom at a centre of symmetry (Born and Huang 1954, §11)."""
    model, crystal = at_rest(name)
    constants = stiffness(lattice_response(model, model.particles(crystal)), crystal.volume, 0.0)
    assert constants[0, 1] == pytest.approx(constants[3, 3], rel=1e-7)
