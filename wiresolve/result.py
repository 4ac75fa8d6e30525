"""The complete, frozen result of a run, and its plain-data form (what `result.json` holds)."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.describe.problem import Problem
from wiresolve.fem.mesh import Mesh
from wiresolve.physics import statistics, transport
from wiresolve.physics.conductance import conductance_through
from wiresolve.physics.plain_spectrum import plain
from wiresolve.physics.sensitivity import OutlineSensitivity, Sensitivity
from wiresolve.physics.spectrum import Spectrum
from wiresolve.subband import Subband as Subband
from wiresolve.subband import Subbands, table_html

if TYPE_CHECKING:
    import pandas
    import xarray

Array = NDArray[np.float64]
SCHEMA = "wiresolve-result-1"


@dataclass(frozen=True)
class MeshSummary:
    """Size of the final mesh and how many meshes were made on the way to it."""

    cells: int
    unknowns: int
    degree: int
    area_nm2: float
    passes: int


@dataclass(frozen=True)
class Warned:
    """A warning with a code that describes itself, what is the matter, and what to do."""

    code: str
    text: str
    remedy: str


@dataclass(frozen=True, eq=False)
class ThermalCurve:
    """A quantity against the Fermi level at one temperature; `values` has the shape of `fermi_eV`."""

    temperature_K: float
    fermi_eV: Array
    values: Array


@dataclass(frozen=True, eq=False)
class DensityOfStates:
    """Exact averages of the 1D density of states over energy bins, all degeneracies counted.

    `edges_eV` (n + 1,), `per_eV_nm` (n,); the inverse-square-root edges lie at `singular_at_eV`.
    """

    edges_eV: Array
    per_eV_nm: Array
    singular_at_eV: Array


@dataclass(frozen=True, eq=False)
class Dispersion:
    """E(k) of the listed subbands: `k_per_nm` (m,) from 0 on, `energy_eV` (n, m), and the reduced space's error."""

    k_per_nm: Array
    energy_eV: Array
    error_bound_eV: float


@dataclass(frozen=True)
class GateCharge:
    """A gate: its voltage, that of its line-up, and the charge on it in e/nm."""

    name: str
    voltage_V: float
    lineup_voltage_V: float
    charge_per_nm: float


@dataclass(frozen=True, eq=False)
class Charge:
    """What charge and potential agreed on.

    `potential_V` (mesh points,) is the electrostatic potential, by which an electron's energy is lowered,
    `density_per_nm3` (mesh points,) that of the carriers, and `potential_error_eV` (n,) the part of each listed bar
    that comes from the potential. `given_eV` (mesh points,) is the energy of a potential given beside it, zero where
    there is none. `passes` of states were solved until one changed the potential by less than 1e-6 V,
    `residual_V` is what the last one changed, and `gauss_error` what gates, fixed charge and carriers lack of
    neutrality, relative to the largest of them. `exchange_V` (mesh points,) is what exchange and correlation add to the
    potential that electrons feel, None where they are not counted.
    """

    gates: tuple[GateCharge, ...]
    fixed_per_nm: float
    pinned_per_nm: float
    passes: int
    residual_V: float
    gauss_error: float
    potential_V: Array
    density_per_nm3: Array
    potential_error_eV: Array
    given_eV: Array
    exchange_V: Array | None = None


@dataclass(frozen=True)
class Verdict:
    """The plain-language answer and the numbers behind it (see `physics.verdict`)."""

    text: str
    single_subband: Mapping[str, Any]
    steps: tuple[Mapping[str, Any], ...]
    effective_dimension: tuple[Mapping[str, Any], ...]


@dataclass(frozen=True, eq=False, repr=False)
class Result:
    """Everything a run found. It is data: no field is filled in later.

    `modes` has the shape (mesh points, listed subbands): real envelope functions in 1/nm at the mesh's nodes, each
    normalised to 1 over the section. `cell_fields` holds values by cell for the group of valleys of the first subband
    (`axial_mass_of_first_valleys_m0`, `band_edge_of_first_valleys_eV`; NaN where carriers are kept out). `spectrum` is
    what `line_density`, `fermi_level` and `conductance_at` stand on: the listed subbands and what lies above them. With
    gates or charge (`charge` is not None) they hold the potential as it is: another Fermi level asks for another solve.
    `finer_mesh` has the mesh's triangles at degree 6, for error bars of what is worked out later; None where it is not
    known.
    """

    problem: Problem
    mesh: Mesh
    modes: Array
    cell_fields: Mapping[str, Array]
    subbands: tuple[Subband, ...]
    spectrum: Spectrum
    summary: MeshSummary
    energy_zero_text: str
    energy_zero_on_common_scale_eV: float | None
    states_missed: int
    accuracy_met: bool
    dispersion: Dispersion
    density_of_states: DensityOfStates
    conductance: tuple[ThermalCurve, ...]
    density: tuple[ThermalCurve, ...]
    line_density_per_nm: float | None
    sensitivities: tuple[Sensitivity, ...]
    outline_sensitivity: OutlineSensitivity
    verdict: Verdict
    warnings: tuple[Warned, ...]
    not_modelled: tuple[str, ...]
    versions: Mapping[str, str]
    timings_s: Mapping[str, float] = field(default_factory=dict)
    charge: Charge | None = None
    finer_mesh: Mesh | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "subbands", Subbands(self.subbands))

    def __repr__(self) -> str:
        levels = ", ".join(f"{1e3 * s.energy_eV:.6g}" for s in self.subbands[:8])
        more = ", ..." if len(self.subbands) > 8 else ""
        codes = ", ".join(w.code for w in self.warnings) or "no warnings"
        widest = 1e3 * max(s.error_eV for s in self.subbands)
        title = self.problem.title or "untitled"
        return f"<Result {title!r}: subbands at {levels}{more} meV, bars up to {widest:.2g} meV; {codes}>"

    def _repr_html_(self) -> str:
        from wiresolve.result_page import page

        foot = f"Energies from the {self.energy_zero_text}, ± the error bar of the discretisation. "
        foot += f"{self.summary.unknowns:,} unknowns; input digest {self.problem.digest[:12]}."
        table = table_html(self.subbands)
        picture = self.problem.section._repr_html_()
        return page(self.problem.title, self.verdict.text, picture, table, self.warnings, foot)

    @property
    def energies_eV(self) -> Array:
        """Energies of the listed subbands, shape (n,)."""
        return np.array([s.energy_eV for s in self.subbands])

    @property
    def errors_eV(self) -> Array:
        """Error bars of the listed subbands, shape (n,)."""
        return np.array([s.error_eV for s in self.subbands])

    def line_density(self, fermi_eV: float, temperature_K: float) -> float:
        """Carriers per nm of wire at a Fermi level (from the energy zero), all states counted."""
        return float(statistics.line_density(self.spectrum, fermi_eV, temperature_K))

    def fermi_level(self, line_density_per_nm: float, temperature_K: float) -> float:
        """The Fermi level in eV at which the wire holds so many carriers per nm.

        Raises
        ------
        InputError
            The density is not positive, or more than the known states hold.
        """
        return statistics.fermi_level(self.spectrum, line_density_per_nm, temperature_K)

    def conductance_at(self, fermi_eV: ArrayLike, temperature_K: float) -> Any:
        """Conductance in units of G0 = 2 e^2/h at Fermi levels in eV: ballistic unless told otherwise.

        A float at one level, else an array of their shape.
        """
        found = conductance_through(self.spectrum, fermi_eV, temperature_K, self.problem.transport)
        return found if found.ndim else float(found)

    @property
    def potential_energy_eV(self) -> Array | None:
        """(mesh points,) where the band edge of the first subband's valleys lies, from the Fermi level; None without
        gates or charge.

        Where materials meet it is the lower edge, and not a number where carriers are kept out.
        """
        if self.charge is None:
            return None
        edge = np.full(len(self.mesh.points), np.inf)
        by_cell = self.cell_fields["band_edge_of_first_valleys_eV"]
        known = np.isfinite(by_cell)
        np.minimum.at(edge, self.mesh.cells[known], by_cell[known, None])
        return np.where(np.isfinite(edge), edge + self.charge.given_eV - self.charge.potential_V, np.nan)

    def to_pandas(self) -> pandas.DataFrame:
        """The subbands as a data frame, with the columns of `subbands.csv`; raises InputError without pandas."""
        from wiresolve.frames import subbands

        return subbands(self.to_dict())

    def to_xarray(self) -> xarray.Dataset:
        """Subbands, dispersion, curves and modes as one dataset; raises InputError without xarray."""
        from wiresolve.frames import dataset

        fields = {}
        if self.charge is not None:
            fields = {"potential_V": self.charge.potential_V, "density_per_nm3": self.charge.density_per_nm3}
        return dataset(self.to_dict(), self.mesh.points, self.modes, fields)

    def _charge(self) -> dict[str, float | int] | None:
        charge = self.charge
        if charge is None:
            return None
        return {
            "fixed_per_nm": charge.fixed_per_nm,
            "pinned_per_nm": charge.pinned_per_nm,
            "passes": charge.passes,
            "residual_V": charge.residual_V,
            "gauss_error": charge.gauss_error,
            "potential_error_eV": float(np.nanmax(charge.potential_error_eV)),
        }

    def to_dict(self) -> dict[str, Any]:
        """Plain data (dicts, lists, strings, numbers, None), the content of `result.json`."""
        materials = [
            asdict(value) for material in self.problem.resolved_materials().values() for value in material.values
        ]
        return {
            "schema": SCHEMA,
            "title": self.problem.title,
            "input_digest": self.problem.digest,
            "versions": dict(self.versions),
            "energy_zero": {
                "text": self.energy_zero_text,
                "value_eV_on_common_scale": self.energy_zero_on_common_scale_eV,
            },
            "mesh": asdict(self.summary),
            "subbands": [{**asdict(s), "shares": dict(s.shares)} for s in self.subbands],
            "sensitivities": [
                {"of": s.of, "unit": s.unit, "values": np.asarray(s.values).tolist()} for s in self.sensitivities
            ],
            "gates": [] if self.charge is None else [asdict(gate) for gate in self.charge.gates],
            "charge": self._charge(),
            "line_density_per_nm": self.line_density_per_nm,
            "spectrum": plain(self.spectrum),
            "states_missed": self.states_missed,
            "accuracy_met": self.accuracy_met,
            "dispersion": {
                "k_per_nm": self.dispersion.k_per_nm.tolist(),
                "energy_eV": self.dispersion.energy_eV.tolist(),
                "error_bound_eV": self.dispersion.error_bound_eV,
            },
            "density_of_states": {
                "edges_eV": self.density_of_states.edges_eV.tolist(),
                "per_eV_nm": self.density_of_states.per_eV_nm.tolist(),
                "singular_at_eV": self.density_of_states.singular_at_eV.tolist(),
            },
            "conductance": [
                {
                    "temperature_K": c.temperature_K,
                    "fermi_eV": c.fermi_eV.tolist(),
                    "G_over_G0": c.values.tolist(),
                    "G_siemens": transport.in_siemens(c.values).tolist(),
                }
                for c in self.conductance
            ],
            "density": [
                {"temperature_K": c.temperature_K, "fermi_eV": c.fermi_eV.tolist(), "per_nm": c.values.tolist()}
                for c in self.density
            ],
            "verdict": {
                "text": self.verdict.text,
                "single_subband": dict(self.verdict.single_subband),
                "steps": [dict(s) for s in self.verdict.steps],
                "effective_dimension": [dict(d) for d in self.verdict.effective_dimension],
            },
            "warnings": [asdict(w) for w in self.warnings],
            "not_modelled": list(self.not_modelled),
            "materials": materials,
            "timings_s": dict(self.timings_s),
        }
