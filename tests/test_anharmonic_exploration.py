"""Sampled anharmonicity in sweeps and matches: the executor has the work, nothing nests, results are the same."""

from __future__ import annotations

from concurrent.futures import Executor, Future, ThreadPoolExecutor
from dataclasses import replace
from typing import Any

import pytest

from thermex.anharmonic.method import was_interrupted
from thermex.anharmonic.sampling import work
from thermex.case.case import Accuracy, Case
from thermex.case.published import case_from_published
from thermex.commands.interruption import Interrupted
from thermex.expansion import predict
from thermex.exploration.executor import InProcess, local_workers
from thermex.exploration.match import match
from thermex.exploration.point import evaluate
from thermex.exploration.sweep import sweep

EPSILON = "Ar-Ar.epsilon"


@pytest.fixture
def argon() -> Case:
    case = case_from_published("LJ58 Ar", (25.0, 35.0))
    return replace(case, accuracy=Accuracy(anharmonic="sampled", sampled_error=0.1, seed=7))


@pytest.fixture
def no_pool(monkeypatch: pytest.MonkeyPatch) -> None:
    """Forbid the threads that a sampling starts when it was given no executor."""

    def never(*_: object) -> None:
        raise AssertionError("a pool inside a pool")

    monkeypatch.setattr("thermex.anharmonic.method.ThreadPoolExecutor", never)


class Counting(Executor):
    """Computes at once and remembers what it was given."""

    def __init__(self) -> None:
        self.given: list[Any] = []

    def submit(self, fn: Any, /, *args: Any, **kwargs: Any) -> Future[Any]:
        self.given.append(fn)
        return InProcess().submit(fn, *args, **kwargs)


class Impatient(Counting):
    """Is interrupted, as by Ctrl-C, once it has been given sixteen blocks."""

    def submit(self, fn: Any, /, *args: Any, **kwargs: Any) -> Future[Any]:
        if len(self.given) == 16:
            raise KeyboardInterrupt
        return super().submit(fn, *args, **kwargs)


def test_interruption_keeps_a_prediction_but_no_point(argon: Case, monkeypatch: pytest.MonkeyPatch) -> None:
    endless = replace(argon, accuracy=replace(argon.accuracy, sampled_error=1e-9))
    found = predict(endless, executor=Impatient()).anharmonic
    assert found is not None and was_interrupted(found)
    monkeypatch.setattr("thermex.exploration.point.predict", lambda case, executor: predict(case, executor=Impatient()))
    with pytest.raises(Interrupted, match="0 of 2 points are kept"):
        sweep(endless, EPSILON, [0.0100, 0.0104])


def test_blocks_of_one_prediction_go_to_the_executor(argon: Case, no_pool: None) -> None:
    executor = Counting()
    found = evaluate(argon, executor)
    assert found.kind == "sampled"
    assert len(executor.given) >= 12  # a first and at least two more blocks at four temperatures
    assert set(executor.given) == {work}


def test_points_of_a_sweep_start_no_pool_of_their_own(argon: Case, no_pool: None) -> None:
    with ThreadPoolExecutor(2) as executor:
        found = sweep(argon, EPSILON, [0.0100, 0.0104], executor=executor)
    assert [p.kind for p in found.points] == ["sampled", "sampled"]


def test_worker_processes_give_the_numbers_of_this_process(argon: Case) -> None:
    values = [0.0100, 0.0104]
    here = sweep(argon, EPSILON, values)
    with local_workers(2) as executor:
        there = sweep(argon, EPSILON, values, executor=executor)
    for one, other in zip(here.points, there.points, strict=True):
        assert one.kind == other.kind == "sampled"
        assert one.alpha_linear_per_K == pytest.approx(other.alpha_linear_per_K, rel=1e-9)


def test_a_match_hands_its_blocks_to_the_executor(argon: Case, no_pool: None, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("thermex.anharmonic.sampling.PAIRS", 2)
    monkeypatch.setattr("thermex.anharmonic.sampling.TRAJECTORIES", 3)
    now = evaluate(argon, InProcess()).at("lattice_A", 35.0)
    executor = Counting()
    found = match(
        argon,
        "Ar-Ar.sigma",
        quantity="lattice_A",
        temperature_K=35.0,
        target=now,
        low=3.3,
        high=3.5,
        executor=executor,
    )
    assert found.value == pytest.approx(3.4, rel=1e-4)  # the value that made the target
    assert set(executor.given) == {work}
