"""``tauledger choose``."""

from __future__ import annotations

import argparse
import os
from collections.abc import Mapping
from typing import TYPE_CHECKING

from tauledger.commands.arguments import analysis_of
from tauledger.commands.deciding import (
    decision_arguments,
    frequency,
    percent,
    refused,
    show_decision,
    tolerance_argument,
)
from tauledger.commands.output import FINDING, FINE, deliver, explain, write_bytes
from tauledger.problems import Problem, Severity

if TYPE_CHECKING:
    from tauledger.analysis import Analysis
    from tauledger.configuration.settings import PathSettings
    from tauledger.review.decisions import Choice


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Its own, then those that all decisions share."""
    decision_arguments(parser, _own_arguments)


def _own_arguments(parser: argparse.ArgumentParser) -> None:
    end = parser.add_mutually_exclusive_group(required=True)
    end.add_argument("--low-corner", metavar="FREQ", help="at most this, such as 20Hz")
    end.add_argument("--high-corner", metavar="FREQ", help="at least this, and near it")
    parser.add_argument("--only", metavar="PARTS", default="", help="change only these: C1,C3")
    parser.add_argument(
        "--shares", metavar="SHARES", default="", help="of the low corner: CE=80,C1=10,C2=10"
    )
    parser.add_argument("--series", metavar="NAME", default="", help="E3 to E192, for every part")
    parser.add_argument(
        "--margin", metavar="PERCENT", default="0%", help="keep so far from the target (0%%)"
    )
    parser.add_argument(
        "--worst-case", action="store_true", help="meet it with every tolerance at its worst"
    )
    tolerance_argument(parser)
    parser.add_argument(
        "--patch",
        metavar="N",
        type=int,
        nargs="?",
        const=1,
        help="print alternative N (1) as a patch of the netlist",
    )


def run(arguments: argparse.Namespace) -> int:
    """Print which standard values meet a corner."""
    from tauledger.report.decision_parts import choice_page

    analysis, settings = analysis_of(arguments)
    result = _asked_for(arguments, analysis, settings)
    explain(result.problems)
    code = FINDING if result.infeasible else FINE
    if arguments.patch is not None:
        change = _patch_of(arguments, analysis, settings, result)
        deliver(lambda: write_bytes(change))
        return code
    show_decision(arguments, result, choice_page)
    return code


def _asked_for(
    arguments: argparse.Namespace, analysis: Analysis, settings: PathSettings | None
) -> Choice:
    """The choice that the options ask for."""
    from tauledger.decide.asked import parse_asked
    from tauledger.decide.choose import choose
    from tauledger.decide.search import Wish
    from tauledger.decide.series import SERIES

    if arguments.tolerance and not arguments.worst_case:
        found = " ".join(arguments.tolerance)
        raise refused("--tolerance", found, "--worst-case beside it, which is what it counts for")
    series = arguments.series.upper()
    if series and series not in SERIES:
        raise refused("--series", arguments.series, f"one of {', '.join(SERIES)}")
    target = arguments.low_corner or arguments.high_corner
    option = "--low-corner" if arguments.low_corner else "--high-corner"
    shares = _shares(arguments.shares)
    if shares and not arguments.low_corner:
        raise refused("--shares", arguments.shares, "a --low-corner beside it")
    wish = Wish(
        end="low" if arguments.low_corner else "high",
        target_hz=frequency(option, target),
        only=tuple(name.strip() for name in arguments.only.split(",") if name.strip()),
        shares=shares or None,
        series=series,
        margin=percent("--margin", arguments.margin),
        with_tolerance=arguments.worst_case,
        midband_hz=analysis.asked_midband_hz,
    )
    return choose(analysis, wish, settings, [parse_asked(text) for text in arguments.tolerance])


def _patch_of(
    arguments: argparse.Namespace,
    analysis: Analysis,
    settings: PathSettings | None,
    choice: Choice,
) -> bytes:
    """The alternative asked for as a unified diff; what to know of it goes to standard error."""
    from tauledger.decide.patch import patch

    count = len(choice.alternatives)
    if count == 0:
        message = f"there is nothing to patch: {choice.infeasible or choice.notes[0]}"
        explain([Problem("patch-empty", Severity.NOTE, message)])
        return b""
    if not 1 <= arguments.patch <= count:
        there = f"there {'is' if count == 1 else 'are'} {count}"
        raise refused("--patch", str(arguments.patch), f"an alternative that exists; {there}")
    found = patch(analysis, choice.alternatives[arguments.patch - 1], settings)
    if not found.diff:
        message = f"alternative {arguments.patch} is the netlist as it stands"
        explain([Problem("patch-empty", Severity.NOTE, message)])
    elif found.folder != os.getcwd():
        message = f"its paths are relative to {found.folder}: apply the patch there"
        explain([Problem("patch-folder", Severity.NOTE, message)])
    return found.diff


def _shares(text: str) -> Mapping[str, float]:
    shares = {}
    for entry in filter(None, text.split(",")):
        name, _, share = entry.partition("=")
        shares[name.strip()] = percent("--shares", share)
    if shares and (min(shares.values()) <= 0.0 or abs(sum(shares.values()) - 1.0) > 0.005):
        raise refused("--shares", text, "percentages above 0 that make 100 together")
    return shares
