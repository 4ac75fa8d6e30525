"""Makes geometries/outline.csv: core and shell of an invented wire, as they are traced on the pixels of a picture.

    python scripts/make_example_outline.py [FILE.csv]

The wire is a slightly irregular hexagon with rounded corners; every point is the pixel into which the true one falls,
in pixels from the picture's upper left corner, y downwards.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

from wiresolve.describe.shapes import Polygon

TARGET = Path(__file__).resolve().parents[1] / "geometries" / "outline.csv"
PIXEL_nm, CENTER = 0.42, (96.0, 90.0)
CORE = Polygon(((13.4, -7.1), (13.1, 8.0), (-0.3, 15.2), (-13.2, 7.3), (-13.0, -7.9), (0.5, -15.0)), corner_radius_nm=3)
SHELL_nm = 9.0


def traced(points: np.ndarray) -> np.ndarray:
    """Pixels along a curve, each once, in their order."""
    pixels = np.rint(points / PIXEL_nm * (1, -1) + CENTER).astype(int)
    first = np.sort(np.unique(pixels, axis=0, return_index=True)[1])
    return np.asarray(pixels[first])


def main(target: Path) -> None:
    """Draw, trace and write."""
    rows = ["x_pixel,y_pixel"]
    for loop in (CORE.loop(), CORE.grown(SHELL_nm)):
        rows += [f"{x},{y}" for x, y in traced(loop.sample(60))] + [""]
    target.write_text("\n".join(rows), encoding="utf-8")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else TARGET)
