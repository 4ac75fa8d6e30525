"""Charged round wires under a wrap-around gate: fully depleted, and with carriers that follow Boltzmann's law."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tests.truth._fields import at_origin, field, mean_on, meshed, piece, whole
from wiresolve.describe.curves import circle
from wiresolve.fem.mesh import Mesh
from wiresolve.physics.electrostatics import Field
from wiresolve.physics.nonlinear_poisson import ChargedField
from wiresolve.units import KB

Array = NDArray[np.float64]

DEPLETED = (
    "Gauss's law, e N R^2/(4 eps) and e N pi R^2/C; V. Schmidt and others, Appl. Phys. A 86, 187 (2007) (from memory)"
)
BOLTZMANN = (
    "closed form of the cylinder's Poisson-Boltzmann equation: P. L. Chambre, J. Chem. Phys. 20, 1795 (1952);"
    " D. Jimenez and others, IEEE Electron Device Lett. 25, 571 (2004)"
)
PERMITTIVITY = {"core": 11.7, "layer 1": 3.9}


def wrapped(
    radius: float, oxide: float, size: float, turn_cells: int, donors_per_nm3: float = 0.0
) -> tuple[Mesh, Field]:
    """A silicon wire in an oxide whose rim is the gate."""
    rim = circle(radius + oxide)
    pieces = [piece("layer 1", rim, carriers=False), piece("core", circle(radius))]
    mesh = meshed(pieces, size, turn_cells)
    return mesh, field(mesh, PERMITTIVITY, {"gate": rim.segments}, density_per_nm3={"core": donors_per_nm3})


def depleted(radius: float, oxide: float, donors_per_nm3: float) -> list[float]:
    """V from surface to centre, V across the oxide, and the gate voltage at which the centre is at zero."""
    mesh, poisson = wrapped(radius, oxide, 0.4 * radius, 32, donors_per_nm3)
    phi = poisson.solve_linear(poisson.fixed_load, poisson.held_values({"gate": 0.0}))
    surface, center = mean_on(whole(mesh, circle(radius).segments), phi), at_origin(mesh, phi)
    return [center - surface, surface, -center]


def boltzmann(radius: float, gate_V: float, intrinsic_per_nm3: float, size: float, turn_cells: int) -> list[float]:
    """Potential at the surface and in the centre in V, and electrons per nm, from the gate's voltage."""
    thermal_V = 300 * KB
    mesh, poisson = wrapped(radius, 1.0, size, turn_cells)
    charged = ChargedField(poisson, np.flatnonzero(mesh.admitted))

    def electrons(phi: Array) -> tuple[Array, Array]:
        density = -intrinsic_per_nm3 * np.exp(phi / thermal_V)
        return density, density / thermal_V

    start = np.zeros(len(mesh.points))
    solution = charged.solve(poisson.held_values({"gate": gate_V}), electrons, start, 1e-10)
    surface = mean_on(whole(mesh, circle(radius).segments), solution.phi)
    return [surface, at_origin(mesh, solution.phi), -float(solution.load.sum())]


def entries() -> Sequence[dict[str, Any]]:
    found: list[dict[str, Any]] = []
    for radius, oxide, donors, values in (
        (10.0, 1.0, 1e-2, [0.386648037766, 0.221108964003, -0.607757001769]),
        (25.0, 5.0, 1e-3, [0.241655023604, 0.264353520663, -0.506008544267]),
    ):
        found.append(
            {
                "id": f"depletion.radius-{radius:g}",
                "what": f"V in the wire, across {oxide:g} nm of oxide, at pinch-off; {donors * 1e21:.0e} donors/cm³",
                "value": values,
                "digits": 8,
                "source": DEPLETED,
                "tolerance_reason": "the field is a parabola and a logarithm: the mesh's curves leave 1e-9",
                "compute": lambda r=radius, t=oxide, n=donors: depleted(r, t, n),
            }
        )
    for radius, surface, center, line, gate, size, turn in (
        (5.0, 0.40, 0.39950035320738, 4.07940928590e-3, 0.400549227771, 1.5, 24),
        (10.0, 0.45, 0.43963328763629, 9.32697041787e-2, 0.456564430828, 1.5, 24),
        (10.0, 0.55, 0.47657232870270, 1.31818971604, 0.642775733398, 1.0, 48),
    ):
        found.append(
            {
                "id": f"depletion.boltzmann-{radius:g}-{surface:g}",
                "what": f"V at surface and centre, electrons/nm; {radius:g} nm radius, gate at {gate:g} V, 300 K",
                "value": [surface, center, line],
                "digits": 7,
                "source": BOLTZMANN,
                "tolerance_reason": "asked are six digits; Boltzmann's law makes 1e-9 V of 4e-8 of the density",
                "compute": lambda r=radius, g=gate, s=size, t=turn: boltzmann(r, g, 1e-11, s, t),
            }
        )
    return found


TRUTH: list[dict[str, Any]] = list(entries())
