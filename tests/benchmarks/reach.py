"""Cost against atoms per cell: ``python tests/benchmarks/reach.py [--out FOLDER]``.

Each crystal is predicted at 0.5 % in α in a process of its own. Time is given in seconds and as a
ratio to the two-atom cell of the same run, for machines differ and are noisy.
"""

from __future__ import annotations

import argparse
import json
import resource
import subprocess
import sys
from pathlib import Path
from time import perf_counter
from typing import Any

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE.parent.parent)]

#: A fluoride perovskite with invented parameters, for a cell of five atoms.
PEROVSKITE: dict[str, Any] = {
    "title": "Invented perovskite",
    "crystal": {"prototype": "cubic perovskite", "sites": ["K", "Mg", "F"], "a": 4.4},
    "potential": {
        "charges": {"K": 1.0, "Mg": 2.0, "F": -1.0},
        "pair": [
            {"between": ["Mg", "F"], "form": "Born-Mayer", "A": 1400.0, "rho": 0.28},
            {"between": ["K", "F"], "form": "Born-Mayer", "A": 3000.0, "rho": 0.30},
            {"between": ["F", "F"], "form": "Born-Mayer", "A": 1127.7, "rho": 0.2753},
        ],
    },
    "conditions": {"temperature": {"from": 0, "to": 600, "step": 50}},
    "accuracy": {"alpha": 5e-3, "anharmonic": "none"},
}

#: Crystal → (published potential, or None for the invented one; highest temperature, K).
CRYSTALS = {
    "rock salt, MgO": ("LC85 MgO", 1500.0),
    "fluorite, CeO2": ("CEO2 B1a", 1000.0),
    "perovskite, invented": (None, 600.0),
    "quartz, SiO2": ("BKS90 SiO2", 300.0),
    "corundum, Al2O3": ("GRIMES Al2O3", 1500.0),
    "spinel, MgAl2O4": ("PEDONE06 MgAl2O4", 1000.0),
    "garnet, Mg3Al2Si3O12": ("PEDONE06 Mg3Al2Si3O12", 400.0),
}


def case_of(name: str) -> Any:
    """Return the case of one crystal of the list."""
    from dataclasses import replace

    from thermex.case.published import case_from_published
    from thermex.case.reader import case_from_dict

    published, highest = CRYSTALS[name]
    if published is None:
        return case_from_dict(PEROVSKITE)
    kelvin = tuple(float(t) for t in range(0, int(highest) + 1, 50))
    case = case_from_published(published, kelvin, accuracy=5e-3)
    return replace(case, accuracy=replace(case.accuracy, anharmonic="none"))


def measure_here(name: str) -> dict[str, float]:
    """Predict one crystal in this process; seconds, peak memory in MB, estimate in MB, atoms, worst error of α."""
    import numpy as np

    from thermex.crystal.build import build_crystal
    from thermex.expansion import predict
    from thermex.memory import expected_bytes
    from thermex.potential.build import pair_model

    case = case_of(name)
    crystal = build_crystal(case.crystal)
    start = perf_counter()
    prediction = predict(case)
    seconds = perf_counter() - start
    warm = (prediction.temperature_K >= 100.0) & np.isfinite(prediction.alpha_relative_error)
    below = prediction.temperature_K < 0.9 * prediction.valid_to_K
    return {
        "atoms": float(crystal.size),
        "seconds": seconds,
        "peak memory, MB": resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0,
        "estimated memory, MB": expected_bytes(pair_model(case.potential, crystal), crystal, 5e-3) / 1e6,
        "worst error of alpha from 100 K": float(prediction.alpha_relative_error[warm & below].max()),
    }


def measure_all() -> dict[str, dict[str, float]]:
    """Measure every crystal in a process of its own."""
    rows = {}
    for name in CRYSTALS:
        command = [sys.executable, __file__, "--one", name]
        done = subprocess.run(command, capture_output=True, text=True, check=False)
        if done.returncode:
            print(f"{name}: {done.stderr.strip().splitlines()[-1]}", file=sys.stderr)
            continue
        rows[name] = json.loads(done.stdout.splitlines()[-1])
        rows[name]["ratio to two atoms"] = rows[name]["seconds"] / next(iter(rows.values()))["seconds"]
        print(f"{name:<24}" + "  ".join(f"{key} {value:.4g}" for key, value in rows[name].items()), flush=True)
    return rows


def draw(rows: dict[str, dict[str, float]], file: Path) -> None:
    """Plot time and memory against atoms per cell."""
    import matplotlib

    matplotlib.use("Agg")
    from matplotlib import pyplot

    figure, axes = pyplot.subplots(1, 2, figsize=(9.0, 3.8), layout="constrained")
    atoms = [row["atoms"] for row in rows.values()]
    for ax, key, unit in ((axes[0], "seconds", "Time / s"), (axes[1], "peak memory, MB", "Peak memory / MB")):
        ax.plot(atoms, [row[key] for row in rows.values()], "o-", color="#0072B2")
        ax.set(xlabel="Atoms in the primitive cell", ylabel=unit, xscale="log", yscale="log")
        ax.grid(alpha=0.4)
        ax.set_xticks([1, 2, 5, 10, 20, 50, 100], labels=["1", "2", "5", "10", "20", "50", "100"])
        ax.set_xticks([], minor=True)
        ax.margins(0.12)
        for k, (name, row) in enumerate(rows.items()):
            place = {"textcoords": "offset points", "xytext": (0, 7 if k % 2 else -13), "ha": "center", "fontsize": 8}
            ax.annotate(name.split(",")[0], (row["atoms"], row[key]), **place)
    figure.savefig(file, dpi=150)


def main() -> None:
    """Measure, print, and write when asked to."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--one", help="measure one crystal and print it as JSON")
    parser.add_argument("--out", type=Path, help="write reach.json and reach.png into this folder")
    arguments = parser.parse_args()
    if arguments.one:
        print(json.dumps(measure_here(arguments.one)))
        return
    rows = measure_all()
    if arguments.out:
        arguments.out.mkdir(parents=True, exist_ok=True)
        (arguments.out / "reach.json").write_text(json.dumps(rows, indent=1), encoding="utf-8")
        draw(rows, arguments.out / "reach.png")


if __name__ == "__main__":
    main()
