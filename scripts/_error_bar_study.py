"""How often error bars hold, and how wide they are, on sections of many kinds.

    scripts/error_bar_study [--quick] [NAME ...]

Every section is solved for 1, 0.1 and 0.01 meV, as a user would, and once for 3e-6 meV as the reference (sections with
a closed form agree with that reference in tests/truth). The bar is BAR_FACTOR times the fall of the energy from degree
4 to degree 6. The factor was chosen on the first of every two plain sections; the figures of the other half did not
choose it, nor did those of the semiconductors: valleys whose masses depend on the direction and lean against the
section, masses that grow with energy, traced outlines. Printed are the coverage, the median of bar / true error and the
worst shortfall. A NAME is a part of the names of the sections that are wanted.
"""

from __future__ import annotations

import argparse
import os
import sys
import tempfile
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
import numpy as np

from wiresolve.describe.wirefile import parse
from wiresolve.fem import estimate
from wiresolve.physics.listing import listing
from wiresolve.physics.subbands import Certified, certify
from wiresolve.physics.wire import Wire

ACCURACIES_eV = (1e-3, 1e-4, 1e-5)
REFERENCE_eV = 3e-9
PROBE = '[materials.p]\nelectron_mass = 0.05\nconduction_edge = "0 eV"\n'
BARRIER = '[materials.b]\nelectron_mass = 0.09\nconduction_edge = "0.3 eV"\n'
HEAVY = '[materials.h]\nelectron_mass = 0.25\nconduction_edge = "0.45 eV"\n'
SKEW = '[materials.t]\ninverse_mass = [[20, 6, 0], [6, 5, 0], [0, 0, 10]]\nconduction_edge = "0 eV"\n'
OBLIQUE = '[materials.t]\ninverse_mass = [[22, 0, 0], [0, 1.1, 0], [0, 0, 5]]\nconduction_edge = "0 eV"\n'
L_POINTS = "[[0, 0], [9, 0], [9, 9], [-9, 9], [-9, -9], [0, -9]]"
T_POINTS = "[[-3, -8], [3, -8], [3, 0], [9, 0], [9, 5], [-9, 5], [-9, 0], [-3, 0]]"
U_POINTS = "[[-9, -6], [9, -6], [9, 6], [4, 6], [4, -1], [-4, -1], [-4, 6], [-9, 6]]"
NOTCH = "[[0, 0], [20, 0], [20, 10], [11, 10], [10, 3], [9, 10], [0, 10]]"


def shape(kind: str, material: str = "p", **keys: str) -> str:
    rows = [f'shape = "{kind}"', f'material = "{material}"', *(f"{key} = {value}" for key, value in keys.items())]
    return "\n".join(rows) + "\n"


def layer(thickness: float, material: str) -> str:
    return f'[[section.layers]]\nthickness = "{thickness} nm"\nmaterial = "{material}"\n'


def patch(text: str) -> str:
    return "[[section.patches]]\n" + text


def nm(value: float) -> str:
    return f'"{value} nm"'


def points(text: str, material: str = "p") -> str:
    return shape("polygon", material, unit='"nm"', points=text)


FIELD = '[potential]\nfield = ["0.02 V/nm", "-0.01 V/nm"]\n'
WELL = '[potential]\nharmonic = {x = "40 meV", y = "25 meV"}\n'
BOTH = PROBE + BARRIER
CASES: dict[str, str] = {
    "circle": shape("circle", diameter=nm(14)) + PROBE,
    "ellipse 3:1": shape("ellipse", width=nm(24), height=nm(8)) + PROBE,
    "rectangle": shape("rectangle", width=nm(17), height=nm(9)) + PROBE,
    "square with round corners": shape("rectangle", width=nm(13), height=nm(13), corner_radius=nm(2)) + PROBE,
    "hexagon": shape("hexagon", across_flats=nm(14)) + PROBE,
    "triangle": shape("triangle", side=nm(18)) + PROBE,
    "trapezoid": shape("trapezoid", bottom=nm(20), top=nm(9), height=nm(11)) + PROBE,
    "flat triangle": shape("triangle", base=nm(30), height=nm(8)) + PROBE,
    "L": points(L_POINTS) + PROBE,
    "T": points(T_POINTS) + PROBE,
    "U": points(U_POINTS) + PROBE,
    "notch": points(NOTCH) + PROBE,
    "sheet": shape("rectangle", width=nm(40), height=nm(5)) + PROBE,
    "triangle, small radius": shape("triangle", side=nm(18), corner_radius=nm(0.8)) + PROBE,
    "tube": shape("circle", "void", diameter=nm(8)) + layer(4, "p") + PROBE,
    "thin tube": shape("circle", "void", diameter=nm(20)) + layer(1, "p") + PROBE,
    "round core and shell": shape("circle", diameter=nm(12)) + layer(6, "b") + BOTH,
    "round core, thin shell": shape("circle", diameter=nm(16)) + layer(0.6, "b") + BOTH,
    "hexagonal core and shell": shape("hexagon", across_flats=nm(12)) + layer(6, "b") + BOTH,
    "hexagonal core, heavy shell": shape("hexagon", across_flats=nm(12)) + layer(5, "h") + PROBE + HEAVY,
    "rectangular core and shell": shape("rectangle", width=nm(14), height=nm(7)) + layer(5, "b") + BOTH,
    "triangular core, heavy shell": shape("triangle", side=nm(16)) + layer(4, "h") + PROBE + HEAVY,
    "two shells": shape("hexagon", "b", across_flats=nm(10)) + layer(4, "p") + layer(4, "b") + BOTH,
    "round carriers in a shell": shape("circle", "b", diameter=nm(10)) + layer(5, "p") + layer(3, "h") + BOTH + HEAVY,
    "core off centre": shape("circle", "b", diameter=nm(24))
    + patch(shape("circle", diameter=nm(11)) + 'center = ["4 nm", "2 nm"]\n')
    + BOTH,
    "round core in a hexagon": shape("hexagon", "b", across_flats=nm(24))
    + patch(shape("circle", diameter=nm(13)))
    + BOTH,
    "fin on a substrate": shape("rectangle", "b", width=nm(30), height=nm(10))
    + patch(shape("rectangle", width=nm(7), height=nm(12)) + 'center = ["0 nm", "11 nm"]\n')
    + BOTH,
    "square core, turned": shape("circle", "h", diameter=nm(26))
    + patch(shape("rectangle", width=nm(11), height=nm(11), rotation='"25 deg"'))
    + PROBE
    + HEAVY,
    "circle, skew mass": shape("circle", "t", diameter=nm(15)) + SKEW,
    "hexagon, skew mass": shape("hexagon", "t", across_flats=nm(15)) + SKEW,
    "rectangle, 20:1 mass": shape("rectangle", "t", width=nm(16), height=nm(9)) + OBLIQUE,
    "L, skew mass": points(L_POINTS, "t") + SKEW,
    "circle in a field": shape("circle", diameter=nm(18)) + PROBE + FIELD,
    "hexagon in a field": shape("hexagon", across_flats=nm(18)) + PROBE + FIELD,
    "core and shell in a field": shape("circle", diameter=nm(12)) + layer(6, "b") + BOTH + FIELD,
    "harmonic well": shape("circle", diameter=nm(60)) + PROBE + WELL,
    "L in a harmonic well": points(L_POINTS) + PROBE + WELL,
    "round hole in a square": shape("rectangle", width=nm(20), height=nm(20))
    + patch(shape("circle", "void", diameter=nm(7)))
    + PROBE,
    "two stacked sheets": shape("rectangle", "b", width=nm(26), height=nm(22))
    + patch(shape("rectangle", width=nm(18), height=nm(5)) + 'center = ["0 nm", "5 nm"]\n')
    + patch(shape("rectangle", width=nm(18), height=nm(5)) + 'center = ["0 nm", "-5 nm"]\n')
    + BOTH,
    "half shell": shape("hexagon", across_flats=nm(14))
    + '[[section.layers]]\nthickness = "4 nm"\nmaterial = "b"\nsides = {bottom = "0 nm"}\n'
    + BOTH,
}


SILICON = "[orientation]\naxis = [1, 1, 0]\nup = [0, 0, 1]\n"
TILTED = "[orientation]\naxis = [1, 1, -2]\nup = [1, 1, 1]\n"
CUBE = "[orientation]\naxis = [1, 0, 0]\nup = [0, 0, 1]\n"


def valley(name: str, edge: float, kind: str, axis: str, masses: tuple[float, float], alpha: float = 0.0) -> str:
    """A material with one kind of valley that has a direction."""
    row = f'name = "{kind}", axis = {axis}, longitudinal_mass = {masses[0]}, transverse_mass = {masses[1]}'
    ends = "zone_boundary = true" if kind == "L" else "zone_boundary = false"
    grown = f", nonparabolicity = {alpha}" if alpha else ""
    crystal = 'crystal = "diamond"\n'
    return f'[materials.{name}]\n{crystal}conduction_edge = "{edge} eV"\nvalleys = [{{{row}, {ends}{grown}}}]\n'


def growing(name: str, mass: float, alpha: float, edge: float) -> str:
    return f'[materials.{name}]\nelectron_mass = {mass}\nnonparabolicity = {alpha}\nconduction_edge = "{edge} eV"\n'


def skewed(name: str, rows: str, edge: float, alpha: float = 0.0) -> str:
    return f'[materials.{name}]\ninverse_mass = {rows}\nnonparabolicity = {alpha}\nconduction_edge = "{edge} eV"\n'


DELTA_IN = valley("a", 0.0, "Delta", "[1, 0, 0]", (0.92, 0.19))
DELTA_OUT = valley("b", 0.2, "Delta", "[1, 0, 0]", (1.4, 0.4))
L_IN = valley("a", 0.0, "L", "[1, 1, 1]", (1.59, 0.0815))
L_OUT = valley("b", 0.3, "L", "[1, 1, 1]", (0.8, 0.25))
LEFT = skewed("a", "[[12, -5, 2], [-5, 8, 1], [2, 1, 6]]", 0.0)
RIGHT = skewed("b", "[[3, 1.5, 0.5], [1.5, 4, -1], [0.5, -1, 5]]", 0.3)
STEEP = skewed("a", "[[11, -9, 1], [-9, 9, 0], [1, 0, 6]]", 0.0)
STEEP += skewed("b", "[[3, 2.5, 0.5], [2.5, 4, -1], [0.5, -1, 5]]", 0.2)
SLIT = shape("circle", "a", diameter=nm(20))
SLIT += patch(shape("rectangle", "void", width=nm(10), height=nm(0.2)) + 'center = ["5.5 nm", "0 nm"]\n')
INAS_INP = growing("a", 0.024, 2.1, 0.0) + growing("b", 0.0795, 0.6, 0.6)
GAAS_ALGAAS = growing("a", 0.067, 0.6, 0.0) + growing("b", 0.092, 0.5, 0.25)
WEAK_FIELD = '[potential]\nfield = ["0.006 V/nm", "-0.003 V/nm"]\n'
TRACED = {
    "edges.csv": "-9.1 -4.2, 0.4 -8.3, 8.8 -5.1, 10.2 1.9, 5.6 7.7, -3.3 8.9, -9.7 3.6",
    "waist.csv": "-12 -5, -4 -6, 0 -3, 5 -6, 12 -4.5, 13 3, 6 6.5, 0.5 3.2, -5 6, -12.5 4",
    "pixels.csv": ", ".join(
        f"{round(11 * np.cos(a) * (1 + 0.09 * np.cos(3 * a)))} {round(9 * np.sin(a) * (1 + 0.09 * np.cos(3 * a)))}"
        for a in 2 * np.pi * np.arange(56) / 56
    ),
}
"""Outlines in nm: two polygons, and one that is traced on pixels of 1 nm."""


def outline(name: str, pixel: float, material: str = "a") -> str:
    return shape("outline", material, file=f'"{name}"', unit='"nm"', pixel_size=nm(pixel))


SEMICONDUCTORS: dict[str, str] = {
    "Si circle": shape("circle", "Si", diameter=nm(6)) + SILICON,
    "Si circle along [112]": shape("circle", "Si", diameter=nm(6)) + TILTED,
    "Si rectangle": shape("rectangle", "Si", width=nm(9), height=nm(5)) + SILICON,
    "Si L": points(L_POINTS, "Si") + SILICON,
    "Si T along [112]": points(T_POINTS, "Si") + TILTED,
    "Ge circle": shape("circle", "Ge", diameter=nm(8)) + SILICON,
    "Ge rectangle": shape("rectangle", "Ge", width=nm(5), height=nm(11)) + CUBE,
    "Ge trapezoid along [112]": shape("trapezoid", "Ge", bottom=nm(9), top=nm(5), height=nm(9)) + TILTED,
    "Ge L": points(L_POINTS, "Ge") + CUBE,
    "Delta, round core and shell": shape("circle", "a", diameter=nm(7))
    + layer(3, "b")
    + DELTA_IN
    + DELTA_OUT
    + SILICON,
    "Delta, hexagonal core and shell": shape("hexagon", "a", across_flats=nm(7))
    + layer(3, "b")
    + DELTA_IN
    + DELTA_OUT
    + TILTED,
    "L, rectangular core and shell": shape("rectangle", "a", width=nm(6), height=nm(9))
    + layer(3, "b")
    + L_IN
    + L_OUT
    + SILICON,
    "shear jump at a round core": shape("circle", "a", diameter=nm(10)) + layer(4, "b") + LEFT + RIGHT,
    "shear jump at a hexagonal core": shape("hexagon", "a", across_flats=nm(10)) + layer(4, "b") + LEFT + RIGHT,
    "shear jump on a fin": shape("rectangle", "b", width=nm(22), height=nm(7))
    + patch(shape("rectangle", "a", width=nm(7), height=nm(10)) + 'center = ["0 nm", "8.5 nm"]\n')
    + LEFT
    + RIGHT,
    "shear jump at a thin shell": shape("circle", "a", diameter=nm(12)) + layer(1, "b") + LEFT + RIGHT,
    "shear jump, barrier goes on": shape("rectangle", "a", width=nm(8), height=nm(6))
    + 'outside = "b"\n'
    + LEFT
    + RIGHT,
    "steep tensors at a hexagonal core": shape("hexagon", "a", across_flats=nm(12)) + layer(4, "b") + STEEP,
    "steep tensors, triangle in a disk": shape("circle", "b", diameter=nm(24))
    + patch(shape("triangle", "a", side=nm(14)))
    + STEEP,
    "disk with a slit, steep tensor": SLIT + STEEP,
    "disk with a slit, growing mass": SLIT + growing("a", 0.024, 2.1, 0.0),
    "growing mass, hexagon": shape("hexagon", "a", across_flats=nm(20)) + growing("a", 0.024, 2.1, 0.0),
    "growing mass, L": points(L_POINTS, "a") + growing("a", 0.024, 2.1, 0.0),
    "growing mass, hexagon in a field": shape("hexagon", "a", across_flats=nm(20))
    + growing("a", 0.024, 2.1, 0.0)
    + WEAK_FIELD,
    "growing skew mass, triangle in a field": shape("triangle", "a", side=nm(20))
    + skewed("a", "[[20, 6, 0], [6, 8, 0], [0, 0, 10]]", 0.0, 1.5)
    + WEAK_FIELD,
    "growing masses, round core": shape("circle", "a", diameter=nm(16)) + layer(5, "b") + INAS_INP,
    "growing masses, hexagonal core": shape("hexagon", "a", across_flats=nm(16)) + layer(5, "b") + INAS_INP,
    "growing masses, hexagonal core in a field": shape("hexagon", "a", across_flats=nm(16))
    + layer(5, "b")
    + GAAS_ALGAAS
    + WEAK_FIELD,
    "growing masses, triangle in a disk": shape("circle", "b", diameter=nm(24))
    + patch(shape("triangle", "a", side=nm(14), rotation='"10 deg"') + 'center = ["1 nm", "2 nm"]\n')
    + INAS_INP,
    "growing masses, barrier goes on": shape("hexagon", "a", across_flats=nm(14)) + 'outside = "b"\n' + GAAS_ALGAAS,
    "growing masses, shear jump": shape("hexagon", "a", across_flats=nm(12))
    + layer(4, "b")
    + skewed("a", "[[20, 5, 2], [5, 12, 1], [2, 1, 10]]", 0.0, 1.0)
    + skewed("b", "[[8, -2, 1], [-2, 6, 0], [1, 0, 7]]", 0.3, 0.5),
    "traced polygon": outline("edges.csv", 0.0) + growing("a", 0.05, 0.0, 0.0),
    "traced polygon, Ge": outline("edges.csv", 0.0, "Ge") + SILICON,
    "traced waist": outline("waist.csv", 0.0) + growing("a", 0.05, 0.0, 0.0),
    "traced pixels": outline("pixels.csv", 1.0) + growing("a", 0.05, 0.0, 0.0),
    "traced pixels in a shell": outline("pixels.csv", 1.0) + layer(5, "b") + INAS_INP,
}


def wire(text: str, folder: Path = Path("."), count: int = 8) -> Wire:
    return Wire(
        parse(
            f'title = "study"\n[section]\n{text}[carriers]\ntemperature = "77 K"\n[accuracy]\nsubbands = {count}\n',
            folder,
        )
    )


def listed(ready: Wire, accuracy_eV: float) -> tuple[np.ndarray, np.ndarray, Certified]:
    """Energies and bars of the wanted states of all valleys together, at their minima over k."""
    certified = certify(ready.draw, ready.channels, ready.problem.accuracy.subbands, accuracy_eV)
    # Across a jump of the terms between axis and plane a minimum may lie off k = 0.
    leaning = any(np.abs(tensor[2, :2]).any() for group in ready.groups for tensor in group.inverse_mass.values())
    if leaning and len(ready.materials) > 1:
        found = listing(ready, certified)
        return found.energy_eV, found.bar_eV, certified
    return certified.energy_eV, certified.bar_eV, certified


def study(cases: dict[str, str], folder: Path) -> dict[str, tuple[np.ndarray, np.ndarray]]:
    """True errors and bars of each section's states, (accuracies, states)."""
    found = {}
    for name, text in cases.items():
        ready = wire(text, folder)
        truth, blur, reference = listed(ready, REFERENCE_eV)
        errors, bars, sizes = [], [], []
        for accuracy in ACCURACIES_eV:
            energy, bar, certified = listed(ready, accuracy)
            errors.append(np.maximum(np.abs(energy - truth), 1e-16))
            bars.append(bar + blur)
            sizes.append(unknowns(certified))
        found[name] = np.array(errors), np.array(bars)
        ratio = found[name][1] / found[name][0]
        print(
            f"{name:41s} {sizes!s:22s} reference {unknowns(reference):6d}, bar {blur.max():.0e} eV"
            f"   held {np.mean(ratio >= 1):6.1%}   median {np.median(ratio):6.2f}   lowest {ratio.min():5.2f}",
            flush=True,
        )
    return found


def unknowns(certified: Certified) -> int:
    return len(certified.solved[0].pencil.kept)


def summary(title: str, parts: list[tuple[np.ndarray, np.ndarray]]) -> bool:
    """Print the figures of some sections, and tell whether they are within the rule."""
    if not parts:
        return True
    ratio = np.concatenate([bars / errors for errors, bars in parts], axis=1)
    held, median, lowest = float(np.mean(ratio >= 1)), float(np.median(ratio)), float(ratio.min())
    print(f"{title}: {ratio.size} states, held {held:.1%}, median {median:.2f}, lowest {lowest:.2f}")
    for accuracy, row in zip(ACCURACIES_eV, ratio, strict=True):
        print(
            f"    at {1e3 * accuracy:g} meV: held {np.mean(row >= 1):.1%}, "
            f"median {np.median(row):.2f}, lowest {row.min():.2f}"
        )
    return held >= 0.99 and median <= 20 and lowest >= 0.5


def main() -> int:
    words = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    words.add_argument("--quick", action="store_true", help="every fourth section only")
    words.add_argument(
        "names", nargs="*", metavar="NAME", help="parts of the names of the wanted sections; all if none"
    )
    given = words.parse_args()

    def chosen(cases: dict[str, str]) -> dict[str, str]:
        wanted = {n: text for n, text in cases.items() if not given.names or any(part in n for part in given.names)}
        return dict(list(wanted.items())[:: 4 if given.quick else 1])

    with tempfile.TemporaryDirectory() as folder:
        for name, pairs in TRACED.items():
            rows = pairs.replace(" ", ",").replace(",,", "\n")
            (Path(folder) / name).write_text(f"x,y\n{rows}\n", encoding="utf-8")
        plain = list(study(chosen(CASES), Path(folder)).values())
        real = list(study(chosen(SEMICONDUCTORS), Path(folder)).values())
    print(f"\nbar = {estimate.BAR_FACTOR} x fall of the energy from degree 4 to degree 6; {len(plain + real)} sections")
    summary("plain sections that chose the factor", plain[::2])
    good = [summary("plain sections that did not", plain[1::2]), summary("semiconductors", real)]
    return 0 if all(good) else 1


if __name__ == "__main__":
    sys.exit(main())
