"""Text of a netlist as a TOML string."""

from __future__ import annotations

import json


def toml_text(text: str) -> str:
    """In quotes; the escapes are those of JSON, but for DEL, which TOML wants escaped too."""
    safe = text.encode("utf-8", "backslashreplace").decode("utf-8")
    return json.dumps(safe, ensure_ascii=False).replace("\x7f", "\\u007f")
