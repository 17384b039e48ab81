"""The console command. Exit status: 0 done, 2 bad input, 3 done but some candidates failed, 130 interrupted."""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from pathlib import Path

__all__ = ["main"]

BAD_INPUT, INTERRUPTED = 2, 130
THREAD_SETTINGS = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")

DESCRIPTION = """\
Weigh models of flows between places against each other: econometric and maximum-entropy candidates, fitted to
the same dyads, compared in and out of sample on one footing at a time.

Start with   steelyard demo     then open demo_report/report.html
Then         steelyard check my_study.toml     and     steelyard run my_study.toml -o my_report
"""
STATUS = """\
exit status: 0 done; 2 bad input (nothing was written over); 3 done, but some candidates failed or are not
certified; 130 interrupted (the same command goes on where it stopped)
"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit status."""
    options = _parser().parse_args(arguments)
    # Set before the numerical libraries load: the linear algebra here is small, and processes do the sharing.
    for name in THREAD_SETTINGS:
        os.environ.setdefault(name, "1")
    from steelyard.datasets import SteelyardError  # here, so that --help does not wait for it

    try:
        status, text = _answer(options)
    except SteelyardError as error:
        for line in str(error).splitlines():
            print(f"steelyard: {line}", file=sys.stderr)  # noqa: T201 - the one place that prints
        return BAD_INPUT
    except KeyboardInterrupt:
        print(  # noqa: T201
            "\nsteelyard: interrupted; finished fits are kept, the same command goes on from there",
            file=sys.stderr,
        )
        return INTERRUPTED
    print(text)  # noqa: T201
    return status


def _answer(options: argparse.Namespace) -> tuple[int, str]:
    """Load what the command needs, and nothing before."""
    from steelyard.benchmark import commands
    from steelyard.benchmark.study import load_study

    progress = False if getattr(options, "quiet", False) else None
    if options.command == "demo":
        return commands.run_demo(options.output, jobs=options.jobs, fresh=options.fresh, progress=progress)
    if options.command == "run":
        study = load_study(options.study)
        return commands.run_study(
            study, options.output, jobs=options.jobs, fresh=options.fresh, progress=progress
        )
    if options.command == "check":
        return commands.check_study(options.study)
    if options.command == "report":
        return commands.write_report(options.directory)
    if options.command == "models":
        return commands.show_model(options.name) if options.name else commands.list_models()
    return commands.show_dataset(options.name) if options.name else commands.list_datasets()


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="steelyard",
        description=DESCRIPTION,
        epilog=STATUS,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND")
    demo = _command(commands, "demo", "run the embedded study of freight between invented islands")
    _add_run_options(demo, Path("demo_report"))
    check = _command(commands, "check", "read a study and its data, and say what a run would do")
    check.add_argument("study", type=Path, help="study file (TOML)")
    run = _command(commands, "run", "fit and compare every candidate of a study; goes on where it stopped")
    run.add_argument("study", type=Path, help="study file (TOML); data paths start at its folder")
    _add_run_options(run, None)
    report = _command(commands, "report", "write the reports of a finished run again")
    report.add_argument("directory", type=Path, help="directory of the run")
    models = _command(commands, "models", "list the models, or print the method sheet of one")
    models.add_argument("name", nargs="?", help="a model's name")
    datasets = _command(commands, "datasets", "list the data sets that ship, or describe one")
    datasets.add_argument("name", nargs="?", help="a data set's name")
    return parser


def _command(
    commands: argparse._SubParsersAction[argparse.ArgumentParser], name: str, text: str
) -> argparse.ArgumentParser:
    return commands.add_parser(name, help=text, description=text[0].upper() + text[1:] + ".", epilog=STATUS)


def _add_run_options(parser: argparse.ArgumentParser, output: Path | None) -> None:
    parser.add_argument(
        "-o",
        "--output",
        type=Path,
        default=output,
        required=output is None,
        metavar="DIR",
        help="where results go: an empty or new directory, or that of an earlier run, which is then continued"
        + (f" (default: {output})" if output else ""),
    )
    parser.add_argument("--jobs", type=int, metavar="N", help="processes (default: one for each core)")
    parser.add_argument("--fresh", action="store_true", help="forget finished fits and start over")
    parser.add_argument("--quiet", action="store_true", help="no progress bar, also on a terminal")
