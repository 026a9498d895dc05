"""The parameters of a potential by name, for sweeps, fits and sensitivities.

"Mg-O.rho" is ρ of the Mg–O pair; where several terms of a pair share a name, the form stands between:
"Mg-O.Buckingham.A". Shells: "O.shell_charge", "O.spring_constant", "O.quartic_constant".
"""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from difflib import get_close_matches

from thermex.case.case import Case
from thermex.errors import InputError

_SHELL = ("shell_charge", "spring_constant", "quartic_constant")


def _places(case: Case) -> dict[str, tuple[str, int | str, str]]:
    """Return name → ("pair", index, key) or ("shell", symbol, key)."""
    entries: list[tuple[str, str, int, str]] = []
    for index, pair in enumerate(case.potential.pairs):
        label = "-".join(pair.between)
        keys = [k for k in pair.parameters if not (k in ("C", "D") and pair.parameters[k] == 0.0)]
        if pair.static_distance is not None:
            keys.append("static_distance")
        entries.extend((label, pair.form, index, key) for key in keys)
    shared = Counter((label, key) for label, _, _, key in entries)
    formed = Counter((label, form, key) for label, form, _, key in entries)
    out: dict[str, tuple[str, int | str, str]] = {}
    for label, form, index, key in entries:
        name = f"{label}.{key}"
        if shared[label, key] > 1:
            name = f"{label}.{form}.{key}"
            if formed[label, form, key] > 1:
                name = f"{label}.{form} {index + 1}.{key}"
        out[name] = ("pair", index, key)
    for symbol, ion in case.potential.polarisable.items():
        for key in _SHELL:
            if key != "quartic_constant" or ion.quartic_constant:
                out[f"{symbol}.{key}"] = ("shell", symbol, key)
    return out


def parameter_names(case: Case) -> tuple[str, ...]:
    """Return the names of all parameters of the potential of a case."""
    return tuple(_places(case))


def _place(case: Case, name: str) -> tuple[str, int | str, str]:
    places = _places(case)
    if name in places:
        return places[name]
    head, _, tail = name.partition(".")
    turned = "-".join(reversed(head.split("-"))) + "." + tail
    if turned in places:
        return places[turned]
    near = get_close_matches(name, list(places), 1, 0.5)
    hint = f"did you mean {near[0]}? " if near else ""
    raise InputError(
        f'the potential has no parameter "{name}"', where="parameter", fix=f"{hint}known: {', '.join(places)}"
    )


def parameter_value(case: Case, name: str) -> float:
    """Return the value of a parameter.

    Raises
    ------
    InputError
        The potential has no such parameter; the nearest name is given.
    """
    kind, where, key = _place(case, name)
    if kind == "shell":
        return float(getattr(case.potential.polarisable[str(where)], key))
    pair = case.potential.pairs[int(where)]
    if key == "static_distance":
        return float(pair.static_distance or 0.0)
    return float(pair.parameters[key])


def with_parameter(case: Case, name: str, value: float) -> Case:
    """Return the case with one parameter of its potential changed, all else kept."""
    kind, where, key = _place(case, name)
    potential = case.potential
    if kind == "shell":
        ions = dict(potential.polarisable)
        ions[str(where)] = replace(ions[str(where)], **{key: float(value)})
        return replace(case, potential=replace(potential, polarisable=ions))
    pairs = list(potential.pairs)
    pair = pairs[int(where)]
    if key == "static_distance":
        pairs[int(where)] = replace(pair, static_distance=float(value))
    else:
        pairs[int(where)] = replace(pair, parameters={**pair.parameters, key: float(value)})
    return replace(case, potential=replace(potential, pairs=tuple(pairs)))
