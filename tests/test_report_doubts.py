"""What measured values say against a prediction as a whole."""

from __future__ import annotations

from dataclasses import replace

import synthetic

from thermex.measured import load_material
from thermex.report.doubts import doubts


def test_a_cell_far_from_the_measured_one_and_another_substance_are_told() -> None:
    prediction = synthetic.invented_prediction()  # a = 4.2 Å, as MgO (4.212 Å at 25 °C, CRC Handbook, in its file)
    crystal = replace(prediction.crystal, formula="MgO")
    good = replace(prediction, crystal=crystal)
    assert doubts(good, load_material("MgO")) == ()
    wide = replace(good, lattice_A={"a": 1.1 * good.lattice_A["a"]})
    assert (
        "+9." in doubts(wide, load_material("MgO"))[0]
        and "check the parameters" in doubts(wide, load_material("MgO"))[0]
    )
    other = doubts(good, load_material("NaCl"))
    assert "the crystal is MgO" in other[0] and "those of NaCl" in other[0]
