"""A wire file together with the files that it names, geometries included."""

from __future__ import annotations

from pathlib import Path

from wiresolve.describe import wirefile
from wiresolve.describe.input_files import InputFile
from wiresolve.describe.mesh_data import MeshData
from wiresolve.describe.problem import Problem


def load(path: str | Path) -> Problem:
    """The problem that a wire file describes.

    Raises
    ------
    InputError
        In one line that names the file and the key, for anything that cannot be used.
    MeshError
        A geometry that it names (STEP, BREP, a Gmsh script) cannot be meshed.
    """
    return wirefile.read(path, draw)


def draw(file: InputFile) -> MeshData:
    """What a geometry is meshed into; only here, because Gmsh is loaded for it."""
    from wiresolve.fem.cad_file import meshed

    return meshed(file)
