"""The frame of every HTML page: loads nothing, runs nothing and sends nothing.

Its content policy allows one style sheet, the page's own by its hash; there is no script.
"""

from __future__ import annotations

import base64
import hashlib
import re
from collections.abc import Sequence

from tauledger.report.html_style import STYLE
from tauledger.report.html_text import text

_CAUTION = (
    "Caution: a report is arithmetic about a netlist. Mains, high voltage, charged and reversed "
    "capacitors can kill or burn; local codes and licensed practice come first."
)
_TITLE_COLUMNS = 200


def html_page(
    title: str,
    facts: Sequence[str],
    sections: Sequence[str],
    method: str,
    version: str,
    more_style: str = "",
) -> str:
    """A whole page.

    ``title`` is a netlist's own; facts, sections and method come as HTML. The first section is
    where a reader who skips the contents lands.
    """
    shown = text(title.strip() or "Untitled netlist", _TITLE_COLUMNS)
    style = STYLE + more_style
    first = re.search(r"<h2[^>]*>([A-Za-z ]+)</h2>", sections[0]) if sections else None
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{_policy(style)}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        '<meta name="referrer" content="no-referrer">\n'
        f"<title>{shown}</title>\n<style>{style}</style>\n</head>\n<body>\n"
        f'<a class="skip" href="#main">Skip to the {first[1].lower() if first else "page"}</a>\n'
        f'<header><h1>{shown}</h1><p class="facts">{", ".join(facts)}</p></header>\n'
        f'<nav aria-label="Contents"><ul>{_contents(sections)}</ul></nav>\n'
        f'<main id="main" tabindex="-1">{"".join(sections)}</main>\n'
        f"<footer><p>{_CAUTION}</p>"
        f'<p class="small">{method} tauledger {text(version)}</p></footer>\n'
        "</body>\n</html>\n"
    )


def _policy(style: str) -> str:
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    return f"default-src 'none'; style-src 'sha256-{digest}'; base-uri 'none'; form-action 'none'"


def _contents(sections: Sequence[str]) -> str:
    """A link to each section; their anchors and headings are words of ours."""
    found = (re.search(r'<h2 id="([a-z-]+)-h">([A-Za-z ]+)</h2>', part) for part in sections)
    return "".join(f'<li><a href="#{m[1]}">{m[2]}</a></li>' for m in found if m)
