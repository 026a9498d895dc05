"""Sampled anharmonicity: runs at a few temperatures along the branch until α is known well enough."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from time import perf_counter

import numpy as np
from numpy.typing import NDArray

from thermex.anharmonic.correlation import PeriodicCrystal, periodic_crystal
from thermex.anharmonic.leading_order import LeadingOrder, leading_parts
from thermex.anharmonic.sampled_term import Points, SampledFit, fit
from thermex.anharmonic.supercell import conventional_crystal, supercell_bonds
from thermex.anharmonic.term import AnharmonicTerm, term_through
from thermex.anharmonic.vertices import BareBonds, bare_bonds
from thermex.anharmonic.walkers import WARMING, Cell, at_rest, cell_at, run
from thermex.chebyshev import Box
from thermex.crystal.crystal import Crystal
from thermex.free_energy import Term
from thermex.potential.model import PairModel

Array = NDArray[np.float64]
Progress = Callable[[str, int, int], None]

#: Where the sampled temperatures lie, as fractions of the highest.
LEVELS = (0.35, 0.6, 0.8, 1.0)

#: Cutoff of the pair residuals in lattice parameters, and the same with ions of charge ±2 and more.
REACH, FAR_REACH = 1.55, 2.15

#: Antithetic pairs of walkers and trajectories in a block.
PAIRS, TRAJECTORIES = 8, 10

#: Blocks at every temperature: at least, and at most.
FEWEST, MOST = 2, 400

#: F₂′ of the smaller supercell may differ by this share from that of the infinite crystal.
SIZE_TOLERANCE = 0.15


@dataclass(frozen=True, slots=True)
class Plan:
    """What to sample and how well."""

    highest_K: float
    """Highest temperature sampled."""
    goal: float
    """Relative statistical error of α aimed at."""
    seed: int


@dataclass(frozen=True, slots=True)
class Sampled:
    """The outcome of a sampling."""

    fit: SampledFit
    points: Points
    atoms: int
    """Atoms in the supercell."""
    blocks: int
    """Blocks of trajectories at every temperature."""
    accepted: float
    """Share of trajectories accepted."""
    error: float
    """Relative statistical error of α at the worst of the temperatures judged."""
    interrupted: bool
    seconds: float

    @property
    def best(self) -> Term:
        """The fitted term."""
        return self.fit.best

    @property
    def companions(self) -> tuple[Term, ...]:
        """The term moved along each independent direction of its statistical error."""
        return tuple(self.fit.companions)


@dataclass(frozen=True, slots=True)
class Outlook:
    """Where the crystal stands with a given term: what sampling asks of the equilibrium."""

    strain: Callable[[Term, Array], Array]
    """Term, temperatures (nT,) → x (nT,) at the minimum of F + PV."""
    error: Callable[[SampledFit], float]
    """Relative error of α that the companions of a fit leave, at the worst temperature wanted."""


@dataclass(frozen=True, slots=True)
class Supercell:
    """A periodic supercell with the bonds whose residuals are sampled."""

    periodic: PeriodicCrystal
    bare: BareBonds
    near: BareBonds
    """The same bonds of one conventional cell."""
    primitive: int
    """Primitive cells in it."""

    def leading(self, window: Array) -> AnharmonicTerm:
        """Return F₂ of this very supercell over a window, per primitive cell."""
        box = Box(window, (7,))
        share = self.periodic.cells / self.primitive
        values = [sum(leading_parts(self.periodic, self.near, float(x))) * share for x in box.grid[:, 0]]
        return term_through(box, np.array(values))


@dataclass(frozen=True, slots=True)
class Block:
    """One task: a block of trajectories at one temperature, ready for a worker."""

    cell: Cell
    kelvin: float
    y: Array | None
    """Where the walkers stand; None to start from rest."""
    seed: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Outcome:
    """What one block gave: forces and energies (pairs,) per supercell, and where the walkers stand."""

    force: Array
    energy: Array
    accepted: float
    y: Array


def work(block: Block) -> Outcome:
    """Run one block; reproducible from its seed, whichever worker runs it."""
    random = np.random.default_rng(np.random.SeedSequence(block.seed))
    y = block.y
    if y is None:
        y = run(block.cell, block.kelvin, at_rest(block.cell, PAIRS), WARMING, random).y
    seen = run(block.cell, block.kelvin, y, TRAJECTORIES, random)
    return Outcome(seen.mapped_force, seen.mapped_energy, seen.accepted, seen.y)


def make_supercell(model: PairModel, crystal: Crystal, repeat: int) -> Supercell:
    """Build a supercell of ``repeat``³ conventional cells."""
    cell = conventional_crystal(crystal)
    highest = max(abs(kind.charge) for kind in model.kinds)
    reach = (FAR_REACH if highest > 1.5 else REACH) * float(crystal.lattice_parameters[0])
    near = bare_bonds(model, model.particles(cell), reach)
    periodic = periodic_crystal(model, cell, (repeat, repeat, repeat))
    bare = supercell_bonds(model, cell, repeat, reach)
    return Supercell(periodic, bare, near, repeat**3 * cell.size // crystal.size)


def fitting_supercell(
    model: PairModel, crystal: Crystal, leading: LeadingOrder, x: float
) -> tuple[Supercell, AnharmonicTerm]:
    """Return 2³ conventional cells, or 3³ where F₂′ of the smaller is too far from the infinite crystal's."""
    window = leading.best.box.window
    small = make_supercell(model, crystal, 2)
    own = small.leading(window)
    slope, limit = (term.value(np.array([x]))[1][0] for term in (own, leading.best))
    if abs(slope - limit) <= SIZE_TOLERANCE * abs(limit) or 27 * small.periodic.crystal.size > 400:
        return small, own
    large = make_supercell(model, crystal, 3)
    return large, large.leading(window)


Mapper = Callable[[Callable[[Block], Outcome], Iterable[Block]], Iterator[Outcome]]


def sample(
    model: PairModel,
    crystal: Crystal,
    leading: LeadingOrder,
    outlook: Outlook,
    plan: Plan,
    progress: Progress,
    mapper: Mapper = map,
) -> Sampled:
    """Sample the anharmonic force along the branch until the error of α meets the goal.

    A first block at the strains of the leading order finds better strains; only the blocks after it
    count. Ctrl-C keeps what is done.

    Parameters
    ----------
    mapper
        Runs independent blocks: ``map``, or that of a ``concurrent.futures`` executor.

    Raises
    ------
    UnstableCrystalError
        The harmonic crystal is unstable in the window.
    KeyboardInterrupt
        Interrupted before anything was done that could be kept.
    """
    began = perf_counter()
    temperature = plan.highest_K * np.array(LEVELS)
    x = outlook.strain(leading.best, temperature)
    supercell, own = fitting_supercell(model, crystal, leading, float(x[-1]))
    runs = Runs(supercell, own, temperature, plan.seed)
    progress("sampling", 0, FEWEST + 1)
    first = runs.at(x).extended(mapper)
    x = outlook.strain(fit(first.points(), leading.best).best, temperature)
    series = runs.at(np.clip(x, *leading.best.box.window[0]), first.round)
    error, pure, interrupted = float("inf"), float("inf"), False
    # more blocks do not help once what is left is the misfit of a smooth curve
    while series.blocks < MOST and (series.blocks < FEWEST or (error > plan.goal and pure > plan.goal / 3.0)):
        try:
            series = series.extended(mapper)
        except KeyboardInterrupt:
            if series.blocks < FEWEST:
                raise
            interrupted = True
            break
        if series.blocks >= FEWEST:
            trial = fit(series.points(), leading.best)
            error = outlook.error(trial)
            pure = error / max(trial.misfit, 1.0)
        progress("sampling", series.blocks, _expected(series.blocks, error, plan.goal))
    points = series.points()
    return Sampled(
        fit(points, leading.best),
        points,
        supercell.periodic.cells * supercell.periodic.crystal.size,
        series.blocks,
        series.accepted,
        error,
        interrupted,
        perf_counter() - began,
    )


def _expected(blocks: int, error: float, goal: float) -> int:
    """Return how many blocks the goal will take, errors falling as one over the root."""
    if not np.isfinite(error):
        return max(FEWEST, blocks + 1)
    return int(min(max(np.ceil(blocks * (error / goal) ** 2), blocks + (error > goal)), MOST))


@dataclass(frozen=True, slots=True)
class Series:
    """Blocks run so far at every temperature, at fixed strains."""

    runs: Runs
    x: Array
    cells: tuple[Cell, ...]
    y: tuple[Array | None, ...]
    force: tuple[Array, ...] = ()
    """One array (temperatures, pairs) a block, eV per primitive cell."""
    energy: tuple[Array, ...] = ()
    shares: tuple[float, ...] = ()
    round: int = 0
    """Number that makes the seeds of the next block differ from those of all before it."""

    @property
    def blocks(self) -> int:
        """Blocks that count."""
        return len(self.force)

    @property
    def accepted(self) -> float:
        """Share of trajectories accepted."""
        return float(np.mean(self.shares)) if self.shares else float("nan")

    def extended(self, mapper: Mapper) -> Series:
        """Run one more block at every temperature."""
        runs = self.runs
        tasks = [
            Block(cell, float(kelvin), y, (runs.seed, k, self.round))
            for k, (cell, kelvin, y) in enumerate(zip(self.cells, runs.temperature, self.y, strict=True))
        ]
        found = list(mapper(work, tasks))
        per_cell = 1.0 / runs.supercell.primitive
        return Series(
            runs,
            self.x,
            self.cells,
            tuple(o.y for o in found),
            (*self.force, per_cell * np.stack([o.force for o in found])),
            (*self.energy, per_cell * np.stack([o.energy for o in found])),
            (*self.shares, float(np.mean([o.accepted for o in found]))),
            self.round + 1,
        )

    def points(self) -> Points:
        """Average the blocks; errors from the scatter of pair averages over all blocks."""
        force, energy = np.concatenate(self.force, axis=1), np.concatenate(self.energy, axis=1)
        root = np.sqrt(force.shape[1] - 1.0)
        return Points(
            self.runs.temperature,
            self.x,
            force.mean(axis=1),
            force.std(axis=1) / root,
            energy.mean(axis=1),
            energy.std(axis=1) / root,
            self.runs.own,
        )


@dataclass(frozen=True, slots=True)
class Runs:
    """What all series of one sampling share."""

    supercell: Supercell
    own: AnharmonicTerm
    temperature: Array
    seed: int

    def at(self, x: Array, number: int = 0) -> Series:
        """Begin a series at strains x (nT,), walkers at rest; its blocks are numbered from ``number`` on."""
        cells = tuple(cell_at(self.supercell.periodic, self.supercell.bare, float(v)) for v in x)
        return Series(self, x, cells, (None,) * len(x), round=number)
