"""Gates, charged surfaces, and what surrounds the section: all that holds or bends its potential from outside."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from wiresolve.describe import checks
from wiresolve.describe.section import ADMITTED, EXCLUDED, VOID
from wiresolve.errors import InputError

HIGHEST_V = 1000.0
HIGHEST_WORK_FUNCTION_eV = 10.0
LARGEST_PINNING_eV = 10.0
MOST_CHARGE_PER_NM2 = 10.0
"""1e15 cm^-2: a charge on every atom of a surface."""
THICKEST_SLAB_nm = 1e6
MOST_GATES, MOST_SURFACES, MOST_SLABS = 20, 50, 20
RESERVED = ("pinned", "source", "drain")
"""Names that stand for something else wherever gates are named."""


@dataclass(frozen=True)
class ArcPart:
    """The part of a round rim from one direction to another, counter-clockwise; angles in degrees from +x.

    A direction is that of the line from the origin. The part may pass +x: from 330 to 30 are 60 degrees.
    """

    from_deg: float
    to_deg: float

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        set_(self, "from_deg", checks.in_range("from", self.from_deg, -360, 360, "deg"))
        set_(self, "to_deg", checks.in_range("to", self.to_deg, -360, 360, "deg"))
        if (self.to_deg - self.from_deg) % 360 == 0:
            raise InputError("to", "is the direction at which the part begins", f"{self.to_deg:g} deg", 'or use "rim"')

    @property
    def sweep_deg(self) -> float:
        """How far the part goes around, in (0, 360)."""
        return (self.to_deg - self.from_deg) % 360


Touch = str | ArcPart
"""The name of an edge, or a part of a round rim."""


def _touches(given: Any, needed: bool) -> tuple[Touch, ...]:
    row = (given,) if isinstance(given, str | ArcPart) else tuple(given) if isinstance(given, Sequence) else None
    if row is None or not all(isinstance(entry, str | ArcPart) for entry in row):
        raise InputError("touches", "must be the name of an edge, or a list of names", given, 'write e.g. "rim"')
    if not row and needed:
        raise InputError("touches", "is missing", remedy='write e.g. touches = "rim"')
    for entry in row:
        if isinstance(entry, str):
            checks.text("touches", entry, 80)
    if len(set(row)) < len(row):
        raise InputError("touches", "names an edge twice", [e for e in row if isinstance(e, str)] or None)
    return row


@dataclass(frozen=True)
class Insulator:
    """What lies between a gate and the section. Carriers stay out of it unless `carriers` is "admitted"."""

    material: str
    thickness_nm: float
    carriers: str = EXCLUDED

    def __post_init__(self) -> None:
        _no_void("material", self.material)
        thickness = checks.length("thickness", self.thickness_nm, checks.THINNEST_nm)
        object.__setattr__(self, "thickness_nm", thickness)
        checks.choice("carriers", self.carriers, (ADMITTED, EXCLUDED))


def _no_void(field: str, material: object) -> str:
    name = checks.text(field, material, 60)
    if name == VOID:
        raise InputError(field, "must be a material: a field goes through empty space too", VOID, 'write "air"')
    return name


@dataclass(frozen=True)
class Gate:
    """A metal at a voltage against the source, without a thickness of its own.

    It lies on the edges that it `touches`, or around its insulator there; without any it ends a stack of the
    surroundings, which names it. Exactly one of `lineup_voltage_V` (the voltage at which, with no charge anywhere, the
    section's energy zero lines up with the source's Fermi level) and `work_function_eV` is given.
    """

    name: str
    touches: tuple[Touch, ...] = ()
    voltage_V: float = 0.0
    lineup_voltage_V: float | None = None
    work_function_eV: float | None = None
    insulator: Insulator | None = None

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        checks.text("name", self.name, 60)
        if self.name in RESERVED:
            raise InputError("name", "stands for something else in results", self.name, "choose another name")
        set_(self, "touches", _touches(self.touches, needed=False))
        set_(self, "voltage_V", checks.in_range("voltage", self.voltage_V, -HIGHEST_V, HIGHEST_V, "V"))
        lineup = checks.optional("lineup_voltage", self.lineup_voltage_V, -HIGHEST_V, HIGHEST_V, "V")
        set_(self, "lineup_voltage_V", lineup)
        work = checks.optional("work_function", self.work_function_eV, 0, HIGHEST_WORK_FUNCTION_eV, "eV")
        set_(self, "work_function_eV", work)
        if lineup is None and work is None:
            remedy = 'write lineup_voltage = "0 V", or the metal\'s work_function = "4.6 eV"'
            raise InputError("lineup_voltage", "is missing: it says where the gate's scale begins", remedy=remedy)
        if lineup is not None and work is not None:
            raise InputError("work_function", "is given beside a lineup_voltage", remedy="take one of the two out")
        if self.insulator is not None and not isinstance(self.insulator, Insulator):
            raise InputError("insulator", "must be an Insulator", self.insulator)
        if self.insulator is not None and not self.touches:
            rule = "belongs to a gate that touches the section"
            remedy = "write what the gate touches, or list the insulator in [surroundings]"
            raise InputError("insulator", rule, remedy=remedy)


@dataclass(frozen=True)
class Surface:
    """Edges where the potential is pinned, or which carry a charge.

    `pinned_at_eV` is the band edge there, counted from the Fermi level; `charge_per_nm2` is in units of e, of either
    sign.
    """

    touches: tuple[Touch, ...]
    pinned_at_eV: float | None = None
    charge_per_nm2: float | None = None

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        set_(self, "touches", _touches(self.touches, needed=True))
        far, most = LARGEST_PINNING_eV, MOST_CHARGE_PER_NM2
        set_(self, "pinned_at_eV", checks.optional("pinned_at", self.pinned_at_eV, -far, far, "eV"))
        charge = checks.optional("charge_density", self.charge_per_nm2, -most, most, "nm^-2")
        set_(self, "charge_per_nm2", charge)
        if (self.pinned_at_eV is None) == (charge is None):
            rule = "is given beside pinned_at" if charge is not None else "is missing, and pinned_at too"
            remedy = 'give one of pinned_at = "-0.1 eV" and charge_density = "1e12 cm^-2"'
            raise InputError("charge_density", rule, remedy=remedy)


@dataclass(frozen=True)
class Slab:
    """A flat layer below or above the section, as wide as the surroundings."""

    material: str
    thickness_nm: float

    def __post_init__(self) -> None:
        _no_void("material", self.material)
        thickness = checks.in_range("thickness", self.thickness_nm, checks.THINNEST_nm, THICKEST_SLAB_nm, "nm")
        object.__setattr__(self, "thickness_nm", thickness)


@dataclass(frozen=True)
class Surroundings:
    """Flat layers below and above the section, from it outwards, what fills all other room, and gates at the ends."""

    below: tuple[Slab, ...] = ()
    above: tuple[Slab, ...] = ()
    beside: str | None = None
    below_gate: str | None = None
    above_gate: str | None = None

    def __post_init__(self) -> None:
        for side in ("below", "above"):
            slabs, gate = getattr(self, side), getattr(self, f"{side}_gate")
            if not isinstance(slabs, Sequence) or not all(isinstance(slab, Slab) for slab in slabs):
                raise InputError(side, "must be a list of Slab", slabs)
            object.__setattr__(self, side, tuple(slabs))
            if len(slabs) > MOST_SLABS:
                raise InputError(side, f"can have at most {MOST_SLABS} layers", f"{len(slabs)} layers")
            if gate is not None:
                checks.text(side, gate, 60)
                if not slabs:
                    edge = "bottom" if side == "below" else "top"
                    rule = "holds a gate with nothing between it and the section"
                    remedy = f'list a layer before it, or let the gate touch an edge: touches = "{edge}"'
                    raise InputError(side, rule, gate, remedy)
        if self.below_gate is not None and self.below_gate == self.above_gate:
            raise InputError(
                "above", "ends in the gate that is below too", self.above_gate, "give it a name of its own"
            )
        if self.beside is None:
            raise InputError("beside", "is missing: what fills the room beside the section?", remedy='write "air"')
        _no_void("beside", self.beside)

    @property
    def gate_names(self) -> tuple[str, ...]:
        """Names of the gates at the ends, that below first."""
        return tuple(name for name in (self.below_gate, self.above_gate) if name is not None)
