"""``tauledger report``."""

from __future__ import annotations

import argparse
import sys
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

from tauledger.commands.arguments import (
    aim_of,
    format_arguments,
    format_of,
    frequency,
    midband_argument,
    path_arguments,
    settings_of,
)
from tauledger.commands.output import FINE, deliver, explain, hand_over

if TYPE_CHECKING:
    from tauledger.analysis import Analysis
    from tauledger.review.rows import Review
    from tauledger.simulate.simulation import Simulation

PICTURES = ("html", "svg", "png")
"""The forms of a report that hold drawings."""
FORMATS = ("text", "json", "markdown", *PICTURES)


def add_arguments(parser: argparse.ArgumentParser) -> None:
    # The usage that argparse makes takes lines which the help needs to fit a screen.
    parser.usage = "%(prog)s [OPTIONS] NETLIST"
    parser.add_argument("netlist", metavar="NETLIST", help="SPICE netlist of the amplifier")
    path_arguments(parser)
    midband_argument(parser)
    parser.add_argument(
        "--square-wave", metavar="FREQ", type=frequency, help="tell its droop (1kHz)"
    )
    parser.add_argument("--against", metavar="REV", help="add the changes since a revision in git")
    parser.add_argument(
        "--simulate", action="store_true", help="add figures from ngspice, run beside"
    )
    format_arguments(parser, FORMATS)


def run(arguments: argparse.Namespace) -> int:
    """Analyse one netlist and print what sets its corners."""
    from tauledger.analysis import analyze, read

    netlist = read(arguments.netlist)
    settings = settings_of(arguments, Path(arguments.netlist))
    ends = arguments.input, arguments.output
    wave = arguments.square_wave
    analysis = analyze(netlist, *ends, settings, arguments.midband, wave)
    review, simulation = analysis.review, None
    if arguments.simulate:
        review, simulation = _simulated(analysis)
    if arguments.against:
        from tauledger.revisions import compare_against

        since = compare_against(arguments.against, analysis, aim_of(arguments))
        review = replace(review, comparison=since)
    explain(review.problems)
    form = format_of(arguments, FORMATS)
    if form == "json":
        from tauledger.report.json_report import json_report

        hand_over(json_report(review).encode(), arguments.save)
    elif form == "markdown":
        from tauledger.checking import markdown_of

        hand_over(markdown_of(analysis.circuit, review, settings).encode(), arguments.save)
    elif form in PICTURES:
        from tauledger.illustrating import picture

        drawn = picture(form, analysis, review, settings, simulation)
        hand_over(drawn, arguments.save)
    elif arguments.save:
        from tauledger.report.terminal import text_report

        hand_over(text_report(review).encode(), arguments.save)
    else:
        from tauledger.report.terminal import write_text_report

        deliver(lambda: write_text_report(review, sys.stdout))
    return FINE


def _simulated(analysis: Analysis) -> tuple[Review, Simulation]:
    from tauledger.simulate import beside, simulate

    midband_hz = analysis.corners.midband_hz
    simulation = simulate(analysis.circuit, analysis.topology.path, midband_hz)
    return beside(analysis.review, simulation), simulation
