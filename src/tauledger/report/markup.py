"""Markdown whose words cannot act: no cell, link, mention, reference, picture or HTML of theirs.

Names from a netlist stand in code spans, in which a renderer reads nothing. Sentences that may
quote one are escaped; what hosts of repositories make links of (mentions, issue numbers,
addresses) is broken with an invisible space. What those are is from memory.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence

from tauledger.report.inert import clip, inert

_NAME_COLUMNS = 60
_SENTENCE_COLUMNS = 600
_BREAK = "\u200b"
_ACTIVE = re.compile(r"([\\`*_{}\[\]~])")
"""The rest of Markdown acts only at the start of a line, where no sentence of ours stands."""
_LINKED = re.compile(
    r"(?<=[@#$!%&~])(?=\w)|(?<=:)(?=[\w+-]+:|//)|(?<=\bwww)(?=\.)|(?<=\bgh-)(?=\d)", re.IGNORECASE
)


def code(text: str, columns: int = _NAME_COLUMNS) -> str:
    """A name in a code span; an empty one is a dash."""
    shown = _without_bars(clip(inert(text), columns)).strip()
    if not shown:
        return "—"
    longest = max((len(run) for run in re.findall("`+", shown)), default=0)
    fence = "`" * (longest + 1)
    pad = " " if shown[0] == "`" or shown[-1] == "`" else ""
    return f"{fence}{pad}{shown}{pad}{fence}"


def sentence(text: str, columns: int = _SENTENCE_COLUMNS) -> str:
    """Words as they are, inert; none are a dash."""
    broken = _LINKED.sub(_BREAK, _without_bars(clip(inert(text), columns)).strip()) or "—"
    # A dollar sign in an element of its own opens no formula.
    return _ACTIVE.sub(r"\\\1", _html(broken)).replace("$", "<span>$</span>")


def table(heads: Sequence[str], rows: Iterable[Sequence[str]], right: Iterable[int] = ()) -> str:
    """A table; cells come ready, columns in ``right`` are set to the right."""
    rule = ["---:" if index in set(right) else "---" for index in range(len(heads))]
    return "".join(f"| {' | '.join(row)} |\n" for row in (heads, rule, *rows))


def details(summary: str, body: str) -> str:
    """A part that opens on demand; a blank line lets Markdown work inside."""
    return f"<details><summary>{summary}</summary>\n\n{body}\n</details>\n"


def html_code(text: str) -> str:
    """A name inside HTML, where Markdown is not read."""
    return f"<code>{_html(clip(inert(text), _NAME_COLUMNS))}</code>"


def _html(text: str) -> str:
    return text.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")


def _without_bars(text: str) -> str:
    # Renderers disagree on a bar behind a backslash in a table; a broken bar is no bar to any.
    return text.replace("|", "¦")
