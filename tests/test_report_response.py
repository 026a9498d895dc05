"""The response of the crystal at rest, as text."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import synthetic

from thermex.case.case import MeasuredSpec
from thermex.report.beside import beside_of
from thermex.report.response import response_lines, response_rows


def test_terminal_and_page_show_charges_dielectric_constants_and_optic_modes() -> None:
    prediction = synthetic.invented_prediction()
    said = " ".join(response_lines(prediction))
    assert "+2.000" in said and "-2.000" in said
    assert "ε∞ 1.000" in said and "ε₀ 3.100" in said
    assert "TO 12.00 ×3 THz" in said and "12.00 ×2, 22.00 THz" in said
    assert [row[0][:4] for row in response_rows(prediction)] == ["Born", "diel", "diel", "opti", "opti"]


def test_nothing_is_said_without_charges_and_many_modes_are_summed_up() -> None:
    prediction = synthetic.invented_prediction()
    assert response_lines(replace(prediction, zone_centre=None)) == []
    assert prediction.zone_centre is not None
    many = replace(prediction.zone_centre, transverse_THz=np.concatenate([np.zeros(3), np.arange(3.0, 30.0)]))
    assert "3.00 to 29.00 (27 modes)" in response_lines(replace(prediction, zone_centre=many))[1]
    uneven = replace(prediction.zone_centre, dielectric_static=np.diag([6.0, 6.0, 7.0]))
    assert "(6.000, 6.000, 7.000)" in response_lines(replace(prediction, zone_centre=uneven))[0]


def test_measured_ones_stand_beside_when_the_material_file_has_them(tmp_path: Path) -> None:
    """The numbers are invented; 400 cm⁻¹ is 400 · 0.0299792458 THz = 11.99 THz (speed of light, SI)."""
    file = tmp_path / "own.csv"
    file.write_text(
        "# quantity: TO frequency\n# unit: 1/cm\n# source: INVENTED\n# remark: INVENTED\nT_K, value\n300, 400\n",
        encoding="utf-8",
    )
    prediction = synthetic.invented_prediction()
    case = replace(prediction.case, measured=MeasuredSpec(None, file))
    beside = beside_of(replace(prediction, case=case))
    said = response_lines(prediction, beside.response)[-1]
    assert "transverse optic frequency 11.99 THz at 300 K [1]" in said
    assert response_rows(prediction, beside.response)[-1][0] == "measured"
