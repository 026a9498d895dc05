"""The record of a run: what was run, with which versions, on which input."""

from __future__ import annotations

import hashlib
import platform
from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from thermex.case.case import Case
from thermex.case.writer import case_hash, case_to_dict
from thermex.report.caution import CAUTION
from thermex.report.document import plain
from thermex.report.version import library_version, own_version

LIBRARIES = ("numpy", "scipy", "phonopy", "ase", "matplotlib")


def run_record(case: Case, command: Sequence[str], *, now: datetime | None = None) -> dict[str, Any]:
    """Return the record of one run as plain data.

    Parameters
    ----------
    case
        The case as it was computed, every default in it.
    command
        The words of the command line (or of the Python call).
    now
        Moment of the run, UTC; the present when not given.
    """
    moment = now or datetime.now(UTC)
    return {
        "program": "thermex",
        "version": own_version(),
        "command": list(command),
        "date": moment.isoformat(timespec="seconds"),
        "python": platform.python_version(),
        "platform": f"{platform.system()} {platform.machine()}",
        "libraries": {name: library_version(name) for name in LIBRARIES},
        "case_hash": case_hash(case),
        "input_sha256": input_hashes(case),
        "case": plain(case_to_dict(case)),
        "caution": CAUTION,
    }


def input_hashes(case: Case) -> dict[str, str]:
    """Return the SHA-256 of every file that the case names, by plain file name."""
    named = [case.crystal.file, *(pair.file for pair in case.potential.pairs)]
    if case.measured is not None:
        named.append(case.measured.file)
    if case.source:
        named.append(Path(case.source))
    return {path.name: _digest(path) for path in named if path is not None and path.is_file()}


def _digest(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()
