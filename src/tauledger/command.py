"""The command line: parse arguments, call, print. Nothing is computed here.

A subcommand is one entry in :data:`COMMANDS`: what it takes, and one function from its arguments
to the exit code. Exit codes: 0 fine; 1 a finding; 2 usage, configuration or unreadable input;
3 internal error; 130 interrupted; 141 the reader of the output has gone.
"""

from __future__ import annotations

import argparse
import os
import re
import sys
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

from tauledger import __version__
from tauledger.problems import Problem, ProblemError, Severity

if TYPE_CHECKING:
    from tauledger.analysis import Analysis
    from tauledger.configuration import PathSettings
    from tauledger.review.rows import Review

FINE = 0
UNUSABLE = 2
INTERNAL = 3
INTERRUPTED = 130
PIPE_CLOSED = 141


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code; only the SystemExit of ``--help`` leaves."""
    given = sys.argv[1:] if argv is None else list(argv)
    try:
        try:
            return _run(given)
        finally:
            _deliver(sys.stdout.flush)
    except KeyboardInterrupt:
        print("tauledger: interrupted", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        _silence_stdout()
        return PIPE_CLOSED
    except ProblemError as error:
        _explain(error.problems)
        return UNUSABLE
    except Exception as error:
        # The last resort: a user is never shown a traceback.
        return _report_internal(error, given)


# Commands -----------------------------------------------------------------------------------------


def report(arguments: argparse.Namespace) -> int:
    """Analyse one netlist and print what sets its corners."""
    from tauledger.analysis import analyze, read

    netlist = read(arguments.netlist)
    settings = _settings(arguments)
    analysis = analyze(netlist, arguments.input, arguments.output, settings)
    review = _simulated(analysis) if arguments.simulate else analysis.review
    _explain(review.problems)
    if arguments.format == "json":
        from tauledger.report.json_report import json_report

        text = json_report(review)
        _deliver(lambda: sys.stdout.write(text))
    else:
        from tauledger.report.terminal import write_text_report

        _deliver(lambda: write_text_report(review, sys.stdout))
    return FINE


def _simulated(analysis: Analysis) -> Review:
    from tauledger.simulate import beside, simulate

    midband_hz = analysis.corners.midband_hz
    simulation = simulate(analysis.circuit, analysis.topology.path, midband_hz)
    return beside(analysis.review, simulation)


def _settings(arguments: argparse.Namespace) -> PathSettings | None:
    """What the configuration and the options add to the netlist."""
    from tauledger.configuration import GenericModels, PathSettings
    from tauledger.configuration.choice import find_settings
    from tauledger.netlist.include import default_roots

    netlist = Path(arguments.netlist)
    settings = find_settings(netlist, default_roots(netlist), arguments.config, arguments.path)
    if arguments.generic_models and (settings is None or settings.generic is None):
        settings = replace(settings or PathSettings(), generic=GenericModels())
    return settings


def _report_arguments(parser: argparse.ArgumentParser) -> None:
    # The usage that argparse makes takes lines which the help needs to fit a screen.
    parser.usage = "%(prog)s [OPTIONS] NETLIST"
    parser.add_argument("netlist", metavar="NETLIST", help="SPICE netlist of the amplifier")
    path = parser.add_argument_group("what the netlist leaves open")
    path.add_argument("--input", metavar="NAME", help="independent source that drives the path")
    path.add_argument("--output", metavar="NODE", help="output node, or A,B between two")
    path.add_argument("--config", metavar="FILE", type=Path, help="in place of the tauledger.toml found")
    path.add_argument("--path", metavar="NAME", help="signal path of the configuration")
    path.add_argument(
        "--generic-models", action="store_true", help="stand-ins for missing models, marked so"
    )
    result = parser.add_argument_group("result")
    result.add_argument(
        "--simulate", action="store_true", help="add figures from ngspice, run beside"
    )
    result.add_argument(
        "--format", choices=("text", "json"), default="text", help="text (default) or json"
    )


@dataclass(frozen=True, slots=True)
class Command:
    """One subcommand: how it reads in the help, what it takes, what it does."""

    summary: str
    example: str
    add_arguments: Callable[[argparse.ArgumentParser], None]
    run: Callable[[argparse.Namespace], int]


COMMANDS = {
    "report": Command(
        "Print bias, stages, gain and what sets each corner of an amplifier.",
        "tauledger report preamp.cir --output out",
        _report_arguments,
        report,
    ),
}


# Arguments ----------------------------------------------------------------------------------------


class _Parser(argparse.ArgumentParser):
    """Usage errors take the same road as every other problem."""

    def error(self, message: str) -> NoReturn:
        _refuse("usage", f"{self.prog}: {message}", f"See {self.prog} --help.")


def _run(given: list[str]) -> int:
    name, rest = (given[0], given[1:]) if given else ("", [])
    if name.startswith("-"):
        top = _top_parser()
        _check_options(top, given)
        top.parse_args(given)
    command = COMMANDS.get(name)
    if command is None:
        _refuse_command(name)
    parser = _command_parser(name, command)
    _check_options(parser, rest)
    return command.run(parser.parse_args(rest))


def _top_parser() -> _Parser:
    listing = "\n".join(f"  {name:<10}{command.summary}" for name, command in COMMANDS.items())
    example = next(iter(COMMANDS.values())).example
    parser = _Parser(
        prog="tauledger",
        usage="tauledger COMMAND [ARGUMENTS]",
        description="Which capacitor sets each corner of a transistor amplifier, and why.",
        epilog=f"commands:\n{listing}\n\nexample:\n  {example}\n\n"
        "tauledger COMMAND --help tells more of one command.",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    version = f"tauledger {__version__}"
    parser.add_argument("--version", action="version", version=version, help="print the version")
    return parser


def _command_parser(name: str, command: Command) -> _Parser:
    parser = _Parser(
        prog=f"tauledger {name}",
        description=command.summary,
        epilog=f"example:\n  {command.example}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    command.add_arguments(parser)
    return parser


def _check_options(parser: argparse.ArgumentParser, given: Iterable[str]) -> None:
    """Name the nearest option for an unknown one, before anything else is complained of."""
    known: list[str] = []
    for argument in given:
        if argument == "--":
            return
        option = argument.partition("=")[0]
        if not option.startswith("-") or option == "-":
            continue
        known = known or _options(parser)
        if option not in known:
            advice = f"{_nearest(option, known)}{parser.prog} --help lists the options."
            _refuse("option-unknown", f"{parser.prog} has no option {option}", advice)


def _options(parser: argparse.ArgumentParser) -> list[str]:
    """The options as the help names them, which Python 3.14 colours on a terminal."""
    text = re.sub(r"\x1b\[[0-9;]*m", "", parser.format_help())
    return re.findall(r"(?<![\w-])--?[a-z][a-z-]*", text)


def _refuse_command(name: str) -> NoReturn:
    if not name:
        _refuse("usage", "no command given", "See tauledger --help.")
    advice = f"{_nearest(name, COMMANDS)}tauledger --help lists the commands."
    _refuse("command-unknown", f"tauledger has no command {name}", advice)


def _nearest(word: str, known: Iterable[str]) -> str:
    import difflib

    near = difflib.get_close_matches(word, list(known), n=1, cutoff=0.5)
    return f"Did you mean {near[0]}? " if near else ""


def _refuse(code: str, message: str, advice: str) -> NoReturn:
    raise ProblemError(Problem(code, Severity.ERROR, message, advice=advice))


# Output -------------------------------------------------------------------------------------------


def _explain(problems: Iterable[Problem]) -> None:
    from tauledger.report.problems import format_problems

    sys.stderr.write(format_problems(problems))
    sys.stderr.flush()


def _deliver(write: Callable[[], object]) -> None:
    """Write the result to stdout to the last byte, or say why that failed."""
    try:
        write()
        sys.stdout.flush()
    except BrokenPipeError:
        raise
    except OSError as error:
        _silence_stdout()
        message = f"the result could not be written: {error.strerror or error}"
        _refuse("output-unwritable", message, "Check the disk or send the output elsewhere.")


def _silence_stdout() -> None:
    """Keep Python from flushing to the dead stream, and complaining, on its way out."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _report_internal(error: Exception, given: Sequence[str]) -> int:
    """One line for the user, the traceback in a fresh file for whoever mends it."""
    from tauledger.report.inert import clip, inert

    what = clip(inert(f"{type(error).__name__}: {error}"), 200)
    try:
        where = f"details in {_save_traceback(error, given)}"
    except OSError as failure:
        where = f"details could not be saved: {failure.strerror}"
    print(f"tauledger: internal error ({what}); {where}", file=sys.stderr)
    return INTERNAL


def _save_traceback(error: Exception, given: Sequence[str]) -> str:
    import tempfile
    import traceback

    with tempfile.NamedTemporaryFile(
        "w",
        prefix="tauledger-",
        suffix=".txt",
        delete=False,
        encoding="utf-8",
        errors="backslashreplace",
    ) as file:
        file.write(f"arguments: {list(given)!r}\nPython {sys.version}\n\n")
        file.writelines(traceback.format_exception(error))
    return file.name
