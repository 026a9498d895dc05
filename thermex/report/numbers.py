"""Numbers as text: fixed digits, one sign for what is not there."""

from __future__ import annotations

import math

#: Shown where a number does not exist (past the branch end, not measured).
ABSENT = "–"


def fixed(value: float, digits: int) -> str:
    """Return the value with a fixed number of decimals, or the sign for absence."""
    if not math.isfinite(value):
        return ABSENT
    text = f"{value:.{digits}f}"
    return text.lstrip("-") if float(text) == 0.0 else text


def significant(value: float, digits: int) -> str:
    """Return the value with a number of significant digits, plain notation where it is short."""
    if not math.isfinite(value):
        return ABSENT
    if value == 0.0:
        return "0"
    power = math.floor(math.log10(abs(value)))
    if -4 <= power < 6:
        return f"{value:.{max(digits - 1 - power, 0)}f}"
    return f"{value:.{digits - 1}e}"


def micro(value: float, digits: int = 2) -> str:
    """Return an expansion coefficient given in 1/K as a number of 10⁻⁶/K.

    Large ones lose decimals and small ones gain them, so that about four digits are seen.
    """
    scaled = value * 1e6
    if not math.isfinite(scaled):
        return ABSENT
    if abs(scaled) >= 1000.0:
        return fixed(scaled, max(digits - 2, 0))
    if abs(scaled) >= 100.0:
        return fixed(scaled, max(digits - 1, 0))
    if 0.0 < abs(scaled) < 0.01:
        return significant(scaled, digits + 1)
    if 0.0 < abs(scaled) < 1.0:
        return fixed(scaled, digits + 2)
    return fixed(scaled, digits)


def percent(fraction: float, digits: int = 1) -> str:
    """Return a signed deviation as per cent, for example "+3.2"."""
    if not math.isfinite(fraction):
        return ABSENT
    text = f"{100.0 * fraction:+.{digits}f}"
    return "0.0" if float(text) == 0.0 else text


def error_percent(fraction: float) -> str:
    """Return a relative error as per cent with two significant digits, "<0.001" when smaller."""
    scaled = 100.0 * fraction
    if not math.isfinite(scaled):
        return ABSENT
    if scaled < 0.001:
        return "<0.001"
    return significant(scaled, 2) if scaled < 1000.0 else ">999"


def temperature(value: float) -> str:
    """Return a temperature in K without needless decimals."""
    return ABSENT if not math.isfinite(value) else f"{value:.6g}"


def rounded(value: float) -> str:
    """Return a computed temperature in K, whole from 100 K on, with three digits below."""
    return fixed(value, 0) if abs(value) >= 100.0 else significant(value, 3)
