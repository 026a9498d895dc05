"""The terminal table: what it shows of a prediction, and what it never does. Common practice, no source."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from tests.synthetic import axial_prediction, invented_prediction, measured_beside, with_anharmonic
from thermex.report import numbers
from thermex.report.beside import Beside
from thermex.report.table import best_alpha, chosen_rows, prediction_text


def test_every_column_of_the_issue_is_there() -> None:
    prediction = invented_prediction()
    text = prediction_text(prediction, measured_beside(prediction))
    head = next(line for line in text.splitlines() if "α meas." in line)
    assert head.split() == [
        "T",
        "a",
        "α",
        "±",
        "rule",
        "α",
        "meas.",
        "diff.",
        "γ",
        "γ",
        "meas.",
        "B_T",
        "C_P",
    ]


def test_row_holds_the_numbers_of_the_prediction() -> None:
    prediction = invented_prediction()
    text = prediction_text(prediction, measured_beside(prediction))
    row = next(line for line in text.splitlines() if line.split()[:1] == ["300"]).split()
    k = list(prediction.temperature_K).index(300.0)
    alpha = prediction.alpha_linear_per_K[k]
    assert float(row[1]) == pytest.approx(prediction.lattice_A["a"][k], abs=1e-4)
    assert float(row[2]) == pytest.approx(alpha * 1e6, abs=0.01)
    assert float(row[3]) == pytest.approx(100.0 * prediction.alpha_relative_error[k], rel=0.05)
    assert row[5:7] == ["10.40", "[1]"]
    assert float(row[7]) == pytest.approx(100.0 * (alpha / 10.4e-6 - 1.0), abs=0.06)


def test_sources_limit_notes_and_caution_follow_in_this_order() -> None:
    prediction = invented_prediction()
    text = prediction_text(prediction, measured_beside(prediction))
    order = [
        "[1] Invented series one, from memory",
        "Ends at 1900 K",
        "Invented note",
        "not a design allowable",
    ]
    places = [text.index(words) for words in order]
    assert places == sorted(places)
    assert "applicable local codes and licensed practice" in " ".join(text.split())


def test_nothing_is_printed_past_the_branch_end() -> None:
    text = prediction_text(invented_prediction(), Beside())
    row = next(line for line in text.splitlines() if line.split()[:1] == ["1950"])
    assert set(row.split()[1:]) == {numbers.ABSENT}
    assert not any(line.split()[:1] == ["2000"] for line in text.splitlines())


@pytest.mark.parametrize("width", [80, 90, 100])
def test_no_line_is_longer_than_asked(width: int) -> None:
    for prediction in (with_anharmonic(invented_prediction()), axial_prediction()):
        text = prediction_text(prediction, measured_beside(prediction), width=width)
        assert max(map(len, text.splitlines())) <= width


def test_at_most_sixteen_rows_ends_kept_measured_ones_preferred() -> None:
    prediction = invented_prediction()
    beside = measured_beside(prediction)
    rows = chosen_rows(prediction, beside, 16)
    assert len(rows) <= 16
    assert rows[0] == 0
    assert prediction.temperature_K[rows[-1]] == 1950.0  # the first temperature past the end at 1900 K
    assert rows == sorted(set(rows))
    assert {300.0, 1900.0} <= set(prediction.temperature_K[rows])
    measured = set(np.flatnonzero(np.isfinite(beside.columns["alpha_linear_per_K"].value)))
    assert measured <= set(rows)


def test_axes_are_both_shown() -> None:
    text = prediction_text(axial_prediction(), Beside())
    assert "α_a" in text and "α_c" in text and "α avg." in text


def test_corrected_alpha_is_the_one_compared_and_says_where_it_is_extrapolated() -> None:
    plain = invented_prediction()
    prediction = with_anharmonic(plain)
    text = prediction_text(prediction, measured_beside(prediction))
    assert "leading order" in text and "from 190 K on" in text and "extrapolated (above 950" in text
    assert "α corr. where printed, else α" in text
    best = best_alpha(prediction)
    cold, hot = list(plain.temperature_K).index(100.0), list(plain.temperature_K).index(1000.0)
    assert best[cold] == plain.alpha_linear_per_K[cold]
    assert best[hot] < plain.alpha_linear_per_K[hot]


def test_a_single_temperature_and_nothing_measured() -> None:
    text = prediction_text(invented_prediction(temperatures=(300.0,)), Beside())
    assert "nothing to compare with" in text and "α meas." not in text


def test_title_with_control_characters_stays_on_its_line() -> None:
    prediction = invented_prediction("bad\x1b[31m title")
    assert "\x1b" not in prediction_text(prediction, Beside())


def test_reason_when_the_branch_goes_on() -> None:
    prediction = replace(
        invented_prediction(),
        branch_ends=False,
        valid_to_K=2000.0,
        valid_to_reason="highest temperature asked for",
    )
    assert "Holds up to 2000 K: highest temperature asked for." in prediction_text(prediction, Beside())


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (3.95e-5, "39.50"),
        (1.2e-4, "120.0"),
        (1.5e-3, "1500"),
        (2.5e-7, "0.2500"),
        (-3e-7, "-0.3000"),
        (0.0, "0.00"),
    ],
)
def test_micro(value: float, text: str) -> None:
    assert numbers.micro(value) == text


def test_absent_numbers_have_one_sign() -> None:
    nan = float("nan")
    forms = (numbers.micro, numbers.percent, numbers.error_percent, numbers.temperature)
    assert {form(nan) for form in forms} == {numbers.ABSENT}
    assert numbers.fixed(float("inf"), 2) == numbers.significant(nan, 3) == numbers.ABSENT


def test_negative_zero_is_zero() -> None:
    assert numbers.fixed(-1e-9, 3) == "0.000"
    assert numbers.percent(-1e-9) == "0.0"


def test_repr_is_one_line_with_the_main_number() -> None:
    prediction = invented_prediction()
    said = repr(prediction)
    assert "\n" not in said and "MgO" in said and "valid to 1900 K" in said
    assert f"α(300 K) = {prediction.alpha_linear_per_K[6] * 1e6:.2f}·10⁻⁶/K" in said


def test_notebook_view_is_escaped() -> None:
    html = invented_prediction("<b>x</b>")._repr_html_()
    assert "&lt;b&gt;x&lt;/b&gt;" in html and "<b>x" not in html
    assert "<table" in html and "not a design allowable" in html
