"""``thermex match``: the value of one parameter that meets a measured value."""

from __future__ import annotations

import argparse
import math
import sys
from pathlib import Path
from typing import Any

from thermex.commands.predict import with_anharmonic
from thermex.commands.progress import progress_on
from thermex.commands.sweep import CORRECTION, EXITS
from thermex.errors import InputError

NAMES = {"alpha": "alpha_linear_per_K", "a": "lattice_A", "B_T": "bulk_modulus_T_GPa"}


def add_parser(subparsers: Any, common: argparse.ArgumentParser) -> None:
    """Add this command to the command line."""
    parser = subparsers.add_parser(
        "match",
        parents=[common],
        help="find the value of a parameter at which a prediction equals a measured value",
        description="Find the value of one parameter at which α, a or B_T at a temperature equals a measured value. "
        + EXITS,
        epilog="Example: thermex match case.toml --parameter Na-Cl.n --at 300 --from 7 --to 13",
    )
    parser.add_argument("case", metavar="CASE", type=Path, help="case file (TOML)")
    parser.add_argument("--parameter", required=True, metavar="NAME", help="for example Na-Cl.n")
    parser.add_argument("--quantity", choices=tuple(NAMES), default="alpha", help="what to match (alpha)")
    parser.add_argument("--at", type=float, default=300.0, metavar="T", help="temperature, K (300)")
    parser.add_argument(
        "--target", type=float, metavar="V", help="10⁻⁶/K, Å or GPa; by default the measured α of the case's material"
    )
    parser.add_argument("--uncertainty", type=float, default=0.0, metavar="U", help="of the target, same unit")
    parser.add_argument(
        "--from", dest="low", type=float, metavar="V", help="lower end of the range (0.8 times the present value)"
    )
    parser.add_argument(
        "--to", dest="high", type=float, metavar="V", help="upper end of the range (1.25 times the present value)"
    )
    parser.add_argument("--hold", choices=("parameters", "distance"), default="parameters", help="as in sweep")
    parser.add_argument("--anharmonic", choices=("none", "leading order", "sampled"), help=CORRECTION)
    parser.add_argument("--out", metavar="FOLDER", type=Path, help="write results and the new case here")
    parser.set_defaults(run=run)


def run(arguments: argparse.Namespace) -> int:
    """Match, write the files when asked to, then say what was found."""
    from thermex.case.reader import load_case
    from thermex.exploration.match import match, rounded_to, shown
    from thermex.exploration.measured_data import measured_alpha
    from thermex.report.caution import CAUTION
    from thermex.report.exploration_files import match_files
    from thermex.report.files import check_folder, write_folder

    case = with_anharmonic(load_case(arguments.case), arguments.anharmonic)
    if arguments.out is not None:
        check_folder(arguments.out)
    target, uncertainty = arguments.target, arguments.uncertainty
    scale = 1e-6 if arguments.quantity == "alpha" else 1.0
    source = "given"
    if target is None:
        found = measured_alpha(case, arguments.at) if arguments.quantity == "alpha" else None
        if found is None:
            raise InputError(
                f"names no measured {arguments.quantity} at {arguments.at:g} K, and no target is given",
                where=f"{arguments.case}: measured",
                fix="give --target",
            )
        source = found.source
        target = found.value / scale
        uncertainty = (found.uncertainty if math.isfinite(found.uncertainty) else 0.0) / scale
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
            source=source,
            progress=progress,
        )
    name = NAMES[arguments.quantity]
    spread = f" ± {shown(name, uncertainty * scale)}" if uncertainty else ""
    lines = [case.title, f"Target: {shown(name, target * scale)}{spread} ({source}).", result.words]
    if result.low is not None and result.high is not None and result.high > result.low:
        ends = [rounded_to(value, result.low, result.high) for value in (result.low, result.high)]
        lines.append(f"The uncertainty of the target allows {ends[0]} to {ends[1]}.")
    lines.append(f"The answer matched is {result.kind}.")
    if result.extrapolated:
        lines.append("It lies beyond the range in which the method was tested (T_eff/T_end above 0.5).")
    if arguments.out is not None:
        write_folder(arguments.out, match_files(result, arguments.command_line))
        lines.append(f"Written to {arguments.out}.")
    sys.stdout.write("\n".join([*lines, "", CAUTION]) + "\n")
    return 0
