"""The materials that thermex ships measured values for, by formula or by name."""

from __future__ import annotations

import difflib
import functools
from dataclasses import dataclass
from pathlib import Path

from thermex import data
from thermex.errors import Fault, InputError
from thermex.measured.blocks import blocks_of, file_text
from thermex.measured.quantities import plain_word
from thermex.measured.reader import series_of_text
from thermex.measured.series import Series

#: Structures in which every direction expands alike.
CUBIC = ("rock salt", "caesium chloride", "zinc blende", "fluorite", "fcc", "bcc", "diamond", "simple cubic")

#: Formula units in the conventional cell, by structure (crystallography: common practice, no source).
FORMULA_UNITS = {
    "rock salt": 4,
    "caesium chloride": 1,
    "fluorite": 4,
    "fcc": 4,
    "bcc": 2,
    "hcp": 2,
    "corundum": 6,
    "rutile": 2,
    "wurtzite": 2,
}


@dataclass(frozen=True, slots=True, eq=False)
class Material:
    """One material and everything measured on it."""

    formula: str
    name: str
    also_called: tuple[str, ...]
    structure: str
    """Prototype, for example "rock salt"."""
    series: tuple[Series, ...]

    @property
    def is_cubic(self) -> bool:
        """True when the lattice parameter a says everything about the size of the cell."""
        return self.structure in CUBIC

    @property
    def sources(self) -> tuple[str, ...]:
        """Source texts; source number n of a series is entry n − 1. Each says "from memory" where so."""
        texts = {series.source_number: series.citation for series in self.series}
        return tuple(texts[number] for number in sorted(texts))

    def of(self, quantity: str, axis: str = "", kind: str = "") -> tuple[Series, ...]:
        """Return the series of one quantity along one axis ("" average or cubic), of any or one kind.

        In a cubic crystal "" and "a" mean the same.
        """
        wanted = {axis} | ({"", "a"} if self.is_cubic and axis in ("", "a") else set())
        return tuple(
            series
            for series in self.series
            if series.quantity == quantity and series.axis in wanted and kind in ("", series.kind)
        )

    def __repr__(self) -> str:
        """Say in one line what the material is."""
        return f"<{self.formula}, {self.name}, {self.structure}: {len(self.series)} series>"


def load_material(name: str) -> Material:
    """Return a shipped material by its formula or name ("MgO", "magnesium oxide", "magnesia").

    Raises
    ------
    InputError
        When there is none of that name; the nearest names are suggested.
    """
    word = plain_word(name)
    for material in materials():
        if name == material.formula:
            return material
    for material in materials():
        names = (material.formula, material.name, *material.also_called)
        if word in {plain_word(known) for known in names}:
            return material
    raise InputError(f"no measured values of '{_short(name)}'", where="material", fix=_nearest(name))


def materials() -> list[Material]:
    """Return every shipped material, in order of the formula."""
    folder = data.root() / "measured"
    return list(_materials(folder))


@functools.cache
def _materials(folder: Path) -> tuple[Material, ...]:
    return tuple(read_material(path) for path in sorted(folder.glob("*.csv")))


def read_material(path: Path) -> Material:
    """Read one file of ``shared/measured``.

    Raises
    ------
    InputError
        With every fault of the file, or when it does not say which material it is about.
    """
    text = file_text(path)
    faults: list[Fault] = []
    blocks = blocks_of(text, faults)
    header = blocks[0].header if blocks else {}
    missing = [key for key in ("material", "formula", "structure") if key not in header]
    if missing:
        raise InputError.of(path.name, [Fault("line 1", f"'{key}' is not stated", f"'# {key}: …'") for key in missing])
    also = header["also called"].text.split(",") if "also called" in header else []
    return Material(
        formula=header["formula"].text,
        name=header["material"].text,
        also_called=tuple(word.strip() for word in also),
        structure=header["structure"].text,
        series=series_of_text(text, path.name),
    )


def _short(name: str) -> str:
    return "".join(letter if letter.isprintable() else "�" for letter in name[:60])


def _nearest(name: str) -> str:
    known = {plain_word(word): material for material in materials() for word in _names(material)}
    near = difflib.get_close_matches(plain_word(name[:60]), list(known), 3, 0.7)
    if near:
        found = dict.fromkeys(f"{known[word].formula} ({known[word].name})" for word in near)
        return "did you mean " + " or ".join(found) + "?"
    return "one of: " + ", ".join(material.formula for material in materials())


def _names(material: Material) -> tuple[str, ...]:
    return (material.formula, material.name, *material.also_called)
