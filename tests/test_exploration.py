"""Sweep, match, calibrate: against closed forms, converged results, kills and worker processes."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from reference_models import reference

from thermex.case.case import Case
from thermex.case.parameters import with_parameter
from thermex.case.reader import case_from_dict, load_case
from thermex.cli import main
from thermex.errors import InputError
from thermex.exploration.calibrate import Datum, calibrate
from thermex.exploration.closed_forms import born_lande_modulus, gruneisen_forms
from thermex.exploration.executor import local_workers
from thermex.exploration.journal import open_journal
from thermex.exploration.match import match
from thermex.exploration.point import evaluate
from thermex.exploration.sweep import spread, sweep

ROOT = Path(__file__).resolve().parent.parent


def born_crystal(temperatures: tuple[float, ...] = (0.0, 100.0, 200.0, 300.0)) -> Case:
    return case_from_dict(
        {
            "crystal": {
                "prototype": "rock salt",
                "sites": ["Na", "Cl"],
                "a": 5.64,
                "masses": reference()["S4a"]["model"]["masses"],
            },
            "potential": {
                "charges": {"Na": 1.0, "Cl": -1.0},
                "pair": [{"between": ["Na", "Cl"], "form": "Born", "n": 8.0, "static_distance": 2.82}],
            },
            "conditions": {"temperature": list(temperatures)},
            "accuracy": {"anharmonic": "none"},
        }
    )


@pytest.mark.crosscheck
def test_sweep_agrees_with_converged_results() -> None:
    """shared/reference/converged.json, cases S4a to S4c: Born n = 8, 7 and 9.1, r0 = 2.820 Å."""
    result = sweep(born_crystal(), "Na-Cl.n", [7.0, 8.0, 9.1])
    for name, point in zip(("S4b", "S4a", "S4c"), result.points, strict=True):
        entry = reference()[name]
        row = next(r for r in entry["table"] if r["T"] == 300.0)
        assert point.at("alpha_linear_per_K", 300.0) == pytest.approx(row["alpha_lin"], rel=1e-3)
        assert point.at("gruneisen", 300.0) == pytest.approx(row["gamma"], rel=1e-3)
        assert point.valid_to_K == pytest.approx(entry["T_limit_K"], rel=1e-3)


@pytest.mark.literature
def test_born_lande_modulus_and_gruneisen_forms() -> None:
    """B0 of Born and Landé exactly; γ near the three closed forms, which differ by 2/3 between themselves."""
    result = sweep(born_crystal(), "Na-Cl.n", [7.0, 9.0, 12.0])
    alphas = []
    for (n,), point in zip(result.values, result.points, strict=True):
        assert point.static_bulk_modulus_GPa == pytest.approx(born_lande_modulus(n, 1.0, 2.82), rel=1e-9)
        forms = gruneisen_forms(n, 1.0).values()
        assert min(forms) - 0.35 < point.at("gruneisen", 200.0) < max(forms) + 0.35
        alphas.append(point.at("alpha_linear_per_K", 200.0))
    assert alphas == sorted(alphas, reverse=True)  # a harder wall expands less


def test_unstable_points_are_kept_with_their_reason() -> None:
    result = sweep(born_crystal(), "Na-Cl.n", [4.0, 8.0])
    assert not result.points[0].answered and "unstable" in result.points[0].valid_to_reason
    assert result.points[1].answered


def test_holding_the_distance_solves_the_amplitude_again() -> None:
    case = load_case(ROOT / "cases" / "kiln-lining-magnesia.toml")
    case = replace(case, conditions=replace(case.conditions, temperatures=(300.0,)))
    result = sweep(case, "Mg-O.rho", [0.29, 0.30], hold="distance")
    distances = [p.static_distance_A for p in result.points]
    assert distances == pytest.approx([4.19815737 / 2] * 2, rel=1e-6)


def test_map_over_two_parameters() -> None:
    case = born_crystal((300.0,))
    result = sweep(case, "Na-Cl.n", [8.0, 9.0], second=("Na-Cl.static_distance", [2.80, 2.82]))
    assert list(result.values) == [(8.0, 2.80), (8.0, 2.82), (9.0, 2.80), (9.0, 2.82)]
    assert all(p.answered for p in result.points)


def test_resume_after_sigkill(tmp_path: Path) -> None:
    case = tmp_path / "case.toml"
    text = (
        'title = "kill"\n[crystal]\nprototype = "rock salt"\nsites = ["Na", "Cl"]\na = 5.64\n'
        '[potential]\ncharges = { Na = 1.0, Cl = -1.0 }\n[[potential.pair]]\nbetween = ["Na", "Cl"]\n'
        'form = "Born"\nn = 8.0\nstatic_distance = 2.82\n[conditions]\ntemperature = [100, 300]\n'
        '[accuracy]\nanharmonic = "none"\n'
    )
    case.write_text(text)
    out = tmp_path / "out"
    words = ["sweep", str(case), "--parameter", "Na-Cl.n", "--from", "7", "--to", "10", "--step", "0.25"]
    words += ["--out", str(out)]
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])}
    process = subprocess.Popen(
        [sys.executable, "-m", "thermex", *words], env=environment, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
    )
    journal = out / "journal.jsonl"
    deadline = time.monotonic() + 60
    while time.monotonic() < deadline and (not journal.exists() or journal.read_bytes().count(b"\n") < 4):
        time.sleep(0.05)
    process.send_signal(signal.SIGKILL)
    process.wait(timeout=30)
    kept = journal.read_bytes().splitlines(keepends=True)
    assert 4 <= len(kept) < 14, "the kill came too late or nothing was kept"
    assert main(words) == 0
    lines = journal.read_text().splitlines()
    assert lines[: len([k for k in kept if k.endswith(b"\n")])] == [
        k.decode().strip() for k in kept if k.endswith(b"\n")
    ]
    keys = [json.loads(line)["key"] for line in lines[1:]]
    assert len(keys) == len(set(keys)) == 13
    case.write_text(text.replace("5.64", "5.6"))
    assert main(words) == 2


def test_two_runs_exclude_each_other(tmp_path: Path) -> None:
    with open_journal(tmp_path, "one"), pytest.raises(InputError, match="running into this folder"):
        open_journal(tmp_path, "one").__enter__()
    with pytest.raises(InputError, match="another case"):
        open_journal(tmp_path, "two").__enter__()


def test_worker_processes_after_a_kernel_has_run() -> None:
    """A forked pool would hang here: phonopy's kernels have run in this process (time-out below)."""
    script = (
        "import sys; sys.path[:0] = [{root!r}, {tests!r}]\n"
        "from test_exploration import born_crystal\n"
        "from thermex.exploration.sweep import sweep\n"
        "from thermex.exploration.executor import local_workers\n"
        "if __name__ == '__main__':\n"
        "    case = born_crystal((100.0, 200.0))\n"
        "    one = sweep(case, 'Na-Cl.n', [8.0])\n"
        "    with local_workers(2) as workers:\n"
        "        many = sweep(case, 'Na-Cl.n', [8.0, 9.0, 10.0], executor=workers)\n"
        "    a, b = (p.at('alpha_linear_per_K', 200.0) for p in (many.points[0], one.points[0]))\n"
        "    assert abs(a / b - 1) < 1e-9\n"
        "    print('done', sum(p.answered for p in many.points))\n"
    ).format(root=str(ROOT), tests=str(ROOT / "tests"))
    path = Path(os.environ.get("TMPDIR", "/tmp")) / f"workers-{os.getpid()}.py"
    path.write_text(script)
    try:
        out = subprocess.run([sys.executable, str(path)], capture_output=True, text=True, timeout=120, check=False)
    finally:
        path.unlink()
    assert out.stdout.strip() == "done 3", out.stderr
    assert local_workers is not None


def test_match_finds_the_exponent_again() -> None:
    """The target is what n = 8.7 itself gives: invented, no measurement."""
    case = born_crystal((300.0,))
    target = evaluate(with_parameter(case, "Na-Cl.n", 8.7)).at("alpha_linear_per_K", 300.0)
    result = match(
        case,
        "Na-Cl.n",
        quantity="alpha_linear_per_K",
        temperature_K=300.0,
        target=target,
        uncertainty=0.02 * target,
        low=7.5,
        high=10.0,
    )
    assert result.value == pytest.approx(8.7, abs=1e-3)
    assert result.low is not None and result.high is not None and result.low < 8.7 < result.high
    nothing = match(
        case, "Na-Cl.n", quantity="alpha_linear_per_K", temperature_K=300.0, target=1e-6, low=8.0, high=10.0
    )
    assert nothing.value is None and "nearest" in nothing.words


def test_calibrate_recovers_parameters_from_invented_data() -> None:
    case = load_case(ROOT / "cases" / "kiln-lining-magnesia.toml")
    case = replace(case, accuracy=replace(case.accuracy, anharmonic="none"))
    true = with_parameter(with_parameter(case, "Mg-O.rho", 0.30), "Mg-O.A", 1300.0)
    kelvin = (300.0, 600.0, 900.0, 1200.0)
    point = evaluate(replace(true, conditions=replace(true.conditions, temperatures=kelvin)))
    noise = np.random.default_rng(7)
    data = []
    for t in kelvin:
        for quantity, share in (("alpha_linear_per_K", 0.01), ("lattice_A", 1e-4), ("bulk_modulus_T_GPa", 0.01)):
            value = point.at(quantity, t)
            data.append(Datum(quantity, t, value * (1 + share * noise.normal()), share * value, source="invented"))
    fit = calibrate(case, ["Mg-O.A", "Mg-O.rho"], data)
    assert abs(fit.values[0] - 1300.0) < 3 * fit.standard_deviations[0]
    assert abs(fit.values[1] - 0.30) < 3 * fit.standard_deviations[1]
    assert fit.reduced_chi_squared < 3.0
    assert any("correlated" in w for w in fit.warnings)  # A and ρ trade against each other


def test_calibrate_against_measured_magnesia_shows_what_changed(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "fit"
    case = str(ROOT / "cases" / "kiln-lining-magnesia.toml")
    words = ["calibrate", case, "--parameters", "Mg-O.rho", "--data", "alpha,B_T", "--anharmonic", "none"]
    assert main([*words, "--to", "800", "--out", str(out)]) == 0
    text = capsys.readouterr().out
    assert "better" in text and "rms before" in text
    assert main(["predict", str(out / "calibrated-case.toml")]) == 0


def test_spread_and_bad_words(capsys: pytest.CaptureFixture[str]) -> None:
    assert spread(5.0, 6.0, 0.5) == [5.0, 5.5, 6.0]
    case = str(ROOT / "cases" / "kiln-lining-magnesia.toml")
    assert main(["sweep", case, "--parameter", "Mg-O.rh", "--values", "0.3"]) == 2
    assert "did you mean Mg-O.rho" in capsys.readouterr().err
    assert main(["sweep", case, "--parameter", "Mg-O.rho", "--values", "much"]) == 2
