"""What the regions of a mesh are to one group of valleys, cell by cell."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.mesh import Mesh
from wiresolve.physics.wire import Wire

Array = NDArray[np.float64]


def cell_fields(wire: Wire, mesh: Mesh, valleys: str) -> dict[str, Array]:
    """The axial mass and the band edge of the group of valleys with a label, (cells,) each; NaN where it has none."""
    group = next(g for g in wire.groups if g.label == valleys)
    mass, edge = [], []
    for region in mesh.regions:
        known = region.carriers and region.material in group.inverse_mass
        mass.append(1 / group.inverse_mass[region.material][2, 2] if known else np.nan)
        edge.append(wire.edge_eV(region.material, region.offset_eV, group) if known else np.nan)
    return {
        "axial_mass_of_first_valleys_m0": np.array(mass)[mesh.region],
        "band_edge_of_first_valleys_eV": np.array(edge)[mesh.region],
    }
