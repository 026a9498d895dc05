"""Writes a case back: as plain dicts and as TOML, every default spelled out; and its hash."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Collection, Mapping
from typing import Any

from thermex.case.case import Case, PairSpec


def case_to_dict(case: Case) -> dict[str, Any]:
    """Return the case as plain dicts with the keys of a case file, every default spelled out.

    A published potential is written out pair by pair; its name and citation are kept as comments by
    :func:`case_to_toml` and under ``source`` here.
    """
    crystal: dict[str, Any] = {}
    spec = case.crystal
    if spec.prototype is not None:
        crystal.update({"prototype": spec.prototype, "sites": list(spec.sites)})
    if spec.file is not None:
        crystal["file"] = spec.file.name
    crystal.update(spec.lattice)
    if spec.inner:
        crystal["inner"] = dict(spec.inner)
    if spec.masses:
        crystal["masses"] = dict(spec.masses)
    potential: dict[str, Any] = (
        {"calculator": case.potential.calculator}
        if case.potential.calculator
        else {
            "charges": dict(case.potential.charges),
            "pair": [_pair(p, case.potential.polarisable) for p in case.potential.pairs],
        }
    )
    if case.potential.polarisable:
        potential["polarisable"] = {
            name: {
                "shell_charge": ion.shell_charge,
                "spring_constant": ion.spring_constant,
                "quartic_constant": ion.quartic_constant,
            }
            for name, ion in case.potential.polarisable.items()
        }
    if case.potential.covariance is not None:
        names, matrix = case.potential.covariance
        potential["covariance"] = {"parameters": list(names), "matrix": [list(row) for row in matrix]}
    accuracy: dict[str, Any] = {
        "alpha": case.accuracy.alpha,
        "anharmonic": case.accuracy.anharmonic,
        "sampled_error": case.accuracy.sampled_error,
        "seed": case.accuracy.seed,
    }
    out: dict[str, Any] = {
        "title": case.title,
        "crystal": crystal,
        "potential": potential,
        "conditions": {
            "temperature": list(case.conditions.temperatures),
            "pressure": case.conditions.pressure,
        },
        "expansion": {"reference_temperature": case.conditions.reference_temperature},
        "accuracy": accuracy,
    }
    if case.measured is not None:
        measured: dict[str, Any] = {}
        if case.measured.material:
            measured["material"] = case.measured.material
        if case.measured.file:
            measured["file"] = case.measured.file.name
        out["measured"] = measured
    return out


def _pair(pair: PairSpec, polarisable: Collection[str]) -> dict[str, Any]:
    out: dict[str, Any] = {"between": list(pair.between), "form": pair.form, **pair.parameters}
    if pair.static_distance is not None:
        out["static_distance"] = pair.static_distance
    if pair.cutoff is not None:
        out["cutoff"] = pair.cutoff
    out["reach"] = pair.reach
    if pair.file is not None:
        out["file"] = pair.file.name
    if set(pair.between) & set(polarisable):
        out["centres"] = list(pair.centres)
    return out


def case_to_toml(case: Case) -> str:
    """Return the case as the text of a case file, which ``load_case`` reads back to the same case."""
    content = case_to_dict(case)
    lines = [f"title = {_value(content['title'])}", ""]
    if case.potential.published:
        lines[:0] = [
            f"# Potential: {_comment(case.potential.published)}",
            f"# {_comment(case.potential.citation)}",
            f"# Provenance: {_comment(case.potential.provenance)}",
            "",
        ]
    for name in ("crystal", "potential", "conditions", "expansion", "accuracy", "measured"):
        if name in content:
            lines.extend(_table(name, content[name]))
    return "\n".join(lines)


def _comment(text: str) -> str:
    return " ".join("".join(c if c.isprintable() else " " for c in text).split())


def _table(name: str, content: Mapping[str, Any]) -> list[str]:
    lines = [f"[{name}]"]
    later: list[str] = []
    for key, value in content.items():
        if isinstance(value, list) and value and isinstance(value[0], Mapping):
            for entry in value:
                later.append(f"[[{name}.{key}]]")
                later.extend(f"{k} = {_value(v)}" for k, v in entry.items())
                later.append("")
        elif isinstance(value, list) and not value and key == "pair":
            continue
        elif isinstance(value, Mapping) and key in {"polarisable", "covariance"}:
            later.extend(_nested(f"{name}.{key}", value))
        else:
            lines.append(f"{_key(key)} = {_value(value)}")
    return [*lines, "", *later]


def _nested(name: str, value: Mapping[str, Any]) -> list[str]:
    if any(isinstance(v, Mapping) for v in value.values()):
        lines: list[str] = []
        for key, entry in value.items():
            lines.append(f"[{name}.{_key(key)}]")
            lines.extend(f"{k} = {_value(v)}" for k, v in entry.items())
            lines.append("")
        return lines
    return [f"[{name}]", *(f"{k} = {_value(v)}" for k, v in value.items()), ""]


def _key(key: str) -> str:
    plain = key.isascii() and key.replace("_", "").replace("-", "").isalnum()
    return key if plain and key else json.dumps(key, ensure_ascii=True)


def _value(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        return str(value)
    if isinstance(value, float):
        return repr(value)
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=True).replace("\x7f", "\\u007f")
    if isinstance(value, Mapping):
        inner = ", ".join(f"{_key(k)} = {_value(v)}" for k, v in value.items())
        return f"{{ {inner} }}"
    return "[" + ", ".join(_value(v) for v in value) + "]"


def case_hash(case: Case) -> str:
    """Return a SHA-256 of all that decides the answer; folders and the title do not count.

    Structure, table and measured files enter by their content.
    """
    content = case_to_dict(case)
    content.pop("title")
    digest = hashlib.sha256(json.dumps(content, sort_keys=True, default=str).encode())
    files = [case.crystal.file, *(p.file for p in case.potential.pairs)]
    files.append(case.measured.file if case.measured else None)
    for file in files:
        if file is not None and file.is_file():
            digest.update(file.read_bytes())
    atoms: Any = case.crystal.atoms
    if atoms is not None:
        digest.update(repr((atoms.get_chemical_symbols(), atoms.positions.tolist(), atoms.cell.tolist())).encode())
    return digest.hexdigest()
