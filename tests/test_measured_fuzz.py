"""Garbage given to the reader of measured values: one clear refusal, never anything else, and quickly."""

from __future__ import annotations

import os
import random
import tempfile
import time
from pathlib import Path

import numpy as np
import pytest

from thermex.errors import InputError
from thermex.measured import Series, load_series_file

GOOD = """\
## invented values
# material: invented salt
# quantity: linear expansion coefficient
# kind: mean
# axis: average
# reference temperature: 20 °C
# unit: 1e-6/K
# temperature unit: °C
# source: invented run
# how: from memory
# uncertainty: estimated
T, value, uncertainty
100, 9.8, 0.2
200, 10.1, 2 %
300, 10.4
# quantity: lattice parameter
# unit: nm
# source: another invented run
25; 0,42115; 0,00002
"""

PIECES = (
    "nan", "inf", "-inf", "1e999", "1e-999", "0x10", "1_000", "١٢",
    "--5", "+-", "%", "%%", "5%%", '"', '""', "'",
    '"a,""b"",c"', ",,,,", ";;", "\t\t", "\0", "\ufeff", "\u2028",
    "\x0b", "\r", "#", "##", "# :", "# kind:", "#=",
    "# unit: ", "# quantity: quantity", "9" * 400, "1e" + "9" * 50,
    "(" * 200, "°C", "K" * 50, "Δ" * 30, "𝟙𝟚", "∞",
    "# reference temperature: 1e9", "# temperature unit: °F", "-273.16",
    "{{}}", "%s%n", "../../x", "=1+1", "\\", "…",
)  # fmt: skip


def mutated(random_state: random.Random) -> bytes:
    """Return the good file, spoilt in a few places, or bytes without any sense."""
    if random_state.random() < 0.2:
        return random_state.randbytes(random_state.randrange(0, 3000))
    text = GOOD
    for _ in range(random_state.randrange(1, 9)):
        at = random_state.randrange(len(text) + 1)
        until = min(len(text), at + random_state.randrange(0, 12))
        piece = random_state.choice((*PIECES, text[at:until] * 3, ""))
        text = text[:at] + piece + text[until:]
    data = bytearray(text.encode("utf-8"))
    for _ in range(random_state.choice((0, 0, 1, 5))):
        data[random_state.randrange(len(data))] = random_state.randrange(256)
    return bytes(data)


def sound(series: Series) -> bool:
    """Tell whether a series that was read can be believed in form."""
    arrays = (series.temperature_K, series.value)
    return (
        all(np.isfinite(array).all() for array in arrays)
        and bool((np.diff(series.temperature_K) >= 0).all())
        and 0.0 <= series.temperature_K[0] <= series.temperature_K[-1] <= 1e4
        and not bool((series.uncertainty < 0).any())
        and len({len(array) for array in (*arrays, series.uncertainty)}) == 1
    )


def fuzz_measured(count: int, seed: int) -> tuple[int, int]:
    """Read ``count`` spoilt files; return how many were read and how many refused.

    Raises whatever other than InputError the reader raises, and AssertionError for an unsound
    result, for a message that is not one line, or for a file that takes longer than two seconds.
    """
    random_state = random.Random(seed)
    read = refused = 0
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "spoilt.csv"
        for _ in range(count):
            path.write_bytes(mutated(random_state))
            start = time.monotonic()
            try:
                assert all(sound(series) for series in load_series_file(path))
                read += 1
            except InputError as error:
                assert error.faults
                assert all("spoilt.csv" in line and "\n" not in line for line in error.faults)
                refused += 1
            assert time.monotonic() - start < 2.0
    return read, refused


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_garbage_is_refused_in_words(seed: int, capsys: pytest.CaptureFixture[str]) -> None:
    count = int(os.environ.get("THERMEX_FUZZ", "600")) // 3
    read, refused = fuzz_measured(count, seed)
    with capsys.disabled():
        print(f"\n{count} bad files of measured values: {refused} refused, {read} still sensible", end=" ")
    assert read + refused == count
    assert refused > 0.25 * count
    assert read > 5
