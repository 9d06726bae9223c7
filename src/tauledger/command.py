"""The command line: parse arguments, call, print. Nothing is computed here.

A subcommand is one entry in ``COMMANDS`` and the module of its name in ``commands/``, read only
when it is asked for: ``add_arguments``, and ``run`` from them to the exit code. Exit codes: 0 fine;
1 a finding; 2 usage, configuration or unreadable input; 3 internal error; 130 interrupted; 141 the
reader of the output has gone.
"""

from __future__ import annotations

import argparse
import os
import re
import sys
from collections.abc import Iterable, Sequence
from typing import NoReturn

from tauledger.commands.output import (
    INTERNAL,
    INTERRUPTED,
    PIPE_CLOSED,
    UNUSABLE,
    deliver,
    explain,
    refuse,
    save_details,
    silence_stdout,
)
from tauledger.commands.parsers import COMMANDS, command_parser, module_of, top_parser
from tauledger.problems import ProblemError


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code; only the SystemExit of ``--help`` leaves."""
    given = sys.argv[1:] if argv is None else list(argv)
    # The matrices are small: threads of the linear algebra would only wait for each other.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    if argv is None:
        _silence_warnings()
    try:
        try:
            return _run(given)
        finally:
            deliver(sys.stdout.flush)
    except KeyboardInterrupt:
        print("tauledger: interrupted", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        silence_stdout()
        return PIPE_CLOSED
    except ProblemError as error:
        explain(error.problems)
        return UNUSABLE
    except Exception as error:
        # The last resort: a user is never shown a traceback.
        return _report_internal(error, given)


def _silence_warnings() -> None:
    """Python's own warnings are for developers, here and in workers, unless the user asks."""
    if not sys.warnoptions:
        import warnings

        warnings.simplefilter("ignore")
        os.environ["PYTHONWARNINGS"] = "ignore"


# Arguments ----------------------------------------------------------------------------------------


def _run(given: list[str]) -> int:
    name, rest = (given[0], given[1:]) if given else ("", [])
    if name.startswith("-"):
        top = top_parser()
        _check_options(top, given)
        top.parse_args(given)
    if name not in COMMANDS:
        _refuse_command(name)
    parser = command_parser(name)
    rest = _joined_negatives(rest)
    _check_options(parser, rest)
    status: int = module_of(name).run(parser.parse_args(rest))
    return status


def _joined_negatives(given: Iterable[str]) -> list[str]:
    """``--range -40..85`` as ``--range=-40..85``: no option here begins with a digit."""
    joined: list[str] = []
    for argument in given:
        option = joined[-1] if joined and "--" not in joined else ""
        if option[:2] == "--" and "=" not in option and re.match(r"-\.?\d", argument):
            joined[-1] = f"{option}={argument}"
        else:
            joined.append(argument)
    return joined


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
            refuse("option-unknown", f"{parser.prog} has no option {option}", advice)


def _options(parser: argparse.ArgumentParser) -> list[str]:
    """The options as the help names them, which Python 3.14 colours on a terminal."""
    text = re.sub(r"\x1b\[[0-9;]*m", "", parser.format_help())
    return re.findall(r"(?<![\w-])--?[a-z][a-z-]*", text)


def _refuse_command(name: str) -> NoReturn:
    if not name:
        refuse("usage", "no command given", "See tauledger --help.")
    advice = f"{_nearest(name, COMMANDS)}tauledger --help lists the commands."
    refuse("command-unknown", f"tauledger has no command {name}", advice)


def _nearest(word: str, known: Iterable[str]) -> str:
    import difflib

    near = difflib.get_close_matches(word, list(known), n=1, cutoff=0.5)
    return f"Did you mean {near[0]}? " if near else ""


def _report_internal(error: Exception, given: Sequence[str]) -> int:
    """One line for the user, the traceback in a fresh file for whoever mends it."""
    import traceback

    from tauledger.report.inert import clip, inert

    what = clip(inert(f"{type(error).__name__}: {error}"), 200)
    where = save_details("".join(traceback.format_exception(error)), given)
    print(f"tauledger: internal error ({what}); {where}", file=sys.stderr)
    return INTERNAL
