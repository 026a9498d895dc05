"""Progress on a terminal: one line with the time left, only when a job takes longer than two seconds."""

from __future__ import annotations

import contextlib
import time
from collections.abc import Callable, Iterator
from typing import TextIO

#: What the library calls: stage, steps done, steps in all.
Progress = Callable[[str, int, int], None]

PATIENCE_S = 2.0
REFRESH_S = 0.1


class ProgressLine:
    """Draws and redraws one line on a terminal.

    Parameters
    ----------
    stream
        The terminal.
    clock
        Returns seconds; replaced in tests.
    """

    def __init__(self, stream: TextIO, clock: Callable[[], float] = time.monotonic) -> None:
        self._stream = stream
        self._clock = clock
        self._start = clock()
        self._stage = ""
        self._stage_start = self._start
        self._drawn_at = float("-inf")
        self._length = 0

    def __call__(self, stage: str, done: int, total: int) -> None:
        """Take note of a step and redraw the line when it is time."""
        now = self._clock()
        if stage != self._stage:
            self._stage, self._stage_start = stage, now
        if now - self._start < PATIENCE_S or now - self._drawn_at < REFRESH_S:
            return
        self._drawn_at = now
        self._draw(progress_text(stage, done, total, now - self._stage_start))

    def close(self) -> None:
        """Wipe the line."""
        if self._length:
            self._draw("")
            self._stream.write("\r")
            self._stream.flush()
            self._length = 0

    def _draw(self, text: str) -> None:
        self._stream.write("\r" + text.ljust(self._length))
        self._stream.flush()
        self._length = len(text)


def progress_text(stage: str, done: int, total: int, elapsed_s: float) -> str:
    """Return the words of the line: stage, steps, and the time left by the pace so far."""
    text = f"{stage}: {done} of {total}" if total > 0 else stage
    if 0 < done < total:
        text += f", about {duration(elapsed_s * (total - done) / done)} left"
    return text


def duration(seconds: float) -> str:
    """Return a time in words: "12 s", "3 min 20 s", "2 h 5 min"."""
    whole = max(round(seconds), 1)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60} s"
    return f"{whole // 3600} h {whole % 3600 // 60} min"


def silent(stage: str, done: int, total: int) -> None:
    """Take note of a step and say nothing."""


@contextlib.contextmanager
def progress_on(stream: TextIO) -> Iterator[Progress]:
    """Give a progress callback: a line when the stream is a terminal, silent otherwise; wipe it at the end."""
    if not stream.isatty():
        yield silent
        return
    line = ProgressLine(stream)
    try:
        yield line
    finally:
        line.close()
