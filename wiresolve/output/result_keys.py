"""The keys of `result.json` and `gate_curve.json` with their types and meaning, as parts of a JSON Schema."""

from __future__ import annotations

from typing import Any

from wiresolve.gate_result import SCHEMA as GATE_CURVE
from wiresolve.result import SCHEMA as RESULT

Part = dict[str, Any]


def _number(text: str, empty: str = "") -> Part:
    """A number; where `empty` says when, also null."""
    return _typed("number", text, empty)


def _whole(text: str, empty: str = "") -> Part:
    return _typed("integer", text, empty)


def _text(text: str, empty: str = "") -> Part:
    return _typed("string", text, empty)


def _flag(text: str, empty: str = "") -> Part:
    return _typed("boolean", text, empty)


def _typed(kind: str, text: str, empty: str) -> Part:
    return {"description": f"{text}; null {empty}." if empty else f"{text}.", "type": [kind, "null"] if empty else kind}


def _word(text: str, words: list[str | None]) -> Part:
    return {"description": f"{text}.", "enum": words}


def _list(text: str, of: Part) -> Part:
    return {"description": f"{text}.", "type": "array", "items": of}


def _numbers(text: str, empty: str = "") -> Part:
    return _list(text, {"type": ["number", "null"] if empty else "number"})


def _texts(text: str) -> Part:
    return _list(text, {"type": "string"})


def _by_name(text: str, of: Part) -> Part:
    return {"description": f"{text}.", "type": "object", "additionalProperties": of}


def table(keys: dict[str, Part], text: str = "", optional: tuple[str, ...] = ()) -> Part:
    """An object that has all of these keys, but perhaps not the optional ones, and no others."""
    found: Part = {"description": f"{text}."} if text else {}
    needed = [key for key in keys if key not in optional]
    return found | {"type": "object", "properties": keys, "required": needed, "additionalProperties": False}


def _rows(text: str, keys: dict[str, Part]) -> Part:
    return _list(text, table(keys))


_NO_BARRIER = "where the outermost layer is no barrier"
_NO_FERMI = "without a Fermi level"
_FERMI = "Fermi levels in eV, from the energy zero"
SUBBAND = {
    "index": _whole("Its place in the list, from 1"),
    "level": _whole("The cluster of entries that are equal within their bars, from 1"),
    "valley": _text("Its group of valleys"),
    "energy_eV": _number("The subband's minimum, from the energy zero"),
    "error_eV": _number("Bar of the discretisation"),
    "k_min_per_nm": _number("The wave number along the wire where the minimum lies"),
    "axial_mass": _number("Mass along the wire at the minimum, in m0", "where E(k) starts linearly"),
    "axial_mass_error": _number("Bar of the mass", "where there is no mass"),
    "spin_degeneracy": _whole("States for spin"),
    "valley_degeneracy": _whole("States for equal valleys"),
    "layer": _text("The layer with the largest share"),
    "shares": _by_name("Probability by layer", {"type": "number"}),
    "bound": _flag("Whether it lies below the edge of the outermost layer", _NO_BARRIER),
    "wall_effect_eV": _number("How far it moves where the outer hard wall becomes a free boundary", _NO_BARRIER),
    "line_density_per_nm": _number("Its carriers at the Fermi level and the first temperature", _NO_FERMI),
}
_WARNING = {
    "code": _text("A word for what it is, see the README's list"),
    "text": _text("What is the matter, with its size"),
    "remedy": _text("What to do about it"),
}
_MATERIAL = {
    "name": _text("The material"),
    "quantity": _text("What the value is"),
    "value": _number("The value used"),
    "unit": _text("Its unit; empty for a bare number"),
    "temperature_K": _number("The lattice temperature it holds at", "where it is for any"),
    "source": _text("Where it is from"),
    "checked": _flag("Whether it was compared with a text that prints it"),
    "low": _number("The least that the literature gives", "where it is not known"),
    "high": _number("The most that the literature gives", "where it is not known"),
    "provenance": _word("How it is known", ["checked", "conflict", "memory", "derived", "given"]),
    "valid": _text("Where it may be used; empty where unsaid"),
}
_FROZEN = {
    "frozen_up_to_K": _number("Up to which temperature it is frozen out"),
    "searched_up_to_K": _number("How far that was looked for"),
}
_STEP = {
    "level": _whole("The level, from 1"),
    "opens_at_eV": _number("The Fermi level at which it opens"),
    "opens_error_eV": _number("Bar of that"),
    "height_G0": _number("By how much it lifts the conductance, in 2 e^2/h"),
    "plateau_G0": _number("The conductance above it, in 2 e^2/h"),
    "spacing_to_next_eV": _number("Distance to the next level", "where it is the last known"),
    "spacing_over_kT": _number("The same in kT", "where it is the last known, or at 0 K"),
    "contrast": _number("How far the slope of the conductance dips behind it, 0 to 1", "where nothing follows"),
    "kind": _word(
        "What the flat part behind it looks like; null where nothing follows", ["plateau", "shoulder", "merged", None]
    ),
    "plateau_up_to_K": _number("Up to which temperature it is a plateau", "where nothing follows"),
    "shoulder_up_to_K": _number("Up to which temperature it is at least a shoulder", "where nothing follows"),
}
_VERDICT = {
    "text": _text("The answer in words"),
    "single_subband": table(
        {
            "threshold_share": _number(
                "The share of the carriers from which on the first level counts as the only one"
            ),
            "per_temperature": _rows(
                "At each carrier temperature",
                {
                    "temperature_K": _number("Temperature"),
                    "thermal_energy_eV": _number("kT"),
                    "share_non_degenerate": _number("Share of few carriers that the first level holds"),
                    "share_at_fermi_level": _number("Its share with the Fermi level where it is", _NO_FERMI),
                    "holds": _flag("Whether it is a single subband"),
                },
            ),
            "holds_up_to_K": _number("Up to which temperature it is a single subband"),
            "holds_up_to_K_non_degenerate": _number("The same for few carriers"),
            "searched_up_to_K": _number("How far that was looked for"),
        },
        "Whether one level holds nearly all carriers",
    ),
    "steps": _rows(
        "The steps of the conductance at each carrier temperature",
        {
            "temperature_K": _number("Temperature"),
            "thermal_energy_eV": _number("kT"),
            "thermal_width_eV": _number("Full width at half maximum of -df/dE, 3.53 kT"),
            "levels": _rows("The steps, one a level", _STEP),
        },
    ),
    "effective_dimension": _rows(
        "Twice the mean energy of few carriers above the first level in kT, at each carrier temperature",
        {
            "temperature_K": _number("Temperature"),
            "d": _number("Effective dimension"),
            "frozen": _flag("Whether all cross motion is frozen out"),
            **_FROZEN,
            "directions": _rows(
                "The confined directions, where the section separates into them",
                {
                    "name": _text("The direction"),
                    "d": _number("What it adds to the effective dimension", "where it is not known"),
                    "frozen": _flag("Whether it is frozen out", "where it is not known"),
                    **_FROZEN,
                },
            ),
        },
    ),
}
_ROW = {"type": ["array", "null"], "items": {"type": "number"}}
_TAIL = table(
    {
        "energy_eV": _numbers("Energies, ascending"),
        "modes": _numbers("How many of them have their minima below each"),
        "states_per_nm": _numbers("States per nm that they have below each"),
    },
    "Further subbands, counted only; null where there are none",
)
_SPECTRUM = {
    "energy_eV": _numbers("Minima, ascending, from the energy zero"),
    "error_eV": _numbers("Their bars"),
    "axial_mass": _numbers("Masses along the wire, in m0", "where there is none"),
    "degeneracy": _list("Spin times valley", {"type": "integer"}),
    "level": _list("Clusters of entries that are equal within their bars", {"type": "integer"}),
    "listed": _whole("How many of them, from the first, are the certified ones that `subbands` lists"),
    "edge_eV": {**_numbers("Band edges that energies of growing masses count from"), "type": ["array", "null"]},
    "nonparabolicity_per_eV": {**_numbers("Their alpha; null where all are parabolas"), "type": ["array", "null"]},
    "k_per_nm": _list("Wave numbers of each tabulated band; null where the closed form holds", _ROW),
    "band_eV": _list("Energies of each tabulated band; null where the closed form holds", _ROW),
    "tail": {**_TAIL, "type": ["object", "null"]},
}
_ZERO = table(
    {
        "text": _text("Which edge or level it is"),
        "value_eV_on_common_scale": _number("Where it lies on the materials' common scale", "where there is none"),
    },
    "What energies count from",
)


def _heading(schema: str) -> dict[str, Part]:
    return {
        "schema": _word("The kind and version of this file", [schema]),
        "title": _text("The wire file's title"),
        "status": _text("`done`, or what is held against the run"),
        "input_digest": _text("Digest of everything that the run depends on"),
        "versions": _by_name("Versions of the program and what it stands on", {"type": "string"}),
        "energy_zero": _ZERO,
        "accuracy_met": _flag("Whether every bar is within the accuracy asked for"),
        "warnings": _rows("What a reader has to know before using the numbers", _WARNING),
        "not_modelled": _texts("What was left out, with its size where that is known"),
        "materials": _rows("Every value of a material that was used", _MATERIAL),
    }


def result() -> Part:
    """The body of the schema of `result.json`."""
    keys = _heading(RESULT) | {
        "mesh": table(
            {
                "cells": _whole("Curved triangles"),
                "unknowns": _whole("Unknowns"),
                "degree": _whole("Degree of cells and functions"),
                "area_nm2": _number("Area of the meshed section"),
                "passes": _whole("Meshes that were made"),
            },
            "The mesh that the solve ended with",
        ),
        "subbands": _rows("The lowest subbands, all valleys merged, ascending", SUBBAND),
        "sensitivities": _rows(
            "How the listed energies move with dimensions, masses and band edges",
            {
                "of": _text("The path of the key that changes, as in the wire file"),
                "unit": _text("The unit of the values, such as `eV_per_nm`"),
                "values": _numbers("One a subband"),
            },
        ),
        "gates": _rows(
            "The gates; none without",
            {
                "name": _text("Its name"),
                "voltage_V": _number("Its voltage, against the source"),
                "lineup_voltage_V": _number("The voltage at which it lines up, with no charge anywhere"),
                "charge_per_nm": _number("The charge on it, in e"),
            },
        ),
        "charge": {
            **table(
                {
                    "fixed_per_nm": _number("Charge of dopants and surfaces, in e"),
                    "pinned_per_nm": _number("Charge on pinned surfaces, in e"),
                    "passes": _whole("Times that states and potential were solved in turn"),
                    "residual_V": _number("What the last pass changed in the potential"),
                    "gauss_error": _number("What lacks of neutrality, relative to the largest charge"),
                    "potential_error_eV": _number("The largest part of a bar that comes from the potential's mesh"),
                },
                "How charge and potential agree; null without gates and charge",
            ),
            "type": ["object", "null"],
        },
        "line_density_per_nm": _number("Carriers of all states at the Fermi level, first temperature", _NO_FERMI),
        "states_missed": _whole("States of the discrete problem that the count says are missing"),
        "dispersion": table(
            {
                "k_per_nm": _numbers("Wave numbers along the wire, from 0"),
                "energy_eV": _list("Energies, one row a subband", {"type": "array", "items": {"type": "number"}}),
                "error_bound_eV": _number("Bound of what the reduced space adds to the bars"),
            },
            "E(k) of the listed subbands",
        ),
        "density_of_states": table(
            {
                "edges_eV": _numbers("Ends of the energy bins, one more than there are values"),
                "per_eV_nm": _numbers("Exact averages over the bins, all degeneracies counted"),
                "singular_at_eV": _numbers("Where it diverges as an inverse square root"),
            },
            "The density of states along the wire",
        ),
        "conductance": _rows(
            "Conductance against the Fermi level, one curve a carrier temperature",
            {
                "temperature_K": _number("Temperature"),
                "fermi_eV": _numbers(_FERMI),
                "G_over_G0": _numbers("In units of G0 = 2 e^2/h"),
                "G_siemens": _numbers("In siemens"),
            },
        ),
        "density": _rows(
            "Carriers per nm against the Fermi level, one curve a carrier temperature",
            {
                "temperature_K": _number("Temperature"),
                "fermi_eV": _numbers(_FERMI),
                "per_nm": _numbers("Carriers per nm, all states counted"),
            },
        ),
        "spectrum": table(
            _SPECTRUM, "The states that curves stand on: the listed ones and what lies above, one entry a subband"
        ),
        "verdict": table(_VERDICT, "The answer, and the numbers behind it"),
        "timings_s": _by_name("Seconds that the parts of the run took", {"type": "number"}),
    }
    return table(keys, optional=("status",))


_FAILED = "where the point did not converge"
POINT = {
    "gate_voltage_V": _number("Voltage of the swept gate"),
    "voltages_V": _by_name("Voltage of each gate", {"type": "number"}),
    "converged": _flag("Whether it was solved"),
    "note": _text("Why not"),
    "energy_eV": _numbers("Minima of the listed subbands, ascending"),
    "error_eV": _numbers("Their bars"),
    "axial_mass": _numbers("Masses along the wire, in m0", _FAILED),
    "degeneracy": _list("Spin times valley", {"type": "integer"}),
    "valley": _texts("Groups of valleys"),
    "level": _list("Clusters of entries that are equal within their bars", {"type": "integer"}),
    "line_density_by_subband_per_nm": _numbers("Carriers of each listed subband"),
    "line_density_per_nm": _number("Carriers of all states", _FAILED),
    "gate_charge_per_nm": _by_name("Charge on each gate, in e", {"type": ["number", "null"]}),
    "capacitance_F_per_m": _number("e dN/dV of all carriers", _FAILED),
    "geometric_F_per_m": _number("Its part as if the section were a metal", _FAILED),
    "quantum_F_per_m": _number("Its part e^2 dN/dE of the subbands in a fixed potential", _FAILED),
    "centroid_F_per_m": _number("The rest, in series with the other two", "where it is infinite or the point failed"),
    "gate_coupling": _number("How far the first level falls, in eV for each V on the gate", _FAILED),
    "coupling": _numbers("The same of each listed subband", _FAILED),
    "conductance_G0": _number("In 2 e^2/h, transmission and contacts included", _FAILED),
    "conductance_S": _number("In siemens", _FAILED),
    "passes": _whole("Times that states and potential were solved in turn"),
    "residual_V": _number("What the last pass changed in the potential", _FAILED),
    "gauss_error": _number("What lacks of neutrality, relative to the largest charge", _FAILED),
    "more": _by_name("Further numbers, with units as suffixes", {"type": ["number", "null"]}),
    "filled_energy_eV": _numbers("Minima of all states that hold carriers"),
    "filled_axial_mass": _numbers("Their masses along the wire, in m0", _FAILED),
    "filled_nonparabolicity_per_eV": _numbers("Their nonparabolicities", _FAILED),
    "filled_degeneracy": _numbers("Their degeneracies"),
}


def gate_curve() -> Part:
    """The body of the schema of `gate_curve.json`."""
    keys = _heading(GATE_CURVE) | {
        "temperature_K": _number("The carriers' temperature"),
        "gates": _rows(
            "The gates", {"name": _text("Its name"), "voltage_V": _number("Its voltage where it is not swept")}
        ),
        "swept_gate": _text("The gate whose voltage changes"),
        "mesh": table(
            {
                "cells": _whole("Curved triangles"),
                "points": _whole("Nodes"),
                "degree": _whole("Degree of the cells"),
            },
            "The mesh of all points",
        ),
        "points": _rows("The points, in the order of the sweep", POINT),
        "steps": _rows(
            "The steps of the conductance, by voltage",
            {
                "level": _whole("The level, from 1"),
                "valley": _text("Its valleys"),
                "opens_at_V": _number("Where it opens", "where the sweep does not reach it"),
                "error_V": _number("Bar of that", "where the sweep does not reach it"),
                "height_G0": _number(
                    "By how much it lifts the conductance, transmission and contacts in it, in 2 e^2/h",
                    "where it is not reached",
                ),
                "plateau_G0": _number(
                    "The conductance above it, transmission and contacts in it, in 2 e^2/h", "where it is not reached"
                ),
                "subbands": _whole("How many listed subbands open in it together"),
                "width_V": _number(
                    "Range in which its level passes from 1.76 kT above the Fermi level to as far below",
                    "where it is not reached",
                ),
                "moves_V_per_nm": _number("How far it moves for each nm of the section", "where that is not known"),
            },
        ),
        "transistor": _rows(
            "The channel as a ballistic transistor, one row a pair of voltages; none without drain voltages",
            {
                "gate_voltage_V": _number("Gate voltage"),
                "drain_voltage_V": _number("Drain voltage"),
                "current_A": _number("Current"),
                "line_density_per_nm": _number("Carriers at the top of the barrier"),
                "gate_coupling": _number("How far the top falls, in eV for each V on the gate"),
                "drain_coupling": _number("How far the top falls, in eV for each V on the drain"),
            },
        ),
        "measures": _by_name(
            "Numbers of the whole curve, with units as suffixes; null where one is not known",
            {"type": ["number", "null"]},
        ),
        "verdict": table({"text": _text("The answer in words")}, "The answer"),
    }
    return table(keys, optional=("status",))
