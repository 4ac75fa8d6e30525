"""What must be said beside the numbers: warnings with codes that describe themselves, and what was not modelled."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from wiresolve.bands.valleys import ValleyGroup
from wiresolve.describe.material import Material, Note
from wiresolve.describe.mesh_shape import ImportedMesh
from wiresolve.describe.problem import HARTREE, PARABOLIC
from wiresolve.errors import InputError
from wiresolve.fem.mesh import Region
from wiresolve.fem.nodal import NodalFunction
from wiresolve.physics import boundary_remarks, charge_remarks, material_remarks
from wiresolve.physics.borders import Borders, borders_of
from wiresolve.physics.boundary_remarks import OuterBarrier
from wiresolve.physics.charge_remarks import Ring
from wiresolve.physics.listing import Listing
from wiresolve.physics.solved import levels, lowest_energy
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.statistics import fermi_level
from wiresolve.physics.subbands import Certified
from wiresolve.physics.wire import Wire
from wiresolve.physics.wording import meV
from wiresolve.units import KB

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Remarks:
    """Warnings as (code, text, remedy), sentences for the verdict, and what the result leaves out."""

    warnings: tuple[Note, ...]
    said: tuple[str, ...]
    not_modelled: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class Outcome:
    """A solved wire as remarks look at it.

    Attributes
    ----------
    line_density_per_nm : at the Fermi level and the first temperature, None without a Fermi level.
    potential_V : the charge's potential, None where charge does not count.
    """

    wire: Wire
    certified: Certified
    found: Listing
    spectrum: Spectrum
    line_density_per_nm: float | None
    potential_V: NodalFunction | None = None

    @property
    def accuracy_eV(self) -> float:
        """What was asked for."""
        return self.wire.problem.accuracy.energy_eV

    @cached_property
    def regions(self) -> dict[str, Region]:
        """The mesh's regions by name."""
        return {r.name: r for r in self.certified.space.mesh.regions}

    @cached_property
    def materials(self) -> dict[str, Material]:
        """Material of each region."""
        return {name: self.wire.materials[r.material] for name, r in self.regions.items()}

    @cached_property
    def borders(self) -> Borders:
        """Which regions touch."""
        return borders_of(self.certified.space.mesh)

    @cached_property
    def groups(self) -> tuple[ValleyGroup, ...]:
        """The group of valleys of each listed state."""
        known = {g.label: g for g in self.wire.groups}
        return tuple(known[label] for label in self.found.valley)

    @cached_property
    def places(self) -> tuple[str, ...]:
        """The region that holds most of each listed state."""
        names = list(self.found.shares)
        most = np.argmax([self.found.shares[name] for name in names], axis=0)
        return tuple(names[i] for i in most)

    @cached_property
    def above_edge_eV(self) -> Array:
        """How far each listed state lies above band edge and potential, for its valleys, where most of it is."""
        edges = [self.edge_eV(place, group) for place, group in zip(self.places, self.groups, strict=True)]
        return np.asarray(self.found.energy_eV - self.mean_potential_eV - edges)

    @cached_property
    def given_eV(self) -> Array:
        """The potential energy at the space's nodes, given or of the charge, 0 without one."""
        space, potential = self.certified.space, self.wire.potential
        x, y = space.mesh.points[space.nodes].T
        given = np.zeros(len(x)) if potential is None else np.asarray(potential(x, y))
        return given if self.potential_V is None else given - self.potential_V.at_nodes(space)

    @cached_property
    def mean_potential_eV(self) -> Array:
        """What each listed state has of it."""
        states = self.found.states
        weighted = self.certified.space.mass @ (self.given_eV[:, None] * states)
        return np.asarray(np.einsum("ni,ni->i", states.conj(), weighted).real)

    @cached_property
    def alpha_per_eV(self) -> Array:
        """The nonparabolicity there, 0 where none is known."""
        pairs = zip(self.places, self.groups, strict=True)
        return np.array([group.nonparabolicity_per_eV[self.regions[place].material] for place, group in pairs])

    def edge_eV(self, place: str, group: ValleyGroup | None = None) -> float:
        """Band edge of a region."""
        region = self.regions[place]
        return self.wire.edge_eV(region.material, region.offset_eV, group)

    @cached_property
    def spacing_eV(self) -> float | None:
        """From the first level to the second, whether listed or not."""
        higher = np.flatnonzero(self.spectrum.level > self.spectrum.level[0])
        return float(self.spectrum.energy_eV[higher[0]] - self.spectrum.energy_eV[0]) if len(higher) else None

    @cached_property
    def rings(self) -> tuple[Ring, ...]:
        """The jumps of permittivity around where the first level lives."""
        endless = {"outside"} if self.wire.problem.section.outside is not None else set()
        if self.wire.problem.gates:
            endless |= set(self.borders.free)
        return charge_remarks.rings(self.borders, self.materials, self.places[0], frozenset(endless))

    @property
    def permittivity(self) -> float | None:
        """Of where the first level lives."""
        return self.materials[self.places[0]].permittivity

    def fermi_level_at(self, line_density_per_nm: float) -> float | None:
        """The Fermi level at which the wire holds a line density at the first temperature, None where there is none."""
        try:
            return fermi_level(self.spectrum, line_density_per_nm, self.wire.problem.carriers.temperature_K[0])
        except InputError:
            return None

    @cached_property
    def outer_barrier(self) -> OuterBarrier | None:
        """The outermost layer as each listed state sees it, None where it is a barrier for none of them."""
        barriers = {c.label: c.barrier for c in self.certified.channels}
        seen = [barriers[label] for label in self.found.valley]
        known = [b for b in seen if b is not None and b.region in self.regions]
        if not known:
            return None
        effect = self.found.wall_effect_eV
        return OuterBarrier(
            known[0].region,
            known[0].extendable,
            np.array([np.nan if b is None else b.edge_eV + self._along_rim_eV(b.region) for b in seen]),
            np.full(len(seen), np.nan) if effect is None else effect,
        )

    @property
    def bound(self) -> tuple[bool | None, ...]:
        """Whether each listed state is bound, None where that is not asked or nobody can tell."""
        outer = self.outer_barrier
        if outer is None:
            return (None,) * len(self.found.energy_eV)
        return tuple(outer.bound(self.found.energy_eV))

    def _along_rim_eV(self, region: str) -> float:
        """The least given potential along the outer wall of a region."""
        rim = self.certified.space.rim_of(list(self.regions).index(region))
        return float(self.given_eV[rim].min()) if rim.any() else 0.0


def on(seen: Outcome) -> Remarks:
    """All remarks on a solved wire."""
    warnings: list[Note] = [*_on_accuracy(seen), *_on_geometry(seen)]
    said: list[str] = []
    for notes, sentences in (_on_barriers(seen), _on_pieces(seen), _on_masses(seen), _on_valleys(seen)):
        warnings += notes
        said += sentences
    said += _on_places(seen)
    warnings += _on_surroundings(seen)
    used = [r.material for r in seen.regions.values() if r.carriers]
    for name in sorted(set(used)):
        warnings += [note for note in seen.wire.materials[name].notes if note not in warnings]
    return Remarks(tuple(warnings), tuple(said), not_modelled(seen))


def not_modelled(seen: Outcome) -> tuple[str, ...]:
    """What the result leaves out, as far as it matters to this wire."""
    charge = "charge: fixed charge, gates and the carriers' own charge do not move the levels"
    modelled, transport = seen.wire.problem.charged, seen.wire.problem.transport
    if not modelled and seen.permittivity is not None and seen.spacing_eV is not None:
        limit = charge_remarks.harmless_density_per_nm(seen.spacing_eV, seen.permittivity)
        charge += f" (the carriers' own would, by about the first spacing, at {limit:.2g} per nm)"
    images = "image charges from the jump of permittivity at surfaces and interfaces"
    if seen.rings:
        images += f" (they would move all levels by {charge_remarks.shift_in_words(seen.rings)})"
    unknown = sorted({r.material for r in seen.regions.values() if r.carriers and not _growth(seen, r.material)})
    several = len({r.material for r in seen.regions.values()}) > 1
    return tuple(
        text
        for text, matters in (
            (charge, not modelled),
            ("exchange and correlation: electrons feel their mean charge alone", modelled and _mean_field(seen)),
            ("holes, and traps at surfaces whose charge follows the gate", modelled),
            (
                "the hold of source and drain on an empty channel",
                bool(seen.wire.problem.gates) and not _has_length(seen),
            ),
            (images, True),
            ("strain from lattice mismatch", several),
            (f"growth of the mass with energy in {', '.join(unknown)}: no value is known", bool(unknown)),
            (
                "what lies behind a hard wall: behind a real barrier, which is not infinitely high, levels lie lower",
                seen.wire.problem.section.outside is None,
            ),
            ("spin-orbit coupling and magnetic field", True),
            ("scattering: conductance is ballistic, with perfect contacts", transport is None or transport.is_open),
            ("variation of the section along the wire", True),
        )
        if matters
    )


def _mean_field(seen: Outcome) -> bool:
    return seen.wire.problem.carriers.interaction == HARTREE


def _has_length(seen: Outcome) -> bool:
    transport = seen.wire.problem.transport
    return transport is not None and transport.length_nm is not None


def _growth(seen: Outcome, material: str) -> bool:
    """Whether the mass of a material is known to grow with energy in the valleys of the first level."""
    return seen.groups[0].nonparabolicity_per_eV[material] > 0


def _on_accuracy(seen: Outcome) -> list[Note]:
    """Bars that were missed, or that are too wide for what is made of the energies."""
    found, notes = seen.found, []
    widest = float(found.bar_eV.max())
    if not seen.certified.met or widest > seen.accuracy_eV:
        text = f"the widest error bar is {meV(widest, 2)}, wider than the {meV(seen.accuracy_eV, 2)} asked for"
        notes.append(("accuracy-missed", text, "ask a coarser accuracy or fewer subbands"))
    coldest = KB * min(seen.wire.problem.carriers.temperature_K)
    level = levels(found.energy_eV, found.bar_eV)
    ends = [np.flatnonzero(level == n)[[0, -1]] for n in np.unique(level)]
    chained = [(i, j) for i, j in ends if found.energy_eV[j] - found.energy_eV[i] > found.bar_eV[i] + found.bar_eV[j]]
    if 0 < coldest < widest:
        text = f"error bars of up to {meV(widest, 2)} are wider than kT at the lowest temperature,"
        text += f" {meV(coldest, 2)}: steps and degeneracies closer than that are not told apart"
        notes.append(("accuracy-coarse", text, f'ask for energy = "{meV(coldest / 10, 1)}" or finer'))
    elif chained:
        first, last = (int(i) + 1 for i in chained[0])
        text = f"numbers {first} to {last} are listed as one level, since each is equal to the next within its bar, but"
        text += " the first and the last are not: the degeneracy that this level shows is not to be trusted"
        notes.append(("accuracy-coarse", text, "ask a finer accuracy"))
    potential = seen.wire.problem.potential
    error = None if potential is None else potential.file_error_eV
    if error is not None and error > seen.accuracy_eV:
        text = f"between the points of its file the potential may be off by {meV(error, 2)}, more than the accuracy"
        text += f" of {meV(seen.accuracy_eV, 2)}; error bars do not hold this"
        notes.append(("potential-file", text, "give the file more points, or ask a coarser accuracy"))
    return notes


def _on_geometry(seen: Outcome) -> list[Note]:
    shape = seen.wire.problem.section.shape
    if not isinstance(shape, ImportedMesh):
        return []
    highest = float(seen.above_edge_eV.max())
    return boundary_remarks.on_outline(shape.geometry_note, shape.missed_area, highest, seen.accuracy_eV)


def _on_barriers(seen: Outcome) -> tuple[list[Note], list[str]]:
    """Walls that are no walls, and what the outermost layer holds."""
    energy = seen.found.energy_eV
    place = seen.places[0]
    in_plane = seen.groups[0].inverse_mass[seen.regions[place].material][:2, :2]
    walls = boundary_remarks.walls(
        seen.borders,
        seen.materials,
        [name for name, region in seen.regions.items() if not region.carriers],
        {name: region.offset_eV for name, region in seen.regions.items()},
        place,
        1 / float(np.sqrt(np.linalg.det(in_plane))),
    )
    above = float(energy[0] - seen.mean_potential_eV[0]) - seen.edge_eV(place)
    notes = boundary_remarks.on_soft_walls(walls, above, place)
    outer = seen.outer_barrier
    if outer is None:
        return notes, []
    more, said = boundary_remarks.on_outer_barrier(outer, energy, seen.accuracy_eV)
    notes += more
    if outer.region in seen.found.shares:
        held = np.where(np.isfinite(outer.edge_eV), seen.found.shares[outer.region], 0.0)
        notes += boundary_remarks.on_outermost_states(held, outer.region)
    return notes, said


def _on_pieces(seen: Outcome) -> tuple[list[Note], list[str]]:
    """Pieces that do not touch."""
    parts = seen.certified.space.parts
    if parts < 2:
        return [], []
    text = f"walls part the section into {parts} pieces that carry current side by side; levels of all are listed"
    remedy = "solve each piece as a wire of its own, or move the patches together"
    return [("separate-pieces", text, remedy)], [f"The section is {parts} separate pieces."]


def _on_masses(seen: Outcome) -> tuple[list[Note], list[str]]:
    """Masses used where they do not hold."""
    problem, place = seen.wire.problem, seen.places[0]
    names = [seen.regions[p].material for p in seen.places]
    notes: list[Note] = []
    said: list[str] = []
    if problem.carriers.model == PARABOLIC:
        level = levels(seen.found.energy_eV, seen.found.bar_eV)
        higher = np.flatnonzero(level > level[0])
        second = int(higher[0]) if len(higher) else None
        notes, said = material_remarks.on_parabolic(
            seen.above_edge_eV, seen.alpha_per_eV, second, names, seen.accuracy_eV
        )
    else:
        notes = material_remarks.on_two_bands(seen.above_edge_eV, seen.alpha_per_eV, names)
    if place != "outside":
        width = material_remarks.narrowest_nm(problem.section, place)
        notes += material_remarks.on_silicon(width, place, seen.materials[place])
    return notes, said


def _on_valleys(seen: Outcome) -> tuple[list[Note], list[str]]:
    """Valleys of another kind that lie close to the carrying ones."""
    certified, wire = seen.certified, seen.wire
    lowest: dict[str, float] = {}

    def note(kind: str, energy: float) -> None:
        lowest[kind] = min(lowest.get(kind, np.inf), energy)

    for kind, energy in zip(seen.found.valley_kind, seen.found.energy_eV, strict=True):
        note(kind, float(energy))
    for channel, solved in zip(certified.channels, certified.solved, strict=True):
        note(channel.valley, float(solved.energy_eV[0]))
    thermal = KB * max(wire.problem.carriers.temperature_K)
    window = material_remarks.window_eV(thermal)
    first = float(seen.found.energy_eV[0])
    for channel, bottom in certified.above:
        if channel.valley != seen.found.valley_kind[0] and bottom - first < window:
            note(channel.valley, lowest_energy(certified.space, channel.operator_of(certified.space.mesh)))
    remedy = "give their masses under [materials.NAME]"
    if wire.problem.orientation is None:
        remedy = "give an [orientation]"
    least = float(seen.given_eV.min())
    bounds = {kind: (energy + least, remedy) for kind, energy in wire.unsolved}
    for group in wire.leaking:
        edge = min(wire.edges_eV(group).values()) + least
        bounds.setdefault(group.valley, (edge, "draw a layer in place of a material outside: it would not hold them"))
    return material_remarks.on_valleys(lowest, bounds, thermal)


def _on_places(seen: Outcome) -> list[str]:
    """Sentences on what the list leaves out, and on states that live elsewhere than the lowest edge."""
    found, certified = seen.found, seen.certified
    said = []
    last = found.energy_eV[-1] + found.bar_eV[-1]
    beyond = sum(
        int(np.sum(s.energy_eV[n:] - s.bar_eV[n:] <= last))
        for s, n in zip(certified.solved, certified.listed, strict=True)
    )
    if beyond:
        said.append(
            f"The last listed level has {beyond} more state{'s' if beyond > 1 else ''} that the list leaves out."
        )
    inside = _inside_lowest(seen)
    elsewhere = np.flatnonzero(inside[1] < 0.5)
    if len(elsewhere):
        names = " and ".join(inside[0])
        said.append(f"Subband {int(elsewhere[0]) + 1} has most of its probability outside {names}.")
    return said


def _inside_lowest(seen: Outcome) -> tuple[list[str], Array]:
    """Names of the regions whose band edge is the lowest, and what each listed state has in them."""
    edges = {name: seen.edge_eV(name) for name, r in seen.regions.items() if r.carriers and name in seen.found.shares}
    names = [name for name, edge in edges.items() if edge < min(edges.values()) + 1e-9]
    return names, np.sum([seen.found.shares[name] for name in names], axis=0)


def _on_surroundings(seen: Outcome) -> list[Note]:
    """Lattices, surfaces, permittivities and charge."""
    place, kelvin = seen.places[0], seen.wire.problem.lattice_temperature_K
    endless: Mapping[str, float] = {n: v for n, v in seen.borders.free.items() if n != "outside"}
    borders = Borders(seen.borders.between, endless, seen.borders.areas_nm2)
    spacing, radius = seen.spacing_eV, float(np.sqrt(borders.areas_nm2[place] / np.pi))
    admitted = sorted((n for n, r in seen.regions.items() if r.carriers), key=seen.edge_eV)
    return [
        *material_remarks.on_lattices(borders, seen.materials, place, seen.groups[0].valley, kelvin),
        *material_remarks.on_surfaces(borders, seen.materials, admitted),
        *charge_remarks.on_image_charges(seen.rings, radius, spacing, seen.accuracy_eV),
        *(
            charge_remarks.on_doping(seen.wire.problem.section)
            if seen.wire.problem.charged
            else charge_remarks.on_charge(seen.line_density_per_nm, seen.permittivity, spacing, seen.fermi_level_at)
        ),
    ]
