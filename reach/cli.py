"""The command line: arguments, one library call, errors to exit codes."""

from __future__ import annotations

import argparse
import io
import os
import sys
import traceback
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import NamedTuple

from reach import __version__
from reach.errors import ReachError


class Asked(NamedTuple):
    """A command with a verdict: the library's verb, its question, what --no-advice leaves out, whether it runs code."""

    verb: str
    told: str
    left_out: str
    code: bool = False


ASKED = {
    "follow": Asked(
        "follow_commands",
        "can this arm deliver these paddle commands? if not: what, when, which limit, what would help",
        "headroom, needs and remedies",
    ),
    "survey": Asked(
        "survey_strikes",
        "where can it strike, and how fast? which regions and speeds can it not deliver?",
        "headroom and remedies",
    ),
    "rally": Asked(
        "size_rally",
        "how large is the usable juggling envelope: apex heights, offsets, bearings? what bounds it?",
        "headroom and remedies",
    ),
    "trial": Asked(
        "try_law", "does this law, on this arm, keep this ball up? from which starts?", "remedies", code=True
    ),
}

EXITS = """exit codes:
  0  deliverable          1  not deliverable      2  bad input, nothing written
  3  undecided            4  the program or a solver failed
"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command; returns its exit code."""
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ.setdefault(name, "1")  # matrices here are small; read by numpy, which is not loaded yet
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")  # a terminal that lacks a sign still shows the rest
    options = _parser().parse_args(arguments)
    try:
        return int(options.run(options))
    except ReachError as error:
        print(error, file=sys.stderr)
        return error.exit_code
    except KeyboardInterrupt:
        print("stopped; nothing was written", file=sys.stderr)
        return 4
    except BrokenPipeError:
        sys.stderr.close()
        return 4
    except OSError as error:
        print(f"can't go on: {error.strerror or error}", file=sys.stderr)
        return 4
    except Exception:  # a fault of this program, said so
        print(
            "strikecheck failed, by a fault of its own; please report this with the lines above it:",
            file=sys.stderr,
        )
        traceback.print_exc()
        return 4


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="strikecheck",
        description="Will this arm deliver these paddle commands? Answered before anything moves.",
        epilog=EXITS,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"strikecheck {__version__}")
    parser.add_argument(
        "--keys",
        action=_Keys,
        nargs=0,
        help="print every key of the input files, with units and defaults",
    )
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", required=True)
    describe = commands.add_parser("describe", help="what did you understand of this cell?")
    describe.add_argument("cell", metavar="CELL", help="the cell file (TOML)")
    describe.set_defaults(run=_describe)
    for name, ask in ASKED.items():
        command = commands.add_parser(
            name, help=ask.told, epilog=EXITS, formatter_class=argparse.RawDescriptionHelpFormatter
        )
        command.add_argument("cell", metavar="CELL", help=f"the cell file (TOML), with a [{name}] table")
        command.add_argument("--no-advice", action="store_true", help=f"leave out {ask.left_out}")
        if ask.code:
            command.add_argument(
                "--allow-code", action="store_true", help="run the Python file that trial.law names"
            )
        _common(command, name)
        command.set_defaults(run=_answered, command=name)
    return parser


class _Keys(argparse.Action):
    """Prints the table of keys and ends, as --version does."""

    def __call__(self, parser: argparse.ArgumentParser, *rest: object) -> None:
        from reach.formats import keys_text

        print(keys_text(), end="")
        parser.exit()


def _common(parser: argparse.ArgumentParser, command: str) -> None:
    """Options that every command with a verdict has."""
    parser.add_argument(
        "--out", metavar="DIR", default=f"out/{command}", help="folder for the results (default: %(default)s)"
    )
    parser.add_argument(
        "--json", action="store_true", help="the verdict as JSON on standard output, nothing else there"
    )
    parser.add_argument("--quiet", action="store_true", help="no summary and no progress")
    parser.add_argument(
        "--workers",
        metavar="N",
        type=_count,
        default=min(2, os.cpu_count() or 1),
        help="processes (default: %(default)s)",
    )
    parser.add_argument(
        "--seed", metavar="N", type=_seed, default=0, help="of random starts (default: %(default)s)"
    )
    parser.add_argument("--junit", metavar="FILE", help="also write a JUnit XML file")


def _count(text: str) -> int:
    number = int(text) if text.isascii() and text.isdigit() else 0
    if not 1 <= number <= 256:
        raise argparse.ArgumentTypeError("must be a whole number between 1 and 256")
    return number


def _seed(text: str) -> int:
    number = int(text) if text.isascii() and text.isdigit() else -1
    if not 0 <= number < 2**63:
        raise argparse.ArgumentTypeError("must be a whole number, 0 or more")
    return number


def _describe(options: argparse.Namespace) -> int:
    from reach import describe_cell, load_cell

    print(describe_cell(load_cell(options.cell)), end="")
    return 0


def _answered(options: argparse.Namespace) -> int:
    """Load the cell, ask, write what came out, show it; returns the exit code."""
    import reach
    from reach import load_cell, write_results
    from reach.report import WRITERS, check_targets

    command, ask = options.command, ASKED[options.command]
    cell = load_cell(options.cell, need=command)
    check_targets(Path(options.out), options.junit, [options.cell, *(item.path for item in cell.inputs)])
    choices = {"allow_code": options.allow_code} if ask.code else {}
    result = getattr(reach, ask.verb)(
        cell,
        workers=options.workers,
        seed=options.seed,
        advice=not options.no_advice,
        progress=_progress(options.quiet),
        **choices,
    )
    written = write_results(result, options.out, options.junit)
    if options.json:
        print(WRITERS[command]["json"](result), end="")
    elif not options.quiet:
        print(WRITERS[command]["text"](result), end="")
        print(f"\nwritten: {', '.join(str(path) for path in written)}")
    return 4 if result.failed else result.verdict.exit_code


def _progress(quiet: bool) -> Callable[[str], None] | None:
    """Lines of progress to standard error; on a terminal each takes the place of the one before."""
    if quiet:
        return None
    if not sys.stderr.isatty():
        return lambda text: print(text, file=sys.stderr)
    return lambda text: print(f"\r\033[K{text} …", end="", file=sys.stderr, flush=True)
