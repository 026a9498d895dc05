"""A prediction as plain data: the JSON document and the CSV table, a unit in every name."""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from thermex.case.writer import case_to_dict
from thermex.prediction import ModeSample, Prediction
from thermex.report.beside import Beside, Column, Curve
from thermex.report.caution import CAUTION, SHORT_CAUTION

Array = NDArray[np.float64]

#: Name and version of the layout of the JSON document.
LAYOUT = "thermex prediction, layout 1"

_ARRAYS = (
    "temperature_K",
    "volume_A3",
    "alpha_volume_per_K",
    "alpha_linear_per_K",
    "alpha_relative_error",
    "alpha_mean_per_K",
    "elongation",
    "gruneisen",
    "gruneisen_mode_average",
    "bulk_modulus_T_GPa",
    "bulk_modulus_S_GPa",
    "heat_capacity_V_J_per_mol_K",
    "heat_capacity_P_J_per_mol_K",
    "entropy_J_per_mol_K",
    "free_energy_eV",
    "debye_temperature_K",
    "effective_temperature_K",
    "mean_square_displacement_A2",
)
_BY_AXIS = (
    "lattice_A",
    "alpha_axis_per_K",
    "elongation_axis",
    "alpha_mean_axis_per_K",
    "branch_end_lattice_A",
    "zero_point_lattice_A",
)
_SCALARS = ("reference_temperature_K", "valid_to_K", "valid_to_reason", "branch_ends", "debye_moment_K")


def prediction_document(prediction: Prediction, beside: Beside) -> dict[str, Any]:
    """Return everything that a prediction holds as plain data (NaN → None, arrays → lists).

    Volumes and energies are per primitive cell, heat capacities per mole of formula units; arrays
    run over ``temperature_K``.
    """
    document: dict[str, Any] = {
        "layout": LAYOUT,
        "title": prediction.case.title,
        "caution": CAUTION,
        "formula": prediction.crystal.formula,
        "formula_units_per_primitive_cell": prediction.crystal.formula_units,
    }
    document |= {name: plain(getattr(prediction, name)) for name in _SCALARS + _ARRAYS + _BY_AXIS}
    document["static"] = _static(prediction)
    document["numerical_error"] = plain(prediction.numerical_error)
    document["equations_of_state"] = plain(prediction.equations_of_state)
    document["effort"] = plain(prediction.effort)
    document["zone_centre"] = plain(prediction.zone_centre)
    document["path_alpha_volume_per_K"] = plain(prediction.path_alpha_volume_per_K)
    document |= _beyond(prediction)
    document["fractional"] = plain(prediction.fractional)
    document["notes"] = list(prediction.notes)
    document["measured"] = measured_document(beside)
    document["modes"] = [_modes(sample) for sample in prediction.modes]
    document["case"] = plain(case_to_dict(prediction.case))
    return document


def _static(prediction: Prediction) -> dict[str, Any]:
    static, crystal = prediction.static, prediction.static.crystal
    found: dict[str, Any] = {"lattice_A": plain(static.lattice_A), "energy_eV": plain(static.energy_eV)}
    found |= {f.name: plain(getattr(static, f.name)) for f in fields(static) if f.name not in ("crystal", *found)}
    found["volume_A3"] = plain(crystal.volume)
    found["primitive_vectors_A"] = plain(crystal.lattice)
    found["fractional_positions"] = plain(crystal.fractional)
    found["symbols"] = list(crystal.symbols)
    found["masses_u"] = plain(crystal.masses)
    found["space_group_number"] = crystal.space_group
    return found


def _beyond(prediction: Prediction) -> dict[str, Any]:
    """Return the keys on the error of the method and on the result without it."""
    rule, corrected = prediction.rule, prediction.anharmonic
    found: dict[str, Any] = {
        "alpha_method_error_rule": None if rule is None else plain(rule.overestimate),
        "method_error_rule": plain(rule),
        "lattice_anharmonic_A": None,
        "alpha_linear_anharmonic_per_K": None,
        "alpha_anharmonic_relative_error": None,
        "anharmonic": None,
    }
    if corrected is not None:
        found["lattice_anharmonic_A"] = plain(corrected.lattice_A)
        found["alpha_linear_anharmonic_per_K"] = plain(corrected.alpha_linear_per_K)
        found["alpha_anharmonic_relative_error"] = plain(corrected.alpha_relative_error)
        named = ("lattice_A", "alpha_linear_per_K", "alpha_relative_error")
        found["anharmonic"] = {
            f.name: plain(getattr(corrected, f.name)) for f in fields(corrected) if f.name not in named
        }
    return found


def _modes(sample: ModeSample) -> dict[str, Any]:
    """Return the phonons on the mesh, rounded to 10⁻⁶ (they are many)."""
    return {
        "label": sample.label,
        "temperature_K": plain(sample.temperature_K),
        "weights": plain(np.round(sample.weights, 10)),
        "frequencies_THz": plain(np.round(sample.frequencies_THz, 6)),
        "gruneisen": plain(np.round(sample.gruneisen, 6)),
    }


def measured_document(beside: Beside) -> dict[str, Any]:
    """Return the measured values as plain data, with their sources (numbered from 1)."""
    return {
        "sources": [{"number": k, "source": text} for k, text in enumerate(beside.sources, start=1)],
        "at_temperatures": {name: plain(column) for name, column in beside.columns.items()},
        "series": [_curve(curve) for curve in beside.curves],
    }


def _curve(curve: Curve) -> dict[str, Any]:
    found: dict[str, Any] = plain(curve)
    return found


def plain(value: Any) -> Any:
    """Turn arrays, mappings and dataclasses into lists and dicts; what is not finite into None."""
    if value is None or isinstance(value, (bool, str)):
        return value
    if isinstance(value, (np.ndarray, np.generic)):
        return plain(value.tolist())
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, int):
        return value
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    if is_dataclass(value) and not isinstance(value, type):
        return {f.name: plain(getattr(value, f.name)) for f in fields(value)}
    return value.name if isinstance(value, Path) else str(value)


def json_text(document: Mapping[str, Any]) -> str:
    """Return strict JSON (no NaN), one key of the top level a line."""
    lines = [
        f"  {json.dumps(key, ensure_ascii=False)}: {json.dumps(value, ensure_ascii=False, allow_nan=False)}"
        for key, value in document.items()
    ]
    return "{\n" + ",\n".join(lines) + "\n}\n"


def csv_text(prediction: Prediction, beside: Beside) -> str:
    """Return the table over temperature; a name with its unit heads each column, absent cells are empty.

    The last column holds the caution, in the first row only.
    """
    columns = csv_columns(prediction, beside)
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow([*columns, "caution"])
    for k, row in enumerate(zip(*columns.values(), strict=True)):
        writer.writerow([*(_cell(value) for value in row), "" if k else SHORT_CAUTION])
    return stream.getvalue()


def _cell(value: object) -> str:
    if isinstance(value, (int, np.integer)):
        return "" if value == 0 else str(int(value))
    number = float(value)  # type: ignore[arg-type]
    return f"{number:.10g}" if math.isfinite(number) else ""


def csv_columns(prediction: Prediction, beside: Beside) -> dict[str, Any]:
    """Return heading → values over temperature, every array of the prediction that has one value a row."""
    found: dict[str, Any] = {"temperature_K": prediction.temperature_K}
    found |= {f"lattice_{axis}_A": values for axis, values in prediction.lattice_A.items()}
    if len(prediction.alpha_axis_per_K) > 1:
        found |= {f"alpha_{axis}_per_K": values for axis, values in prediction.alpha_axis_per_K.items()}
        found |= {f"alpha_mean_{axis}_per_K": values for axis, values in prediction.alpha_mean_axis_per_K.items()}
        found |= {f"elongation_{axis}": values for axis, values in prediction.elongation_axis.items()}
    found |= {name: getattr(prediction, name) for name in _ARRAYS[1:-1]}
    for k, symbol in enumerate(prediction.crystal.symbols):
        found[f"mean_square_displacement_{symbol}_{k + 1}_A2"] = prediction.mean_square_displacement_A2[:, k]
    if prediction.rule is not None:
        found["alpha_method_error_rule"] = prediction.rule.overestimate
    if prediction.anharmonic is not None:
        found |= _corrected_columns(prediction)
    for name, column in beside.columns.items():
        found |= _measured_columns(name, column)
    return found


def _corrected_columns(prediction: Prediction) -> dict[str, Any]:
    corrected = prediction.anharmonic
    assert corrected is not None
    found: dict[str, Any] = {f"lattice_anharmonic_{axis}_A": v for axis, v in corrected.lattice_A.items()}
    found["alpha_linear_anharmonic_per_K"] = corrected.alpha_linear_per_K
    found["alpha_anharmonic_relative_error"] = corrected.alpha_relative_error
    found["gruneisen_anharmonic"] = corrected.gruneisen
    found["bulk_modulus_T_anharmonic_GPa"] = corrected.bulk_modulus_T_GPa
    found["heat_capacity_P_anharmonic_J_per_mol_K"] = corrected.heat_capacity_P_J_per_mol_K
    return found


def _measured_columns(name: str, column: Column) -> dict[str, Any]:
    return {f"measured_{name}": column.value, f"measured_{name}_source": np.array(column.source, dtype=int)}
