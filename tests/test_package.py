"""The package as it is handed over: its face, its data, its versions, its cleanliness."""

from __future__ import annotations

import ast
import importlib
import re
import subprocess
import sys
import tomllib
from collections.abc import Iterator
from pathlib import Path

import pytest

import thermex
from thermex.data import root

TOP = Path(__file__).resolve().parent.parent
MODULES = sorted((TOP / "thermex").rglob("*.py"))
LONGEST = 450


def tracked() -> list[Path]:
    """Return the files under version control; those of the tree where there is none (an unpacked archive)."""
    done = subprocess.run(
        ["git", "-c", f"safe.directory={TOP}", "-C", str(TOP), "ls-files", "-z"], capture_output=True, check=False
    )
    if done.returncode == 0 and done.stdout:
        found = [TOP / name for name in done.stdout.decode("utf-8").split("\0") if name]
    else:
        places = ("thermex", "tests", "cases", "shared", ".ci")
        found = [path for place in places for path in (TOP / place).rglob("*")] + list(TOP.glob("*.*"))
    return [path for path in found if path.is_file() and "__pycache__" not in path.parts]


def test_the_face_is_what_can_be_imported() -> None:
    assert sorted(thermex.__all__) == list(thermex.__all__)
    for name in thermex.__all__:
        assert getattr(thermex, name) is not None
    assert set(dir(thermex)) == {*thermex.__all__, "__version__"}
    with pytest.raises(AttributeError, match="no attribute"):
        _ = thermex.no_such_thing


def test_the_face_is_light() -> None:
    """Importing thermex imports none of the heavy libraries: help and faults come at once."""
    words = "import sys, thermex; print(sorted(set(sys.modules) & {'numpy', 'scipy', 'ase', 'phonopy', 'matplotlib'}))"
    done = subprocess.run([sys.executable, "-c", words], cwd=TOP, capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_every_module_imports() -> None:
    for path in MODULES:
        name = ".".join(path.relative_to(TOP).with_suffix("").parts)
        if not name.endswith("__main__"):
            importlib.import_module(name.removesuffix(".__init__"))


def test_it_is_typed_and_its_data_is_found() -> None:
    assert (TOP / "thermex" / "py.typed").is_file()
    assert len(thermex.published_names()) >= 140
    assert len(thermex.materials()) >= 41
    assert (root() / "potentials").is_dir() and (root() / "measured").is_dir()


def test_versions_agree() -> None:
    version = thermex.__version__
    citation = (TOP / "CITATION.cff").read_text(encoding="utf-8")
    assert re.search(rf"^version: {re.escape(version)}$", citation, re.MULTILINE)
    released = re.search(r"^date-released: (\S+)$", citation, re.MULTILINE)
    change = re.search(rf"^## \[{re.escape(version)}\] - (\S+)$", (TOP / "CHANGELOG.md").read_text("utf-8"), re.M)
    assert released and change and released[1] == change[1]
    project = tomllib.loads((TOP / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    assert "version" in project["dynamic"]
    assert project["license"] == "BSD-3-Clause"
    assert project["requires-python"] == ">=3.11"


def test_no_tracked_file_names_a_machine_path() -> None:
    roots = ["/" + word + "/" for word in ("work", "root", "home", "Users")] + ["/" + "tmp" + "/"]
    found = []
    for path in tracked():
        if path.suffix in {".png", ".pdf", ".npz"}:
            continue
        text = path.read_text(encoding="utf-8")
        found += [f"{path.name}: {word}" for word in roots if re.search(rf"(?<![\w.]){re.escape(word)}", text)]
    assert found == []


def test_modules_are_short() -> None:
    long = {path.name: lines for path in MODULES if (lines := len(path.read_text("utf-8").splitlines())) > LONGEST}
    assert long == {}


def public(tree: ast.Module) -> Iterator[ast.FunctionDef | ast.ClassDef]:
    """Return the public functions, classes and methods of a module."""
    for node in tree.body:
        if isinstance(node, (ast.FunctionDef, ast.ClassDef)) and not node.name.startswith("_"):
            yield node
            if isinstance(node, ast.ClassDef):
                yield from (m for m in node.body if isinstance(m, ast.FunctionDef) and not m.name.startswith("_"))


def test_everything_public_is_documented() -> None:
    missing = []
    for path in MODULES:
        tree = ast.parse(path.read_text(encoding="utf-8"))
        if ast.get_docstring(tree) is None:
            missing.append(str(path.relative_to(TOP)))
        missing += [f"{path.name}: {node.name}" for node in public(tree) if ast.get_docstring(node) is None]
    assert missing == []


def test_phonopy_is_known_to_one_module_alone() -> None:
    """Force constants become phonons in one place (design of the project)."""
    users = [
        path.name
        for path in MODULES
        if re.search(r"^\s*(from|import) phonopy", path.read_text(encoding="utf-8"), re.MULTILINE)
    ]
    assert users == ["phonons.py"]


def test_no_file_is_called_and_nothing_is_evaluated() -> None:
    """No module of the package evaluates text, or unpickles: a case from a stranger is safe to run."""
    banned = {"eval", "exec", "compile", "__import__"}
    found = []
    for path in MODULES:
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id in banned:
                found.append(f"{path.name}:{node.lineno} {node.func.id}")
            if isinstance(node, (ast.Import, ast.ImportFrom)):
                names = [alias.name for alias in node.names] + [getattr(node, "module", None) or ""]
                found += [f"{path.name}:{node.lineno} {name}" for name in names if name in {"pickle", "shelve"}]
    assert found == []
