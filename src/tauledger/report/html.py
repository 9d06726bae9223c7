"""The report as one HTML page that loads nothing, runs nothing and sends nothing.

Its content policy allows one style sheet, the page's own by its hash; there is no script.
"""

from __future__ import annotations

import base64
import hashlib
import re
from collections.abc import Iterator

from tauledger.report.html_bias import bias, changes, problems
from tauledger.report.html_ledger import ledger, uncounted
from tauledger.report.html_path import limits_section, response, simulated, stages, verdict
from tauledger.report.html_style import STYLE
from tauledger.report.html_text import quantity, section, text
from tauledger.report.plot import bode_plot
from tauledger.review.check import NetlistCheck, distinct_findings
from tauledger.review.illustration import Illustration
from tauledger.review.rows import Review

_CAUTION = (
    "Caution: a report is arithmetic about a netlist. Mains, high voltage, charged and reversed "
    "capacitors can kill or burn; local codes and licensed practice come first."
)
_METHOD = (
    "Method: short- and open-circuit time constants at the operating point; exact: "
    "−3&nbsp;dB of the whole linear network."
)
_TITLE_COLUMNS = 200


def html_report(checked: NetlistCheck, shown: Illustration) -> str:
    """The whole page for the first path of a review.

    ``checked`` is the review with its limits and findings; ``shown`` what its pictures need.
    """
    review = checked.review
    assert review is not None
    sections = [part for part in _sections(checked, review, shown) if part]
    title = text(review.title.strip() or "Untitled netlist", _TITLE_COLUMNS)
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{_policy()}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        '<meta name="referrer" content="no-referrer">\n'
        f"<title>{title}</title>\n<style>{STYLE}</style>\n</head>\n<body>\n"
        '<a class="skip" href="#main">Skip to the verdict</a>\n'
        f"<header><h1>{title}</h1>{_facts(review)}</header>\n"
        f'<nav aria-label="Contents"><ul>{_contents(sections)}</ul></nav>\n'
        f'<main id="main" tabindex="-1">{"".join(sections)}</main>\n'
        f"<footer><p>{_CAUTION}</p>"
        f'<p class="small">{_METHOD} tauledger {text(review.version)}</p></footer>\n'
        "</body>\n</html>\n"
    )


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


def _policy() -> str:
    digest = base64.b64encode(hashlib.sha256(STYLE.encode()).digest()).decode()
    return f"default-src 'none'; style-src 'sha256-{digest}'; base-uri 'none'; form-action 'none'"


def _facts(review: Review) -> str:
    facts = [text(review.netlist, 200), f"{review.temperature_c:g}\u00a0°C".replace("-", "−")]
    if review.supply_power_w is not None:
        facts.append(f"{quantity(review.supply_power_w, 'W')} from the supplies")
    return f'<p class="facts">{", ".join(facts)}</p>'


def _contents(sections: list[str]) -> str:
    """A link to each section; their anchors and headings are words of ours."""
    found = (re.search(r'<h2 id="([a-z-]+)-h">([A-Za-z ]+)</h2>', part) for part in sections)
    return "".join(f'<li><a href="#{m[1]}">{m[2]}</a></li>' for m in found if m)
