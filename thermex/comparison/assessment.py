"""Assess: does a potential reproduce measured expansion, and if not, which physics is wrong."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from thermex.case.case import Case
from thermex.comparison.budget import Budget, budget, largest_part
from thermex.comparison.deviation import EXPANSION, FAILS, REPRODUCES, UNDECIDED, Deviation, deviation
from thermex.comparison.modelled import Modelled, modelled
from thermex.comparison.sensitivity import Sensitivity, band, sensitivities
from thermex.comparison.trust import static_fit_note, trust
from thermex.errors import InputError, NoAnswerError
from thermex.expansion import predict
from thermex.exploration.executor import InProcess
from thermex.measured import Material, Series, best_measured, load_material, load_series_file

Array = NDArray[np.float64]
Progress = Callable[[str, int, int], None]

#: Most temperatures at which a case is predicted for a comparison.
MOST_TEMPERATURES = 120


@dataclass(frozen=True, slots=True)
class Assessment:
    """A prediction held against what was measured."""

    case: Case
    modelled: Modelled
    tolerance: float
    deviations: tuple[Deviation, ...]
    budget: Budget | None
    sensitivities: tuple[Sensitivity, ...]
    sensitivity_temperatures: Array
    band: Array | None
    """Relative 1σ band of α from the parameter covariance, at the sensitivity temperatures."""
    trust: str
    static_fit: str | None
    verdict: str

    @property
    def passed(self) -> bool:
        """Whether nothing decided fails the tolerance."""
        return self.verdict != FAILS


@dataclass(frozen=True, slots=True)
class Ranked:
    """One case among several."""

    title: str
    source: str
    rms: float
    """Rms relative deviation of α over the measurements common to all; NaN without an answer."""
    reason: str
    end_K: float
    assessment: Assessment | None


def _silent(stage: str, done: int, total: int) -> None:
    """Report nothing."""


def measured_of(case: Case) -> tuple[Material | None, tuple[Series, ...]]:
    """Return the material and all series that a case is to be held against.

    Raises
    ------
    InputError
        The case names no measured values, or an unknown material.
    """
    if case.measured is None or not (case.measured.material or case.measured.file):
        raise InputError("the case names no measured values", where="measured", fix='add [measured] material = "…"')
    material = load_material(case.measured.material) if case.measured.material else None
    series: tuple[Series, ...] = load_series_file(case.measured.file) if case.measured.file else ()
    if material is not None:
        series = (*series, *material.series)
    return material, series


def at_measured_temperatures(case: Case, series: Sequence[Series]) -> Case:
    """Return the case with the temperatures of the measurements added, thinned where there are many."""
    found = {float(t) for s in series if s.quantity in EXPANSION for t in s.temperature_K}
    found |= {float(s.reference_temperature_K) for s in series if s.reference_temperature_K is not None}
    kept = sorted(t for t in found if 0.0 <= t <= 5000.0)
    if len(kept) > MOST_TEMPERATURES:
        kept = [kept[k] for k in np.unique(np.linspace(0, len(kept) - 1, MOST_TEMPERATURES).astype(int))]
    top = max(case.conditions.temperatures)
    wanted = sorted({0.0, 293.15, 298.15, 300.0, *case.conditions.temperatures, *(t for t in kept if t <= 1.5 * top)})
    merged = [t for k, t in enumerate(wanted) if k == 0 or t - wanted[k - 1] > 1e-6]
    return replace(case, conditions=replace(case.conditions, temperatures=tuple(merged)))


def assess(
    case: Case, *, tolerance: float = 0.1, with_sensitivities: bool = True, progress: Progress = _silent
) -> Assessment:
    """Hold the prediction of a case against every measured series of its material.

    Parameters
    ----------
    tolerance
        Relative rms deviation up to which a series is reproduced.
    with_sensitivities
        Whether every parameter is perturbed too (four predictions each).

    Raises
    ------
    InputError
        No measured values in the case, or a tolerance that is not positive.
    """
    if not 0.0 < tolerance < 10.0:
        raise InputError(f"the tolerance is {tolerance:g}", where="tolerance", fix="give a fraction such as 0.1")
    material, series = measured_of(case)
    m = modelled(predict(at_measured_temperatures(case, series), progress=progress))
    deviations = tuple(d for d in (deviation(m, s, tolerance) for s in series) if d is not None)
    split = budget(m, material, _budget_temperatures(series)) if material is not None else None
    asked = np.array(case.conditions.temperatures)
    chosen = np.array([t for t in (100.0, 300.0, 1000.0) if asked.min() <= t <= min(asked.max(), _last(m))])
    chosen = chosen if len(chosen) else np.array([float(asked.max())])
    found = sensitivities(case, chosen, progress=progress) if with_sensitivities else ()
    room = best_measured(material, "lattice parameter", 298.15, "a") if material is not None else None
    return Assessment(
        case=case,
        modelled=m,
        tolerance=tolerance,
        deviations=deviations,
        budget=split,
        sensitivities=found,
        sensitivity_temperatures=chosen,
        band=band(case, found),
        trust=trust(m, tuple(d for d in deviations if d.series.quantity in EXPANSION)),
        static_fit=static_fit_note(m, room.value if room else None),
        verdict=overall(deviations),
    )


def _last(m: Modelled) -> float:
    good = np.isfinite(m.alpha)
    return float(m.temperature[good][-1]) if good.any() else 0.0


def _budget_temperatures(series: Sequence[Series]) -> Array:
    """Return the temperatures of measured coefficients, at most a dozen, room temperature among them."""
    found = sorted({float(t) for s in series if s.quantity == EXPANSION[0] and s.usable for t in s.temperature_K})
    spaced = [20.0, 50.0, 100.0, 200.0, 300.0, 400.0, 500.0, 600.0, 800.0, 1000.0, 1200.0, 1500.0, 2000.0]
    if not found:
        return np.zeros(0)
    return np.array([t for t in spaced if found[0] - 1.0 <= t <= found[-1] + 1.0] or [found[0]])


def overall(deviations: Sequence[Deviation]) -> str:
    """Return the verdict over all expansion series that are decided; the majority of points decides."""
    votes = {REPRODUCES: 0, FAILS: 0}
    for d in deviations:
        if d.series.quantity in EXPANSION and d.verdict in votes:
            votes[d.verdict] += len(d.temperature_K)
    if not sum(votes.values()):
        return UNDECIDED
    return REPRODUCES if votes[REPRODUCES] >= votes[FAILS] else FAILS


def _assess_quietly(arguments: tuple[Case, float]) -> Assessment | str:
    """Assess one of several cases; the reason where there is no answer."""
    try:
        return assess(arguments[0], tolerance=arguments[1], with_sensitivities=False)
    except (NoAnswerError, InputError) as error:
        return str(error)


def rank(
    cases: Sequence[Case], *, tolerance: float = 0.1, executor: Executor | None = None, progress: Progress = _silent
) -> tuple[Ranked, ...]:
    """Rank several cases by their rms deviation from the same measurements over the same temperatures."""
    pool = executor or InProcess()
    futures = [pool.submit(_assess_quietly, (case, tolerance)) for case in cases]
    results: list[Assessment | str] = []
    for k, future in enumerate(futures):
        results.append(future.result())
        progress("cases", k + 1, len(cases))
    common = _common(results)
    out = []
    for case, result in zip(cases, results, strict=True):
        cite = case.potential.citation or case.source
        if isinstance(result, str):
            out.append(Ranked(case.title, cite, float("nan"), result, float("nan"), None))
            continue
        reason = largest_part(result.budget) if result.budget else "no budget: factors not measured"
        end = result.modelled.prediction.valid_to_K
        out.append(Ranked(case.title, cite, _rms_over(result, common), reason, end, result))
    return tuple(sorted(out, key=lambda r: (not np.isfinite(r.rms), r.rms)))


def _points(a: Assessment) -> dict[tuple[int, float], float]:
    """Return (series, T) → relative deviation of every usable expansion measurement."""
    out: dict[tuple[int, float], float] = {}
    for k, d in enumerate(a.deviations):
        if d.series.quantity in EXPANSION and d.series.usable:
            out.update({(k, float(t)): float(r) for t, r in zip(d.temperature_K, d.relative, strict=True)})
    return out


def _common(results: Sequence[Assessment | str]) -> set[tuple[int, float]]:
    """Return the measurements that every answered case covers."""
    found = [set(_points(r)) for r in results if isinstance(r, Assessment)]
    return set.intersection(*found) if found else set()


def _rms_over(a: Assessment, common: set[tuple[int, float]]) -> float:
    values = [v for k, v in _points(a).items() if k in common]
    return float(np.sqrt(np.mean(np.square(values)))) if values else float("nan")
