"""``tauledger temperature``."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from tauledger.commands.arguments import analysis_of
from tauledger.commands.deciding import decision_arguments, parsed, refused, show_decision
from tauledger.commands.output import FINE, explain
from tauledger.problems import Problem, ProblemError, Severity

if TYPE_CHECKING:
    from tauledger.analysis import Analysis
    from tauledger.configuration.settings import PathSettings
    from tauledger.review.decisions import TemperatureSweep


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Its own, then those that all decisions share."""
    decision_arguments(parser, _own_arguments, has_page=True)


def _own_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--range", metavar="LOW..HIGH", help="in °C, such as 0..60; else that of tauledger.toml"
    )
    parser.add_argument("--steps", metavar="N", type=int, default=9, help="9 by default")


def run(arguments: argparse.Namespace) -> int:
    """Print gain, corners and bias over a range of temperatures."""
    from tauledger.report.decision_parts import temperature_page

    analysis, settings = analysis_of(arguments)
    result = _asked_for(arguments, analysis, settings)
    explain(result.problems)
    show_decision(arguments, result, temperature_page, _as_html)
    return FINE


def _as_html(result: TemperatureSweep) -> str:
    from tauledger.report.decision_html_temperature import temperature_html

    return temperature_html(result)


def _asked_for(
    arguments: argparse.Namespace, analysis: Analysis, settings: PathSettings | None
) -> TemperatureSweep:
    """The sweep over the range asked for, else that of the configuration."""
    from tauledger.decide.temperature import steps, temperature_sweep

    configured = settings.spread.temperature_c if settings and settings.spread else None
    window = _range(arguments.range) if arguments.range else configured
    if window is None:
        raise ProblemError(
            Problem(
                "usage",
                Severity.ERROR,
                "no range of temperatures is known",
                None,
                "Give it with --range 0..60, or as temperature under [spread] in tauledger.toml.",
            )
        )
    return temperature_sweep(analysis, steps(*window, arguments.steps))


def _range(text: str) -> tuple[float, float]:
    ends = text.replace("…", "..").removesuffix("C").removesuffix("°").split("..")
    if len(ends) != 2:
        raise refused("--range", text, "two temperatures such as 0..60")
    low, high = (parsed("--range", end, "two temperatures such as 0..60")[0] for end in ends)
    return low, high
