"""The page of an assessment: verdict first, then deviations, budget, sensitivities, trust, caution."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from thermex.comparison.assessment import Assessment
from thermex.comparison.deviation import Deviation
from thermex.report.assessment_text import kind_line, per_cent, source_lines, undecided_lines, verdict_line
from thermex.report.numbers import ABSENT, fixed
from thermex.report.page import Picture, Section, gallery, listing, number_table, page, paragraphs
from thermex.report.style import svg_bytes

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_WORDS = {
    "expansion": (
        "Predicted linear expansion coefficient against temperature with the measured points",
        "Instantaneous linear coefficient; numbers in brackets are sources.",
    ),
    "deviation": ("Relative deviation of the prediction from every measured series", "Band: the tolerance."),
    "budget": (
        "Bars of the Grüneisen parameter, heat capacity, bulk modulus and volume, by temperature",
        "Each bar is what that factor adds to ln(α predicted/α measured); the diamond is their sum.",
    ),
    "sensitivity": (
        "Bars of the logarithmic derivative of α with respect to every parameter",
        "Change of ln α for a unit change of ln p, from perturbing the whole prediction.",
    ),
}


def assessment_page(a: Assessment, figures: Mapping[str, Axes]) -> str:
    """Return the page as one self-contained HTML document."""
    lead = [verdict_line(a), kind_line(a)]
    if a.budget is not None:
        lead.append(a.budget.words)
    heads = [("mean", "%"), ("rms", "%"), ("worst", "%"), ("at", "K"), ("points", ""), ("verdict", ""), ("series", "")]
    rows = [_cells(d) for d in a.deviations]
    pictures = [Picture(svg_bytes(axes), *_WORDS[name]) for name, axes in figures.items()]
    sections = [
        Section("In pictures", gallery(pictures)),
        Section("Series by series", number_table(heads, rows) + listing(undecided_lines(a))),
        Section("How far to trust it", paragraphs([a.trust, *([a.static_fit] if a.static_fit else [])])),
        Section("Measured values", listing(list(source_lines(a)))),
    ]
    return page(a.case.title, lead, sections)


def _cells(d: Deviation) -> tuple[str, ...]:
    return (
        per_cent(d.mean_relative_deviation),
        per_cent(d.rms_relative_deviation, False),
        per_cent(d.worst_relative),
        fixed(d.worst_K, 0) if len(d.temperature_K) else ABSENT,
        str(len(d.temperature_K)),
        d.verdict,
        f"{d.quantity} [{d.series.source_number}]",
    )
