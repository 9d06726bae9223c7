"""The three sample drawings, of different build, with their annotated results.

``real text``: text elements in millimetres with a style sheet and spans for subscripts.
``hidden text``: invisible text beside glyphs drawn in strokes, one designator turned.
``outlines``: no text at all, names in attributes of the symbols, on a sheet turned upside down.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import ngspice
from annotate.conftest import Look
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


TURNED = {
    "rotated": ("148mm", "210mm", "0 0 148 210", "translate(148 0) rotate(90)"),
    "mirrored": ("210mm", "148mm", "0 0 210 148", "matrix(-1 0 0 1 210 0)"),
}
"""The sheet with real text in another position: its size, and the map of all that is on it."""


def _turned(folder: Path, how: str) -> Path:
    width, height, view_box, place = TURNED[how]
    plain = (SAMPLES / "common-emitter" / "common-emitter.svg").read_text(encoding="utf-8")
    inside = plain[plain.index("<title>") : plain.rindex("</svg>")]
    path = folder / f"{how}.svg"
    path.write_text(
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{width}" height="{height}" '
        f'viewBox="{view_box}"><g transform="{place}">{inside}</g></svg>',
        encoding="utf-8",
    )
    return path


def test_marks_cover_nothing(look: Look, tmp_path: Path) -> None:
    """On the picture: no dark pixel of the drawing's own changes where a designator or value is.

    Lines may be crossed by the fine line that ties a mark to its part, so of them a few change.
    """
    plain = [SAMPLES / name / f"{name}.svg" for name in BUILDS.values()]
    marked = [path.parent / "annotated" / path.name for path in plain]
    review = analyze(read(SAMPLES / "common-emitter" / "common-emitter.cir")).review
    for path in (_turned(tmp_path, how) for how in TURNED):
        (drawing,), _ = annotate_drawings(read_drawings([str(path)]), review)
        plain.append(path)
        marked.append(tmp_path / f"marked-{path.name}")
        marked[-1].write_bytes(drawing.content)
    pictures = look([*plain, *marked], (1000, 800))
    for path, before, after in zip(plain, pictures, pictures[len(plain) :], strict=False):
        dark = before.sum(axis=2) < 500
        changed = np.abs(after - before).sum(axis=2) > 60
        assert changed.sum() > 5000, path  # the marks are there
        assert (dark & changed).sum() < 0.015 * dark.sum(), path
        for window in _text_windows(path):
            assert not (dark & changed)[window].any(), (path, window)


def _text_windows(path: Path) -> list[tuple[slice, slice]]:
    """Windows of the picture that hold text, from the drawing read as the module reads it."""
    content = path.read_bytes()
    scale = 96 / 25.4 if b"mm" in content else 1.0
    boxes = [label.box for label in scan(content, str(path)).labels if label.size > 0]
    return [
        (
            slice(max(int(box.top * scale), 0), int(box.bottom * scale) + 1),
            slice(max(int(box.left * scale), 0), int(box.right * scale) + 1),
        )
        for box in boxes
    ]
