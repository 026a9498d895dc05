"""Thermal expansion of a case: the whole road from the words of a case to a prediction."""

from __future__ import annotations

from collections.abc import Callable
from time import perf_counter

import numpy as np
from numpy.typing import NDArray

from thermex.case.case import Case
from thermex.prediction import Prediction

Array = NDArray[np.float64]

#: Told the stage, the steps done and the steps in all.
Progress = Callable[[str, int, int], None]
