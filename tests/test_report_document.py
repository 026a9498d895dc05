"""JSON, CSV and the run record: strict, complete, a unit in every name."""

from __future__ import annotations

import csv
import io
import json
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from tests.synthetic import axial_prediction, invented_prediction, measured_beside, with_anharmonic
from thermex.report.beside import Beside
from thermex.report.document import csv_text, json_text, plain, prediction_document
from thermex.report.folder import prediction_files, write_prediction
from thermex.report.record import input_hashes, run_record

# The names that the design of the project promises to readers of the files.
ARRAYS = [
    "temperature_K",
    "volume_A3",
    "alpha_volume_per_K",
    "alpha_linear_per_K",
    "alpha_relative_error",
    "gruneisen",
    "bulk_modulus_T_GPa",
    "bulk_modulus_S_GPa",
    "heat_capacity_V_J_per_mol_K",
    "heat_capacity_P_J_per_mol_K",
]


def read(text: str) -> dict[str, object]:
    """Parse strict JSON: NaN and Infinity are refused."""

    def refuse(word: str) -> float:
        raise AssertionError(f"{word} is not JSON")

    found = json.loads(text, parse_constant=refuse)
    assert isinstance(found, dict)
    return found


def test_json_has_the_promised_names() -> None:
    prediction = invented_prediction()
    document = read(json_text(prediction_document(prediction, Beside())))
    size = len(prediction.temperature_K)
    for name in ARRAYS:
        values = document[name]
        assert isinstance(values, list) and len(values) == size, name
    assert set(document["lattice_A"]) == set(document["alpha_axis_per_K"]) == {"a"}
    assert {"lattice_A", "energy_eV", "bulk_modulus_GPa"} <= set(document["static"])
    assert document["valid_to_K"] == 1900.0 and document["valid_to_reason"]
    assert "not a design allowable" in document["caution"]


def test_past_the_limit_is_null_and_before_it_exact() -> None:
    prediction = invented_prediction()
    document = read(json_text(prediction_document(prediction, Beside())))
    assert document["alpha_linear_per_K"][-1] is None
    assert document["lattice_A"]["a"][-1] is None
    assert document["alpha_linear_per_K"][6] == prediction.alpha_linear_per_K[6]


def test_anharmonic_names() -> None:
    names = (
        "lattice_anharmonic_A",
        "alpha_linear_anharmonic_per_K",
        "alpha_anharmonic_relative_error",
        "alpha_method_error_rule",
        "anharmonic",
    )
    without = read(json_text(prediction_document(invented_prediction(), Beside())))
    assert all(name in without for name in names)
    assert without["anharmonic"] is None
    document = read(json_text(prediction_document(with_anharmonic(invented_prediction()), Beside())))
    assert set(document["lattice_anharmonic_A"]) == {"a"}
    assert document["alpha_linear_anharmonic_per_K"][0] is None
    assert {"kind", "starts_K", "extrapolated_from_K"} <= set(document["anharmonic"])


def test_axes_are_keyed_by_name() -> None:
    document = read(json_text(prediction_document(axial_prediction(), Beside())))
    assert set(document["lattice_A"]) == set(document["alpha_axis_per_K"]) == {"a", "c"}


def test_sources_travel_with_the_values() -> None:
    prediction = invented_prediction()
    found = read(json_text(prediction_document(prediction, measured_beside(prediction))))["measured"]
    assert found["sources"][0] == {"number": 1, "source": "Invented series one, from memory"}
    assert len(found["series"]) == 4


def test_every_part_of_a_prediction_is_in_the_document() -> None:
    from dataclasses import fields

    prediction = invented_prediction()
    document = prediction_document(prediction, Beside())
    told_otherwise = {"crystal", "rule"}
    assert {f.name for f in fields(prediction)} - told_otherwise <= set(document)


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        (float("nan"), None),
        (np.float64("inf"), None),
        (np.array([1.0, np.nan]), [1.0, None]),
        (np.bool_(True), True),
        (np.int64(3), 3),
        ({"x": (1, np.nan)}, {"x": [1, None]}),
        (Path("/somewhere/private/file.csv"), "file.csv"),
    ],
)
def test_plain(value: object, expected: object) -> None:
    assert plain(value) == expected


def test_csv_is_one_row_a_temperature_with_units_in_the_head() -> None:
    prediction = with_anharmonic(invented_prediction())
    rows = list(csv.DictReader(io.StringIO(csv_text(prediction, measured_beside(prediction)))))
    assert len(rows) == len(prediction.temperature_K)
    assert float(rows[6]["alpha_linear_per_K"]) == pytest.approx(prediction.alpha_linear_per_K[6], rel=1e-9)
    assert rows[6]["measured_alpha_linear_per_K_source"] == "1"
    assert rows[-1]["alpha_linear_per_K"] == "" and rows[-1]["lattice_a_A"] == ""
    assert "not a design allowable" in rows[0]["caution"]
    assert {"elongation", "alpha_mean_per_K"} <= set(rows[0])


def test_record_says_what_was_run() -> None:
    case = invented_prediction().case
    moment = datetime(2031, 5, 6, 7, 8, 9, tzinfo=UTC)
    record = run_record(case, ("thermex", "predict", "x.toml"), now=moment)
    assert record["command"] == ["thermex", "predict", "x.toml"]
    assert record["date"] == "2031-05-06T07:08:09+00:00"
    assert record["libraries"]["numpy"] == np.__version__
    assert record["case_hash"] and record["case"]["title"] == "Invented crystal"
    read(json.dumps(record, allow_nan=False))


def test_hash_of_the_input_file(tmp_path: Path) -> None:
    from dataclasses import replace

    source = tmp_path / "x.toml"
    source.write_bytes(b"abc")
    case = replace(invented_prediction().case, source=str(source))
    # FIPS 180-4 example: SHA-256 of "abc".
    expected = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert input_hashes(case) == {"x.toml": expected}


def test_folder_holds_every_file(tmp_path: Path) -> None:
    prediction = invented_prediction()
    written = write_prediction(tmp_path, prediction, measured_beside(prediction), ("thermex", "predict"))
    names = {path.name for path in written}
    assert names == {path.name for path in tmp_path.iterdir()}
    assert {"prediction.json", "prediction.csv", "report.html", "run.json", "case.toml"} <= names
    assert (tmp_path / "expansion.png").read_bytes().startswith(b"\x89PNG")
    assert b"<svg" in (tmp_path / "expansion.svg").read_bytes()


def test_same_prediction_same_bytes() -> None:
    prediction = invented_prediction()
    one, two = (prediction_files(prediction, Beside(), ("x",)) for _ in range(2))
    assert {name for name in one if one[name] != two[name]} <= {"run.json", "report.html"}
