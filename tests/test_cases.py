"""The shipped cases: all load and round-trip, a few run, and both worked examples do."""

from __future__ import annotations

import runpy
from pathlib import Path

import numpy as np
import pytest

from thermex import Prediction, case_from_dict, load_case, load_series_file, predict
from thermex.case.writer import case_hash, case_to_dict

FOLDER = Path(__file__).resolve().parent.parent / "cases"
CASES = sorted(path.name for path in FOLDER.glob("*.toml"))
QUICK = (
    "cold-cell-argon.toml",
    "cold-mount-copper.toml",
    "cold-window-caf2.toml",
    "cold-window-caf2-gillan.toml",
    "cold-window-csbr.toml",
    "cold-window-nacl-born.toml",
    "kiln-lining-magnesia-shell.toml",
)


def test_there_are_cases_of_every_kind() -> None:
    cases = [load_case(FOLDER / name) for name in CASES]
    assert len(cases) >= 16
    prototypes = {case.crystal.prototype for case in cases}
    assert prototypes >= {
        "rock salt", "caesium chloride", "fluorite", "fcc", "corundum", "rutile", "alpha-quartz"
    }  # fmt: skip
    forms = {pair.form for case in cases for pair in case.potential.pairs}
    assert forms >= {"Born", "Born-Mayer", "Buckingham", "Lennard-Jones", "Mie", "Morse"}
    assert any(case.potential.polarisable for case in cases)
    assert any(pair.form == "Born" and pair.static_distance for case in cases for pair in case.potential.pairs)


@pytest.mark.parametrize("name", CASES)
def test_every_case_loads_and_is_written_back_as_itself(name: str) -> None:
    case = load_case(FOLDER / name)
    assert case.title and case.conditions.temperatures
    again = case_from_dict(case_to_dict(case), source=case.source, folder=FOLDER)
    assert case_hash(again) == case_hash(case)
    first = (FOLDER / name).read_text(encoding="utf-8").splitlines()[0]
    assert first.startswith("# ")


@pytest.fixture(scope="module")
def predictions() -> dict[str, Prediction]:
    return {name: predict(load_case(FOLDER / name)) for name in QUICK}


@pytest.mark.parametrize("name", QUICK)
def test_a_few_run(name: str, predictions: dict[str, Prediction]) -> None:
    prediction = predictions[name]
    valid = np.isfinite(prediction.volume_A3) & (prediction.temperature_K >= 20.0)
    assert valid.any()
    assert (prediction.alpha_linear_per_K[valid] > 0.0).all()
    assert prediction.alpha_relative_error[valid].max() < 0.05


def test_a_rigid_shell_less_fit_and_the_shell_model_differ(predictions: dict[str, Prediction]) -> None:
    """Polarisable oxygen changes the phonons and with them expansion; the static lattice is the same."""
    rigid = predict(load_case(FOLDER / "kiln-lining-magnesia.toml"))
    shell = predictions["kiln-lining-magnesia-shell.toml"]
    assert shell.static.lattice_A["a"] == pytest.approx(rigid.static.lattice_A["a"], rel=1e-6)
    ratio = shell.at(shell.alpha_linear_per_K, 300.0) / rigid.at(rigid.alpha_linear_per_K, 300.0)
    assert 0.5 < ratio < 2.0 and abs(ratio - 1.0) > 1e-3


def test_what_is_invented_says_so() -> None:
    found = sorted(path for path in FOLDER.glob("*.csv"))
    assert found
    for path in found:
        assert path.name.startswith("invented")
        (series,) = load_series_file(path)
        assert "INVENTED" in series.citation
        assert path.read_text(encoding="utf-8").startswith("# title: INVENTED")


def test_the_window_example_runs(capsys: pytest.CaptureFixture[str]) -> None:
    believed = runpy.run_path(str(FOLDER / "choose_a_cold_window.py"))["main"]()
    shown = capsys.readouterr().out
    assert "de Leeuw-Cooper 2003 CaF2" in believed["CaF2"]
    assert believed["Cu"] == []  # central-force metals expand too little
    assert "not a design allowable" in shown


@pytest.mark.slow
def test_the_lining_example_runs(capsys: pytest.CaptureFixture[str]) -> None:
    nearest = runpy.run_path(str(FOLDER / "choose_a_kiln_lining.py"))["main"]()
    shown = capsys.readouterr().out
    assert set(nearest) == {"MgO", "CaO"}
    assert "not a design allowable" in shown and "expected excess" in shown
