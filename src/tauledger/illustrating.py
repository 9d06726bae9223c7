"""An analysis with its pictures: gathers curves and symbols, and writes page or plot."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from tauledger.analysis import Analysis
from tauledger.circuit.elements import IndependentSource
from tauledger.configuration.settings import PathSettings
from tauledger.corners import workbench
from tauledger.review.check import NetlistCheck, check
from tauledger.review.illustration import Curve, Illustration, curve_of, curve_range, sampled
from tauledger.review.rows import Review
from tauledger.smallsignal import device_admittances, drive_vector, response, sense_vector

if TYPE_CHECKING:
    from tauledger.simulate.simulation import Simulation


def picture(
    form: str,
    analysis: Analysis,
    review: Review,
    settings: PathSettings | None,
    simulation: Simulation | None = None,
) -> bytes:
    """The report as a file of pictures; ``form`` is ``html``, ``svg`` or ``png``.

    ``review`` is that of the analysis, with what was added to it since. Raises ProblemError where
    a PNG is asked for and matplotlib is not there.
    """
    limits, findings = check(analysis.circuit, review, settings)
    name = settings.name if settings else ""
    checked = NetlistCheck(review.netlist, name, review, limits, findings)
    shown = illustrate(analysis, simulation)
    if form == "html":
        from tauledger.report.html import html_report

        return html_report(checked, shown).encode()
    from tauledger.report.plot import bode_plot

    plot = bode_plot(review.paths[0], shown, limits)
    if form == "png":
        from tauledger.report.plot_png import bode_png

        return bode_png(plot)
    from tauledger.report.plot_svg import bode_file

    return bode_file(plot, review.title or review.netlist).encode()


def illustrate(analysis: Analysis, simulation: Simulation | None = None) -> Illustration:
    """The curves of the first path and the value of every symbol its expressions use."""
    path, midband_hz = analysis.review.paths[0], analysis.corners.midband_hz
    first, last = curve_range(path, midband_hz)
    return Illustration(
        exact=_exact(analysis, first, last),
        midband_hz=midband_hz,
        simulated=_simulated(simulation, first, last) if simulation else None,
        simulator=f"ngspice {simulation.version}" if simulation else "",
        symbols=_symbols(analysis),
    )


def _exact(analysis: Analysis, first_hz: float, last_hz: float) -> Curve:
    network, ends = analysis.network, analysis.topology.path
    source = next(e for e in analysis.circuit.elements if e.name == ends.source)
    assert isinstance(source, IndependentSource)
    sense = sense_vector(network, ends.output_node, ends.output_reference)
    exact = response(network, drive_vector(network, source), sense)
    return curve_of(exact, first_hz, last_hz, analysis.corners.midband_hz)


def _simulated(simulation: Simulation, first_hz: float, last_hz: float) -> Curve | None:
    inside = (simulation.frequency_hz >= first_hz) & (simulation.frequency_hz <= last_hz)
    if inside.sum() < 2:
        return None
    frequency, transfer = simulation.frequency_hz[inside], simulation.transfer[inside]
    return sampled(frequency, transfer, simulation.midband_hz)


def _symbols(analysis: Analysis) -> dict[str, float]:
    admittances = device_admittances(analysis.solution)
    # What is held together does not matter here: no network is walked, only figures are read.
    bench = workbench(analysis.circuit, analysis.network, analysis.point, admittances, ())
    symbols = {branch.name: branch.resistance_ohm for branch in bench.resistors}
    for device in bench.devices:
        symbols[device.s("gm")] = device.transconductance
        symbols[device.s("ro")] = device.output_resistance_ohm
        if math.isfinite(device.input_resistance_ohm):
            symbols[device.s("rπ")] = device.input_resistance_ohm
            symbols[device.s("β")] = device.beta_plus_one - 1.0
    return symbols
