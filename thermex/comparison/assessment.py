"""Assess: does a potential reproduce measured expansion, and if not, which physics is wrong."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from thermex.case.case import Case
from thermex.comparison.budget import Budget, budget
from thermex.comparison.deviation import EXPANSION, FAILS, REPRODUCES, UNDECIDED, Deviation, deviation, share
from thermex.comparison.modelled import Modelled, modelled
from thermex.comparison.sensitivity import Sensitivity, band, sensitivities
from thermex.comparison.trust import static_fit_note, trust
from thermex.errors import InputError
from thermex.expansion import predict
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
    why: str
    """What the verdict rests on."""
    not_compared: tuple[str, ...]
    """Measured quantities that the prediction has nothing to set against."""

    @property
    def passed(self) -> bool:
        """Whether the verdict is not that the potential fails; an undecided one passes."""
        return self.verdict != FAILS


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
    pairs = [(s, deviation(m, s, tolerance)) for s in series]
    deviations = tuple(d for _, d in pairs if d is not None)
    verdict, why = overall(deviations, tolerance)
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
        verdict=verdict,
        why=why,
        not_compared=tuple(dict.fromkeys(s.quantity for s, d in pairs if d is None)),
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


def overall(deviations: Sequence[Deviation], tolerance: float) -> tuple[str, str]:
    """Return the verdict over every point of the expansion series that are decided, by their rms, and why."""
    decided = [d for d in deviations if d.series.quantity in EXPANSION and d.verdict in (REPRODUCES, FAILS)]
    if not decided:
        return UNDECIDED, "no series of expansion carries a verdict"
    rms = float(np.sqrt(np.mean(np.concatenate([d.relative for d in decided]) ** 2)))
    points = sum(len(d.relative) for d in decided)
    failed = sum(d.verdict == FAILS for d in decided)
    said = f"rms {share(rms)} over {points} points of {len(decided)} decided series"
    if failed:
        said += f", {failed} of which fail" if failed > 1 else ", one of which fails"
    return (REPRODUCES if rms <= tolerance else FAILS), said
