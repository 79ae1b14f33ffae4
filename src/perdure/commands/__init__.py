"""The small command line: ``perdure new``, ``perdure check`` and ``perdure run``."""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from importlib.metadata import version
from pathlib import Path

from perdure.errors import PerdureError

EPILOG = """\
exit codes: 0 all well; 1 a study has problems, failed or is not released; 2 the command line was not understood
"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command in ``arguments`` (default: the command line) and return its exit code.

    Mistakes of the user are printed without a traceback: where, what was found, what was expected, and the remedy.
    """
    given = list(sys.argv[1:] if arguments is None else arguments)
    own, options = _split(given)
    parsed = _parser().parse_args(own)
    if options and parsed.command != "run":
        _parser().error(f"{parsed.command} takes no options for Snakemake after --")
    try:
        return _dispatch(parsed, options)
    except PerdureError as error:
        from perdure.border.check_text import grouped  # noqa: PLC0415 (keeps --help quick)

        sys.stderr.write(grouped(error.problems) + "\n")
        return 1
    except KeyboardInterrupt:
        sys.stderr.write("stopped from the keyboard\n")
        return 130
    except BrokenPipeError:
        # whoever read our output has gone (as in `perdure check study | head`): nothing is left to say
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1


def _split(given: list[str]) -> tuple[list[str], list[str]]:
    """Own arguments, and those after ``--``, which are Snakemake's."""
    if "--" not in given:
        return given, []
    at = given.index("--")
    return given[:at], given[at + 1 :]


def _dispatch(parsed: argparse.Namespace, options: list[str]) -> int:
    # each command is imported when it is asked for: `perdure --help` must not wait for libraries that it has no use for
    if parsed.command == "new":
        from perdure.commands.new import new  # noqa: PLC0415

        return new(parsed.folder, parsed.name)
    if parsed.command == "check":
        from perdure.commands.check import check  # noqa: PLC0415

        return check(parsed.folders)
    from perdure.commands.run import run  # noqa: PLC0415

    return run(parsed.folders, parsed.results, parsed.cores, options)


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="perdure",
        description="How much stress a viscoelastic part still carries at the end of its service, and how sure that is.",
        epilog=EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"perdure {version('perdure')}")
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND")

    new = commands.add_parser("new", help="write a study that runs as it is", description="Write a study that runs as it is.")
    new.add_argument("folder", type=Path, metavar="FOLDER", help="folder to make; its name is the study's name")
    new.add_argument("--name", metavar="TEXT", help="title of the study (default: the folder's name)")

    check = commands.add_parser(
        "check",
        help="say everything that can be said without sampling",
        description="Read a study as a run would and say everything that can be said without sampling. Writes nothing.",
    )
    check.add_argument("folders", type=Path, nargs="+", metavar="FOLDER", help="study folder")

    run = commands.add_parser(
        "run",
        help="from records to margins and a report",
        description="Run the chain of each study: records, priors, posterior, checks, predictions, margins, report.",
        usage="perdure run [-h] [--results FOLDER] [--cores N] [FOLDER ...] [-- SNAKEMAKE OPTION ...]",
        epilog="Without a folder the invented study that ships with the tool runs. Only what is out of date runs again.",
    )
    run.add_argument("folders", type=Path, nargs="*", metavar="FOLDER", help="study folder")
    run.add_argument("--results", type=Path, default=Path("results"), metavar="FOLDER", help="where results go (default: ./results)")
    run.add_argument("--cores", type=_positive, default=None, metavar="N", help="cores to use (default: all)")
    return parser


def _positive(text: str) -> int:
    try:
        number = int(text)
    except ValueError:
        number = 0
    if number < 1:
        raise argparse.ArgumentTypeError(f"{text!r} is no whole number from 1 on")
    return number
