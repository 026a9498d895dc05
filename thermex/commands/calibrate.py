"""``thermex calibrate``: fit parameters of the potential to measured values."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from thermex.commands.predict import with_anharmonic
from thermex.commands.progress import progress_on
from thermex.commands.sweep import CORRECTION, EXITS
from thermex.errors import InputError

if TYPE_CHECKING:
    from thermex.case.case import Case
    from thermex.exploration.calibrate import Datum

NAMES = {
    "alpha": ("alpha_linear_per_K", "alpha_mean_per_K", "elongation"),
    "a": ("lattice_A",),
    "B_T": ("bulk_modulus_T_GPa",),
    "C_P": ("heat_capacity_P_J_per_mol_K",),
}


def add_parser(subparsers: Any, common: argparse.ArgumentParser) -> None:
    """Add this command to the command line."""
    parser = subparsers.add_parser(
        "calibrate",
        parents=[common],
        help="fit parameters of the potential to measured values",
        description="Least squares over parameters of the potential against measured values of the case's material "
        "(or of its own file), zero-point and thermal expansion inside the fit. What was measured and is not fitted is "
        "shown before and after. " + EXITS,
        epilog="Example: thermex calibrate case.toml --parameters Mg-O.A,Mg-O.rho --data alpha,a,B_T --out fitted",
    )
    parser.add_argument("case", metavar="CASE", type=Path, help="case file (TOML) that names measured values")
    parser.add_argument("--parameters", required=True, metavar="NAME,NAME", help="for example Mg-O.A,Mg-O.rho")
    parser.add_argument("--data", default="alpha,a", metavar="WHAT,WHAT", help=f"of {', '.join(NAMES)} (alpha,a)")
    parser.add_argument(
        "--from", dest="low", type=float, default=100.0, metavar="T", help="lowest temperature, K (100)"
    )
    parser.add_argument(
        "--to", dest="high", type=float, default=1000.0, metavar="T", help="highest temperature, K (1000)"
    )
    parser.add_argument(
        "--bounds",
        action="append",
        default=[],
        metavar="NAME=LOW,HIGH",
        help="range of a parameter (0.7 to 1.4 times its value)",
    )
    parser.add_argument("--anharmonic", choices=("none", "leading order", "sampled"), help=CORRECTION)
    parser.add_argument("--out", metavar="FOLDER", type=Path, help="write results and the new case here")
    parser.set_defaults(run=run)


def run(arguments: argparse.Namespace) -> int:
    """Calibrate, write the files when asked to, then show values and residuals."""
    from thermex.case.reader import load_case
    from thermex.exploration.calibrate import calibrate
    from thermex.report.exploration_files import calibration_files, calibration_text
    from thermex.report.files import check_folder, write_folder

    case = with_anharmonic(load_case(arguments.case), arguments.anharmonic)
    if arguments.out is not None:
        check_folder(arguments.out)
    kinds = [name.strip() for name in arguments.data.split(",")]
    data = measured_data(case, kinds, arguments.low, arguments.high)
    rest = [name for name in NAMES if name not in kinds]
    held_out = measured_data(case, rest, arguments.low, arguments.high, required=False) if rest else []
    names = [n.strip() for n in arguments.parameters.split(",") if n.strip()]
    with progress_on(sys.stderr) as progress:
        bounds = read_bounds(arguments.bounds)
        result = calibrate(case, names, data, bounds=bounds, held_out=held_out, progress=progress)
    text = calibration_text(result)
    if arguments.out is not None:
        write_folder(arguments.out, calibration_files(result, arguments.command_line))
        text += f"\nWritten to {arguments.out}: values, covariance, residuals, calibrated-case.toml.\n"
    sys.stdout.write(text)
    return 0


def measured_data(case: Case, what: list[str], low: float, high: float, *, required: bool = True) -> list[Datum]:
    """Return the data that the case's measured values offer.

    Raises
    ------
    InputError
        An unknown kind of data, no measured values in the case, or none in the range.
    """
    from thermex.exploration.measured_data import data_of
    from thermex.measured import load_material, load_series_file

    wanted: list[str] = []
    for name in what:
        if name.strip() not in NAMES:
            raise InputError(f'"{name}" is not a kind of data', where="--data", fix=f"of {', '.join(NAMES)}")
        wanted.extend(NAMES[name.strip()])
    if case.measured is None:
        where = f"{case.source}: measured" if case.source else "measured"
        raise InputError("the case names no measured values", where=where, fix='add [measured] material = "…"')
    series = load_series_file(case.measured.file) if case.measured.file else ()
    if case.measured.material:
        series = (*series, *load_material(case.measured.material).series)
    data = data_of(series, wanted, low, high)
    if required and not data:
        raise InputError(
            f"nothing of {', '.join(what)} was measured from {low:g} to {high:g} K",
            where="--data",
            fix="widen --from and --to, or take other data",
        )
    return data


def read_bounds(entries: list[str]) -> dict[str, tuple[float, float]]:
    """Read NAME=LOW,HIGH."""
    from thermex.commands.sweep import numbers

    out = {}
    for entry in entries:
        name, _, rest = entry.partition("=")
        values = numbers(rest, "--bounds") if rest else []
        if len(values) != 2 or values[0] >= values[1]:
            raise InputError(f'"{entry}" is not a range', where="--bounds", fix="such as Mg-O.rho=0.28,0.33")
        out[name] = (values[0], values[1])
    return out
