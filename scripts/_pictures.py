"""Draws the pictures in examples/pictures: core_shell.png, with which the README opens, and one for each example.

    python scripts/_pictures.py [NAME ...]

The opening picture is what the program finds for geometries/core_shell_gaas.toml: section and mesh, the modes with
their energies, and the conductance whose steps they open.
"""

from __future__ import annotations

import argparse
import os
import runpy
import sys
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np
from matplotlib.collections import LineCollection
from matplotlib.patches import Rectangle
from PIL import Image

import wiresolve as ws
from wiresolve.output.canvas import FAINT, INK, PAGE_MM, bare, canvas, coloured, thermal_colour
from wiresolve.output.raster import edges, outline, raster
from wiresolve.output.style import style
from wiresolve.output.tables import level_energy_eV, levels, states, with_bar
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS

REPOSITORY = Path(__file__).resolve().parents[1]
PICTURES = REPOSITORY / "examples" / "pictures"
FILLS = ("#6bacd3", "#f3ce85")
HIGH_MM, SECTION_MM, MODE_MM, LEFT_MM = 92.0, 52.0, 15.2, 63.0


def core_shell(path: Path) -> None:
    """Solve geometries/core_shell_gaas.toml and draw it."""
    result = ws.solve(ws.load(REPOSITORY / "geometries" / "core_shell_gaas.toml"))
    with style():
        figure, rect = canvas(PAGE_MM, HIGH_MM)
        half = float(np.abs(result.mesh.points).max()) * 1.01
        found = edges(result.mesh)

        axes = rect(1, 30, SECTION_MM, SECTION_MM)
        bare(axes, (-half, half, -half, half))
        names = [region.name for region in result.mesh.regions]
        for name, fill in zip(("layer 1", "core"), FILLS[::-1], strict=True):
            outer = max(outline(found, names.index(name)), key=lambda loop: float(np.ptp(loop[:, 0])))
            axes.fill(*outer.T, color=fill, lw=0)
        axes.add_collection(LineCollection(list(found.lines[~found.on_outline]), colors="white", lw=0.4))
        axes.add_collection(LineCollection(list(found.lines[found.on_outline]), colors=INK, lw=0.7))
        figure.text(1 / PAGE_MM, 1 - 5 / HIGH_MM, result.problem.title, fontsize=9, va="center")
        key = rect(1, 0, SECTION_MM, 28)
        bare(key, (0, SECTION_MM, 0, 28))
        for row, (name, fill) in enumerate(zip(("core", "layer 1"), FILLS, strict=True)):
            region = result.mesh.regions[names.index(name)]
            key.add_patch(Rectangle((1, 18.6 - 5 * row), 4.6, 2.8, fc=fill, ec=INK, lw=0.5))
            key.text(8, 20 - 5 * row, f"{name}: {region.material}", va="center")
        length = 5.0 * SECTION_MM / (2 * half)
        key.plot([1, 1 + length], [25.5, 25.5], color=INK, lw=1.6, solid_capstyle="butt")
        key.text(3 + length, 25.4, "5 nm", va="center")
        key.text(1, 9.4, f"{result.summary.cells} curved cells, {result.summary.unknowns} unknowns", va="center")

        stairs = rect(LEFT_MM + 8, 11, PAGE_MM - LEFT_MM - 25, 47)
        window = 1e3 * (float(result.energies_eV[0]) - 0.02), 1e3 * float(result.energies_eV[-1])
        warm = [curve for curve in result.conductance if curve.temperature_K > 0]
        for number, curve in enumerate(warm):
            label = f"{curve.temperature_K:g} K"
            stairs.plot(1e3 * curve.fermi_eV, curve.values, color=thermal_colour(number), lw=1.6, label=label)
        stairs.grid(axis="y", color="#e4e4e4", lw=0.5)
        stairs.set_axisbelow(True)
        stairs.set(xlim=window, ylim=(0, 6), yticks=range(7), xlabel="Fermi level (meV)")
        stairs.set_ylabel("Conductance (G0 = 2e²/h)")
        stairs.legend(loc="lower right", bbox_to_anchor=(0.84, 0.0))
        other = stairs.twinx()
        other.spines["right"].set_visible(True)
        other.set_ylim(0, 6e6 * CONDUCTANCE_QUANTUM_SIEMENS)
        other.set_ylabel("Conductance (µS)")

        pixels = raster(result.mesh, (-half, half, -half, half), round(MODE_MM / 25.4 * figure.dpi))
        groups = levels(result.subbands)
        count, pair_gap = len(result.subbands), 0.8
        taken = count * MODE_MM + (count - len(groups)) * pair_gap
        group_gap = (PAGE_MM - 7 - LEFT_MM - taken) / (len(groups) - 1)
        left, bottom = LEFT_MM, 67.0
        for group in groups:
            width = len(group) * (MODE_MM + pair_gap) - pair_gap
            for place, subband in enumerate(group):
                panel = rect(left + place * (MODE_MM + pair_gap), bottom, MODE_MM, MODE_MM)
                image = coloured(pixels.image(result.modes[:, subband.index - 1]))
                panel.imshow(image, origin="lower", extent=pixels.extent, interpolation="nearest")
                panel.add_collection(LineCollection(list(found.lines[found.on_outline]), colors=INK, lw=0.4))
                bare(panel, pixels.extent)
            middle, energy = (left + width / 2) / PAGE_MM, 1e3 * level_energy_eV(group)
            text = f"{with_bar(energy, 1e3 * max(s.error_eV for s in group))} meV\n{states(group)} states"
            figure.text(middle, 85.6 / HIGH_MM, text, ha="center", va="center", fontsize=6.3)
            arrow = {"arrowstyle": "-", "color": FAINT, "lw": 0.6, "shrinkA": 0, "shrinkB": 0}
            start = middle, (bottom - 1) / HIGH_MM
            stairs.annotate("", (energy, 6), start, textcoords="figure fraction", arrowprops=arrow)
            stairs.axvline(energy, color=FAINT, lw=0.5, ls=(0, (4, 3)), zorder=0)
            left += width + group_gap
        figure.savefig(path)


def example(path: Path) -> None:
    """Run the example of the picture's name."""
    runpy.run_path(str(REPOSITORY / "examples" / f"{path.stem}.py"))["main"](str(path))


def shrink(path: Path) -> None:
    """Write a picture with 256 colours, a third of its size, and without what tells the writer's version."""
    with Image.open(path) as image:
        few = image.convert("RGB").quantize(256, method=Image.Quantize.MEDIANCUT, kmeans=3, dither=Image.Dither.NONE)
        resolution = image.info["dpi"]
    few.save(path, optimize=True, dpi=resolution)


def main() -> None:
    """Draw the named pictures, or all."""
    examples = sorted(path.stem for path in (REPOSITORY / "examples").glob("*.py"))
    words = argparse.ArgumentParser(description="Draws the pictures in examples/pictures anew.")
    words.add_argument("names", nargs="*", metavar="NAME", help=f"core_shell, {', '.join(examples)}; all if none")
    names = words.parse_args().names or ["core_shell", *examples]
    if unknown := sorted({*names} - {"core_shell", *examples}):
        words.error(f"there is no picture {', '.join(unknown)}")
    for name in names:
        path = PICTURES / f"{name}.png"
        core_shell(path) if name == "core_shell" else example(path)
        shrink(path)
        print(f"{path.relative_to(REPOSITORY)}: {path.stat().st_size / 1e3:.0f} kB", file=sys.stderr)


if __name__ == "__main__":
    main()
