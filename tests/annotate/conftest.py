"""The browser that shows what a marked drawing looks like."""

from __future__ import annotations

import os
import shutil
import subprocess
from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

BROWSERS = ("chromium", "chromium-browser")
Picture = NDArray[np.int64]
Look = Callable[[Sequence[Path], tuple[int, int]], list[Picture]]


@pytest.fixture(scope="session")
def look(tmp_path_factory: pytest.TempPathFactory) -> Look:
    """Pictures of SVG files, (rows, columns, 3) in 0…255, from one run of a browser.

    Skipped without a browser, but never in CI.
    """
    browser = next(filter(None, map(shutil.which, BROWSERS)), None)
    if browser is None:
        if os.environ.get("CI", "").lower() == "true":
            pytest.fail("chromium is not installed, and in CI no look at a drawing may be skipped")
        pytest.skip("chromium is not installed")
    image = pytest.importorskip("PIL.Image")

    def pictures(drawings: Sequence[Path], size: tuple[int, int]) -> list[Picture]:
        folder = tmp_path_factory.mktemp("look")
        place = f"display:block;width:{size[0]}px;height:{size[1]}px;object-fit:none;"
        shown = "".join(
            f'<img style="{place}object-position:0 0" src="{drawing.resolve().as_uri()}">'
            for drawing in drawings
        )
        page = folder / "page.html"
        page.write_text(f'<body style="margin:0;background:white">{shown}', encoding="utf-8")
        whole = folder / "page.png"
        subprocess.run(
            [
                browser,
                "--headless",
                "--no-sandbox",
                "--disable-gpu",
                "--hide-scrollbars",
                f"--window-size={size[0]},{size[1] * len(drawings)}",
                f"--user-data-dir={folder / 'profile'}",
                f"--screenshot={whole}",
                page.as_uri(),
            ],
            check=True,
            capture_output=True,
            timeout=180,
        )
        with image.open(whole) as opened:
            pixels = np.asarray(opened.convert("RGB"), dtype=np.int64)
        assert pixels.shape == (size[1] * len(drawings), size[0], 3)
        return list(pixels.reshape(len(drawings), size[1], size[0], 3))

    return pictures
