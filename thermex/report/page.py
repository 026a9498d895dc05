"""The frame of a report page: one self-contained HTML file, no script, nothing from a network.

Every text goes through :func:`text`; only what the functions of this module return is trusted HTML.
"""

from __future__ import annotations

import base64
import html
from collections.abc import Sequence
from dataclasses import dataclass

from thermex.report.caution import CAUTION

STYLE = """
:root { --ink: #1a1a1a; --soft: #555; --line: #d5d5d5; --band: #f4f6f8; --mark: #0072B2; }
* { box-sizing: border-box; }
body { font: 16px/1.5 system-ui, -apple-system, "Segoe UI", Roboto, sans-serif; color: var(--ink);
  background: #fff; margin: 0 auto; max-width: 60rem; padding: 1rem; overflow-wrap: anywhere; }
h1 { font-size: 1.6rem; line-height: 1.25; margin: .5rem 0; }
h2 { font-size: 1.2rem; margin: 2rem 0 .5rem; padding-bottom: .2rem; border-bottom: 2px solid var(--line); }
p, li { max-width: 46rem; }
.lead { background: var(--band); border-left: 4px solid var(--mark); padding: .6rem 1rem; margin: 1rem 0; }
.lead p { margin: .3rem 0; }
.caution { border: 2px solid #D55E00; padding: .6rem 1rem; margin: 2rem 0 1rem; }
.soft { color: var(--soft); font-size: .9rem; }
.figures { display: grid; grid-template-columns: repeat(auto-fit, minmax(min(100%, 22rem), 1fr)); gap: 1rem; }
figure { margin: 0; max-width: 36rem; break-inside: avoid; }
figure img { width: 100%; height: auto; display: block; }
figcaption { font-size: .85rem; color: var(--soft); }
.wide { overflow-x: auto; }
table { border-collapse: collapse; font-size: .85rem; font-variant-numeric: tabular-nums; margin: .5rem 0; }
th, td { padding: .25rem .6rem; text-align: right; border-bottom: 1px solid var(--line); white-space: nowrap; }
th { border-bottom: 2px solid var(--ink); vertical-align: bottom; font-weight: 600; white-space: normal;
  overflow-wrap: normal; max-width: 9em; }
th small { display: block; font-weight: 400; color: var(--soft); }
table.words td, table.words th { text-align: left; white-space: normal; vertical-align: top;
  overflow-wrap: break-word; }
pre { background: var(--band); padding: .8rem; font-size: .8rem; white-space: pre-wrap; }
@media print { body { max-width: none; font-size: 10pt; padding: 0; } h2 { break-after: avoid; }
  tr, .lead, .caution { break-inside: avoid; } .wide { overflow: visible; } table { font-size: 8pt; }
  th, td { padding: .15rem .35rem; } .figures { grid-template-columns: 1fr 1fr; } }
"""


@dataclass(frozen=True, slots=True)
class Section:
    """One part of a page."""

    title: str
    """Plain text."""
    body: str
    """HTML made by this module."""


@dataclass(frozen=True, slots=True)
class Picture:
    """One figure: SVG, what it shows in words, and what is written below it."""

    svg: bytes
    alternative: str
    caption: str


def page(title: str, lead: Sequence[str], sections: Sequence[Section]) -> str:
    """Return the whole page.

    Parameters
    ----------
    title
        Plain text.
    lead
        The sentences that come first, plain text.
    sections
        In the order of the page; those without a body are left out. The caution closes it.
    """
    parts = [f"<h1>{text(title)}</h1>", '<div class="lead">', paragraphs(lead), "</div>"]
    for section in sections:
        if section.body:
            parts.append(f"<section><h2>{text(section.title)}</h2>\n{section.body}</section>")
    parts.append(f'<p class="caution">{text(CAUTION)}</p>')
    return _SHELL.format(title=text(title), style=STYLE, body="\n".join(parts))


_SHELL = """<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'; img-src data:; style-src 'unsafe-inline'">
<title>{title}</title>
<style>{style}</style>
</head>
<body>
<main>
{body}
</main>
</body>
</html>
"""


def text(value: object) -> str:
    """Return a value as text that HTML shows as it is."""
    cleaned = "".join(c if c in "\n\t" or ord(c) >= 32 else "\ufffd" for c in str(value))
    return html.escape(cleaned, quote=True)


def paragraphs(sentences: Sequence[str]) -> str:
    """Return one paragraph a sentence."""
    return "\n".join(f"<p>{text(sentence)}</p>" for sentence in sentences)


def listing(items: Sequence[str], *, numbered: bool = False) -> str:
    """Return a list; a numbered one starts at 1."""
    kind = "ol" if numbered else "ul"
    return f"<{kind}>" + "".join(f"<li>{text(item)}</li>" for item in items) + f"</{kind}>" if items else ""


def preformatted(content: str) -> str:
    """Return text with its line breaks kept."""
    return f"<pre>{text(content)}</pre>"


def number_table(heads: Sequence[tuple[str, str]], rows: Sequence[Sequence[str]]) -> str:
    """Return a table of numbers; each head is a name and a unit (may be empty)."""
    return _table(heads, rows, "numbers")


def word_table(heads: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """Return a table of words, left-aligned."""
    return _table([(head, "") for head in heads], rows, "words")


def _table(heads: Sequence[tuple[str, str]], rows: Sequence[Sequence[str]], kind: str) -> str:
    cells = "".join(
        f'<th scope="col">{text(name)}{f"<small>{text(unit)}</small>" if unit else ""}</th>' for name, unit in heads
    )
    body = "\n".join("<tr>" + "".join(f"<td>{text(cell)}</td>" for cell in row) + "</tr>" for row in rows)
    return (
        f'<div class="wide"><table class="{kind}"><thead><tr>{cells}</tr></thead>'
        f"<tbody>\n{body}\n</tbody></table></div>"
    )


def gallery(pictures: Sequence[Picture]) -> str:
    """Return figures side by side where there is room, each with its words."""
    if not pictures:
        return ""
    return '<div class="figures">' + "\n".join(_figure(picture) for picture in pictures) + "</div>"


def _figure(picture: Picture) -> str:
    data = base64.b64encode(picture.svg).decode("ascii")
    return (
        f'<figure><img src="data:image/svg+xml;base64,{data}" alt="{text(picture.alternative)}">'
        f"<figcaption>{text(picture.caption)}</figcaption></figure>"
    )
