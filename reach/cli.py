"""The command line: arguments, one library call, errors to exit codes."""

from __future__ import annotations

import argparse
import contextlib
import io
import os
import signal
import sys
import threading
import traceback
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, NamedTuple

from reach import __version__
from reach.errors import ReachError, Stopped

if TYPE_CHECKING:
    from reach.result import Answer


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
RECHECK_EXITS = """exit codes:
  0  all items agree      1  one differs          2  no finished run, or a file changed since
  3  none differs, but not all could be checked   4  the program failed
"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command; returns its exit code."""
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ.setdefault(name, "1")  # matrices here are small; read by numpy, which is not loaded yet
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")  # a terminal that lacks a sign still shows the rest
    options = _parser().parse_args(arguments)
    before = _verdict_of(options)
    try:
        with _ended_by_signals():
            code = int(options.run(options))
            if sys.stdout is not None:
                sys.stdout.flush()  # a full disk is told of here, and not by the interpreter as it ends
            return code
    except ReachError as error:
        print(error, file=sys.stderr)
        return error.exit_code
    except (KeyboardInterrupt, Stopped):
        written = (
            "nothing was written" if _verdict_of(options) == before else "the results were written before"
        )
        print(f"stopped; {written}", file=sys.stderr)
        return 4
    except BrokenPipeError:
        sys.stderr.close()
        _drop_output()
        return 4
    except OSError as error:
        where = "" if error.filename is None else f"{error.filename}: "
        print(f"can't go on: {where}{error.strerror or error}", file=sys.stderr)
        _drop_output()
        return 4
    except MemoryError:
        print("out of memory; free some, or run again with --workers 1", file=sys.stderr)
        return 4
    except Exception:  # a fault of this program, said so
        print(
            "strikecheck failed, by a fault of its own; please report this with the lines above it:",
            file=sys.stderr,
        )
        traceback.print_exc()
        return 4


def _verdict_of(options: argparse.Namespace) -> tuple[int, int] | None:
    """What tells a verdict.json in the folder of results from another; None where there is none."""
    try:
        found = os.stat(Path(options.out, "verdict.json"))
    except (AttributeError, OSError, ValueError):
        return None
    return found.st_ino, found.st_mtime_ns


@contextlib.contextmanager
def _ended_by_signals() -> Iterator[None]:
    """Let the signals that end a process raise Stopped meanwhile, so that all is put away; only those it heeds."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    numbers = [getattr(signal, name) for name in ("SIGTERM", "SIGHUP") if hasattr(signal, name)]
    numbers = [number for number in numbers if signal.getsignal(number) is signal.SIG_DFL]

    def stop(number: int, _: object) -> None:
        for each in numbers:
            signal.signal(each, signal.SIG_IGN)  # once is enough
        raise Stopped

    for number in numbers:
        signal.signal(number, stop)
    try:
        yield
    finally:
        for number in numbers:
            signal.signal(number, signal.SIG_DFL)


def _drop_output() -> None:
    """Let what can't be put out be tried no more."""
    try:
        sys.stdout.flush()
    except OSError:
        with contextlib.suppress(OSError, ValueError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


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
    recheck = commands.add_parser(
        "recheck",
        help="does an independent engine agree with what a command stored?",
        epilog=RECHECK_EXITS,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    recheck.add_argument("folder", metavar="DIR", help="the folder that a command wrote its results to")
    _common(recheck, "recheck")
    recheck.set_defaults(run=_recheck)
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
    from reach import load_cell
    from reach.report import check_targets

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
    return _handed_over(result, options)


def _recheck(options: argparse.Namespace) -> int:
    """Look at a folder of results again, write what came out, show it; returns the exit code."""
    from reach import recheck_results
    from reach.report import check_targets

    check_targets(Path(options.out), options.junit, [], kept=Path(options.folder))
    return _handed_over(recheck_results(options.folder, progress=_progress(options.quiet)), options)


def _handed_over(result: Answer, options: argparse.Namespace) -> int:
    """Write a result, show it; returns the exit code."""
    from reach import write_results
    from reach.report import WRITERS

    command = result.command
    written = write_results(result, options.out, options.junit)
    if options.json:
        print(WRITERS[command]["json"](result), end="")
    elif not options.quiet:
        print(WRITERS[command]["text"](result), end="")
        print(f"\nwritten: {', '.join(str(path) for path in written)}")
    if result.failed:
        print(f"a solver failed, so this can't be trusted: {result.verdict.sentence}", file=sys.stderr)
        return 4
    return result.verdict.exit_code


def _progress(quiet: bool) -> Callable[[str], None] | None:
    """Lines of progress to standard error; on a terminal each takes the place of the one before."""
    if quiet:
        return None
    if not sys.stderr.isatty():
        return lambda text: print(text, file=sys.stderr)
    return lambda text: print(f"\r\033[K{text} …", end="", file=sys.stderr, flush=True)
