"""The shipped measured values: complete, unslipped, and in agreement with each other and with the outside."""

from __future__ import annotations

import csv
import math
import re
from pathlib import Path

import numpy as np
import pytest

from thermex import data
from thermex.errors import InputError
from thermex.measured import Series, best_measured, load_material, materials, value_at
from thermex.measured.conventions import molar_volume
from thermex.measured.library import FORMULA_UNITS
from thermex.measured.quantities import QUANTITIES

LINEAR = "linear expansion coefficient"
LATTICE = "lattice parameter"
K_S = "adiabatic bulk modulus"
C_P = "heat capacity at constant pressure"

REFERENCE = Path(__file__).resolve().parents[2] / "shared" / "reference"
with_reference = pytest.mark.skipif(
    not (REFERENCE / "measured.csv").is_file(), reason="the compilation is not laid beside this checkout"
)

#: Quantity of the compilation: ours, and the factor to house units.
COLUMNS = {
    "alpha_linear": (LINEAR, 1e-6),
    "alpha_volume": ("volume expansion coefficient", 1e-6),
    "lattice_a": (LATTICE, 1.0),
    "lattice_c": (LATTICE, 1.0),
    "K_S": (K_S, 1.0),
    "K_T": ("isothermal bulk modulus", 1.0),
    "C_P": (C_P, 1.0),
    "gamma_th": ("Grüneisen parameter", 1.0),
    "theta_D": ("Debye temperature", 1.0),
    "molar_volume": ("molar volume", 1.0),
    "dL/L": ("elongation", 1.0),
    "dL/L293": ("elongation", 1.0),
}


def reference_rows() -> list[dict[str, str]]:
    rows = []
    for name in ("measured.csv", "measured_series.csv"):
        with (REFERENCE / name).open(encoding="utf-8", newline="") as stream:
            rows += list(csv.DictReader(stream))
    return rows


def points(formula: str, quantity: str) -> np.ndarray:
    found = [
        np.column_stack([series.temperature_K, series.value])
        for series in load_material(formula).series
        if series.quantity == quantity
    ]
    return np.vstack(found)


def temperatures_of(row: dict[str, str]) -> list[float]:
    text = {"RT": "298", ">200": "250", "3-9": "5"}.get(row["T_K"], row["T_K"])
    return [float(part) for part in re.split(r"-| to ", text) if part]


@with_reference
def test_every_row_of_the_compilation_is_carried() -> None:
    rows = [row for row in reference_rows() if row["quantity"] in COLUMNS]
    missing, exact = [], 0
    for row in rows:
        if row["T_K"].startswith("~300 to melting"):
            continue  # states no temperatures
        quantity, factor = COLUMNS[row["quantity"]]
        value = float(row["value"]) * factor
        if "logarithmic" in row["kind"]:
            start, end = temperatures_of(row)
            value = math.expm1(value * (end - start)) / (end - start)
        table = points(row["formula"], quantity)
        near = np.min(np.abs(table[:, 0, None] - temperatures_of(row)), axis=1) <= 5.1
        gap = np.min(np.abs(table[near, 1] - value), initial=np.inf)
        exact += bool(gap <= 1e-9 * max(abs(value), 1e-9))
        if gap > 3e-3 * abs(value):
            missing.append((row["formula"], row["quantity"], row["T_K"], row["value"]))
    assert not missing
    assert len(rows) == 1799
    assert exact >= 1700  # the rest are rounded copies of one measurement, or converted means


@with_reference
@pytest.mark.parametrize("name", ["measured.csv", "measured_series.csv"])
def test_every_material_of_the_compilation_has_a_file(name: str) -> None:
    with (REFERENCE / name).open(encoding="utf-8", newline="") as stream:
        formulas = {row["formula"] for row in csv.DictReader(stream)}
    assert formulas == {material.formula for material in materials()}


@with_reference
def test_what_a_source_contradicts_is_kept_out_of_verdicts() -> None:
    contradicted = [row for row in reference_rows() if (row.get("check") or "").startswith("contradicted")]
    assert len(contradicted) == 8
    for row in contradicted:
        quantity, factor = COLUMNS[row["quantity"]]
        for series in load_material(row["formula"]).series:
            if series.quantity == quantity and series.how == "from memory" and series.usable:
                assert not np.isclose(series.value, float(row["value"]) * factor, rtol=1e-9).any(), row


@with_reference
def test_what_nobody_looked_up_says_from_memory() -> None:
    recalled = {row["source"] for row in reference_rows() if row["how"].startswith("memory")}
    seen = {row["source"] for row in reference_rows() if row["how"] == "seen"}
    for material in materials():
        for series in material.series:
            if series.source in recalled - seen:
                assert series.from_memory
                assert "from memory" in series.citation
                assert "from memory" in material.sources[series.source_number - 1]


def test_counts_of_the_shipped_files() -> None:
    shipped = materials()
    assert len(shipped) == 41
    assert sum(len(material.series) for material in shipped) == 489
    assert sum(len(series.value) for material in shipped for series in material.series) == 1841
    assert sum(not series.usable for material in shipped for series in material.series) == 28
    for material in shipped:
        assert any(series.usable for series in material.series)
        assert (data.root() / "measured" / f"{material.formula}.csv").is_file()
        numbers = {series.source_number for series in material.series}
        assert numbers == set(range(1, len(material.sources) + 1))


def test_series_are_in_house_units_and_order() -> None:
    units = {quantity.name: quantity.unit for quantity in QUANTITIES}
    for material in materials():
        for series in material.series:
            assert series.unit == units[series.quantity]
            assert (np.diff(series.temperature_K) >= 0).all()
            assert np.isfinite(series.value).all()
            assert not (series.uncertainty < 0).any()
            assert series.source
            assert series.usable or series.remark
            assert (series.reference_temperature_K is not None) == (
                series.kind == "mean" or series.quantity == "elongation"
            )
            with pytest.raises(ValueError, match="read-only"):
                series.value[0] = 0.0


# --- against the outside -------------------------------------------------------------------------


def test_copper_at_293_K() -> None:
    """NIST cryogenic material properties, OFHC copper: 16.6(2)e-6/K at 293 K."""
    best = best_measured(load_material("Cu"), LINEAR, 293.0)
    assert best is not None
    assert best.value == pytest.approx(16.6e-6, abs=0.2e-6)
    assert not best.series.from_memory


def test_certified_copper_fit_runs_through_the_measured_points() -> None:
    """NIST StRD, data set Hahn1: certified rational fit, residual standard deviation 0.0818 (1e-6/K)."""
    series = [s for s in load_material("Cu").series if "StRD" in s.source]
    measured = next(s for s in series if len(s.value) == 236)
    top = [1.0776351733, -1.2269296921e-1, 4.0863750610e-3, -1.4262662514e-6]
    bottom = [1.0, -5.7609940901e-3, 2.4053735503e-4, -1.2314450199e-7]
    powers = np.vander(measured.temperature_K, 4, increasing=True)
    residual = measured.value * 1e6 - powers @ top / (powers @ bottom)
    assert math.sqrt(float(residual @ residual) / (236 - 7)) == pytest.approx(0.0818, abs=2e-4)


def test_argon_law_of_tilford_and_swenson() -> None:
    """Tilford & Swenson, Phys. Rev. Lett. 22 (1969) 1296: (3.34 T³ + 0.030 T⁵)·1e-8 per K, 1–6 K."""
    series = load_material("Ar").of(LINEAR)[0]
    for temperature in (1.5, 2.5, 5.5):
        found = value_at(series, temperature)
        assert found is not None
        law = (3.34 * temperature**3 + 0.030 * temperature**5) * 1e-8
        assert found[0] == pytest.approx(law, rel=0.01)


def test_uranium_dioxide_lengths_and_coefficients_agree() -> None:
    """Martin, J. Nucl. Mater. 152 (1988) 94: 9.76 at 298 K, 10.5 at 1000 K; the lengths must say so too."""
    material = load_material("urania")
    lengths = next(s for s in material.of("elongation"))
    for low, high in ((800.0, 900.0), (1000.0, 1100.0)):
        ends = [value_at(lengths, temperature) for temperature in (low, high)]
        assert ends[0] is not None
        assert ends[1] is not None
        slope = (ends[1][0] - ends[0][0]) / (high - low) / (1.0 + ends[0][0])
        alpha = best_measured(material, LINEAR, 0.5 * (low + high))
        assert alpha is not None
        assert slope == pytest.approx(alpha.value, rel=0.01)


def test_thoria_mean_from_its_lengths() -> None:
    """Kempter & Elliott, J. Chem. Phys. 30 (1959) 1524: mean 9.32(20)e-6/K over 26–1000 °C."""
    lengths = next(s for s in load_material("ThO2").of("elongation"))
    stretch = value_at(lengths, 1273.0)
    assert stretch is not None
    assert stretch[0] / (1273.0 - 298.15) == pytest.approx(9.32e-6, abs=0.2e-6)


def test_rutile_average_is_made_from_its_axes() -> None:
    """Hummer, Heaney & Post, Powder Diffr. 22 (2007): 7.00 (a) and 9.37 (c) e-6/K at 298 K."""
    best = best_measured(load_material("rutile"), LINEAR, 298.15)
    assert best is not None
    assert best.averaged
    assert best.value == pytest.approx((2 * 7.00 + 9.37) / 3 * 1e-6)


#: Grüneisen parameters that were reported, from the literature named in the files' own rows:
#: MgO 1.54 Anderson & Isaak 1995; NaCl 1.58, KBr 1.49 White 1965; Cu 2.00 Carr 1964; CsBr 2.0 White 1965;
#: Al 2.17, Ag 2.4, Au 2.97 standard tables. The tolerance is that of α and B together.
REPORTED = {"MgO": 1.54, "NaCl": 1.58, "CsBr": 2.0, "Cu": 2.0, "Al": 2.17, "Ag": 2.4, "Au": 2.97}


@pytest.mark.parametrize("formula", sorted(REPORTED))
def test_gruneisen_parameter_closes(formula: str) -> None:
    """γ = 3 α K_S V / C_P of rows taken from different sources is the reported γ."""
    material = load_material(formula)
    alpha = _value(material.of(LINEAR, kind="instantaneous"), 295.0, 16.0)
    stiffness = _value(material.of(K_S), 299.0, 3.0)
    heat = _value(material.of(C_P), 299.0, 3.0)
    edge = _value(material.of(LATTICE), 298.0, 3.0)
    volume = float(molar_volume(edge**3, FORMULA_UNITS[material.structure]))
    gamma = 3.0 * alpha * stiffness * 1e9 * volume * 1e-6 / heat
    assert gamma == pytest.approx(REPORTED[formula], rel=0.04)


def _value(series: tuple[Series, ...], temperature: float, reach: float) -> float:
    for one in series:
        near = np.abs(one.temperature_K - temperature)
        if one.usable and near.min() <= reach:
            return float(one.value[near.argmin()])
    raise AssertionError("nothing measured near room temperature")


# --- looking up ----------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["MgO", "mgo", "magnesium oxide", "Magnesium-Oxide", "magnesia"])
def test_a_material_is_found_by_any_of_its_names(name: str) -> None:
    assert load_material(name).formula == "MgO"


def test_potassium_is_not_taken_for_another() -> None:
    assert load_material("K").name == "potassium"
    assert load_material("cesium chloride").formula == "CsCl"


@pytest.mark.parametrize(
    ("name", "near"), [("MgO2", "MgO"), ("magnezium oxide", "MgO"), ("", "one of"), ("x" * 10_000, "one of")]
)
def test_an_unknown_material_gets_the_nearest_names(name: str, near: str) -> None:
    with pytest.raises(InputError, match="no measured values") as caught:
        load_material(name)
    assert near in str(caught.value)
    assert len(str(caught.value)) < 600


def test_no_value_outside_the_measured_range() -> None:
    series = load_material("UO2").of(LINEAR)[0]
    assert value_at(series, 200.0) is None
    assert value_at(series, 3000.0) is None
    assert value_at(series, float("nan")) is None
    lonely = load_material("KBr").of(LINEAR)[0]  # 20, 65, 283 K
    assert value_at(lonely, 150.0) is None
    assert value_at(lonely, 283.0) is not None
    assert value_at(lonely, 290.0) is not None
    assert value_at(lonely, 300.0) is None


def test_heat_capacity_between_tabulated_temperatures() -> None:
    """NIST-JANAF, MgO: 44.2 J/(mol K) at 450 K lies between 42.561 (400 K) and 45.544 (500 K)."""
    series = next(s for s in load_material("MgO").of(C_P) if "JANAF" in s.source)
    found = value_at(series, 450.0)
    assert found is not None
    assert 43.9 < found[0] < 44.5
    assert found[1] == pytest.approx(0.01 * found[0], rel=0.01)


def test_what_was_seen_goes_before_memory() -> None:
    best = best_measured(load_material("NaCl"), LINEAR, 300.0)
    assert best is not None
    assert not best.series.from_memory
    recalled = best_measured(load_material("NaCl"), LINEAR, 283.0)
    assert recalled is not None
    assert recalled.series.from_memory
    assert "from memory" in recalled.source


def test_unusable_series_are_never_chosen() -> None:
    best = best_measured(load_material("CaO"), LINEAR, 300.0)
    assert best is not None
    assert best.value != pytest.approx(10.1e-6, abs=1e-9)
    assert best_measured(load_material("Kr"), LINEAR, 5.0) is None
    assert best_measured(load_material("Zn"), K_S, 298.0) is None


@pytest.mark.parametrize(
    ("formula", "source", "temperature", "relative", "estimated"),
    [
        ("NaCl", "White G.K., Proc", 20.0, 0.05, True),  # "1-2% at 65 and 283 K; 3-5% at 20 K (est.)"
        ("NaCl", "White G.K., Proc", 283.0, 0.02, True),
        ("Na", "CRC Handbook (25 C", 298.0, 0.03, False),  # "1-2% (Na, K: 3%)"
        ("Al", "CRC Handbook (25 C", 298.0, 0.02, False),
        ("Cu", "NIST cryogenic", 20.0, 0.10, False),  # "10% <50 K, 5% above"
        ("Cu", "NIST cryogenic", 293.0, 0.05, False),
        ("MgO", "Anderson O.L.", 300.0, 0.03, True),  # "2-3% (est.)"
        ("Cu", "Wang K., Reeber", 1200.0, 0.03, True),  # "1% (est.); 3% above 1100 K"
    ],
)
def test_uncertainties_keep_the_larger_figure(
    formula: str, source: str, temperature: float, relative: float, estimated: bool
) -> None:
    series = next(s for s in load_material(formula).of(LINEAR) if s.source.startswith(source))
    found = value_at(series, temperature)
    assert found is not None
    assert found[1] == pytest.approx(relative * found[0], rel=1e-6)
    assert series.estimated_uncertainty == estimated
