"""The report as one HTML page."""

from __future__ import annotations

from collections.abc import Iterator

from tauledger.report.html_bias import bias, changes, problems
from tauledger.report.html_frame import html_page
from tauledger.report.html_ledger import ledger, uncounted
from tauledger.report.html_path import limits_section, response, simulated, stages, verdict
from tauledger.report.html_text import quantity, section, text
from tauledger.report.plot import bode_plot
from tauledger.review.check import NetlistCheck, distinct_findings
from tauledger.review.illustration import Illustration
from tauledger.review.rows import Review

_METHOD = (
    "Method: short- and open-circuit time constants at the operating point; exact: "
    "−3&nbsp;dB of the whole linear network."
)


def html_report(checked: NetlistCheck, shown: Illustration) -> str:
    """The whole page for the first path of a review.

    ``checked`` is the review with its limits and findings; ``shown`` what its pictures need.
    """
    review = checked.review
    assert review is not None
    sections = [part for part in _sections(checked, review, shown) if part]
    return html_page(review.title, _facts(review), sections, _METHOD, review.version)


def _sections(checked: NetlistCheck, review: Review, shown: Illustration) -> Iterator[str]:
    path = review.paths[0] if review.paths else None
    if path is None:
        yield section("verdict", "Verdict", "<p>No signal path: bias only.</p>")
    else:
        yield verdict(path, checked.limits)
        yield changes(review.comparison)
        yield stages(path)
        yield response(path, bode_plot(path, shown, checked.limits))
        yield limits_section(checked.limits)
        yield ledger(path, "low", shown.symbols)
        yield ledger(path, "high", shown.symbols)
        yield uncounted(path.time_constants)
        yield simulated(path.simulated)
    yield bias(review)
    yield problems(distinct_findings([checked]))


def _facts(review: Review) -> list[str]:
    facts = [text(review.netlist, 200), f"{review.temperature_c:g}\u00a0°C".replace("-", "−")]
    if review.supply_power_w is not None:
        facts.append(f"{quantity(review.supply_power_w, 'W')} from the supplies")
    return facts
