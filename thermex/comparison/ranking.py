"""Several cases of one material, ranked by how well they reproduce the same measurements."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np

from thermex.case.case import Case
from thermex.comparison.assessment import Assessment, assess
from thermex.comparison.budget import largest_part
from thermex.comparison.deviation import EXPANSION
from thermex.errors import InputError, NoAnswerError
from thermex.exploration.executor import InProcess
from thermex.measured.series import FROM_MEMORY

Progress = Callable[[str, int, int], None]


@dataclass(frozen=True, slots=True)
class Ranked:
    """One case among several."""

    title: str
    source: str
    rms: float
    """Rms relative deviation from the expansion measurements common to all; NaN without an answer."""
    kind: str
    """Which answer was compared: "quasi-harmonic", "leading order" or "sampled"; "" without one."""
    reason: str
    end_K: float
    assessment: Assessment | None


@dataclass(frozen=True, slots=True)
class Ranking:
    """Several cases, best first, and what they were ranked by."""

    rows: tuple[Ranked, ...]
    tolerance: float
    points: int
    """Measured values that every answered case covers."""
    temperatures: tuple[float, ...]
    """Their temperatures, K."""
    left_out: str
    """What was left out of the score, in words."""

    def __iter__(self) -> Iterator[Ranked]:
        """Iterate over the cases, best first."""
        return iter(self.rows)

    def __len__(self) -> int:
        """Return the number of cases."""
        return len(self.rows)

    def __getitem__(self, index: int) -> Ranked:
        """Return one case by its place."""
        return self.rows[index]


def _silent(stage: str, done: int, total: int) -> None:
    """Report nothing."""


def _assess_quietly(arguments: tuple[Case, float]) -> Assessment | str:
    """Assess one of several cases; the reason where there is no answer."""
    try:
        return assess(arguments[0], tolerance=arguments[1], with_sensitivities=False)
    except (NoAnswerError, InputError) as error:
        return str(error)


def rank(
    cases: Sequence[Case], *, tolerance: float = 0.1, executor: Executor | None = None, progress: Progress = _silent
) -> Ranking:
    """Rank several cases of one material by their rms deviation from the same measurements.

    A measured value counts where every answered case covers it. Values from memory alone, and temperatures
    at which a case leaves the range its method was tested in, are left out as long as enough remain.

    Raises
    ------
    InputError
        The cases are held against different materials.
    """
    refuse_mixed(cases)
    pool = executor or InProcess()
    futures = [pool.submit(_assess_quietly, (case, tolerance)) for case in cases]
    results: list[Assessment | str] = []
    for k, future in enumerate(futures):
        results.append(future.result())
        progress("cases", k + 1, len(cases))
    common, words = _common([r for r in results if isinstance(r, Assessment)])
    out = []
    for case, result in zip(cases, results, strict=True):
        cite = case.potential.citation or case.source
        if isinstance(result, str):
            out.append(Ranked(case.title, cite, float("nan"), "", result, float("nan"), None))
            continue
        reason = largest_part(result.budget) if result.budget else "no budget: factors not measured"
        end, kind = result.modelled.prediction.valid_to_K, result.modelled.kind
        out.append(Ranked(case.title, cite, _rms_over(result, common), kind, reason, end, result))
    rows = tuple(sorted(out, key=lambda r: (not np.isfinite(r.rms), r.rms)))
    return Ranking(rows, tolerance, len(common), tuple(sorted({point[2] for point in common})), words)


def refuse_mixed(cases: Sequence[Case]) -> None:
    """Raise :class:`InputError` when the cases are not all held against the same measurements."""
    named = {(c.measured.material, str(c.measured.file or "")) if c.measured else ("", "") for c in cases}
    if len(named) > 1:
        said = ", ".join(sorted(" ".join(part for part in pair if part) or "none" for pair in named))
        raise InputError(
            f"the cases are held against different measurements: {said}",
            where="measured",
            fix="rank potentials of one material, with the same [measured] table in every case",
        )


#: A measured value: (source, quantity, K).
Point = tuple[str, str, float]

#: As long as this many values remain, doubtful ones are left out of a ranking.
ENOUGH = 5


def _points(a: Assessment) -> dict[Point, tuple[float, bool]]:
    """Return the relative deviation of every usable expansion value, and whether it is from memory alone."""
    out: dict[Point, tuple[float, bool]] = {}
    for d in a.deviations:
        if d.series.quantity in EXPANSION and d.series.usable:
            recalled = d.series.how == FROM_MEMORY
            for t, r in zip(d.temperature_K, d.relative, strict=True):
                out[(d.series.source, d.quantity, float(t))] = (float(r), recalled)
    return out


def _common(answered: Sequence[Assessment]) -> tuple[set[Point], str]:
    """Return the measured values that count, and what was left out in words."""
    if not answered:
        return set(), ""
    found = [_points(a) for a in answered]
    common = set.intersection(*(set(points) for points in found))
    words = []
    looked_up = {point for point in common if not found[0][point][1]}
    if len(looked_up) >= ENOUGH:
        words += ["values from memory alone are left out"] if len(looked_up) < len(common) else []
        common = looked_up
    limit = min(a.modelled.tested_to_K for a in answered)
    tested = {point for point in common if point[2] <= limit}
    if len(tested) < len(common):
        beyond = f"above {limit:.0f} K a case leaves the tested range of its method"
        words.append(f"{beyond}, so these temperatures are left out" if len(tested) >= ENOUGH else beyond)
        common = tested if len(tested) >= ENOUGH else common
    return common, "; ".join(words)


def _rms_over(a: Assessment, common: set[Point]) -> float:
    values = [value for point, (value, _) in _points(a).items() if point in common]
    return float(np.sqrt(np.mean(np.square(values)))) if values else float("nan")
