"""``thermex assess``: a potential held against measured expansion, or several ranked."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from thermex.commands.predict import line_width, with_anharmonic
from thermex.commands.progress import progress_on
from thermex.commands.sweep import chosen_executor
from thermex.errors import InputError

if TYPE_CHECKING:
    from thermex.case.case import Case


def add_parser(subparsers: Any, common: argparse.ArgumentParser) -> None:
    """Add this command to the command line."""
    parser = subparsers.add_parser(
        "assess",
        parents=[common],
        help="hold a potential against measured expansion, or rank several",
        description="Does this potential reproduce measured expansion, and if not, which physics is wrong? "
        "With several cases, or --material, they are ranked against the same measurements. "
        "Exit status: 0 done, 1 the tolerance was failed (with --strict), 2 wrong input, 3 no answer, 130 interrupted.",
        epilog="Examples: thermex assess case.toml --out assessed; thermex assess --material MgO --to 1500",
    )
    parser.add_argument("cases", metavar="CASE", type=Path, nargs="*", help="case files (TOML)")
    parser.add_argument("--material", metavar="NAME", help="every published potential shipped for this material")
    parser.add_argument("--to", type=float, default=1000.0, metavar="T", help="with --material: up to T, K (1000)")
    parser.add_argument("--tolerance", type=float, default=10.0, metavar="PERCENT", help="rms deviation, %% (10)")
    parser.add_argument("--strict", action="store_true", help="exit status 1 when the tolerance is failed")
    parser.add_argument("--quick", action="store_true", help="leave the sensitivities out")
    parser.add_argument(
        "--anharmonic", choices=("none", "leading order", "sampled"), help="correction, in place of the case's"
    )
    parser.add_argument("--workers", type=int, metavar="N", help="local worker processes for several cases")
    parser.add_argument("--scheduler", metavar="ADDRESS", help="a running Dask scheduler")
    parser.add_argument("--out", metavar="FOLDER", type=Path, help="write text, data, figures and page here")
    parser.set_defaults(run=run)


def run(arguments: argparse.Namespace) -> int:
    """Assess one case, or rank several."""
    from thermex.report.files import check_folder

    if not 0.0 < arguments.tolerance < 1000.0:
        raise InputError(f"is {arguments.tolerance:g}", where="--tolerance", fix="give a percentage such as 10")
    if arguments.out is not None:
        check_folder(arguments.out)
    cases = chosen_cases(arguments)
    return _one(cases[0], arguments) if len(cases) == 1 else _several(cases, arguments)


def chosen_cases(arguments: argparse.Namespace) -> list[Case]:
    """Return the cases named, or those of every published potential of a material."""
    from thermex.case.published import case_from_published, published_for
    from thermex.case.reader import load_case
    from thermex.measured import load_material

    if arguments.material and arguments.cases:
        raise InputError("stands beside case files", where="--material", fix="keep one of the two")
    if arguments.material:
        material = load_material(arguments.material)
        known = published_for(material.formula)
        if not known:
            raise InputError(
                f"no published potential is shipped for {material.formula}",
                where="--material",
                fix="give case files of your own",
            )
        count = 13
        grid = tuple(arguments.to * k / (count - 1) for k in range(count))
        cases = [case_from_published(s.name, grid, accuracy=2e-3) for s in known]
    else:
        cases = [load_case(path) for path in arguments.cases]
    if not cases:
        raise InputError("nothing to assess", where="assess", fix="give a case file, or --material")
    return [with_anharmonic(case, arguments.anharmonic) for case in cases]


def _one(case: Case, arguments: argparse.Namespace) -> int:
    from thermex.comparison.assessment import assess
    from thermex.report.assessment_files import assessment_files
    from thermex.report.assessment_text import assessment_text
    from thermex.report.files import write_folder

    with progress_on(sys.stderr) as progress:
        result = assess(
            case,
            tolerance=arguments.tolerance / 100.0,
            with_sensitivities=not arguments.quick,
            progress=progress,
        )
    text = assessment_text(result, width=line_width())
    if arguments.out is not None:
        write_folder(arguments.out, assessment_files(result, arguments.command_line))
        text += f"\nWritten to {arguments.out}: data, figures, report.html, record.\n"
    sys.stdout.write(text)
    return 1 if arguments.strict and not result.passed else 0


def _several(cases: list[Case], arguments: argparse.Namespace) -> int:
    from thermex.comparison.ranking import rank
    from thermex.report.files import write_folder
    from thermex.report.ranking_files import ranking_files, ranking_text

    with chosen_executor(arguments.workers, arguments.scheduler) as executor, progress_on(sys.stderr) as progress:
        ranked = rank(cases, tolerance=arguments.tolerance / 100.0, executor=executor, progress=progress)
    text = ranking_text(ranked, width=line_width())
    if arguments.out is not None:
        write_folder(arguments.out, ranking_files(ranked, arguments.command_line))
        text += f"\nWritten to {arguments.out}: data, figure, report.html, record.\n"
    sys.stdout.write(text)
    best = ranked[0].assessment
    return 1 if arguments.strict and (best is None or not best.passed) else 0
