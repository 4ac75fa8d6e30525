"""A result as numbers and words: `result.json`, `subbands.csv` and the table that the command line prints."""

from __future__ import annotations

import csv
import io
import json
import math
import re
import textwrap
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any, TextIO

import numpy as np

import wiresolve.columns as columns
from wiresolve.describe.valley import ZONE_CENTRE
from wiresolve.output.sources import from_memory
from wiresolve.physics.sensitivity import PER_LENGTH, Sensitivity
from wiresolve.physics.spread import grown
from wiresolve.physics.wording import by_temperature as by_temperature
from wiresolve.physics.wording import significant as significant
from wiresolve.physics.wording import with_bar as with_bar
from wiresolve.result import Result
from wiresolve.subband import level_energy_eV as level_energy_eV
from wiresolve.subband import levels as levels
from wiresolve.subband import states as states
from wiresolve.units import KB

DONE = "done"
"""The `status` of a result that nothing is held against."""
WIDTH = 96
"""Characters a line that running text is wrapped to."""
MOST_ROWS = 40
"""Subbands that the printed table shows; `subbands.csv` has all."""
MOST_LEVELS, MOST_DIMENSIONS = 5, 8
"""Levels and dimensions that the printed table of sensitivities shows; `result.json` has all."""
_LEAST_meV_per_nm = 0.02
"""Dimensions that move all of these levels by less are left out there."""
MOST_TEMPERATURES = 3
"""Temperatures that the printed tables have columns for; `result.json` has all."""


def result_json(result: Result, status: str = DONE) -> str:
    """The text of `result.json`: `Result.to_dict` and `status`, keys sorted, a list of numbers on one line.

    Raises
    ------
    ValueError
        A number is not finite: JSON has no word for it, and no result holds one.
    """
    return json_text({**result.to_dict(), "status": status}) + "\n"


def json_text(value: Any, path: str = "", depth: int = 0) -> str:
    """Plain data as JSON, keys sorted, a list of numbers on one line; ValueError where a number is not finite."""
    inner, outer = "  " * (depth + 1), "  " * depth
    if isinstance(value, Mapping):
        items = [
            f"{json.dumps(str(k))}: {json_text(value[k], f'{path}.{k}', depth + 1)}" for k in sorted(value, key=str)
        ]
        return "{\n" + inner + f",\n{inner}".join(items) + f"\n{outer}}}" if items else "{}"
    if isinstance(value, np.ndarray):
        value = value.tolist()
    if isinstance(value, list | tuple):
        items = [json_text(v, f"{path}[{i}]", depth + 1) for i, v in enumerate(value)]
        if any(isinstance(v, Mapping | list | tuple | str | np.ndarray) for v in value):
            return "[\n" + inner + f",\n{inner}".join(items) + f"\n{outer}]"
        return "[" + ", ".join(items) + "]"
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float) and not math.isfinite(value):
        raise ValueError(f"{path.lstrip('.')} is {value}, which result.json cannot hold")
    return json.dumps(value, ensure_ascii=False)


def write_json(result: Result, path: str | Path, status: str = DONE) -> None:
    """Write `result.json` (see `result_json`)."""
    Path(path).write_text(result_json(result, status), encoding="utf-8")


def subbands_csv(result: Result, status: str = DONE) -> str:
    """The text of `subbands.csv`: a line a subband under the names that `result.json` uses, then a share a layer, then
    how its energy moves with each dimension.

    Lines in front that start with `#` say what it is, the energy zero and the digest of the input. What does not apply
    is empty.
    """
    lines = io.StringIO()
    lines.write(f"# wiresolve subbands of {' '.join(result.problem.title.split())}\n")
    lines.write(f"# energies from {' '.join(result.energy_zero_text.split())}; masses in units of m0\n")
    lines.write(f"# status {status}; input digest {result.problem.digest}\n")
    moved = [{"of": s.of, "unit": s.unit, "values": s.values} for s in result.sensitivities]
    write_columns(lines, columns.subbands([vars(s) for s in result.subbands], moved))
    return lines.getvalue()


def write_columns(lines: TextIO, found: Mapping[str, Sequence[object]]) -> None:
    """Columns as lines of CSV, their heads first."""
    table = csv.writer(lines, lineterminator="\n")
    table.writerow(found)
    table.writerows([cell(value) for value in row] for row in zip(*found.values(), strict=True))


def cell(value: object) -> str:
    """A value as a CSV file holds it: exact floats, empty where there is none."""
    if value is None:
        return ""
    if isinstance(value, bool | np.bool_):
        return "true" if value else "false"
    if isinstance(value, float):
        return repr(float(value))
    return str(value)


def write_subbands(result: Result, path: str | Path, status: str = DONE) -> None:
    """Write `subbands.csv` (see `subbands_csv`)."""
    Path(path).write_text(subbands_csv(result, status), encoding="utf-8")


def aligned(rows: Sequence[Sequence[str]], left: Iterable[int] = ()) -> list[str]:
    """Lines of a table whose columns are as wide as they need to be; those in `left` flush left, others right."""
    left = set(left)
    widths = [max(len(row[c]) for row in rows) for c in range(len(rows[0]))]
    lines = []
    for row in rows:
        cells = [v.ljust(widths[c]) if c in left else v.rjust(widths[c]) for c, v in enumerate(row)]
        lines.append("  ".join(cells).rstrip())
    return lines


def described(rows: Sequence[tuple[str, str]]) -> list[str]:
    """Keys and texts in two columns, long texts wrapped inside theirs."""
    width = max(len(key) for key, _ in rows) + 2
    lines: list[str] = []
    for key, text in rows:
        wrapped = textwrap.wrap(text, max(40, WIDTH - width)) or [""]
        lines += [f"{head:<{width}}{part}" for head, part in zip([key, *[""] * len(wrapped)], wrapped, strict=False)]
    return lines


def paragraphs(text: str, indent: str = "") -> list[str]:
    """Running text wrapped to the width of a terminal, its own line breaks kept."""
    lines: list[str] = []
    for line in text.splitlines():
        lines += textwrap.wrap(line, WIDTH, initial_indent=indent, subsequent_indent=indent) or [""]
    return lines


def subband_table(result: Result) -> list[str]:
    """The subbands as aligned lines, a header of two lines first.

    At most the first `MOST_ROWS` are shown. The spacing to the next level stands at a level's last entry, in meV and
    in kT of the first `MOST_TEMPERATURES` carrier temperatures; the last level of the list has none. A layer is shown
    with its material. What is too wide for `WIDTH` loses columns: third temperatures, then what says the same in every
    line, then all temperatures but the first.
    """
    columns = _subband_columns(result)
    warm = [t for t in result.problem.carriers.temperature_K if t > 0]
    layers = {cell for cell in columns["layer"][2:] if cell}
    notes: list[str] = []
    for name in (*(f"kT {n}" for n in range(MOST_TEMPERATURES, 2, -1)), "layer", "level", "kT 2"):
        if _width({key: cells[: MOST_ROWS + 2] for key, cells in columns.items()}) <= WIDTH:
            break
        same = {"layer": len(layers) == 1, "level": columns.get("level", [])[2:] == columns["subband"][2:]}
        if name not in columns or not same.get(name, True):
            continue
        del columns[name]
        if name == "layer":
            notes.append(f"all in {layers.pop()}")
    left = [n for n, name in enumerate(columns) if name in ("layer", "valleys")]
    lines = aligned(list(zip(*columns.values(), strict=True))[: MOST_ROWS + 2], left=left)
    hidden = len(result.subbands) - MOST_ROWS
    if hidden > 0:
        notes.append(f"and {hidden} more, see subbands.csv")
    if more := _left_out(warm, sum(name.startswith("kT") for name in columns)):
        notes.append(more)
    return lines + notes


def _width(columns: Mapping[str, Sequence[str]]) -> int:
    return max(map(len, aligned(list(zip(*columns.values(), strict=True)))))


def _subband_columns(result: Result) -> dict[str, list[str]]:
    """The columns by name, two lines of heading first."""
    temperatures = [t for t in result.problem.carriers.temperature_K if t > 0][:MOST_TEMPERATURES]
    material = {region.name: region.material for region in result.mesh.regions}
    heads = {"subband": ("", "subband"), "level": ("", "level"), "energy": ("energy", "meV")}
    heads["spacing"] = ("spacing", "meV")
    heads |= {f"kT {n}": ("in kT at", f"{t:g} K") for n, t in enumerate(temperatures, 1)}
    heads |= {"mass": ("axial", "mass"), "layer": ("", "layer"), "states": ("spin x", "valleys")}
    if any(s.bound is not None for s in result.subbands):
        heads["bound"] = ("", "bound")
    if any(s.valley != ZONE_CENTRE for s in result.subbands):
        heads["valleys"] = ("of the", "valleys")
    rows: dict[str, list[str]] = {name: list(head) for name, head in heads.items()}
    energies = iter(_on_the_point([with_bar(1e3 * s.energy_eV, 1e3 * s.error_eV) for s in result.subbands]))
    groups = levels(result.subbands)
    for number, group in enumerate(groups):
        spacing = level_energy_eV(groups[number + 1]) - level_energy_eV(group) if number + 1 < len(groups) else None
        for s in group:
            shown = spacing if s is group[-1] else None
            row = {"subband": str(s.index), "level": str(s.level), "energy": next(energies)}
            row["spacing"] = "" if shown is None else significant(1e3 * shown, 4)
            for n, t in enumerate(temperatures, 1):
                row[f"kT {n}"] = "" if shown is None else significant(shown / (KB * t), 3)
            row["mass"] = "none" if s.axial_mass is None else f"{s.axial_mass:.4f}"
            row["layer"] = f"{s.layer} ({material[s.layer]})" if s.layer in material else s.layer
            row["states"] = f"{s.spin_degeneracy} x {s.valley_degeneracy}"
            row["bound"] = {True: "yes", False: "no", None: ""}[s.bound]
            row["valleys"] = s.valley
            for name in rows:
                rows[name].append(row[name])
    return rows


def _left_out(temperatures: Sequence[float], shown: int = MOST_TEMPERATURES) -> str:
    count = len(temperatures) - shown
    plural = "" if count == 1 else "s"
    return f"and {count} more temperature{plural}, see result.json" if count > 0 else ""


def step_table(result: Result) -> list[str]:
    """The conductance steps as aligned lines, one a level: where each opens, its height, and whether it is seen.

    For each of the first `MOST_TEMPERATURES`: plateau, shoulder or merged, with the contrast in per cent. Empty where
    there are no steps.
    """
    if not result.verdict.steps:
        return []
    entries = result.verdict.steps[:MOST_TEMPERATURES]
    temperatures = [f"at {entry['temperature_K']:g} K" for entry in entries]
    rows = [
        ["step", "opens at", "height", "then", *temperatures],
        ["level", "meV", "G0", "G0", *("" for _ in temperatures)],
    ]
    for number, first in enumerate(result.verdict.steps[0]["levels"][:MOST_ROWS]):
        row = [str(first["level"]), with_bar(1e3 * first["opens_at_eV"], 1e3 * first["opens_error_eV"])]
        row += [f"{first['height_G0']:g}", f"{first['plateau_G0']:g}"]
        for entry in entries:
            step = entry["levels"][number]
            row.append(step["kind"] + ("" if step["contrast"] is None else f" {percent(step['contrast'])}"))
        rows.append(row)
    lines = aligned(rows, left=range(4, 4 + len(temperatures)))
    more = _left_out([entry["temperature_K"] for entry in result.verdict.steps])
    return [*lines, more] if more else lines


def _by_length(result: Result) -> list[Sensitivity]:
    return [s for s in result.sensitivities if s.unit == PER_LENGTH]


def sensitivity_table(result: Result) -> list[str]:
    """How the first `MOST_LEVELS` levels move with the dimensions, as aligned lines; empty where none is known.

    The `MOST_DIMENSIONS` that move them most are shown, in meV for each nm. A level that the dimension splits has both
    of its ends. The growth of an outline that says what a dimension says is left out.
    """
    numbers = [s.level for s in result.subbands]
    level = np.array(numbers) - min(numbers)
    shown = np.unique(level)[:MOST_LEVELS]
    found = _by_length(result)
    given = [s.values for s in found if not s.of.startswith("growth of ")]
    found = [s for s in found if not s.of.startswith("growth of ") or not any(_alike(s.values, v) for v in given)]
    size = [float(np.abs(s.values[level <= shown[-1]]).max()) for s in found]
    kept = [n for n in range(len(found)) if 1e3 * size[n] >= _LEAST_meV_per_nm]
    kept = sorted(sorted(kept, key=lambda n: -size[n])[:MOST_DIMENSIONS])
    if not kept:
        return []
    rows = [["meV for each nm of", *(f"level {n + 1}" for n in shown)]]
    for n in kept:
        ends = [1e3 * found[n].values[level == number][[0, -1]] for number in shown]
        rows.append([_named(found[n].of), *(motion(float(a), float(b)) for a, b in ends)])
    lines = aligned(rows, left={0})
    hidden = len(found) - len(kept)
    return [*lines, f"and {hidden} more, see result.json"] if hidden else lines


def _alike(one: Any, other: Any) -> bool:
    """Motions that agree to more digits than are printed."""
    return bool(np.allclose(one, other, rtol=1e-4, atol=1e-7))


def _named(of: str) -> str:
    """A dimension as the wire file names it; groups of an imported mesh are called so."""
    return grown(of) if of.startswith("growth of ") else of.removeprefix("section.")


def percent(share: float) -> str:
    """A tenth of a percent, cut as in the verdict: 94.96 % must not read as 95 %."""
    return f"{math.floor(1000 * share * (1 + 1e-12)) / 10:.1f} %"


def printed_bar(text: str) -> float:
    """The bar in a text of `with_bar`, which is never narrower than the bar itself; 0 where there is none."""
    return float(text.partition(" ± ")[2] or 0)


def motion(low: float, high: float) -> str:
    """A motion in meV for each nm: one value, or both ends of values that differ in the digits shown."""
    one, other = (f"{value:+.3f}" if abs(value) < 1 else f"{significant(value, 4):>}" for value in (low, high))
    one, other = (text if text[0] in "+-" else f"+{text}" for text in (one, other))
    return one if abs(high - low) <= 0.01 * max(abs(low), abs(high)) else f"{one} to {other}"


def charge_lines(result: Result) -> list[str]:
    """The gates with their charge, and how well charge and potential agree; empty where the potential was given."""
    charge = result.charge
    if charge is None:
        return []
    rows = [["charge", "voltage", "lines up at", "charge"], ["on", "V", "V", "e/nm"]]
    rows += [
        [f"gate {g.name}", f"{g.voltage_V:.6g}", f"{g.lineup_voltage_V:.6g}", f"{g.charge_per_nm:+.4g}"]
        for g in charge.gates
    ]
    rows += [["pinned surfaces", "", "", f"{charge.pinned_per_nm:+.4g}"]] if charge.pinned_per_nm else []
    rows += [["dopants, surfaces", "", "", f"{charge.fixed_per_nm:+.4g}"]] if charge.fixed_per_nm else []
    rows.append(["carriers", "", "", f"{-(result.line_density_per_nm or 0.0):+.4g}"])
    said = (
        f"Carriers and potential agree to {charge.residual_V:.1e} V after {charge.passes}"
        f" pass{'' if charge.passes == 1 else 'es'}; charges balance to {charge.gauss_error:.1e}. Up to"
        f" {small(1e3 * float(np.nanmax(charge.potential_error_eV)))} meV of the bars come from the potential's mesh."
        " Steps and curves against the Fermi level keep this potential: what a gate's voltage does, gate-curve tells."
    )
    return [*aligned(rows, left={0}), *paragraphs(said)]


def small(value: float) -> str:
    """A number to two digits, rounded up."""
    if not value > 0:
        return f"{value:g}"
    unit = 10.0 ** (math.floor(math.log10(value)) - 1)
    return f"{math.ceil(value / unit - 1e-9) * unit:.2g}"


def _on_the_point(texts: Sequence[str]) -> list[str]:
    """The texts padded so that their first decimal points stand below each other."""
    places = [len(re.split(r"[. ]", text, maxsplit=1)[0]) for text in texts]
    moved = [" " * (max(places) - place) + text for text, place in zip(texts, places, strict=True)]
    return [text.ljust(max(map(len, moved))) for text in moved]


def summary(result: Result, folder: str | Path | None = None, status: str = DONE) -> str:
    """What the command line prints: verdict, table, warnings with remedies, and where the files are."""
    lines = [result.problem.title] if result.problem.title else []
    lines += [*paragraphs(by_temperature(result.verdict.text)), "", *subband_table(result), ""]
    if steps := step_table(result):
        lines += [*steps, ""]
    if moved := sensitivity_table(result):
        lines += [*moved, ""]
    size = result.summary
    lines += paragraphs(
        f"Energies count from the {result.energy_zero_text}, ± the error bar of the discretisation;"
        f" {size.unknowns:,} unknowns in {size.cells:,} curved cells, {size.passes}"
        f" mesh{'' if size.passes == 1 else 'es'};"
        f" {result.states_missed} states missed by count."
    )
    if charged := charge_lines(result):
        lines += ["", *charged]
    if not result.accuracy_met:
        worst = 1e3 * float(max(result.errors_eV, default=0.0))
        lines += paragraphs(
            f"ACCURACY MISSED: asked for {1e3 * result.problem.accuracy.energy_eV:g} meV, the largest bar is"
            f" {worst:.2g} meV. These are the best values found."
        )
    for warning in result.warnings:
        lines += ["", *paragraphs(f"warning {warning.code}: {warning.text}")]
        lines += paragraphs(warning.remedy, indent="    ")
    if remembered := from_memory(result):
        lines += [
            "",
            *paragraphs(f"Values from memory, not checked against a text, of those that matter here: {remembered}."),
        ]
    if differing := from_memory(result, "conflict"):
        lines += ["", *paragraphs(f"Values on which sources differ, of those that matter here: {differing}.")]
    if result.not_modelled:
        lines += ["", *paragraphs(f"Not modelled: {'; '.join(result.not_modelled)}.")]
    if status != DONE:
        lines += ["", *paragraphs(f"Marked: {status}.")]
    if folder is not None:
        lines += ["", f"Files: {folder}"]
    return "\n".join(lines)
