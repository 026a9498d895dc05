"""Sampling: gradients, limits, two estimators in one run, the simulated values of the reference."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

import numpy as np
import pytest
from anharmonic_cases import case
from classical_crystal import classical_crystal

from thermex import convergence
from thermex.anharmonic.correction import Quasiharmonic
from thermex.anharmonic.leading_order import LeadingOrder, leading_order
from thermex.anharmonic.method import outlook_on
from thermex.anharmonic.sampled_term import Points, SampledTerm, fit
from thermex.anharmonic.sampling import Plan, Sampled, Supercell, make_supercell, sample
from thermex.anharmonic.term import AnharmonicTerm
from thermex.anharmonic.walkers import Cell, at_rest, cell_at, run
from thermex.chebyshev import Box
from thermex.constants import BOLTZMANN


def cell_of(name: str, row: int) -> tuple[Cell, Supercell, float, dict[str, float]]:
    """Return the smallest supercell of a case at the scale of one reference row."""
    model, crystal, rows = case(name)
    x = float(np.log(rows[row]["a_classical_exact"] / crystal.lattice_parameters[0]))
    supercell = make_supercell(model, crystal, 2)
    return cell_at(supercell.periodic, supercell.bare, x), supercell, x, rows[row]


def test_forces_are_gradients_of_the_residual() -> None:
    cell, supercell, x, row = cell_of("S2", 2)
    random = np.random.default_rng(1)
    y = np.sqrt(BOLTZMANN * row["T"]) * random.normal(size=(cell.size, 2))
    v, h = random.normal(size=y.shape), 1e-5
    _, gradient = cell.force(y)
    slope = (cell.force(y + h * v)[0] - cell.force(y - h * v)[0]) / (2 * h)
    np.testing.assert_allclose((gradient * v).sum(axis=0), slope, rtol=1e-4)
    w = cell.displacements(y)
    up, down = (cell_at(supercell.periodic, supercell.bare, x + s * 1e-4).residual for s in (1, -1))
    strain = (up.force(w)[0] - down.force(w)[0]) / 2e-4
    np.testing.assert_allclose(cell.residual.strain_slope(w), strain, rtol=1e-5)


def test_residual_begins_at_third_order() -> None:
    cell, _, _, _row = cell_of("S3", 2)
    y = 1e-3 * np.random.default_rng(2).normal(size=(cell.size, 1))
    energies = [cell.force(s * y)[0][0] for s in (1.0, 2.0, -1.0, -2.0)]
    assert energies[1] - energies[3] == pytest.approx(8.0 * (energies[0] - energies[2]), rel=1e-3)
    assert abs(energies[0]) < 1e-3 * 0.5 * float((y**2).sum())


def averages(cell: Cell, kelvin: float, blocks: int) -> np.ndarray:
    """Return mapped force, direct force and mapped energy, shape (3, samples), over (k_B T)²."""
    random = np.random.default_rng(11)
    seen = run(cell, kelvin, at_rest(cell, 16), 6, random)
    rows = []
    for _ in range(blocks):
        seen = run(cell, kelvin, seen.y, 10, random)
        rows.append(np.stack([seen.mapped_force, seen.direct_force, seen.mapped_energy]))
    return np.concatenate(rows, axis=1) / (BOLTZMANN * kelvin) ** 2


def test_low_temperature_limit_is_the_leading_order_of_the_same_cell() -> None:
    cell, supercell, x, _row = cell_of("S3", 0)
    own = supercell.leading(np.array([[x - 0.01, x + 0.01]]))
    value, slope, _ = own.value(np.array([x]))
    found = averages(cell, 0.3, 12) / supercell.primitive
    error = found.std(axis=1) / np.sqrt(found.shape[1])
    assert abs(found[0].mean() - slope[0]) < 3.0 * error[0]
    assert error[0] < 0.03 * slope[0]
    assert abs(found[2].mean() + value[0]) < 3.0 * error[2]


def test_virial_agrees_with_the_mapped_force_in_one_run() -> None:
    # S. G. Moustafa, A. J. Schultz and D. A. Kofke, Phys. Rev. E 92, 043303 (2015): no bias
    cell, _, _, row = cell_of("S3", 7)
    found = averages(cell, row["T"], 25)
    difference = found[1] - found[0]
    error = difference.std() / np.sqrt(len(difference))
    assert abs(difference.mean()) < 3.0 * error
    assert found[0].std() < 0.5 * found[1].std()


@pytest.mark.parametrize("row", [3, 5])
def test_force_of_argon_is_near_that_of_the_reference_run(row: int) -> None:
    # D_over_kT2 of anharmonic.json, 108 atoms; 32 atoms differ from it by 2 to 3 %
    cell, supercell, _, reference = cell_of("S3", row)
    found = averages(cell, reference["T"], 25)[0] / supercell.primitive
    error = found.std() / np.sqrt(len(found))
    assert found.mean() == pytest.approx(reference["D_over_kT2"], abs=0.035 * found.mean() + 3.0 * error)


def sampled_crystal(name: str, goal: float) -> tuple[np.ndarray, np.ndarray, np.ndarray, Sampled]:
    """Return sampled α, its error and the reference α of one case to t = 0.75, and the sampling."""
    model, crystal, rows = case(name)
    rows = [r for r in rows if 0.2 < r["t"] < 0.75]
    temperature = np.array([r["T"] for r in rows])
    found = classical_crystal(model, crystal, 1.05 * float(temperature[-1]))
    leading = leading_order(model, found.crystal, found.surface.box.window)
    base = base_of(found, temperature)
    outcome = sample(
        model, found.crystal, leading, outlook_on(base, 1.05 * temperature[-1]), Plan(1.05 * temperature[-1], goal, 5),
        lambda stage, done, total: None,
    )  # fmt: skip
    best = found.states(temperature, outcome.best)
    error = np.sqrt(sum(convergence.relative(found.states(temperature, c), best) ** 2 for c in outcome.companions))
    exact = np.array([r["alpha_exact_inf"] for r in rows])
    return best.alpha_volume / 3.0, error, exact, outcome


def base_of(found, temperature: np.ndarray) -> Quasiharmonic:
    plain = found.states(temperature)
    return Quasiharmonic(
        crystal=found.crystal,
        surface=found.surface,
        load=found.load,
        temperature=temperature,
        x=plain.x,
        alpha=plain.alpha_volume,
        supercell_error=np.zeros(len(temperature)),
        effective=temperature,
        end_K=found.travelled.end_K,
        debye_K=0.0,
    )


@pytest.mark.parametrize(
    "name", ["S3", pytest.param("S2", marks=pytest.mark.slow), pytest.param("S1", marks=pytest.mark.slow)]
)
def test_alpha_agrees_with_the_simulated_one(name: str) -> None:
    # alpha_exact_inf of anharmonic.json at t between 0.24 and 0.74: classical hybrid Monte Carlo of larger cells
    alpha, error, exact, outcome = sampled_crystal(name, 0.02)
    assert (np.abs(alpha / exact - 1.0) < 0.02 + 2.0 * error).all()
    assert outcome.error < 0.02
    assert outcome.fit.proportional


def short(monkey: pytest.MonkeyPatch) -> tuple[LeadingOrder, object]:
    """Make sampling tiny: one pair of walkers, two trajectories."""
    monkey.setattr("thermex.anharmonic.sampling.PAIRS", 2)
    monkey.setattr("thermex.anharmonic.sampling.TRAJECTORIES", 2)
    model, crystal, _ = case("S3")
    found = classical_crystal(model, crystal, 40.0)
    leading = leading_order(model, found.crystal, found.surface.box.window)
    return leading, (model, found, outlook_on(base_of(found, np.array([20.0, 30.0, 40.0])), 40.0))


def test_a_seed_gives_the_same_run_whatever_runs_it(monkeypatch: pytest.MonkeyPatch) -> None:
    from concurrent.futures import ThreadPoolExecutor

    leading, (model, found, outlook) = short(monkeypatch)
    plan = Plan(40.0, 0.5, 3)
    told: list[tuple[str, int, int]] = []

    def once(mapper) -> Sampled:
        return sample(model, found.crystal, leading, outlook, plan, lambda *a: told.append(a), mapper)

    first = once(map)
    with ThreadPoolExecutor(2) as pool:
        second = once(pool.map)
    np.testing.assert_array_equal(first.points.force, second.points.force)
    assert told[0][0] == "sampling"
    assert all(done <= total for _, done, total in told)


def test_interruption_keeps_what_is_done(monkeypatch: pytest.MonkeyPatch) -> None:
    leading, (model, found, outlook) = short(monkeypatch)
    calls = 0

    def impatient(function, tasks: Iterable) -> Iterator:
        nonlocal calls
        calls += 1
        if calls > 5:
            raise KeyboardInterrupt
        return map(function, tasks)

    kept = sample(model, found.crystal, leading, outlook, Plan(40.0, 1e-9, 3), lambda *a: None, impatient)
    assert kept.interrupted
    assert kept.blocks == 4
    calls = 5
    with pytest.raises(KeyboardInterrupt):
        sample(model, found.crystal, leading, outlook, Plan(40.0, 1e-9, 3), lambda *a: None, impatient)


def made_up() -> tuple[AnharmonicTerm, Points, np.ndarray]:
    """Return points made from a known term: R = 1 − 0.002 T + 10⁻⁶ T², h = 3·10⁻⁴ T."""
    leading = AnharmonicTerm(Box(np.array([[0.0, 0.04]]), (3,)), np.array([10.0, 6.0, 1.0]))
    t, x = np.array([30.0, 60.0, 90.0, 120.0]), np.array([0.01, 0.015, 0.02, 0.03])
    term = SampledTerm(leading, np.polynomial.Polynomial([1.0, -2e-3, 1e-6]), np.polynomial.Polynomial([0.0]),
                       np.polynomial.Polynomial([0.0, 3e-4]))  # fmt: skip
    values = term.at(t)(x[:, None])
    energy = values.energy + t * values.entropy
    return leading, Points(t, x, values.slope[:, 0], 1e-9 + 0 * t, energy, 1e-9 + 0 * t, leading), values


def test_fit_returns_the_term_that_made_the_points() -> None:
    leading, points, values = made_up()
    found = fit(points, leading)
    again = found.best.at(points.temperature)(points.x[:, None])
    assert found.proportional
    for part in ("energy", "slope", "curvature", "entropy", "entropy_slope", "heat"):
        np.testing.assert_allclose(getattr(again, part), getattr(values, part), rtol=1e-6)


def test_sampled_term_has_consistent_derivatives() -> None:
    leading, points, values = made_up()
    term = fit(points, leading).best
    t, x, dt, h = points.temperature, points.x[:, None], 1e-2, 1e-5
    warm, cold = term.at(t + dt)(x), term.at(t - dt)(x)
    up, down = term.at(t)(x + h), term.at(t)(x - h)
    np.testing.assert_allclose(values.entropy, -(warm.energy - cold.energy) / (2 * dt), rtol=1e-5)
    np.testing.assert_allclose(values.heat, t * (warm.entropy - cold.entropy) / (2 * dt), rtol=1e-5)
    np.testing.assert_allclose(values.slope[:, 0], (up.energy - down.energy) / (2 * h), rtol=1e-5)
    np.testing.assert_allclose(values.entropy_slope[:, 0], (up.entropy - down.entropy) / (2 * h), rtol=1e-5)
    np.testing.assert_allclose(values.curvature[:, 0, 0], (up.slope - down.slope)[:, 0] / (2 * h), rtol=1e-5)
