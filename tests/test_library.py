"""The library as a team uses it: a check of their own in ten lines of pytest, and a notebook."""

from __future__ import annotations

from html.parser import HTMLParser
from pathlib import Path

import pytest

import tauledger

INTERCOM = Path(__file__).parents[1] / "samples/common-emitter/common-emitter.cir"


# What a team writes beside its schematics; the README shows the same lines.
@pytest.fixture
def intercom() -> tauledger.Analysis:
    return tauledger.analyze(tauledger.read(INTERCOM), output="out")


def test_intercom_passes_speech(intercom: tauledger.Analysis) -> None:
    path = intercom.review.paths[0]
    assert path.low is not None
    assert path.low.exact_hz is not None
    assert path.low.exact_hz < 150
    assert path.low.set_by == ("CE",)
    assert intercom.point.voltage("coll") == pytest.approx(6.4, abs=0.3)


def test_results_are_frozen(intercom: tauledger.Analysis) -> None:
    with pytest.raises(AttributeError):
        intercom.review.paths[0].gain = 1.0  # type: ignore[misc]


class _Cells(HTMLParser):
    """Texts of the cells, and every element and attribute met."""

    def __init__(self) -> None:
        super().__init__()
        self.cells: list[str] = []
        self.elements: set[str] = set()
        self.attributes: list[tuple[str, str | None]] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.add(tag)
        self.attributes += attrs

    def handle_data(self, data: str) -> None:
        self.cells.append(data)


def test_a_notebook_shows_a_table_in_which_no_name_acts(tmp_path: Path) -> None:
    netlist = tmp_path / "hostile.cir"
    text = INTERCOM.read_text().replace("Door intercom", "<script>alert(1)</script> & \x1b door")
    netlist.write_text(text.replace("\x1b ", "").replace("CE ", "C<img> "))
    shown = _Cells()
    html = tauledger.analyze(tauledger.read(netlist))._repr_html_()
    shown.feed(html)
    assert shown.elements == {"div", "strong", "table", "tr", "th", "td"}
    assert shown.attributes == []
    assert "88.9 Hz (estimate 104 Hz), set by C<img>" in shown.cells
    assert shown.cells[0].startswith("<script>alert(1)</script> & door")
    assert len(html) < 4000
