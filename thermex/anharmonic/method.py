"""The error of the quasi-harmonic method for one prediction: the rule, and the correction asked for."""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import Executor, ThreadPoolExecutor
from dataclasses import dataclass, replace
from multiprocessing import parent_process

import numpy as np
from numpy.typing import NDArray

from thermex import convergence
from thermex.anharmonic.correction import COLDEST, Quasiharmonic, correct, minimum, solved_states
from thermex.anharmonic.leading_order import applicable, leading_order
from thermex.anharmonic.rule import WORDS_IMAGINARY, anharmonic_rule, no_rule
from thermex.anharmonic.sampled_term import SampledFit
from thermex.anharmonic.sampling import Outlook, Plan, Sampled, sample
from thermex.anharmonic.trusted import trusted
from thermex.branch import IMAGINARY
from thermex.case.case import Accuracy
from thermex.chebyshev import Box
from thermex.crystal.crystal import Crystal
from thermex.errors import InputError, UnstableCrystalError
from thermex.free_energy import Term
from thermex.mesh import divisions_for
from thermex.potential.model import PairModel
from thermex.prediction import Anharmonic, AnharmonicRule
from thermex.road import Travelled

Array = NDArray[np.float64]
Progress = Callable[[str, int, int], None]

#: Sampling goes this far above the highest temperature asked for, so that α there is no edge of a fit.
MARGIN = 1.05

#: The error aimed at is judged up to this multiple of T_end; it is stated above it too.
JUDGED = 0.95

#: Above this multiple of T_end nothing is sampled.
HIGHEST = 1.25


#: How the note on a sampling that was cut short begins.
INTERRUPTED = "The sampling was interrupted"


@dataclass(frozen=True, slots=True)
class Method:
    """The rule at every temperature, the correction if there is one, and what is to be said."""

    rule: AnharmonicRule
    anharmonic: Anharmonic | None
    notes: tuple[str, ...]


def method_error(
    accuracy: Accuracy,
    model: PairModel | None,
    travelled: Travelled,
    asked: Array,
    effective_K: Array,
    debye_K: float,
    progress: Progress,
    executor: Executor | None = None,
) -> Method:
    """Say how wrong the quasi-harmonic answer is, and correct it where that was asked for and tested.

    Parameters
    ----------
    accuracy
        ``anharmonic`` ("default", "none", "leading order", "sampled"), ``sampled_error`` and ``seed``.
    model
        None when the forces do not come from a pair model.
    travelled
        The quasi-harmonic answer.
    asked
        Shape (nT,), K: the temperatures of the prediction.
    effective_K
        T_eff at the states of ``travelled``.
    debye_K
        θ_D; below a quarter of it no correction is given.
    executor
        Runs the blocks of a sampling; by default two threads, one where this process is itself a worker.

    Raises
    ------
    InputError
        Sampling was asked for and the crystal is not one for which it is offered.
    UnstableCrystalError
        Sampling was asked for and the harmonic crystal is unstable in the window.
    """
    base = quasiharmonic(travelled, asked, effective_K, debye_K)
    imaginary = travelled.ends and travelled.reason == IMAGINARY
    rule = no_rule(base.effective, WORDS_IMAGINARY) if imaginary else anharmonic_rule(base.effective, base.end_K)
    if accuracy.anharmonic == "none":
        return Method(rule, None, ())
    if accuracy.anharmonic == "sampled":
        refuse_sampling(base.crystal, model)
    reason = untested(base.crystal, model)
    if reason or model is None:
        return Method(rule, None, (f"No anharmonic correction: {reason}.",))
    starts = COLDEST * base.debye_K
    if float(asked.max()) < starts:
        return Method(rule, None, (f"No anharmonic correction: it starts at {starts:.0f} K, a quarter of θ_D.",))
    if accuracy.anharmonic == "sampled":
        return _checked(rule, sampled(base, model, accuracy, travelled, progress, executor), asked)
    try:
        progress("anharmonicity", 0, 1)
        found = leading_order(model, base.crystal, base.surface.box.window)
    except UnstableCrystalError as error:
        return Method(rule, None, (f"No anharmonic correction: {error.what}.",))
    progress("anharmonicity", 1, 1)
    return _checked(rule, correct(base, found, "leading order"), asked)


def _checked(rule: AnharmonicRule, found: Anharmonic, asked: Array) -> Method:
    """Keep the corrected values that are worth printing; only what is to be said when none is."""
    kept = trusted(found, asked)
    if np.isfinite(kept.alpha_linear_per_K).any():
        return Method(rule, kept, ())
    return Method(rule, None, kept.notes)


def untested(crystal: Crystal, model: PairModel | None) -> str | None:
    """Return why no correction is offered, or None when it is; ``model`` is None for forces of a calculator."""
    return applicable(crystal, model) if model else "it needs an analytic pair potential"


def refuse_sampling(crystal: Crystal, model: PairModel | None, source: str = "") -> None:
    """Raise :class:`InputError` with the reason where sampling is not offered.

    Needs the crystal as the case gives it, no phonons.
    """
    reason = untested(crystal, model)
    if reason:
        raise InputError(
            f'"sampled" is not offered for this case: {reason}',
            where=f"{source}: accuracy.anharmonic" if source else "accuracy.anharmonic",
            fix='"none" gives the quasi-harmonic answer with its rule',
        )


def quasiharmonic(travelled: Travelled, asked: Array, effective_K: Array, debye_K: float) -> Quasiharmonic:
    """Gather what the correction needs at the temperatures asked for."""
    states = travelled.solution.states
    end = travelled.end_K if travelled.ends else float("inf")
    known = asked <= states.temperature[-1]

    def at(values: Array) -> Array:
        return np.asarray(np.where(known, np.interp(asked, states.temperature, values), np.nan))

    x = np.interp(asked, states.temperature, states.x[:, 0])
    return Quasiharmonic(
        crystal=travelled.lattice.crystal,
        surface=travelled.solution.surface,
        load=travelled.load,
        temperature=asked,
        x=x[:, None],
        alpha=at(states.alpha_volume),
        supercell_error=np.interp(asked, states.temperature, travelled.solution.error.supercell),
        effective=at(effective_K),
        end_K=end,
        debye_K=debye_K,
    )


def sampled(
    base: Quasiharmonic,
    model: PairModel,
    accuracy: Accuracy,
    travelled: Travelled,
    progress: Progress,
    executor: Executor | None,
) -> Anharmonic:
    """Sample the anharmonic force along the branch and correct the quasi-harmonic answer with it."""
    base = _with_room(base, travelled)
    leading = leading_order(model, base.crystal, base.surface.box.window)
    highest = min(MARGIN * float(base.temperature.max()), HIGHEST * base.end_K)
    plan = Plan(highest, accuracy.sampled_error, accuracy.seed)
    outlook = outlook_on(base, highest)
    if executor is not None:
        found = sample(model, base.crystal, leading, outlook, plan, progress, executor.map)
    else:
        alone = parent_process() is not None
        with ThreadPoolExecutor(1 if alone else min(2, os.cpu_count() or 1)) as pool:
            found = sample(model, base.crystal, leading, outlook, plan, progress, pool.map)
    return correct(base, found, "sampled", sampled_notes(found, accuracy))


def _with_room(base: Quasiharmonic, travelled: Travelled) -> Quasiharmonic:
    """Widen the surface to the end of the branch when temperatures past what it covers are asked for."""
    if float(base.temperature.max()) <= travelled.solution.states.temperature[-1]:
        return base
    low, high = base.surface.box.window[0]
    box = Box(np.array([[low, max(high, float(travelled.end_x[0]))]]), (13,))
    divisions = divisions_for(base.crystal, 16)
    return replace(base, surface=convergence.build(travelled.lattice, box, divisions, 1))


def outlook_on(base: Quasiharmonic, highest: float) -> Outlook:
    """Return where the minimum lies with a given term, and the error of α that a fit leaves."""
    top = min(highest, JUDGED * base.end_K)
    judged = base.temperature[(base.temperature >= COLDEST * base.debye_K) & (base.temperature <= top)]
    if not len(judged):
        judged = np.array([min(top, float(base.temperature.max()))])
    low, high = base.surface.box.window[0]

    def strain(term: Term, temperature: Array) -> Array:
        """Find the minima, each from the quasi-harmonic one; where there is none take the nearest in T."""
        whole = base.surface.best.plus(term)
        begin = np.interp(temperature, base.temperature, base.x[:, 0])[:, None]
        found = solved_states(whole, base.load, temperature, begin)
        good = minimum(whole, base.load, found, base.surface.box.window)
        if not good.any():
            raise UnstableCrystalError("no minimum of the free energy was found", where="sampled anharmonicity")
        return np.asarray(np.clip(np.interp(temperature, temperature[good], found.x[good, 0]), low, high))

    def error(fit: SampledFit) -> float:
        whole = base.surface.best
        start = strain(fit.best, judged)[:, None]
        best = solved_states(whole.plus(fit.best), base.load, judged, start)
        good = minimum(whole.plus(fit.best), base.load, best, base.surface.box.window)
        total = np.zeros(len(judged))
        for companion in fit.companions:
            moved = solved_states(whole.plus(companion), base.load, judged, best.x)
            total += convergence.relative(moved, best) ** 2
        return float(np.sqrt(total[good].max())) if good.any() else float("inf")

    return Outlook(strain, error)


def was_interrupted(found: Anharmonic | None) -> bool:
    """Return whether a correction comes from a sampling that was cut short."""
    return found is not None and any(note.startswith(INTERRUPTED) for note in found.notes)


def sampled_notes(found: Sampled, accuracy: Accuracy) -> tuple[str, ...]:
    """Say how the sampling was done and how well it went."""
    notes = [
        f"Sampled anharmonicity: {found.atoms} atoms, {found.blocks} blocks at each of "
        f"{len(found.points.temperature)} temperatures to {found.points.temperature[-1]:.0f} K, "
        f"{found.accepted:.0%} accepted, seed {accuracy.seed}."
    ]
    if found.interrupted:
        notes.append(f"{INTERRUPTED}: the error of α reached {found.error:.1%}.")
    elif found.error > accuracy.sampled_error:
        notes.append(f"The sampling stopped at an error of α of {found.error:.1%}.")
    return tuple(notes)
