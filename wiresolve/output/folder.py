"""The result folder: written beside its target and renamed, so that it is there whole or not at all."""

from __future__ import annotations

import errno
import os
import secrets
import shutil
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from wiresolve.describe import wirefile
from wiresolve.errors import InputError
from wiresolve.output import tables, vtk
from wiresolve.result import Result

INPUT, RESULT, SUBBANDS, MODES, FIGURES = "input.toml", "result.json", "subbands.csv", "modes.vtu", "figures"


def write(
    result: Result,
    folder: str | Path,
    *,
    replace: bool = False,
    figures: bool = True,
    status: str = tables.DONE,
    field: str = "folder",
) -> Path:
    """Write a result into a folder: `input.toml`, `result.json`, `subbands.csv`, `modes.vtu` and `figures/`.

    Everything goes into a fresh hidden folder beside the target, which is then renamed; whatever stops it on the way
    leaves no part of a result, and an older one as it was.

    Parameters
    ----------
    result : what to write.
    folder : the target; folders on the way to it are made.
    replace : whether an older result there may be replaced. Nothing but a result or an empty folder ever is.
    figures : whether to draw the figures.
    status : a mark on the result ("done" where nothing is held against it), kept in its files.
    field : what an error calls the target.

    Returns
    -------
    The folder's absolute path.

    Raises
    ------
    InputError
        The target exists (and is not to be or cannot be replaced), cannot be written, or the disk is full.
    """
    target = check_target(folder, replace=replace, field=field)
    with _readable(target, field), _parents(target), _fresh_beside(target) as fresh:
        (fresh / INPUT).write_text(wirefile.dump(result.problem), encoding="utf-8")
        tables.write_json(result, fresh / RESULT, status)
        tables.write_subbands(result, fresh / SUBBANDS, status)
        vtk.write_modes(result, fresh / MODES)
        if figures:
            from wiresolve.output.figures import save_all

            (fresh / FIGURES).mkdir()
            save_all(result, fresh / FIGURES)
        _put_in_place(fresh, target)
    return target


def check_target(folder: str | Path, *, replace: bool, field: str = "folder") -> Path:
    """The absolute path of a target that a result can be written to; nothing is left behind by looking.

    Raises
    ------
    InputError
        As for `write`; called before a run, it saves the run.
    """
    path = Path(folder)
    with _readable(path, field):
        target = path.resolve()
        if target.exists():
            if not target.is_dir():
                raise InputError(field, "is a file, and a result is a folder", str(path), "give another name")
            if not replace:
                raise InputError(field, "exists already", str(path), "give another name, or say --replace")
            if any(target.iterdir()) and not ((target / RESULT).is_file() and (target / INPUT).is_file()):
                raise InputError(
                    field, "exists and holds no result, so it is not replaced", str(path), "give another name"
                )
        place = next(p for p in target.parents if p.exists())
        if not place.is_dir():
            raise InputError(field, f"cannot be made, {place} is a file", str(path), "give another name")
        # Asking for permissions does not see every read-only disk; making a folder does.
        probe = _beside(place / target.name, "probe")
        probe.mkdir()
        probe.rmdir()
    return target


def check_file(path: str | Path, *, replace: bool, field: str = "path") -> Path:
    """The absolute path of a single file that can be written.

    Raises
    ------
    InputError
        It exists and is not to be replaced, is a folder, or cannot be written there.
    """
    with _readable(Path(path), field):
        target = Path(path).resolve()
        if target.is_dir():
            raise InputError(field, "is a folder, and a file is wanted", str(path), "give another name")
        if target.exists() and not replace:
            raise InputError(field, "exists already", str(path), "give another name, or say --replace")
    check_target(target.parent / _beside(target, "probe").name, replace=False, field=field)
    return target


def _beside(target: Path, purpose: str) -> Path:
    return target.with_name(f".{target.name[:80]}.{secrets.token_hex(4)}.{purpose}")


@contextmanager
def writing(target: Path, field: str) -> Iterator[Path]:
    """A path beside `target` to write one file to, renamed to `target` at the end and removed on failure.

    Raises
    ------
    InputError
        The file cannot be written or the disk is full.
    """
    with _readable(target, field), _parents(target):
        fresh = _beside(target, "partial")
        try:
            yield fresh
            os.replace(fresh, target)
        finally:
            with suppress(OSError):
                fresh.unlink()


@contextmanager
def _fresh_beside(target: Path) -> Iterator[Path]:
    fresh = _beside(target, "partial")
    try:
        fresh.mkdir()
        yield fresh
    finally:
        shutil.rmtree(fresh, ignore_errors=True)


@contextmanager
def _parents(target: Path) -> Iterator[None]:
    """Make the folders on the way to `target`; if what follows fails, remove those that were made."""
    missing = [p for p in target.parents if not p.exists()]
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        yield
    except BaseException:
        for parent in missing:
            with suppress(OSError):
                parent.rmdir()
        raise


def _put_in_place(fresh: Path, target: Path) -> None:
    old = _beside(target, "old")
    moved = False
    try:
        if target.exists():
            os.replace(target, old)
            moved = True
        os.replace(fresh, target)
    except BaseException:
        if moved and not target.exists():
            os.replace(old, target)
        raise
    shutil.rmtree(old, ignore_errors=True)


@contextmanager
def _readable(target: Path, field: str) -> Iterator[None]:
    """Turn the operating system's refusals into errors that a user can act on."""
    try:
        yield
    except OSError as fault:
        full = fault.errno in (errno.ENOSPC, errno.EDQUOT)
        reason = "the disk is full" if full else f"cannot be written ({fault.strerror or fault})"
        remedy = "make room, or give a folder on another disk" if full else "give a folder that you may write to"
        raise InputError(field, reason, str(target), remedy) from fault
