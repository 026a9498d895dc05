"""What a ranking of several potentials shows and writes."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from typing import Any

import numpy as np

from thermex.comparison.ranking import Ranked, Ranking
from thermex.report.assessment_files import assessment_document, json_bytes
from thermex.report.assessment_text import per_cent
from thermex.report.caution import CAUTION
from thermex.report.document import plain
from thermex.report.numbers import ABSENT, fixed
from thermex.report.page import Picture, Section, gallery, number_table, page, paragraphs, word_table
from thermex.report.record import run_record
from thermex.report.table import wrapped


def header(ranking: Ranking) -> list[str]:
    """Return by what the cases are ranked."""
    if not ranking.points:
        return ["No measured value of expansion is covered by every case, so none is ranked."]
    low, high = ranking.temperatures[0], ranking.temperatures[-1]
    said = (
        f"Ranked by the rms deviation from the same {ranking.points} measured values of expansion, "
        f"{low:.0f} to {high:.0f} K; tolerance {ranking.tolerance:.0%}."
    )
    return [said, *([f"Of the score: {ranking.left_out}."] if ranking.left_out else [])]


def ranking_text(ranking: Ranking, *, width: int = 100) -> str:
    """Return several cases as a table, best first."""
    lines = [*wrapped(header(ranking), width), ""]
    lines.append(f"{'rms':>6} {'ends':>6}  {'α compared':<15}  potential, and the largest part of its miss")
    lines.append(f"{'%':>6} {'K':>6}")
    for r in ranking:
        end = fixed(r.end_K, 0) if np.isfinite(r.end_K) else ABSENT
        lines.append(f"{per_cent(r.rms, False):>6} {end:>6}  {r.kind or ABSENT:<15}  {r.title}")
        lines += [" " * 32 + line for line in wrapped([r.reason, *([r.source] if r.source else [])], width - 32)]
    lines += ["", *wrapped([CAUTION], width)]
    return "\n".join(lines) + "\n"


def ranking_document(ranking: Ranking) -> dict[str, Any]:
    """Return a ranking as plain data."""
    return {
        "caution": CAUTION,
        "tolerance": ranking.tolerance,
        "measured_values": ranking.points,
        "temperature_K": list(ranking.temperatures),
        "left_out": ranking.left_out,
        "ranking": [
            {
                "title": r.title,
                "source": r.source,
                "rms_relative_deviation": plain(r.rms),
                "alpha_kind": r.kind,
                "largest_part": r.reason,
                "valid_to_K": plain(r.end_K),
                "assessment": assessment_document(r.assessment) if r.assessment else None,
            }
            for r in ranking
        ],
    }


def ranking_csv(ranking: Ranking) -> str:
    """Return one row a case, best first."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(["place", "title", "rms_relative_deviation", "alpha_kind", "valid_to_K", "largest_part", "source"])
    for k, r in enumerate(ranking, 1):
        rms, end = ("" if not np.isfinite(v) else v for v in (r.rms, r.end_K))
        writer.writerow([k, r.title, rms, r.kind, end, r.reason, r.source])
    return out.getvalue()


def ranking_page(ranking: Ranking, picture: bytes) -> str:
    """Return the page as one self-contained HTML document."""
    rows = [_cells(k, r) for k, r in enumerate(ranking, 1)]
    heads = [("place", ""), ("rms", "%"), ("ends", "K"), ("α compared", ""), ("potential", "")]
    alternative = "Bars of the rms deviation of every potential from the same measurements, best first"
    sections = [
        Section("In a picture", gallery([Picture(picture, alternative, "Dashed: the tolerance.")])),
        Section("In numbers", number_table(heads, rows)),
        Section(
            "The largest part of each miss, and the source",
            word_table(("potential", "largest part", "source"), [(r.title, r.reason, r.source) for r in ranking]),
        ),
        Section(
            "How far to trust each", paragraphs([f"{r.title}. {r.assessment.trust}" for r in ranking if r.assessment])
        ),
    ]
    return page("Potentials ranked", header(ranking), sections)


def _cells(place: int, r: Ranked) -> tuple[str, ...]:
    end = fixed(r.end_K, 0) if np.isfinite(r.end_K) else ABSENT
    return (str(place), per_cent(r.rms, False), end, r.kind or ABSENT, r.title)


def ranking_files(ranking: Ranking, command: Sequence[str]) -> dict[str, bytes]:
    """Return file name → content of everything written for a ranking."""
    from thermex.report.assessment_figures import plot_ranking
    from thermex.report.style import png_bytes, svg_bytes

    axes = plot_ranking(ranking)
    cases = [r.assessment.case for r in ranking if r.assessment]
    records = {case.title: run_record(case, command) for case in cases}
    return {
        "ranking.json": json_bytes(ranking_document(ranking)),
        "ranking.csv": ranking_csv(ranking).encode(),
        "ranking.png": png_bytes(axes),
        "ranking.svg": svg_bytes(axes),
        "report.html": ranking_page(ranking, svg_bytes(axes)).encode("utf-8", "replace"),
        "run.json": json_bytes({"command": list(command), "cases": records}),
    }
