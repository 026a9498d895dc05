"""Structure types: space group, sites and free inner coordinates."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches

import numpy as np
from numpy.typing import NDArray

from thermex.errors import InputError

Array = NDArray[np.float64]

#: A coordinate: a number, or the name of a free inner coordinate (with a minus sign in front, perhaps).
Coordinate = float | str


@dataclass(frozen=True, slots=True)
class Prototype:
    """A structure type; ``sites`` in the order in which a case names what sits on them."""

    name: str
    hall: int
    """Number of the Hall symbol (setting and origin) in the tables of spglib."""
    sites: tuple[tuple[Coordinate, Coordinate, Coordinate], ...]
    """One representative position a site, conventional axes."""
    counts: tuple[int, ...]
    """Atoms on each site per formula unit."""
    ratio: float = 1.0
    """Start value of c/a."""
    inner: Mapping[str, float] = field(default_factory=dict)
    """Start values of the free inner coordinates."""
    hexagonal: bool = False
    """Whether the conventional cell has hexagonal axes."""
    aliases: tuple[str, ...] = ()
    meaning: str = ""
    """What sits on the sites, for the documentation."""


PROTOTYPES: tuple[Prototype, ...] = (
    Prototype("rock salt", 523, ((0, 0, 0), (0.5, 0.5, 0.5)), (1, 1), aliases=("rocksalt", "halite")),
    Prototype("caesium chloride", 517, ((0, 0, 0), (0.5, 0.5, 0.5)), (1, 1), aliases=("cesium chloride",)),
    Prototype(
        "zinc blende", 512, ((0, 0, 0), (0.25, 0.25, 0.25)), (1, 1), aliases=("zincblende", "sphalerite")
    ),
    Prototype(
        "fluorite", 523, ((0, 0, 0), (0.25, 0.25, 0.25)), (1, 2), meaning="cation (fcc), anion (tetrahedral)"
    ),
    Prototype(
        "antifluorite",
        523,
        ((0.25, 0.25, 0.25), (0, 0, 0)),
        (2, 1),
        meaning="cation (tetrahedral), anion (fcc)",
    ),
    Prototype("diamond", 526, ((0.125, 0.125, 0.125),), (1,)),
    Prototype("fcc", 523, ((0, 0, 0),), (1,), aliases=("face-centred cubic", "face-centered cubic")),
    Prototype("bcc", 529, ((0, 0, 0),), (1,), aliases=("body-centred cubic", "body-centered cubic")),
    Prototype("simple cubic", 517, ((0, 0, 0),), (1,)),
    Prototype(
        "perovskite",
        517,
        ((0.5, 0.5, 0.5), (0, 0, 0), (0.5, 0, 0)),
        (1, 1, 3),
        aliases=("cubic perovskite",),
        meaning="A (twelvefold), B (sixfold), X",
    ),
    Prototype(
        "wurtzite",
        480,
        ((1 / 3, 2 / 3, 0), (1 / 3, 2 / 3, "u")),
        (1, 1),
        1.633,
        {"u": 0.375},
        hexagonal=True,
    ),
    Prototype(
        "hcp", 488, ((1 / 3, 2 / 3, 0.25),), (1,), 1.633, hexagonal=True, aliases=("hexagonal close-packed",)
    ),
    Prototype("rutile", 419, ((0, 0, 0), ("u", "u", 0)), (1, 2), 0.644, {"u": 0.305}),
    Prototype(
        "corundum", 460, ((0, 0, "z"), ("x", 0, 0.25)), (2, 3), 2.73, {"z": 0.352, "x": 0.306}, hexagonal=True
    ),
    Prototype(
        "alpha-quartz",
        443,
        (("u", 0, 2 / 3), ("x", "y", "z")),
        (1, 2),
        1.100,
        {"u": 0.4697, "x": 0.4135, "y": 0.2669, "z": 0.7858},
        hexagonal=True,
        aliases=("quartz", "α-quartz"),
    ),
    Prototype(
        "spinel",
        526,
        ((0.125, 0.125, 0.125), (0.5, 0.5, 0.5), ("u", "u", "u")),
        (1, 2, 4),
        1.0,
        {"u": 0.2625},
        meaning="tetrahedral cation, octahedral cation, anion",
    ),
    Prototype(
        "garnet",
        530,
        ((0.125, 0, 0.25), (0, 0, 0), (0.375, 0, 0.25), ("x", "y", "z")),
        (3, 2, 3, 12),
        1.0,
        {"x": -0.0306, "y": 0.0505, "z": 0.1493},
        meaning="dodecahedral, octahedral, tetrahedral cation, anion",
    ),
)

_BY_NAME = {name: p for p in PROTOTYPES for name in (p.name, *p.aliases)}


def prototype_names() -> tuple[str, ...]:
    """Return the names of all structure types."""
    return tuple(p.name for p in PROTOTYPES)


def find_prototype(name: str) -> Prototype:
    """Return a structure type by name or alias.

    Raises
    ------
    InputError
        No such structure type; the nearest names are given.
    """
    found = _BY_NAME.get(name.strip().lower())
    if found is None:
        near = get_close_matches(name.lower(), list(_BY_NAME), 1)
        hint = f'did you mean "{near[0]}"? ' if near else ""
        raise InputError(
            f'"{name}" is not a structure type',
            where="crystal.prototype",
            fix=f"{hint}known: {', '.join(prototype_names())}",
        )
    return found


def site_counts(prototype: str) -> tuple[int, ...]:
    """Return atoms on each site per formula unit, in the order of ``sites``."""
    return find_prototype(prototype).counts


def cell_of(
    prototype: Prototype, lattice: Mapping[str, float], inner: Mapping[str, float]
) -> tuple[Array, Array, list[int]]:
    """Return the conventional cell: lattice (3, 3) Å, positions (n, 3) and the site of each atom.

    Parameters
    ----------
    lattice
        "a" and, where it is free, "c" in Å (c defaults to ``ratio`` times a).
    """
    import spglib

    a = lattice["a"]
    c = lattice.get("c", prototype.ratio * a)
    vectors = np.diag([a, a, c])
    if prototype.hexagonal:
        vectors[1] = [-0.5 * a, np.sqrt(0.75) * a, 0.0]
    values = {**prototype.inner, **inner}
    operations = spglib.get_symmetry_from_database(prototype.hall)
    positions: list[Array] = []
    owners: list[int] = []
    for site, coordinates in enumerate(prototype.sites):
        start = np.array([values[c] if isinstance(c, str) else float(c) for c in coordinates])
        orbit = np.array(operations["rotations"] @ start + operations["translations"]) % 1.0
        for point in _distinct(orbit):
            positions.append(point)
            owners.append(site)
    return vectors, np.array(positions), owners


def _distinct(points: Array) -> list[Array]:
    kept: list[Array] = []
    for point in points:
        if all(np.abs((point - k) - np.rint(point - k)).max() > 1e-6 for k in kept):
            kept.append(point)
    return kept
