"""Sections of a page that let a reader check it: convergence, crystal, potential, sources, record."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

from thermex.prediction import EquationOfState, Prediction
from thermex.report.beside import Beside
from thermex.report.numbers import error_percent, fixed, percent, significant, temperature
from thermex.report.page import listing, number_table, paragraphs, word_table
from thermex.report.table import chosen_rows


def convergence_body(prediction: Prediction) -> str:
    """Return the numerical error of α by source, and what was computed for it."""
    error, effort = prediction.numerical_error, prediction.effort
    sources = (error.mesh, error.volumes, error.supercell, error.sums, prediction.alpha_relative_error)
    names = ("mesh", "cells", "supercell", "lattice sums", "stated")
    rows = [
        [temperature(prediction.temperature_K[k]), *(error_percent(float(values[k])) for values in sources)]
        for k in chosen_rows(prediction, Beside(), 12)
    ]
    window = "; ".join(
        f"{axis} from {percent(low, 2)} to {percent(high, 2)} %"
        for axis, (low, high) in zip(prediction.crystal.axis_names, effort.strain_window, strict=True)
    )
    asked = (
        f"Asked for: {error_percent(prediction.case.accuracy.alpha)} % in α at 100 K and above. Relative error of α, "
        "per cent, by its source; the error of the potential and of the method are not in it."
    )
    spent = (
        f"Mesh {_times(effort.mesh)}, {effort.irreducible_q} irreducible q; {effort.cells} cells spanning, in "
        f"ln(lattice parameter), {window}; supercell {_times(effort.supercell)} primitive cells."
    )
    said = [asked, spent]
    times = ", ".join(f"{stage} {significant(seconds, 2)} s" for stage, seconds in effort.seconds.items())
    said += [f"Time: {times}."] if times else []
    return paragraphs(said) + number_table([("T", "K"), *((name, "%") for name in names)], rows)


def _times(numbers: Sequence[int]) -> str:
    return " × ".join(str(n) for n in numbers)


def static_body(prediction: Prediction) -> str:
    """Return the table of the crystal at rest."""
    static = prediction.static
    rows = [
        ["structure", f"{static.crystal.name or 'from a file'}, space group {static.crystal.space_group}"],
        ["energy", f"{fixed(static.energy_eV, 6)} eV per primitive cell"],
        ["nearest distance", f"{fixed(static.nearest_distance_A, 5)} Å"],
        [
            "bulk modulus, derivative",
            f"{fixed(static.bulk_modulus_GPa, 3)} GPa, {fixed(static.bulk_modulus_derivative, 3)}",
        ],
        ["stiffness C11 C12 C44", f"{_elastic(prediction)} GPa"],
        ["lattice parameters", _lattice(static.lattice_A)],
        ["with zero-point motion, 0 K", _lattice(prediction.zero_point_lattice_A)],
    ]
    if prediction.branch_end_lattice_A:
        rows.append(["at the branch end", _lattice(prediction.branch_end_lattice_A)])
    rows += [[f"{pair} turns over at", f"{fixed(r, 4)} Å"] for pair, r in static.turning_points_A.items()]
    rows += [[f"fit: {fit.form}", _fit(fit)] for fit in prediction.equations_of_state]
    return word_table(("Quantity", "Value"), rows)


def _fit(fit: EquationOfState) -> str:
    return (
        f"V₀ = {fixed(fit.volume_A3, 4)} Å³, B₀ = {fixed(fit.bulk_modulus_GPa, 2)} GPa, "
        f"B₀′ = {fixed(fit.bulk_modulus_derivative, 3)}, residual {significant(fit.rms_residual_eV, 2)} eV"
    )


def _elastic(prediction: Prediction) -> str:
    stiffness = prediction.static.elastic_GPa
    return ", ".join(fixed(float(stiffness[i, j]), 2) for i, j in ((0, 0), (0, 1), (3, 3)))


def _lattice(parameters: Mapping[str, float]) -> str:
    return ", ".join(f"{axis} = {fixed(value, 5)} Å" for axis, value in parameters.items())


def potential_body(prediction: Prediction) -> str:
    """Return the potential: where it comes from, charges, parameters."""
    potential = prediction.case.potential
    said = [
        f"{name}: {value}"
        for name, value in (
            ("Published set", potential.published),
            ("Citation", potential.citation),
            ("Provenance", potential.provenance),
        )
        if value
    ] or ["The user's own parameters."]
    said.append("Charges: " + (", ".join(f"{s} {q:+g} e" for s, q in potential.charges.items()) or "none") + ".")
    rows = [
        [
            "–".join(pair.between),
            pair.form,
            ", ".join(f"{name} = {value:.8g}" for name, value in pair.parameters.items()),
        ]
        for pair in potential.pairs
    ]
    shells = [
        [symbol, "polarisable", f"shell charge {s.shell_charge:g} e, spring {s.spring_constant:g} eV/Å²"]
        for symbol, s in potential.polarisable.items()
    ]
    return paragraphs(said) + word_table(("Pair", "Form", "Parameters (eV, Å)"), rows + shells)


def sources_body(beside: Beside) -> str:
    """Return the sources of the measured values, numbered as everywhere on the page."""
    return listing(beside.sources, numbered=True) or paragraphs(["None were compared."])


def record_body(record: Mapping[str, Any]) -> str:
    """Return the record of the run as a table."""
    plain_words: dict[str, Callable[[Any], str]] = {
        "version": str,
        "date": str,
        "command": " ".join,
        "python": str,
        "platform": str,
        "libraries": lambda found: ", ".join(f"{name} {version}" for name, version in found.items()),
        "case_hash": str,
        "input_sha256": lambda found: ", ".join(f"{name}: {digest}" for name, digest in found.items()) or "none",
    }
    rows = [[name.replace("_", " "), form(record[name])] for name, form in plain_words.items() if name in record]
    return word_table(("Item", "Value"), rows)
