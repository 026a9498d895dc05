"""The caution that every output carries."""

from __future__ import annotations

#: Printed under the table, in the JSON, the CSV, the figure page and the record.
CAUTION = (
    "Caution: this is the prediction of a model, not a design allowable. Measured data for the material "
    "as supplied, the applicable local codes and licensed practice come before it."
)

#: The same where there is no room, without commas.
SHORT_CAUTION = "model prediction and not a design allowable; measured data and local codes come before it"
