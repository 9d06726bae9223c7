"""What of a drawing could act or reach out when it is opened: named, and left as it is."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import field

from tauledger.problems import Problem, Severity, SourceSpan
from tauledger.records import dataclass

_ACTIVE = frozenset(("script", "iframe", "object", "embed", "handler", "audio", "video"))
_OUTSIDE = re.compile(r"\s*(?:javascript:|vbscript:|data:text/|https?:|ftp:|file:|//)", re.I)
_OUTSIDE_STYLE = re.compile(r"@import|url\(\s*[\"']?\s*(?:https?:|file:|//|javascript:)", re.I)
_MOST = 20
"""Kinds reported."""


@dataclass(slots=True)
class ActiveContent:
    """Gathers each kind once, with the line where it is first met."""

    lines: dict[str, int] = field(default_factory=dict)

    def look(self, tag: str, attributes: Mapping[str, str], line: int) -> None:
        if tag in _ACTIVE:
            self._note(f"holds active content, <{tag}>", line)
        for key, value in attributes.items():
            if key.startswith("on"):
                self._note(f"holds active content, the attribute {key[:40]}", line)
            elif key in ("href", "src") and _OUTSIDE.match(value):
                self._note("refers to something outside the file", line)
            elif key == "style":
                self.look_at_style(value, line)

    def look_at_style(self, text: str, line: int) -> None:
        if _OUTSIDE_STYLE.search(text):
            self._note("refers to something outside the file", line)

    def problems(self, path: str) -> tuple[Problem, ...]:
        return tuple(
            Problem(
                "drawing-active",
                Severity.WARNING,
                f"the drawing {what}; it is left as it is",
                SourceSpan(path, line, 1, 1, ""),
                "Open the drawing only where you trust its source.",
            )
            for what, line in self.lines.items()
        )

    def _note(self, what: str, line: int) -> None:
        if len(self.lines) < _MOST:
            self.lines.setdefault(what, line)
