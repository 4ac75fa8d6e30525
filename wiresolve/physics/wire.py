"""From a described problem to what the solver needs: pieces, operator, barrier, and the directions that separate."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from wiresolve.bands import effective_mass
from wiresolve.bands.coefficients import Coefficients
from wiresolve.describe.materials import Material
from wiresolve.describe.problem import Problem
from wiresolve.describe.section import Piece, outside_loop
from wiresolve.describe.shapes import Rectangle
from wiresolve.errors import InputError
from wiresolve.fem.mesh import Mesh
from wiresolve.physics.pencil import Operator
from wiresolve.physics.subbands import Barrier
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
    def inner(self) -> tuple[Piece, ...]:
        """The drawn pieces in painting order, without a material that goes on outside."""
        return self.problem.section.pieces()

    def check_valleys(self) -> None:
        """Refuse materials whose states stand for unlike numbers of valleys.

        Raises
        ------
        InputError
            Two materials that admit carriers differ in `valley_degeneracy`.
        """
        used = {p.material for p in self.problem.section.visible() if p.carriers}
        outside = self.problem.section.outside
        used |= {outside} if outside is not None else set()
        valleys = {name: self.materials[name].valley_degeneracy for name in sorted(used)}
        if len(set(valleys.values())) > 1:
            raise InputError(
                "materials",
                "valley_degeneracy differs between materials that admit carriers, so states cannot be counted",
                ", ".join(f"{name}: {count}" for name, count in valleys.items()),
                "solve each kind of valley by itself",
            )

    def draw(self, distance_nm: float) -> tuple[Piece, ...]:
        """The pieces in painting order, the outside one reaching so far."""
        outside = self.problem.section.outside
        if outside is None:
            return self.inner
        size = float(np.sqrt(max(p.loop.area for p in self.inner)))
        loop = outside_loop(self.inner, max(distance_nm, 0.25 * size))
        return (Piece("outside", loop, outside, True, 0.0), *self.inner)

    def inverse_mass(self, material: str) -> Array:
        """(3, 3) inverse mass of a material in 1/m0."""
        return np.asarray(self.materials[material].inverse_mass, dtype=float)

    def edge_eV(self, piece_material: str, offset_eV: float) -> float:
        """Band edge of a region from the energy zero."""
        return (self.materials[piece_material].conduction_edge_eV or 0.0) + offset_eV - self.zero_eV

    def operator(self, mesh: Mesh) -> Operator:
        """The operator over a mesh's regions; regions that carriers cannot enter get a stand-in that is never used."""
        stand_in = Coefficients(np.eye(3)[:, :, None, None], np.zeros((3, 1, 1)), np.zeros((1, 1)))
        admitted = [r for r in mesh.regions if r.carriers]
        tensors = effective_mass.without_common_shear([self.inverse_mass(r.material) for r in admitted])
        of_region = {r.name: tensor for r, tensor in zip(admitted, tensors, strict=True)}
        by_region = tuple(
            effective_mass.coefficients(of_region[r.name], self.edge_eV(r.material, r.offset_eV))
            if r.carriers
            else stand_in
            for r in mesh.regions
        )
        return Operator(by_region, self.potential)

    @cached_property
    def potential(self) -> Energy | None:
        """Energy in eV at (x, y) in nm, or None where none was given."""
        parts = [part for part in (*self.axis_parts, self._free_part) if part is not None]
        if not parts:
            return None

        def total(x: Array, y: Array) -> Array:
            return np.asarray(sum(part(x, y) for part in parts))

        return total

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
            stiffness = spacing[axis] ** 2 / (4 * HBAR2_OVER_2M0 * inverse_mass[axis][axis])
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

    @cached_property
    def mass_at_origin(self) -> tuple[tuple[float, float, float], ...]:
        """Inverse mass in 1/m0 of the piece that is seen at the origin (of the core where it is none)."""
        origin = np.zeros((1, 2))
        here = [p for p in self.inner if p.loop.contains(origin)[0] and p.material != "void"]
        name = here[-1].material if here else self.problem.section.material
        mass = self.materials[name].inverse_mass if name in self.materials else ()
        if not mass:
            name = next(p.material for p in reversed(self.inner) if p.carriers)
            mass = self.materials[name].inverse_mass
        return mass

    @cached_property
    def barrier(self) -> Barrier | None:
        """The outermost layer where it is a barrier.

        Raises
        ------
        InputError
            A material that goes on outside lies no higher than the wire: carriers would leave.
        """
        section = self.problem.section
        name = section.outermost
        if name == "outside":
            assert section.outside is not None
            material, offset, admits = section.outside, 0.0, True
        else:
            piece = next(p for p in self.inner if p.name == name)
            material, offset, admits = piece.material, piece.offset_eV, piece.carriers
        others = [self.edge_eV(p.material, p.offset_eV) for p in section.visible() if p.carriers and p.name != name]
        if not admits or not others:
            return None
        edge = self.edge_eV(material, offset)
        if edge <= min(others) + 1e-9:
            if name == "outside":
                raise InputError(
                    "section.outside",
                    "lies no higher in energy than the wire, so carriers would leave it",
                    material,
                    'write outside = "hard wall", or a material that is a barrier',
                )
            return None
        in_plane = np.asarray(self.materials[material].inverse_mass)[:2, :2]
        stiffness = HBAR2_OVER_2M0 * float(np.sqrt(np.linalg.det(in_plane)))
        return Barrier(name, edge, stiffness, name == "outside")

    @cached_property
    def separating_axes(self) -> Array | None:
        """Rows are the two axes along which the section separates (a plain hard-walled rectangle), or None."""
        section, shape = self.problem.section, self.problem.section.shape
        if not isinstance(shape, Rectangle) or shape.corner_radius_nm or section.layers or section.patches:
            return None
        given = self.problem.potential
        if section.outside is not None or (given is not None and given.function is not None):
            return None
        angle = np.radians(shape.rotation_deg)
        axes = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
        in_plane = np.asarray(self.materials[section.material].inverse_mass)[:2, :2]
        turned = axes @ in_plane @ axes.T
        upright = abs(np.sin(2 * angle)) < 1e-12
        if abs(turned[0, 1]) > 1e-9 * abs(turned).max() or (given is not None and not upright):
            return None
        return axes


def _along(axis: int, slope: float, stiffness: float) -> Energy:
    def energy(x: Array, y: Array) -> Array:
        along = (x, y)[axis]
        return np.asarray(slope * along + stiffness * along**2)

    return energy
