"""Versions of thermex and of the libraries it stands on."""

from __future__ import annotations

import sys
from importlib import import_module, metadata


def own_version() -> str:
    """Return the version of thermex, from the package itself or from its installation."""
    own = getattr(import_module("thermex"), "__version__", None)
    return str(own) if own is not None else library_version("thermex")


def library_version(name: str) -> str:
    """Return the installed version of a library, "not installed" when there is none."""
    module = sys.modules.get(name)
    try:
        return metadata.version(name)
    except metadata.PackageNotFoundError:
        return str(getattr(module, "__version__", "not installed"))
