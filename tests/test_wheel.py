"""The wheel holds what it needs and runs where no checkout is."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

REPOSITORY = Path(__file__).resolve().parents[1]


def run(*words: str, at: Path, installed: Path | None = None) -> str:
    """What a Python command prints, with the environment's libraries and, before them, what is installed elsewhere."""
    code = f"import runpy, sys; sys.path.insert(0, {str(installed)!r}); "
    code += f"runpy.run_module({words[0]!r}, run_name='__main__')"
    # Without -P the working folder would come first, and without -I a user's settings would count.
    command = [sys.executable, "-I", "-c", code] if installed else [sys.executable, "-m", words[0]]
    done = subprocess.run([*command, *words[1:]], cwd=at, capture_output=True, text=True, encoding="utf-8", check=False)
    assert done.returncode == 0, done.stderr
    return done.stdout


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Built from a copy, so that nothing is left beside the sources."""
    source = tmp_path_factory.mktemp("source") / "copy"
    shutil.copytree(REPOSITORY / "wiresolve", source / "wiresolve", ignore=shutil.ignore_patterns("__pycache__"))
    for name in ("pyproject.toml", "README.md", "LICENSE"):
        shutil.copy(REPOSITORY / name, source / name)
    built = tmp_path_factory.mktemp("built")
    run(
        "pip", "wheel", "--quiet", "--no-deps", "--no-build-isolation", "--wheel-dir", str(built), str(source), at=built
    )
    (found,) = built.glob("*.whl")
    return found


@pytest.fixture(scope="module")
def installed(wheel: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A wheel of pure Python is installed by unpacking it."""
    target = tmp_path_factory.mktemp("installed")
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(target)
    return target


def test_every_file_of_the_package_is_in_the_wheel(wheel: Path) -> None:
    with zipfile.ZipFile(wheel) as archive:
        held = {name for name in archive.namelist() if name.startswith("wiresolve/")}
    package = REPOSITORY / "wiresolve"
    files = {p for p in package.rglob("*") if p.is_file() and "__pycache__" not in p.parts}
    assert held == {p.relative_to(REPOSITORY).as_posix() for p in files}


def test_it_runs_outside_the_checkout(installed: Path, tmp_path: Path) -> None:
    where = "import wiresolve, wiresolve.solve; print(wiresolve.solve.__module__, wiresolve.__file__)"
    code = f"import sys; sys.path.insert(0, {str(installed)!r}); {where}"
    told = subprocess.run([sys.executable, "-I", "-c", code], cwd=tmp_path, capture_output=True, text=True, check=True)
    assert str(installed) in told.stdout
    wire = run("wiresolve", "new", "circle", at=tmp_path, installed=installed)
    (tmp_path / "my.toml").write_text(wire, encoding="utf-8")
    run("wiresolve", "solve", "my.toml", "--report", "--quiet", at=tmp_path, installed=installed)
    folder = tmp_path / "results" / "my"
    found = json.loads((folder / "result.json").read_text(encoding="utf-8"))
    assert found["status"] == "done" and found["subbands"]
    assert (folder / "report.html").stat().st_size > 10_000
    assert json.loads(run("wiresolve", "schema", "wire", at=tmp_path, installed=installed))["properties"]["section"]
    assert "GaAs" in run("wiresolve", "materials", at=tmp_path, installed=installed)
