"""From a described problem to what the solver needs: pieces, operator, barrier, and the directions that separate."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property, partial

import numpy as np
from numpy.typing import NDArray

from wiresolve.bands import effective_mass
from wiresolve.bands.valleys import ValleyGroup, valley_groups
from wiresolve.describe.material import ANY_VALLEY, Material
from wiresolve.describe.outside import outside_loop
from wiresolve.describe.problem import PARABOLIC, Problem
from wiresolve.describe.section import Piece
from wiresolve.describe.setting import Setting, setting
from wiresolve.describe.shapes import Rectangle
from wiresolve.describe.symmetry import symmetries
from wiresolve.errors import InputError
from wiresolve.fem.mesh import Mesh
from wiresolve.physics.channel import Channel
from wiresolve.physics.outer_wall import Barrier, least_distance
from wiresolve.physics.pencil import Operator
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]
Energy = Callable[[Array, Array], Array]


@dataclass(frozen=True)
class Wire:
    """A problem made ready to be solved; energies count from the problem's energy zero."""

    problem: Problem

    @cached_property
    def materials(self) -> dict[str, Material]:
        """All materials used, by name."""
        return self.problem.resolved_materials()

    @cached_property
    def zero_eV(self) -> float:
        """The energy zero on the materials' common scale (0 where there is none)."""
        return self.problem.energy_zero()[1] or 0.0

    @cached_property
    def setting(self) -> Setting | None:
        """Insulators, surroundings, gates and surfaces, where charge counts."""
        return setting(self.problem) if self.problem.charged else None

    @cached_property
    def inner(self) -> tuple[Piece, ...]:
        """The drawn pieces in painting order, without a material that goes on outside."""
        section, around = self.problem.section, self.setting
        return section.pieces() if around is None else around.pieces(section)

    def draw(self, distance_nm: float) -> tuple[Piece, ...]:
        """The pieces in painting order, the outside one reaching so far."""
        outside = self.problem.section.outside
        if outside is None:
            return self.inner
        size = float(np.sqrt(max(p.loop.area for p in self.inner)))
        loop = outside_loop(self.inner, max(distance_nm, 0.25 * size))
        return (Piece("outside", loop, outside, True, 0.0), *self.inner)

    @cached_property
    def carrying(self) -> tuple[Material, ...]:
        """The materials that admit carriers, each once."""
        names = [p.material for p in (*self.problem.section.visible(), *self._insulators) if p.carriers]
        if self.problem.section.outside is not None:
            names.append(self.problem.section.outside)
        return tuple(self.materials[name] for name in dict.fromkeys(names))

    @cached_property
    def groups(self) -> tuple[ValleyGroup, ...]:
        """All groups of valleys that every carrying material has, the lowest edge first."""
        problem = self.problem
        orientation = problem.orientation
        directions = None if orientation is None else (orientation.axis, orientation.up)
        names = [
            name
            for name in problem.shared_valleys()
            if directions is not None or not any(_needs(m, name) for m in self.carrying)
        ]
        found = valley_groups(
            self.carrying, names, directions, symmetries(problem.section, problem.potential, self.setting)
        )  # fmt: skip
        return tuple(sorted(found, key=lambda group: min(self.edges_eV(group).values())))

    @cached_property
    def unsolved(self) -> tuple[tuple[str, float], ...]:
        """Valleys that cannot be solved, with the lowest energy that they can have, from the energy zero.

        Without an orientation those off the zone centre; else those whose masses some carrying material does not know.
        """
        solved = {group.valley for group in self.groups}
        lowest: dict[str, float] = {}
        for piece in self._places():
            material = self.materials[piece.material]
            base = self.edge_eV(piece.material, piece.offset_eV)
            known = [(v.name, v.height_eV) for v in material.valleys] + list(material.unsolved_valleys)
            for name, height in known:
                if name not in solved and name != ANY_VALLEY:
                    lowest[name] = min(lowest.get(name, np.inf), base + height)
        return tuple(lowest.items())

    @property
    def _insulators(self) -> tuple[Piece, ...]:
        """What is drawn around the section that admits carriers."""
        return () if self.setting is None else tuple(p for p in self.setting.around if p.carriers)

    def _places(self) -> list[Piece]:
        outside = self.problem.section.outside
        places = [p for p in (*self.problem.section.visible(), *self._insulators) if p.carriers]
        if outside is not None:
            places.append(replace(places[0], name="outside", material=outside, offset_eV=0.0))
        return places

    def edge_eV(self, piece_material: str, offset_eV: float, group: ValleyGroup | None = None) -> float:
        """Band edge of a region from the energy zero: its lowest valley's, or that of a group of valleys."""
        height = 0.0 if group is None else group.height_eV[piece_material]
        return (self.materials[piece_material].conduction_edge_eV or 0.0) + height + offset_eV - self.zero_eV

    def edges_eV(self, group: ValleyGroup) -> dict[str, float]:
        """Band edge of a group of valleys in each piece that admits carriers, by the piece's name."""
        return {p.name: self.edge_eV(p.material, p.offset_eV, group) for p in self._places()}

    @cached_property
    def channels(self) -> tuple[Channel, ...]:
        """What is to be solved: every group of valleys, the lowest edge first.

        Raises
        ------
        InputError
            A material that goes on outside lies no higher than the wire, or an electric field pulls carriers through
            it: they would leave.
        """
        self._check_field()
        return tuple(
            Channel(g.valley, g.label, g.degeneracy, partial(self.operator, group=g), self.barrier_of(g))
            for g in self.groups
            if g not in self.leaking
        )

    def _check_field(self) -> None:
        """InputError where a field brings the barrier outside down before its wall is out of sight."""
        barrier, given = self.barrier, self.problem.potential
        if barrier is None or not barrier.extendable or given is None or given.field_V_per_nm is None:
            return
        lowest = min(self.edges_eV(self.groups[0]).values())
        strength = float(np.hypot(*given.field_V_per_nm))
        height = barrier.edge_eV - lowest
        reach = max(float(np.hypot(*p.loop.sample(8).T).max()) for p in self.inner)
        if strength * (reach + least_distance(barrier, height)) > height / 2:
            raise InputError(
                "potential.field",
                f"pulls carriers out: it brings the barrier outside ({height:.3g} eV) down to half its height within"
                f" {height / 2 / strength:.3g} nm",
                f"{strength:g} V/nm",
                'write outside = "hard wall" with a layer as thick as it really is, or make the field weaker',
            )

    @cached_property
    def leaking(self) -> tuple[ValleyGroup, ...]:
        """Groups of valleys, not the lowest ones, whose carriers would leave into the material outside: not solved."""
        return tuple(g for g in self.groups[1:] if self._leaks(g))

    def _leaks(self, group: ValleyGroup) -> bool:
        edges = self.edges_eV(group)
        return "outside" in edges and edges["outside"] <= min(e for n, e in edges.items() if n != "outside") + 1e-9

    def operator(self, mesh: Mesh, group: ValleyGroup | None = None) -> Operator:
        """The operator of a group of valleys (the lowest one) over a mesh's regions.

        Regions that carriers cannot enter get those of a region that admits them: they are never used.
        """
        group = group or self.groups[0]
        admitted = [r for r in mesh.regions if r.carriers]
        tensors = effective_mass.without_common_shear([group.inverse_mass[r.material] for r in admitted])
        made = [
            effective_mass.coefficients(tensor, self.edge_eV(r.material, r.offset_eV, group))
            for r, tensor in zip(admitted, tensors, strict=True)
        ]
        by_name = {r.name: c for r, c in zip(admitted, made, strict=True)}
        alpha = {r.name: group.nonparabolicity_per_eV[r.material] for r in admitted}
        known = self.problem.carriers.model != PARABOLIC and any(alpha.values())
        first = admitted[0].name
        return Operator(
            by_region=tuple(by_name.get(r.name, made[0]) for r in mesh.regions),
            potential=self.potential,
            nonparabolicity_per_eV=tuple(alpha.get(r.name, alpha[first]) for r in mesh.regions) if known else (),
            smooth=self._smooth,
        )

    @cached_property
    def potential(self) -> Energy | None:
        """Energy in eV at (x, y) in nm, or None where none was given."""
        parts = [part for part in (*self.axis_parts, self._free_part, self._file_part) if part is not None]
        if not parts:
            return None

        def total(x: Array, y: Array) -> Array:
            return np.asarray(sum(part(x, y) for part in parts))

        return total

    @property
    def _smooth(self) -> bool:
        """Whether the potential is a polynomial."""
        given = self.problem.potential
        return given is None or (given.function is None and given.file is None)

    @cached_property
    def axis_parts(self) -> tuple[Energy | None, Energy | None]:
        """The parts of the potential that depend on x alone and on y alone."""
        given = self.problem.potential
        if given is None:
            return None, None
        field = given.field_V_per_nm or (0.0, 0.0)
        spacing = given.harmonic_eV or (0.0, 0.0)
        inverse_mass = self.mass_at_origin
        found: list[Energy | None] = []
        for axis in (0, 1):
            # V = m w^2 x^2 / 2 with hbar w the level spacing and 1/m the diagonal of the inverse mass.
            stiffness = spacing[axis] ** 2 / (4 * HBAR2_OVER_2M0 * float(inverse_mass[axis, axis]))
            slope = field[axis]
            if stiffness == 0 and slope == 0:
                found.append(None)
            else:
                found.append(_along(axis, slope, stiffness))
        return found[0], found[1]

    @property
    def _free_part(self) -> Energy | None:
        given = self.problem.potential
        if given is None or given.function is None:
            return None
        function = given.function

        def checked(x: Array, y: Array) -> Array:
            energy = np.asarray(function(x, y), dtype=float)
            energy = np.broadcast_to(energy, x.shape) if energy.ndim == 0 else energy
            if energy.shape != x.shape or not np.isfinite(energy).all():
                raise InputError("potential.function", "must give one finite energy in eV at each point of the section")
            return energy

        return checked

    @property
    def _file_part(self) -> Energy | None:
        given = self.problem.potential
        return None if given is None or given.file is None else given.file.over(self.problem.section.shape)

    @cached_property
    def mass_at_origin(self) -> Array:
        """(3, 3) inverse mass in 1/m0 of the lowest valley in the piece that is seen at the origin.

        Of groups of one kind the one with the largest masses in the plane counts: its levels are the lowest.
        """
        origin = np.zeros((1, 2))
        here = [p for p in self.inner if p.loop.contains(origin)[0] and p.carriers]
        name = here[-1].material if here else next(p.material for p in reversed(self.inner) if p.carriers)
        kind = self.groups[0].valley
        tensors = [group.inverse_mass[name] for group in self.groups if group.valley == kind]
        return min(tensors, key=lambda tensor: float(np.linalg.det(tensor[:2, :2])))

    @property
    def barrier(self) -> Barrier | None:
        """The outermost layer where it is a barrier for the lowest valleys."""
        return self.barrier_of(self.groups[0])

    def barrier_of(self, group: ValleyGroup) -> Barrier | None:
        """The outermost layer where it is a barrier for a group of valleys.

        Raises
        ------
        InputError
            A material that goes on outside lies no higher than the wire: carriers would leave.
        """
        section = self.problem.section
        name = self._insulators[0].name if self._insulators else section.outermost
        edges = self.edges_eV(group)
        if name not in edges or len(edges) < 2:
            return None
        material = section.outside
        if material is None:
            material = next(p for p in self.inner if p.name == name).material
        if edges[name] <= min(edge for other, edge in edges.items() if other != name) + 1e-9:
            if name == "outside":
                raise InputError(
                    "section.outside",
                    "lies no higher in energy than the wire, so carriers would leave it",
                    material,
                    'write outside = "hard wall", or a material that is a barrier',
                )
            return None
        stiffness = HBAR2_OVER_2M0 * float(np.sqrt(np.linalg.det(group.inverse_mass[material][:2, :2])))
        return Barrier(name, edges[name], stiffness, name == "outside")

    def separating_axes(self, group: ValleyGroup) -> Array | None:
        """Rows are the axes along which the section separates for a group of valleys (a plain rectangle), or None."""
        section, shape = self.problem.section, self.problem.section.shape
        if not isinstance(shape, Rectangle) or shape.corner_radius_nm or section.layers or section.patches:
            return None
        given = self.problem.potential
        if section.outside is not None or (given is not None and (given.function or given.file) is not None):
            return None
        angle = np.radians(shape.rotation_deg)
        axes = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
        in_plane = group.inverse_mass[section.material][:2, :2]
        turned = axes @ in_plane @ axes.T
        upright = abs(np.sin(2 * angle)) < 1e-12
        if abs(turned[0, 1]) > 1e-9 * abs(turned).max() or (given is not None and not upright):
            return None
        return axes


def _needs(material: Material, name: str) -> bool:
    """Whether a valley's tensor in this material is known only with an orientation."""
    valley = material.valley_named(name)
    return valley is not None and valley.needs_orientation


def _along(axis: int, slope: float, stiffness: float) -> Energy:
    def energy(x: Array, y: Array) -> Array:
        along = (x, y)[axis]
        return np.asarray(slope * along + stiffness * along**2)

    return energy
