"""``thermex materials``: what is shipped, measured values and published potentials, each with its source."""

from __future__ import annotations

import argparse
import sys
import textwrap
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from thermex.measured import Material

WIDTH = 100


def add_parser(subparsers: Any, common: argparse.ArgumentParser) -> None:
    """Add this command to the command line."""
    parser = subparsers.add_parser(
        "materials",
        parents=[common],
        help="list the materials with measured values, and the published potentials by name",
        description="List the shipped materials and published potentials; with a name, everything about one.",
    )
    parser.add_argument("material", metavar="MATERIAL", nargs="?", help='formula or name, such as "MgO"')
    parser.set_defaults(run=run)


def run(arguments: argparse.Namespace) -> int:
    """Show the list, or everything about one material."""
    lines = overview() if arguments.material is None else details(arguments.material)
    sys.stdout.write("\n".join(lines) + "\n")
    sys.stdout.flush()
    return 0


def overview() -> Iterator[str]:
    """Return one entry a compound: what was measured on it, and the potentials that may be cited."""
    from thermex.case.published import published, published_names
    from thermex.measured import materials

    potentials: dict[str, list[str]] = {}
    for name in published_names():
        potentials.setdefault(published(name).formula, []).append(name)
    shipped = {material.formula: material for material in materials()}
    for formula in sorted({*shipped, *potentials}):
        material = shipped.get(formula)
        measured = f"{material.name}, {material.structure}" if material else "nothing measured is shipped"
        yield f"{formula}  {measured}"
        if material:
            names = dict.fromkeys(series.quantity for series in material.series if series.usable)
            yield from _folded("measured: ", ", ".join(names) or "nothing that may be used")
        yield from _folded("potentials: ", "; ".join(potentials.get(formula, [])) or "none")
    yield ""
    yield f"{len(shipped)} materials, {len(published_names())} potentials. 'thermex materials MgO' shows sources."


def details(name: str) -> Iterator[str]:
    """Return every series and every potential of one compound, with its source.

    Raises
    ------
    InputError
        Nothing of that name is shipped.
    """
    from thermex.case.published import published_for
    from thermex.errors import InputError
    from thermex.measured import load_material

    potentials = published_for(name)
    try:
        material = load_material(name)
    except InputError:
        if not potentials:
            raise
        yield f"{name}: nothing measured is shipped"
    else:
        potentials = published_for(material.formula)
        yield from _measured(material)
    yield ""
    yield "Potentials:" if potentials else "Potentials: none"
    for known in potentials:
        said = (known.potential.citation, known.potential.provenance, *known.notes)
        yield from _folded(f"{known.name}: ", "; ".join(part.rstrip(".") for part in said if part) + ".")


def _measured(material: Material) -> Iterator[str]:
    """Return the series of a material, a paragraph each."""
    yield f"{material.formula}  {material.name}, {material.structure}"
    for series in material.series:
        kelvin = series.temperature_K
        kind = f", {series.kind}" if series.kind else ""
        axis = f", along {series.axis}" if series.axis and not material.is_cubic else ""
        reach = f"{kelvin.min():g} K" if kelvin.min() == kelvin.max() else f"{kelvin.min():g} to {kelvin.max():g} K"
        count = f"{len(kelvin)} value{'s' if len(kelvin) > 1 else ''}"
        unused = "" if series.usable else "; not used"
        text = f"{count}, {reach}{unused}; {series.citation}"
        yield from _folded(f"{series.quantity}{kind}{axis}: ", text)


def _folded(head: str, text: str) -> list[str]:
    """Return a paragraph, indented."""
    return textwrap.wrap(head + text, WIDTH, initial_indent="  ", subsequent_indent="      ")
