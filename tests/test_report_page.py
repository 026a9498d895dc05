"""The page: self-contained, escaped throughout, complete. HTML as parsed by the standard library."""

from __future__ import annotations

import base64
import re
from html.parser import HTMLParser

import pytest

from tests.synthetic import axial_prediction, invented_prediction, measured_beside, with_anharmonic
from thermex.prediction import Prediction
from thermex.report.page import page, text
from thermex.report.prediction_page import prediction_page
from thermex.report.record import run_record

HOSTILE = "<script>alert(1)</script> & \"quoted\" 'x' <img src=x onerror=alert(1)>"
VOID = {"meta", "img", "br", "link"}


class Reader(HTMLParser):
    """Collects tags, attributes and text, and checks that every element is closed in order."""

    def __init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.words: list[str] = []
        self._open: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag not in VOID:
            self._open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self._open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.words.append(data)

    @property
    def content(self) -> str:
        """All text, white space folded."""
        assert self._open == []
        return " ".join(" ".join(self.words).split())


def parsed(prediction: Prediction) -> tuple[str, Reader]:
    html = prediction_page(
        prediction, measured_beside(prediction), run_record(prediction.case, ("thermex", "predict", HOSTILE))
    )
    reader = Reader()
    reader.feed(html)
    reader.close()
    return html, reader


def test_title_with_markup_shows_as_text() -> None:
    html, reader = parsed(invented_prediction(HOSTILE))
    assert "<script" not in html and "onerror=alert(1)>" not in html
    assert "script" not in {tag for tag, _ in reader.tags}
    assert HOSTILE in reader.content


def test_sources_are_escaped_and_numbered() -> None:
    _, reader = parsed(invented_prediction())
    assert "Invented series <two>" in reader.content and "from memory" in reader.content


@pytest.mark.parametrize("prediction", [with_anharmonic(invented_prediction()), axial_prediction()])
def test_self_contained(prediction: Prediction) -> None:
    html, reader = parsed(prediction)
    assert {tag for tag, _ in reader.tags}.isdisjoint({"script", "link", "iframe", "object", "embed", "base"})
    for _, attributes in reader.tags:
        for name in ("src", "href", "srcset", "action"):
            assert (attributes.get(name) or "data:").startswith("data:")
        assert not any(name.startswith("on") for name in attributes)
    assert "url(" not in html and "@import" not in html


def test_every_figure_has_words_and_is_a_picture() -> None:
    _, reader = parsed(invented_prediction())
    images = [attributes for tag, attributes in reader.tags if tag == "img"]
    assert len(images) == 9
    for attributes in images:
        assert len(attributes["alt"] or "") > 30
        kind, data = (attributes["src"] or "").split(",", 1)
        assert kind == "data:image/svg+xml;base64"
        assert b"</svg>" in base64.b64decode(data)


def test_order_summary_first_caution_last() -> None:
    html, reader = parsed(invented_prediction())
    content = reader.content
    heads = re.findall(r"<h2>(.*?)</h2>", html)
    assert heads[0] == "Expansion" and heads.index("Numerical error") < heads.index("Record of the run")
    assert content.index("measured 10.40 [1], difference") < content.index("What limits this result")
    assert content.rstrip().endswith("come before it.")
    assert "not a design allowable" in content


def test_conventions_name_the_reference_temperature() -> None:
    _, reader = parsed(invented_prediction())
    for words in ("Reference temperature T₀ = 293.15 K", "mean from 293.15 K to T", "ΔL/L₀ from 293.15 K"):
        assert words in reader.content


def test_readable_on_a_phone_and_on_paper() -> None:
    html, reader = parsed(invented_prediction())
    assert ("meta", {"name": "viewport", "content": "width=device-width, initial-scale=1"}) in reader.tags
    assert "@media print" in html


def test_frame_escapes_lead_and_headings() -> None:
    from thermex.report.page import Section

    html = page("a<b", ["c<d"], [Section("e<f", "<p>body</p>"), Section("empty", "")])
    assert "a&lt;b" in html and "c&lt;d" in html and "e&lt;f" in html and "empty" not in html


def test_text_holds_no_control_characters() -> None:
    assert text("a\x00b\x1bc") == "a\ufffdb\ufffdc"
