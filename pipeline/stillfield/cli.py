"""The command line: arguments, messages and exit codes, and nothing that computes.

Only the standard library is imported here; everything else is imported by the command that needs it, so
that ``stillfield --help`` answers at once.
"""

from __future__ import annotations

import argparse
import errno
import json
import logging
import os
import sys
import traceback
from collections.abc import Sequence
from typing import TextIO

from stillfield import __version__
from stillfield.errors import (
    EXIT_BAD_INPUT,
    EXIT_DEFECT,
    EXIT_INTERRUPTED,
    EXIT_OK,
    EXIT_OUTPUT,
    OutputError,
    StillfieldError,
)

DESCRIPTION = """\
Where passive solar stills can supply drinking water, and how large they must be:
litres per square metre of basin for every month, cell and village, from gridded or
typical-year weather.
"""

EPILOG = f"""\
exit codes:
  {EXIT_OK}    done
  {EXIT_DEFECT}    a defect in stillfield; the traceback on stderr is what to report
  {EXIT_BAD_INPUT}    bad input, settings or usage; one message on stderr says what is wrong and where
  {EXIT_OUTPUT}    an output could not be written
  {EXIT_INTERRUPTED}  interrupted

example:
  stillfield plan config/demo.yaml
  stillfield run config/demo.yaml
"""

#: Errors of the system that mean an output has no room, whoever was writing it.
_NO_ROOM = (errno.ENOSPC, errno.EDQUOT, errno.EROFS)

#: Lowest level that reaches stderr.
_LEVELS = {"quiet": logging.ERROR, "plain": logging.INFO, "verbose": logging.DEBUG}


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments without the program's name; the process's own by default.

    Returns
    -------
    int
        The exit code: 0 done, 1 a defect, 2 bad input, 3 output not written, 130 interrupted.
    """
    try:
        code = _guarded(build_parser().parse_args(argv))
    except SystemExit as leave:  # argparse: 0 after --help and --version, 2 for wrong usage
        code = leave.code if isinstance(leave.code, int) else EXIT_BAD_INPUT
    _let_go(sys.stdout)
    _let_go(sys.stderr)
    return code


def build_parser() -> argparse.ArgumentParser:
    """Build the parser of the command line."""
    parser = argparse.ArgumentParser(
        prog="stillfield", description=DESCRIPTION, epilog=EPILOG, allow_abbrev=False,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"stillfield {__version__}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", required=True)

    run = commands.add_parser(
        "run", help="do everything a run file asks for", allow_abbrev=False, epilog=EPILOG,
        description="Check a run file, then do everything it asks for.",
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    run.add_argument("run_file", metavar="RUN.yaml", help="the run file")
    run.add_argument("--output", metavar="FOLDER", help="put the results under FOLDER, whatever the run file says")
    loudness = run.add_mutually_exclusive_group()
    loudness.add_argument(
        "-q", "--quiet", dest="loudness", action="store_const", const="quiet", help="say nothing but errors"
    )
    loudness.add_argument(
        "-v", "--verbose", dest="loudness", action="store_const", const="verbose",
        help="say every detail, with times and the warnings of libraries",
    )
    run.set_defaults(loudness="plain")

    plan = commands.add_parser(
        "plan", help="tell what a run would read, assume, write and cost, without doing it", allow_abbrev=False,
        description="Check a run file and its inputs as a run does, and tell what the run would do. Writes nothing.",
    )
    plan.add_argument("run_file", metavar="RUN.yaml", help="the run file")
    plan.add_argument("--output", metavar="FOLDER", help="as for run")
    plan.add_argument("--json", action="store_true", help="print one JSON object for other programs")

    fit = commands.add_parser(
        "fit", help="fit stills and tell how well the correlation follows the hourly balance", allow_abbrev=False,
        description="Fit every condition of some stills to the hourly heat balance and print the errors.",
    )
    fit.add_argument("still_files", metavar="STILL.yaml", nargs="+", help="still files")
    fit.add_argument("--into", metavar="FILE", help="keep the fits in FILE, beside those it holds")

    _add_trial(commands)
    _add_compare(commands)

    evidence = commands.add_parser(
        "evidence", help="set what is known from outside beside what stillfield computes", allow_abbrev=False,
        description="Write tables and pictures of every check against outside knowledge, and of the correlation "
        "against the hourly balance on typical years.",
    )
    evidence.add_argument("--into", metavar="FOLDER", help="folder to write to (default: outputs/evidence)")
    evidence.add_argument("--weather", metavar="FILE", nargs="+", help="typical years (default: those of pvlib)")
    evidence.add_argument("--still", metavar="STILL.yaml", nargs="+", help="still files (default: config/stills)")

    schema = commands.add_parser(
        "schema", help="print the JSON Schema of run, still or trial files", allow_abbrev=False,
        description="Print the JSON Schema of run, still or trial files, for editors that complete and check.",
    )
    schema.add_argument("kind", nargs="?", choices=("run", "still", "trial"), default="run",
                        help="which file (default: run)")
    return parser


def _add_trial(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    trial = commands.add_parser(
        "trial", help="set measured litres against modelled ones and compare stills", allow_abbrev=False,
        description="From a log of measured litres and the weather of its days: the field factor of every still with "
        "its interval, and which of two stills is better with the weather taken out.",
    )
    trial.add_argument("trial_file", metavar="TRIAL.yaml", help="the trial file")
    trial.add_argument("--output", metavar="FOLDER", help="put the results under FOLDER, whatever the trial file says")


def _add_compare(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    compare = commands.add_parser(
        "compare", help="set two finished runs beside each other", allow_abbrev=False,
        description="From the folders of two finished runs: which settings, inputs and versions differ, and how the "
        "litres, areas, costs and ranks of places and the litres of cells differ in consequence.",
    )
    compare.add_argument("run_a", metavar="RUN_A", help="folder of a run; of several stills each has its own")
    compare.add_argument("run_b", metavar="RUN_B", help="folder of the run that is held against it")
    compare.add_argument("--into", metavar="FOLDER", help="write the differences as CSV into FOLDER")


def _guarded(arguments: argparse.Namespace) -> int:
    """Do the command; every failure ends in an exit code and the words that belong to it."""
    try:
        return _COMMANDS[arguments.command](arguments)
    except StillfieldError as error:
        _complain(str(error))
        return error.exit_code
    except KeyboardInterrupt:
        _complain("interrupted; outputs that were finished are whole")
        return EXIT_INTERRUPTED
    except Exception as error:
        if isinstance(error, OSError) and error.errno in _NO_ROOM:
            _complain(f"an output could not be written: {error.strerror}")
            return EXIT_OUTPUT
        _complain(f"this is a defect in stillfield {__version__}, not in your input; please report what follows")
        traceback.print_exc()
        return EXIT_DEFECT


def _run(arguments: argparse.Namespace) -> int:
    _log_to_stderr(arguments.loudness)
    from stillfield.settings.load import load_run

    settings = load_run(arguments.run_file)
    if arguments.output is not None:
        settings = settings.with_output(arguments.output)

    from stillfield.run import run

    summary = run(settings, run_file=arguments.run_file)
    if arguments.loudness != "quiet":
        _say(f"{summary}\n")
    return EXIT_OK


def _plan(arguments: argparse.Namespace) -> int:
    _log_to_stderr("quiet")
    from stillfield.settings.load import load_run

    settings = load_run(arguments.run_file)
    if arguments.output is not None:
        settings = settings.with_output(arguments.output)

    from stillfield.plan import plan
    from stillfield.products.plan_text import plan_text

    facts = plan(settings, run_file=arguments.run_file)
    _say(f"{json.dumps(facts, indent=2, allow_nan=False)}\n" if arguments.json else plan_text(facts))
    return EXIT_OK


def _schema(arguments: argparse.Namespace) -> int:
    from stillfield.settings.load import schema_text

    _say(schema_text(arguments.kind))
    return EXIT_OK


def _fit(arguments: argparse.Namespace) -> int:
    from stillfield.fit import fit

    _say(fit(arguments.still_files, into=arguments.into))
    return EXIT_OK


def _trial(arguments: argparse.Namespace) -> int:
    _log_to_stderr("plain")
    from stillfield.settings.trial_file import load_trial

    settings, rows = load_trial(arguments.trial_file)
    if arguments.output is not None:
        settings = settings.with_output(arguments.output)

    from stillfield.trial import trial

    _say(f"{trial(settings, rows, trial_file=arguments.trial_file)}\n")
    return EXIT_OK


def _compare(arguments: argparse.Namespace) -> int:
    from stillfield.compare import compare

    _say(str(compare(arguments.run_a, arguments.run_b, into=arguments.into)))
    return EXIT_OK


def _evidence(arguments: argparse.Namespace) -> int:
    from stillfield.evidence.command import evidence

    _say(evidence(arguments.into, arguments.weather, arguments.still))
    return EXIT_OK


_COMMANDS = {
    "compare": _compare, "evidence": _evidence, "run": _run, "plan": _plan, "schema": _schema, "fit": _fit,
    "trial": _trial,
}


class _PlainLines(logging.Formatter):
    """Progress as it is; what is amiss says so in front."""

    def format(self, record: logging.LogRecord) -> str:
        """One line of the record."""
        text = super().format(record)
        return text if record.levelno < logging.WARNING else f"{record.levelname.lower()}: {text}"


def _log_to_stderr(loudness: str) -> None:
    """Set up plain lines on stderr: progress, or errors only, or everything with its time."""
    verbose = loudness == "verbose"
    handler = logging.StreamHandler(sys.stderr)
    handler.setLevel(_LEVELS[loudness])
    handler.setFormatter(
        logging.Formatter("%(asctime)s %(levelname)s %(name)s: %(message)s") if verbose else _PlainLines()
    )
    ours, libraries = logging.getLogger("stillfield"), logging.getLogger("py.warnings")
    ours.setLevel(logging.DEBUG)
    ours.handlers, ours.propagate = [handler], False
    logging.captureWarnings(True)
    libraries.handlers, libraries.propagate = [handler if verbose else logging.NullHandler()], False


def _say(text: str) -> None:
    """Write to stdout; a reader who has gone is no fault, a full disk behind it is one."""
    try:
        sys.stdout.write(text)
        sys.stdout.flush()
    except BrokenPipeError:
        return
    except OSError as error:
        raise OutputError("cannot be written", where="standard output", got=error.strerror) from None


def _complain(message: str) -> None:
    print(f"stillfield: {message}", file=sys.stderr)


def _let_go(stream: TextIO) -> None:
    """Flush; where that fails, send the rest to nowhere, so that the interpreter can leave in peace."""
    try:
        stream.flush()
    except ValueError:
        return
    except OSError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())
