"""A wire whose own charge, gates and surfaces make its potential: what is needed of it on a mesh."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.doping import PARTIAL
from wiresolve.describe.problem import LOCAL_DENSITY
from wiresolve.describe.setting import Setting
from wiresolve.errors import InputError, MeshError
from wiresolve.fem.corners import Corner
from wiresolve.fem.field_corners import field_corners
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.named_edges import NamedEdges, edges_along
from wiresolve.fem.nodal import NodalFunction
from wiresolve.fem.space import Space
from wiresolve.physics.channel import Channel
from wiresolve.physics.charged_potential import charged_potential
from wiresolve.physics.dopants import Dopants
from wiresolve.physics.electrostatics import Field, Pinned, SheetCharge, poisson_field
from wiresolve.physics.exchange import LocalDensity
from wiresolve.physics.nonlinear_poisson import ChargedField
from wiresolve.physics.occupied import Carriers
from wiresolve.physics.pencil import Operator
from wiresolve.physics.selfconsistent import Stage
from wiresolve.physics.wire import Wire

Array = NDArray[np.float64]

_COARSEST_RATE = 0.7
"""Cells around the section grow by so much for each nm of distance from it."""
_MISSED = 1e-3


@dataclass(frozen=True)
class ChargedWire:
    """A problem with gates or charge, made ready; energies count from the source's Fermi level."""

    wire: Wire

    @cached_property
    def setting(self) -> Setting:
        """What is drawn around the section."""
        setting = self.wire.setting
        assert setting is not None
        return setting

    @property
    def temperature_K(self) -> float:
        """Of the carriers."""
        return self.wire.problem.carriers.temperature_K[0]

    @cached_property
    def within(self) -> tuple[float, float, float, float]:
        """(x, y, radius, rate): a circle that holds section and insulators, and how cells grow outside."""
        insulators = [p for p in self.setting.around if p.name.startswith("insulator ")]
        near = [*insulators, *self.wire.problem.section.pieces()]
        points = np.vstack([p.loop.sample(16) for p in near])
        middle = (points.min(axis=0) + points.max(axis=0)) / 2
        radius = float(np.hypot(*(points - middle).T).max())
        return float(middle[0]), float(middle[1]), radius, _COARSEST_RATE

    def gate_V(self, volts: Mapping[str, float]) -> dict[str, float]:
        """The potential phi on each gate at the given voltages."""
        problem = self.wire.problem
        return {g.name: volts.get(g.name, g.voltage_V) - problem.lineup_V(g) for g in problem.gates}

    def field_on(self, mesh: Mesh) -> Field:
        """Poisson's equation on a mesh.

        Raises
        ------
        MeshError
            The mesh has no edge along a gate or a surface.
        """
        problem, space = self.wire.problem, Space(mesh, whole=True)
        permittivity = [self.wire.materials[r.material].permittivity or np.nan for r in mesh.regions]
        doping = [problem.section.doping_of(r.name) for r in mesh.regions]
        density = [0.0 if d.ionisation == PARTIAL else d.net_per_nm3 for d in doping]
        gates = {b.name: _found(mesh, b.name, b.segments) for b in self.setting.gates}
        pinned, sheets = [], []
        for surface, boundary in zip(problem.surfaces, self.setting.surfaces, strict=True):
            edges = _found(mesh, boundary.name, boundary.segments)
            if surface.pinned_at_eV is None:
                sheets.append(SheetCharge(edges, surface.charge_per_nm2 or 0.0))
            else:
                edge = self._edge_beside(mesh, edges)
                pinned.append(Pinned(edges, edge - surface.pinned_at_eV))
        return poisson_field(space, permittivity, gates, pinned, sheets, density)

    def corners(self, mesh: Mesh, field: Field, others: Sequence[Corner] = ()) -> tuple[Corner, ...]:
        """The points near which the potential is singular, with others; of two at one place the sharper."""
        permittivity = [self.wire.materials[r.material].permittivity or 1.0 for r in mesh.regions]
        held = [*field.gates.values(), *(surface.edges for surface in field.pinned)]
        found: dict[tuple[float, float], Corner] = {(c.x, c.y): c for c in others}
        for corner in field_corners(mesh, permittivity, [edges.nodes for edges in held]):
            known = found.get((corner.x, corner.y))
            if known is None or corner.exponent < known.exponent:
                found[corner.x, corner.y] = corner
        return tuple(found.values())

    def _edge_beside(self, mesh: Mesh, edges: NamedEdges) -> Array:
        """(e,) the band edge beside edges: the lowest that carriers meet there, else that of the section's layer."""
        regions, section = mesh.regions, self.wire.problem.section
        own = {piece.name for piece in section.pieces()}
        known = [r.name in own and self.wire.materials[r.material].conduction_edge_eV is not None for r in regions]
        edge = [self.wire.edge_eV(r.material, r.offset_eV) for r in regions]
        admitted = np.array([e if r.carriers else np.inf for e, r in zip(edge, regions, strict=True)])
        drawn = np.array([e if k else np.inf for e, k in zip(edge, known, strict=True)])
        there = mesh.region[np.maximum(edges.cells, 0)]
        lowest, other = (np.where(edges.cells >= 0, e[there], np.inf).min(axis=1) for e in (admitted, drawn))
        found = np.where(np.isfinite(lowest), lowest, other)
        if not np.isfinite(found).all():
            rule = "is the band edge of a material that has none"
            raise InputError("surfaces.pinned_at", rule, remedy="give that material a conduction_edge")
        return np.asarray(found)

    def stage(self, mesh: Mesh, poisson: Field | None = None) -> Stage:
        """A mesh with all that charge needs."""
        field = poisson or self.field_on(mesh)
        space = Space(mesh)
        dopants, cells = self._dopants(mesh, space)
        operators = tuple(channel.operator_of(mesh) for channel in self.wire.channels)
        carriers = Carriers(space, self.wire.channels, operators, self.temperature_K)
        exchange = None
        if self.wire.problem.carriers.interaction == LOCAL_DENSITY:
            exchange = self._local_density(space, field)
        return Stage(ChargedField(field, cells), carriers, dopants, exchange)

    def _local_density(self, space: Space, field: Field) -> LocalDensity:
        """With the masses of the lowest valleys; means over the cells that meet at a point."""
        group, mesh = self.wire.groups[0], space.mesh
        by_region = [
            np.linalg.det(group.inverse_mass[r.material]) ** (-1 / 3) if r.carriers else 1.0 for r in mesh.regions
        ]
        values = np.column_stack([np.array(by_region)[mesh.region[space.cells]], field.permittivity[space.cells]])
        total, count = np.zeros((len(space.nodes), 2)), np.zeros(len(space.nodes))
        np.add.at(total, space.dofs, values[:, None, :])
        np.add.at(count, space.dofs, 1.0)
        mean = total / count[:, None]
        return LocalDensity(space.nodes, mean[:, 0], mean[:, 1])

    def _dopants(self, mesh: Mesh, space: Space) -> tuple[Dopants, NDArray[np.int64]]:
        """Dopants of which only a part is charged, and the cells of these and of carriers."""
        section, count = self.wire.problem.section, len(mesh.regions)
        donors, acceptors, high, low = (np.zeros(count) for _ in range(4))
        for i, region in enumerate(mesh.regions):
            doping = section.doping_of(region.name)
            if doping.ionisation != PARTIAL:
                continue
            edge = self.wire.edge_eV(region.material, region.offset_eV)
            if doping.donors_per_nm3:
                donors[i], high[i] = doping.donors_per_nm3, edge - (doping.donor_depth_eV or 0.0)
            if doping.acceptors_per_nm3:
                gap = self.wire.materials[region.material].gap_eV or 0.0
                acceptors[i], low[i] = doping.acceptors_per_nm3, edge - gap + (doping.acceptor_depth_eV or 0.0)
        cells = np.union1d(space.cells, np.flatnonzero((donors + acceptors)[mesh.region] > 0))
        here = mesh.region[cells]
        return Dopants(donors[here], high[here], acceptors[here], low[here], self.temperature_K), cells

    def channels_in(self, potential_V: NodalFunction) -> tuple[Channel, ...]:
        """The channels with the charge's potential, on the potential's own mesh and on those over its triangles."""
        return tuple(replace(channel, operator_of=_Charged(channel, potential_V)) for channel in self.wire.channels)


@dataclass(frozen=True, eq=False)
class _Charged:
    """A channel's operator with the charge's potential."""

    channel: Channel
    potential_V: NodalFunction

    def __call__(self, mesh: Mesh) -> Operator:
        operator = self.channel.operator_of(mesh)
        return replace(operator, potential=charged_potential(operator.potential, self.potential_V))


def _found(mesh: Mesh, name: str, segments: Sequence[object]) -> NamedEdges:
    edges = edges_along(mesh, segments)  # type: ignore[arg-type]
    if not len(edges.nodes) or edges.missing_nm > _MISSED * edges.wanted_nm:
        raise MeshError(f"the mesh has no edges along '{name}' on {edges.missing_nm:.3g} of {edges.wanted_nm:.3g} nm")
    return edges
