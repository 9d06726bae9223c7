"""``tauledger stress``."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from tauledger.commands.arguments import analysis_of
from tauledger.commands.deciding import decision_arguments, percent, show_decision
from tauledger.commands.output import FINDING, FINE, explain
from tauledger.problems import Severity

if TYPE_CHECKING:
    from tauledger.analysis import Analysis
    from tauledger.configuration.settings import PathSettings
    from tauledger.review.decisions import Stress


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Its own, then those that all decisions share."""
    decision_arguments(parser, _own_arguments)


def _own_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--margin", metavar="PERCENT", default="20%", help="of a rating, to spare; 20%% by default"
    )


def run(arguments: argparse.Namespace) -> int:
    """Print what voltage and heat the parts stand."""
    from tauledger.report.decision_parts import stress_page

    analysis, settings = analysis_of(arguments)
    result = _asked_for(arguments, analysis, settings)
    explain(result.problems)
    show_decision(arguments, result, stress_page)
    return FINDING if any(p.severity is Severity.ERROR for p in result.problems) else FINE


def _asked_for(
    arguments: argparse.Namespace, analysis: Analysis, settings: PathSettings | None
) -> Stress:
    """The stress with the margin asked for."""
    from tauledger.decide.stress import stress

    return stress(analysis, settings, percent("--margin", arguments.margin))
