"""Proof of an installation: packages, the system libraries that Gmsh loads, and wires whose energies are known."""

from __future__ import annotations

import importlib.metadata
import platform
import re
import subprocess
import sys
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

PACKAGES = (
    "numpy",
    "scipy",
    "scikit-fem",
    "meshio",
    "gmsh",
    "vtk",
    "pyvista",
    "matplotlib",
    "click",
    "threadpoolctl",
    "rich",
)
OPTIONAL = {"pandas": "to_pandas()", "xarray": "to_xarray()"}
"""Packages that only something of its own needs."""
GMSH_LIBRARIES = "libglu1-mesa libxcursor1 libxft2 libxinerama1 libxrender1 libgomp1 libgl1 libegl1"
"""Debian packages with the system libraries that the gmsh wheel loads, and VTK where it draws."""
INSTALL_LINE = f"as root on Debian or Ubuntu: apt-get install --yes {GMSH_LIBRARIES}"
START_GMSH = (sys.executable, "-c", "import gmsh; gmsh.initialize([], readConfigFiles=False, interruptible=False)")


@dataclass(frozen=True)
class Finding:
    """A line of the report and whether it is good news."""

    ok: bool
    text: str


def examine() -> Iterator[Finding]:
    """Findings one by one: interpreter, packages, libraries, and then the eight wires where Gmsh starts."""
    new_enough = sys.version_info >= (3, 11)
    yield Finding(new_enough, f"Python {platform.python_version()}{'' if new_enough else ', and 3.11 is needed'}")
    complete = True
    for name in PACKAGES:
        try:
            yield Finding(True, f"{name} {importlib.metadata.version(name)}")
        except importlib.metadata.PackageNotFoundError:
            complete = False
            yield Finding(False, f"{name} is missing: pip install {name}")
    for name, needs in OPTIONAL.items():
        try:
            yield Finding(True, f"{name} {importlib.metadata.version(name)}")
        except importlib.metadata.PackageNotFoundError:
            yield Finding(True, f"{name} is not installed: only {needs} needs it")
    gmsh = gmsh_starts()
    yield gmsh
    if complete and gmsh.ok:
        from wiresolve.commands.known_wires import KNOWN_WIRES, compare

        for make in KNOWN_WIRES:
            ok, text = compare(make())
            yield Finding(ok, text)


def gmsh_starts(command: Sequence[str] = START_GMSH) -> Finding:
    """Whether Gmsh starts: tried in another process, because a missing library can end the one that loads it."""
    try:
        run = subprocess.run(command, capture_output=True, text=True, errors="replace", timeout=60, check=False)
    except (OSError, subprocess.TimeoutExpired) as fault:
        return Finding(False, f"Gmsh could not be tried: {fault}")
    if run.returncode == 0:
        return Finding(True, "Gmsh starts, its system libraries are there")
    library = missing_library(run.stderr)
    if library is not None:
        return Finding(False, f"Gmsh needs the system library {library}; which is missing; {INSTALL_LINE}")
    last = (run.stderr.strip().splitlines() or [f"it ended with code {run.returncode}"])[-1]
    return Finding(False, f"Gmsh does not start ({last}); if it lacks system libraries, {INSTALL_LINE}")


def missing_library(message: str) -> str | None:
    """The shared library that a loader's message says is missing, None where it speaks of something else."""
    found = re.search(r"(lib[\w.+-]*\.so[\w.]*): cannot open shared object file", message)
    return found[1] if found else None
