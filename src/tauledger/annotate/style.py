"""The few style properties that decide where text stands and whether a thing can be seen."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import field

from tauledger.records import dataclass

_COMMENT = re.compile(r"/\*.*?\*/", re.S)
_RULE = re.compile(r"([^{}]+)\{([^{}]*)\}")
_SELECTOR = re.compile(r"(\*|[A-Za-z][\w-]*)?(?:\.([\w-]+))?")

INHERITED = (
    "font-size", "text-anchor", "visibility", "fill", "stroke", "fill-opacity", "stroke-opacity",
    "dominant-baseline", "writing-mode",
)  # fmt: skip
OWN = ("opacity", "display", "transform")


def declarations(text: str) -> dict[str, str]:
    """``name: value; …`` as a mapping, names in lower case."""
    found: dict[str, str] = {}
    for entry in text.split(";"):
        name, colon, value = entry.partition(":")
        if colon:
            found[name.strip().lower()] = value.replace("!important", "").strip()
    return found


@dataclass(slots=True)
class StyleSheet:
    """Rules for a tag, a class or both; other selectors do not count."""

    rules: dict[tuple[str, str], dict[str, str]] = field(default_factory=dict)

    def add(self, text: str) -> None:
        for selectors, body in _RULE.findall(_COMMENT.sub(" ", text)):
            found = declarations(body)
            for selector in selectors.split(","):
                match = _SELECTOR.fullmatch(selector.strip())
                if match and (match[1] or match[2]) and len(self.rules) < 10_000:
                    key = ("" if match[1] in (None, "*") else match[1], match[2] or "")
                    self.rules.setdefault(key, {}).update(found)

    def matching(self, tag: str, classes: Iterable[str]) -> dict[str, str]:
        """Of an element, later and more specific rules last."""
        found = {**self.rules.get(("", ""), {}), **self.rules.get((tag, ""), {})}
        for name in classes:
            found.update(self.rules.get(("", name), {}))
            found.update(self.rules.get((tag, name), {}))
        return found


def specified(sheet: StyleSheet, tag: str, attributes: Mapping[str, str]) -> dict[str, str]:
    """Properties an element sets itself: attributes, then rules, then its style attribute."""
    found = {name: attributes[name] for name in (*INHERITED, *OWN) if name in attributes}
    if sheet.rules:
        found |= sheet.matching(tag, attributes.get("class", "").split())
    if style := attributes.get("style"):
        found |= declarations(style)
    return found


def is_none(value: str | None) -> bool:
    """Whether a paint or an opacity leaves nothing to see."""
    if value is None:
        return False
    text = value.strip().lower()
    if text in ("none", "transparent"):
        return True
    try:
        return float(text.removesuffix("%")) <= 0.01
    except ValueError:
        return False
