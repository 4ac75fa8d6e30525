"""Files changed at random: each gives a section, a potential or materials, or one line that says what is wrong."""

from __future__ import annotations

import math
import random
import re
from collections.abc import Callable
from pathlib import Path

import numpy as np

from tests import meshes
from wiresolve.describe import material_file
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.outline import Outline
from wiresolve.describe.potential_file import PotentialFile
from wiresolve.describe.section import Group, Layer, Section
from wiresolve.describe.shapes import Circle
from wiresolve.errors import InputError

NUMBERS = [
    b"0",
    b"1",
    b"-1",
    b"2",
    b"3",
    b"7",
    b"999999999",
    b"-5",
    b"0.5",
    b"nan",
    b"inf",
    b"1e300",
    b"1e-300",
    b"",
    b"x",
]
PIECES = [
    b"\n",
    b" ",
    b"-",
    b"9",
    b"e",
    b"\x00",
    b"\xff",
    b'"',
    b"$",
    b"<",
    b">",
    b";",
    b",",
    b"$EndNodes\n",
    b"1 2 3\n",
]
_NUMBER = re.compile(rb"-?\d+\.?\d*(?:e[+-]?\d+)?")


def changed(content: bytes, chance: random.Random) -> bytes:
    """A file with one to three changes: numbers, lines, single bytes, or its end cut off."""
    for _ in range(chance.randint(1, 3)):
        act = chance.random() if chance.random() < 0.5 else -1.0
        if act < 0 and (found := [m for m in _NUMBER.finditer(content, 120) if b"." in m[0]]):
            one = chance.choice(found)
            moved = float(one[0]) * chance.uniform(0.7, 1.3) + chance.choice([0, 0.01])
            content = content[: one.start()] + f"{moved:.6g}".encode() + content[one.end() :]
        elif act < 0.45 and (found := list(_NUMBER.finditer(content))):
            one = chance.choice(found)
            other = chance.choice(NUMBERS) if chance.random() < 0.6 else chance.choice(found)[0]
            content = content[: one.start()] + other + content[one.end() :]
        elif act < 0.65:
            lines = content.splitlines(keepends=True) or [b""]
            at, other_at = chance.randrange(len(lines)), chance.randrange(len(lines))
            if act < 0.5:
                del lines[at]
            elif act < 0.57:
                lines.insert(at, lines[other_at])
            else:
                lines[at], lines[other_at] = lines[other_at], lines[at]
            content = b"".join(lines)
        elif act < 0.9:
            at = chance.randrange(len(content) + 1)
            until = at + chance.choice([0, 1, 1, 3, 30])
            content = content[:at] + chance.choice([b"", *PIECES]) + content[until:]
        else:
            content = content[: chance.randrange(len(content) + 1)]
    return content


def tried(
    originals: list[tuple[str, bytes]], use: Callable[[InputFile], object], count: int, seed: int
) -> tuple[int, int]:
    """How many of the changed files could be used, and how many were refused, each in one line."""
    chance, used, refused = random.Random(seed), 0, 0
    for trial in range(count):
        name, content = originals[trial % len(originals)]
        content = changed(content, chance)
        said = ""
        try:
            use(InputFile(name, content))
        except InputError as error:
            said = str(error)
        assert "\n" not in said, content
        assert len(said) < 600, content
        used, refused = used + (not said), refused + bool(said)
    return used, refused


def imported(file: InputFile) -> None:
    shape = ImportedMesh(file, "nm")
    made = Section(shape, groups=tuple(Group(name, "one") for name in shape.group_names))
    assert sum(face.area_nm2 for face in shape.faces()) > 0
    assert all(math.isfinite(piece.loop.area) for piece in made.pieces())


def mesh_files(folder: Path) -> list[tuple[str, bytes]]:
    names = {1: "core", 2: "shell"}
    curved, quads = meshes.disk(10.0, 2, core_rings=1), meshes.rectangle(6.0, 4.0, 3, 2, kind="quad", split=1)
    found = [("s.msh", meshes.msh(arrays, names, version)) for arrays in (curved, quads) for version in ("4.1", "2.2")]
    for arrays, suffix, binary in ((curved, ".vtu", False), (quads, ".vtu", True), (curved, ".vtk", False)):
        meshes.by_meshio(arrays).write(folder / f"m{suffix}", binary=binary)
        found.append((f"s{suffix}", (folder / f"m{suffix}").read_bytes()))
    version_2 = meshes.by_meshio(quads, "gmsh:physical")
    version_2.cell_data["gmsh:geometrical"] = version_2.cell_data["gmsh:physical"]
    version_2.write(folder / "b.msh", file_format="gmsh22", binary=True)
    return [*found, ("b.msh", (folder / "b.msh").read_bytes())]


def test_meshes(tmp_path: Path) -> None:
    originals = mesh_files(tmp_path)
    for name, content in originals:
        imported(InputFile(name, content))
    used, refused = tried(originals, imported, 1200, 1)
    assert used > 100
    assert refused > 300


def test_outlines() -> None:
    angle = np.linspace(0, 2 * np.pi, 40, endpoint=False)
    ring = np.column_stack([np.cos(angle), np.sin(angle)])
    rows = ["\n".join(f"{x:.4f},{y:.4f}" for x, y in size * ring) for size in (10, 16)]
    originals = [("o.csv", "\n\n".join(rows).encode()), ("o.csv", b"x;y\n0;0\n40,5;0\n40;20\n0;20\n")]

    def use(file: InputFile) -> None:
        for pixel in (0.0, 1.0):
            made = Outline(file, scale_nm=1.0, pixel_nm=pixel)
            Section(made, "one", (Layer(None, "two"),) * (made.curve_count - 1))

    Outline(InputFile(*originals[0]), scale_nm=1.0, pixel_nm=1.0)
    used, refused = tried(originals, use, 400, 2)
    assert used > 20
    assert refused > 100


def test_potentials() -> None:
    line = np.linspace(-8, 8, 6)
    grid = [(x, y) for x in line for y in line]
    originals = [("p.csv", "\n".join(f"{x:.3f},{y:.3f},{0.01 * x:.4f}" for x, y in grid).encode())]

    def use(file: InputFile) -> None:
        energy = PotentialFile(file, "nm", "eV").over(Circle(12))(np.linspace(-5, 5, 20), np.zeros(20))
        assert np.isfinite(energy).all()

    used, refused = tried(originals, use, 300, 3)
    assert used > 50
    assert refused > 50


def test_materials_files(tmp_path: Path) -> None:
    text = b"""[Slow]
electron_mass = 0.4
conduction_edge = "0.1 eV"
permittivity = 11.7
source = "a notebook"
[Odd]
valleys = [{name = "X", axis = [0, 0, 1], longitudinal_mass = 0.9, transverse_mass = 0.2, edge = "0 eV"}]
conduction_edge = "0.2 eV"
source = "a notebook"
"""
    path = tmp_path / "own.toml"

    def use(file: InputFile) -> None:
        path.write_bytes(file.content)
        assert material_file.read("materials_file", path)

    use(InputFile("own.toml", text))
    used, refused = tried([("own.toml", text)], use, 500, 4)
    assert used > 20
    assert refused > 100
