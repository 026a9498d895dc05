"""Crystals and potentials of the anharmonic tests, from shared/reference (sources stand in the files)."""

from __future__ import annotations

import json
from typing import Any

from thermex import data
from thermex.case.case import CrystalSpec
from thermex.crystal.build import build_crystal
from thermex.crystal.crystal import Crystal
from thermex.potential.model import Interaction, Kind, PairModel
from thermex.potential.terms import Exponential, InversePower

STRUCTURES = {
    "S1": ("rock salt", ("Mg", "O")),
    "S2": ("rock salt", ("Na", "Cl")),
    "S3": ("fcc", ("Ar",)),
    "S5": ("fcc", ("Cu",)),
}


def reference(name: str) -> dict[str, Any]:
    """Return one file of shared/reference."""
    found: dict[str, Any] = json.loads((data.root() / "reference" / name).read_text())
    return found["cases"]


def model_of(description: dict[str, Any]) -> PairModel:
    """Build the rigid-ion model that converged.json describes."""
    symbols = list(description["core_charges"])
    kinds = tuple(Kind(s, False, description["core_charges"][s]) for s in symbols)
    links = []
    for pair, terms in description["pair_terms"].items():
        first, second = sorted(symbols.index(s) for s in pair.split("-"))
        for term in terms:
            if term["kind"].startswith("A*"):
                links.append(Interaction(first, second, Exponential(term["A"], term["rho"])))
            else:
                links.append(Interaction(first, second, InversePower(term["c"], term["n"])))
    return PairModel(kinds, tuple(links))


def case(name: str) -> tuple[PairModel, Crystal, list[dict[str, float]]]:
    """Return model, crystal at the static minimum and the rows of anharmonic.json of one case."""
    description = reference("converged.json")[name]["model"]
    rows = reference("anharmonic.json")[name]
    structure, sites = STRUCTURES[name]
    spec = CrystalSpec(structure, sites, {"a": rows["a0"]}, masses=description["masses"])
    return model_of(description), build_crystal(spec), rows["rows"]
