"""The three sample drawings, of different build, with their annotated results.

``real text``: text elements in millimetres with a style sheet and spans for subscripts.
``hidden text``: invisible text beside glyphs drawn in strokes, one designator turned.
``outlines``: no text at all, names in attributes of the symbols, on a sheet turned upside down.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from annotate.conftest import Look
from referee import ngspice
from tauledger.analysis import analyze, read
from tauledger.annotate import annotate_drawings, annotate_netlist, read_drawings
from tauledger.annotate.scan import scan

SAMPLES = Path(__file__).parents[2] / "samples"
BUILDS = {
    "real text": "common-emitter",
    "hidden text": "microphone-preamp",
    "outlines": "jfet-buffer",
}
REGENERATE = "for each sample: tauledger annotate S.cir [--drawing S.svg] --output annotated/S.…"


def annotated(name: str) -> tuple[bytes, bytes]:
    """Netlist and drawing."""
    netlist = SAMPLES / name / f"{name}.cir"
    analysis = analyze(read(netlist))
    places = {element.name: element.span for element in analysis.circuit.elements}
    drawings = read_drawings([str(netlist.with_suffix(".svg"))])
    (drawing,), problems = annotate_drawings(drawings, analysis.review)
    assert problems == ()
    return annotate_netlist(netlist.read_bytes(), analysis.review, places), drawing.content


@pytest.mark.parametrize("name", BUILDS.values())
def test_annotated_results_are_up_to_date(name: str) -> None:
    netlist, drawing = annotated(name)
    folder = SAMPLES / name / "annotated"
    assert (folder / f"{name}.cir").read_bytes() == netlist, REGENERATE
    assert (folder / f"{name}.svg").read_bytes() == drawing, REGENERATE


def test_the_samples_are_built_as_they_say() -> None:
    contents = {
        build: (SAMPLES / name / f"{name}.svg").read_bytes() for build, name in BUILDS.items()
    }
    assert b"mm" in contents["real text"]
    assert b"<tspan" in contents["real text"]
    assert b'opacity="0"' in contents["hidden text"]
    assert b"\r\n" in contents["hidden text"]
    assert b"<text" not in contents["outlines"]
    assert b"data-name=" in contents["outlines"]
    assert b"viewBox" not in contents["outlines"]
    assert not contents["outlines"].endswith(b"\n")


@pytest.mark.referee
@pytest.mark.parametrize("name", BUILDS.values())
def test_ngspice_sees_the_same_circuit(name: str) -> None:
    """ngspice 39, on the netlist before and after [P: run beside]."""
    before, after = (
        ngspice.sweep(SAMPLES / name / folder / f"{name}.cir", "out,0", "ac dec 5 1 1e7")
        for folder in (".", "annotated")
    )
    assert np.array_equal(before.response, after.response)


def test_marks_cover_nothing(look: Look) -> None:
    """On the picture: no dark pixel of the drawing's own changes where a designator or value is.

    Lines may be crossed by the fine line that ties a mark to its part, so of them a few change.
    """
    names = list(BUILDS.values())
    drawings = [SAMPLES / n / folder / f"{n}.svg" for n in names for folder in (".", "annotated")]
    pictures = look(drawings, (1000, 600))
    for name, before, after in zip(names, pictures[::2], pictures[1::2], strict=True):
        dark = before.sum(axis=2) < 500
        changed = np.abs(after - before).sum(axis=2) > 60
        assert changed.sum() > 5000, name  # the marks are there
        assert (dark & changed).sum() < 0.01 * dark.sum(), name
        for window in _text_windows(name):
            assert not (dark & changed)[window].any(), (name, window)


def _text_windows(name: str) -> list[tuple[slice, slice]]:
    """Windows of the picture that hold text, from the drawing read as the module reads it."""
    path = SAMPLES / name / f"{name}.svg"
    sheet = scan(path.read_bytes(), str(path))
    scale = {"common-emitter": 96 / 25.4}.get(name, 1.0)
    boxes = [label.box for label in sheet.labels if label.size > 0]
    return [
        (
            slice(max(int(box.top * scale), 0), min(int(box.bottom * scale) + 1, 600)),
            slice(max(int(box.left * scale), 0), min(int(box.right * scale) + 1, 1000)),
        )
        for box in boxes
    ]
