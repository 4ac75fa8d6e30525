"""The result folder: whole or not there, never in the way of anything else."""

from __future__ import annotations

import errno
import json
import os
from pathlib import Path

import numpy as np
import pytest
import pyvista

from tests.synthetic import core_shell_result
from wiresolve.describe import wirefile
from wiresolve.errors import InputError
from wiresolve.output import figures, folder, tables, vtk
from wiresolve.output.measured import Measured
from wiresolve.output.target import check_target, writing
from wiresolve.output.writing import write


def names(path: Path) -> list[str]:
    return sorted(p.name for p in path.iterdir())


def test_a_result_folder_holds_everything(tmp_path: Path) -> None:
    result = core_shell_result(3)
    target = write(result, tmp_path / "new" / "deep" / "wire")
    assert target == (tmp_path / "new" / "deep" / "wire").resolve()
    assert names(target) == ["figures", "input.toml", "modes.vtu", "result.json", "subbands.csv"]
    assert len(names(target / "figures")) == 3 * len(figures.drawable(result))
    assert names(target.parent) == ["wire"]
    assert json.loads((target / "result.json").read_text())["status"] == "done"
    assert pyvista.read(target / "modes.vtu").n_cells == len(result.mesh.cells)
    assert wirefile.read(target / "input.toml").digest == result.problem.digest


def test_two_runs_write_the_same_bytes(tmp_path: Path) -> None:
    for name in ("a", "b"):
        write(core_shell_result(3), tmp_path / name)
    files = [p.relative_to(tmp_path / "a") for p in (tmp_path / "a").rglob("*") if p.is_file()]
    assert len(files) == 4 + 3 * len(figures.drawable(core_shell_result(3)))
    for file in files:
        assert (tmp_path / "a" / file).read_bytes() == (tmp_path / "b" / file).read_bytes(), file


def test_an_old_result_is_replaced_only_when_told(tmp_path: Path) -> None:
    target = tmp_path / "wire"
    write(core_shell_result(1), target, figures=False)
    old = (target / "result.json").read_bytes()
    with pytest.raises(InputError, match=r"folder: exists already.*pass replace=True"):
        write(core_shell_result(2), target, figures=False)
    assert (target / "result.json").read_bytes() == old
    write(core_shell_result(2), target, replace=True, figures=False)
    assert len(json.loads((target / "result.json").read_text())["subbands"]) == 2
    assert names(tmp_path) == ["wire"]


def test_what_is_no_result_is_never_replaced(tmp_path: Path) -> None:
    precious = tmp_path / "thesis"
    precious.mkdir()
    (precious / "chapter.txt").write_text("years of work")
    with pytest.raises(InputError, match="holds no result"):
        write(core_shell_result(1), precious, replace=True)
    with pytest.raises(InputError, match="is a file"):
        write(core_shell_result(1), precious / "chapter.txt", replace=True)
    with pytest.raises(InputError, match="is a file"):
        write(core_shell_result(1), precious / "chapter.txt" / "wire")
    assert (precious / "chapter.txt").read_text() == "years of work"
    assert names(tmp_path) == ["thesis"]
    (tmp_path / "empty").mkdir()
    write(core_shell_result(1), tmp_path / "empty", replace=True, figures=False)
    assert "result.json" in names(tmp_path / "empty")


@pytest.mark.parametrize("code", [errno.ENOSPC, errno.EDQUOT, errno.EROFS, errno.EIO])
@pytest.mark.parametrize("where", ["write_json", "write_modes", "save_all", "mkdir", "replace"])
def test_a_disk_that_refuses_leaves_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, where: str, code: int
) -> None:
    result = core_shell_result(1)
    write(core_shell_result(2), tmp_path / "old", figures=False)
    old = (tmp_path / "old" / "result.json").read_bytes()

    def refuse(*_: object, **__: object) -> None:
        raise OSError(code, os.strerror(code))

    home = {"write_json": tables, "write_modes": vtk, "save_all": figures, "mkdir": Path, "replace": os}[where]
    monkeypatch.setattr(home, where, refuse)
    for target, replace in ((tmp_path / "deep" / "new", False), (tmp_path / "old", True)):
        with pytest.raises(InputError) as caught:
            write(result, target, replace=replace, figures=where == "save_all")
        full = code in (errno.ENOSPC, errno.EDQUOT)
        assert ("disk is full" if full else os.strerror(code)) in str(caught.value)
        assert "\n" not in str(caught.value)
    monkeypatch.undo()
    assert names(tmp_path) == ["old"]
    assert (tmp_path / "old" / "result.json").read_bytes() == old


@pytest.mark.parametrize("stop", [KeyboardInterrupt, SystemExit, RuntimeError])
def test_a_stopped_write_leaves_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, stop: type[BaseException]
) -> None:
    write(core_shell_result(2), tmp_path / "old", figures=False)
    old = (tmp_path / "old" / "result.json").read_bytes()

    def interrupt(*_: object, **__: object) -> None:
        raise stop

    monkeypatch.setattr(figures, "save_all", interrupt)
    for target, replace in ((tmp_path / "new", False), (tmp_path / "old", True)):
        with pytest.raises(stop):
            write(core_shell_result(1), target, replace=replace)
    assert names(tmp_path) == ["old"]
    assert (tmp_path / "old" / "result.json").read_bytes() == old


def test_the_old_result_comes_back_when_the_new_one_cannot_be_renamed(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    target = tmp_path / "wire"
    write(core_shell_result(1), target, figures=False)
    rename, calls = os.replace, []

    def second_fails(source: Path, to: Path) -> None:
        calls.append(to)
        if len(calls) == 2:
            raise OSError(errno.EIO, "input/output error")
        rename(source, to)

    monkeypatch.setattr(os, "replace", second_fails)
    with pytest.raises(InputError):
        write(core_shell_result(2), target, replace=True, figures=False)
    assert len(calls) == 3
    assert names(tmp_path) == ["wire"]
    assert len(json.loads((target / "result.json").read_text())["subbands"]) == 1


def keep_own(target: Path) -> dict[str, str]:
    """Put a user's own files beside a result, among its figures too."""
    own = {"notes.txt": "mine", "scripts/fit.py": "mine too", "figures/poster.png": "drawn by hand", ".hidden": ""}
    for name, text in own.items():
        (target / name).parent.mkdir(exist_ok=True)
        (target / name).write_text(text)
    return own


@pytest.mark.parametrize("drawn", [True, False])
def test_a_users_own_files_outlive_the_result(tmp_path: Path, drawn: bool) -> None:
    assert set(folder.DRAWN) == set(figures.FIGURES)
    target = tmp_path / "wire"
    write(core_shell_result(1), target)
    own = keep_own(target)
    write(core_shell_result(2), target, replace=True, figures=drawn)
    assert {name: (target / name).read_text() for name in own} == own
    assert len(json.loads((target / "result.json").read_text())["subbands"]) == 2
    assert len(names(target / "figures")) == 1 + 3 * len(figures.drawable(core_shell_result(2))) * drawn
    assert names(tmp_path) == ["wire"]


@pytest.mark.parametrize("failing", range(1, 7))
@pytest.mark.parametrize("fault", [OSError(errno.EIO, "input/output error"), KeyboardInterrupt()])
def test_a_users_own_files_outlive_a_failure(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, failing: int, fault: BaseException
) -> None:
    target = tmp_path / "wire"
    write(core_shell_result(1), target, figures=False)
    own = keep_own(target)
    rename, calls = os.replace, []

    def one_fails(source: Path, to: Path) -> None:
        calls.append(to)
        if len(calls) == failing:
            raise fault
        rename(source, to)

    monkeypatch.setattr(os, "replace", one_fails)
    # Two renames of folders, and one for each of four entries.
    with pytest.raises(InputError if isinstance(fault, OSError) else KeyboardInterrupt):
        write(core_shell_result(2), target, replace=True, figures=False)
    assert {name: (target / name).read_text() for name in own} == own
    assert len(json.loads((target / "result.json").read_text())["subbands"]) == 1
    assert names(tmp_path) == ["wire"]


def test_looking_at_a_target_leaves_no_trace(tmp_path: Path) -> None:
    check_target(tmp_path / "a" / "b", replace=False, contents=folder.SOLVED)
    assert names(tmp_path) == []
    with pytest.raises(InputError, match="cannot be written"):
        check_target(tmp_path / ("x" * 300), replace=False, contents=folder.SOLVED)
    assert names(tmp_path) == []


def test_one_file_is_renamed_into_place(tmp_path: Path) -> None:
    with writing(tmp_path / "a" / "mesh.vtu", "--out") as fresh:
        fresh.write_text("whole")
    assert (tmp_path / "a" / "mesh.vtu").read_text() == "whole"
    assert names(tmp_path / "a") == ["mesh.vtu"]


def test_half_a_file_is_removed(tmp_path: Path) -> None:
    def write_half() -> None:
        with writing(tmp_path / "b" / "mesh.vtu", "--out") as fresh:
            fresh.write_text("half")
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write_half()
    assert names(tmp_path) == []


def test_files_of_ones_own_among_what_may_be_asked_for_stay(tmp_path: Path) -> None:
    """Measured points under the natural name, and notes in the folder of a series; what is out of date goes."""
    target = tmp_path / "wire"
    points = Measured("fermi_level_eV", np.array([0.1]), np.array([1.0]))
    write(core_shell_result(1), target, figures=False, measured=points)
    own = {"measured.csv": "raw", "along_axis/mine.txt": "a note"}
    (target / "along_axis").mkdir()
    for name in (*own, "along_axis/k_0001.vtu", "volume.vtu"):
        (target / name).write_text(own.get(name, "out of date"))
    write(core_shell_result(2), target, replace=True, figures=False)
    assert {name: (target / name).read_text() for name in own} == own
    assert not (target / "along_axis" / "k_0001.vtu").exists() and not (target / "volume.vtu").exists()
    assert not (target / "inputs").exists()
