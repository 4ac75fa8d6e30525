"""What of a gate curve stands in files for ParaView: at each point what `modes.vtu` holds of a result."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.gate_result import ZERO_TEXT, GateCurve, GatePoint
from wiresolve.output.fields import Fields
from wiresolve.output.mode_fields import EDGE, modes_by_name, numbered
from wiresolve.physics.region_fields import cell_fields
from wiresolve.physics.wire import Wire

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class PointFields:
    """The fields of the points of a gate curve.

    Point data: `psi_01_per_nm`, `density_01_per_nm2` and `carriers_01_per_nm3`, ..., `potential_V`, `density_per_nm3`
    and `potential_energy_eV`, as in `modes.vtu`. Field data, one value a subband: `subband`, `energy_eV`, `error_eV`,
    `level`, `degeneracy`, `axial_mass_m0`, `line_density_per_nm`, `valley`; and `gate_voltage_V`, `temperature_K`,
    `fermi_level_eV`, `title`, `energy_zero`, `input_digest`.
    """

    curve: GateCurve

    @cached_property
    def _wire(self) -> Wire:
        return Wire(self.curve.problem)

    @cached_property
    def _given_eV(self) -> Array:
        """(mesh points,) of a potential that was given, the same at all points of the curve."""
        mesh, given = self.curve.mesh, self._wire.potential
        found = np.zeros(len(mesh.points))
        if given is not None:
            here = np.unique(mesh.cells[mesh.admitted])
            found[here] = given(*mesh.points[here].T)
        return found

    def of(self, point: GatePoint) -> Fields:
        """The fields of a point that converged."""
        curve, count = self.curve, point.modes.shape[1]
        points: dict[str, NDArray[Any]] = modes_by_name(curve.mesh, point.modes)
        active = next(iter(points), "")
        for n, held in enumerate(point.line_density_by_subband_per_nm[:count]):
            number = numbered(n + 1, count)
            points[f"carriers_{number}_per_nm3"] = held * points[f"density_{number}_per_nm2"]
        points |= {"potential_V": point.potential_V, "density_per_nm3": point.density_per_nm3}
        cells = cell_fields(self._wire, curve.mesh, point.valley[0])
        energy = cells[EDGE][:, None] + (self._given_eV - point.potential_V)[curve.mesh.cells]
        numbers: dict[str, NDArray[Any]] = {
            "gate_voltage_V": np.array([point.gate_voltage_V]),
            "subband": np.arange(1, len(point.energy_eV) + 1, dtype=np.int32),
            "energy_eV": point.energy_eV,
            "error_eV": point.error_eV,
            "level": np.asarray(point.level, dtype=np.int32),
            "degeneracy": np.asarray(point.degeneracy, dtype=np.int32),
            "axial_mass_m0": point.axial_mass,
            "line_density_per_nm": point.line_density_by_subband_per_nm,
            "temperature_K": np.array([curve.temperature_K]),
            "fermi_level_eV": np.array([0.0]),
        }
        texts = {
            "valley": list(point.valley),
            "title": [curve.problem.title or "untitled"],
            "energy_zero": [ZERO_TEXT],
            "input_digest": [curve.problem.digest],
        }
        return Fields(curve.mesh, points, cells, {"potential_energy_eV": energy}, numbers, texts, active)
