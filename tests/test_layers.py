"""The package keeps its layers: a file imports from its own folder, without loops, and from layers above it only."""

from __future__ import annotations

import ast
import graphlib
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

REPOSITORY = Path(__file__).resolve().parents[1]
PACKAGE = REPOSITORY / "wiresolve"

# From the top layer down. A layer is a folder, or a set of files that lie in the package's own folder.
LAYERS: tuple[frozenset[str], ...] = tuple(
    map(
        frozenset,
        (
            {"units", "errors"},
            {"describe"},
            {"fem"},
            {"bands"},
            {"physics"},
            {
                *("result", "subband", "result_page", "columns", "frames", "solve", "loading"),
                *("mode_elements", "mode_groups"),
                *("gate_result", "gate_curve", "gate_verdict", "step_motion", "sweep"),
            },
            {"output"},
            {"survey"},
            {"commands"},
            {"cli", "__main__"},
        ),
    )
)
MAY_PRINT = {"wiresolve.cli", "wiresolve.commands.terminal", "wiresolve.__main__"}
# Libraries that only one module may import.
ONLY_IMPORTER = {
    "gmsh": "wiresolve.fem.meshing",
    # In the description, because an imported mesh is a shape: it is read while the problem is being checked.
    "meshio": "wiresolve.describe.imported_mesh",
    "skfem": "wiresolve.fem.space",
}
# What neither `import wiresolve` nor `wiresolve --help` may wait for.
HEAVY = ("numpy", "scipy", "skfem", "gmsh", "meshio", "matplotlib", "pyvista", "vtk", "vtkmodules", "pandas")


def module_name(path: Path) -> str:
    """The dotted name of a file of the package."""
    parts = path.relative_to(REPOSITORY).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


SOURCES = {module_name(path): path for path in sorted(PACKAGE.rglob("*.py"))}
TREES = {name: ast.parse(path.read_text(encoding="utf-8")) for name, path in SOURCES.items()}


def layer(module: str) -> int:
    """The number of a module's layer, counted from the top."""
    part = module.split(".")[1]
    (number,) = [number for number, names in enumerate(LAYERS) if part in names]
    return number


def is_folder(module: str) -> bool:
    """Whether a module is the package itself or one of its folders."""
    return SOURCES[module].name == "__init__.py"


def imports(tree: ast.AST) -> Iterator[tuple[str, int]]:
    """Modules that a file imports anywhere, inside functions and for types too, with the line.

    `from wiresolve.fem import space` counts as an import of `wiresolve.fem.space`, `from wiresolve import solve` as one
    of `wiresolve`: what stands there is what the package shows to its users.
    """
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, node.lineno
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"line {node.lineno}: a relative import"
            base = node.module or ""
            for alias in node.names:
                inner = f"{base}.{alias.name}"
                yield (inner if inner in SOURCES and base != "wiresolve" else base), node.lineno


def test_every_module_has_a_layer() -> None:
    for name in SOURCES:
        if name != "wiresolve":
            layer(name)


def test_imports_go_up_or_stay_in_the_folder() -> None:
    wrong = []
    for name, tree in TREES.items():
        if name == "wiresolve":
            continue
        for target, line in imports(tree):
            if target.split(".")[0] != "wiresolve":
                continue
            if target == "wiresolve":
                wrong.append(f"{name}:{line} imports the package itself")
            elif target not in SOURCES:
                wrong.append(f"{name}:{line} imports {target}, which does not exist")
            elif layer(target) > layer(name):
                wrong.append(f"{name}:{line} imports {target} from a layer below")
            elif is_folder(target):
                wrong.append(f"{name}:{line} imports the folder {target}, which holds nothing")
    assert wrong == []


def test_no_loops_inside_a_layer() -> None:
    graph = {name: {target for target, _ in imports(tree) if target in SOURCES} for name, tree in TREES.items()}
    graphlib.TopologicalSorter(graph).prepare()  # raises CycleError, which names the loop


def test_one_importer_for_each_library_of_meshes() -> None:
    wrong = [
        f"{name}:{line} imports {target}"
        for name, tree in TREES.items()
        for target, line in imports(tree)
        if ONLY_IMPORTER.get(target.split(".")[0], name) != name
    ]
    assert wrong == []


def test_folders_hold_a_docstring_only() -> None:
    for name, tree in TREES.items():
        if is_folder(name) and name != "wiresolve":
            assert ast.get_docstring(tree), name
            assert len(tree.body) == 1, name


def test_library_code_never_prints() -> None:
    wrong = []
    for name in TREES.keys() - MAY_PRINT:
        for node in ast.walk(TREES[name]):
            printing = isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "print"
            stream = isinstance(node, ast.Attribute) and ast.unparse(node) in ("sys.stdout", "sys.stderr")
            if printing or stream:
                wrong.append(f"{name}:{node.lineno}")
    assert wrong == []


@pytest.mark.parametrize(
    "program",
    [
        "import wiresolve",
        "import runpy; sys.argv = ['wiresolve', '--help']; runpy.run_module('wiresolve', run_name='__main__')",
    ],
    ids=["import", "help"],
)
def test_start_imports_nothing_heavy(program: str) -> None:
    ending = "print('loaded:', *sorted({name.split('.')[0] for name in sys.modules}))"
    code = f"import sys\ntry:\n    {program}\nexcept SystemExit as end:\n    assert not end.code\n{ending}"
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=REPOSITORY)
    loaded = run.stdout.rpartition("loaded:")[2].split()
    assert "wiresolve" in loaded
    assert [name for name in HEAVY if name in loaded] == []
