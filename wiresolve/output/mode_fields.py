"""What of a result stands in a file for ParaView: modes, densities, potential, band edges, and the subband table."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.mesh import Mesh
from wiresolve.output.fields import Fields
from wiresolve.output.phase import Phase
from wiresolve.physics.wire import Wire
from wiresolve.result import Result

Array = NDArray[np.float64]
OF_RUN = ("temperature_K", "fermi_level_eV")
"""Numbers that are none of each subband."""
EDGE = "band_edge_of_first_valleys_eV"


def mode_fields(result: Result, states: NDArray[Any] | None = None, complex_: Sequence[bool] | None = None) -> Fields:
    """The fields of a result with its modes.

    Parameters
    ----------
    states : (mesh points, n) the listed modes, if other ones than those at k = 0.
    complex_ : which of them are written as complex ones; if not given, those that are.
    """
    points = modes_by_name(result.mesh, result.modes if states is None else states, complex_)
    active = next(iter(points))
    for subband in result.subbands:
        if subband.line_density_per_nm is not None:
            number = numbered(subband.index, len(result.subbands))
            held = subband.line_density_per_nm * points[f"density_{number}_per_nm2"]
            points[f"carriers_{number}_per_nm3"] = held
    still = section_fields(result)
    return replace(still, points=points | dict(still.points), active=active)


def section_fields(result: Result) -> Fields:
    """The fields of a result without its modes: potential, carriers, band edges, and the subband table."""
    subbands, charge = result.subbands, result.charge
    points: dict[str, NDArray[Any]] = {}
    if charge is not None:
        points = {"potential_V": charge.potential_V, "density_per_nm3": charge.density_per_nm3}

    def whole(name: str) -> NDArray[np.int32]:
        return np.array([getattr(s, name) for s in subbands], dtype=np.int32)

    numbers: dict[str, NDArray[Any]] = {
        "subband": whole("index"),
        "energy_eV": result.energies_eV,
        "error_eV": result.errors_eV,
        "level": whole("level"),
        "k_min_per_nm": np.array([s.k_min_per_nm for s in subbands]),
        "spin_degeneracy": whole("spin_degeneracy"),
        "valley_degeneracy": whole("valley_degeneracy"),
        "axial_mass_m0": np.array([np.nan if s.axial_mass is None else s.axial_mass for s in subbands]),
    }
    held = [s.line_density_per_nm for s in subbands if s.line_density_per_nm is not None]
    if len(held) == len(subbands):
        numbers["line_density_per_nm"] = np.array(held)
    numbers["temperature_K"] = np.array(result.problem.carriers.temperature_K)
    if (fermi := result.problem.fermi_level_eV) is not None:
        numbers["fermi_level_eV"] = np.array([fermi])
    texts = {
        "valley": [s.valley for s in subbands],
        "title": [result.problem.title or "untitled"],
        "energy_zero": [result.energy_zero_text],
        "input_digest": [result.problem.digest],
    }
    energy = {"potential_energy_eV": potential_energy(result)}
    return Fields(result.mesh, points, result.cell_fields, energy, numbers, texts)


def modes_by_name(mesh: Mesh, states: NDArray[Any], complex_: Sequence[bool] | None = None) -> dict[str, NDArray[Any]]:
    """Arrays of modes (mesh points, n) by name: `psi_01_per_nm` and `density_01_per_nm2`.

    Complex ones are `psi_01_real_per_nm`, `psi_01_imaginary_per_nm` and `phase_01_rad` in place of the first.
    """
    phase = Phase(mesh)
    count = states.shape[1]
    if complex_ is None:
        complex_ = [bool(np.iscomplexobj(states) and states[:, i].imag.any()) for i in range(count)]
    found: dict[str, NDArray[Any]] = {}
    for i in range(count):
        psi, number = np.ascontiguousarray(states[:, i]), numbered(i + 1, count)
        if complex_[i]:
            found[f"psi_{number}_real_per_nm"] = np.ascontiguousarray(psi.real)
            found[f"psi_{number}_imaginary_per_nm"] = np.ascontiguousarray(np.imag(psi))
            found[f"phase_{number}_rad"] = phase.of(psi)
        else:
            found[f"psi_{number}_per_nm"] = np.ascontiguousarray(psi.real)
        found[f"density_{number}_per_nm2"] = psi.real**2 + np.imag(psi) ** 2
    return found


def numbered(index: int, count: int) -> str:
    """A number with zeros before it, so that names sort as numbers do."""
    return f"{index:0{max(2, len(str(count)))}d}"


def potential_energy(result: Result) -> Array:
    """(cells, nodes per cell) an electron's potential energy in the valleys of the first subband, in eV.

    The band edge and the given potential, with charge less its potential; from the energy zero. Not a number where
    carriers are kept out.
    """
    mesh, charge = result.mesh, result.charge
    if charge is not None:
        added = charge.given_eV - charge.potential_V
    else:
        added, given = np.zeros(len(mesh.points)), Wire(result.problem).potential
        if given is not None:
            here = np.unique(mesh.cells[mesh.admitted])
            added[here] = given(*mesh.points[here].T)
    return np.asarray(result.cell_fields[EDGE][:, None] + added[mesh.cells])
