"""A file of measured values, shipped or the user's own, turned into series.

The format is plain text, UTF-8. A series is a small header of ``# key: value`` lines and then rows of
temperature, value and, where known, uncertainty (in the unit of the value, or with a % sign)::

    # quantity: linear expansion coefficient
    # kind: mean
    # reference temperature: 20 °C
    # unit: 1e-6/K
    # temperature unit: °C
    # source: our own push-rod dilatometer, sample 3
    T, value, uncertainty
    100, 9.8, 0.2
    200, 10.1, 2 %

A further header begins a further series. Temperatures are in K unless the file says °C. What is wrong
is reported all at once, with file, line, value and what would be right.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np

from thermex.errors import Fault, InputError
from thermex.measured.blocks import MOST_FAULTS, Block, blocks_of, file_text, number, shown
from thermex.measured.conventions import ZERO_CELSIUS_K
from thermex.measured.heading import Heading, heading_of
from thermex.measured.quantities import LINEAR, VOLUME_COEFFICIENT, is_plausible
from thermex.measured.series import Series

#: Highest temperature that is believed, K.
HIGHEST_K = 10_000.0
#: A coefficient nowhere above this at 100 K or more is taken for a wrong unit, 1/K.
SMALLEST_COEFFICIENT = 1e-10

Point = tuple[float, float, float]


def load_series_file(path: str | Path) -> tuple[Series, ...]:
    """Read a file of measured values.

    Parameters
    ----------
    path
        The file, at most 8 MB; its format is described at the head of this module.

    Returns
    -------
    tuple of Series
        In the order of the file, in house units, each sorted by temperature; sources are numbered
        from 1 in order of appearance.

    Raises
    ------
    InputError
        With every fault of the file in ``faults``.
    """
    where = Path(path)
    return series_of_text(file_text(where), str(where))


def series_of_text(text: str, file: str) -> tuple[Series, ...]:
    """Return the series in the text of a file; ``file`` names it in messages.

    Raises
    ------
    InputError
        With every fault of the text in ``faults``.
    """
    faults: list[Fault] = []
    blocks = blocks_of(text, faults)
    if not blocks and not faults:
        fix = "rows of temperature, value and, where known, uncertainty below '# key: value' lines"
        faults.append(Fault("line 1", "no values in this file", fix))
    read = [_read_block(block, file, faults) for block in blocks]
    if faults:
        raise InputError.of(file, faults[: MOST_FAULTS + 1])
    return numbered([pair for pair in read if pair is not None])


def _read_block(block: Block, file: str, faults: list[Fault]) -> tuple[Heading, list[Point]] | None:
    heading = heading_of(block, file, faults)
    _check_columns(block, faults)
    if not block.rows:
        fix = "rows of temperature, value and, where known, uncertainty"
        faults.append(Fault(f"line {block.line}", "the series has no values", fix))
    points = []
    for line, cells in block.rows:
        if len(faults) >= MOST_FAULTS:
            break
        point = _point(line, cells, heading, faults)
        if point is not None:
            points.append(point)
    if heading is None:
        return None
    _check_unit(block, heading, points, faults)
    return heading, points


def _check_columns(block: Block, faults: list[Fault]) -> None:
    if not block.columns:
        return
    names = [name.lower() for name in block.columns]
    right = names[0].startswith(("t", "θ")) and len(names) in (2, 3)
    if right and len(names) == 3:
        right = names[2].startswith(("u", "σ", "±", "+", "err", "s", "d"))
    if not right:
        what = f"columns {shown(', '.join(block.columns))}"
        fix = "T, value and, where known, uncertainty, in that order"
        faults.append(Fault(f"line {block.columns_line}", what, fix))


def _point(line: int, cells: tuple[str, ...], heading: Heading | None, faults: list[Fault]) -> Point | None:
    key = f"line {line}"
    if len(cells) not in (2, 3):
        many = "only one column" if len(cells) == 1 else f"{len(cells)} columns"
        what = f"{many} in {shown(', '.join(cells))}"
        faults.append(Fault(key, what, "temperature, value and, where known, uncertainty"))
        return None
    before = len(faults)
    temperature = _temperature(key, cells[0], heading, faults)
    value = _value(key, cells[1], heading, faults)
    uncertainty = _uncertainty(key, cells[2] if len(cells) == 3 else "", value, heading, faults)
    return None if len(faults) > before else (temperature, value, uncertainty)


def _temperature(key: str, cell: str, heading: Heading | None, faults: list[Fault]) -> float:
    value = number(cell)
    if value is None:
        faults.append(Fault(key, f"{shown(cell)} is not a temperature", "a finite number"))
        return float("nan")
    celsius = heading is not None and heading.celsius
    kelvin = value + ZERO_CELSIUS_K if celsius else value
    if kelvin < 0.0:
        fix = "check the value" if celsius else "if it is in °C say '# temperature unit: °C'"
        faults.append(Fault(key, f"{shown(cell)} lies below absolute zero", fix))
    elif kelvin > HIGHEST_K:
        faults.append(Fault(key, f"{shown(cell)} is no temperature of a crystal", f"below {HIGHEST_K:g} K"))
    return kelvin


def _value(key: str, cell: str, heading: Heading | None, faults: list[Fault]) -> float:
    value = number(cell)
    if value is None:
        faults.append(Fault(key, f"{shown(cell)} is not a value", "a finite number"))
        return float("nan")
    if heading is None:
        return value
    house = value * heading.factor
    if not is_plausible(heading.quantity, house):
        quantity = heading.quantity
        what = f"{shown(cell)} is not a plausible {quantity.name} in {shown(heading.unit or quantity.unit)}"
        span = f"between {quantity.lowest:g} and {quantity.highest:g} {quantity.unit}"
        faults.append(Fault(key, what, f"{span}; is the unit right?"))
    return house


def _uncertainty(key: str, cell: str, value: float, heading: Heading | None, faults: list[Fault]) -> float:
    if not cell:
        return float("nan")
    relative = cell.endswith("%")
    size = number(cell.removesuffix("%"))
    if size is None or size < 0.0:
        faults.append(Fault(key, f"{shown(cell)} is not an uncertainty", "a number from 0 up, or a percentage"))
        return float("nan")
    if relative:
        return abs(value) * size / 100.0
    return size * (heading.factor if heading is not None else 1.0)


def _check_unit(block: Block, heading: Heading, points: list[Point], faults: list[Fault]) -> None:
    if heading.quantity not in (LINEAR, VOLUME_COEFFICIENT) or not points:
        return
    warm = [abs(value) for temperature, value, _ in points if temperature >= 100.0]
    if warm and 0.0 < max(warm) < SMALLEST_COEFFICIENT:
        entry = block.header.get("unit")
        what = f"in {shown(heading.unit)} no value is above {SMALLEST_COEFFICIENT:g}/K"
        fix = "is the unit 1/K rather than 1e-6/K?"
        faults.append(Fault(f"line {entry.line if entry else block.line}", what, fix))


def numbered(read: list[tuple[Heading, list[Point]]]) -> tuple[Series, ...]:
    """Return the series, their sources numbered from 1 in order of appearance."""
    numbers: dict[tuple[str, str], int] = {}
    series = []
    for heading, points in read:
        key = (heading.source, heading.how)
        series.append(_series(heading, points, numbers.setdefault(key, len(numbers) + 1)))
    return tuple(series)


def _series(heading: Heading, points: list[Point], source_number: int) -> Series:
    table = np.array(points, dtype=float).reshape(-1, 3)
    table = table[np.argsort(table[:, 0], kind="stable")]
    return Series(
        heading.quantity.name, heading.kind, heading.axis, heading.quantity.unit,
        heading.reference_temperature_K,
        table[:, 0].copy(), table[:, 1].copy(), table[:, 2].copy(),
        heading.source, source_number, heading.how, heading.read_in, heading.confidence,
        heading.estimated_uncertainty, heading.usable, heading.remark,
    )  # fmt: skip
