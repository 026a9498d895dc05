"""The README keeps its word: every command in it runs or parses, its table is the reader's own, its links lead."""

from __future__ import annotations

import re
import shlex
import tomllib
from pathlib import Path

import pytest

import thermex
from thermex.case.schema import schema_table
from thermex.cli import build_parser, main
from thermex.crystal.prototypes import prototype_names
from thermex.measured.quantities import QUANTITIES
from thermex.report.caution import CAUTION

TOP = Path(__file__).resolve().parent.parent
TEXT = (TOP / "README.md").read_text(encoding="utf-8")


def blocks(language: str) -> list[str]:
    """Return the fenced blocks of a language."""
    return re.findall(rf"^```{language}\n(.*?)^```$", TEXT, re.MULTILINE | re.DOTALL)


def commands() -> list[str]:
    """Return every command line of the README."""
    return [line for block in blocks("sh") for line in block.splitlines() if line.strip()]


OWN = [line for line in commands() if line.startswith("thermex ")]


def test_the_job_and_two_one_line_commands_come_first() -> None:
    first, second = blocks("sh")[:2]
    assert TEXT.index("**thermex** predicts") < TEXT.index(first) < TEXT.index(second)
    for block in (first, second):
        assert block.count("\n") == 1
        assert block.startswith("python3.11 -m venv .venv && .venv/bin/pip install")
    assert ".venv/bin/thermex predict cases/" in first
    assert ".venv/bin/python -m pytest" in second


def test_the_pipeline_runs_the_test_command_of_the_readme() -> None:
    run = (TOP / ".ci" / "run").read_text(encoding="utf-8")
    assert blocks("sh")[1].strip() in run


def test_every_command_is_one_of_a_known_kind() -> None:
    for line in commands():
        assert line.startswith(("python3.11 -m venv", "thermex ", "python cases/", ".ci/run")), line
        if line.startswith("python cases/"):
            assert (TOP / line.split()[1]).is_file()  # run by test_cases.py


@pytest.mark.parametrize("line", OWN)
def test_every_thermex_command_parses_and_its_files_are_there(line: str) -> None:
    words = shlex.split(line)[1:]
    assert build_parser().parse_args(words)
    for word in words:
        if word.startswith("cases/"):
            assert (TOP / word).exists()


QUICK = [line for line in OWN if re.match(r"thermex (predict cases/(cold|kiln-lining-mag)|materials)", line)]


@pytest.mark.parametrize("line", QUICK)
def test_the_quick_ones_run(
    line: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    words = shlex.split(line)[1:]
    words = [str(TOP / word) if word.startswith("cases/") else word for word in words]
    monkeypatch.chdir(tmp_path)
    assert main(words) == 0
    assert capsys.readouterr().out
    if "--out" in words:
        folder = tmp_path / words[words.index("--out") + 1]
        assert (folder / "report.html").stat().st_size > 0


def test_the_files_of_a_result_folder_are_the_ones_named(tmp_path: Path) -> None:
    assert main(["predict", str(TOP / "cases" / "cold-mount-copper.toml"), "--out", str(tmp_path / "f")]) == 0
    for path in (tmp_path / "f").iterdir():
        assert f"`{path.name}`" in TEXT, path.name


def test_the_table_of_keys_is_the_reader_s_own() -> None:
    how = 'python -c "from thermex.case.schema import schema_table; print(schema_table())"'
    assert schema_table() in TEXT, f"put the output of this into README.md: {how}"


def test_the_case_files_in_it_are_toml_and_the_whole_one_is_a_case() -> None:
    whole = []
    for block in blocks("toml"):
        content = tomllib.loads(block)
        if "conditions" in content and "crystal" in content:
            whole.append(thermex.case_from_dict(content))
    assert whole


def test_the_measured_file_in_it_is_read(tmp_path: Path) -> None:
    path = tmp_path / "mine.csv"
    path.write_text(next(block for block in blocks("") if block.startswith("# quantity")), encoding="utf-8")
    (series,) = thermex.load_series_file(path)
    assert series.kind == "mean"
    assert series.reference_temperature_K == pytest.approx(293.15)
    for quantity in QUANTITIES:
        assert quantity.name.split(" at constant")[0].split()[-1].lower() in TEXT.lower()


def test_the_python_in_it_runs(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(TOP)
    for block in blocks("python"):
        exec(compile(block, "README.md", "exec"), {})


def test_its_lists_are_complete() -> None:
    for name in prototype_names():
        assert name in TEXT
    assert f"one of {len(thermex.published_names())} published sets" in TEXT
    flat = " ".join(TEXT.split())
    assert "not a design allowable" in flat
    assert CAUTION.split(". ")[1] in flat


def test_its_links_lead_somewhere() -> None:
    headings = {re.sub(r"[^\w -]", "", h.lower()).replace(" ", "-") for h in re.findall(r"^#+ (.*)$", TEXT, re.M)}
    for target in re.findall(r"\]\(([^)]+)\)", TEXT):
        if target.startswith("#"):
            assert target[1:] in headings
        elif not target.startswith("http"):
            assert (TOP / target).exists(), target
