"""Structure types by name: declarative entries, one a prototype, no calculation.

Coordinates are fractions of the conventional cell in the setting of International Tables A whose Hall
number each entry gives. A coordinate is a number or the name of a free inner coordinate. The order of
``Prototype.sites`` is the order in which a case names what sits on them.
"""

from __future__ import annotations

import difflib
import math
from dataclasses import dataclass

from thermex.errors import InputError

Coordinate = float | str


@dataclass(frozen=True, slots=True)
class Site:
    """One Wyckoff position, occupied by one species."""

    role: str
    """What sits there, in words."""
    wyckoff: str
    """Multiplicity in the conventional cell and Wyckoff letter ("8c")."""
    position: tuple[Coordinate, Coordinate, Coordinate]
    """Representative point: numbers, or names of inner coordinates."""

    @property
    def multiplicity(self) -> int:
        """Atoms in the conventional cell."""
        return int(self.wyckoff[:-1])


@dataclass(frozen=True, slots=True)
class InnerCoordinate:
    """A fraction that symmetry leaves free, where its search starts, and the range that is sensible."""

    name: str
    start: float
    low: float
    high: float


@dataclass(frozen=True, slots=True)
class Prototype:
    """One structure type."""

    name: str
    aliases: tuple[str, ...]
    space_group: int
    """International number."""
    hall: int
    """Hall number: serial number (1 to 530) of the setting and origin."""
    centring: str
    """Letter P, I, F or R of the conventional cell (R: hexagonal axes, obverse)."""
    sites: tuple[Site, ...]
    inner: tuple[InnerCoordinate, ...] = ()
    axial_ratio: float | None = None
    """Default c/a; None in cubic crystals."""
    remark: str = ""
    """What a user should know about the setting."""

    @property
    def parameter_names(self) -> tuple[str, ...]:
        """Lattice parameters that a case may give."""
        return ("a",) if self.axial_ratio is None else ("a", "c")

    @property
    def counts(self) -> tuple[int, ...]:
        """Atoms on each site in one formula unit, in the order of ``sites``."""
        counts = [site.multiplicity for site in self.sites]
        return tuple(count // math.gcd(*counts) for count in counts)

    @property
    def meaning(self) -> str:
        """What sits on the sites, in words."""
        return "; ".join(site.role for site in self.sites)


_IDEAL = math.sqrt(8.0 / 3.0)
_ORIGIN = (0.0, 0.0, 0.0)
_CENTRE = (0.5, 0.5, 0.5)
_QUARTER = (0.25, 0.25, 0.25)
_THIRD = 1.0 / 3.0

_CUBIC = (
    Prototype(
        "rock salt", ("halite", "sodium chloride"), 225, 523, "F",
        (Site("cation", "4a", _ORIGIN), Site("anion", "4b", _CENTRE)),
    ),
    Prototype(
        "caesium chloride", ("cesium chloride",), 221, 517, "P",
        (Site("cation", "1a", _ORIGIN), Site("anion", "1b", _CENTRE)),
    ),
    Prototype(
        "zinc blende", ("sphalerite",), 216, 512, "F",
        (Site("cation", "4a", _ORIGIN), Site("anion", "4c", _QUARTER)),
    ),
    Prototype(
        "fluorite", ("calcium fluoride",), 225, 523, "F",
        (Site("cation, eightfold", "4a", _ORIGIN), Site("anion, fourfold", "8c", _QUARTER)),
    ),
    Prototype(
        "antifluorite", ("anti-fluorite",), 225, 523, "F",
        (Site("cation, fourfold", "8c", _QUARTER), Site("anion, eightfold", "4a", _ORIGIN)),
        remark="the cation comes first, as in Li2O",
    ),
    Prototype("diamond", ("diamond cubic",), 227, 525, "F", (Site("atom", "8a", _ORIGIN),)),
    Prototype(
        "fcc", ("face-centred cubic", "face-centered cubic", "cubic close-packed", "ccp"), 225, 523, "F",
        (Site("atom", "4a", _ORIGIN),),
    ),
    Prototype(
        "bcc", ("body-centred cubic", "body-centered cubic"), 229, 529, "I", (Site("atom", "2a", _ORIGIN),)
    ),
    Prototype("simple cubic", ("primitive cubic",), 221, 517, "P", (Site("atom", "1a", _ORIGIN),)),
    Prototype(
        "perovskite", ("cubic perovskite",), 221, 517, "P",
        (
            Site("A, twelvefold", "1a", _ORIGIN),
            Site("B, sixfold", "1b", _CENTRE),
            Site("anion", "3c", (0.0, 0.5, 0.5)),
        ),
    ),
    Prototype(
        "spinel", ("normal spinel",), 227, 526, "F",
        (
            Site("A, tetrahedral", "8a", (0.125, 0.125, 0.125)),
            Site("B, octahedral", "16d", _CENTRE),
            Site("anion", "32e", ("u", "u", "u")),
        ),
        inner=(InnerCoordinate("u", 0.2625, 0.23, 0.30),),
        remark="the origin is at the inversion centre; with the origin on the A site u is larger by 1/8",
    ),
    Prototype(
        "garnet", (), 230, 530, "I",
        (
            Site("X, eightfold", "24c", (0.125, 0.0, 0.25)),
            Site("Y, octahedral", "16a", _ORIGIN),
            Site("Z, tetrahedral", "24d", (0.375, 0.0, 0.25)),
            Site("anion", "96h", ("x", "y", "z")),
        ),
        inner=(
            InnerCoordinate("x", 0.033, -0.01, 0.08),
            InnerCoordinate("y", 0.050, 0.01, 0.09),
            InnerCoordinate("z", 0.653, 0.61, 0.70),
        ),
        remark="x, y, z are those of the anion near (0.03, 0.05, 0.65)",
    ),
)  # fmt: skip

_AXIAL = (
    Prototype(
        "wurtzite", ("zincite",), 186, 480, "P",
        (Site("cation", "2b", (_THIRD, 2 * _THIRD, 0.0)), Site("anion", "2b", (_THIRD, 2 * _THIRD, "u"))),
        inner=(InnerCoordinate("u", 0.375, 0.30, 0.45),),
        axial_ratio=_IDEAL,
        remark="u is the height of the anion above the cation along c, near 3/8",
    ),
    Prototype(
        "hcp", ("hexagonal close-packed",), 194, 488, "P",
        (Site("atom", "2c", (_THIRD, 2 * _THIRD, 0.25)),),
        axial_ratio=_IDEAL,
    ),
    Prototype(
        "rutile", (), 136, 419, "P",
        (Site("cation", "2a", _ORIGIN), Site("anion", "4f", ("u", "u", 0.0))),
        inner=(InnerCoordinate("u", 0.305, 0.22, 0.38),),
        axial_ratio=0.65,
    ),
    Prototype(
        "corundum", (), 167, 460, "R",
        (Site("cation", "12c", (0.0, 0.0, "z")), Site("anion", "18e", ("x", 0.0, 0.25))),
        inner=(InnerCoordinate("z", 0.352, 0.335, 0.375), InnerCoordinate("x", 0.306, 0.24, 0.38)),
        axial_ratio=2.73,
        remark="hexagonal axes",
    ),
    Prototype(
        "alpha-quartz", ("quartz", "α-quartz", "low quartz"), 154, 443, "P",
        (Site("cation", "3a", ("u", 0.0, 2 * _THIRD)), Site("anion", "6c", ("x", "y", "z"))),
        inner=(
            InnerCoordinate("u", 0.470, 0.40, 0.55),
            InnerCoordinate("x", 0.414, 0.35, 0.48),
            InnerCoordinate("y", 0.267, 0.18, 0.34),
            InnerCoordinate("z", 0.786, 0.73, 0.88),
        ),
        axial_ratio=1.10,
        remark="P3_2 21 with the cation at (u, 0, 2/3); with the cation at height 0 z is smaller by 2/3",
    ),
)  # fmt: skip

PROTOTYPES: tuple[Prototype, ...] = (*_CUBIC, *_AXIAL)


def prototype_names() -> tuple[str, ...]:
    """Return the names of all structure types."""
    return tuple(prototype.name for prototype in PROTOTYPES)


def find_prototype(name: str, where: str = "crystal.prototype") -> Prototype:
    """Return the structure type called ``name`` (case, spaces and hyphens do not matter; aliases count).

    Raises
    ------
    InputError
        There is none of that name.
    """
    table = {_squeezed(word): p for p in PROTOTYPES for word in (p.name, *p.aliases)}
    found = table.get(_squeezed(name))
    if found is not None:
        return found
    near = difflib.get_close_matches(_squeezed(name), list(table), n=1)
    fix = f'did you mean "{table[near[0]].name}"? ' if near else ""
    known = ", ".join(prototype_names())
    raise InputError(f'no structure type "{name}"', where=where, fix=f"{fix}known: {known}; or give a file")


def site_counts(name: str) -> tuple[int, ...]:
    """Return the atoms on each site of a structure type in one formula unit, in the order of its sites."""
    return find_prototype(name).counts


def _squeezed(name: str) -> str:
    return "".join(letter for letter in name.lower() if letter not in " -_")
