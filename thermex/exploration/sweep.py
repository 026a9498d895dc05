"""Sweeps: many predictions over one parameter of the potential, or over two."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Sequence
from concurrent.futures import Executor, Future, as_completed
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from thermex.case.case import Case
from thermex.case.pairs import AMPLITUDES
from thermex.case.parameters import parameter_value, with_parameter
from thermex.case.writer import case_hash
from thermex.commands.interruption import Interrupted
from thermex.errors import InputError
from thermex.exploration.executor import InProcess
from thermex.exploration.journal import Journal, open_journal
from thermex.exploration.point import Point, evaluate, evaluate_alone, point_of

#: What a journal line holds; a journal of another layout is not resumed.
JOURNAL = "2"

#: Told ("points", done, in all).
Progress = Callable[[str, int, int], None]


@dataclass(frozen=True, slots=True)
class Sweep:
    """Points over one parameter (or two), in the order of the values."""

    case: Case
    parameters: tuple[str, ...]
    """One name, or two."""
    values: tuple[tuple[float, ...], ...]
    """One entry a point: its value of each parameter."""
    hold: str
    """"parameters" or "distance"."""
    points: tuple[Point, ...]


def _silent(stage: str, done: int, total: int) -> None:
    """Report nothing."""


def sweep(
    case: Case,
    parameter: str,
    values: Sequence[float],
    *,
    hold: str = "parameters",
    second: tuple[str, Sequence[float]] | None = None,
    executor: Executor | None = None,
    folder: Path | None = None,
    progress: Progress = _silent,
) -> Sweep:
    """Predict a case at many values of a parameter of its potential.

    Parameters
    ----------
    parameter
        For example "Na-Cl.n".
    hold
        "parameters" keeps all others; "distance" keeps the static nearest-neighbour distance, the
        amplitude of the same pair being solved again at every value.
    second
        A second parameter with its values: every combination is a point (a map).
    executor
        Anything shaped like ``concurrent.futures.Executor``; in this process by default. It is given
        whole points: a sampled anharmonicity runs its blocks inside the worker that has the point.
    folder
        Where the journal is kept; the same call resumes.

    Raises
    ------
    InputError
        No such parameter; a folder that belongs to another case.
    """
    names = (parameter,) if second is None else (parameter, second[0])
    axes = [list(map(float, values))] if second is None else [list(map(float, values)), list(map(float, second[1]))]
    grid = [(v,) for v in axes[0]] if second is None else [(v, w) for v in axes[0] for w in axes[1]]
    for name in names:
        parameter_value(case, name)
    base = _held(case, parameter) if hold == "distance" else case
    cases = {}
    for entry in grid:
        changed = base
        for name, value in zip(names, entry, strict=True):
            changed = with_parameter(changed, name, value)
        cases[_key(entry)] = changed
    digest = hashlib.sha256("|".join([JOURNAL, case_hash(base), hold, *names]).encode()).hexdigest()
    with open_journal(folder, digest) as journal:
        run_points(cases, journal, executor or InProcess(), progress)
        points = tuple(point_of(journal.done[_key(entry)]) for entry in grid)
    return Sweep(case, names, tuple(grid), hold, points)


def run_points(cases: dict[str, Case], journal: Journal, executor: Executor, progress: Progress) -> None:
    """Compute every point that the journal does not hold yet; each is kept as it finishes."""
    waiting = {key: case for key, case in cases.items() if key not in journal.done}
    total, done = len(cases), len(cases) - len(waiting)
    progress("points", done, total)
    pending: dict[Future[Any], str] = {}
    try:
        if isinstance(executor, InProcess):
            for key, case in waiting.items():
                journal.add(key, evaluate(case).as_dict())
                done += 1
                progress("points", done, total)
            return
        pending = {executor.submit(evaluate_alone, case): key for key, case in waiting.items()}
        for future in as_completed(pending):
            journal.add(pending[future], future.result().as_dict())
            done += 1
            progress("points", done, total)
    except KeyboardInterrupt:
        for future in pending:
            future.cancel()
        where = f" in {journal.path}" if journal.path else ""
        raise Interrupted(f"{done} of {total} points are kept{where}; the same command goes on from there") from None


def _key(entry: tuple[float, ...]) -> str:
    return ", ".join(repr(v) for v in entry)


def _held(case: Case, parameter: str) -> Case:
    """Return the case with the amplitude of the swept pair replaced by the static distance it now gives."""
    label = parameter.split(".", maxsplit=1)[0]
    for index, pair in enumerate(case.potential.pairs):
        names = {"-".join(pair.between), "-".join(reversed(pair.between))}
        key = parameter.rsplit(".", 1)[1]
        if label in names and (key in pair.parameters or key == "static_distance"):
            if pair.static_distance is not None:
                return case
            distance = static_distance(case)
            kept = {k: v for k, v in pair.parameters.items() if k != AMPLITUDES[pair.form]}
            pairs = list(case.potential.pairs)
            pairs[index] = replace(pair, parameters=kept, static_distance=distance)
            return replace(case, potential=replace(case.potential, pairs=tuple(pairs)))
    raise InputError(f"{parameter} belongs to no pair", where="parameter", fix='hold "distance" needs a pair parameter')


def static_distance(case: Case) -> float:
    """Return the nearest-neighbour distance of the static lattice of a case, Å."""
    from thermex.crystal.build import build_crystal
    from thermex.expansion import ground_of

    ground, _ = ground_of(case, build_crystal(case.crystal))
    return ground.static.nearest_distance_A


def spread(start: float, stop: float, step: float) -> list[float]:
    """Return values from start to stop by step, the end included."""
    if step <= 0.0 or stop < start:
        raise InputError(f"from {start:g} to {stop:g} by {step:g}", where="--step", fix="give from ≤ to and step > 0")
    count = int(np.floor((stop - start) / step + 1e-9)) + 1
    if count > 5000:
        raise InputError(f"makes {count} points", where="--step", fix="at most 5000")
    return [round(start + k * step, 12) for k in range(count)]
