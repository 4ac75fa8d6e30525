"""A gate curve as numbers and words: `gate_curve.json`, `gate_curve.csv`, `transistor.csv` and what is printed."""

from __future__ import annotations

import csv
import dataclasses
import io
import math
from collections.abc import Sequence
from pathlib import Path

import wiresolve.columns as columns
from wiresolve.gate_result import ZERO_TEXT, GateCurve, GatePoint, TransistorPoint
from wiresolve.output.sources import unsure
from wiresolve.output.tables import (
    DONE,
    MOST_ROWS,
    aligned,
    cell,
    json_text,
    paragraphs,
    significant,
    with_bar,
    write_columns,
)
from wiresolve.output.valley_names import short_valleys

MOST_FAILED = 5
"""Points that failed of which the printed text tells the reason; `gate_curve.json` has all."""


def gate_curve_json(curve: GateCurve, status: str = DONE) -> str:
    """The text of `gate_curve.json`: `GateCurve.to_dict` and `status`, keys sorted."""
    return json_text({**curve.to_dict(), "status": status}) + "\n"


def gate_curve_csv(curve: GateCurve, status: str = DONE) -> str:
    """The text of `gate_curve.csv`: a line a point of the sweep, numbered columns for each listed subband.

    Lines in front that start with `#` say what it is and the digest of the input. What a point lacks is empty.
    """
    lines = io.StringIO()
    lines.write(f"# wiresolve gate curve of {' '.join(curve.problem.title.split())}\n")
    lines.write(
        f"# energies from the {ZERO_TEXT}; {curve.temperature_K:g} K; swept gate {' '.join(curve.swept.split())}\n"
    )
    lines.write(f"# status {status}; input digest {curve.problem.digest}\n")
    found = columns.gate_curve([point.to_dict() for point in curve.points], curve.swept)
    write_columns(lines, found | {"note": [" ".join(note.split()) for note in found["note"]]})
    return lines.getvalue()


def transistor_csv(curve: GateCurve, status: str = DONE) -> str:
    """The text of `transistor.csv`: a line for each pair of gate and drain voltages."""
    names = [f.name for f in dataclasses.fields(TransistorPoint)]
    lines = io.StringIO()
    lines.write(f"# wiresolve ballistic transistor of {' '.join(curve.problem.title.split())}\n")
    lines.write(f"# {curve.temperature_K:g} K; swept gate {' '.join(curve.swept.split())}\n")
    lines.write(f"# status {status}; input digest {curve.problem.digest}\n")
    table = csv.writer(lines, lineterminator="\n")
    table.writerow(names)
    for point in curve.transistor:
        table.writerow([_cell(getattr(point, name)) for name in names])
    return lines.getvalue()


def write_tables(curve: GateCurve, folder: Path, status: str = DONE) -> None:
    """Write `gate_curve.json`, `gate_curve.csv` and, where drain voltages were asked for, `transistor.csv`."""
    (folder / "gate_curve.json").write_text(gate_curve_json(curve, status), encoding="utf-8")
    (folder / "gate_curve.csv").write_text(gate_curve_csv(curve, status), encoding="utf-8")
    if curve.transistor:
        (folder / "transistor.csv").write_text(transistor_csv(curve, status), encoding="utf-8")


def step_table(curve: GateCurve) -> list[str]:
    """The steps as aligned lines: the voltage at which each opens, its height, its width; empty without steps."""
    if not curve.steps:
        return []
    moved = any(s.moves_V_per_nm is not None for s in curve.steps)
    rows = [
        ["step", "opens at", "height", "then", "width", *(["moves by"] if moved else []), "of the"],
        ["level", "V", "G0", "G0", "mV", *(["mV for each nm"] if moved else []), "valleys"],
    ]
    reached = [s for s in curve.steps if math.isfinite(s.opens_at_V)]
    for step in reached[:MOST_ROWS]:
        row = [str(step.level), with_bar(step.opens_at_V, step.error_V)]
        row += [f"{step.height_G0:.4g}", f"{step.plateau_G0:.4g}"]
        row.append(significant(1e3 * step.width_V, 3) if math.isfinite(step.width_V) else "")
        if moved:
            by = step.moves_V_per_nm
            row.append("" if by is None or not math.isfinite(by) else f"{1e3 * by:+.3g}")
        rows.append([*row, short_valleys(step.valley) if step.valley else ""])
    lines = aligned(rows, left={len(rows[0]) - 1}) if reached else []
    if (hidden := len(reached) - MOST_ROWS) > 0:
        lines.append(f"and {hidden} more, see gate_curve.json")
    if others := [str(s.level) for s in curve.steps if not math.isfinite(s.opens_at_V)]:
        levels = f"level {others[0]} opens" if len(others) == 1 else f"levels {', '.join(others)} open"
        lines += paragraphs(f"{levels} at no voltage of this sweep")
    return lines


def summary(curve: GateCurve, folder: str | Path | None = None, status: str = DONE) -> str:
    """What the command line prints: verdict, steps, how well it converged, warnings, and where the files are."""
    lines = [curve.problem.title] if curve.problem.title else []
    lines += [*paragraphs(curve.verdict_text), ""] if curve.verdict_text else [""]
    if steps := step_table(curve):
        lines += [*steps, ""]
    good = curve.converged
    first, last = curve.points[0].gate_voltage_V, curve.points[-1].gate_voltage_V
    lines += paragraphs(
        f"{len(good)} of {len(curve.points)} points, the gate {curve.swept} from {first:g} V to {last:g} V at"
        f" {curve.temperature_K:g} K; energies count from the {ZERO_TEXT}. At most"
        f" {max(p.passes for p in good)} passes a point, residual up to"
        f" {_largest(good, 'residual_V'):.1e} V, Gauss balance to"
        f" {_largest(good, 'gauss_error'):.1e}."
    )
    for point in curve.failed[:MOST_FAILED]:
        lines += paragraphs(f"FAILED at {point.gate_voltage_V:g} V: {point.note}")
    if len(curve.failed) > MOST_FAILED:
        lines.append(f"and {len(curve.failed) - MOST_FAILED} more failed, see gate_curve.csv")
    if not curve.accuracy_met:
        lines += paragraphs(
            f"ACCURACY MISSED: asked for {1e3 * curve.problem.accuracy.energy_eV:g} meV, the largest bar is"
            f" {1e3 * curve.largest_error_eV:.2g} meV. These are the best values found."
        )
    valleys = {v for p in good for v in p.valley}
    for warning in curve.warnings:
        lines += ["", *paragraphs(f"warning {warning.code}: {warning.text}")]
        lines += paragraphs(warning.remedy, indent="    ")
    if remembered := unsure(curve.problem, curve.mesh, valleys, curve.warnings):
        lines += [
            "",
            *paragraphs(f"Values from memory, not checked against a text, of those that matter here: {remembered}."),
        ]
    if differing := unsure(curve.problem, curve.mesh, valleys, curve.warnings, "conflict"):
        lines += ["", *paragraphs(f"Values on which sources differ, of those that matter here: {differing}.")]
    if curve.not_modelled:
        lines += ["", *paragraphs(f"Not modelled: {'; '.join(curve.not_modelled)}.")]
    if status != DONE:
        lines += ["", *paragraphs(f"Marked: {status}.")]
    if folder is not None:
        lines += ["", f"Files: {folder}"]
    return "\n".join(lines)


def _largest(points: Sequence[GatePoint], name: str) -> float:
    return max(abs(float(getattr(p, name))) for p in points)


def _cell(value: object) -> str:
    return "" if isinstance(value, float) and not math.isfinite(value) else cell(value)
