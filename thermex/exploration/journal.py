"""The journal of a run of many points: each is on disk before the next is reported.

One line of JSON a finished point, flushed and synced; the first line holds the hash of what is being
run. The same command resumes and repeats nothing; a changed case is refused; two runs into one folder
exclude each other by a lock.
"""

from __future__ import annotations

import contextlib
import json
import os
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from thermex.errors import InputError

NAME = "journal.jsonl"
LOCK = "running.lock"


@dataclass(slots=True)
class Journal:
    """Finished points by key, and the file they are kept in (None: kept in memory alone)."""

    path: Path | None
    done: dict[str, Mapping[str, Any]] = field(default_factory=dict)

    def add(self, key: str, content: Mapping[str, Any]) -> None:
        """Keep one finished point; on disk when this returns."""
        self.done[key] = content
        if self.path is None:
            return
        line = json.dumps({"key": key, "point": content}) + "\n"
        with self.path.open("a", encoding="utf-8") as file:
            file.write(line)
            file.flush()
            os.fsync(file.fileno())


@contextlib.contextmanager
def open_journal(folder: Path | None, digest: str) -> Iterator[Journal]:
    """Open the journal of a folder, reading what an earlier run left.

    Parameters
    ----------
    digest
        Hash of all that decides the points; a journal with another one is refused.

    Raises
    ------
    InputError
        Another run holds the folder, or its journal belongs to another case.
    """
    if folder is None:
        yield Journal(None)
        return
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise InputError(f"cannot be made ({error.strerror})", where=str(folder), fix="name another folder") from None
    with _locked(folder):
        path = folder / NAME
        done = _read(path, digest) if path.exists() else {}
        if not path.exists():
            with path.open("w", encoding="utf-8") as file:
                file.write(json.dumps({"digest": digest}) + "\n")
                file.flush()
                os.fsync(file.fileno())
        yield Journal(path, done)


def _read(path: Path, digest: str) -> dict[str, Mapping[str, Any]]:
    """Read finished points; a last line cut off by a kill is dropped."""
    whole, lines = 0, []
    raw = path.read_bytes()
    for line in raw.splitlines(keepends=True):
        try:
            lines.append(json.loads(line))
        except ValueError:
            break
        whole += len(line)
    if whole < len(raw) or (raw and not raw.endswith(b"\n")):
        with path.open("r+b") as file:
            file.truncate(whole if raw[:whole].endswith(b"\n") else 0)
        if not raw[:whole].endswith(b"\n"):
            lines = []
    if not lines or lines[0].get("digest") != digest:
        raise InputError(
            "holds the points of another case or of other options",
            where=str(path),
            fix="name another folder, or remove this one",
        )
    return {entry["key"]: entry["point"] for entry in lines[1:]}


@contextlib.contextmanager
def _locked(folder: Path) -> Iterator[None]:
    """Hold a lock file with the number of this process; one left by a dead process is taken over."""
    lock = folder / LOCK
    for _ in range(2):
        try:
            handle = os.open(lock, os.O_CREAT | os.O_EXCL | os.O_WRONLY)
            break
        except FileExistsError:
            owner = _owner(lock)
            if owner is not None and _alive(owner):
                raise InputError(
                    f"process {owner} is running into this folder", where=str(folder), fix="wait, or name another"
                ) from None
            lock.unlink(missing_ok=True)
        except OSError as error:
            raise InputError(f"cannot be written ({error.strerror})", where=str(folder)) from None
    else:
        raise InputError("another run holds this folder", where=str(folder), fix="wait, or name another")
    try:
        os.write(handle, str(os.getpid()).encode())
        os.close(handle)
        yield
    finally:
        lock.unlink(missing_ok=True)


def _owner(lock: Path) -> int | None:
    try:
        return int(lock.read_text())
    except (OSError, ValueError):
        return None


def _alive(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    return True
