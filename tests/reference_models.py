"""Cases built from the parameters of shared/reference/converged.json (a separate numpy program)."""

from __future__ import annotations

import json
from functools import cache
from typing import Any

from thermex.case.case import Accuracy, Case, Conditions, CrystalSpec, PairSpec, Polarisable, PotentialSpec
from thermex.data import root

PROTOTYPE = {
    "S1": ("rock salt", ("Mg", "O")),
    "S1P": ("rock salt", ("Mg", "O")),
    "S2": ("rock salt", ("Na", "Cl")),
    "S3": ("fcc", ("Ar",)),
    "S4a": ("rock salt", ("Na", "Cl")),
    "S4b": ("rock salt", ("Na", "Cl")),
    "S4c": ("rock salt", ("Na", "Cl")),
    "S5": ("fcc", ("Cu",)),
    "S6": ("rock salt", ("Mg", "O")),
    "S7": ("corundum", ("Al", "O")),
    "X1": ("simple cubic", ("Ar",)),
    "X2": ("rock salt", ("Mg", "O")),
    "X3": ("caesium chloride", ("Cs", "Cl")),
}


@cache
def reference() -> dict[str, Any]:
    """Return all reference cases."""
    text = (root() / "reference" / "converged.json").read_text(encoding="utf-8")
    return dict(json.loads(text)["cases"])


def _pair(between: str, term: dict[str, Any]) -> PairSpec:
    first, second = between.split("-")
    if term["kind"].startswith("A*"):
        return PairSpec((first, second), "Born-Mayer", {"A": term["A"], "rho": term["rho"]})
    return PairSpec((first, second), "Born", {"B": term["c"], "n": term["n"]})


def reference_case(name: str, accuracy: float = 1e-3) -> Case:
    """Return the case of one entry, at its temperatures, without anharmonic correction."""
    entry = reference()[name]
    model = entry["model"]
    pairs = tuple(_pair(k, t) for k, terms in model["pair_terms"].items() for t in terms)
    shells = {k: Polarisable(v["Y"], v["k2"]) for k, v in model["shells"].items()}
    charges = {k: v + (shells[k].shell_charge if k in shells else 0.0) for k, v in model["core_charges"].items()}
    temperatures = tuple(row["T"] for row in entry.get("table", [])) or (100.0,)
    static = entry.get("static", {})
    lattice = {"a": 1.01 * static.get("a0", 4.2)}
    if "c0" in static:
        lattice["c"] = static["c0"]
    prototype, sites = PROTOTYPE[name]
    return Case(
        title=entry["title"],
        crystal=CrystalSpec(prototype, sites, lattice, masses=model["masses"]),
        potential=PotentialSpec(charges, pairs, shells),
        conditions=Conditions(temperatures, entry["P_GPa"]),
        accuracy=Accuracy(alpha=accuracy, anharmonic="none"),
    )
