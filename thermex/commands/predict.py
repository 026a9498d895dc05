"""``thermex predict``: thermal expansion of one case, as a table and as files."""

from __future__ import annotations

import argparse
import dataclasses
import shutil
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from thermex.commands.progress import progress_on

if TYPE_CHECKING:
    from thermex.case.case import Case

ANHARMONIC = ("default", "none", "leading order", "sampled")


def add_parser(subparsers: Any, common: argparse.ArgumentParser) -> None:
    """Add this command to the command line."""
    parser = subparsers.add_parser(
        "predict",
        parents=[common],
        help="predict expansion, Grüneisen parameter, stiffness and heat capacity of a case",
        description="Predict the thermal expansion of the crystal in a case file, beside measured values. "
        "Exit status: 0 done, 2 wrong input, 3 no answer, 130 interrupted.",
        epilog="Example: thermex predict case.toml --out results",
    )
    parser.add_argument("case", metavar="CASE", type=Path, help="case file (TOML)")
    parser.add_argument("--out", metavar="FOLDER", type=Path, help="write table, data, figures, page, record here")
    parser.add_argument(
        "--anharmonic",
        choices=ANHARMONIC,
        help="correction to the quasi-harmonic result, in place of the one in the case",
    )
    parser.set_defaults(run=run)


def run(arguments: argparse.Namespace) -> int:
    """Predict, write the files when asked to, then show the table."""
    from thermex.case.reader import load_case
    from thermex.expansion import predict
    from thermex.report.beside import beside_of, material_of
    from thermex.report.table import prediction_text

    case = with_anharmonic(load_case(arguments.case), arguments.anharmonic)
    if arguments.out is not None:
        _refuse_early(arguments.out)
    material_of(case)  # a wrong name or file is told before the computation
    with progress_on(sys.stderr) as progress:
        prediction = predict(case, progress=progress)
    beside = beside_of(prediction)
    text = prediction_text(prediction, beside, width=line_width())
    if arguments.out is not None:
        from thermex.report.folder import write_prediction

        write_prediction(arguments.out, prediction, beside, arguments.command_line)
        text += f"\nWritten to {arguments.out}: table, data, figures, report.html, record.\n"
    sys.stdout.write(text)
    sys.stdout.flush()
    return 0


def with_anharmonic(case: Case, kind: str | None) -> Case:
    """Return the case with another anharmonic correction, the same when none is named."""
    if kind is None:
        return case
    return dataclasses.replace(case, accuracy=dataclasses.replace(case.accuracy, anharmonic=kind))


def line_width() -> int:
    """Return the width of the table: that of the terminal between 80 and 100 characters, 100 in a file."""
    return max(80, min(100, shutil.get_terminal_size((100, 24)).columns))


def _refuse_early(folder: Path) -> None:
    """Fail before the computation when the results could not be written."""
    from thermex.report.files import check_folder

    check_folder(folder)
