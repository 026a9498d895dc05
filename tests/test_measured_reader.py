"""A user's own file of measured values: every convention and unit read, every fault told, all at once."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from thermex.errors import InputError
from thermex.measured import load_series_file
from thermex.measured.series import Series

# The numbers in these files are invented; they test the reading and nothing else.

MEAN = """\
# quantity: linear expansion coefficient
# kind: mean
# reference temperature: 20
# unit: 1e-6/K
# temperature unit: °C
# source: invented run 3
T, value, uncertainty
100, 9.8, 0.2
200, 10.1, 2 %
300, 10.4
"""


def written(folder: Path, text: str | bytes, name: str = "mine.csv") -> Path:
    path = folder / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode("utf-8"))
    return path


def read(folder: Path, text: str | bytes) -> tuple[Series, ...]:
    return load_series_file(written(folder, text))


def faults(folder: Path, text: str | bytes) -> tuple[str, ...]:
    with pytest.raises(InputError) as caught:
        read(folder, text)
    assert caught.value.exit_status == 2
    assert all("\n" not in fault and len(fault) < 700 for fault in caught.value.faults)
    return caught.value.faults


def heading(quantity: str, unit: str, *more: str) -> str:
    return "\n".join([f"# quantity: {quantity}", f"# unit: {unit}", *(f"# {line}" for line in more), ""])


def test_a_mean_coefficient_in_celsius(tmp_path: Path) -> None:
    (series,) = read(tmp_path, MEAN)
    assert (series.quantity, series.kind, series.axis) == ("linear expansion coefficient", "mean", "")
    assert series.unit == "1/K"
    assert series.reference_temperature_K == pytest.approx(293.15)
    assert series.temperature_K == pytest.approx([373.15, 473.15, 573.15])
    assert series.value == pytest.approx([9.8e-6, 10.1e-6, 10.4e-6])
    assert series.uncertainty[:2] == pytest.approx([0.2e-6, 0.202e-6])
    assert np.isnan(series.uncertainty[2])
    assert series.source == "invented run 3"
    assert series.usable
    assert not series.from_memory


@pytest.mark.parametrize(
    ("unit", "cell", "value"),
    [
        ("1", "0.0012", 1.2e-3),
        ("%", "0.12", 1.2e-3),
        ("ppm", "1200", 1.2e-3),
        ("µm/m", "1200", 1.2e-3),
        ("μm/m", "1200", 1.2e-3),
        ("-", "−0.0012", -1.2e-3),
    ],
)
@pytest.mark.parametrize("name", ["elongation", "ΔL/L0", "dL/L₀", "thermal strain", "linear thermal expansion"])
def test_elongation(tmp_path: Path, name: str, unit: str, cell: str, value: float) -> None:
    (series,) = read(tmp_path, heading(name, unit, "reference temperature: 293.15 K") + f"400 {cell}\n")
    assert series.quantity == "elongation"
    assert series.value == pytest.approx([value])
    assert series.reference_temperature_K == 293.15


@pytest.mark.parametrize("unit", ["1e-6/K", "10⁻⁶ K⁻¹", "×10⁻⁶/K", "1×10^-6/°C", "ppm/K", "µm/(m·K)", "ppm/°C"])
@pytest.mark.parametrize("name", ["alpha", "CTE", "linear expansion coefficient", "volume expansion coefficient"])
def test_coefficients(tmp_path: Path, name: str, unit: str) -> None:
    (series,) = read(tmp_path, heading(name, unit, "kind: instantaneous", "axis: c") + "T_K;value\n300;10,5\n")
    assert series.value == pytest.approx([10.5e-6])
    assert series.axis == "c"


@pytest.mark.parametrize(
    ("quantity", "unit", "cell", "value", "house"),
    [
        ("lattice parameter", "Å", "4.2115", 4.2115, "Å"),
        ("lattice parameter", "Angstrom", "4.2115", 4.2115, "Å"),
        ("lattice parameter", "nm", "0.42115", 4.2115, "Å"),
        ("lattice constant", "pm", "421.15", 4.2115, "Å"),
        ("C_P", "J/(mol K)", "37.2", 37.2, "J/(mol K)"),
        ("C_P", "J mol⁻¹ K⁻¹", "37.2", 37.2, "J/(mol K)"),
        ("heat capacity", "cal/(mol·K)", "10", 41.84, "J/(mol K)"),
        ("B_T", "GPa", "161.6", 161.6, "GPa"),
        ("isothermal bulk modulus", "kbar", "1616", 161.6, "GPa"),
        ("B_S", "MPa", "163900", 163.9, "GPa"),
        ("gamma", "1", "1.54", 1.54, "1"),
        ("Grüneisen parameter", "-", "1.54", 1.54, "1"),
        ("molar volume", "cm³/mol", "11.25", 11.25, "cm³/mol"),
        ("Debye temperature", "K", "945", 945.0, "K"),
    ],
)
def test_the_other_quantities(tmp_path: Path, quantity: str, unit: str, cell: str, value: float, house: str) -> None:
    (series,) = read(tmp_path, heading(quantity, unit) + f"300, {cell}, 1 %\n")
    assert series.value == pytest.approx([value])
    assert series.uncertainty == pytest.approx([0.01 * value])
    assert series.unit == house


def test_several_series_rows_in_any_order_and_a_byte_order_mark(tmp_path: Path) -> None:
    text = (
        "\ufeff## free words: anything\r\n"
        + heading("lattice parameter", "nm", "temperature unit: C", "source: one").replace("\n", "\r\n")
        + "100\t0.422\r\n20\t0.421\r\n"
        + heading("gamma", "1", "source: two", "my own remark: these words are passed over").replace("\n", "\r\n")
        + "'25' ; \"1,5\"\r\n"
    )
    lattice, gamma = read(tmp_path, text)
    assert lattice.temperature_K == pytest.approx([293.15, 373.15])
    assert lattice.value == pytest.approx([4.21, 4.22])
    assert lattice.axis == "a"
    assert gamma.temperature_K == pytest.approx([298.15])  # °C holds for the whole file
    assert gamma.value == pytest.approx([1.5])
    assert (lattice.source_number, gamma.source_number) == (1, 2)


def test_the_column_name_may_state_the_temperature_unit(tmp_path: Path) -> None:
    for name, shift in (("T (°C)", 273.15), ("T_C", 273.15), ("T/K", 0.0), ("temperature [K]", 0.0)):
        (series,) = read(tmp_path, heading("gamma", "1") + f"{name}, gamma, u\n25, 1.5, 0.1\n")
        assert series.temperature_K == pytest.approx([25.0 + shift])


def test_all_faults_of_a_file_at_once(tmp_path: Path) -> None:
    text = MEAN.replace("mean", "meen").replace("1e-6/K", "1e-6/m").replace("100, 9.8", "1oo, nan")
    told = faults(tmp_path, text + "-300, 9, -1\n1, 2, 3, 4\n")
    assert len(told) == 7
    for line, words in [
        ("line 2", "instantaneous or mean"),
        ("line 4", "not a unit"),
        ("line 8", "'1oo' is not a temperature"),
        ("line 8", "'nan' is not a value"),
        ("line 11", "below absolute zero"),
        ("line 11", "'-1' is not an uncertainty"),
        ("line 12", "4 columns"),
    ]:
        assert any("mine.csv" in one and line in one and words in one for one in told), (line, words)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("# quantity: linear expansion coefficient\n", ""), "quantity is not stated"),
        (("linear expansion coefficient", "linear expansion coeficient"), "linear expansion coefficient'?"),
        (("linear expansion coefficient", "colour"), "one of: linear"),
        (("# kind: mean\n", ""), "kind: instantaneous"),
        (("# unit: 1e-6/K\n", ""), "unit is not stated"),
        (("# reference temperature: 20\n", ""), "reference temperature of the mean coefficient"),
        (("reference temperature: 20", "reference temperature: warm"), "'warm' is not a temperature"),
        (("reference temperature: 20", "reference temperature: -300"), "not a temperature"),
        (("temperature unit: °C", "temperature unit: F"), "K or °C"),
        (("# kind", "# kinds"), "did you mean 'kind'?"),
        (("# kind: mean", "# kind: mean\n# kind: mean"), "given twice"),
        (("T, value, uncertainty", "T_K, value, uncertainty"), "contradicts"),
        (("T, value, uncertainty", "value, T"), "in that order"),
        (("100, 9.8", "100, 9.8e9"), "not a plausible"),
        (("100, 9.8", "100, 1e400"), "not a value"),
        (("100, 9.8", "1e6, 9.8"), "no temperature of a crystal"),
        (("100, 9.8, 0.2", "100"), "one column"),
        (("1e-6/K", "1/K"), "is the unit right?"),
        (("source: invented run 3", "axis: d"), "a, b, c"),
        (("source: invented run 3", "usable: perhaps"), "yes, no"),
        (("source: invented run 3", "how: guessed"), "from memory"),
    ],
)
def test_what_is_wrong_is_said(tmp_path: Path, change: tuple[str, str], words: str) -> None:
    assert change[0] in MEAN
    told = faults(tmp_path, MEAN.replace(*change))
    assert any(words in one for one in told), told


def test_values_already_in_per_kelvin_called_ppm(tmp_path: Path) -> None:
    told = faults(tmp_path, heading("alpha", "1e-6/K", "kind: instantaneous") + "300, 1.05e-5\n")
    assert "is the unit 1/K" in told[0]


def test_files_that_are_none(tmp_path: Path) -> None:
    for path in (tmp_path, tmp_path / "none.csv", tmp_path / ("x" * 5000), tmp_path / "a\0b"):
        with pytest.raises(InputError):
            load_series_file(path)
    assert "no values" in faults(tmp_path, "")[0]
    assert "no values" in faults(tmp_path, "# only: words\n")[0]
    assert "no values" in faults(tmp_path, MEAN.split("100,", maxsplit=1)[0])[0]
    assert "UTF-8" in faults(tmp_path, MEAN.encode("latin-1"))[0]
    assert "line 5" in faults(tmp_path, MEAN.encode("latin-1"))[0]
    assert "8 MB" in faults(tmp_path, b"1, 2\n" * 2_000_000)[0]
    assert "rows" in faults(tmp_path, heading("gamma", "1") + "300, 1.5\n" * 100_001)[0]
    assert "characters" in faults(tmp_path, heading("gamma", "1") + "300, 1.5\n" + "9" * 1_000_000)[0]
    assert "header lines" in faults(tmp_path, "".join(f"# k{i}y: v\n" for i in range(100_000)))[0]
    assert len(faults(tmp_path, "a b c d\n" * 50_000)) < 50


def test_a_long_file_is_read_whole(tmp_path: Path) -> None:
    rows = "".join(f"{300 + i / 1000}, 1.5\n" for i in range(20_000))
    (series,) = read(tmp_path, heading("gamma", "1") + rows)
    assert len(series.value) == 20_000
