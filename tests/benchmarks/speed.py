"""Speed and memory as ratios measured in one run: ``python tests/benchmarks/speed.py [--out FILE]``.

Every figure is a ratio to something measured in the same run, for machines differ and are noisy.
"""

from __future__ import annotations

import argparse
import json
import resource
import subprocess
import sys
import tempfile
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from statistics import median
from time import perf_counter
from typing import Any

import numpy as np

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE), str(HERE.parent), str(HERE.parent.parent)]
CASE = HERE.parent.parent / "cases" / "kiln-lining-magnesia.toml"
IMPORTS = "import numpy, scipy, ase, phonopy"
PARTS = "import numpy, scipy.special, scipy.optimize, scipy.interpolate, ase.data, spglib;from phonopy import Phonopy"
REPEATS = 5


def child(code: str) -> float:
    """Return the time that ``code`` takes inside a fresh interpreter, s."""
    timed = f"import time; t = time.perf_counter(); {code}; print(time.perf_counter() - t)"
    out = subprocess.run([sys.executable, "-c", timed], capture_output=True, text=True, check=True)
    return float(out.stdout.split()[-1])


def best(measure: Callable[[], float]) -> float:
    """Return the median of several runs."""
    return median(measure() for _ in range(REPEATS))


def plain_case() -> Any:
    """Return rigid-ion MgO, 0–2000 K at 0.1 %, without the anharmonic correction."""
    from thermex.case.reader import load_case

    case = load_case(CASE)
    return replace(case, accuracy=replace(case.accuracy, anharmonic="none"))


def computing(case: Any) -> float:
    """Return the time of one prediction with everything imported, s."""
    from thermex.expansion import predict

    start = perf_counter()
    predict(case)
    return perf_counter() - start


def whole_process(extra: list[str]) -> float:
    """Return the time of the command line from start to exit, s."""
    start = perf_counter()
    subprocess.run([sys.executable, "-m", "thermex", "predict", str(CASE), *extra], capture_output=True, check=True)
    return perf_counter() - start


def peak_memory() -> float:
    """Return the peak resident memory of one whole process, MB."""
    code = (
        "import resource, subprocess, sys;"
        f"subprocess.run([sys.executable, '-m', 'thermex', 'predict', {str(CASE)!r}], capture_output=True, check=True);"
        "print(resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024)"
    )
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return float(out.stdout)


def against_handmade() -> dict[str, Any]:
    """Compare time and accuracy with the hand-made way at the same volumes."""
    import handmade
    from reference_models import reference

    from thermex.expansion import predict

    rows = [r for r in reference()["S1"]["table"] if 300 <= r["T"] <= 1500]
    temperature = np.arange(0.0, 2001.0, 50.0)
    case = plain_case()
    prediction = predict(case)
    window = prediction.effort.strain_window[0]
    lattice = prediction.static.lattice_A["a"] * np.exp(np.linspace(window[0], window[1], prediction.effort.cells))
    result = handmade.run(temperature, lattice)
    errors = {}
    for row in rows:
        by_hand = float(np.interp(row["T"], temperature, result.alpha_linear))
        ours = float(np.interp(row["T"], prediction.temperature_K, prediction.alpha_linear_per_K))
        errors[f"{row['T']:.0f} K"] = {
            "hand-made": by_hand / row["alpha_lin"] - 1.0,
            "thermex": ours / row["alpha_lin"] - 1.0,
        }
    ours_seconds = best(lambda: computing(case))
    return {
        "hand-made seconds": result.total,
        "hand-made stages": result.seconds,
        "thermex seconds": ours_seconds,
        "ratio": result.total / ours_seconds,
        "relative error of alpha": errors,
    }


def born_case() -> Any:
    """Return a rock-salt Born crystal, 0–1000 K, without the anharmonic correction."""
    from thermex.case.reader import case_from_dict

    return case_from_dict(
        {
            "crystal": {"prototype": "rock salt", "sites": ["Na", "Cl"], "a": 5.64},
            "potential": {
                "charges": {"Na": 1.0, "Cl": -1.0},
                "pair": [{"between": ["Na", "Cl"], "form": "Born", "n": 8.0, "static_distance": 2.82}],
            },
            "conditions": {"temperature": {"from": 0, "to": 1000, "step": 50}},
            "accuracy": {"anharmonic": "none"},
        }
    )


def sweep_of_exponents() -> dict[str, float]:
    """Compare 15 exponents with 15 predictions, and 60 points by two workers with 60 one after the other."""
    from thermex.case.parameters import with_parameter
    from thermex.exploration.executor import local_workers
    from thermex.exploration.sweep import sweep

    case = born_case()
    one = best(lambda: computing(case))
    start = perf_counter()
    sweep(case, "Na-Cl.n", np.linspace(7.0, 12.0, 15))
    many = perf_counter() - start
    exponents = [with_parameter(case, "Na-Cl.n", float(n)) for n in np.linspace(7.0, 12.0, 15)]
    alone = sum(computing(changed) for changed in exponents)
    values = np.linspace(7.0, 12.0, 60)
    start = perf_counter()
    sweep(case, "Na-Cl.n", values)
    serial = perf_counter() - start
    start = perf_counter()
    with local_workers(2) as workers:
        sweep(case, "Na-Cl.n", values, executor=workers)
    parallel = perf_counter() - start
    return {
        "one prediction, s": one,
        "15 points, s": many,
        "ratio 15 points / one": many / one,
        "ratio 15 points / the same 15 alone": many / alone,
        "60 points serial, s": serial,
        "60 points, two workers, s": parallel,
        "ratio two workers / serial": parallel / serial,
    }


def calibration() -> dict[str, float]:
    """Compare a fit of three parameters to 20 data with single predictions."""
    from thermex.case.parameters import with_parameter
    from thermex.exploration.calibrate import Datum, calibrate
    from thermex.exploration.point import evaluate

    case = plain_case()
    true = with_parameter(with_parameter(case, "Mg-O.A", 1350.0), "Mg-O.rho", 0.297)
    kelvin = (200.0, 400.0, 600.0, 800.0, 1000.0)
    point = evaluate(replace(true, conditions=replace(true.conditions, temperatures=kelvin)))
    shares = {
        "alpha_linear_per_K": 0.01,
        "lattice_A": 1e-4,
        "bulk_modulus_T_GPa": 0.01,
        "heat_capacity_P_J_per_mol_K": 0.01,
    }
    data = [Datum(q, t, point.at(q, t), share * point.at(q, t)) for t in kelvin for q, share in shares.items()]
    one = best(lambda: computing(replace(case, conditions=replace(case.conditions, temperatures=kelvin))))
    start = perf_counter()
    fit = calibrate(case, ["Mg-O.A", "Mg-O.rho", "O-O.C"], data)
    seconds = perf_counter() - start
    return {"one prediction, s": one, "fit, s": seconds, "ratio": seconds / one, "predictions": float(fit.predictions)}


def shells() -> dict[str, float]:
    """Compare magnesia with and without a shell on oxygen."""
    from thermex.case.published import case_from_published

    grid = tuple(float(t) for t in range(0, 2001, 50))
    cases = [case_from_published(n, grid) for n in ("LC85 MgO shell fit, rigid", "LC85 MgO shell")]
    rigid, shell = (
        best(lambda c=c: computing(replace(c, accuracy=replace(c.accuracy, anharmonic="none")))) for c in cases
    )
    return {"rigid, s": rigid, "with shell, s": shell, "ratio": shell / rigid}


def corundum() -> dict[str, float]:
    """Time corundum, 0–1500 K at 0.5 %."""
    from thermex.case.published import case_from_published
    from thermex.expansion import predict

    case = case_from_published("GRIMES Al2O3", tuple(float(t) for t in range(0, 1501, 100)), accuracy=5e-3)
    start = perf_counter()
    predict(case)
    return {"seconds": perf_counter() - start}


def measure_all() -> dict[str, Any]:
    """Measure every row; a row that cannot run says why."""
    from thermex.expansion import predict

    case = plain_case()
    predict(case)
    imports = best(lambda: child(IMPORTS))
    parts = best(lambda: child(PARTS))
    own = best(lambda: computing(case))
    corrected = best(lambda: computing(replace(case, accuracy=replace(case.accuracy, anharmonic="leading order"))))
    with tempfile.TemporaryDirectory() as folder:
        process = best(lambda: whole_process(["--anharmonic", "none"]))
        written = whole_process(["--out", folder])
    rows: dict[str, Any] = {
        "import of numpy, scipy, ase, phonopy, s": imports,
        "import of the parts of them that are used, s": parts,
        "predict, computing, s": own,
        "ratio computing / import": own / imports,
        "ratio computing / import of the parts used": own / parts,
        "leading order adds, s": corrected - own,
        "whole process, s": process,
        "ratio whole process / import": process / imports,
        "ratio whole process / import of the parts used": process / parts,
        "whole process with files, s": written,
        "peak memory, MB": peak_memory(),
        "against the hand-made way": against_handmade(),
    }
    for name, row in (
        ("sweep", sweep_of_exponents),
        ("calibration", calibration),
        ("shells", shells),
        ("corundum", corundum),
    ):
        try:
            rows[name] = row()
        except Exception as error:  # a row must not stop the others
            rows[name] = f"not measured: {error}"
    rows["own peak memory, MB"] = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    return rows


def show(rows: dict[str, Any], indent: int = 0) -> None:
    """Print the rows."""
    for name, value in rows.items():
        if isinstance(value, dict):
            print(" " * indent + name + ":")
            show(value, indent + 2)
        else:
            text = f"{value:.4g}" if isinstance(value, float) else str(value)
            print(" " * indent + f"{name:<52} {text}")


def main() -> None:
    """Measure, print and write."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--out", type=Path, help="write the figures as JSON")
    arguments = parser.parse_args()
    rows = measure_all()
    show(rows)
    if arguments.out:
        arguments.out.write_text(json.dumps(rows, indent=1), encoding="utf-8")


if __name__ == "__main__":
    main()
