"""The page of an assessment: verdict first, then deviations, budget, sensitivities, trust, caution."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from thermex.comparison.assessment import Assessment
from thermex.report.caution import CAUTION
from thermex.report.numbers import percent
from thermex.report.page import Picture, Section, gallery, page, paragraphs, word_table
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
    lead = [f"Verdict: {a.verdict} measured expansion within {a.tolerance:.0%} (rms)."]
    if a.budget is not None:
        lead.append(a.budget.words)
    rows = [
        (
            d.quantity,
            percent(d.mean_relative_deviation),
            percent(d.rms_relative_deviation),
            d.verdict,
            d.why,
            d.source,
        )
        for d in a.deviations
    ]
    pictures = [Picture(svg_bytes(axes), *_WORDS[name]) for name, axes in figures.items()]
    sections = [
        Section("In pictures", gallery(pictures)),
        Section("Series by series", word_table(("series", "mean", "rms", "verdict", "why", "source"), rows)),
        Section("How far to trust it", paragraphs([a.trust, *([a.static_fit] if a.static_fit else [])])),
        Section("Caution", paragraphs([CAUTION])),
    ]
    return page(a.case.title, lead, sections)
