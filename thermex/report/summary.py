"""A prediction in one line, and as a small table for a notebook."""

from __future__ import annotations

import numpy as np

from thermex.prediction import Prediction
from thermex.report.beside import Beside
from thermex.report.caution import CAUTION
from thermex.report.numbers import error_percent, micro, percent, rounded, temperature
from thermex.report.page import number_table, text
from thermex.report.table import chosen_rows, fields
from thermex.report.words import heading, validity

NOTEBOOK_ROWS = 10


def summary_line(prediction: Prediction) -> str:
    """Return what is predicted in one line, for ``repr``."""
    kelvin, crystal = prediction.temperature_K, prediction.crystal
    count = f"{len(kelvin)} temperatures" if len(kelvin) != 1 else "1 temperature"
    said = [f"{count}, {temperature(kelvin[0])} to {temperature(kelvin[-1])} K"]
    good = np.flatnonzero(np.isfinite(prediction.alpha_linear_per_K))
    if good.size:
        k = int(good[np.argmin(np.abs(kelvin[good] - 298.15))])
        error = error_percent(float(prediction.alpha_relative_error[k]))
        alpha = micro(float(prediction.alpha_linear_per_K[k]))
        said.append(f"α({temperature(kelvin[k])} K) = {alpha}·10⁻⁶/K ± {error} % (numerical){_beyond(prediction, k)}")
    said.append(f"valid to {rounded(prediction.valid_to_K)} K")
    return f"<Prediction of {crystal.formula}, {crystal.name or 'from a file'}: {'; '.join(said)}>"


def _beyond(prediction: Prediction, k: int) -> str:
    """Return the corrected α, or what the rule expects, at one temperature."""
    found, rule = prediction.anharmonic, prediction.rule
    if found is not None and np.isfinite(found.alpha_linear_per_K[k]):
        star = "*" if prediction.temperature_K[k] > found.extrapolated_from_K else ""
        return f", corrected for anharmonicity {micro(float(found.alpha_linear_per_K[k]))}{star}"
    if rule is not None and np.isfinite(rule.overestimate[k]):
        return f", by the rule {percent(float(rule.overestimate[k]), 0)} % too high"
    return ""


def summary_html(prediction: Prediction) -> str:
    """Return heading, a few rows of the table, the range of validity and the caution as HTML, escaped."""
    columns = fields(prediction, Beside(), chosen_rows(prediction, Beside(), NOTEBOOK_ROWS))
    heads = [(column.head, column.unit) for column in columns]
    rows = list(zip(*(column.cells for column in columns), strict=True))
    title, *details = heading(prediction)
    return (
        f"<div><strong>{text(title)}</strong><br>{text(' '.join(details))}"
        f"{number_table(heads, rows)}<p>{text(validity(prediction))}</p><p><small>{text(CAUTION)}</small></p></div>"
    )
