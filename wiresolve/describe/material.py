"""A material as what it is to an electron: valleys of the conduction band, an edge, and cited values."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from wiresolve.describe import checks, crystal
from wiresolve.describe.valley import (
    ANY_VALLEY,
    HEAVIEST,
    LIGHTEST,
    ZONE_CENTRE,
    InverseMass,
    Valley,
    checked_nonparabolicity,
    checked_tensor,
    in_order,
    valley_rows,
)
from wiresolve.errors import InputError

__all__ = [
    "ANY_VALLEY",
    "GIVEN",
    "GIVEN_SCALE",
    "LIMITS",
    "VACUUM_LEVEL",
    "WIRE_FILE",
    "ZONE_CENTRE",
    "InverseMass",
    "Material",
    "MaterialValue",
    "Note",
    "Valley",
    "in_order",
]

MOST_VALLEYS = 20
GIVEN_SCALE = "wire file"
"""Name of the scale on which a user's own conduction edges stand."""
VACUUM_LEVEL = "vacuum level"
"""Name of the scale on which an edge lies the electron affinity below zero."""
WIRE_FILE = "the wire file"
GIVEN = "given with the wire"
"""The source of a value that the wire file gives, or Python in its place."""
CRYSTALS = ("zincblende", "diamond", "wurtzite", "amorphous")

LIMITS: dict[str, tuple[float, float, str]] = {
    "conduction_edge": (-100, 100, "eV"),
    "gap": (0.01, 50, "eV"),
    "permittivity": (1, 1e5, ""),
    "electron_affinity": (-10, 20, "eV"),
    "lattice_constant": (0.1, 10, "nm"),
    "lattice_constant_c": (0.1, 10, "nm"),
}
"""Lowest and highest value and unit of what a user may give of a material besides its valleys."""

Change = float | str | None | InverseMass | tuple[Valley, ...]
Note = tuple[str, str, str]
"""A warning about a material: code, text, remedy."""


@dataclass(frozen=True)
class MaterialValue:
    """One number that a result depends on.

    `low` and `high` are what the literature spans (the value itself where nothing else is known), `provenance` is
    "checked" (compared with a text that prints it), "conflict" (texts differ), "memory" (no text at hand), "derived"
    (computed from other values) or "given" (by the user); `valid` says where the value may be used, "" where unsaid.
    """

    name: str
    quantity: str
    value: float
    unit: str
    temperature_K: float | None
    source: str
    checked: bool
    low: float | None = None
    high: float | None = None
    provenance: str = "given"
    valid: str = ""

    @property
    def standing(self) -> str:
        """The provenance in a reader's words."""
        return {"conflict": "sources differ", "memory": "from memory", "derived": "computed"}.get(
            self.provenance, self.provenance
        )


@dataclass(frozen=True)
class Material:
    """A material at one lattice temperature.

    `valleys` are those of the conduction band whose masses are known, the lowest first (at the conduction edge), () for
    an insulator that keeps carriers out. `edges` holds (scale, conduction edge in eV) for every scale on which the edge
    is known, the best first; `conduction_edge_eV` is the one on `edge_scale`, and edges on different scales cannot be
    compared. `unsolved_valleys` names valleys (with their height in eV above the edge, negative where they lie below
    it) whose masses are not known. `notes` are warnings (code, text, remedy) about its use.
    """

    name: str
    valleys: tuple[Valley, ...] = ()
    conduction_edge_eV: float | None = None
    edge_scale: str | None = None
    edges: tuple[tuple[str, float], ...] = ()
    permittivity: float | None = None
    electron_affinity_eV: float | None = None
    gap_eV: float | None = None
    crystal: str | None = None
    lattice_constant_nm: float | None = None
    lattice_constant_c_nm: float | None = None
    insulator: bool = False
    source: str = ""
    values: tuple[MaterialValue, ...] = ()
    unsolved_valleys: tuple[tuple[str, float], ...] = ()
    notes: tuple[Note, ...] = ()
    given_in: str = WIRE_FILE
    extends: str | None = None
    changes: tuple[tuple[str, Change], ...] = ()

    @property
    def valley(self) -> str:
        """Name of the lowest valley."""
        return self.valleys[0].name if self.valleys else ZONE_CENTRE

    @property
    def inverse_mass(self) -> InverseMass:
        """Inverse mass of the lowest valley in 1/m0 (wire frame); () where it needs an orientation or there is none."""
        return self.valleys[0].tensor if self.valleys else ()

    @property
    def valley_degeneracy(self) -> int:
        """For how many valleys the lowest one stands, spin apart."""
        if not self.valleys:
            return 1
        lowest = self.valleys[0]
        if lowest.axis is None:
            return lowest.degeneracy or 1
        return sum(count for _, count in crystal.equivalents(lowest.axis, lowest.zone_boundary, self.crystal))

    @property
    def electron_mass(self) -> float | None:
        """The mass in m0 of the lowest valley where it is the same in all directions."""
        if not self.inverse_mass:
            return None
        if not self.valleys[0].inverse_mass:
            return self.valleys[0].longitudinal_mass
        first = self.inverse_mass[0][0]
        even = all(
            v == (first if i == j else 0.0) for i, row in enumerate(self.inverse_mass) for j, v in enumerate(row)
        )
        return 1 / first if even else None

    @property
    def c_over_a(self) -> float | None:
        """Ratio of the lattice constants of a hexagonal crystal, None where they are not known."""
        if self.lattice_constant_nm is None or self.lattice_constant_c_nm is None:
            return None
        return self.lattice_constant_c_nm / self.lattice_constant_nm

    def valley_named(self, name: str) -> Valley | None:
        """The valley of this name, or the one that continues any valley; None where there is none."""
        found = [v for v in self.valleys if v.name == name] or [v for v in self.valleys if v.name == ANY_VALLEY]
        return found[0] if found else None

    def on_scale(self, scale: str) -> Material:
        """The same material with its conduction edge on one of its scales."""
        return self if scale == self.edge_scale else self.at_edge(dict(self.edges)[scale], scale)

    def as_given(self) -> Material:
        """A user's material with its conduction edge on the scale of the wire file."""
        if self.extends is not None:
            return self
        edges = [] if self.conduction_edge_eV is None else [(GIVEN_SCALE, self.conduction_edge_eV)]
        edges += [] if self.electron_affinity_eV is None else [(VACUUM_LEVEL, 0.0 - self.electron_affinity_eV)]
        return replace(self, edge_scale=None if self.conduction_edge_eV is None else GIVEN_SCALE, edges=tuple(edges))

    def at_edge(self, conduction_edge_eV: float, scale: str | None) -> Material:
        """The same material with another conduction edge, which its listed value follows; no scale: it stands alone."""
        at, values = conduction_edge_eV, {v.quantity: v for v in self.values}
        if scale is not None:
            source = f"on the scale '{scale}'"
            edge = MaterialValue(self.name, "conduction_edge", at, "eV", None, source, False, at, at, "derived")
            values["conduction_edge"] = edge
        return replace(self, conduction_edge_eV=at, edge_scale=scale, values=tuple(values.values()))

    @classmethod
    def given(
        cls,
        name: str,
        *,
        electron_mass: float | None = None,
        inverse_mass: Sequence[Sequence[float]] | None = None,
        valleys: Sequence[Valley] | None = None,
        nonparabolicity_per_eV: float | None = None,
        conduction_edge_eV: float | None = None,
        permittivity: float | None = None,
        electron_affinity_eV: float | None = None,
        valley_degeneracy: int | None = None,
        gap_eV: float | None = None,
        crystal: str | None = None,
        lattice_constant_nm: float | None = None,
        lattice_constant_c_nm: float | None = None,
        source: str = "",
        given_in: str = WIRE_FILE,
    ) -> Material:
        """A user's own material.

        Its mass is one number in m0, or a 3 x 3 inverse mass in 1/m0 (wire frame), or `valleys`, whose heights count
        from `conduction_edge_eV`. `given_in` says where it was described.

        Raises `InputError` where a value is no number, out of range, or the tensor not symmetric positive definite.
        """
        checks.text("name", name, 60)
        if crystal is not None:
            checks.choice("crystal", crystal, CRYSTALS)
        found = _described(electron_mass, inverse_mass, valleys, nonparabolicity_per_eV, valley_degeneracy)
        if not found and permittivity is None:
            raise InputError(
                "electron_mass", "is missing", remedy="give electron_mass = 0.067 or an inverse_mass in 1/m0"
            )
        numbers = {
            key: checks.optional(key, value, *LIMITS[key])
            for key, value in (
                ("conduction_edge", conduction_edge_eV),
                ("gap", gap_eV),
                ("permittivity", permittivity),
                ("electron_affinity", electron_affinity_eV),
                ("lattice_constant", lattice_constant_nm),
                ("lattice_constant_c", lattice_constant_c_nm),
            )
        }
        _check_texts(source, given_in)
        edge, lowest = numbers["conduction_edge"], min((v.height_eV for v in found), default=0.0)
        numbers["conduction_edge"], found = None if edge is None else edge + lowest, in_order(found)
        rows = [row for valley in found for row in valley_rows(valley, alone=valleys is None)]
        rows += [(key, value, LIMITS[key][2]) for key, value in numbers.items() if value is not None]
        cited = given_text(given_in) + (f": {source}" if source else "")
        return cls(
            name=name,
            valleys=found,
            conduction_edge_eV=numbers["conduction_edge"],
            permittivity=numbers["permittivity"],
            electron_affinity_eV=numbers["electron_affinity"],
            gap_eV=numbers["gap"],
            crystal=crystal,
            lattice_constant_nm=numbers["lattice_constant"],
            lattice_constant_c_nm=numbers["lattice_constant_c"],
            insulator=not found or crystal == "amorphous",
            source=source,
            values=tuple(
                MaterialValue(name, quantity, value, unit, None, cited, False, value, value)
                for quantity, value, unit in rows
            ),
            given_in=given_in,
        ).as_given()

    @classmethod
    def extending(
        cls,
        name: str,
        base: str,
        *,
        electron_mass: float | None = None,
        inverse_mass: Sequence[Sequence[float]] | None = None,
        valleys: Sequence[Valley] | None = None,
        nonparabolicity_per_eV: float | None = None,
        conduction_edge_eV: float | None = None,
        permittivity: float | None = None,
        electron_affinity_eV: float | None = None,
        lattice_constant_nm: float | None = None,
        lattice_constant_c_nm: float | None = None,
        crystal: str | None = None,
        source: str = "",
        given_in: str = WIRE_FILE,
    ) -> Material:
        """A material of the table (`base`) with some of its values replaced.

        A mass or a nonparabolicity replaces that of the zone-centre valley; `valleys` replaces all valleys, with
        heights from the table's conduction edge or the given one. Another `crystal` needs `valleys`: the table's belong
        to its own.

        Raises `InputError` where a value is no number or out of range; an unknown `base` is found by the problem.
        """
        checks.text("name", name, 60)
        checks.text("extends", base, 60)
        described = _described(electron_mass, inverse_mass, valleys, nonparabolicity_per_eV, None, alone=False)
        changes: dict[str, Change] = {}
        if crystal is not None:
            changes["crystal"] = checks.choice("crystal", crystal, CRYSTALS[:-1])
            if valleys is None:
                rule = "cannot be replaced alone: the table's valleys belong to its own crystal"
                raise InputError("crystal", rule, crystal, "give valleys = [...] too")
        if valleys is not None:
            changes["valleys"] = described
        elif electron_mass is not None:
            changes["electron_mass"] = described[0].longitudinal_mass
        elif inverse_mass is not None:
            changes["inverse_mass"] = described[0].inverse_mass
        if valleys is None and nonparabolicity_per_eV is not None:
            changes["nonparabolicity"] = checked_nonparabolicity(nonparabolicity_per_eV)
        for key, value in (
            ("conduction_edge", conduction_edge_eV),
            ("permittivity", permittivity),
            ("electron_affinity", electron_affinity_eV),
            ("lattice_constant", lattice_constant_nm),
            ("lattice_constant_c", lattice_constant_c_nm),
        ):
            if value is not None:
                changes[key] = checks.in_range(key, value, *LIMITS[key])
        _check_texts(source, given_in)
        return cls(name, source=source, given_in=given_in, extends=base, changes=tuple(changes.items()))


def given_text(given_in: str) -> str:
    """Where a value was given, in words."""
    return GIVEN if given_in == WIRE_FILE else f"given in {given_in}"


def _check_texts(source: str, given_in: str) -> None:
    if source != "":
        checks.text("source", source, 500)
    checks.text("given_in", given_in, 300)


def _described(
    electron_mass: float | None,
    inverse_mass: Sequence[Sequence[float]] | None,
    valleys: Sequence[Valley] | None,
    nonparabolicity_per_eV: float | None,
    degeneracy: int | None,
    alone: bool = True,
) -> tuple[Valley, ...]:
    """The valleys that a user's keys stand for; `alone` where there are no others to which a key could belong."""
    ways = {"electron_mass": electron_mass, "inverse_mass": inverse_mass, "valleys": valleys}
    used = [name for name, value in ways.items() if value is not None]
    if len(used) > 1:
        raise InputError(used[0], f"is given beside {used[1]}", remedy="keep one of the two")
    checks.whole("valley_degeneracy", 1 if degeneracy is None else degeneracy, 1, 48)
    if valleys is not None:
        for field, value in (("valley_degeneracy", degeneracy), ("nonparabolicity", nonparabolicity_per_eV)):
            if value is not None:
                remedy = "take it out" if field == "valley_degeneracy" else "give it to each valley"
                raise InputError(field, "is given beside valleys", value, remedy)
        return _distinct(valleys)
    alpha = checked_nonparabolicity(nonparabolicity_per_eV)
    if electron_mass is not None:
        mass = checks.in_range("electron_mass", electron_mass, LIGHTEST, HEAVIEST, "m0")
        only = Valley(ZONE_CENTRE, 0.0, mass, mass, degeneracy=degeneracy, nonparabolicity_per_eV=alpha)
    elif inverse_mass is not None:
        tensor = checked_tensor(inverse_mass)
        only = Valley(ZONE_CENTRE, inverse_mass=tensor, degeneracy=degeneracy, nonparabolicity_per_eV=alpha)
    else:
        for field, value in (("nonparabolicity", alpha), ("valley_degeneracy", degeneracy)):
            if alone and value is not None:
                raise InputError(field, "is given without a mass", value, "give an electron_mass too")
        return ()
    return (only,)


def _distinct(valleys: Sequence[Valley]) -> tuple[Valley, ...]:
    if isinstance(valleys, str) or not isinstance(valleys, Sequence) or not all(isinstance(v, Valley) for v in valleys):
        raise InputError("valleys", "must be a list of valleys", valleys)
    if not 1 <= len(valleys) <= MOST_VALLEYS:
        raise InputError("valleys", f"must be one to {MOST_VALLEYS} valleys", f"{len(valleys)} of them")
    names = [v.name for v in valleys]
    for name in names:
        if names.count(name) > 1:
            raise InputError("valleys", "must have names of their own", name)
    return tuple(valleys)
