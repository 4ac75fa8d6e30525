"""How coarse may a micrograph be? The lowest level of a round InP wire, 24 nm wide, traced on pixels of 0.25 to 4 nm.

    python examples/traced_outline.py [PICTURE.png]

An outline is read from a file of points, as programs for pictures write it; the steps of its pixels are smoothed away,
and its area is kept. Closed form for the true wire with hard walls: E = hbar^2 j01^2/(2 m R^2).
"""

import sys
import tempfile
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import e, hbar, m_e
from scipy.special import jn_zeros

import wiresolve as ws

RADIUS_nm, CENTER_nm, MASS, PIXELS_nm = 12.0, (31.4, 28.2), 0.0795, (0.25, 0.5, 1, 2, 4)
WIRE_FILE = """
title = "Traced"
[section]
shape = "outline"
file = "outline.csv"
scale = "{0} nm"
material = "InP"
[materials.InP]
electron_mass = {1}
source = "J. Appl. Phys. 89, 5815 (2001)"
[carriers]
temperature = "77 K"
[accuracy]
subbands = 1
energy = "0.001 meV"
"""


def traced(pixel_nm: float) -> np.ndarray:
    """The pixels along the rim, each once, in their order."""
    angle = np.linspace(0, 2 * np.pi, 2000, endpoint=False)
    rim_nm = np.add(CENTER_nm, RADIUS_nm * np.column_stack([np.cos(angle), np.sin(angle)]))
    pixels = np.rint(rim_nm / pixel_nm).astype(int)
    return pixels[np.sort(np.unique(pixels, axis=0, return_index=True)[1])]


def solved(pixel_nm: float) -> ws.Result:
    with tempfile.TemporaryDirectory() as folder:
        np.savetxt(Path(folder) / "outline.csv", traced(pixel_nm), "%d", ",", header="x,y", comments="")
        (Path(folder) / "wire.toml").write_text(WIRE_FILE.format(pixel_nm, MASS), encoding="utf-8")
        return ws.solve(ws.load(Path(folder) / "wire.toml"))


def main(picture: str | None = None) -> tuple[dict[float, float], float]:
    closed_meV = 1e3 * hbar**2 / (2 * MASS * m_e * e) * (jn_zeros(0, 1)[0] / RADIUS_nm * 1e9) ** 2
    results = {pixel: solved(pixel) for pixel in PIXELS_nm}
    found_meV = {pixel: 1e3 * result.energies_eV[0] for pixel, result in results.items()}
    for pixel, level in found_meV.items():
        off = f"{level / closed_meV - 1:+.2%} from {closed_meV:.3f} meV"
        print(f"pixels of {pixel:g} nm: {len(traced(pixel))} points, {level:.3f} meV, {off}")
    if picture:
        figure = Figure(figsize=(7.5, 2.9), dpi=150, layout="constrained")
        for axes, pixel in zip(figure.subplots(1, 3, sharey=True), PIXELS_nm[-3:], strict=True):
            axes.tricontourf(*results[pixel].mesh.points.T, results[pixel].modes[:, 0] ** 2, levels=24, cmap="cividis")
            axes.plot(*(traced(pixel) * pixel - CENTER_nm).T, "s", ms=2, color="#D55E00")
            axes.set(aspect="equal", xlim=(-14, 14), xlabel="x (nm)", ylim=(-14, 14))
            axes.set_title(f"{pixel:g} nm: {found_meV[pixel]:.2f} meV")
        figure.axes[0].set_ylabel("y (nm)")
        figure.savefig(picture)
    return found_meV, closed_meV


if __name__ == "__main__":
    main(*sys.argv[1:2])
