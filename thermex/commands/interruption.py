"""An interruption that knows what was kept."""

from __future__ import annotations


class Interrupted(KeyboardInterrupt):
    """Ctrl-C after something worth keeping was saved.

    Parameters
    ----------
    kept
        What was kept and where, for example "7 of 15 points are kept in scan/journal".
    """

    def __init__(self, kept: str) -> None:
        super().__init__(kept)
        self.kept = kept
