"""``thermex match``: the value of one parameter that meets a measured value."""

from __future__ import annotations

import argparse
import math
import sys
from pathlib import Path
from typing import Any

from thermex.commands.predict import with_anharmonic
from thermex.commands.progress import progress_on
from thermex.commands.sweep import measured_alpha
from thermex.errors import InputError

NAMES = {"alpha": "alpha_linear_per_K", "a": "lattice_A", "B_T": "bulk_modulus_T_GPa"}


def add_parser(subparsers: Any, common: argparse.ArgumentParser) -> None:
    """Add this command to the command line."""
    parser = subparsers.add_parser(
        "match",
        parents=[common],
        help="find the value of a parameter at which a prediction equals a measured value",
        description="Find the value of one parameter at which α, a or B_T at a temperature equals a measured value.",
    )
    parser.add_argument("case", metavar="CASE", type=Path, help="case file (TOML)")
    parser.add_argument("--parameter", required=True, metavar="NAME", help="for example Na-Cl.n")
    parser.add_argument("--quantity", choices=tuple(NAMES), default="alpha", help="what to match (alpha)")
    parser.add_argument("--at", type=float, default=300.0, metavar="T", help="temperature, K (300)")
    parser.add_argument(
        "--target", type=float, metavar="V", help="10⁻⁶/K, Å or GPa; by default the measured α of the case's material"
    )
    parser.add_argument("--uncertainty", type=float, default=0.0, metavar="U", help="of the target, same unit")
    parser.add_argument("--from", dest="low", type=float, metavar="V", help="lower end of the range")
    parser.add_argument("--to", dest="high", type=float, metavar="V", help="upper end of the range")
    parser.add_argument("--hold", choices=("parameters", "distance"), default="parameters", help="as in sweep")
    parser.add_argument("--anharmonic", choices=("none", "leading order"), help="correction, in place of the case's")
    parser.add_argument("--out", metavar="FOLDER", type=Path, help="write results and the new case here")
    parser.set_defaults(run=run)


def run(arguments: argparse.Namespace) -> int:
    """Match, write the files when asked to, then say what was found."""
    from thermex.case.reader import load_case
    from thermex.exploration.match import match
    from thermex.report.caution import CAUTION
    from thermex.report.exploration_files import match_files
    from thermex.report.files import check_folder, write_folder

    case = with_anharmonic(load_case(arguments.case), arguments.anharmonic)
    if arguments.out is not None:
        check_folder(arguments.out)
    target, uncertainty = arguments.target, arguments.uncertainty
    scale = 1e-6 if arguments.quantity == "alpha" else 1.0
    if target is None:
        found = measured_alpha(case, arguments.at) if arguments.quantity == "alpha" else None
        if found is None:
            raise InputError("no target is given, and none is measured here", where="match", fix="give --target")
        target, uncertainty = found[0] / scale, (found[1] if math.isfinite(found[1]) else 0.0) / scale
    with progress_on(sys.stderr) as progress:
        result = match(
            case,
            arguments.parameter,
            quantity=NAMES[arguments.quantity],
            temperature_K=arguments.at,
            target=target * scale,
            uncertainty=uncertainty * scale,
            low=arguments.low,
            high=arguments.high,
            hold=arguments.hold,
            progress=progress,
        )
    lines = [case.title, result.words]
    if result.low is not None and result.high is not None and result.high > result.low:
        lines.append(f"The uncertainty of the target allows {result.low:.5g} to {result.high:.5g}.")
    if arguments.out is not None:
        write_folder(arguments.out, match_files(result, arguments.command_line))
        lines.append(f"Written to {arguments.out}.")
    sys.stdout.write("\n".join([*lines, "", CAUTION]) + "\n")
    return 0
