"""What a gate sweep found: one frozen value a solved point, and the whole curve with its plain-data form."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.problem import Problem
from wiresolve.fem.mesh import Mesh
from wiresolve.result import Warned
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS

if TYPE_CHECKING:
    import pandas
    import xarray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
SCHEMA = "wiresolve-gate-curve-1"
ZERO_TEXT = "source's Fermi level"
"""What energies count from where there are gates."""
FIELDS = ("potential_V", "density_per_nm3", "modes")
"""Of a `GatePoint`, the arrays on the mesh's points."""


@dataclass(frozen=True, eq=False)
class GatePoint:
    """One point of a sweep. Energies count from the source's Fermi level; arrays over the n listed subbands.

    `voltages_V` is that of every gate. `energy_eV` (ascending minima), `error_eV`, `axial_mass`, `degeneracy` (spin
    times valley), `level` (from 1), `line_density_by_subband_per_nm` and `coupling` (-dE/dV of each) have the shape
    (n,). `gate_charge_per_nm` is the charge on each gate in e/nm. Of the capacitances 1/total = 1/geometric +
    1/quantum + 1/centroid. `conductance_G0` holds transmission and contact resistance at the file's temperature.
    `potential_V`, `density_per_nm3` (nodes,) and `modes` (nodes, n), in 1/nm, lie on the mesh's points; they are empty
    where the point failed, all numbers are NaN there, and `note` says why. `more` holds further numbers of the point by
    names with units as suffixes; they are columns of `gate_curve.csv` too. The `filled_` arrays (m,) are of all states
    that hold carriers, by energy, which may be more or fewer than the listed ones.
    """

    gate_voltage_V: float
    voltages_V: Mapping[str, float]
    energy_eV: Array
    error_eV: Array
    axial_mass: Array
    degeneracy: Ints
    valley: tuple[str, ...]
    level: Ints
    line_density_by_subband_per_nm: Array
    line_density_per_nm: float
    gate_charge_per_nm: Mapping[str, float]
    capacitance_F_per_m: float
    geometric_F_per_m: float
    quantum_F_per_m: float
    centroid_F_per_m: float
    gate_coupling: float
    coupling: Array
    conductance_G0: float
    passes: int
    residual_V: float
    gauss_error: float
    converged: bool
    note: str
    potential_V: Array
    density_per_nm3: Array
    modes: Array
    more: Mapping[str, float] = field(default_factory=dict)
    filled_energy_eV: Array = field(default_factory=lambda: np.zeros(0))
    filled_axial_mass: Array = field(default_factory=lambda: np.zeros(0))
    filled_nonparabolicity_per_eV: Array = field(default_factory=lambda: np.zeros(0))
    filled_degeneracy: Array = field(default_factory=lambda: np.zeros(0))

    @property
    def conductance_S(self) -> float:
        """The conductance in siemens."""
        return CONDUCTANCE_QUANTUM_SIEMENS * self.conductance_G0

    def to_dict(self) -> dict[str, Any]:
        """Plain data without the arrays on the mesh; numbers that are not there are None."""
        found = {f.name: getattr(self, f.name) for f in dataclasses.fields(self) if f.name not in FIELDS}
        return {name: _plain(value) for name, value in (found | {"conductance_S": self.conductance_S}).items()}


def failed_point(voltages_V: Mapping[str, float], swept: str, reason: str) -> GatePoint:
    """The point of a sweep that did not converge: no numbers, and the reason as its note."""
    none, whole = np.zeros(0), np.zeros(0, dtype=np.int64)
    numbers = {f.name: math.nan for f in dataclasses.fields(GatePoint) if f.type == "float"}
    arrays = {f.name: none for f in dataclasses.fields(GatePoint) if f.type == "Array"}
    found: dict[str, Any] = {**numbers, **arrays, "degeneracy": whole, "level": whole, "modes": np.zeros((0, 0))}
    found |= {"gate_voltage_V": voltages_V[swept], "voltages_V": dict(voltages_V), "valley": ()}
    found |= {"gate_charge_per_nm": {}, "passes": 0, "converged": False, "note": reason}
    return GatePoint(**found)


@dataclass(frozen=True)
class TransistorPoint:
    """The channel as a ballistic transistor at one gate and one drain voltage.

    The couplings are how far, in eV, the top of the barrier falls for each volt on the gate and on the drain.
    """

    gate_voltage_V: float
    drain_voltage_V: float
    current_A: float
    line_density_per_nm: float
    gate_coupling: float
    drain_coupling: float


@dataclass(frozen=True)
class GateStep:
    """A step of the conductance against gate voltage.

    It opens at `opens_at_V`, where the level meets the source's Fermi level, with the error bar `error_V`; NaN where
    the sweep does not reach it. It lifts the conductance by `height_G0` to `plateau_G0`, both as measured: transmission
    and contacts are in them. It is `width_V` wide (there its level passes from 1.76 kT above the Fermi level to as far
    below it), and so many `subbands` open in it together. `moves_V_per_nm` is how far it moves for each nm by which the
    section grows (None: not known).
    """

    level: int
    valley: str
    opens_at_V: float
    error_V: float
    height_G0: float
    plateau_G0: float
    width_V: float
    moves_V_per_nm: float | None = None
    subbands: int = 1


@dataclass(frozen=True)
class Judged:
    """What a sweep says about its points in words, and numbers that belong to no single point.

    `measures` has names with units as suffixes (`threshold_V`, `on_current_A`, `subthreshold_V_per_decade`, ...).
    """

    verdict_text: str = ""
    warnings: tuple[Warned, ...] = ()
    not_modelled: tuple[str, ...] = ()
    measures: Mapping[str, float | None] = field(default_factory=dict)


@dataclass(frozen=True, eq=False, repr=False)
class GateCurve:
    """Everything a gate sweep found, its points in the order of the sweep. It is data: no field is filled in later."""

    problem: Problem
    mesh: Mesh
    points: tuple[GatePoint, ...]
    steps: tuple[GateStep, ...] = ()
    transistor: tuple[TransistorPoint, ...] = ()
    verdict_text: str = ""
    warnings: tuple[Warned, ...] = ()
    not_modelled: tuple[str, ...] = ()
    measures: Mapping[str, float | None] = field(default_factory=dict)
    versions: Mapping[str, str] = field(default_factory=dict)

    def __repr__(self) -> str:
        title, good = self.problem.title or "untitled", len(self.converged)
        first, last = self.points[0].gate_voltage_V, self.points[-1].gate_voltage_V
        return f"<GateCurve {title!r}: {good} of {len(self.points)} points from {first:g} V to {last:g} V>"

    def _repr_html_(self) -> str:
        from wiresolve.physics.wording import with_bar
        from wiresolve.result_page import page, table

        rows = [
            (
                str(step.level),
                with_bar(step.opens_at_V, step.error_V) if math.isfinite(step.opens_at_V) else "not reached",
                f"{step.height_G0:g}",
                f"{step.plateau_G0:g}",
            )
            for step in self.steps
        ]
        steps = table(("level", f"opens at (V of {self.swept})", "height (G0)", "then (G0)"), rows) if rows else ""
        foot = " ".join(filter(None, [f"{repr(self)[1:-1]}.", self.failure and f"{self.failure}."]))
        foot += f" Input digest {self.problem.digest[:12]}."
        picture = self.problem.section._repr_html_()
        return page(self.problem.title, self.verdict_text, picture, steps, self.warnings, foot)

    @property
    def swept(self) -> str:
        """The name of the gate whose voltage changes."""
        assert self.problem.voltages is not None
        return self.problem.voltages.gate

    @property
    def temperature_K(self) -> float:
        """The carriers' temperature; problems with gates have one."""
        return self.problem.carriers.temperature_K[0]

    @property
    def converged(self) -> tuple[GatePoint, ...]:
        """The points that were solved."""
        return tuple(p for p in self.points if p.converged)

    @property
    def failed(self) -> tuple[GatePoint, ...]:
        """The points that did not converge."""
        return tuple(p for p in self.points if not p.converged)

    @property
    def failure(self) -> str:
        """How many points failed, the first of them and the last good one before it; empty where none did."""
        if not self.failed:
            return ""
        place = next(n for n, p in enumerate(self.points) if not p.converged)
        good = [p.gate_voltage_V for p in self.points[:place] if p.converged]
        before = f"the last good one at {good[-1]:g} V" if good else "none before it is good"
        first = self.points[place]
        count, total = len(self.failed), len(self.points)
        return f"{count} of {total} points did not converge, the first at {first.gate_voltage_V:g} V ({before})"

    @property
    def largest_error_eV(self) -> float:
        """The largest error bar of any listed energy."""
        return max((float(p.error_eV.max(initial=0.0)) for p in self.converged), default=0.0)

    @property
    def accuracy_met(self) -> bool:
        """Whether every bar is within the accuracy that the problem asks for."""
        return self.largest_error_eV <= self.problem.accuracy.energy_eV

    def to_pandas(self) -> pandas.DataFrame:
        """The points as a data frame, with the columns of `gate_curve.csv`; raises InputError without pandas."""
        from wiresolve.frames import gate_curve

        return gate_curve(self.to_dict())

    def to_xarray(self) -> xarray.Dataset:
        """Points, subbands, potential and density as one dataset; raises InputError without xarray."""
        from wiresolve.frames import curve_dataset

        fields = {name: [getattr(p, name) for p in self.points] for name in ("potential_V", "density_per_nm3")}
        return curve_dataset(self.to_dict(), self.mesh.points, fields)

    def to_dict(self) -> dict[str, Any]:
        """Plain data (dicts, lists, strings, numbers, None), the content of `gate_curve.json`."""
        materials = [asdict(v) for material in self.problem.resolved_materials().values() for v in material.values]
        return {
            "schema": SCHEMA,
            "title": self.problem.title,
            "input_digest": self.problem.digest,
            "versions": dict(self.versions),
            "energy_zero": {"text": ZERO_TEXT, "value_eV_on_common_scale": None},
            "temperature_K": self.temperature_K,
            "gates": [{"name": g.name, "voltage_V": g.voltage_V} for g in self.problem.gates],
            "swept_gate": self.swept,
            "mesh": {"cells": len(self.mesh.cells), "points": len(self.mesh.points), "degree": self.mesh.degree},
            "accuracy_met": self.accuracy_met,
            "points": [p.to_dict() for p in self.points],
            "steps": [_plain(asdict(s)) for s in self.steps],
            "transistor": [_plain(asdict(t)) for t in self.transistor],
            "measures": _plain(self.measures),
            "verdict": {"text": self.verdict_text},
            "warnings": [asdict(w) for w in self.warnings],
            "not_modelled": list(self.not_modelled),
            "materials": materials,
        }


def _plain(value: Any) -> Any:
    """Lists and Python numbers; None for what is not finite, which JSON has no word for."""
    if isinstance(value, Mapping):
        return {str(k): _plain(v) for k, v in value.items()}
    if isinstance(value, np.ndarray | np.generic):
        value = value.tolist()
    if isinstance(value, list | tuple):
        return [_plain(v) for v in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value
