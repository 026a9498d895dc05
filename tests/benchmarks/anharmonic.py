"""Cost of the anharmonic corrections over the plain prediction: ``python tests/benchmarks/anharmonic.py``."""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path
from statistics import median

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE.parent.parent)]

#: Shipped potential, and temperatures up to half of the end of its branch.
CASES = {
    "LJ58 Ar": (20.0, 30.0, 38.0),
    "TF64 NaCl": (100.0, 200.0, 300.0, 400.0),
    "GRIMES MgO": (300.0, 600.0, 1000.0, 1500.0),
}


def main() -> None:
    """Print seconds, and the ratio to the plain prediction, for the leading order and a sampling to 2 %."""
    from thermex.case.case import Accuracy
    from thermex.case.published import case_from_published
    from thermex.expansion import predict

    for name, temperatures in CASES.items():
        case = case_from_published(name, temperatures)
        predict(case)
        for kind, repeats in (("leading order", 5), ("sampled", 3)):
            ratios, added, error = [], [], 0.0
            for seed in range(repeats):
                found = predict(replace(case, accuracy=Accuracy(anharmonic=kind, seed=seed)))
                seconds = dict(found.effort.seconds)
                extra = seconds.pop("anharmonic correction")
                ratios.append(extra / sum(seconds.values()))
                added.append(extra)
                assert found.anharmonic is not None
                error = max(error, float(found.anharmonic.alpha_relative_error[-1]))
            print(
                f"{name:12s} {kind:14s} {median(added):6.2f} s more, {median(ratios):5.2f} of the plain prediction, "
                f"α at {temperatures[-1]:.0f} K to {error:.1%}"
            )


if __name__ == "__main__":
    main()
