"""Species: the element a label stands for, its mass, and formulas made of them."""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Iterable, Mapping

from thermex.errors import InputError

#: Elements that a formula names last, in this order (IUPAC Red Book 2005, table VI).
LAST = ("Si", "C", "As", "P", "N", "H", "Te", "Se", "S", "O", "I", "Br", "Cl", "F")

_LABEL = re.compile(r"([A-Z][a-z]?)([0-9+\-_].*)?")


def element_of(label: str) -> str:
    """Return the chemical symbol of a label: "Fe" of "Fe", "Fe3", "Fe3+" and "Fe_core".

    Raises
    ------
    InputError
        The label does not begin with a chemical symbol.
    """
    from ase.data import atomic_numbers

    match = _LABEL.fullmatch(label)
    if match and atomic_numbers.get(match[1], 0) > 0:
        return match[1]
    known = [symbol for symbol in atomic_numbers if symbol != "X"]
    near = difflib.get_close_matches(label.capitalize(), known, n=1)
    fix = f'did you mean "{near[0]}"?' if near else "begin with a chemical symbol"
    raise InputError(f'"{label}" is not an element', where="crystal.sites", fix=fix)


def mass_of(label: str, given: Mapping[str, float]) -> float:
    """Return the mass of a species, u: the one given, or the standard atomic weight that ASE carries."""
    if label in given:
        return float(given[label])
    from ase.data import atomic_masses, atomic_numbers

    return float(atomic_masses[atomic_numbers[element_of(label)]])


def formula_in_order(counts: Iterable[tuple[str, int]]) -> tuple[str, int]:
    """Return the formula unit with the elements in the order given, and how many of them there are.

    Parameters
    ----------
    counts
        Labels and how many atoms of each; labels of one element are added up.
    """
    total: dict[str, int] = {}
    for label, count in counts:
        element = element_of(label)
        total[element] = total.get(element, 0) + count
    units = math.gcd(*total.values())
    return "".join(f"{s}{n // units if n > units else ''}" for s, n in total.items()), units


def conventional_formula(labels: tuple[str, ...]) -> tuple[str, int]:
    """Return the formula unit with electronegative elements last, and how many of them there are."""

    def rank(label: str) -> tuple[int, str]:
        element = element_of(label)
        return (LAST.index(element) if element in LAST else -1, element)

    return formula_in_order((label, labels.count(label)) for label in sorted(set(labels), key=rank))
