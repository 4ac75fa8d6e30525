"""The report of a solved wire: its parts in order, and what the script of the page draws and computes with."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from wiresolve.describe.problem import Problem
from wiresolve.describe.valley import ZONE_CENTRE
from wiresolve.output import report_blocks as blocks
from wiresolve.output import tables
from wiresolve.output.report_blocks import Folder, Plain, number, thinned
from wiresolve.output.report_page import Page, Part, dial, figure, folded, readings, table, tiles
from wiresolve.output.report_wire_data import (
    MOST_LEVELS,
    WARM_K,
    bar_eV,
    fermi_range,
    levels_of,
    plateaus,
    script_data,
)
from wiresolve.output.valley_names import short_valleys
from wiresolve.physics.plain_spectrum import spectrum_of_plain
from wiresolve.physics.sensitivity import PER_LENGTH
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.spread import grown
from wiresolve.subband import Subband, level_energy_eV, states
from wiresolve.units import KB

_MOST_DIMENSIONS = 10
_LEAST_EV_PER_NM = 2e-5
"""Dimensions that move all of these levels by less are left out."""
_ROWS = 41


def page(folder: Folder) -> Page:
    """The page of a result folder."""
    found, problem = folder.found, folder.problem
    spectrum = None if found.get("spectrum") is None else spectrum_of_plain(found["spectrum"])
    groups = levels_of(found)
    moved = _sensitivities(found)
    parts = [
        blocks.verdict(folder, found["verdict"]["text"], tiles(_tiles(found, problem, groups))),
        blocks.section(folder),
        Part("levels", "Levels against kT", _ladder(folder, groups)),
        *blocks.modes(folder, len(found["subbands"])),
        Part("dispersion", "Dispersion", _dispersion(folder)),
        Part("measured", "What is measured", _measured(folder, spectrum)),
    ]
    if moved:
        parts.append(Part("sensitivities", "Sensitivities", _moved(folder, moved, groups)))
    largest = max(s["error_eV"] for s in found["subbands"])
    command = "wiresolve solve input.toml --out repeated"
    parts += blocks.closing(folder, blocks.accuracy(folder, largest, _mesh_rows(found)), command)
    kelvins = ", ".join(f"{t:g} K" for t in problem.carriers.temperature_K)
    gates = (f"gate {gate['name']} at {gate['voltage_V']:g} V" for gate in found["gates"])
    count = len(found["subbands"])
    facts = blocks.facts(folder, (f"{count} subband{'' if count == 1 else 's'}", kelvins, *gates))
    return Page(str(found["title"]), "Wire report", facts, tuple(parts), script_data(folder, spectrum, groups, moved))


def _tiles(found: Plain, problem: Problem, groups: Sequence[Sequence[Subband]]) -> list[tuple[str, str, str]]:
    first, warm = groups[0], [t for t in problem.carriers.temperature_K if t > 0]
    lowest, bar = blocks.short(1e3 * level_energy_eV(first), 1e3 * bar_eV(first), "meV")
    rows = [("First level", lowest, f"{bar}from the {found['energy_zero']['text']}")]
    if len(groups) > 1:
        spacing = level_energy_eV(groups[1]) - level_energy_eV(first)
        ratio = " and ".join(f"{tables.significant(spacing / (KB * t), 3)} kT at {t:g} K" for t in warm[:2])
        rows.append(("To the next level", f"{tables.significant(1e3 * spacing, 4)} meV", ratio))
    mass = first[0].axial_mass
    carried = f"{short_valleys(first[0].valley)}, {states(first)} states with spin"
    rows.append(("Axial mass", "none" if mass is None else f"{mass:.4f} m0", carried))
    steps = found["verdict"]["steps"]
    if steps and steps[0]["levels"]:
        step = steps[0]["levels"][0]
        limit = step.get("plateau_up_to_K")
        flat = "" if limit is None else f"plateau up to {_cut(limit)} K"
        rows.append(("First step", f"{step['height_G0']:.3g} G0", flat))
    single = found["verdict"]["single_subband"]
    holds = single["holds_up_to_K"]
    above = " and above" if holds >= single["searched_up_to_K"] else ""
    value = f"up to {_cut(holds)} K{above}" if holds > 0 else "at no temperature"
    rows.append(("Single level carries", value, "95 % of the carriers or more"))
    return rows


def _cut(value: float) -> str:
    """Three digits, not rounded up: a limit must not be overstated."""
    if value <= 0:
        return "0"
    unit = 10.0 ** (math.floor(math.log10(value)) - 2)
    return f"{math.floor(value / unit * (1 + 1e-12)) * unit:.3g}"


def _ladder(folder: Folder, groups: Sequence[Sequence[Subband]]) -> str:
    found, warm = folder.found, [t for t in folder.problem.carriers.temperature_K if t > 0]
    shown = folder.shown("levels", "Levels with their bars, and spacings against kT")
    body = figure("ladder", "Levels to scale, beside rulers of one kT; each level ± its error bar.", fallback=shown)
    caption = "Spacing to the next level (dots) and error bar of each level (ticks), against kT (lines)."
    return body + figure("thermal", caption) + _subband_table(found, groups, warm)


def _subband_table(found: Plain, groups: Sequence[Sequence[Subband]], warm: Sequence[float]) -> str:
    subbands = found["subbands"]
    bound, density = (any(s[key] is not None for s in subbands) for key in ("bound", "line_density_per_nm"))
    heads = ["subband", "level", "energy ± bar (meV)", "to the next level (meV)"]
    heads += [f"in kT at {t:g} K" for t in warm[:3]]
    heads += ["axial mass (m0)", "spin × valleys"]
    named = any(s["valley"] != ZONE_CENTRE for s in subbands)
    layers = len({s["layer"] for s in subbands}) > 1 or any(s["shares"][s["layer"]] < 0.995 for s in subbands)
    heads += ["valleys"] * named + ["layer"] * layers + ["bound"] * bound + ["line density (1/nm)"] * density
    rows = []
    for n, group in enumerate(groups):
        spacing = level_energy_eV(groups[n + 1]) - level_energy_eV(group) if n + 1 < len(groups) else None
        for s in group:
            gap = spacing if s is group[-1] else None
            mass = s.axial_mass
            row = [str(s.index), str(s.level), tables.with_bar(1e3 * s.energy_eV, 1e3 * s.error_eV)]
            row.append("" if gap is None else tables.significant(1e3 * gap, 4))
            row += ["" if gap is None else tables.significant(gap / (KB * t), 3) for t in warm[:3]]
            row.append("none" if mass is None else f"{mass:.4f}")
            row += [f"{s.spin_degeneracy} × {s.valley_degeneracy}", *[short_valleys(s.valley)] * named]
            row += [f"{s.layer} ({100 * s.shares[s.layer]:.0f} %)"] * layers
            row += [{True: "yes", False: "no", None: ""}[s.bound]] * bound
            row += [number(s.line_density_per_nm)] * density
            rows.append(row)
    left = (0, *(heads.index(head) for head in ("valleys", "layer") if head in heads))
    return table(f"Subbands, energies from the {found['energy_zero']['text']}", heads, rows, left=left)


def _dispersion(folder: Folder) -> str:
    data = folder.found["dispersion"]
    places = thinned(len(data["k_per_nm"]), 13)
    heads = ["k (1/nm)", *(f"subband {s['index']} (meV)" for s in folder.found["subbands"])]
    rows = [[f"{data['k_per_nm'][n]:.4g}", *(f"{1e3 * row[n]:.3f}" for row in data["energy_eV"])] for n in places]
    bound = blocks.small_energy(data["error_bound_eV"])
    error = f"; beyond the bars of the minima its error is below {bound}" if data["error_bound_eV"] else ""
    caption = f"Energy along the wire, levels numbered{error}."
    valleys = list(dict.fromkeys(s["valley"] for s in folder.found["subbands"]))
    if len(valleys) > 1:
        caption += f" Full lines: {short_valleys(valleys[0])}; dashed: "
        caption += "; ".join(short_valleys(v) for v in valleys[1:]) + "."
    shown = folder.shown("dispersion", "Energy along the wire")
    return figure("dispersion", caption, table("Energy along the wire", heads, rows, left=()), shown)


def _measured(folder: Folder, spectrum: Spectrum | None) -> str:
    found, problem = folder.found, folder.problem
    binned, curve = found["density_of_states"], found["conductance"][-1]
    middles = [(a + b) / 2 for a, b in zip(binned["edges_eV"][:-1], binned["edges_eV"][1:], strict=True)]
    of_states = [[f"{1e3 * e:.4f}", number(1e-3 * v)] for e, v in zip(middles, binned["per_eV_nm"], strict=True)]
    numbers = table("Density of states, averages over bins", ("energy (meV)", "1/(meV nm)"), of_states, left=())
    places = thinned(len(curve["fermi_eV"]), _ROWS)
    rows = [[f"{1e3 * curve['fermi_eV'][n]:.4f}", f"{curve['G_over_G0'][n]:.5f}"] for n in places]
    caption = f"Conductance at {curve['temperature_K']:g} K"
    stairs = table(caption, ("Fermi level (meV)", "G0"), rows, left=())
    through = blocks.through(problem) or "Ballistic, with a transmission of 1."
    named = (("density_of_states", "Density of states"), ("conductance", "Conductance"))
    pictures = [folder.shown(name, words) for name, words in named]
    body = "" if spectrum is None else _controls(folder, spectrum)
    if spectrum is None:
        return "".join(pictures) + numbers + stairs + _steps(found)
    filled = "Density of states: exact averages over bins, marks where it is infinite; the strong part is occupied."
    words = folder.measured_words(*fermi_range(folder, spectrum))
    thin = f"Conductance at this temperature, thin at T = 0, marks where levels open. {through} {words}".strip()
    if problem.charged:
        thin += " The potential is kept as it is: a gate moves the levels too, and its curve is another one."
    body += figure("states", filled, numbers, pictures[0])
    body += figure("staircase", thin, stairs, pictures[1])
    body += blocks.occupation("Carriers in each level at this temperature and Fermi level, and their share of all.")
    return body + _steps(found)


def _controls(folder: Folder, spectrum: Spectrum) -> str:
    problem = folder.problem
    low, high = (1e3 * e for e in fermi_range(folder, spectrum))
    hottest = max(problem.carriers.temperature_K)
    kelvins = [(f"{t:g} K", float(t)) for t in dict.fromkeys((*problem.carriers.temperature_K[:4], 300.0))]
    fermis = [(words, 1e3 * e) for words, e in plateaus(folder.found, problem)]
    fermis = [(words, float(f"{e:.6g}")) for words, e in fermis if low <= e <= high]
    dials = dial("kelvin", "Temperature", "K", 0.0, max(WARM_K, hottest), kelvins)
    dials += dial("fermi", "Fermi level", "meV", low, high, fermis)
    names = (("conductance", "Conductance"), ("density", "Carriers"), ("first", "In the first level"))
    beyond = (
        f'<p class="aside" id="says-beyond" hidden>Hotter than the {hottest:g} K that was solved for: bands and gaps'
        " stay those of the file, and high subbands are counted by a smooth estimate.</p>"
    )
    shown = readings((*names, ("thermal", "kT")))
    return f'<form class="dials" aria-label="Temperature and Fermi level">{dials}</form>{shown}{beyond}'


def _steps(found: Plain) -> str:
    steps = found["verdict"]["steps"][:3]
    if not steps:
        return ""
    heads = ["level", "opens at (meV)", "height (G0)", "then (G0)", *(f"at {s['temperature_K']:g} K" for s in steps)]
    heads.append("a plateau up to")
    rows = []
    for n, first in enumerate(steps[0]["levels"]):
        row = [str(first["level"]), tables.with_bar(1e3 * first["opens_at_eV"], 1e3 * first["opens_error_eV"])]
        row += [f"{first['height_G0']:g}", f"{first['plateau_G0']:g}"]
        for step in (s["levels"][n] for s in steps):
            contrast = step["contrast"]
            row.append("" if step["kind"] is None else f"{step['kind']}, {tables.percent(contrast)}")
        limit = first["plateau_up_to_K"]
        rows.append([*row, "" if limit is None else f"{_cut(limit)} K"])
    words = "Steps of the ballistic conductance, and the contrast of the flat part after each"
    return table(words, heads, rows, left=(0, *range(4, 4 + len(steps))))


def _sensitivities(found: Plain) -> list[dict[str, Any]]:
    """How levels move with the dimensions that matter most, in meV for each nm: both ends where a level splits."""
    level = np.array([s["level"] for s in found["subbands"]])
    shown = np.unique(level)[:MOST_LEVELS]
    rows = [(s["of"], np.array(s["values"])) for s in found["sensitivities"] if s["unit"] == PER_LENGTH]
    given = [v for of, v in rows if not of.startswith("growth of ")]
    same = [of.startswith("growth of ") and any(np.allclose(v, g, 1e-4, 1e-7) for g in given) for of, v in rows]
    kept = [row for row, twice in zip(rows, same, strict=True) if not twice]
    kept.sort(key=lambda row: -float(np.abs(row[1][level <= shown[-1]]).max()))
    kept = [row for row in kept if float(np.abs(row[1][level <= shown[-1]]).max()) >= _LEAST_EV_PER_NM]
    found_rows = []
    for of, values in kept[:_MOST_DIMENSIONS]:
        ends = [1e3 * values[level == n] for n in shown]
        name = grown(of) if of.startswith("growth of ") else of.removeprefix("section.")
        found_rows.append({"of": name, "values": [[float(e.min()), float(e.max())] for e in ends]})
    return found_rows


def _moved(folder: Folder, moved: Sequence[Mapping[str, Any]], groups: Sequence[Sequence[Subband]]) -> str:
    heads = ["dimension", *(f"level {g[0].level}" for g in groups[:MOST_LEVELS])]
    rows = [[r["of"], *(tables.motion(low, high) for low, high in r["values"])] for r in moved]
    numbers = table("Motion of each level in meV for each nm of a dimension", heads, rows)
    caption = "How far the first levels, numbered, move for each nanometre of a dimension; a split level is a line."
    drawn = figure("sensitivities", caption)
    mapped = folder.shown("sensitivity", "How far the first levels move for each nanometre of each part of the outline")
    plate = ""
    if mapped:
        note = "Which part of the outline matters: motion of the first levels as each part moves outwards."
        plate = f'<figure class="plate" tabindex="0">{mapped}<figcaption>{note}</figcaption></figure>'
    others = [s for s in folder.found["sensitivities"] if s["unit"] != PER_LENGTH]
    more = [
        [s["of"], s["unit"].replace("_", " "), number(s["values"][0], 3), number(_second(s, groups), 3)] for s in others
    ]
    of_values = table("Motion of the first two levels", ("of", "unit", "level 1", "level 2"), more, (0, 1))
    return drawn + numbers + plate + (folded("Masses, edges and other values of materials", of_values) if more else "")


def _second(one: Plain, groups: Sequence[Sequence[Subband]]) -> float | None:
    return float(one["values"][groups[1][0].index - 1]) if len(groups) > 1 else None


def _mesh_rows(found: Plain) -> list[tuple[str, str]]:
    mesh, charge = found["mesh"], found["charge"]
    plural = "" if mesh["passes"] == 1 else "es"
    rows = [
        ("Mesh", f"{mesh['cells']:,} curved cells of degree {mesh['degree']}, {mesh['unknowns']:,} unknowns,"
                 f" {mesh['passes']} mesh{plural} made, {mesh['area_nm2']:.6g} nm²"),
        ("States missed", f"{found['states_missed']}, by the count of the discrete problem"),
        ("Energy zero", _zero(found["energy_zero"])),
    ]  # fmt: skip
    if charge is not None:
        rows.append(
            ("Charge", f"agrees with the potential to {charge['residual_V']:.1e} V after {charge['passes']} passes,"
                       f" balanced to {charge['gauss_error']:.1e}; up to"
                       f" {blocks.small_energy(charge['potential_error_eV'])} of the bars come from the potential")
        )  # fmt: skip
        rows += [(f"Gate {g['name']}", f"{g['voltage_V']:g} V, {g['charge_per_nm']:+.4g} e/nm") for g in found["gates"]]
    total = found["timings_s"].get("total")
    return [*rows, *([("Time", f"{total:.2g} s")] if total else [])]


def _zero(zero: Plain) -> str:
    value = zero["value_eV_on_common_scale"]
    return str(zero["text"]) + ("" if value is None else f", at {value:.5g} eV on the common scale")
