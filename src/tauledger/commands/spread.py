"""``tauledger spread``."""

from __future__ import annotations

import argparse
import sys
from typing import TYPE_CHECKING

from tauledger.commands.arguments import analysis_of
from tauledger.commands.deciding import (
    decision_arguments,
    refused,
    show_decision,
    tolerance_argument,
)
from tauledger.commands.output import FINE, explain
from tauledger.commands.workers import progress, workers

if TYPE_CHECKING:
    from tauledger.analysis import Analysis
    from tauledger.configuration.settings import PathSettings
    from tauledger.review.decisions import Spread


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Its own, then those that all decisions share."""
    decision_arguments(parser, _own_arguments, has_page=True)


def _own_arguments(parser: argparse.ArgumentParser) -> None:
    tolerance_argument(parser)
    parser.add_argument("--boards", metavar="N", type=int, default=10_000, help="10000 by default")
    parser.add_argument("--seed", metavar="N", type=int, default=1, help="same seed, same boards")
    parser.add_argument(
        "--distribution",
        metavar="NAME",
        choices=("uniform", "normal", "truncated"),
        default="",
        help="uniform (default), normal (to 3 sigma) or truncated",
    )


def run(arguments: argparse.Namespace) -> int:
    """Print how gain and corners spread over boards within tolerances."""
    from tauledger.report.decision import spread_page

    analysis, settings = analysis_of(arguments)
    result = _asked_for(arguments, analysis, settings)
    explain(result.problems)
    show_decision(arguments, result, spread_page, _as_html)
    return FINE


def _as_html(result: Spread) -> str:
    from tauledger.report.decision_html import spread_html

    return spread_html(result)


def _asked_for(
    arguments: argparse.Namespace, analysis: Analysis, settings: PathSettings | None
) -> Spread:
    """The spread that the options ask for, on all cores when it pays."""
    from tauledger.decide.asked import parse_asked
    from tauledger.decide.spread import MOST_BOARDS, spread

    if not 2 <= arguments.boards <= MOST_BOARDS:
        raise refused("--boards", str(arguments.boards), f"2 to {MOST_BOARDS} boards")
    asked = [parse_asked(text) for text in arguments.tolerance]
    with workers(arguments.boards) as executor:
        return spread(
            analysis,
            settings,
            asked,
            arguments.boards,
            arguments.seed,
            arguments.distribution,
            executor,
            progress(sys.stderr),
        )
