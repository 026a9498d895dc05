"""One measured series: values over temperature, with their uncertainty, their source and their standing."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: The words shown beside a value that nobody looked up.
FROM_MEMORY = "from memory"


@dataclass(frozen=True, slots=True, eq=False)
class Series:
    """A measured series in house units; temperatures in K, in increasing order, all of shape (n,)."""

    quantity: str
    """Name as in ``thermex.measured.quantities``, for example "linear expansion coefficient"."""
    kind: str
    """"instantaneous" or "mean" for a coefficient, "" for every other quantity."""
    axis: str
    """"a", "b", "c"; "" for a cubic crystal and for the polycrystal average."""
    unit: str
    """House unit: 1/K, 1, Å, cm³/mol, GPa, J/(mol K), K."""
    reference_temperature_K: float | None
    """T₀ of an elongation or a mean coefficient, else None."""
    temperature_K: Array
    value: Array
    uncertainty: Array
    """Absolute, in ``unit``; NaN where none is known."""
    source: str
    """Full source, as text."""
    source_number: int
    """Number of the source within its material or file, from 1."""
    how: str
    """"seen", "from memory", or "from memory, confirmed" (a public source agrees, see the remark)."""
    read_in: str
    """Where the number was read, when that is not the source itself."""
    confidence: str
    """"high", "medium", "low", or "" when not graded."""
    estimated_uncertainty: bool
    """True when the uncertainty is the compiler's estimate and not the author's."""
    usable: bool
    """False keeps the series out of every verdict; the remark says why."""
    remark: str

    def __post_init__(self) -> None:
        """Make the arrays read-only."""
        for array in (self.temperature_K, self.value, self.uncertainty):
            array.setflags(write=False)

    @property
    def from_memory(self) -> bool:
        """True when the values were typed from memory, confirmed or not."""
        return self.how.startswith(FROM_MEMORY)

    @property
    def citation(self) -> str:
        """The source for the screen; says "from memory" where that is so."""
        return f"{self.source} ({self.how})" if self.from_memory else self.source

    @property
    def label(self) -> str:
        """Quantity, kind, axis and reference temperature in words."""
        words = [self.quantity]
        if self.kind:
            words.append(self.kind)
        if self.axis:
            words.append(f"axis {self.axis}")
        if self.reference_temperature_K is not None:
            words.append(f"from {self.reference_temperature_K:g} K")
        return ", ".join(words)

    def __repr__(self) -> str:
        """Say in one line what the series is."""
        span = f"{self.temperature_K[0]:g}–{self.temperature_K[-1]:g} K"
        state = "" if self.usable else ", kept out of verdicts"
        return f"<{self.label}: {len(self.value)} values, {span}, source {self.source_number}{state}>"
