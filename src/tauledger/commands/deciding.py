"""What the commands of a decision share: options, their values, the output."""

from __future__ import annotations

import argparse
from collections.abc import Callable
from typing import TYPE_CHECKING, TypeVar

from tauledger.commands.arguments import (
    format_arguments,
    format_of,
    midband_argument,
    path_arguments,
)
from tauledger.commands.output import hand_over, show_page
from tauledger.problems import Problem, ProblemError, Severity
from tauledger.quantity import parse_si

if TYPE_CHECKING:
    from tauledger.report.layout import Line
    from tauledger.report.page import Page
    from tauledger.review.decisions import Choice, Spread, Stress, TemperatureSweep

    Decided = TypeVar("Decided", Spread, Choice, Stress, TemperatureSweep)


FORMATS = ("text", "json", "html")
"""Of a decision that can be a page."""


def tolerance_argument(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--tolerance",
        metavar="WINDOW",
        action="append",
        default=[],
        help="'R*=5%%', 'C*=-20..+80%%', 'Q*.current_gain=50%%'; repeat",
    )


def decision_arguments(
    parser: argparse.ArgumentParser,
    own: Callable[[argparse.ArgumentParser], None],
    has_page: bool = False,
) -> None:
    """The arguments of a decision on one amplifier: its own, then those all share.

    ``has_page`` for one that can be a page of HTML, which wants a file.
    """
    parser.usage = "%(prog)s [OPTIONS] NETLIST"
    parser.add_argument("netlist", metavar="NETLIST", help="SPICE netlist of the amplifier")
    own(parser)
    if has_page:
        format_arguments(parser, FORMATS)
    else:
        parser.add_argument(
            "--format", choices=("text", "json"), default="text", help="text (default) or json"
        )
    path_arguments(parser)
    midband_argument(parser)


def show_decision(
    arguments: argparse.Namespace,
    decision: Decided,
    page: Callable[[Page, Decided], list[Line]],
    as_html: Callable[[Decided], str] | None = None,
) -> None:
    """Print or save a decision: its rows as JSON, or what ``page`` or ``as_html`` lay out."""
    form, save = arguments.format, None
    if as_html is not None:
        form, save = format_of(arguments, FORMATS), arguments.save
    if as_html is not None and form == "html":
        hand_over(as_html(decision).encode(), save)
    elif form == "json":
        from tauledger.report.decision_json import decision_json

        hand_over(decision_json(decision).encode(), save)
    elif save:
        from tauledger.report.terminal import page_text

        hand_over(page_text(lambda on: page(on, decision)).encode(), save)
    else:
        show_page(lambda on: page(on, decision))


def frequency(option: str, text: str) -> float:
    value, unit = parsed(option, text, "a frequency such as 20Hz")
    if unit not in ("", "Hz") or value <= 0.0:
        raise refused(option, text, "a frequency such as 20Hz")
    return value


def percent(option: str, text: str) -> float:
    value, unit = parsed(option, text, "a percentage such as 10%")
    if unit not in ("", "%") or not 0.0 <= value < 100.0:
        raise refused(option, text, "a percentage from 0 to below 100")
    return value / 100.0


def parsed(option: str, text: str, expected: str) -> tuple[float, str]:
    try:
        return parse_si(text)
    except ValueError:
        raise refused(option, text, expected) from None


def refused(option: str, found: str, expected: str) -> ProblemError:
    message = f"{option}: found {found[:60]!r}; expected {expected}"
    return ProblemError(Problem("usage", Severity.ERROR, message, None, f"Correct {option}."))
