"""Reads a case: from a TOML file or from plain dicts, all faults of it at once."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from thermex.case.case import (
    Accuracy,
    Case,
    Conditions,
    CrystalSpec,
    MeasuredSpec,
    PotentialSpec,
)
from thermex.case.pairs import read_pairs, read_polarisable
from thermex.case.published import published
from thermex.case.schema import TABLES, table
from thermex.case.walker import Walker, existing
from thermex.errors import InputError

#: Largest case file read, bytes.
LARGEST = 1_000_000


def load_case(path: str | Path) -> Case:
    """Read a case file.

    Parameters
    ----------
    path
        TOML file; paths in it are relative to its folder.

    Raises
    ------
    InputError
        The file cannot be read or what it says is wrong; ``faults`` lists everything that is.
    """
    file = Path(path)
    name = str(path)
    try:
        if file.is_file() and file.stat().st_size > LARGEST:
            raise InputError("is larger than 1 MB", where=name, fix="a case file is a few kB")
        text = file.read_bytes().decode("utf-8")
        content = tomllib.loads(text)
    except FileNotFoundError:
        raise InputError("there is no such file", where=name, fix="give the path of a case file") from None
    except IsADirectoryError:
        raise InputError("is a folder", where=name, fix="give the path of a case file") from None
    except OSError as error:
        raise InputError(f"cannot be read ({error.strerror})", where=name) from None
    except UnicodeDecodeError as error:
        raise InputError(f"is not UTF-8 text (byte {error.start})", where=name, fix="save it as UTF-8") from None
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"is not valid TOML ({error})", where=name, fix="mend the line named") from None
    except (RecursionError, ValueError) as error:
        raise InputError(f"is not valid TOML ({type(error).__name__})", where=name) from None
    return case_from_dict(content, source=name, folder=file.resolve().parent)


def case_from_dict(content: Mapping[str, Any], source: str = "", folder: Path | None = None) -> Case:
    """Build a case from plain dicts with the keys of a case file.

    Raises
    ------
    InputError
        Something is wrong; ``faults`` lists everything that is.
    """
    walker = Walker()
    base = folder or Path()
    walker.unknown(content, [t.path for t in TABLES if "." not in t.path and t.path] + ["title"], "")
    root = _flat(walker, "", content)
    crystal = _crystal(walker, content.get("crystal"), base)
    potential = _potential(walker, content.get("potential"), base)
    conditions = _conditions(walker, content)
    accuracy = _accuracy(walker, content.get("accuracy", {}))
    measured = _measured(walker, content.get("measured"), base)
    if not walker.faults:
        potential = _checked(walker, crystal, potential)
    if walker.faults:
        raise InputError.of(source or "case", walker.faults)
    title = root.get("title") or source or "untitled"
    return Case(title, crystal, potential, conditions, accuracy, measured, source)


def _flat(walker: Walker, path: str, value: object) -> dict[str, Any]:
    """Read the plain keys of one table."""
    declared = table(path)
    content = walker.table(value, path)
    if path:
        walker.unknown(content, [k.name for k in declared.keys] + list(declared.tables), path)
    out = {}
    for key in declared.keys:
        if key.name in content:
            checked = walker.value(key, content[key.name], path)
            if checked is not None:
                out[key.name] = checked
    return out


def _crystal(walker: Walker, value: object, folder: Path) -> CrystalSpec:
    empty = CrystalSpec(None, ())
    if value is None:
        walker.fault("crystal", "is missing", "say what sits where: prototype and sites, or file")
        return empty
    found = _flat(walker, "crystal", value)
    lattice: dict[str, float] = {k: found[k] for k in ("a", "b", "c") if k in found}
    file = None
    if "file" in found:
        file = existing(walker, folder, found["file"], "crystal.file")
        if "prototype" in found:
            walker.fault("crystal.file", "stands beside prototype", "keep one of the two")
    elif "prototype" not in found and isinstance(value, Mapping) and "prototype" not in value:
        walker.fault("crystal.prototype", "is missing", 'name a structure type, such as "rock salt", or a file')
    for name, mass in found.get("masses", {}).items():
        if not 0.1 <= mass <= 1000.0:
            walker.fault(f"crystal.masses.{name}", f"is {mass:g}", "give a mass from 0.1 to 1000 u")
    spec = CrystalSpec(
        prototype=found.get("prototype"),
        sites=found.get("sites", ()),
        lattice=lattice,
        inner=found.get("inner", {}),
        file=file,
        masses=found.get("masses", {}),
    )
    return _matched(walker, spec)


def _matched(walker: Walker, spec: CrystalSpec) -> CrystalSpec:
    """Check the sites and inner coordinates against the prototype."""
    from thermex.crystal.elements import element_of
    from thermex.crystal.prototypes import find_prototype

    if spec.prototype is None:
        return spec
    try:
        prototype = find_prototype(spec.prototype)
    except InputError as error:
        walker.fault("crystal.prototype", error.what, error.fix)
        return spec
    if len(spec.sites) != len(prototype.counts):
        meaning = f": {prototype.remark}" if prototype.remark else ""
        given = ", ".join(spec.sites) or "none"
        walker.fault(
            "crystal.sites",
            f"names {given}",
            f"{prototype.name} has {len(prototype.counts)} sites{meaning}",
        )
    walker.unknown(spec.inner, [c.name for c in prototype.inner], "crystal.inner")
    for k, label in enumerate(spec.sites):
        try:
            element_of(label)
        except InputError as error:
            walker.fault(f"crystal.sites[{k}]", error.what, "begin it with a chemical symbol")
    return spec


def _potential(walker: Walker, value: object, folder: Path) -> PotentialSpec:
    if value is None:
        walker.fault("potential", "is missing", 'give pairs of your own, or published = "…"')
        return PotentialSpec({}, ())
    content = walker.table(value, "potential")
    found = _flat(walker, "potential", content)
    pairs = read_pairs(walker, content.get("pair", []), folder)
    shells = read_polarisable(walker, content.get("polarisable", {}))
    covariance = None
    if "covariance" in content:
        part = _flat(walker, "potential.covariance", content["covariance"])
        names, matrix = part.get("parameters"), part.get("matrix")
        if names and matrix and len(names) == len(matrix):
            covariance = (names, matrix)
        else:
            walker.fault("potential.covariance", "has no square matrix for its parameters", "give both")
    spec = PotentialSpec(found.get("charges", {}), pairs, shells, covariance=covariance)
    if "calculator" in found:
        if pairs or shells or spec.charges or "published" in found:
            walker.fault("potential.calculator", "stands beside pairs or charges", "keep one of the two")
        name = found["calculator"]
        return replace(spec, calculator=name, citation=f"the {name} calculator of ASE")
    if "published" not in found:
        if not pairs and "pair" not in content:
            walker.fault("potential.pair", "is missing", "give at least one pair, or published")
        return spec
    if pairs or shells or spec.charges:
        walker.fault("potential.published", "stands beside charges or pairs", "keep one of the two")
    try:
        known = published(found["published"])
    except InputError as error:
        walker.fault("potential.published", error.what, error.fix)
        return spec
    return replace(known.potential, covariance=covariance)


def _conditions(walker: Walker, content: Mapping[str, Any]) -> Conditions:
    found = _flat(walker, "conditions", content.get("conditions", {}))
    expansion = _flat(walker, "expansion", content.get("expansion", {}))
    given = content.get("conditions")
    if "temperature" not in found and not (isinstance(given, Mapping) and "temperature" in given):
        walker.fault("conditions.temperature", "is missing", "give a list in K, or { from = 0, to = 1000, step = 50 }")
    return Conditions(
        found.get("temperature", ()),
        found.get("pressure", 0.0),
        expansion.get("reference_temperature", 293.15),
    )


def _accuracy(walker: Walker, value: object) -> Accuracy:
    found = _flat(walker, "accuracy", value)
    return replace(Accuracy(), **found)


def _measured(walker: Walker, value: object, folder: Path) -> MeasuredSpec | None:
    if value is None:
        return None
    found = _flat(walker, "measured", value)
    file = existing(walker, folder, found["file"], "measured.file") if "file" in found else None
    if "material" not in found and "file" not in found and isinstance(value, Mapping) and not value:
        walker.fault("measured", "is empty", 'give material = "MgO" or file = "mine.csv"')
    return MeasuredSpec(found.get("material"), file)


def _checked(walker: Walker, crystal: CrystalSpec, potential: PotentialSpec) -> PotentialSpec:
    """Check the potential against what sits in the crystal."""
    from thermex.crystal.prototypes import site_counts

    if crystal.prototype is None or potential.calculator:
        return potential
    present = dict.fromkeys(crystal.sites)
    for k, pair in enumerate(potential.pairs):
        for label in pair.between:
            if label not in present and not potential.published:
                walker.fault(
                    f"potential.pair[{k}].between",
                    f'names "{label}", which sits on no site',
                    f"the sites hold {', '.join(present)}",
                )
    for label in potential.charges:
        if label not in present and not potential.published:
            walker.fault(f"potential.charges.{label}", "sits on no site", f"known: {', '.join(present)}")
    total, parts = 0.0, []
    for label, count in zip(crystal.sites, site_counts(crystal.prototype), strict=True):
        charge = potential.charges.get(label, 0.0)
        total += count * charge
        parts.append(f"{count} × {charge:+g} ({label})")
    if abs(total) > 1e-6:
        walker.fault("potential.charges", f"do not cancel: {' + '.join(parts)} = {total:+g}", "make their sum zero")
    _missing_pairs(walker, tuple(present), potential)
    return potential


def _missing_pairs(walker: Walker, present: tuple[str, ...], potential: PotentialSpec) -> None:
    """Every species needs a short-range pair with a species of the other sign (or with any, if neutral)."""
    joined = {frozenset(pair.between) for pair in potential.pairs}
    for label in present:
        sign = potential.charges.get(label, 0.0)
        partners = [o for o in present if potential.charges.get(o, 0.0) * sign < 0.0] or list(present)
        if not any(frozenset((label, other)) in joined for other in partners):
            names = " or ".join(f"{label}-{other}" for other in partners)
            walker.fault(
                "potential.pair",
                f"nothing keeps {label} from its neighbours: {names} has no short-range term",
                "add the pair",
            )
