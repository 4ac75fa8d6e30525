"""Where results go: a folder or file written beside its target and renamed, so that it is there whole or not at all."""

from __future__ import annotations

import errno
import os
import re
import secrets
import shutil
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path

from wiresolve.describe import input_files
from wiresolve.errors import InputError

INPUT, FIGURES, INPUTS = "input.toml", "figures", input_files.FOLDER
MEASURED = f"{INPUTS}/measured_points.csv"
REPORT = "report.html"
"""What kinds of result folders hold alike."""
PICTURES = ("png", "svg", "pdf")
"""The kinds of file that each figure is saved as."""
_FRAME = re.compile(r"[a-z]+_\d+\.vtu")


@dataclass(frozen=True)
class Contents:
    """What a kind of result folder holds of its own.

    `marker`, by which it is known, `entries`, the names of figures, and of folders with the frames of a series.
    """

    name: str
    marker: str
    entries: tuple[str, ...]
    drawn: tuple[str, ...]
    series: tuple[str, ...] = ()


@contextmanager
def filling(target: Path, contents: Contents, field: str) -> Iterator[Path]:
    """A fresh folder beside `target` to fill, put in its place at the end; nothing is left of it on failure.

    Raises
    ------
    InputError
        It cannot be written or the disk is full.
    """
    with readable(target, field), _parents(target), _fresh_beside(target) as fresh:
        yield fresh
        _put_in_place(fresh, target, contents)


def check_target(folder: str | Path, *, replace: bool, field: str = "folder", contents: Contents) -> Path:
    """The absolute path of a target that a result can be written to; nothing is left behind by looking.

    Raises
    ------
    InputError
        As for `write`; called before a run, it saves the run.
    """
    path = Path(folder)
    with readable(path, field):
        target = path.resolve()
        if target.exists():
            if not target.is_dir():
                raise InputError(field, "is a file, and a result is a folder", str(path), "give another name")
            if not replace:
                raise InputError(field, "exists already", str(path), _how_to_replace(field))
            if any(target.iterdir()) and not ((target / contents.marker).is_file() and (target / INPUT).is_file()):
                rule = f"exists and holds no {contents.name}, so it is not replaced"
                raise InputError(field, rule, str(path), "give another name")
        _try_place(target, path, field)
    return target


def check_file(
    path: str | Path, *, replace: bool, field: str = "path", suffix: str = "", source: str | Path | None = None
) -> Path:
    """The absolute path of a single file that can be written; nothing is left behind by looking.

    Parameters
    ----------
    path : the file.
    replace : whether it may be there already.
    field : what an error calls it.
    suffix : how the name of a file ends that may be replaced at all, like ".vtu"; any where empty.
    source : a file that is read, hence never written.

    Raises
    ------
    InputError
        It exists and is not to be replaced, is a folder, is `source`, or cannot be written there.
    """
    given = Path(path)
    with readable(given, field):
        target = given.resolve()
        if target.is_dir():
            raise InputError(field, "is a folder, and a file is wanted", str(path), "give another name")
        if target.exists():
            if source is not None and target.samefile(source):
                raise InputError(field, "is the input file itself", str(path), "give another name")
            if suffix and target.suffix.lower() != suffix:
                rule = f"exists and is no {suffix} file, so it is not replaced"
                raise InputError(field, rule, str(path), "give another name")
            if not replace:
                raise InputError(field, "exists already", str(path), _how_to_replace(field))
        _try_place(target, given, field)
    return target


def _how_to_replace(field: str) -> str:
    """What to say to whoever typed an option, or called a function."""
    return f"give another name, or {'say --replace' if field.startswith('--') else 'pass replace=True'}"


def _try_place(target: Path, given: Path, field: str) -> None:
    """Make and remove a folder beside `target`: asking for permissions does not see every read-only disk."""
    place = next(p for p in target.parents if p.exists())
    if not place.is_dir():
        raise InputError(field, f"cannot be made, {place} is a file", str(given), "give another name")
    probe = _beside(place / target.name, "probe")
    probe.mkdir()
    probe.rmdir()


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
    with readable(target, field), _parents(target):
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


def _put_in_place(fresh: Path, target: Path, contents: Contents) -> None:
    """Rename `fresh` to `target`, with the user's own entries of the folder that was there; undone on failure.

    Those entries are never in a folder that gets removed: they leave the old one last, and return to it first.
    """
    old = _beside(target, "old")
    own: list[Path] = []
    try:
        if target.exists():
            own = _own_entries(target, fresh, contents)
            os.replace(target, old)
        os.replace(fresh, target)
        for entry in own:
            (target / entry).parent.mkdir(exist_ok=True)
            os.replace(old / entry, target / entry)
    except BaseException:
        if old.exists():
            for entry in own:
                if not os.path.lexists(old / entry):
                    os.replace(target / entry, old / entry)
            if target.exists():
                os.replace(target, fresh)
            os.replace(old, target)
        raise
    shutil.rmtree(old, ignore_errors=True)


def _own_entries(folder: Path, fresh: Path, contents: Contents) -> list[Path]:
    """Relative paths of what lies in a result folder and is none of what this program writes there.

    Copies of input files are known by their names only: those that `fresh` does not bring along stay, but for measured
    points, which would be laid over a curve that they do not belong to.
    """
    own = [Path(p.name) for p in folder.iterdir() if p.name not in contents.entries]
    copies = folder / INPUTS
    if copies.is_dir() and not copies.is_symlink():
        brought = {Path(MEASURED).name, *(p.name for p in (fresh / INPUTS).glob("*"))}
        own += [Path(INPUTS, p.name) for p in copies.iterdir() if p.name not in brought]
    drawn, pictures = {f"{name}.{kind}" for name in contents.drawn for kind in PICTURES}, folder / FIGURES
    if pictures.is_dir() and not pictures.is_symlink():
        own += [Path(FIGURES, p.name) for p in pictures.iterdir() if p.name not in drawn]
    for name in contents.series:
        if (folder / name).is_dir() and not (folder / name).is_symlink():
            own += [Path(name, p.name) for p in (folder / name).iterdir() if not _FRAME.fullmatch(p.name)]
    return own


@contextmanager
def readable(target: Path, field: str) -> Iterator[None]:
    """Turn the operating system's refusals into errors that a user can act on."""
    try:
        yield
    except OSError as fault:
        full = fault.errno in (errno.ENOSPC, errno.EDQUOT)
        reason = "the disk is full" if full else f"cannot be written ({fault.strerror or fault})"
        remedy = "make room, or give a folder on another disk" if full else "give a folder that you may write to"
        raise InputError(field, reason, str(target), remedy) from fault
