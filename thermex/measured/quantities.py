"""What can be measured: names, units and plausible sizes of the quantities that a series may hold."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

#: Kinds of an expansion coefficient.
INSTANTANEOUS, MEAN = "instantaneous", "mean"


@dataclass(frozen=True, slots=True)
class Quantity:
    """One measurable quantity."""

    name: str
    """As written in files and on screen."""
    unit: str
    """House unit, in which values are held."""
    lowest: float
    """Least plausible value in house units."""
    highest: float
    """Greatest plausible value in house units."""
    units: Mapping[str, float]
    """Factor to the house unit for each accepted unit, spelled as ``plain_unit`` spells it."""
    examples: tuple[str, ...]
    """Units to name in a message."""
    aliases: tuple[str, ...] = ()
    """Other names, spelled as ``plain_word`` spells them."""
    kinds: tuple[str, ...] = ()
    """Kinds that must be told apart; empty when there is but one."""
    kinds_with_reference: tuple[str, ...] = field(default=())
    """Kinds that need a reference temperature ("" for a quantity without kinds)."""


_PER_KELVIN = {
    "1/k": 1.0,
    "k-1": 1.0,
    "perk": 1.0,
    "1e-6/k": 1e-6,
    "10-6/k": 1e-6,
    "10-6k-1": 1e-6,
    "1e-6k-1": 1e-6,
    "ppm/k": 1e-6,
    "um/m/k": 1e-6,
    "um/mk": 1e-6,
    "um/(mk)": 1e-6,
    "1e-5/k": 1e-5,
    "10-5/k": 1e-5,
    "%/k": 1e-2,
}
_RATIO = {
    "1": 1.0,
    "-": 1.0,
    "none": 1.0,
    "dimensionless": 1.0,
    "m/m": 1.0,
    "%": 1e-2,
    "percent": 1e-2,
    "1e-6": 1e-6,
    "10-6": 1e-6,
    "ppm": 1e-6,
    "um/m": 1e-6,
    "1e-5": 1e-5,
    "1e-3": 1e-3,
    "10-3": 1e-3,
    "mm/m": 1e-3,
}
_PRESSURE = {"gpa": 1.0, "mpa": 1e-3, "pa": 1e-9, "kbar": 0.1, "bar": 1e-4, "mbar": 100.0}
_HEAT = {"j/mol/k": 1.0, "j/molk": 1.0, "j/(molk)": 1.0, "jmol-1k-1": 1.0, "cal/mol/k": 4.184}
_HEAT |= {"cal/molk": 4.184, "cal/(molk)": 4.184}
_LENGTH = {"a": 1.0, "angstrom": 1.0, "ang": 1.0, "nm": 10.0, "pm": 0.01}

LINEAR = Quantity(
    "linear expansion coefficient", "1/K", -1e-2, 1e-2, _PER_KELVIN, ("1e-6/K", "1/K"),
    ("alpha", "alphalinear", "linearcoefficient", "cte", "coefficientoflinearthermalexpansion",
     "linearthermalexpansioncoefficient", "coefficientofthermalexpansion", "thermalexpansioncoefficient"),
    (INSTANTANEOUS, MEAN), (MEAN,),
)  # fmt: skip
VOLUME_COEFFICIENT = Quantity(
    "volume expansion coefficient", "1/K", -3e-2, 3e-2, _PER_KELVIN, ("1e-6/K", "1/K"),
    ("alphavolume", "volumecoefficient", "beta", "volumetricexpansioncoefficient"),
    (INSTANTANEOUS, MEAN), (MEAN,),
)  # fmt: skip
ELONGATION = Quantity(
    "elongation", "1", -0.5, 0.5, _RATIO, ("1", "%", "ppm", "µm/m"),
    ("deltal/l0", "dl/l0", "deltal/l", "dl/l", "linearthermalexpansion", "linearexpansion", "thermalstrain",
     "lengthchange"),
    (), ("",),
)  # fmt: skip
LATTICE = Quantity(
    "lattice parameter", "Å", 0.5, 500.0, _LENGTH, ("Å", "nm", "pm"),
    ("latticeconstant", "lattice", "cellparameter", "celledge"),
)  # fmt: skip
MOLAR_VOLUME = Quantity(
    "molar volume", "cm³/mol", 0.5, 1e5, {"cm3/mol": 1.0, "cm3mol-1": 1.0, "m3/mol": 1e6}, ("cm3/mol",)
)
ISOTHERMAL_MODULUS = Quantity(
    "isothermal bulk modulus", "GPa", 0.0, 3000.0, _PRESSURE, ("GPa", "MPa", "kbar"),
    ("bt", "kt", "isothermalmodulus"),
)  # fmt: skip
ADIABATIC_MODULUS = Quantity(
    "adiabatic bulk modulus", "GPa", 0.0, 3000.0, _PRESSURE, ("GPa", "MPa", "kbar"),
    ("bs", "ks", "adiabaticmodulus"),
)  # fmt: skip
HEAT_CAPACITY = Quantity(
    "heat capacity at constant pressure", "J/(mol K)", 0.0, 1e6, _HEAT, ("J/(mol K)",),
    ("cp", "heatcapacity", "molarheatcapacity"),
)  # fmt: skip
GRUNEISEN = Quantity(
    "Grüneisen parameter", "1", -100.0, 100.0, _RATIO, ("1",), ("gamma", "gruneisen", "grueneisenparameter")
)
_FREQUENCY = {"thz": 1.0, "1/cm": 0.0299792458, "cm-1": 0.0299792458, "mev": 0.2417989242}
STATIC_DIELECTRIC = Quantity(
    "static dielectric constant", "1", 1.0, 1e5, _RATIO, ("1",), ("eps0", "epsilon0", "ε0", "staticpermittivity")
)
ELECTRONIC_DIELECTRIC = Quantity(
    "electronic dielectric constant", "1", 1.0, 1e3, _RATIO, ("1",), ("epsinf", "ε∞", "highfrequencydielectricconstant")
)
TRANSVERSE = Quantity(
    "transverse optic frequency", "THz", 0.01, 300.0, _FREQUENCY, ("THz", "1/cm", "meV"), ("to", "tofrequency")
)
LONGITUDINAL = Quantity(
    "longitudinal optic frequency", "THz", 0.01, 300.0, _FREQUENCY, ("THz", "1/cm", "meV"), ("lo", "lofrequency")
)
DEBYE = Quantity("Debye temperature", "K", 1.0, 1e4, {"k": 1.0}, ("K",), ("thetad",))

#: Every quantity, in the order in which a file lists them.
QUANTITIES: tuple[Quantity, ...] = (
    LINEAR,
    VOLUME_COEFFICIENT,
    ELONGATION,
    LATTICE,
    MOLAR_VOLUME,
    ISOTHERMAL_MODULUS,
    ADIABATIC_MODULUS,
    HEAT_CAPACITY,
    GRUNEISEN,
    DEBYE,
    STATIC_DIELECTRIC,
    ELECTRONIC_DIELECTRIC,
    TRANSVERSE,
    LONGITUDINAL,
)

#: What a crystal answers to fields, beside the response that a prediction reports.
RESPONSE: tuple[Quantity, ...] = (ELECTRONIC_DIELECTRIC, STATIC_DIELECTRIC, TRANSVERSE, LONGITUDINAL)

_SPELLINGS = str.maketrans(
    {
        "μ": "u", "µ": "u", "Å": "a", "å": "a", "⁻": "-", "−": "-", "·": "", "*": "", "^": "", "×": "x",
        "⁰": "0", "¹": "1", "²": "2", "³": "3", "⁴": "4", "⁵": "5", "⁶": "6", " ": "", "°": "", "_": "",
        "Δ": "delta", "α": "alpha", "β": "beta", "γ": "gamma", "θ": "theta", "₀": "0",
    }
)  # fmt: skip


def plain_unit(text: str) -> str:
    """Return a unit in the spelling of the tables: no blanks, dots or superscripts, lower case."""
    plain = unicodedata.normalize("NFC", text).translate(_SPELLINGS).lower().strip("[]")
    plain = re.sub("/c(?!m)", "/k", plain.replace("degc", "k")).replace("c-1", "k-1")
    for times in ("1x10", "x10"):
        if plain.startswith(times):
            return "10" + plain.removeprefix(times)
    return plain


def plain_word(text: str) -> str:
    """Return a name without blanks, hyphens, accents and capitals, for comparing."""
    flat = unicodedata.normalize("NFKD", text.translate(_SPELLINGS))
    letters = "".join(letter for letter in flat if not unicodedata.combining(letter))
    return letters.lower().replace("-", "").replace("_", "")


def quantity_named(text: str) -> Quantity | None:
    """Return the quantity of a name or of one of its aliases, None when there is none."""
    word = plain_word(text)
    for quantity in QUANTITIES:
        if word == plain_word(quantity.name) or word in quantity.aliases:
            return quantity
    return None


def factor_of(quantity: Quantity, unit: str) -> float | None:
    """Return the factor from a unit to the house unit of a quantity, None when the unit does not fit."""
    return quantity.units.get(plain_unit(unit))


def is_plausible(quantity: Quantity, value: float) -> bool:
    """Tell whether a value in house units may be believed at all."""
    return bool(np.isfinite(value)) and quantity.lowest <= value <= quantity.highest
