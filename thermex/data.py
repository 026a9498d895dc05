"""Where the shared reference data lies: beside the package in a checkout, inside it when installed."""

from __future__ import annotations

from pathlib import Path

from thermex.errors import ThermexError


def root() -> Path:
    """Return the folder that holds ``measured/`` and ``potentials/``.

    Raises
    ------
    ThermexError
        When neither place holds the data (a broken installation).
    """
    here = Path(__file__).resolve().parent
    for folder in (here / "shared", here.parent / "shared"):
        if folder.is_dir():
            return folder
    raise ThermexError("the reference data of thermex is missing", where=str(here), fix="install it again")
