"""The text of a file of measured values, cut into blocks: header keys, column names, rows of cells."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path

from thermex.errors import Fault, InputError

#: Largest file that is read, bytes.
LARGEST_FILE = 8 * 1024 * 1024
#: Most rows that one file may hold.
MOST_ROWS = 100_000
#: Most header lines that one file may hold.
MOST_KEYS = 2000
#: Longest line that is read, characters.
LONGEST_LINE = 4000
#: After this many faults the rest of the file is left unread.
MOST_FAULTS = 30

#: Keys that hold for the whole file once they are given.
FILE_KEYS = ("material", "formula", "structure", "also called", "temperature unit")
#: Keys of one series.
SERIES_KEYS = (
    "quantity",
    "kind",
    "axis",
    "unit",
    "reference temperature",
    "source",
    "read in",
    "how",
    "confidence",
    "uncertainty",
    "usable",
    "remark",
)
_SYNONYMS = {"units": "unit", "t0": "reference temperature", "t ref": "reference temperature"}
_KEY = re.compile(r"([A-Za-z][A-Za-z0-9 _-]{0,40}?)\s*[:=]\s*(.*)")
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d{1,4})?")


@dataclass(frozen=True, slots=True)
class Entry:
    """The value of a header key and the line on which it stands."""

    text: str
    line: int


@dataclass(slots=True)
class Block:
    """One series as written."""

    line: int
    """Where the block begins."""
    header: dict[str, Entry] = field(default_factory=dict)
    columns: tuple[str, ...] = ()
    """Column names, empty when the file gives none."""
    columns_line: int = 0
    rows: list[tuple[int, tuple[str, ...]]] = field(default_factory=list)
    """Line number and cells."""


def shown(text: str) -> str:
    """Return a piece of the file fit for a message: printable and short."""
    piece = "".join(letter if letter.isprintable() else "�" for letter in text[:60])
    return f"'{piece}…'" if len(text) > 60 else f"'{piece}'"


def number(cell: str) -> float | None:
    """Return the number in a cell, None when it is none (NaN and infinity are none)."""
    plain = cell.strip().replace("−", "-")
    if not plain.isascii() or not _NUMBER.fullmatch(plain):
        return None
    value = float(plain)
    return value if abs(value) < 1e300 else None


def file_text(path: Path) -> str:
    """Return the text of a file.

    Raises
    ------
    InputError
        When there is no such file, it cannot be read, is too large or is not UTF-8.
    """
    try:
        if not path.is_file():
            what = "this is not a file" if path.exists() else "there is no such file"
            raise InputError(what, where=str(path), fix="give a CSV file of measured values")
        with path.open("rb") as stream:
            data = stream.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(f"cannot be read ({reason})", where=shown(str(path)).strip("'")) from error
    if len(data) > LARGEST_FILE:
        raise InputError("larger than 8 MB", where=str(path), fix="give the measured values alone")
    return _decoded(data, path)


def _decoded(data: bytes, path: Path) -> str:
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise InputError(
            f"byte {error.start} is not UTF-8", where=f"{path}: line {line}", fix="save the file as UTF-8"
        ) from error


def blocks_of(text: str, faults: list[Fault]) -> list[Block]:
    """Cut the text of a file into its series; what is wrong is added to ``faults``.

    A line ``# key: value`` after the values of one series begins the next. Lines that begin with
    ``##``, blank lines and comments without a known key are passed over.
    """
    blocks = [Block(1)]
    rows = keys = 0
    for at, raw in enumerate(_lines(text), 1):
        line = raw.strip()
        if len(faults) >= MOST_FAULTS:
            faults.append(Fault(f"line {at}", "the rest was not read: too many faults"))
            break
        if not line or line.startswith("##"):
            continue
        if len(line) > LONGEST_LINE:
            faults.append(Fault(f"line {at}", f"longer than {LONGEST_LINE} characters"))
        elif line.startswith("#"):
            keys += _take_comment(line, at, blocks, faults)
            if keys > MOST_KEYS:
                faults.append(Fault(f"line {at}", f"more than {MOST_KEYS} header lines", "give fewer series"))
                break
        else:
            rows += 1
            if rows > MOST_ROWS:
                faults.append(Fault(f"line {at}", f"more than {MOST_ROWS} rows", "give fewer values"))
                break
            _take_row(line, at, blocks[-1])
    return [block for block in blocks if block.rows or set(block.header) - set(FILE_KEYS)]


def _lines(text: str) -> Iterable[str]:
    return text.replace("\r\n", "\n").replace("\r", "\n").split("\n")


def _take_comment(line: str, at: int, blocks: list[Block], faults: list[Fault]) -> int:
    """Take a header line into the last block; return 1 when the line reads like one, else 0."""
    match = _KEY.fullmatch(line.lstrip("#").strip())
    if match is None:
        return 0
    key = " ".join(match[1].lower().replace("_", " ").replace("-", " ").split())
    key = _SYNONYMS.get(key, key)
    known = FILE_KEYS + SERIES_KEYS
    if key not in known:
        near = difflib.get_close_matches(key, known, 1, 0.8)
        if near:
            faults.append(Fault(f"line {at}", f"unknown key {shown(key)}", f"did you mean '{near[0]}'?"))
        return 1
    if blocks[-1].rows:
        kept = {name: entry for name, entry in blocks[-1].header.items() if name in FILE_KEYS}
        blocks.append(Block(at, kept))
    block = blocks[-1]
    if key in block.header and block.header[key].line >= block.line and key in SERIES_KEYS:
        faults.append(Fault(f"line {at}", f"'{key}' is given twice for one series", "give it once"))
        return 1
    block.header[key] = Entry(match[2].strip(), at)
    return 1


def _take_row(line: str, at: int, block: Block) -> None:
    cells = cells_of(line)
    is_names = not block.rows and not block.columns and number(cells[0]) is None
    if is_names and any(letter.isalpha() for letter in cells[0]):
        block.columns, block.columns_line = cells, at
    else:
        block.rows.append((at, cells))


def cells_of(line: str) -> tuple[str, ...]:
    """Return the cells of a line cut at semicolons, tabs, commas or else blanks; quotes taken off.

    With semicolons or tabs between the cells a comma is a decimal comma.
    """
    if ";" in line or "\t" in line:
        parts = [part.replace(",", ".") for part in re.split(r"[;\t]", line)]
    elif "," in line:
        parts = line.split(",")
    else:
        parts = line.split()
    cells = [part.strip().strip("\"'").strip() for part in parts]
    while len(cells) > 1 and not cells[-1]:
        cells.pop()
    return tuple(cells)
