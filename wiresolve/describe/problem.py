"""The whole problem: one frozen, hashable value that says everything a run depends on."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from wiresolve.describe import checks, crystal, plain
from wiresolve.describe.materials import GIVEN_SCALE, Material, look_up, table_names, unknown
from wiresolve.describe.potential import Potential
from wiresolve.describe.section import VOID, Section
from wiresolve.errors import InputError
from wiresolve.units import format_quantity

__all__ = ["Accuracy", "Carriers", "Orientation", "Potential", "Problem"]

MOST_SUBBANDS = 500
MOST_TEMPERATURES = 20
FINEST_ENERGY_eV, COARSEST_ENERGY_eV = 1e-9, 1.0
NO_HOLES = "holes cannot be solved yet: their bands mix, and one mass per material would give wrong subbands"


@dataclass(frozen=True)
class Carriers:
    """Which carriers, at which temperatures in K (one or several), and their Fermi level from the energy zero."""

    kind: str = "electrons"
    temperature_K: tuple[float, ...] = field(kw_only=True)
    fermi_level_eV: float | None = None

    def __post_init__(self) -> None:
        if self.kind == "holes":
            raise InputError("kind", NO_HOLES, remedy='write kind = "electrons"')
        checks.choice("kind", self.kind, ("electrons",))
        given: Any = self.temperature_K
        row = tuple(given) if isinstance(given, Sequence) and not isinstance(given, str) else (given,)
        if not 1 <= len(row) <= MOST_TEMPERATURES:
            raise InputError("temperature", f"must be one to {MOST_TEMPERATURES} temperatures", f"{len(row)} of them")
        kelvin = tuple(checks.in_range("temperature", t, 0, 2000, "K") for t in row)
        if len(set(kelvin)) != len(kelvin):
            raise InputError("temperature", "the same temperature stands twice", list(kelvin))
        object.__setattr__(self, "temperature_K", kelvin)
        if self.fermi_level_eV is not None:
            level = checks.in_range("fermi_level", self.fermi_level_eV, -100, 100, "eV")
            object.__setattr__(self, "fermi_level_eV", level)


@dataclass(frozen=True)
class Accuracy:
    """How many of the lowest subbands are wanted, and the error in eV that each energy may have."""

    subbands: int = 10
    energy_eV: float = 1e-4

    def __post_init__(self) -> None:
        object.__setattr__(self, "subbands", checks.whole("subbands", self.subbands, 1, MOST_SUBBANDS))
        energy = checks.in_range("energy", self.energy_eV, FINEST_ENERGY_eV, COARSEST_ENERGY_eV, "eV")
        object.__setattr__(self, "energy_eV", energy)


@dataclass(frozen=True)
class Orientation:
    """Crystal directions along the wire (`axis`, z) and along y (`up`), at right angles; x is up x axis."""

    axis: crystal.Direction
    up: crystal.Direction

    def __post_init__(self) -> None:
        object.__setattr__(self, "axis", crystal.direction("axis", self.axis))
        object.__setattr__(self, "up", crystal.direction("up", self.up))
        crystal.orthogonal(self.axis, self.up)


@dataclass(frozen=True)
class Problem:
    """A wire and what is asked of it. `materials` are the user's own; others come from the table by their name.

    Raises `InputError` where a material is unknown, where carriers may be in a material without a mass, or where the
    edges of the materials that admit carriers stand on no common scale.
    """

    title: str
    section: Section
    carriers: Carriers
    accuracy: Accuracy = Accuracy()
    materials: tuple[Material, ...] = ()
    orientation: Orientation | None = None
    potential: Potential | None = None

    def __post_init__(self) -> None:
        checks.text("title", self.title)
        wanted = {"section": Section, "carriers": Carriers, "accuracy": Accuracy}
        for name, kind in wanted.items():
            if not isinstance(getattr(self, name), kind):
                raise InputError(name, f"must be a {kind.__name__}", getattr(self, name))
        own = tuple(
            replace(m, edge_scale=None if m.conduction_edge_eV is None else GIVEN_SCALE) for m in self.materials
        )
        object.__setattr__(self, "materials", own)
        names = [m.name for m in own]
        for name in names:
            if names.count(name) > 1 or name == VOID:
                raise InputError("materials", "must have names of their own", name)
        self.resolved_materials()

    @property
    def lattice_temperature_K(self) -> float:
        """The section's, or else the first temperature of the carriers."""
        given = self.section.lattice_temperature_K
        return self.carriers.temperature_K[0] if given is None else given

    def resolved_materials(self) -> dict[str, Material]:
        """All materials used, by name, without the void; those that admit carriers have an edge on a common scale.

        A single material that admits carriers needs no edge: it is 0 then.
        """
        own = {m.name: m for m in self.materials}
        section, kelvin = self.section, self.lattice_temperature_K
        used: dict[str, str] = {section.material: "section.material"}
        used |= {n: f"section.layers[{k}].material" for k, n in _fresh((p.material for p in section.layers), used)}
        used |= {n: f"section.patches[{k}].material" for k, n in _fresh((p.material for p in section.patches), used)}
        if section.outside is not None:
            used.setdefault(section.outside, "section.outside")
        found: dict[str, Material] = {}
        for name, where in used.items():
            if name == VOID:
                continue
            try:
                found[name] = own[name] if name in own else look_up(name, kelvin)
            except InputError as error:
                if error.field == "lattice_temperature":
                    raise error.under("section") from None
                if own and name not in table_names() and error.rule.endswith("known material"):
                    error = unknown(name, tuple(own))
                raise InputError(where, error.rule, error.given, error.remedy) from None
        admitted = list(dict.fromkeys(p.material for p in section.visible() if p.carriers))
        if section.outside is not None and section.outside not in admitted:
            admitted.append(section.outside)
        for name in admitted:
            if not found[name].inverse_mass:
                rule = "admits carriers, but its material has no mass"
                remedy = 'give it an electron_mass, or write carriers = "excluded" there'
                raise InputError(used[name].rsplit(".", 1)[0], rule, name, remedy)
        if len(admitted) == 1:
            only = found[admitted[0]]
            if only.conduction_edge_eV is None:
                found[only.name] = replace(only, conduction_edge_eV=0.0)
        else:
            _common_scale([found[name] for name in admitted])
        return found

    def energy_zero(self) -> tuple[str, float | None]:
        """What energies are counted from, and its value on the scale that the materials share (None: no scale)."""
        materials, section = self.resolved_materials(), self.section
        # From the core outwards, then the patches: of equally low edges the first is named.
        painted = sorted(section.visible(), key=lambda p: (p.name.startswith("patch"), p.name != "core"))
        edges = [(p.name, p.material, p.offset_eV) for p in painted if p.carriers]
        if section.outside is not None:
            edges.append(("outside", section.outside, 0.0))

        def height(edge: tuple[str, str, float]) -> float:
            return (materials[edge[1]].conduction_edge_eV or 0.0) + edge[2]

        lowest = min(edges, key=height)
        place, name, offset = lowest
        shifted = f", shifted by {offset:g} eV" if offset else ""
        scale = materials[name].edge_scale
        return f"conduction edge of {name} ({place}){shifted}", None if scale is None else height(lowest)

    def plain(self) -> dict[str, Any]:
        """The problem in the words of the wire file, defaults filled in, quantities as exact texts."""
        found: dict[str, Any] = {"title": self.title}
        found["section"] = plain.of_section(self.section, self.lattice_temperature_K)
        if self.orientation is not None:
            found["orientation"] = {"axis": list(self.orientation.axis), "up": list(self.orientation.up)}
        if self.materials:
            found["materials"] = {m.name: plain.of_material(m) for m in self.materials}
        if self.potential is not None and (given := plain.of_potential(self.potential)):
            found["potential"] = given
        carriers, accuracy = self.carriers, self.accuracy
        kelvin = [format_quantity(t, "temperature") for t in carriers.temperature_K]
        found["carriers"] = {"kind": carriers.kind, "temperature": kelvin}
        if carriers.fermi_level_eV is not None:
            found["carriers"]["fermi_level"] = format_quantity(carriers.fermi_level_eV, "energy")
        found["accuracy"] = {"subbands": accuracy.subbands, "energy": format_quantity(accuracy.energy_eV, "energy")}
        return found

    @property
    def digest(self) -> str:
        """SHA-256 (hexadecimal) of the resolved input and of the table's values that it uses."""
        own = {m.name for m in self.materials}
        table = {
            name: [[v.quantity, v.value] for v in material.values]
            for name, material in self.resolved_materials().items()
            if name not in own
        }
        content: dict[str, Any] = {"input": self.plain(), "table": table}
        if self.potential is not None and self.potential.function is not None:
            content["function"] = self.potential.function_digest
        return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()


def _fresh(names: Any, known: dict[str, str]) -> list[tuple[int, str]]:
    """Names, numbered from 1, that are not known yet; each once."""
    first: dict[str, int] = {}
    for k, name in enumerate(names, 1):
        if name not in known:
            first.setdefault(name, k)
    return [(k, name) for name, k in first.items()]


def _common_scale(materials: list[Material]) -> None:
    """InputError where the conduction edges of these materials cannot be compared."""
    for material in materials:
        if material.conduction_edge_eV is None:
            others = ", ".join(m.name for m in materials if m is not material)
            rule = f"is missing: {material.name} and {others} admit carriers, so their edges must stand on one scale"
            remedy = "give a conduction_edge to each of them under [materials.NAME]"
            raise InputError(f"materials.{material.name}.conduction_edge", rule, remedy=remedy)
    scales = {m.edge_scale: m.name for m in materials}
    if len(scales) > 1:
        (one, a), (two, b), *_ = scales.items()
        rule = f"no common offset scale: the edge of {a} stands on the scale '{one}', that of {b} on '{two}'"
        remedy = "describe all of them under [materials.NAME], each with a conduction_edge"
        raise InputError("section", rule, remedy=remedy)
