"""Output files: all of them or none, each whole, old results intact when anything fails."""

from __future__ import annotations

import contextlib
import os
import secrets
import shutil
from collections.abc import Iterator, Mapping
from pathlib import Path

from thermex.errors import InputError


def write_folder(folder: str | Path, contents: Mapping[str, bytes]) -> tuple[Path, ...]:
    """Write a set of files into one folder, all or nothing.

    Every file is first written under a temporary name beside its target and flushed to the disk;
    only when all are there do they take their final names. If one cannot, those already in place
    are put back as they were.

    Parameters
    ----------
    folder
        Where the files go; made when missing.
    contents
        Plain file name (no folder in it) → content.

    Returns
    -------
    tuple of Path
        The files written, in the order of ``contents``.

    Raises
    ------
    InputError
        When the folder is a file, a target is a folder, or the system refuses (no space left, no
        permission). Nothing is left behind and old files are as they were.
    """
    place = Path(folder)
    targets = {place / _plain(name): data for name, data in contents.items()}
    made: list[Path] = []
    try:
        made = _make_folder(place)
        _refuse_folders(targets)
        with _staged(targets) as staged:
            _commit(staged)
        _flush_folder(place)
    except OSError as error:
        _remove_made(made)
        raise _refusal(error, place) from error
    except BaseException:
        _remove_made(made)
        raise
    return tuple(targets)


def check_folder(folder: str | Path) -> None:
    """Refuse a folder that is a file or may not be written, before anything is computed.

    Raises
    ------
    InputError
        Naming the place.
    """
    place = Path(folder)
    _refuse_file(place)
    standing = next(step for step in (place, *place.absolute().parents) if step.exists())
    if not standing.is_dir() or not os.access(standing, os.W_OK | os.X_OK):
        raise InputError("no permission to write here", where=str(place), fix="give another --out folder")


def _plain(name: str) -> str:
    if name in ("", ".", "..") or Path(name).name != name or "\\" in name:
        raise InputError(f"{name!r} is not a plain file name", where="output", fix="give a name without folders")
    return name


def _make_folder(place: Path) -> list[Path]:
    """Make the folder and its parents; return those that were missing, innermost first."""
    _refuse_file(place)
    missing = [step for step in (place, *place.parents) if not step.exists()]
    place.mkdir(parents=True, exist_ok=True)
    return missing


def _refuse_file(place: Path) -> None:
    if place.exists() and not place.is_dir():
        raise InputError("this is a file, not a folder", where=str(place), fix="give another --out folder")


def _remove_made(made: list[Path]) -> None:
    for step in made:
        with contextlib.suppress(OSError):
            step.rmdir()


def _refuse_folders(targets: Mapping[Path, bytes]) -> None:
    for target in targets:
        if target.is_dir():
            raise InputError(
                "a folder of this name is in the way of a result file",
                where=str(target),
                fix="move it away or give another --out folder",
            )


def _refusal(error: OSError, place: Path) -> InputError:
    reason = error.strerror or type(error).__name__
    return InputError(
        f"cannot write the results: {reason}",
        where=str(place),
        fix="nothing was changed; give a folder with room",
    )


@contextlib.contextmanager
def _staged(targets: Mapping[Path, bytes]) -> Iterator[dict[Path, Path]]:
    """Write every content under a temporary name; remove what is left of them at the end."""
    staged: dict[Path, Path] = {}
    try:
        for target, data in targets.items():
            staged[target] = _beside(target, "part")
            _write_whole(staged[target], data)
        yield staged
    finally:
        for part in staged.values():
            with contextlib.suppress(OSError):
                part.unlink(missing_ok=True)


def _beside(target: Path, ending: str) -> Path:
    return target.with_name(f".{target.name}.{secrets.token_hex(4)}.{ending}")


def _write_whole(path: Path, data: bytes) -> None:
    """Write and flush a file that must not exist yet."""
    descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0), 0o666)
    with os.fdopen(descriptor, "wb") as stream:
        stream.write(data)
        stream.flush()
        os.fsync(stream.fileno())


def _commit(staged: Mapping[Path, Path]) -> None:
    """Give every staged file its final name; on any failure put the old files back."""
    saved: dict[Path, Path | None] = {}
    try:
        for target in staged:
            saved[target] = _saved_copy(target)
        done: list[Path] = []
        try:
            for target, part in staged.items():
                done.append(target)
                os.replace(part, target)
        except BaseException:
            _put_back(done, saved, staged)
            raise
    finally:
        for copy in saved.values():
            if copy is not None:
                with contextlib.suppress(OSError):
                    copy.unlink(missing_ok=True)


def _saved_copy(target: Path) -> Path | None:
    """Keep the old file under a second name (a link where the file system can)."""
    if not target.exists():
        return None
    copy = _beside(target, "old")
    try:
        os.link(target, copy)
    except OSError:
        shutil.copy2(target, copy)
    return copy


def _put_back(done: list[Path], saved: Mapping[Path, Path | None], staged: Mapping[Path, Path]) -> None:
    """Undo the renames that happened: a target whose staged file is gone was replaced."""
    for target in done:
        if staged[target].exists():
            continue
        copy = saved[target]
        with contextlib.suppress(OSError):
            if copy is None:
                target.unlink(missing_ok=True)
            else:
                shutil.move(copy, target)


def _flush_folder(place: Path) -> None:
    """Make the renames last through a power cut, where the system lets a folder be flushed."""
    with contextlib.suppress(OSError):
        descriptor = os.open(place, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
