"""The header of one series, checked: what was measured, in which unit, from where."""

from __future__ import annotations

import difflib
import re
from dataclasses import dataclass

from thermex.errors import Fault
from thermex.measured.blocks import Block, number, shown
from thermex.measured.conventions import ZERO_CELSIUS_K
from thermex.measured.quantities import (
    LATTICE,
    LINEAR,
    QUANTITIES,
    Quantity,
    factor_of,
    plain_word,
    quantity_named,
)

_KELVIN = {"k", "kelvin"}
_CELSIUS = {"c", "°c", "degc", "celsius", "℃", "degree celsius", "degrees celsius"}
_KINDS = {
    "instantaneous": "instantaneous",
    "differential": "instantaneous",
    "tangent": "instantaneous",
    "true": "instantaneous",
    "mean": "mean",
    "average": "mean",
    "secant": "mean",
}
_AVERAGE = ("", "average", "polycrystal average", "polycrystal", "isotropic", "cubic", "volume", "-")
_AXES = dict.fromkeys(_AVERAGE, "") | {"a": "a", "b": "b", "c": "c"}
_HOW = ("seen", "from memory", "from memory, confirmed")
_CHOICES = {
    "confidence": ("high", "medium", "low"),
    "uncertainty": ("stated", "estimated"),
    "usable": ("yes", "no"),
}


@dataclass(frozen=True, slots=True)
class Heading:
    """The checked header of one series."""

    quantity: Quantity
    kind: str
    axis: str
    factor: float
    """From the unit of the file to the house unit."""
    unit: str
    """As written in the file."""
    celsius: bool
    reference_temperature_K: float | None
    source: str
    read_in: str
    how: str
    confidence: str
    estimated_uncertainty: bool
    usable: bool
    remark: str


def heading_of(block: Block, file: str, faults: list[Fault]) -> Heading | None:
    """Return the checked header of a block; None, with the reasons in ``faults``, when it is wrong."""
    before = len(faults)
    quantity = _quantity(block, faults)
    celsius = _is_celsius(block, faults)
    choices = {key: _choice(block, key, faults) for key in _CHOICES}
    how = _how(block, faults)
    if quantity is None:
        _kind(block, LINEAR if _text(block, "kind") else LATTICE, faults)
        return None
    kind = _kind(block, quantity, faults)
    axis = _axis(block, quantity, faults)
    factor = _factor(block, quantity, faults)
    reference = _reference(block, quantity, kind, celsius, faults)
    if len(faults) > before:
        return None
    return Heading(
        quantity, kind, axis, factor, _text(block, "unit"), celsius, reference,
        _text(block, "source") or f"values in {file}", _text(block, "read in"), how,
        choices["confidence"], choices["uncertainty"] == "estimated", choices["usable"] != "no",
        _text(block, "remark"),
    )  # fmt: skip


def _text(block: Block, key: str) -> str:
    entry = block.header.get(key)
    return entry.text if entry else ""


def _where(block: Block, key: str) -> str:
    entry = block.header.get(key)
    return f"line {entry.line if entry else block.line}"


def _quantity(block: Block, faults: list[Fault]) -> Quantity | None:
    text = _text(block, "quantity")
    names = [quantity.name for quantity in QUANTITIES]
    if not text:
        fix = f"say what was measured, for example '# quantity: {names[0]}'"
        faults.append(Fault(f"line {block.line}", "the quantity is not stated", fix))
        return None
    found = quantity_named(text)
    if found is None:
        near = difflib.get_close_matches(text[:80], names, 1, 0.5)
        fix = f"did you mean '{near[0]}'?" if near else "one of: " + ", ".join(names)
        faults.append(Fault(_where(block, "quantity"), f"unknown quantity {shown(text)}", fix))
    return found


def _is_celsius(block: Block, faults: list[Fault]) -> bool:
    text = _text(block, "temperature unit").lower()
    named = _column_unit(block.columns[0]) if block.columns else ""
    if text and text not in _KELVIN | _CELSIUS:
        key = _where(block, "temperature unit")
        faults.append(Fault(key, f"unknown temperature unit {shown(text)}", "K or °C"))
        return False
    if text and named and (text in _CELSIUS) != (named in _CELSIUS):
        what = f"the column {shown(block.columns[0])} contradicts the temperature unit {shown(text)}"
        faults.append(Fault(f"line {block.columns_line}", what, "make the two agree"))
    return (text or named) in _CELSIUS


def _column_unit(name: str) -> str:
    match = re.fullmatch(r"t\w*?[\s_/(\[]+(k|°?c|℃)[)\]]?", name.strip().lower())
    return match[1] if match else ""


def _kind(block: Block, quantity: Quantity, faults: list[Fault]) -> str:
    text = _text(block, "kind").lower()
    if not quantity.kinds:
        return ""
    if not text:
        what = f"the kind of the {quantity.name} is not stated"
        fix = "'# kind: instantaneous' for (1/L) dL/dT, '# kind: mean' for an average from T0"
        faults.append(Fault(f"line {block.line}", what, fix))
    elif text not in _KINDS:
        faults.append(Fault(_where(block, "kind"), f"unknown kind {shown(text)}", "instantaneous or mean"))
    return _KINDS.get(text, "")


def _axis(block: Block, quantity: Quantity, faults: list[Fault]) -> str:
    text = _text(block, "axis").lower()
    if text not in _AXES:
        fix = "a, b, c, or 'average' for a cubic crystal or a polycrystal"
        faults.append(Fault(_where(block, "axis"), f"unknown axis {shown(text)}", fix))
        return ""
    axis = _AXES[text]
    return axis or ("a" if quantity is LATTICE else "")


def _factor(block: Block, quantity: Quantity, faults: list[Fault]) -> float:
    text = _text(block, "unit")
    if not text and quantity.unit in ("1", "K") and quantity.name != "elongation":
        return 1.0
    fits = ", ".join(quantity.examples)
    if not text:
        faults.append(Fault(f"line {block.line}", "the unit is not stated", f"'# unit: …' with one of: {fits}"))
        return 1.0
    factor = factor_of(quantity, text[:40])
    if factor is None:
        what = f"{shown(text)} is not a unit of the {quantity.name}"
        faults.append(Fault(_where(block, "unit"), what, f"one of: {fits}"))
        return 1.0
    return factor


def _reference(block: Block, quantity: Quantity, kind: str, celsius: bool, faults: list[Fault]) -> float | None:
    if kind not in quantity.kinds_with_reference:
        return None
    text = _text(block, "reference temperature")
    if not text:
        what = f"the reference temperature of the {kind or quantity.name} is not stated".replace(
            "the mean", "the mean coefficient"
        )
        faults.append(Fault(f"line {block.line}", what, "for example '# reference temperature: 293.15 K'"))
        return None
    value = temperature_K(text, celsius)
    if value is None or not 0.0 <= value <= 10_000.0:
        what = f"{shown(text)} is not a temperature"
        faults.append(Fault(_where(block, "reference temperature"), what, "for example '293.15 K' or '20 °C'"))
        return None
    return value


def temperature_K(text: str, celsius: bool) -> float | None:
    """Return a temperature such as "20 °C", "293.15 K" or "293.15" (unit of the file) in K."""
    match = re.fullmatch(r"([+\-−]?[0-9.eE+-]{1,20})\s*(K|°?C|℃|degC)?", text.strip())
    value = number(match[1]) if match else None
    if match is None or value is None:
        return None
    in_celsius = celsius if match[2] is None else match[2] != "K"
    return value + ZERO_CELSIUS_K if in_celsius else value


def _choice(block: Block, key: str, faults: list[Fault]) -> str:
    text = _text(block, key).lower()
    if text and text not in _CHOICES[key]:
        what = f"unknown {key} {shown(text)}"
        faults.append(Fault(_where(block, key), what, "one of: " + ", ".join(_CHOICES[key])))
        return ""
    return text


def _how(block: Block, faults: list[Fault]) -> str:
    text = _text(block, "how").lower() or "seen"
    if plain_word(text) not in {plain_word(word) for word in _HOW}:
        faults.append(Fault(_where(block, "how"), f"unknown value {shown(text)}", "one of: " + "; ".join(_HOW)))
    return text
