"""``tauledger annotate``."""

from __future__ import annotations

import argparse
from pathlib import Path

from tauledger.commands.arguments import expanded, midband_argument, path_arguments, settings_of
from tauledger.commands.output import FINDING, FINE, UNUSABLE, explain, refuse
from tauledger.problems import ProblemError


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.usage = "%(prog)s [OPTIONS] NETLIST ..."
    parser.add_argument(
        "netlists", metavar="NETLIST", nargs="+", help="SPICE netlists of amplifiers"
    )
    parser.add_argument(
        "--drawing",
        metavar="SVG",
        action="append",
        default=[],
        help="mark this drawing, not the netlist; once for each sheet",
    )
    parser.add_argument("--output", metavar="FILE", help="write there, leave the source alone")
    what = parser.add_mutually_exclusive_group()
    what.add_argument("--remove", action="store_true", help="take the annotations out again")
    what.add_argument("--check", action="store_true", help="write nothing; exit 1 when stale")
    path_arguments(parser, "--output-node")
    midband_argument(parser)


def run(arguments: argparse.Namespace) -> int:
    """Write the results beside the parts, into netlists or onto the drawings of one."""
    netlists = expanded(arguments.netlists)
    if len(netlists) > 1 and (arguments.drawing or arguments.output):
        refuse("usage", "--drawing and --output take one netlist", "Name one netlist at a time.")
    worst = FINE
    for netlist in netlists:
        arguments.netlist = netlist
        try:
            worst = max(worst, _annotate_one(arguments))
        except ProblemError as error:
            # One bad netlist does not stop the others.
            explain(error.problems)
            worst = UNUSABLE
    return worst


def _annotate_one(arguments: argparse.Namespace) -> int:
    from tauledger.annotate import check_files, removed, write_files

    sources = arguments.drawing or [arguments.netlist]
    if arguments.output and len(sources) > 1:
        refuse("usage", "--output takes one drawing", "Annotate one drawing at a time.")
    results = (
        removed(sources, bool(arguments.drawing)) if arguments.remove else _annotated(arguments)
    )
    targets = [arguments.output or source for source in sources]
    if not arguments.check:
        write_files(targets, results)
        return FINE
    stale = check_files(targets, results)
    explain(stale)
    return FINDING if stale else FINE


def _annotated(arguments: argparse.Namespace) -> list[bytes]:
    from tauledger.analysis import analyze, read
    from tauledger.annotate import annotate_drawings, annotate_netlist, read_drawings
    from tauledger.netlist.source import read_bytes

    netlist = Path(arguments.netlist)
    content = read_bytes(netlist)
    settings = settings_of(arguments, netlist)
    ends = arguments.input, arguments.output_node
    analysis = analyze(read(netlist), *ends, settings, arguments.midband)
    review = analysis.review
    explain(review.problems)
    if not arguments.drawing:
        places = {element.name: element.span for element in analysis.circuit.elements}
        return [annotate_netlist(content, review, places)]
    drawings, problems = annotate_drawings(read_drawings(arguments.drawing), review)
    explain(problems)
    return [drawing.content for drawing in drawings]
