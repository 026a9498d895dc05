"""Wall time by stage."""

from __future__ import annotations

from time import perf_counter


class Stopwatch:
    """Adds up wall time under the names of stages."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}
        self._last = perf_counter()

    def lap(self, stage: str) -> None:
        """Book the time since the last lap under a stage."""
        now = perf_counter()
        self.seconds[stage] = self.seconds.get(stage, 0.0) + now - self._last
        self._last = now
