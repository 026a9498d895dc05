"""Published potentials that ship with thermex, citable by name from a case."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches
from functools import cache
from typing import Any

from thermex.case.case import (
    Accuracy,
    Case,
    Conditions,
    CrystalSpec,
    MeasuredSpec,
    PairSpec,
    Polarisable,
    PotentialSpec,
)
from thermex.data import root
from thermex.errors import InputError


@dataclass(frozen=True, slots=True)
class PublishedSet:
    """One published potential for one compound."""

    name: str
    """As it is cited in a case: "LC85 MgO"."""
    family: str
    formula: str
    crystal: CrystalSpec
    potential: PotentialSpec
    notes: tuple[str, ...]
    """Cautions that travel with the set."""
    check: Mapping[str, Any] = field(default_factory=dict)
    """Published or independently computed values for this set, with the unit in the key."""

    @property
    def from_memory(self) -> bool:
        """Whether any of its digits were recalled and not looked up."""
        return "from memory" in self.potential.provenance.lower()


@cache
def _sets() -> dict[str, PublishedSet]:
    """Read all shipped sets once (they never change while the program runs)."""
    out: dict[str, PublishedSet] = {}
    for file in sorted((root() / "potentials").glob("*.json")):
        family = json.loads(file.read_text(encoding="utf-8"))
        for entry in family["sets"]:
            made = _set(family, entry)
            out[made.name] = made
    return out


def _set(family: Mapping[str, Any], entry: Mapping[str, Any]) -> PublishedSet:
    lattice = {k: v for k, v in entry["lattice"].items() if v > 0.0}
    crystal = CrystalSpec(entry["prototype"], tuple(entry["sites"]), lattice)
    shells = {k: Polarisable(**v) for k, v in entry.get("polarisable", {}).items()}
    potential = PotentialSpec(
        charges=entry["charges"],
        pairs=tuple(_pair(p) for p in entry["pairs"]),
        polarisable=shells,
        published=entry["name"],
        citation=entry.get("citation", family["citation"]),
        provenance=entry["provenance"],
    )
    return PublishedSet(
        name=entry["name"],
        family=family["family"],
        formula=entry["formula"],
        crystal=crystal,
        potential=potential,
        notes=tuple(entry["notes"]),
        check=entry.get("check", {}),
    )


def _pair(entry: Mapping[str, Any]) -> PairSpec:
    parameters = {k: v for k, v in entry.items() if k not in ("between", "form", "reach")}
    first, second = entry["between"]
    return PairSpec((first, second), entry["form"], parameters, reach=entry.get("reach", "all"))


def published_names() -> tuple[str, ...]:
    """Return the names of all shipped potentials."""
    return tuple(_sets())


def published(name: str) -> PublishedSet:
    """Return a shipped potential by name.

    Raises
    ------
    InputError
        No such potential; the nearest names are given.
    """
    found = _sets().get(name)
    if found is None:
        near = get_close_matches(name, published_names(), 3, 0.4)
        hint = f"did you mean {' or '.join(near)}?" if near else "see: thermex materials"
        raise InputError(f'no published potential is named "{name}"', where="potential.published", fix=hint)
    return found


def published_for(formula: str) -> tuple[PublishedSet, ...]:
    """Return every shipped potential for a compound, by formula."""
    return tuple(s for s in _sets().values() if s.formula == formula)


def case_from_published(
    name: str, temperatures: tuple[float, ...], pressure: float = 0.0, accuracy: float = 1e-3
) -> Case:
    """Make a case of a shipped potential on its own structure."""
    known = published(name)
    return Case(
        title=name,
        crystal=known.crystal,
        potential=known.potential,
        conditions=Conditions(temperatures, pressure),
        accuracy=Accuracy(alpha=accuracy),
        measured=MeasuredSpec(material=known.formula),
        source="",
    )
