"""What the script of a wire's report draws and computes with, and the levels of its folder's `result.json`."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import Any

import numpy as np

from wiresolve.describe.problem import Problem
from wiresolve.output import tables
from wiresolve.output.report_blocks import Folder, Plain
from wiresolve.output.valley_names import short_valleys
from wiresolve.physics.conductance import openings
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.transmission import transmission_of
from wiresolve.subband import Subband, level_energy_eV, levels, states
from wiresolve.units import HBAR2_OVER_2M0, KB, RESISTANCE_QUANTUM_OHM

CONSTANTS = {"kB": KB, "c": HBAR2_OVER_2M0, "resistanceQuantum": RESISTANCE_QUANTUM_OHM}
COLDEST_K, WARM_K = 0.05, 300.0
"""Ends of the temperature's slider; the far end is the hottest temperature solved for where that is more."""
MOST_LEVELS = 5
"""Levels whose motions are drawn."""


def levels_of(found: Plain) -> list[list[Subband]]:
    """The subbands of a folder's JSON file, by level."""
    return levels([Subband(**s) for s in found["subbands"]])


def bar_eV(group: Sequence[Subband]) -> float:
    """The bar of a level: the widest of its entries'."""
    return max(s.error_eV for s in group)


def plateaus(found: Plain, problem: Problem) -> list[tuple[str, float]]:
    """Fermi levels worth a button: that of the file, and the middles of the first plateaus."""
    energies = [level_energy_eV(group) for group in levels_of(found)]
    rows = [] if problem.fermi_level_eV is None else [("of the file", problem.fermi_level_eV)]
    middles = [(f"above level {n + 1}", (a + b) / 2) for n, (a, b) in enumerate(pairwise(energies))]
    return rows + middles[:3]


def fermi_range(folder: Folder, spectrum: Spectrum) -> tuple[float, float]:
    """From below the first level to beyond the last listed one, and to the Fermi level of the file if it is not far."""
    coldest = folder.found["conductance"][0]["fermi_eV"]
    low, high = float(coldest[0]), float(coldest[-1])
    given = folder.problem.fermi_level_eV
    if given is None or not 2 * low - high <= given <= 2 * high - low:
        return low, high
    return min(low, given), max(high, given)


def script_data(
    folder: Folder, spectrum: Spectrum | None, groups: Sequence[Sequence[Subband]], moved: Sequence[Mapping[str, Any]]
) -> dict[str, Any]:
    found, problem = folder.found, folder.problem
    valleys = list(dict.fromkeys(s["valley"] for s in found["subbands"]))
    ladder = []
    for group in groups:
        energy, bar = level_energy_eV(group), bar_eV(group)
        short = tables.with_bar(1e3 * energy, 1e3 * bar)
        words = f"{short} meV, {states(group)} states" + (
            f", {short_valleys(group[0].valley)}" if len(valleys) > 1 else ""
        )
        ladder.append(
            {
                "level": group[0].level,
                "energy_eV": energy,
                "bar_eV": 1e-3 * tables.printed_bar(short),
                "entries": len(group),
                "group": valleys.index(group[0].valley),
                "text": words,
                "short": short,
            }
        )
    warm = [{"kelvin": t} for t in problem.carriers.temperature_K if t > 0][:4]
    data: dict[str, Any] = {
        "constants": CONSTANTS,
        "measured": [] if spectrum is None else folder.measured_points(*fermi_range(folder, spectrum)),
        "measuredWords": "" if spectrum is None else folder.measured_words(*fermi_range(folder, spectrum)),
        "energyAxis": "Energy from the Fermi level (meV)" if problem.charged else "Energy (meV)",
        "ladder": {
            "levels": ladder,
            "temperatures": warm,
            "fermi_eV": 0.0 if problem.charged else problem.fermi_level_eV,
        },
        "dispersion": {
            "k": found["dispersion"]["k_per_nm"],
            "energy": found["dispersion"]["energy_eV"],
            "level": [s["level"] for s in found["subbands"]],
            "group": [valleys.index(s["valley"]) for s in found["subbands"]],
        },
    }
    if moved:
        data["sensitivities"] = {"rows": moved, "levels": [g[0].level for g in groups[:MOST_LEVELS]]}
    if spectrum is not None:
        data["wire"] = _wire(folder, spectrum)
    return data


def _wire(folder: Folder, spectrum: Spectrum) -> dict[str, Any]:
    """What the sums of the script go over: states, openings with what is transmitted, the tail, the bins."""
    found, problem = folder.found, folder.problem
    opened, through = openings(spectrum), transmission_of(problem.transport)
    tail, listed = spectrum.tail, spectrum.listed
    ramp_part = float(through.part(np.array(opened.beyond)))
    # Changes of slope: the count goes on in its last line.
    slopes = np.zeros(0) if tail is None else np.diff(tail.states_per_nm) / np.diff(tail.energy_eV)
    changes = np.diff(slopes, prepend=0.0) if len(slopes) else slopes
    binned = found["density_of_states"]
    flat = plateaus(found, problem)
    low, high = fermi_range(folder, spectrum)
    start = 0.0 if problem.charged else flat[0][1] if flat else (low + high) / 2
    return {
        "states": [_state(spectrum, n) for n in range(len(spectrum.energy_eV))],
        "listed": listed,
        "listedLevels": spectrum.level[:listed].tolist(),
        "listedEnergies": spectrum.energy_eV[:listed].tolist(),
        "openings": {
            "energy": opened.energy_eV.tolist(),
            "modes": (opened.modes * through.part(opened.subband)).tolist(),
            "rampEnergy": opened.ramp_eV.tolist(),
            "rampModes": (opened.ramp_per_eV * ramp_part).tolist(),
        },
        "through": {
            "width": float(through.width_eV),
            "resistance": 0.0 if problem.transport is None else problem.transport.contact_resistance_ohm,
        },
        "tail": {"energy": [] if tail is None else tail.energy_eV[:-1].tolist(), "change": changes.tolist()},
        "bins": {"edges": binned["edges_eV"], "values": binned["per_eV_nm"]},
        "singular_eV": binned["singular_at_eV"],
        "fermiRange_eV": [low, high],
        "kelvinRange": [COLDEST_K, max(WARM_K, *problem.carriers.temperature_K)],
        "hottest_K": max(problem.carriers.temperature_K),
        "held": problem.charged,
        "start": {"kelvin": problem.carriers.temperature_K[0], "fermi_eV": min(max(start, low), high)},
    }


def _state(spectrum: Spectrum, number: int) -> dict[str, Any]:
    """One subband: a parabola, a mass that grows, or a table."""
    band = spectrum.bands[number]
    state: dict[str, Any] = {
        "kind": "parabola",
        "lowest": float(spectrum.energy_eV[number]),
        "degeneracy": int(spectrum.degeneracy[number]),
    }
    if band is None:
        return state | {"mass": float(spectrum.axial_mass[number])}
    if band.cubics is None:
        assert spectrum.nonparabolicity_per_eV is not None
        edge = 0.0 if spectrum.edge_eV is None else float(spectrum.edge_eV[number])
        alpha = float(spectrum.nonparabolicity_per_eV[number])
        return state | {"kind": "growing", "mass": float(spectrum.axial_mass[number]), "edge": edge, "alpha": alpha}
    pieces = [
        {
            "start": p.start_per_nm,
            "end": p.end_per_nm if math.isfinite(p.end_per_nm) else None,
            "low": p.low_eV,
            "high": p.high_eV if math.isfinite(p.high_eV) else None,
            "rising": p.rising,
        }
        for p in band.pieces
    ]
    return state | {
        "kind": "table",
        "knots": band.cubics.knots_per_nm.tolist(),
        "coefficients": band.cubics.coefficients.tolist(),
        "beyond": band.cubics.beyond_eV_nm2,
        "pieces": pieces,
    }
