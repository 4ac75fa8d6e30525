"""The report of a gate curve: its parts in order, and the sweep's rows that the page's slider goes between."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.output import report_blocks as blocks
from wiresolve.output import tables
from wiresolve.output.report_blocks import Folder, Plain, number, thinned
from wiresolve.output.report_page import Page, Part, dial, figure, readings, table, tiles
from wiresolve.output.report_wire_data import CONSTANTS
from wiresolve.output.valley_names import short_valleys
from wiresolve.physics.transmission import transmission_of
from wiresolve.units import KB

Array = NDArray[np.float64]
_SAME_EV = 1e-6
"""Filled states this close to the listed ones are these."""
_BINS = 240
_ROWS = 41


def page(folder: Folder) -> Page:
    """The page of a gate curve's folder."""
    found = folder.found
    good = sorted((p for p in found["points"] if p["converged"]), key=lambda p: p["gate_voltage_V"])
    rows = _with_openings(_rows(good), good, found) if len(good) > 1 else []
    curves = "Gate curve"
    parts = [
        blocks.verdict(folder, found["verdict"]["text"], tiles(_tiles(found))),
        blocks.section(folder),
        Part("levels", "Levels against gate voltage", _levels(folder, good, bool(rows))),
        Part("measured", "What is measured", _measured(folder, good, bool(rows))),
        Part("gate-curve", curves, _curves(folder, good)),
    ]
    if any(s["moves_V_per_nm"] is not None for s in found["steps"]):
        parts.append(Part("sensitivities", "Sensitivities", _moved(found)))
    largest = max((max(p["error_eV"], default=0.0) for p in good), default=0.0)
    command = "wiresolve gate-curve input.toml --out repeated"
    parts += blocks.closing(folder, blocks.accuracy(folder, largest, _mesh_rows(found, good)), command)
    facts = blocks.facts(folder, (f"{len(found['points'])} points", f"{found['temperature_K']:g} K"))
    return Page(str(found["title"]), "Gate curve report", facts, tuple(parts), _data(folder, good, rows))


def _tiles(found: Plain) -> list[tuple[str, str, str]]:
    rows = []
    for step in [s for s in found["steps"] if s["opens_at_V"] is not None][:3]:
        at = tables.with_bar(step["opens_at_V"], step["error_V"] or 0.0)
        wide = "" if step["width_V"] is None else f", {tables.significant(1e3 * step['width_V'], 3)} mV wide"
        rows.append((f"Step {step['level']} opens at", f"{at} V", f"to {step['plateau_G0']:.4g} G0{wide}"))
    measures = found["measures"]
    if (on := measures.get("on_current_A")) is not None:
        rows.append(("Current when on", f"{number(1e6 * on)} µA", f"off {number(measures.get('off_current_A'), 2)} A"))
    if (swing := measures.get("subthreshold_slope_mV_per_decade")) is not None:
        rows.append(("Below threshold", f"{swing:.3g} mV", "for each decade of current"))
    failed = sum(not p["converged"] for p in found["points"])
    count = len(found["points"])
    rows.append(("Points", f"{count - failed} of {count}", "converged"))
    return rows


def _levels(folder: Folder, good: Sequence[Plain], drawn: bool) -> str:
    kelvin, shown = folder.found["temperature_K"], folder.shown("levels", "Levels against gate voltage")
    caption = f"Levels numbered, from the source's Fermi level (dashed), with kT at {kelvin:g} K on both sides of it."
    most = max((len(p["energy_eV"]) for p in good), default=0)
    heads = ["gate voltage (V)", *(f"subband {n + 1} (meV)" for n in range(most))]
    rows = []
    for n in thinned(len(good), _ROWS):
        energies = [
            tables.with_bar(1e3 * e, 1e3 * b) for e, b in zip(good[n]["energy_eV"], good[n]["error_eV"], strict=True)
        ]
        rows.append([f"{good[n]['gate_voltage_V']:g}", *energies, *[""] * (most - len(energies))])
    numbers = table("Energies from the source's Fermi level", heads, rows, left=())
    return figure("gate-levels", caption, numbers, shown) if drawn else shown + numbers


def _measured(folder: Folder, good: Sequence[Plain], drawn: bool) -> str:
    found = folder.found
    heads = ("gate voltage (V)", "conductance (G0)", "line density (1/nm)")
    places = [good[n] for n in thinned(len(good), _ROWS)]
    values = [
        [f"{p['gate_voltage_V']:g}", f"{p['conductance_G0']:.5f}", number(p["line_density_per_nm"])] for p in places
    ]
    numbers = table("Conductance and carriers", heads, values, left=())
    shown = folder.shown("staircase", "Conductance against gate voltage")
    if not drawn:
        return shown + numbers + _steps(found)
    low, high = (good[n]["gate_voltage_V"] for n in (0, -1))
    opened = [(f"step {s['level']}", s["opens_at_V"]) for s in found["steps"] if s["opens_at_V"] is not None][:6]
    presets = [(words, float(f"{v:.6g}")) for words, v in opened if low <= v <= high]
    slider = dial("voltage", f"Voltage of the gate {found['swept_gate']}", "V", low, high, presets)
    names = (("conductance", "Conductance"), ("density", "Carriers"), ("first", "Open"), ("thermal", "kT"))
    controls = f'<form class="dials" aria-label="Gate voltage">{slider}</form>{readings(names)}'
    through = blocks.through(folder.problem) or "Ballistic, with a transmission of 1."
    caption = (
        f"Conductance at {found['temperature_K']:g} K: dots are solved points, the line follows from levels"
        f" interpolated between them, marks where steps open. {through}{folder.measured_words()}"
    )
    body = controls + figure("gate-staircase", caption, numbers, shown)
    body += figure("states", "Density of states at this voltage, from interpolated levels; strong where occupied.")
    body += blocks.occupation("Carriers in each level at this voltage, and their share of all.")
    return body + _steps(found)


def _steps(found: Plain) -> str:
    heads = ("step", "opens at (V)", "height (G0)", "then (G0)", "width (mV)", "of the valleys")
    rows = [
        [
            str(s["level"]),
            tables.with_bar(s["opens_at_V"], s["error_V"] or 0.0),
            f"{s['height_G0']:.4g}",
            f"{s['plateau_G0']:.4g}",
            number(None if s["width_V"] is None else 1e3 * s["width_V"], 3),
            short_valleys(s["valley"]) if s["valley"] else "",
        ]
        for s in found["steps"]
        if s["opens_at_V"] is not None
    ]
    return table("Steps of the conductance", heads, rows, left=(0, 5)) if rows else ""


def _curves(folder: Folder, good: Sequence[Plain]) -> str:
    found, shown = folder.found, folder.shown("density_and_capacitance", "Line density and capacitance")
    heads = ("gate voltage (V)", "in all (nF/m)", "geometric", "quantum", "centroid", "coupling (eV/V)")
    names = ("capacitance_F_per_m", "geometric_F_per_m", "quantum_F_per_m", "centroid_F_per_m")
    places = [good[n] for n in thinned(len(good), _ROWS)]
    rows = [
        [f"{p['gate_voltage_V']:g}", *(_nano(p[name]) for name in names), number(p["gate_coupling"])] for p in places
    ]
    numbers = table("Capacitances and the gate's coupling to the first level", heads, rows, left=())
    body = figure("density", "Line density, in all and of each level.", "", shown)
    parts = "Capacitance and its parts in series: 1/all = 1/geometric + 1/quantum + 1/centroid."
    body += figure("capacitance", parts, numbers)
    if found["transistor"]:
        body += figure("transfer", "Current against gate voltage, a line for each drain voltage.")
        if len({t["drain_voltage_V"] for t in found["transistor"]}) > 1:
            body += figure("output", "Current against drain voltage, a line for each gate voltage.")
    measures = [[name, number(value)] for name, value in sorted(found["measures"].items()) if value is not None]
    if measures:
        body += table("Numbers of the whole sweep", ("name in gate_curve.json", "value"), measures)
    return body


def _nano(value: float | None) -> str:
    return number(None if value is None else 1e9 * value)


def _moved(found: Plain) -> str:
    rows = [
        [str(s["level"]), f"{1e3 * s['moves_V_per_nm']:+.3g}"]
        for s in found["steps"]
        if s["moves_V_per_nm"] is not None
    ]
    return table("How far each step moves for each nanometre by which the section grows", ("step", "mV"), rows)


def _mesh_rows(found: Plain, good: Sequence[Plain]) -> list[tuple[str, str]]:
    mesh = found["mesh"]
    rows = [("Mesh", f"{mesh['cells']:,} curved cells of degree {mesh['degree']}, {mesh['points']:,} points")]
    if good:
        passes, residual = max(p["passes"] for p in good), max(abs(p["residual_V"]) for p in good)
        balance = max(abs(p["gauss_error"]) for p in good)
        words = f"agrees with the potential to {residual:.1e} V in at most {passes} passes, balanced to {balance:.1e}"
        rows.append(("Charge", words))
    rows += [(f"Failed at {p['gate_voltage_V']:g} V", str(p["note"])) for p in found["points"] if not p["converged"]]
    return [*rows, ("Energy zero", str(found["energy_zero"]["text"]))]


def _rows(good: Sequence[Plain]) -> list[dict[str, Any]]:
    """Subbands at every solved voltage, ascending: the listed ones, and filled ones beyond.

    Where the listed ones hold all carriers each is followed within its group of valleys, else by its place in energy.
    What a point does not tell of a row comes from the nearest point that does.
    """
    inside = all(
        len(p["filled_energy_eV"]) <= len(p["energy_eV"])
        and np.allclose(p["filled_energy_eV"], p["energy_eV"][: len(p["filled_energy_eV"])], rtol=0, atol=_SAME_EV)
        for p in good
    )
    names: dict[tuple[str, int], None] = {}
    each = []
    for point in good:
        held = _by_name(point, inside)
        names |= dict.fromkeys(held)
        each.append(held)
    valleys = list(dict.fromkeys(v for p in good for v in p["valley"]))
    rows = []
    for name in names:
        columns = {
            key: _filled([held.get(name, {}).get(key) for held in each])
            for key in ("energy", "mass", "alpha", "degeneracy", "coupling", "level")
        }
        listed = sum(name in held and held[name]["listed"] for held in each)
        rows.append(
            {
                **{key: columns[key].tolist() for key in ("energy", "mass", "alpha", "degeneracy", "coupling")},
                "density": [held.get(name, {}).get("density", 0.0) for held in each],
                "level": int(columns["level"][-1]),
                "listed": listed == len(good),
                "group": valleys.index(name[0]) if name[0] in valleys else 0,
            }
        )
    return sorted(rows, key=lambda row: float(row["energy"][-1]))


def _with_openings(given: Sequence[Plain], good: Sequence[Plain], found: Plain) -> list[dict[str, Any]]:
    """The same with the voltages at which steps open, which are solved for, as further nodes of the energies."""
    at = [p["gate_voltage_V"] for p in good]
    opened = [{"at": s["opens_at_V"], "left": s["height_G0"]} for s in found["steps"] if s["opens_at_V"] is not None]
    rows = [{**row, **{key: list(row[key]) for key in ("energy", "coupling")}, "nodes": list(at)} for row in given]
    crossing = []
    for row in rows:
        energy = np.array(row["energy"])
        passed = np.flatnonzero((energy[:-1] > 0) & (energy[1:] <= 0))
        if len(passed):
            n = int(passed[0])
            part = energy[n] / (energy[n] - energy[n + 1])
            crossing.append((n, part, row))
    crossing.sort(key=lambda entry: (entry[0], entry[1]))
    # A step is of one subband or, by its height, of several that open together.
    for n, _, row in crossing:
        near = [s for s in opened if at[n] < s["at"] < at[n + 1] and s["left"] > 0]
        if not near:
            continue
        step = near[0]
        step["left"] -= row["degeneracy"][n + 1] / 2
        slope = (row["energy"][n] - row["energy"][n + 1]) / (at[n + 1] - at[n])
        for key, value in (("nodes", step["at"]), ("energy", 0.0), ("coupling", slope)):
            row[key].insert(n + 1, value)
    return rows


def _by_name(point: Plain, inside: bool) -> dict[tuple[str, int], dict[str, Any]]:
    """The rows of a point by group of valleys and place in it, or by place in all."""
    seen: dict[str, int] = {}
    held: dict[tuple[str, int], dict[str, Any]] = {}
    filled = len(point["filled_energy_eV"])
    for n in range(max(len(point["energy_eV"]), filled)):
        listed = n < len(point["energy_eV"])
        valley = point["valley"][n] if inside else ""
        name = (valley, seen.get(valley, 0))
        seen[valley] = name[1] + 1
        known = n < filled
        mass = point["axial_mass"][n] if listed else None
        held[name] = {
            "energy": point["filled_energy_eV"][n] if known else point["energy_eV"][n],
            "mass": point["filled_axial_mass"][n] if known else mass,
            "alpha": point["filled_alpha_per_eV"][n] if known else None,
            "degeneracy": point["filled_degeneracy"][n] if known else point["degeneracy"][n],
            "coupling": point["coupling"][n] if listed else point["gate_coupling"],
            "level": point["level"][n] if listed else n + 1,
            "density": point["line_density_by_subband_per_nm"][n] if listed else 0.0,
            "listed": listed,
        }
    return held


def _filled(values: Sequence[float | None]) -> Array:
    """A column with what is missing taken from the nearest place that has it; 0 where none has."""
    column = np.array([np.nan if v is None else v for v in values], dtype=float)
    known = np.flatnonzero(np.isfinite(column))
    if not len(known):
        return np.zeros(len(column))
    place = np.arange(len(column))
    return np.asarray(column[known[np.argmin(np.abs(place[:, None] - known), axis=1)]])


def _data(folder: Folder, good: Sequence[Plain], rows: Sequence[Mapping[str, Any]]) -> dict[str, Any]:
    found, problem = folder.found, folder.problem
    keys = ("gate_voltage_V", "conductance_G0", "line_density_per_nm", "capacitance_F_per_m", "geometric_F_per_m")
    points = [{key: p[key] for key in (*keys, "quantum_F_per_m", "centroid_F_per_m")} for p in good]
    density = [
        {"level": level, "density": np.sum([row["density"] for row in rows if row["level"] == level], axis=0).tolist()}
        for level in sorted({row["level"] for row in rows})
    ]
    voltages = [p["gate_voltage_V"] for p in good]
    data: dict[str, Any] = {
        "constants": CONSTANTS,
        "measured": folder.measured_points(),
        "curve": {
            "voltages": [p["gate_voltage_V"] for p in found["points"]],
            "points": points,
            "levels": density,
            "steps": [s["opens_at_V"] for s in found["steps"]],
            "failed": [p["gate_voltage_V"] for p in found["points"] if not p["converged"]],
            "transistor": [
                {key: t[key] for key in ("gate_voltage_V", "drain_voltage_V", "current_A")}
                for t in found["transistor"]
                if t["current_A"] is not None
            ],
            "axis": f"Voltage of the gate {found['swept_gate']} (V)",
        },
    }
    if rows:
        through = transmission_of(problem.transport)
        count = max(len(rows), 1)
        data["sweep"] = {
            "voltages": voltages,
            "rows": list(rows),
            "kelvin": found["temperature_K"],
            "through": {
                "parts": through.part(np.arange(count)).tolist(),
                "width": float(through.width_eV),
                "resistance": 0.0 if problem.transport is None else problem.transport.contact_resistance_ohm,
            },
            "bins": {"edges": _edges(rows, found["temperature_K"]).tolist()},
            "start_V": _start(found, voltages),
        }
    return data


def _start(found: Plain, voltages: Sequence[float]) -> float:
    """In the middle of the first plateau, where the sweep shows it."""
    opened = [s["opens_at_V"] for s in found["steps"] if s["opens_at_V"] is not None][:2]
    middle = sum(opened) / 2 if len(opened) == 2 else voltages[-1]
    return float(f"{min(max(middle, voltages[0]), voltages[-1]):.4g}")


def _edges(rows: Sequence[Mapping[str, Any]], kelvin: float) -> Array:
    """Energies from below the lowest level of the sweep to above the Fermi level."""
    lowest = min(min(row["energy"]) for row in rows)
    highest = max(max(row["energy"]) for row in rows if row["listed"])
    thermal = KB * kelvin
    top = min(highest, max(12 * thermal, 0.4 * abs(lowest), 0.01))
    return np.linspace(lowest - 0.03 * (top - lowest), max(top, 6 * thermal), _BINS + 1)
