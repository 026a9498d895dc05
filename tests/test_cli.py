"""The command line: exit status, one line a failure, nothing half-written. Common practice, no source."""

from __future__ import annotations

import io
import subprocess
import sys
import warnings
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.synthetic import invented_prediction, measured_beside
from thermex.cli import COMMANDS, main
from thermex.commands.interruption import Interrupted
from thermex.commands.progress import ProgressLine, duration, progress_on, progress_text, silent
from thermex.errors import Fault, InputError, ThermexWarning, UnstableCrystalError

Raise = Callable[[BaseException], None]


@pytest.fixture
def predicted(monkeypatch: pytest.MonkeyPatch) -> None:
    """Put an invented prediction in place of reading and computing."""
    monkeypatch.setattr("thermex.case.reader.load_case", lambda path: invented_prediction().case)
    monkeypatch.setattr("thermex.expansion.predict", lambda case, *, progress=None: invented_prediction())
    monkeypatch.setattr("thermex.report.beside.beside_of", measured_beside)


@pytest.fixture
def failing(predicted: None, monkeypatch: pytest.MonkeyPatch) -> Raise:
    """Return a function that makes the computation raise."""

    def install(error: BaseException) -> None:
        def predict(case: object, *, progress: object = None) -> None:
            raise error

        monkeypatch.setattr("thermex.expansion.predict", predict)

    return install


@pytest.mark.usefixtures("predicted")
def test_predict_shows_the_table(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["predict", "x.toml"]) == 0
    shown = capsys.readouterr()
    assert "Invented crystal" in shown.out and "not a design allowable" in shown.out
    assert shown.err == ""


@pytest.mark.usefixtures("predicted")
def test_predict_writes_the_folder(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    place = tmp_path / "new" / "results"
    assert main(["predict", "x.toml", "--out", str(place)]) == 0
    assert {"prediction.json", "report.html", "run.json"} <= {path.name for path in place.iterdir()}
    assert str(place) in capsys.readouterr().out
    assert '"predict"' in (place / "run.json").read_text(encoding="utf-8")


def test_out_that_is_a_file_is_refused_before_computing(
    failing: Raise, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    failing(AssertionError("computed although the results cannot be written"))
    place = tmp_path / "note.txt"
    place.write_text("keep me", encoding="utf-8")
    assert main(["predict", "x.toml", "--out", str(place)]) == 2
    shown = capsys.readouterr()
    assert shown.out == "" and shown.err.count("\n") == 1
    assert str(place) in shown.err and "not a folder" in shown.err
    assert place.read_text(encoding="utf-8") == "keep me"


def test_every_fault_of_a_file_is_one_line(
    predicted: None, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def load(path: object) -> None:
        raise InputError.of(
            "x.toml",
            [Fault("crystal.a", "-1 is not a length", "give Å > 0"), Fault("titel", "unknown key", "title?")],
        )

    monkeypatch.setattr("thermex.case.reader.load_case", load)
    assert main(["predict", "x.toml"]) == 2
    lines = capsys.readouterr().err.splitlines()
    assert [("crystal.a" in line, "titel" in line) for line in lines] == [(True, False), (False, True)]


def test_no_answer_is_status_three(failing: Raise, capsys: pytest.CaptureFixture[str]) -> None:
    failing(UnstableCrystalError("imaginary modes", where="q = (0, 0, 0.5)", fix="another potential"))
    assert main(["predict", "x.toml"]) == 3
    shown = capsys.readouterr()
    assert shown.err == "thermex: q = (0, 0, 0.5): imaginary modes; another potential\n"


def test_traceback_only_on_request(failing: Raise, capsys: pytest.CaptureFixture[str]) -> None:
    failing(UnstableCrystalError("imaginary modes"))
    main(["predict", "x.toml"])
    assert "Traceback" not in capsys.readouterr().err
    assert main(["predict", "x.toml", "--traceback"]) == 3
    assert "Traceback" in capsys.readouterr().err


def test_own_fault_is_one_line_too(failing: Raise, capsys: pytest.CaptureFixture[str]) -> None:
    failing(ZeroDivisionError("two\nlines"))
    assert main(["predict", "x.toml"]) not in (0, 1, 2, 3)
    shown = capsys.readouterr()
    assert shown.err.count("\n") == 1 and "ZeroDivisionError" in shown.err


def test_out_of_memory(failing: Raise, capsys: pytest.CaptureFixture[str]) -> None:
    failing(MemoryError())
    assert main(["predict", "x.toml"]) == 2
    assert "memory" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("stop", "kept"),
    [
        (KeyboardInterrupt(), "nothing was written"),
        (Interrupted("7 points are kept in scan"), "7 points are kept"),
    ],
)
def test_interruption_says_what_was_kept(
    failing: Raise, tmp_path: Path, capsys: pytest.CaptureFixture[str], stop: BaseException, kept: str
) -> None:
    failing(stop)
    assert main(["predict", "x.toml", "--out", str(tmp_path / "out")]) == 130
    shown = capsys.readouterr()
    assert shown.err.count("\n") == 1 and kept in shown.err
    assert list(tmp_path.iterdir()) == []


def test_warnings_are_notes_of_one_line(
    predicted: None, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def predict(case: object, *, progress: object = None) -> object:
        with warnings.catch_warnings():
            warnings.simplefilter("always")
            warnings.warn("a thing to know", ThermexWarning, stacklevel=1)
            warnings.warn("a thing to know", ThermexWarning, stacklevel=1)
        return invented_prediction()

    monkeypatch.setattr("thermex.expansion.predict", predict)
    assert main(["predict", "x.toml"]) == 0
    assert capsys.readouterr().err == "thermex: note: a thing to know\n"


@pytest.mark.usefixtures("predicted")
def test_anharmonic_option_goes_into_the_case(monkeypatch: pytest.MonkeyPatch) -> None:
    seen = []

    def predict(case: object, *, progress: object = None) -> object:
        seen.append(case.accuracy.anharmonic)  # type: ignore[attr-defined]
        return invented_prediction()

    monkeypatch.setattr("thermex.expansion.predict", predict)
    assert main(["predict", "x.toml", "--anharmonic", "none"]) == 0
    assert main(["predict", "x.toml"]) == 0
    assert seen == ["none", "default"]


@pytest.mark.parametrize(
    "words",
    [
        [],
        ["predikt"],
        ["predict"],
        ["predict", "x.toml", "--outt", "y"],
        ["predict", "x", "--anharmonic", "y"],
    ],
)
def test_wrong_words_are_status_two(words: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    assert main(words) == 2
    assert "Traceback" not in capsys.readouterr().err


@pytest.mark.parametrize("words", [["--help"], ["--version"], *([name, "--help"] for name in COMMANDS)])
def test_help_and_version(words: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    assert main(words) == 0
    assert "thermex" in capsys.readouterr().out


def test_help_imports_nothing_heavy() -> None:
    program = (
        "import sys; from thermex.cli import main; main(['predict', '--help']); "
        "heavy = {'matplotlib', 'ase', 'phonopy', 'scipy'} & set(sys.modules); sys.exit(str(heavy) if heavy else 0)"
    )
    root = Path(__file__).parents[1]
    done = subprocess.run([sys.executable, "-c", program], cwd=root, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


def test_table_without_out_needs_no_matplotlib() -> None:
    program = (
        "import sys; import thermex.commands.predict, thermex.report.table, thermex.report.beside; "
        "sys.exit('matplotlib' if 'matplotlib' in sys.modules else 0)"
    )
    root = Path(__file__).parents[1]
    done = subprocess.run([sys.executable, "-c", program], cwd=root, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


class Terminal(io.StringIO):
    """A stream that says it is a terminal."""

    def isatty(self) -> bool:
        return True


def test_progress_is_quiet_for_two_seconds_then_tells_the_time_left() -> None:
    now = [0.0]
    stream = Terminal()
    line = ProgressLine(stream, clock=lambda: now[0])
    line("phonons", 1, 10)
    now[0] = 1.9
    line("phonons", 2, 10)
    assert stream.getvalue() == ""
    now[0] = 4.0
    line("phonons", 4, 10)
    assert stream.getvalue() == "\rphonons: 4 of 10, about 6 s left"
    line.close()
    assert stream.getvalue().endswith("\r")


def test_progress_only_on_a_terminal() -> None:
    with progress_on(io.StringIO()) as progress:
        assert progress is silent
    with progress_on(Terminal()) as progress:
        assert isinstance(progress, ProgressLine)


def test_words_of_progress() -> None:
    assert progress_text("reading", 0, 0, 5.0) == "reading"
    assert progress_text("phonons", 9, 9, 5.0) == "phonons: 9 of 9"
    assert [duration(s) for s in (0.2, 59.0, 200.0, 7500.0)] == ["1 s", "59 s", "3 min 20 s", "2 h 5 min"]
