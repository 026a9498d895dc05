"""Walks the tables of a case file and collects every fault with its dotted key."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from difflib import get_close_matches
from itertools import pairwise
from pathlib import Path
from typing import Any

from thermex.case.schema import Key
from thermex.errors import Fault

#: Longest text accepted, characters.
LONGEST = 500

#: Most temperatures in one case.
MOST_TEMPERATURES = 2000


class Walker:
    """Reads values out of nested tables; what is wrong goes into ``faults``."""

    def __init__(self) -> None:
        self.faults: list[Fault] = []

    def fault(self, key: str, what: str, fix: str = "") -> None:
        """Note a fault."""
        self.faults.append(Fault(key, what, fix))

    def table(self, value: object, path: str) -> Mapping[str, Any]:
        """Return a table, or an empty one with a fault."""
        if isinstance(value, Mapping):
            return value
        self.fault(path, f"is {shown(value)}", "give a table")
        return {}

    def unknown(self, given: Iterable[str], known: Iterable[str], path: str) -> None:
        """Note every key that is not known, with the nearest one that is."""
        names = list(known)
        for key in given:
            if key not in names:
                near = get_close_matches(key, names, 1, 0.5)
                fix = f'did you mean "{near[0]}"?' if near else f"known: {', '.join(names)}"
                self.fault(join(path, short(key)), "is not a known key", fix)

    def value(self, key: Key, value: object, path: str) -> Any:
        """Return a checked value, or None with a fault."""
        where = join(path, key.name)
        if key.kind == "number":
            return self.number(key, value, where)
        if key.kind == "integer":
            return self.integer(key, value, where)
        if key.kind in {"text", "path"}:
            return self.text(key, value, where)
        if key.kind == "texts":
            return self.texts(value, where)
        if key.kind == "numbers by name":
            return self.numbers_by_name(value, where)
        if key.kind == "temperatures":
            return self.temperatures(value, where)
        return self.matrix(value, where)

    def number(self, key: Key, value: object, where: str) -> float | None:
        """Return a finite number within the bounds of its key."""
        unit = f" in {key.unit}" if key.unit else ""
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            self.fault(where, f"is {shown(value)}", f"give a plain number{unit}")
            return None
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if not math.isfinite(number):
            self.fault(where, f"is {shown(value)}", f"give a finite number{unit}")
            return None
        if number < key.low or (key.strict and number <= key.low) or number > key.high:
            self.fault(where, f"is {shown(value)}", bounds(key))
            return None
        return number

    def integer(self, key: Key, value: object, where: str) -> int | None:
        """Return a whole number within the bounds of its key."""
        if isinstance(value, bool) or not isinstance(value, int) or not key.low <= value <= key.high:
            self.fault(where, f"is {shown(value)}", f"give a whole number from {key.low:g} to {key.high:g}")
            return None
        return value

    def text(self, key: Key, value: object, where: str) -> str | None:
        """Return a text, one of the allowed ones where the key says so."""
        if not isinstance(value, str) or len(value) > LONGEST or "\x00" in value:
            self.fault(where, f"is {shown(value)}", "give a short text in quotes")
            return None
        if key.allowed and value not in key.allowed:
            near = get_close_matches(value, key.allowed, 1, 0.4)
            hint = f'did you mean "{near[0]}"? ' if near else ""
            self.fault(where, f"is {shown(value)}", f"{hint}one of {', '.join(key.allowed)}")
            return None
        return value

    def texts(self, value: object, where: str) -> tuple[str, ...] | None:
        """Return a list of texts."""
        if isinstance(value, list) and 0 < len(value) <= 100 and all(_is_short_text(v) for v in value):
            return tuple(value)
        self.fault(where, f"is {shown(value)}", 'give a list of texts, such as ["Mg", "O"]')
        return None

    def numbers_by_name(self, value: object, where: str) -> dict[str, float] | None:
        """Return a table of numbers."""
        if not isinstance(value, Mapping) or len(value) > 100:
            self.fault(where, f"is {shown(value)}", "give a table of numbers, such as { Mg = 2.0, O = -2.0 }")
            return None
        out = {}
        for name, entry in value.items():
            number = self.number(Key(name, "number", low=-1e6, high=1e6), entry, join(where, short(name)))
            if number is not None:
                out[str(name)] = number
        return out

    def temperatures(self, value: object, where: str) -> tuple[float, ...] | None:
        """Return ascending temperatures in K, from a list or from { from, to, step }."""
        kelvin = Key("", "number", "K", low=0.0, high=1e5)
        if isinstance(value, Mapping):
            return self._range(value, where, kelvin)
        if not isinstance(value, list) or not value:
            self.fault(where, f"is {shown(value)}", "give a list of temperatures in K, or { from, to, step }")
            return None
        if len(value) > MOST_TEMPERATURES:
            self.fault(where, f"holds {len(value)} values", f"at most {MOST_TEMPERATURES}")
            return None
        numbers = [self.number(kelvin, v, f"{where}[{i}]") for i, v in enumerate(value)]
        good = [n for n in numbers if n is not None]
        if len(good) < len(numbers):
            return None
        for before, after in pairwise(good):
            if after <= before:
                self.fault(where, f"goes from {before:g} to {after:g}", "give ascending temperatures")
                return None
        return tuple(good)

    def _range(self, value: Mapping[str, Any], where: str, kelvin: Key) -> tuple[float, ...] | None:
        self.unknown(value, ("from", "to", "step"), where)
        numbers = []
        for name in ("from", "to", "step"):
            if name not in value:
                self.fault(join(where, name), "is missing", "give from, to and step in K")
                return None
            numbers.append(self.number(kelvin, value[name], join(where, name)))
        if any(n is None for n in numbers):
            return None
        start, stop, step = (float(n) for n in numbers if n is not None)
        if step <= 0.0 or stop < start:
            self.fault(where, f"runs from {start:g} to {stop:g} by {step:g}", "give from ≤ to and step > 0")
            return None
        count = math.floor((stop - start) / step + 1e-9) + 1
        if count > MOST_TEMPERATURES:
            self.fault(where, f"makes {count} values", f"at most {MOST_TEMPERATURES}: take a larger step")
            return None
        return tuple(start + k * step for k in range(count))

    def matrix(self, value: object, where: str) -> tuple[tuple[float, ...], ...] | None:
        """Return a square matrix of finite numbers."""
        if not isinstance(value, list) or not 0 < len(value) <= 100:
            self.fault(where, f"is {shown(value)}", "give a list of rows of numbers")
            return None
        rows = []
        for i, row in enumerate(value):
            if not isinstance(row, list) or len(row) != len(value):
                self.fault(f"{where}[{i}]", f"is {shown(row)}", f"give a row of {len(value)} numbers")
                return None
            numbers = [self.number(Key("", "number"), v, f"{where}[{i}][{j}]") for j, v in enumerate(row)]
            if any(n is None for n in numbers):
                return None
            rows.append(tuple(n for n in numbers if n is not None))
        return tuple(rows)


def _is_short_text(value: object) -> bool:
    return isinstance(value, str) and 0 < len(value) <= 40


def existing(walker: Walker, folder: Path, name: str, where: str) -> Path | None:
    """Return an existing file named in a case, relative to the folder of the case."""
    path = folder / name
    try:
        found = path.is_file()
    except (OSError, ValueError):
        found = False
    if not found:
        walker.fault(where, f'there is no file "{name}"', "give a path relative to the case file")
        return None
    return path


def bounds(key: Key) -> str:
    """Say what range a number must lie in."""
    unit = f" {key.unit}" if key.unit else ""
    if math.isinf(key.high):
        return f"give a number {'above' if key.strict else 'of at least'} {key.low:g}{unit}"
    start = f"above {key.low:g} and up" if key.strict else f"from {key.low:g}"
    return f"give a number {start} to {key.high:g}{unit}"


def join(path: str, key: str) -> str:
    """Join a dotted path and a key."""
    return f"{path}.{key}" if path else key


def short(text: object) -> str:
    """Return a text cut to a readable length."""
    plain = str(text)
    return plain if len(plain) <= 60 else plain[:57] + "..."


def shown(value: object) -> str:
    """Return a value as it may be quoted in a message."""
    if isinstance(value, Mapping):
        return "a table"
    if isinstance(value, list):
        return f"a list of {len(value)}" if len(value) > 4 else short(repr(value)[:200])
    if isinstance(value, int) and not isinstance(value, bool) and abs(value) > 10**30:
        return "a number of more than 30 digits"
    if isinstance(value, str):
        return short(f'"{value[:80]}"')
    return short(repr(value)[:200])
