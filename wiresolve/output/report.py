"""The report: one HTML file, made from a result folder or a gate curve's folder alone, that needs nothing beside it."""

from __future__ import annotations

import json
from importlib import metadata
from pathlib import Path

from wiresolve.errors import InputError
from wiresolve.loading import load
from wiresolve.output import measured, report_gate, report_wire
from wiresolve.output.report_blocks import Folder, pictures_in
from wiresolve.output.report_page import render
from wiresolve.output.target import INPUT, MEASURED, REPORT

_KINDS = {"result.json": report_wire.page, "gate_curve.json": report_gate.page}


def html(folder: str | Path) -> str:
    """The page of a folder that `solve` or `gate-curve` wrote, as text.

    Verdict first, then the section, levels, modes, dispersion, what is measured with sliders, sensitivities, materials
    with sources, what is not modelled, warnings with remedies, accuracy, and the input with the line that repeats it.

    Raises
    ------
    InputError
        The folder is none of a result, or a file of it cannot be used.
    """
    path = Path(folder)
    name = next((name for name in _KINDS if (path / name).is_file()), None)
    if name is None or not (path / INPUT).is_file():
        rule = "holds no result: there is no result.json or gate_curve.json with its input.toml"
        raise InputError("folder", rule, str(path), "give the folder that wiresolve solve or gate-curve wrote")
    try:
        found = json.loads((path / name).read_text(encoding="utf-8"))
        read = Folder(
            path=path,
            found=found,
            problem=load(path / INPUT),
            written=(path / INPUT).read_text(encoding="utf-8"),
            pictures=pictures_in(path),
            measured=measured.read(path / MEASURED) if (path / MEASURED).is_file() else None,
        )
        _check_pair(read, path)
        return render(_KINDS[name](read))
    except (OSError, ValueError, KeyError, TypeError, IndexError, AttributeError) as fault:
        if isinstance(fault, InputError):
            raise
        rule = f"cannot be used: {type(fault).__name__} {fault}"
        raise InputError(f"folder.{name}", rule, str(path), "solve the wire again with this version") from fault


def _check_pair(folder: Folder, path: Path) -> None:
    """InputError where the wire file beside a result is another one: the page would tell of two wires at once."""
    found = folder.found
    try:
        same_version = found["versions"]["wiresolve"] == metadata.version("wiresolve")
    except metadata.PackageNotFoundError:
        same_version = False
    # Another version may name the same input otherwise.
    if same_version and found["input_digest"] != folder.problem.digest:
        rule = "is not the input of the result beside it: its digest is another one"
        raise InputError(f"folder.{INPUT}", rule, str(path), "solve the changed file, or put the old one back")


def write_report(folder: str | Path, path: str | Path | None = None) -> Path:
    """Write the page of a folder to a file, by default `report.html` in that folder; returns its path.

    Raises
    ------
    InputError
        As for `html`.
    OSError
        The file cannot be written.
    """
    target = Path(folder) / REPORT if path is None else Path(path)
    target.write_text(html(folder), encoding="utf-8")
    return target
