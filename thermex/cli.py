"""The command line: words in, one command run, an exit status out.

Exit status: 0 done; 1 an assessment failed its tolerance (only when asked to say so); 2 the input
is wrong; 3 the physics has no answer; 130 interrupted. Expected failures are one line each on
standard error; ``--traceback`` shows the rest.
"""

from __future__ import annotations

import argparse
import contextlib
import os
import sys
import traceback
import warnings
from collections.abc import Callable, Iterator
from importlib import import_module

from thermex.commands.interruption import Interrupted
from thermex.errors import InputError, ThermexError

#: The commands, each a module of ``thermex.commands`` with ``add_parser`` and ``run``.
COMMANDS = ("predict", "assess", "sweep", "match", "calibrate", "materials")

INTERNAL_FAULT = 70
INTERRUPTED = 130

Run = Callable[[argparse.Namespace], int]


def main(argv: list[str] | None = None) -> int:
    """Run one command and return its exit status.

    Parameters
    ----------
    argv
        The words after the program's name; those of the process when not given.
    """
    words = sys.argv[1:] if argv is None else list(argv)
    _tolerate_plain_terminals()
    try:
        arguments = build_parser().parse_args(words)
    except SystemExit as ending:
        return ending.code if isinstance(ending.code, int) else 2
    arguments.command_line = ("thermex", *words)
    try:
        with notes_on_stderr():
            return guarded(arguments.run, arguments)
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0


def build_parser() -> argparse.ArgumentParser:
    """Return the parser with every command in it."""
    common = argparse.ArgumentParser(add_help=False)
    common.add_argument("--traceback", action="store_true", help="after a failure, show where in the program it arose")
    parser = argparse.ArgumentParser(
        prog="thermex",
        description="Thermal expansion of a crystal from its pair potential, beside measured values.",
        epilog="'thermex COMMAND --help' explains a command.",
    )
    parser.add_argument("--version", action=_Version, nargs=0, help="show the version and stop")
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", required=True)
    for name in COMMANDS:
        module = import_module(f"thermex.commands.{name}")
        module.add_parser(commands, common)
    return parser


class _Version(argparse.Action):
    """Show the version; looked up only when asked for."""

    def __call__(self, parser: argparse.ArgumentParser, *_: object, **__: object) -> None:
        from thermex.report.version import own_version

        print(f"thermex {own_version()}")
        parser.exit(0)


def guarded(run: Run, arguments: argparse.Namespace) -> int:
    """Run a command; turn every failure into lines on standard error and an exit status."""
    try:
        return run(arguments)
    except ThermexError as error:
        return _told(error, arguments.traceback)
    except KeyboardInterrupt as stop:
        kept = stop.kept if isinstance(stop, Interrupted) else "nothing was written"
        _say(f"interrupted; {kept}")
        return INTERRUPTED
    except BrokenPipeError:
        raise
    except MemoryError:
        _say("the job does not fit into the memory of this machine; try a smaller cell or a lower accuracy")
        return 2
    except Exception as error:
        _show_traceback(arguments.traceback)
        kind = type(error).__name__
        _say(f"a fault in thermex itself ({kind}: {error}); run again with --traceback and report what it shows")
        return INTERNAL_FAULT


def _told(error: ThermexError, with_traceback: bool) -> int:
    _show_traceback(with_traceback)
    lines = error.faults if isinstance(error, InputError) else (str(error),)
    for line in lines:
        _say(line)
    return error.exit_status


def _show_traceback(wanted: bool) -> None:
    if wanted:
        traceback.print_exc()


def _say(text: str) -> None:
    print("thermex: " + " ".join(text.split()), file=sys.stderr)


@contextlib.contextmanager
def notes_on_stderr() -> Iterator[None]:
    """Show each warning as one line on standard error, once."""
    seen: set[str] = set()

    def show(message: Warning | str, *_: object, **__: object) -> None:
        if str(message) not in seen:
            seen.add(str(message))
            _say(f"note: {message}")

    with warnings.catch_warnings():
        warnings.showwarning = show
        yield


def _tolerate_plain_terminals() -> None:
    """Let a terminal that knows no Greek show a question mark instead of failing."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")


def script() -> None:
    """Entry point of the installed ``thermex`` command."""
    sys.exit(main())
