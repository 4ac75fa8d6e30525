"""A sweep between its solved points: levels on cubic pieces, and the staircase that follows from them.

Reports and figures draw the same: energies go through the solved points and the solved voltages at which steps open,
with the couplings as their slopes; the conductance is that of the levels so found.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from wiresolve.describe.operation import Transport
from wiresolve.gate_result import GateCurve
from wiresolve.physics.conductance import in_series
from wiresolve.physics.gate_steps import step_width_eV
from wiresolve.physics.rounded import NEAR_STEP_KT, step
from wiresolve.physics.transmission import transmission_of
from wiresolve.units import KB

Array = NDArray[np.float64]
Plain = Mapping[str, Any]
_SAME_EV = 1e-6
"""Filled states this close to the listed ones are these."""
_EVEN = 401
"""Even places of the curves; what is steeper than these has places of its own."""
_SHARP_EV = 1e-9
"""How far beside an opening a step without width is drawn."""


@dataclass(frozen=True, eq=False)
class Between:
    """Between the solved points of a sweep, at `voltages_V` (p,) ascending.

    `rows` are all subbands that are known, which sums go over; `lines` are the listed ones, each followed within its
    group of valleys, which are drawn. Both are plain data: `energy` and `coupling` at the voltages `nodes`; `mass`,
    `alpha`, `degeneracy` and `density` at the solved points; `level` (None for a row beyond the listed ones),
    `listed_at` (p,) the points that list it, and `group` of valleys.
    """

    voltages_V: Array
    rows: tuple[dict[str, Any], ...]
    lines: tuple[dict[str, Any], ...]
    temperature_K: float
    transport: Transport | None

    def energies_eV(self, voltage_V: Array) -> Array:
        """Energies of all rows, (v, rows), at voltages within the sweep."""
        return np.column_stack([_energy(row, voltage_V) for row in self.rows])

    def lines_eV(self, voltage_V: Array) -> Array:
        """Energies of the lines, (v, lines); NaN beyond the points that list one."""
        found = np.column_stack([_energy(line, voltage_V) for line in self.lines])
        left, part = _place(self.voltages_V, voltage_V)
        for n, line in enumerate(self.lines):
            listed = np.array(line["listed_at"], dtype=bool)
            known = (listed[left] | (part >= 1)) & (listed[left + 1] | (part <= 0))
            found[~known, n] = np.nan
        return found

    def conductance_G0(self, voltage_V: Array) -> Array:
        """Conductance in units of G0 at voltages within the sweep, with the transmission and contacts of the wire."""
        energy = self.energies_eV(voltage_V)
        left, part = _place(self.voltages_V, voltage_V)
        nearest = left + (part >= 0.5)
        degeneracy = np.array([row["degeneracy"] for row in self.rows]).T[nearest]
        order = np.argsort(energy, axis=1, kind="stable")
        energy, degeneracy = (np.take_along_axis(values, order, axis=1) for values in (energy, degeneracy))
        through = transmission_of(self.transport)
        weights = degeneracy * through.part(np.arange(len(self.rows)))
        total = (step(-energy, KB * self.temperature_K, through.width_eV) * weights).sum(axis=1) / 2
        return in_series(total, 0.0 if self.transport is None else self.transport.contact_resistance_ohm)

    def places_V(self) -> Array:
        """Where curves are computed: evenly, at the solved points, and closely where steps open."""
        low, high = float(self.voltages_V[0]), float(self.voltages_V[-1])
        even = np.linspace(low, high, _EVEN)
        width = max(KB * self.temperature_K, transmission_of(self.transport).width_eV, _SHARP_EV)
        found = [even, self.voltages_V]
        for row in self.rows:
            energy = _energy(row, even)
            for n in np.flatnonzero((energy[:-1] > 0) & (energy[1:] <= 0)):
                opened = brentq(lambda v, row=row: float(_energy(row, np.array([v]))[0]), even[n], even[n + 1])
                slope = (energy[n] - energy[n + 1]) / (even[n + 1] - even[n])
                found.append(opened + np.array(NEAR_STEP_KT) * width / slope)
        places = np.unique(np.concatenate(found))
        return places[(places >= low) & (places <= high)]


def between(
    points: Sequence[Plain], steps: Sequence[Plain], temperature_K: float, transport: Transport | None
) -> Between | None:
    """Between the converged ones of plain points; None where there are not two of them, or no subbands.

    Parameters
    ----------
    points, steps : as in `gate_curve.json`.
    """
    good = sorted((p for p in points if p["converged"]), key=lambda p: float(p["gate_voltage_V"]))
    if len(good) < 2 or not all(p["energy_eV"] for p in good):
        return None
    inside = all(
        len(p["filled_energy_eV"]) <= len(p["energy_eV"])
        and np.allclose(p["filled_energy_eV"], p["energy_eV"][: len(p["filled_energy_eV"])], rtol=0, atol=_SAME_EV)
        for p in good
    )
    voltages = np.array([p["gate_voltage_V"] for p in good], dtype=float)
    width = step_width_eV(temperature_K, None if transport is None else transport.saddle_curvature_eV)
    rows = _with_openings(_rows(good, inside), voltages, steps, width)
    listed = [{**p, "filled_energy_eV": ()} for p in good]
    lines = _with_openings(_rows(listed, True), voltages, steps, width)
    return Between(voltages, tuple(rows), tuple(lines), temperature_K, transport)


def between_points_of(curve: GateCurve) -> Between | None:
    """Between the converged points of a curve; None where there are not two of them, or no subbands."""
    steps = [
        {
            "opens_at_V": s.opens_at_V if math.isfinite(s.opens_at_V) else None,
            "width_V": s.width_V if math.isfinite(s.width_V) else None,
            "subbands": s.subbands,
        }
        for s in curve.steps
    ]
    return between([p.to_dict() for p in curve.points], steps, curve.temperature_K, curve.problem.transport)


def _place(at: Array, voltage_V: Array) -> tuple[NDArray[np.int64], Array]:
    """The piece in which each voltage lies, and how far along it, 0 to 1."""
    left = np.clip(np.searchsorted(at, voltage_V, side="right") - 1, 0, len(at) - 2)
    return left, (voltage_V - at[left]) / (at[left + 1] - at[left])


def _energy(row: Plain, voltage_V: Array) -> Array:
    """Cubic Hermite pieces, their slopes held to three times that of the straight line, so that nothing overshoots
    (F. N. Fritsch and R. E. Carlson, SIAM J. Numer. Anal. 17, 238 (1980))."""
    nodes, energy, coupling = (np.asarray(row[key], dtype=float) for key in ("nodes", "energy", "coupling"))
    n, t = _place(nodes, voltage_V)
    rise, width = energy[n + 1] - energy[n], nodes[n + 1] - nodes[n]
    steepest = np.where(rise == 0, 1.0, rise)
    left, right = (rise * np.clip(-coupling[m] * width / steepest, 0.0, 3.0) for m in (n, n + 1))
    return np.asarray(energy[n] + t * (left + t * (3 * rise - 2 * left - right + t * (left + right - 2 * rise))))


def _rows(good: Sequence[Plain], inside: bool) -> list[dict[str, Any]]:
    """Subbands at every solved voltage, ascending: the listed ones, and filled ones beyond.

    Where the listed ones hold all carriers (`inside`) each is followed within its group of valleys, else by its place
    in energy. What a point does not tell of a row comes from the nearest point that does.
    """
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
            key: _filled([held.get(name, {}).get(key) for held in each]).tolist()
            for key in ("energy", "mass", "alpha", "degeneracy", "coupling")
        }
        levels = [held[name]["level"] for held in each if name in held and held[name]["level"] is not None]
        rows.append(
            {
                **columns,
                "density": [held.get(name, {}).get("density", 0.0) for held in each],
                "level": levels[-1] if levels else None,
                "listed_at": [name in held and held[name]["level"] is not None for held in each],
                "group": valleys.index(name[0]) if name[0] in valleys else 0,
            }
        )
    return sorted(rows, key=lambda row: float(row["energy"][-1]))


def _by_name(point: Plain, inside: bool) -> dict[tuple[str, int], dict[str, Any]]:
    """The rows of a point by group of valleys and place in it, or by place in all; `level` None for one not listed."""
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
            "alpha": point["filled_nonparabolicity_per_eV"][n] if known else None,
            "degeneracy": point["filled_degeneracy"][n] if known else point["degeneracy"][n],
            "coupling": point["coupling"][n] if listed else point["gate_coupling"],
            "level": int(point["level"][n]) if listed else None,
            "density": point["line_density_by_subband_per_nm"][n] if listed else 0.0,
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


def _with_openings(given: Sequence[Plain], at: Array, steps: Sequence[Plain], width_eV: float) -> list[dict[str, Any]]:
    """The same with the voltages at which steps open, which are solved for, as further nodes of the energies."""
    opened = [
        {"at": s["opens_at_V"], "left": s.get("subbands", 1), "width_V": s["width_V"]}
        for s in steps
        if s["opens_at_V"] is not None
    ]
    rows = [{**row, **{key: list(row[key]) for key in ("energy", "coupling")}, "nodes": at.tolist()} for row in given]
    crossing = []
    for row in rows:
        energy = np.array(row["energy"])
        passed = np.flatnonzero((energy[:-1] > 0) & (energy[1:] <= 0))
        if len(passed):
            n = int(passed[0])
            part = energy[n] / (energy[n] - energy[n + 1])
            crossing.append((n, part, row))
    crossing.sort(key=lambda entry: (entry[0], entry[1]))
    # A step is of one subband, or of several that open together.
    for n, _, row in crossing:
        near = [s for s in opened if at[n] < s["at"] < at[n + 1] and s["left"] > 0]
        if not near:
            continue
        chosen = near[0]
        chosen["left"] -= 1
        straight = float((row["energy"][n] - row["energy"][n + 1]) / (at[n + 1] - at[n]))
        # The coupling where it opens is told by the step's width.
        slope = width_eV / chosen["width_V"] if chosen["width_V"] else straight
        for key, value in (("nodes", chosen["at"]), ("energy", 0.0), ("coupling", slope)):
            row[key].insert(n + 1, value)
    return rows
