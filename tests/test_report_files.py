"""Writing result files: all or none, old results intact, nothing left behind. Common practice, no source."""

from __future__ import annotations

import errno
import os
import signal
import subprocess
import sys
import textwrap
from pathlib import Path

import pytest

from thermex.errors import InputError
from thermex.report import files

OLD = {"one.json": b"old one", "two.csv": b"old two", "three.html": b"old three"}
NEW = {"one.json": b"new one", "two.csv": b"new two", "three.html": b"new three", "four.txt": b"new four"}


def contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in sorted(folder.iterdir()) if path.is_file()}


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    place = tmp_path / "results"
    files.write_folder(place, OLD)
    assert contents(place) == dict(sorted(OLD.items()))
    return place


def test_new_files_replace_old_ones_and_leave_nothing_else(folder: Path) -> None:
    written = files.write_folder(folder, NEW)
    assert [path.name for path in written] == list(NEW)
    assert contents(folder) == dict(sorted(NEW.items()))


def test_parents_are_made(tmp_path: Path) -> None:
    files.write_folder(tmp_path / "a" / "b", {"x": b"1"})
    assert (tmp_path / "a" / "b" / "x").read_bytes() == b"1"


@pytest.mark.parametrize("failing", range(4))
def test_full_disk_while_writing(folder: Path, monkeypatch: pytest.MonkeyPatch, failing: int) -> None:
    real, calls = files._write_whole, []

    def write(path: Path, data: bytes) -> None:
        calls.append(path)
        if len(calls) > failing:
            path.write_bytes(data[:2])
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        real(path, data)

    monkeypatch.setattr(files, "_write_whole", write)
    with pytest.raises(InputError, match="No space left on device"):
        files.write_folder(folder, NEW)
    assert contents(folder) == dict(sorted(OLD.items()))


@pytest.mark.parametrize("failing", range(4))
@pytest.mark.parametrize("error", [OSError(errno.EACCES, "Permission denied"), KeyboardInterrupt()])
def test_failure_between_the_renames_puts_everything_back(
    folder: Path, monkeypatch: pytest.MonkeyPatch, failing: int, error: BaseException
) -> None:
    real, calls = os.replace, []

    def replace(source: Path, target: Path) -> None:
        calls.append(target)
        if len(calls) > failing:
            raise error
        real(source, target)

    monkeypatch.setattr(files.os, "replace", replace)
    with pytest.raises(InputError if isinstance(error, OSError) else KeyboardInterrupt):
        files.write_folder(folder, NEW)
    monkeypatch.undo()
    assert contents(folder) == dict(sorted(OLD.items()))


def test_file_system_without_links(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def link(source: Path, target: Path) -> None:
        raise OSError(errno.EPERM, "Operation not permitted")

    monkeypatch.setattr(files.os, "link", link)
    files.write_folder(folder, NEW)
    assert contents(folder) == dict(sorted(NEW.items()))


def test_failure_removes_the_folders_it_made(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def write(path: Path, data: bytes) -> None:
        raise OSError(errno.EROFS, "Read-only file system")

    monkeypatch.setattr(files, "_write_whole", write)
    with pytest.raises(InputError, match="Read-only"):
        files.write_folder(tmp_path / "a" / "b", NEW)
    assert list(tmp_path.iterdir()) == []


def test_out_is_a_file(tmp_path: Path) -> None:
    place = tmp_path / "note.txt"
    place.write_bytes(b"keep me")
    for action in (files.check_folder, lambda p: files.write_folder(p, NEW)):
        with pytest.raises(InputError, match="a file, not a folder"):
            action(place)
    assert place.read_bytes() == b"keep me"


def test_parent_is_a_file(tmp_path: Path) -> None:
    place = tmp_path / "note.txt"
    place.write_bytes(b"keep me")
    for action in (files.check_folder, lambda p: files.write_folder(p, NEW)):
        with pytest.raises(InputError):
            action(place / "sub")
    assert place.read_bytes() == b"keep me"


def test_target_is_a_folder(folder: Path) -> None:
    (folder / "four.txt").mkdir()
    with pytest.raises(InputError, match="in the way"):
        files.write_folder(folder, NEW)
    assert contents(folder) == dict(sorted(OLD.items()))


@pytest.mark.parametrize("name", ["../x", "a/b", "", "..", "a\\b", "/x"])
def test_names_stay_inside_the_folder(tmp_path: Path, name: str) -> None:
    with pytest.raises(InputError, match="plain file name"):
        files.write_folder(tmp_path / "f", {name: b""})


@pytest.mark.skipif(not hasattr(signal, "SIGKILL"), reason="needs SIGKILL")
@pytest.mark.parametrize("after", [1, 3])
def test_killed_while_staging_keeps_old_results(folder: Path, after: int) -> None:
    program = f"""
        import os, signal
        from thermex.report import files
        real, calls = files._write_whole, []
        def write(path, data):
            calls.append(path)
            if len(calls) > {after}:
                path.write_bytes(data[:1])
                os.kill(os.getpid(), signal.SIGKILL)
            real(path, data)
        files._write_whole = write
        files.write_folder({str(folder)!r}, {NEW!r})
    """
    root = Path(files.__file__).parents[2]
    done = subprocess.run(
        [sys.executable, "-c", textwrap.dedent(program)],
        env={**os.environ, "PYTHONPATH": str(root)},
        check=False,
    )
    assert done.returncode == -signal.SIGKILL
    found = contents(folder)
    assert {name: found[name] for name in OLD} == OLD
    assert all(name.startswith(".") for name in found if name not in OLD)
