"""Reads the pairs and the polarisable ions of a case."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from thermex.case.case import PairSpec, Polarisable
from thermex.case.schema import FORMS, OPTIONAL, PARAMETERS, table
from thermex.case.walker import Walker, existing, short, shown

#: The parameter that ``static_distance`` replaces, by form.
AMPLITUDES = {
    "Born": "B",
    "Born-Mayer": "A",
    "Buckingham": "A",
    "Lennard-Jones": "epsilon",
    "Mie": "epsilon",
    "Morse": "D",
}

#: Most pairs in one case.
MOST_PAIRS = 300


def read_pairs(walker: Walker, value: object, folder: Path) -> tuple[PairSpec, ...]:
    """Read ``[[potential.pair]]``."""
    if not isinstance(value, list) or len(value) > MOST_PAIRS:
        walker.fault("potential.pair", f"is {shown(value)}", "write each pair under [[potential.pair]]")
        return ()
    pairs = [_pair(walker, entry, f"potential.pair[{k}]", folder) for k, entry in enumerate(value)]
    return tuple(p for p in pairs if p is not None)


def _pair(walker: Walker, value: object, where: str, folder: Path) -> PairSpec | None:
    before = len(walker.faults)
    content = walker.table(value, where)
    declared = table("potential.pair")
    walker.unknown(content, [k.name for k in declared.keys], where)
    found: dict[str, Any] = {}
    for key in declared.keys:
        if key.name in content and key.name not in PARAMETERS:
            found[key.name] = walker.value(key, content[key.name], where)
    between = found.get("between")
    if "between" not in content or (between is not None and len(between) != 2):
        walker.fault(f"{where}.between", f"is {shown(content.get('between'))}", "name two species")
    if "form" not in content:
        walker.fault(f"{where}.form", "is missing", f"one of {', '.join(FORMS)}")
    centres = found.get("centres") or ("shell", "shell")
    if len(centres) != 2 or not set(centres) <= {"core", "shell"}:
        walker.fault(f"{where}.centres", f"is {shown(list(centres))}", 'give two of "core" and "shell"')
    form = found.get("form")
    parameters = _parameters(walker, content, form, where) if form else {}
    file = None
    if form == "tabulated":
        if found.get("file"):
            file = existing(walker, folder, found["file"], f"{where}.file")
        else:
            walker.fault(f"{where}.file", "is missing", "give the table of the pair")
    if len(walker.faults) > before:
        return None
    return PairSpec(
        between=(found["between"][0], found["between"][1]),
        form=str(form),
        parameters=parameters,
        static_distance=found.get("static_distance"),
        cutoff=found.get("cutoff"),
        reach=found.get("reach") or "all",
        file=file,
        centres=(centres[0], centres[1]),
    )


def _parameters(walker: Walker, content: Mapping[str, Any], form: str, where: str) -> dict[str, float]:
    """Read the parameters that belong to a form; complain of others and of missing ones."""
    given = [name for name in PARAMETERS if name in content]
    chosen = max(FORMS[form], key=lambda names: len(set(names) & set(given)))
    solved = AMPLITUDES.get(form) if "static_distance" in content else None
    out = {}
    for name in given:
        if name not in chosen:
            fits = ", ".join(chosen) or "none"
            walker.fault(f"{where}.{name}", f"does not belong to {form}", f"it takes {fits}")
            continue
        if name == solved:
            walker.fault(f"{where}.{name}", "stands beside static_distance", "keep one of the two")
            continue
        number = walker.number(PARAMETERS[name], content[name], f"{where}.{name}")
        if number is not None:
            out[name] = number
    for name in chosen:
        if name not in content and name != solved:
            default = OPTIONAL.get(form, {}).get(name)
            if default is None:
                unit = PARAMETERS[name].unit
                walker.fault(f"{where}.{short(name)}", "is missing", f"give {name}{f' in {unit}' if unit else ''}")
            else:
                out[name] = default
    if form == "Mie" and "n" in out and "m" in out and out["n"] <= out["m"]:
        walker.fault(f"{where}.n", f"is {out['n']:g}, not above m = {out['m']:g}", "give n > m")
    return out


def read_polarisable(walker: Walker, value: object) -> dict[str, Polarisable]:
    """Read ``[potential.polarisable.X]``."""
    out = {}
    for name, entry in walker.table(value, "potential.polarisable").items():
        where = f"potential.polarisable.{short(name)}"
        content = walker.table(entry, where)
        declared = table("potential.polarisable.X")
        walker.unknown(content, [k.name for k in declared.keys], where)
        numbers = {}
        for key in declared.keys:
            if key.name in content:
                numbers[key.name] = walker.number(key, content[key.name], f"{where}.{key.name}")
            elif not key.default:
                walker.fault(f"{where}.{key.name}", "is missing", f"give it in {key.unit}")
        if {"shell_charge", "spring_constant"} <= set(numbers) and None not in numbers.values():
            out[str(name)] = Polarisable(**{k: float(v) for k, v in numbers.items() if v is not None})
    return out
