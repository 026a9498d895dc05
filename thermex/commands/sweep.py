"""``thermex sweep``: what a parameter of the potential does to expansion."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Iterator
from concurrent.futures import Executor
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from thermex.commands.predict import with_anharmonic
from thermex.commands.progress import progress_on
from thermex.errors import InputError

CORRECTION = "correction of α in place of the case's (by default leading order where it is tested)"
EXITS = "Exit status: 0 done, 2 wrong input, 3 no answer, 130 interrupted."


def add_parser(subparsers: Any, common: argparse.ArgumentParser) -> None:
    """Add this command to the command line."""
    parser = subparsers.add_parser(
        "sweep",
        parents=[common],
        help="predict at many values of a parameter of the potential",
        description="Predict a case at many values of one parameter of its potential, or of two. " + EXITS,
        epilog="Example: thermex sweep case.toml --parameter Na-Cl.n --values 7,8,9.1,10,12 --out exponents",
    )
    parser.add_argument("case", metavar="CASE", type=Path, help="case file (TOML)")
    parser.add_argument("--parameter", required=True, metavar="NAME", help="for example Na-Cl.n")
    parser.add_argument("--values", metavar="V,V,…", help="values, separated by commas")
    parser.add_argument("--from", dest="start", type=float, metavar="V", help="first value")
    parser.add_argument("--to", type=float, metavar="V", help="last value")
    parser.add_argument("--step", type=float, metavar="V", help="step between values")
    parser.add_argument("--second", metavar="NAME=V,V,…", help="a second parameter with its values: a map")
    parser.add_argument(
        "--hold",
        choices=("parameters", "distance"),
        default="parameters",
        help="keep the other parameters, or the static nearest-neighbour distance (amplitude solved again); parameters",
    )
    parser.add_argument("--at", type=float, default=300.0, metavar="T", help="temperature of the table, K (300)")
    parser.add_argument("--anharmonic", choices=("none", "leading order", "sampled"), help=CORRECTION)
    parser.add_argument("--workers", type=int, metavar="N", help="local worker processes")
    parser.add_argument("--scheduler", metavar="ADDRESS", help="a running Dask scheduler")
    parser.add_argument("--out", metavar="FOLDER", type=Path, help="write results here; the same command resumes")
    parser.set_defaults(run=run)


def run(arguments: argparse.Namespace) -> int:
    """Sweep, write the files when asked to, then show the table."""
    from thermex.case.reader import load_case
    from thermex.exploration.measured_data import measured_alpha
    from thermex.exploration.sweep import sweep
    from thermex.report.exploration_files import sweep_files, sweep_text
    from thermex.report.files import write_folder

    case = with_anharmonic(load_case(arguments.case), arguments.anharmonic)
    values = chosen_values(arguments)
    second = second_parameter(arguments.second)
    with chosen_executor(arguments.workers, arguments.scheduler) as executor, progress_on(sys.stderr) as progress:
        result = sweep(
            case,
            arguments.parameter,
            values,
            hold=arguments.hold,
            second=second,
            executor=executor,
            folder=arguments.out,
            progress=progress,
        )
    measured = measured_alpha(case, arguments.at)
    text = sweep_text(result, arguments.at, measured)
    if arguments.out is not None:
        write_folder(arguments.out, sweep_files(result, arguments.at, measured, arguments.command_line))
        text += f"\nWritten to {arguments.out}: data, figures, record, journal.\n"
    sys.stdout.write(text)
    return 0


def chosen_values(arguments: argparse.Namespace) -> list[float]:
    """Return the values of --values, or those from --from, --to and --step."""
    from thermex.exploration.sweep import spread

    if arguments.values:
        return numbers(arguments.values, "--values")
    if None in (arguments.start, arguments.to, arguments.step):
        raise InputError("no values are given", where="sweep", fix="give --values, or --from, --to and --step")
    return spread(arguments.start, arguments.to, arguments.step)


def numbers(text: str, where: str) -> list[float]:
    """Read numbers separated by commas."""
    import math

    try:
        found = [float(part) for part in text.replace(";", ",").split(",") if part.strip()]
    except ValueError:
        raise InputError(f'"{text}" is not a list of numbers', where=where, fix="such as 7,8,9.1") from None
    if not found or not all(map(math.isfinite, found)):
        raise InputError(f'"{text}" is not a list of finite numbers', where=where, fix="such as 7,8,9.1")
    return found


def second_parameter(text: str | None) -> tuple[str, list[float]] | None:
    """Read a parameter and its values from the words of the command line."""
    if text is None:
        return None
    name, sign, values = text.partition("=")
    if not sign:
        raise InputError(f'"{text}" names no values', where="--second", fix="such as Na-Cl.rho=0.30,0.32")
    return name, numbers(values, "--second")


@contextmanager
def chosen_executor(workers: int | None, scheduler: str | None) -> Iterator[Executor | None]:
    """Give the executor that the options ask for, None for this process."""
    from thermex.exploration.executor import cluster, local_workers

    if scheduler:
        with cluster(scheduler) as executor:
            yield executor
    elif workers and workers > 1:
        with local_workers(workers) as executor:
            yield executor
    else:
        yield None
