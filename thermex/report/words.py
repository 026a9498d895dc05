"""Sentences about a prediction: what it is of, and what limits it."""

from __future__ import annotations

import numpy as np

from thermex.prediction import Prediction
from thermex.report.numbers import error_percent, fixed, percent, rounded, significant, temperature


def heading(prediction: Prediction) -> list[str]:
    """Return the title, then one line on the crystal at rest."""
    crystal, static = prediction.crystal, prediction.static
    lattice = ", ".join(f"{axis} = {fixed(value, 4)} Å" for axis, value in static.lattice_A.items())
    place = f"{crystal.formula}, {crystal.name}" if crystal.name else crystal.formula
    at_rest = (
        f"{place}, {significant(prediction.case.conditions.pressure, 3)} GPa. At rest: {lattice}, "
        f"B = {significant(static.bulk_modulus_GPa, 4)} GPa, B′ = {fixed(static.bulk_modulus_derivative, 2)}; "
        f"Debye temperature {fixed(prediction.debye_moment_K, 0)} K (second moment)."
    )
    return [prediction.case.title or place, at_rest, *potential_source(prediction)]


def potential_source(prediction: Prediction) -> list[str]:
    """Say where the potential comes from; nothing when it is the user's own."""
    potential = prediction.case.potential
    digits = f"digits: {potential.provenance}" if potential.provenance else ""
    said = [part.rstrip(".") for part in (potential.published, potential.citation, digits) if part]
    return [f"Potential: {'; '.join(said)}."] if said else []


def limits(prediction: Prediction) -> list[str]:
    """Return what limits the result: range of validity, the method, the notes."""
    return [
        validity(prediction),
        *unmet(prediction),
        *method(prediction),
        *prediction.notes,
        *_anharmonic_notes(prediction),
    ]


def validity(prediction: Prediction) -> str:
    """Say up to which temperature the result holds, and why not further."""
    end, reason = rounded(prediction.valid_to_K), prediction.valid_to_reason.rstrip(".")
    if not prediction.branch_ends:
        return f"Holds up to {end} K: {reason}."
    text = f"Ends at {end} K: {reason}. No number is given beyond"
    past = int(np.sum(prediction.temperature_K > prediction.valid_to_K))
    return f"{text} ({past} of the temperatures asked for)." if past else f"{text}."


def unmet(prediction: Prediction) -> list[str]:
    """Say where the numerical error of α exceeds what the case asked for, from 100 K on."""
    asked = prediction.case.accuracy.alpha
    warm = (prediction.temperature_K >= 100.0) & (prediction.alpha_relative_error > asked)
    if not warm.any():
        return []
    worst = int(np.nanargmax(np.where(warm, prediction.alpha_relative_error, -1.0)))
    error = error_percent(float(prediction.alpha_relative_error[worst]))
    return [
        f"Numerics: the accuracy asked for, {error_percent(asked)} of α, was not met at {int(warm.sum())} temperatures "
        f"of 100 K and more; the error is at most {error} %, at {temperature(prediction.temperature_K[worst])} K."
    ]


def method(prediction: Prediction) -> list[str]:
    """Say how large the error of the quasi-harmonic method is expected to be at the highest temperature."""
    rule = prediction.rule
    if rule is None:
        return []
    good = np.flatnonzero(np.isfinite(rule.overestimate))
    if not good.size:
        return []
    k = int(good[-1])
    sentence = (
        f"Method: by the rule, the quasi-harmonic α is {percent(rule.overestimate[k], 0)} % off at "
        f"{temperature(prediction.temperature_K[k])} K (scatter {percent(rule.low[k], 0)} to "
        f"{percent(rule.high[k], 0)} %; plus means too high{_outside(prediction)})."
    )
    return [sentence]


def _outside(prediction: Prediction) -> str:
    """Say that the rule was not fitted to crystals of this kind, where that is so."""
    potential = prediction.case.potential
    forms = {pair.form for pair in potential.pairs}
    if len(prediction.lattice_A) > 1:
        kind = "axial crystals"
    elif potential.polarisable:
        kind = "polarisable ions"
    elif "fluorite" in prediction.crystal.name:
        kind = "fluorite-type crystals"
    elif "Morse" in forms and not potential.charges:
        kind = "Morse metals"
    else:
        return ""
    return f"; the rule was not fitted to {kind}"


def _anharmonic_notes(prediction: Prediction) -> tuple[str, ...]:
    return prediction.anharmonic.notes if prediction.anharmonic is not None else ()
