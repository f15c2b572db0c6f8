"""The command line: ``tomofolio survey`` and ``tomofolio report``. Only this module turns errors into exit codes."""

from __future__ import annotations

import argparse
import io
import os
import signal
import sys
from collections.abc import Sequence
from pathlib import Path
from types import FrameType

from tomofolio import __version__
from tomofolio.errors import CallError, InputError, OutputError, TomofolioError

EXIT_DONE = 0
EXIT_CALL = 2
EXIT_INPUT = 3
EXIT_OUTPUT = 4
EXIT_INTERRUPTED = 130

CAUTION = (
    "A report by tomofolio is neither a diagnosis nor an acceptance decision. "
    "A licensed or qualified person must review it; local codes and licensed practice come first."
)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit status; one message on standard error where it is not 0."""
    signal.signal(signal.SIGTERM, _interrupt)
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")  # a terminal without Unicode shows a question mark, not a fault
    options = _parser().parse_args(arguments)
    try:
        return options.run(options)
    except TomofolioError as error:
        _complain(str(error))
        if isinstance(error, CallError):
            return EXIT_CALL
        return EXIT_OUTPUT if isinstance(error, OutputError) else EXIT_INPUT
    except KeyboardInterrupt:
        _complain("interrupted; nothing was written.")
        return EXIT_INTERRUPTED
    except MemoryError:
        _complain(f"{options.path}: the scan does not fit into memory. Close other programs, or use a larger machine.")
        return EXIT_INPUT
    except BrokenPipeError:
        # The reader of our output has gone (| head): nothing is wrong, and nobody listens any more.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return EXIT_DONE
    except Exception as error:
        if options.traceback:
            raise
        kind = type(error).__name__
        _complain(
            f"{options.path}: tomofolio met a fault of its own with this scan ({kind}: {error}). "
            "Run again with --traceback and report what it prints."
        )
        return EXIT_INPUT


def _interrupt(number: int, frame: FrameType | None) -> None:
    raise KeyboardInterrupt


def _complain(message: str) -> None:
    print(f"tomofolio: {message}", file=sys.stderr)


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="tomofolio",
        description="Turns a folder of CT slices into a report that can be read, checked and repeated.",
        epilog=CAUTION,
    )
    parser.add_argument("--version", action="version", version=f"tomofolio {__version__}")
    commands = parser.add_subparsers(required=True, metavar="COMMAND")

    survey = commands.add_parser(
        "survey", help="list the image series below a path and say which can be reported", epilog=CAUTION
    )
    survey.add_argument("path", type=Path, metavar="PATH", help="a folder, a file, a zip or a DICOMDIR")
    survey.add_argument("--json", action="store_true", help="print a JSON list instead of a table")
    survey.set_defaults(run=_survey)

    report = commands.add_parser("report", help="the whole job: a series to a PDF", epilog=CAUTION)
    report.add_argument("path", type=Path, metavar="PATH", help="a folder, a file, a zip or a DICOMDIR")
    report.add_argument("--series", metavar="UID", help="which series (the beginning of its UID will do)")
    report.add_argument("--job", type=Path, metavar="FILE.toml", help="the job sheet")
    report.add_argument("--preset", metavar="NAME", help="casting, case-note, specimen, or a preset file")
    report.add_argument("--out", type=Path, metavar="FILE.pdf", help="the report (default: named after the series)")
    report.add_argument("--data", type=Path, metavar="DIR", help="also write figures, tables and images there")
    report.add_argument(
        "--identity",
        choices=("keep", "hide"),
        help="whether names and identifying values may appear (default: hide for patients and in doubt)",
    )
    report.set_defaults(run=_report)
    for command in (survey, report):
        command.add_argument("--traceback", action="store_true", help="show where an unexpected fault happened")
    return parser


def _survey(options: argparse.Namespace) -> int:
    from tomofolio.intake import survey
    from tomofolio.listing import survey_json, survey_table
    from tomofolio.progress import shown_progress

    with shown_progress() as progress:
        found = survey(options.path, progress=progress.stage("Looking through the files"))
    if options.json:
        print(survey_json(found))
    else:
        survey_table(found)
    return EXIT_DONE


def _report(options: argparse.Namespace) -> int:
    from tomofolio.clock import run_time

    run_time()  # a wrong SOURCE_DATE_EPOCH is told before any work, and before libraries stumble over it
    from tomofolio.deliver.whole import check_data_path, check_report_path
    from tomofolio.progress import shown_progress

    _check_exists(options.path)
    for path in (options.job,):
        if path is not None and not path.is_file():
            raise CallError("there is no such job sheet", file=path)
    check_report_path(options.out if options.out is not None else Path.cwd() / "report.pdf.partial")
    if options.data is not None:
        check_data_path(options.data)

    from tomofolio.pipeline import Order, default_report_name, make_case, write_case

    order = Order(
        path=options.path,
        series=options.series,
        job=options.job,
        preset=options.preset,
        keep_identity=None if options.identity is None else options.identity == "keep",
    )
    with shown_progress() as progress:
        case = make_case(order, progress)
        report = options.out if options.out is not None else Path.cwd() / default_report_name(case)
        check_report_path(report)
        write_case(case, report, options.data, progress)
    from tomofolio.listing import closing_lines

    print("\n".join(closing_lines(case, report, options.data)))
    return EXIT_DONE


def _check_exists(path: Path) -> None:
    if not path.exists():
        raise InputError("there is no such file or folder", file=path, remedy="Check the path")
