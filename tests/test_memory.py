"""Jobs that do not fit into memory are refused before they start, with the estimate."""

from __future__ import annotations

import pytest

from thermex import memory
from thermex.case.published import case_from_published
from thermex.crystal.build import build_crystal
from thermex.errors import ResourceError
from thermex.expansion import predict
from thermex.potential.build import pair_model

GARNET = "PEDONE06 Mg3Al2Si3O12"


def test_the_estimate_grows_with_the_cell_and_covers_what_was_measured() -> None:
    # peaks measured here with tests/benchmarks/reach.py: 125 MB for 2 atoms, 1.0 GB for 80
    found = []
    for name in ("LC85 MgO", GARNET):
        case = case_from_published(name, (300.0,))
        crystal = build_crystal(case.crystal)
        found.append(memory.expected_bytes(pair_model(case.potential, crystal), crystal, 5e-3))
    assert 1.0e8 < found[0] < 2.5e8
    assert 5.0e8 < found[1] < 4.0e9
    assert memory.available_bytes() > 0.0


def test_an_oversized_job_is_refused_with_the_estimate(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(memory, "available_bytes", lambda: 3.0e8)
    with pytest.raises(ResourceError, match=r"80 atoms needs about \d\.\d GB of memory, and 0.3 GB are free"):
        predict(case_from_published(GARNET, (300.0,)))
