"""Errors and warnings of thermex: one tree, one line each.

::

    ThermexError                 base; ``exit_status`` is what the command line returns
    ├── InputError            2  what the user wrote is wrong: file, key, value, what would be right
    ├── NoAnswerError         3  the physics has no answer
    │   ├── NoMinimumError         no static minimum (collapse, or no binding)
    │   ├── UnstableCrystalError   imaginary phonons or a negative elastic modulus at the static lattice
    │   ├── PolarisationError      the shells run away
    │   └── BranchEndError         every temperature asked for lies past the end of the branch
    └── ResourceError         2  the job would not fit into memory

Every error is built from *what*, *where* and *what would be right*, so that none can be raised
without saying what to do.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


class ThermexError(Exception):
    """Base of every error that thermex raises on purpose.

    Parameters
    ----------
    what
        What is wrong, with the value that was met.
    where
        The place: a file and key, or the physical point (volume, q, temperature).
    fix
        What would be right, or what to try.
    """

    exit_status: int = 2

    def __init__(self, what: str, *, where: str = "", fix: str = "") -> None:
        self.what = what
        self.where = where
        self.fix = fix
        super().__init__(one_line(what, where, fix))

    def __reduce__(self) -> tuple[object, ...]:
        """Keep all three parts when the error crosses a process boundary."""
        return (_rebuild, (type(self), self.what, self.where, self.fix))


def _rebuild(kind: type[ThermexError], what: str, where: str, fix: str) -> ThermexError:
    return kind(what, where=where, fix=fix)


def one_line(what: str, where: str, fix: str) -> str:
    """Join the three parts of a message into one line."""
    text = f"{where}: {what}" if where else what
    if fix:
        text = f"{text}; {fix}"
    return " ".join(text.split())


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing wrong in a file: dotted key, what is wrong, what would be right."""

    key: str
    what: str
    fix: str = ""

    def line(self, file: str) -> str:
        """Return the fault as one line that begins with the file and the key."""
        return one_line(self.what, f"{file}: {self.key}" if self.key else file, self.fix)


class InputError(ThermexError):
    """What the user wrote is wrong. ``faults`` lists every fault of the file, one line each."""

    exit_status = 2

    def __init__(self, what: str, *, where: str = "", fix: str = "", faults: Sequence[str] = ()) -> None:
        super().__init__(what, where=where, fix=fix)
        self.faults: tuple[str, ...] = tuple(faults) or (str(self),)

    @classmethod
    def of(cls, file: str, faults: Sequence[Fault]) -> InputError:
        """Build one error that carries all faults of a file."""
        lines = [fault.line(file) for fault in faults]
        error = cls(faults[0].what, where=f"{file}: {faults[0].key}", fix=faults[0].fix, faults=lines)
        return error

    def __reduce__(self) -> tuple[object, ...]:
        """Keep the list of faults when the error crosses a process boundary."""
        return (_rebuild_input, (self.what, self.where, self.fix, self.faults))


def _rebuild_input(what: str, where: str, fix: str, faults: tuple[str, ...]) -> InputError:
    return InputError(what, where=where, fix=fix, faults=faults)


class ResourceError(ThermexError):
    """The job would not fit into the memory of the machine."""

    exit_status = 2


class NoAnswerError(ThermexError):
    """The physics has no answer for this input."""

    exit_status = 3


class NoMinimumError(NoAnswerError):
    """The static lattice has no energy minimum to expand from."""


class UnstableCrystalError(NoAnswerError):
    """The static lattice is a saddle: imaginary phonons or a negative elastic modulus."""


class PolarisationError(NoAnswerError):
    """A shell is not bound to its core: the spring is too soft for this crystal."""


class BranchEndError(NoAnswerError):
    """Every temperature asked for lies past the end of the quasi-harmonic branch."""


class ThermexWarning(UserWarning):
    """Base of the warnings of thermex."""
