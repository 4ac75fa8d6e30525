"""The report of a gate curve: its parts in order, and the sweep's rows that the page's slider goes between."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.problem import Problem
from wiresolve.output import report_blocks as blocks
from wiresolve.output import tables
from wiresolve.output.between_points import Between, between
from wiresolve.output.report_blocks import Folder, Plain, number, thinned
from wiresolve.output.report_page import Page, Part, dial, figure, readings, table, tiles
from wiresolve.output.report_wire_data import CONSTANTS
from wiresolve.output.valley_names import short_valleys
from wiresolve.physics.transmission import transmission_of
from wiresolve.units import KB

Array = NDArray[np.float64]
_MOTION = re.compile(r"step_(\d+)_moves_with_(.+)_V_per_nm")
_MEASURES = {
    "threshold_by_first_level_V": ("Threshold: the first level meets the Fermi level", "V", 1.0),
    "threshold_by_extrapolation_V": ("Threshold: line density extrapolated to none", "V", 1.0),
    "geometric_F_per_m": ("Geometric capacitance", "nF/m", 1e9),
    "on_current_A": ("Current when on", "A", 1.0),
    "off_current_A": ("Current when off", "A", 1.0),
    "transconductance_S": ("Transconductance when on", "µS", 1e6),
    "subthreshold_slope_mV_per_decade": ("Gate voltage for each decade of current, when off", "mV", 1.0),
    "barrier_lowering_mV_per_V": ("Lowering of the off-current's gate voltage for each volt on the drain", "mV", 1.0),
    "drain_coupling": ("Lowering of the barrier for each volt on the drain", "eV", 1.0),
    "scale_length_nm": ("Length over which the drain's field falls off along the wire", "nm", 1.0),
    "injection_velocity_m_per_s": ("Injection velocity when on", "km/s", 1e-3),
    "ballistic_part": ("Current when on over that with every carrier transmitted", "", 1.0),
}
"""Words, unit and scale of the numbers of a whole sweep, by their names in `gate_curve.json`."""
_BINS = 240
_ROWS = 41


def page(folder: Folder) -> Page:
    """The page of a gate curve's folder."""
    found = folder.found
    good = sorted((p for p in found["points"] if p["converged"]), key=lambda p: p["gate_voltage_V"])
    swept = between(good, found["steps"], found["temperature_K"], folder.problem.transport)
    curves = "Gate curve"
    parts = [
        blocks.verdict(folder, found["verdict"]["text"], tiles(_tiles(found))),
        blocks.section(folder),
        Part("levels", "Levels against gate voltage", _levels(folder, good, swept is not None)),
        Part("measured", "What is measured", _measured(folder, good, swept is not None)),
        Part("gate-curve", curves, _curves(folder, good)),
    ]
    if motions := _motions(found):
        parts.append(Part("sensitivities", "Sensitivities", _moved(motions, folder.problem)))
    largest = max((max(p["error_eV"], default=0.0) for p in good), default=0.0)
    command = "wiresolve gate-curve input.toml --out repeated"
    parts += blocks.closing(folder, blocks.accuracy(folder, largest, _mesh_rows(found, good)), command)
    facts = blocks.facts(folder, (f"{len(found['points'])} points", f"{found['temperature_K']:g} K"))
    return Page(str(found["title"]), "Gate curve report", facts, tuple(parts), _data(folder, good, swept))


def _tiles(found: Plain) -> list[tuple[str, str, str]]:
    rows = []
    for step in [s for s in found["steps"] if s["opens_at_V"] is not None][:3]:
        at, bar = blocks.short(step["opens_at_V"], step["error_V"] or 0.0, "V")
        wide = "" if step["width_V"] is None else f", {tables.significant(1e3 * step['width_V'], 3)} mV wide"
        rows.append((f"Step {step['level']} opens at", at, f"{bar}to {step['plateau_G0']:.4g} G0{wide}"))
    measures = found["measures"]
    if (on := measures.get("on_current_A")) is not None:
        rows.append(("Current when on", _ampere(on, 4), f"off {_ampere(measures.get('off_current_A'), 3)}"))
    if (swing := measures.get("subthreshold_slope_mV_per_decade")) is not None:
        rows.append(("Below threshold", f"{swing:.3g} mV", "for each decade of current"))
    failed = sum(not p["converged"] for p in found["points"])
    count = len(found["points"])
    rows.append(("Points", f"{count - failed} of {count}", "converged"))
    return rows


def _levels(folder: Folder, good: Sequence[Plain], drawn: bool) -> str:
    kelvin, shown = folder.found["temperature_K"], folder.shown("levels", "Levels against gate voltage")
    caption = "Levels numbered, interpolated between the solved points, from the source's Fermi level (dashed), with"
    caption += f" kT at {kelvin:g} K on both sides of it."
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
        f" interpolated between them, marks where steps open. {through} {folder.measured_words(*_ends(found))}"
    )
    body = controls + figure("gate-staircase", caption.strip(), numbers, shown)
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
    measures = [(name, value) for name, value in sorted(found["measures"].items()) if value is not None]
    rows = [_measure(name, value) for name, value in measures if not _MOTION.fullmatch(name)]
    if rows:
        body += table("Numbers of the whole sweep", ("quantity", "value", "unit"), rows, left=(0, 2))
    return body


def _measure(name: str, value: float) -> list[str]:
    """Words, value and unit of a number of the whole sweep; one without words here is told by its name."""
    words, unit, scale = _MEASURES.get(name, (name.replace("_", " "), "", 1.0))
    shown, _, unit = (_ampere(value, 4) if unit == "A" else f"{number(scale * value)} {unit}").partition(" ")
    return [words, shown, unit]


def _ampere(value: float | None, digits: int) -> str:
    """A current with the prefix that fits its size; nothing for none."""
    if value is None or not math.isfinite(value):
        return ""
    sizes = ((1e-3, "mA"), (1e-6, "µA"), (1e-9, "nA"), (1e-12, "pA"), (1e-15, "fA"))
    size, unit = next(((s, u) for s, u in sizes if abs(value) >= s), (1e-15, "fA"))
    return f"{number(value / size, digits)} {unit}"


def _nano(value: float | None) -> str:
    return number(None if value is None else 1e9 * value)


def _motions(found: Plain) -> list[tuple[str, dict[int, float]]]:
    """How far steps move with each dimension, in V for each nm, by the step's number."""
    motions: dict[str, dict[int, float]] = {}
    for name, value in sorted(found["measures"].items()):
        if (of := _MOTION.fullmatch(name)) and value is not None:
            motions.setdefault(of[2], {})[int(of[1])] = value
    if not motions:
        told = {s["level"]: s["moves_V_per_nm"] for s in found["steps"] if s["moves_V_per_nm"] is not None}
        motions = {"the section": told} if told else {}
    return list(motions.items())


def _named(of: str, problem: Problem) -> str:
    """A dimension in words: "across flats", "insulator thickness of the gate back"."""
    if gate := re.fullmatch(r"gates\[(\d+)\]\.(.+)", of):
        return f"{gate[2].replace('.', ' ').replace('_', ' ')} of the gate {problem.gates[int(gate[1]) - 1].name}"
    return of.removeprefix("section.").replace("_", " ")


def _moved(motions: Sequence[tuple[str, dict[int, float]]], problem: Problem) -> str:
    count = max(max(own) for _, own in motions)
    heads = ["dimension", *(f"step {n}" for n in range(1, count + 1))]
    rows = [
        [_named(of, problem), *(f"{1e3 * own[n]:+.3g}" if n in own else "" for n in range(1, count + 1))]
        for of, own in motions
    ]
    return table("How far steps move, in mV, for each nanometre by which a dimension grows", heads, rows)


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


def _data(folder: Folder, good: Sequence[Plain], swept: Between | None) -> dict[str, Any]:
    found = folder.found
    keys = ("gate_voltage_V", "conductance_G0", "line_density_per_nm", "capacitance_F_per_m", "geometric_F_per_m")
    points = [{key: p[key] for key in (*keys, "quantum_F_per_m", "centroid_F_per_m")} for p in good]
    lines = () if swept is None else swept.lines
    density = [
        {"level": level, "density": np.sum([row["density"] for row in lines if row["level"] == level], axis=0).tolist()}
        for level in sorted({row["level"] for row in lines})
    ]
    data: dict[str, Any] = {
        "constants": CONSTANTS,
        "measured": folder.measured_points(*_ends(found)),
        "measuredWords": folder.measured_words(*_ends(found)),
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
    if swept is not None:
        data["sweep"] = _sweep(swept, found)
    return data


def _sweep(swept: Between, found: Plain) -> dict[str, Any]:
    """What the slider goes over: the rows, and the levels and the staircase between the solved points."""
    at, through = swept.places_V(), transmission_of(swept.transport)
    curves = zip(swept.lines, (1e3 * swept.lines_eV(at)).T, strict=True)
    return {
        "voltages": swept.voltages_V.tolist(),
        "rows": [{key: value for key, value in row.items() if key != "listed_at"} for row in swept.rows],
        "at": at.tolist(),
        "lines": [
            {"level": line["level"], "group": line["group"], "meV": [_rounded(e) for e in energy.tolist()]}
            for line, energy in curves
        ],
        "conductance": [_rounded(g) for g in swept.conductance_G0(at).tolist()],
        "kelvin": swept.temperature_K,
        "through": {
            "parts": through.part(np.arange(len(swept.rows))).tolist(),
            "width": float(through.width_eV),
            "resistance": 0.0 if swept.transport is None else swept.transport.contact_resistance_ohm,
        },
        "bins": {"edges": _edges(swept).tolist()},
        "start_V": _start(found, swept.voltages_V.tolist()),
    }


def _rounded(value: float) -> float | None:
    """To the digits that can be seen; None, a gap, for NaN."""
    return round(value, 7) if math.isfinite(value) else None


def _ends(found: Plain) -> tuple[float, float]:
    """The first and the last voltage of the sweep."""
    voltages = [float(p["gate_voltage_V"]) for p in found["points"]]
    return min(voltages), max(voltages)


def _start(found: Plain, voltages: Sequence[float]) -> float:
    """In the middle of the first plateau, where the sweep shows it."""
    opened = [s["opens_at_V"] for s in found["steps"] if s["opens_at_V"] is not None][:2]
    middle = sum(opened) / 2 if len(opened) == 2 else voltages[-1]
    return float(f"{min(max(middle, voltages[0]), voltages[-1]):.4g}")


def _edges(swept: Between) -> Array:
    """Energies from below the lowest level of the sweep to above the Fermi level."""
    lowest = min(min(row["energy"]) for row in swept.rows)
    highest = max(max(line["energy"]) for line in swept.lines)
    thermal = KB * swept.temperature_K
    top = min(highest, max(12 * thermal, 0.4 * abs(lowest), 0.01))
    return np.linspace(lowest - 0.03 * (top - lowest), max(top, 6 * thermal), _BINS + 1)
