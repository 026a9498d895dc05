"""The page of a prediction: what is predicted, how far to trust it, and what it was made from."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from thermex.case.writer import case_to_toml
from thermex.prediction import Prediction
from thermex.report.beside import Beside
from thermex.report.evidence import (
    convergence_body,
    potential_body,
    record_body,
    sources_body,
    static_body,
)
from thermex.report.figures import (
    plot_alpha,
    plot_bulk_modulus,
    plot_elongation,
    plot_gruneisen,
    plot_heat_capacity,
)
from thermex.report.mode_figures import plot_density_of_states, plot_mode_gruneisen
from thermex.report.numbers import fixed, micro, percent, temperature
from thermex.report.page import (
    Picture,
    Section,
    gallery,
    listing,
    number_table,
    page,
    paragraphs,
    preformatted,
    word_table,
)
from thermex.report.pair_figures import plot_crystal_energy, plot_pair_curves
from thermex.report.response import response_rows
from thermex.report.style import svg_bytes
from thermex.report.table import best_alpha, chosen_rows, fields, legend
from thermex.report.words import heading, limits, validity

ROWS = 24


def prediction_page(prediction: Prediction, beside: Beside, record: Mapping[str, Any]) -> str:
    """Return the page as HTML."""
    return page(page_title(prediction), summary(prediction, beside), prediction_sections(prediction, beside, record))


def page_title(prediction: Prediction) -> str:
    """Return the title of the case, or of the crystal when it has none."""
    return heading(prediction)[0]


def prediction_sections(prediction: Prediction, beside: Beside, record: Mapping[str, Any]) -> list[Section]:
    """Return the sections of the page in their order."""
    return [
        Section("Expansion", _expansion(prediction, beside)),
        Section("What limits this result", listing([*beside.doubts, *limits(prediction)])),
        Section("The three conventions", _conventions(prediction)),
        Section("Stiffness, heat and the Grüneisen parameter", _thermodynamics(prediction, beside)),
        Section("Vibrations", _vibrations(prediction, beside)),
        Section("Pair energies and thermal spread", _pairs(prediction)),
        Section("Numerical error", convergence_body(prediction)),
        Section("Crystal at rest", static_body(prediction)),
        Section("Potential", potential_body(prediction)),
        Section("Measured values", sources_body(beside)),
        Section("Record of the run", record_body(record)),
        Section("The case, every default spelled out", preformatted(case_to_toml(prediction.case))),
    ]


def summary(prediction: Prediction, beside: Beside) -> list[str]:
    """Return the sentences that come first: α where it matters, the measured value, the range."""
    said = heading(prediction)[1:]
    said += [_alpha_sentence(prediction, beside, k) for k in _landmarks(prediction, beside)]
    said.append(validity(prediction))
    return said


def _landmarks(prediction: Prediction, beside: Beside) -> list[int]:
    """Return up to three valid temperatures: near room temperature, and the ends that were measured."""
    kelvin = prediction.temperature_K
    good = [k for k in range(len(kelvin)) if np.isfinite(prediction.alpha_linear_per_K[k]) and kelvin[k] > 0.0]
    if not good:
        return []
    measured = beside.column("alpha_linear_per_K", len(kelvin)).value
    known = [k for k in good if np.isfinite(measured[k])] or good
    room = min(good, key=lambda k: abs(kelvin[k] - 298.15))
    return sorted({known[0], room, known[-1]})


def _alpha_sentence(prediction: Prediction, beside: Beside, k: int) -> str:
    alpha = best_alpha(prediction)
    corrected = prediction.anharmonic is not None and np.isfinite(prediction.anharmonic.alpha_linear_per_K[k])
    kind = "anharmonic correction included" if corrected else "quasi-harmonic"
    said = f"α({temperature(prediction.temperature_K[k])} K) = {micro(alpha[k])}·10⁻⁶/K ({kind})"
    column = beside.column("alpha_linear_per_K", len(alpha))
    if np.isfinite(column.value[k]):
        said += f"; measured {micro(column.value[k])} [{column.source[k]}], "
        said += f"difference {percent(alpha[k] / column.value[k] - 1.0)} %"
    return said + "."


def _picture(axes: Any, alternative: str, caption: str) -> Picture:
    return Picture(svg_bytes(axes), alternative, caption)


def _expansion(prediction: Prediction, beside: Beside) -> str:
    rows = chosen_rows(prediction, beside, ROWS)
    columns = fields(prediction, beside, rows)
    heads = [(column.head, column.unit) for column in columns]
    cells = [list(row) for row in zip(*(column.cells for column in columns), strict=True)]
    pictures = [
        _picture(
            plot_alpha(prediction, beside),
            f"Linear expansion coefficient of {prediction.crystal.formula} against temperature, {_ends(prediction)}",
            "Instantaneous linear coefficient. Band on the line: numerical error. Numbers in brackets: sources below.",
        ),
        _picture(
            plot_elongation(prediction, beside),
            f"Relative elongation from {prediction.reference_temperature_K:g} K against temperature",
            f"Linear thermal expansion ΔL/L₀ from {prediction.reference_temperature_K:g} K.",
        ),
    ]
    return gallery(pictures) + number_table(heads, cells) + listing(legend(prediction, columns))


def _ends(prediction: Prediction) -> str:
    """Describe the curve of α in words: first and last valid value."""
    good = np.flatnonzero(np.isfinite(prediction.alpha_linear_per_K))
    if not good.size:
        return "no valid temperature"
    first, last = int(good[0]), int(good[-1])
    alpha, kelvin = prediction.alpha_linear_per_K, prediction.temperature_K
    best = best_alpha(prediction)[last]
    corrected = f" ({micro(best)} with the anharmonic correction)" if best != alpha[last] else ""
    return (
        f"from {micro(alpha[first])} at {temperature(kelvin[first])} K "
        f"to {micro(alpha[last])}{corrected} at {temperature(kelvin[last])} K, in 10⁻⁶/K"
    )


def _conventions(prediction: Prediction) -> str:
    start = temperature(prediction.reference_temperature_K)
    said = [
        "Instantaneous and mean coefficient and ΔL/L₀ of the quasi-harmonic answer: compare like with like.",
        f"Reference temperature T₀ = {start} K.",
    ]
    names = list(prediction.alpha_axis_per_K) if len(prediction.alpha_axis_per_K) > 1 else []
    heads = [
        ("T", "K"),
        ("instantaneous (1/L)(dL/dT)", "10⁻⁶/K"),
        (f"mean from {start} K to T", "10⁻⁶/K"),
        (f"ΔL/L₀ from {start} K", "%"),
        ("volume coefficient", "10⁻⁶/K"),
    ]
    for axis in names:
        heads += [(f"instantaneous, {axis}", "10⁻⁶/K"), (f"mean, {axis}", "10⁻⁶/K"), (f"ΔL/L₀, {axis}", "%")]
    rows = [_convention_row(prediction, k, names) for k in chosen_rows(prediction, Beside(), ROWS)]
    return paragraphs(said) + number_table(heads, rows)


def _convention_row(prediction: Prediction, k: int, axes: Sequence[str]) -> list[str]:
    row = [
        temperature(prediction.temperature_K[k]),
        micro(prediction.alpha_linear_per_K[k]),
        micro(prediction.alpha_mean_per_K[k]),
        fixed(100.0 * prediction.elongation[k], 4),
        micro(prediction.alpha_volume_per_K[k]),
    ]
    for axis in axes:
        row += [
            micro(prediction.alpha_axis_per_K[axis][k]),
            micro(prediction.alpha_mean_axis_per_K[axis][k]),
            fixed(100.0 * prediction.elongation_axis[axis][k], 4),
        ]
    return row


def _thermodynamics(prediction: Prediction, beside: Beside) -> str:
    formula = prediction.crystal.formula
    pictures = [
        _picture(
            plot_gruneisen(prediction, beside),
            f"Grüneisen parameter of {formula} against temperature",
            "γ = α_V B_T V / C_V.",
        ),
        _picture(
            plot_bulk_modulus(prediction, beside),
            f"Isothermal and adiabatic bulk modulus of {formula} against temperature",
            "B_T isothermal, B_S adiabatic.",
        ),
        _picture(
            plot_heat_capacity(prediction, beside),
            f"Heat capacity of {formula} at constant pressure and at constant volume against temperature",
            "Per mole of formula units.",
        ),
    ]
    return gallery(pictures)


def _vibrations(prediction: Prediction, beside: Beside) -> str:
    if not prediction.modes:
        return ""
    pictures = [
        _picture(
            plot_mode_gruneisen(prediction),
            "Mode Grüneisen parameter of every vibration against its frequency, cold and hot cell",
            "Each mark is one vibration of the mesh; how fast its frequency falls as the cell grows.",
        ),
        _picture(
            plot_density_of_states(prediction),
            "Phonon density of states at the cold and at the hot cell",
            "Area: number of vibrations per primitive cell.",
        ),
    ]
    return gallery(pictures) + _zone_centre(prediction, beside)


def _zone_centre(prediction: Prediction, beside: Beside) -> str:
    rows = [list(row) for row in response_rows(prediction, beside.response)]
    return word_table(("Response of the crystal at rest", "value"), rows) if rows else ""


def _pairs(prediction: Prediction) -> str:
    spread = "Spread: root mean square along the bond of nearest neighbours, atoms taken as moving independently."
    pictures = [
        _picture(
            plot_pair_curves(prediction),
            "Pair energy against distance for every pair of ions or atoms, with the static distance of nearest "
            "neighbours, their mean distance when hot and the spread of the vibration",
            f"Pair energy, charges included. {spread}",
        ),
        _picture(
            plot_crystal_energy(prediction),
            "Energy of the whole crystal against its nearest-neighbour distance, beside a parabola of the same "
            "curvature",
            "All pairs summed, the cell scaled uniformly; dashed, the parabola of the same curvature.",
        ),
    ]
    return gallery(pictures)
