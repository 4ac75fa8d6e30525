"""Files that a wire file names: known by their content, wherever they lie."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path, PurePath

from wiresolve.errors import InputError

LARGEST_BYTES = 500_000_000
FOLDER = "inputs"
"""Where a result keeps copies, beside its input.toml."""


@dataclass(frozen=True)
class InputFile:
    """A file's name, without its folder, and what it holds. Files of equal content are equal, whatever their names."""

    name: str = field(compare=False)
    content: bytes = field(repr=False)

    @cached_property
    def digest(self) -> str:
        """SHA-256 of the content, hexadecimal."""
        return hashlib.sha256(self.content).hexdigest()

    @property
    def suffix(self) -> str:
        """How the name ends, with its dot and in small letters."""
        return PurePath(self.name).suffix.lower()

    def text(self, where: str) -> str:
        """The content as UTF-8 text; InputError about `where` for anything else."""
        try:
            return self.content.decode("utf-8-sig")
        except UnicodeDecodeError as fault:
            rule = f"is not UTF-8 text (byte {fault.start + 1})"
            raise InputError(where, rule, self.name, "save it as UTF-8 text") from None


def read(where: str, path: str | Path, folder: str | Path | None = None, largest: int = LARGEST_BYTES) -> InputFile:
    """The file at `path`, relative to `folder` (the current one).

    InputError about the key `where` if it cannot be read.
    """
    shown = str(path)
    try:
        given = Path(path)
        full = given if folder is None else Path(folder) / given
        if not full.exists():
            from_file = "" if folder is None or given.is_absolute() else "; paths are relative to the wire file"
            raise InputError(where, "there is no such file", shown, f"looked for {full.absolute()}{from_file}")
        if not full.is_file():
            raise InputError(where, "is no file", shown)
        size = full.stat().st_size
        if size > largest:
            rule = f"is too large: at most {largest / 1e6:g} MB can be read"
            raise InputError(where, rule, f"{size / 1e6:.0f} MB", "export a coarser one")
        return InputFile(full.name, full.read_bytes())
    except (OSError, ValueError) as fault:
        if isinstance(fault, InputError):
            raise
        reason = getattr(fault, "strerror", None) or fault
        raise InputError(where, f"cannot be read: {reason}", shown) from None


def places(files: Iterable[InputFile]) -> dict[str, str]:
    """Where each file, by its digest, is kept in a result's folder: by its name, numbered where two have the same."""
    found: dict[str, str] = {}
    for file in files:
        if file.digest in found:
            continue
        pure, count = PurePath(file.name), 1
        place = f"{FOLDER}/{file.name}"
        while place.lower() in {p.lower() for p in found.values()}:
            count += 1
            place = f"{FOLDER}/{pure.stem}-{count}{pure.suffix}"
        found[file.digest] = place
    return found
