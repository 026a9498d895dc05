"""``thermex materials``: everything shipped is listed, each with its source."""

from __future__ import annotations

import pytest

from thermex import materials, published, published_names
from thermex.cli import main


def shown(words: list[str], capsys: pytest.CaptureFixture[str]) -> str:
    assert main(["materials", *words]) == 0
    return " ".join(capsys.readouterr().out.split())


def test_every_material_and_every_potential_is_listed(capsys: pytest.CaptureFixture[str]) -> None:
    text = shown([], capsys)
    for material in materials():
        assert f"{material.formula} {material.name}, {material.structure}" in text
    for name in published_names():
        assert name in text
    assert f"{len(materials())} materials, {len(published_names())} potentials" in text


def test_one_material_with_all_its_sources(capsys: pytest.CaptureFixture[str]) -> None:
    text = shown(["magnesia"], capsys)
    assert "from memory" in text
    for name in ("LC85 MgO", "GRIMES MgO"):
        assert published(name).potential.citation.rstrip(".") in text


def test_a_compound_with_potentials_alone(capsys: pytest.CaptureFixture[str]) -> None:
    text = shown(["SiO2"], capsys)
    assert "nothing measured is shipped" in text and "BKS90 SiO2" in text


def test_a_name_that_is_not_there(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["materials", "MgOO"]) == 2
    told = capsys.readouterr().err
    assert told.count("\n") == 1 and "did you mean MgO" in told
