"""A material of the table with values that a user replaced."""

from __future__ import annotations

import contextlib
from dataclasses import dataclass, replace
from typing import Any

from wiresolve.describe.material import (
    ANY_VALLEY,
    GIVEN_SCALE,
    LIMITS,
    VACUUM_LEVEL,
    ZONE_CENTRE,
    Material,
    MaterialValue,
    Valley,
    given_text,
    in_order,
)
from wiresolve.describe.materials import VALLEY_PARTS, known, look_up
from wiresolve.describe.valley import valley_rows
from wiresolve.errors import InputError


def resolved(material: Material, lattice_temperature_K: float) -> Material:
    """A user's material with the table's values that it takes over, at this lattice temperature.

    Raises
    ------
    InputError
        The table has no such material, or it has no valley whose mass could be replaced.
    """
    if material.extends is None:
        return _told_apart(material)
    try:
        base = look_up(material.extends, lattice_temperature_K)
    except InputError as error:
        if error.field == "lattice_temperature":
            raise
        raise InputError(f"materials.{material.name}.extends", error.rule, error.given, error.remedy) from None
    found = _Changed(replace(base, name=material.name, source=material.source), material)
    for key, value in material.changes:
        found = found.with_(key, value)
    values = tuple(replace(v, name=material.name) for v in found.made.values)
    return replace(found.made, values=values, given_in=material.given_in)


def _told_apart(material: Material) -> Material:
    """A user's material whose given values say so where it has the name of one of the table."""
    with contextlib.suppress(InputError):  # what looks like an alloy whose fractions are wrong
        if known(material.name):
            plain = given_text(material.given_in)
            told = f"{plain}, in place of the table's {material.name}"
            own = (v.provenance == "given" and v.source.startswith(plain) for v in material.values)
            values = zip(material.values, own, strict=True)
            return replace(
                material,
                values=tuple(
                    replace(v, source=told + v.source.removeprefix(plain)) if mine else v for v, mine in values
                ),
            )
    return material


def _in_crystal(material: Material, crystal: str) -> Material:
    """The material in another crystal: between cubic and hexagonal ones it keeps no lattice constant."""
    made = replace(material, crystal=crystal)
    if (crystal == "wurtzite") == (material.crystal == "wurtzite"):
        return made
    kept = tuple(v for v in made.values if v.quantity not in ("lattice_constant", "lattice_constant_c"))
    return replace(made, lattice_constant_nm=None, lattice_constant_c_nm=None, values=kept)


@dataclass(frozen=True)
class _Changed:
    """A material while its values are replaced one after the other."""

    made: Material
    own: Material

    def with_(self, key: str, value: Any) -> _Changed:
        """The same with one more value replaced."""
        made = self.made
        if key == "valleys":
            return self._valleys(value)
        if key in ("electron_mass", "inverse_mass", "nonparabolicity"):
            return self._mass(key, value)
        if key == "crystal":
            return replace(self, made=_in_crystal(made, value))
        if key == "permittivity":
            made = replace(made, permittivity=value)
        elif key in ("lattice_constant", "lattice_constant_c"):
            made = replace(made, **{f"{key}_nm": value})
        elif key == "electron_affinity":
            kept = [(scale, edge) for scale, edge in made.edges if scale != VACUUM_LEVEL]
            made = replace(made, electron_affinity_eV=value, edges=(*kept, (VACUUM_LEVEL, 0.0 - value)))
            made = made.at_edge(0.0 - value, VACUUM_LEVEL) if made.edge_scale == VACUUM_LEVEL else made
        else:
            vacuum = [(scale, edge) for scale, edge in made.edges if scale == VACUUM_LEVEL]
            made = replace(made, edges=((GIVEN_SCALE, value), *vacuum))
            made = replace(made, conduction_edge_eV=value, edge_scale=GIVEN_SCALE)
        return replace(self, made=self._listed(made, [(key, value, LIMITS[key][2])]))

    def _mass(self, key: str, value: Any) -> _Changed:
        old = next((v for v in self.made.valleys if v.name in (ZONE_CENTRE, ANY_VALLEY)), None)
        if old is None:
            have = ", ".join(v.name for v in self.made.valleys) or "none"
            rule = f"{self.own.extends} has no zone-centre valley whose values could be replaced; its valleys: {have}"
            raise InputError(f"materials.{self.own.name}.{key}", rule, remedy="give valleys = [...] instead")
        if key == "nonparabolicity":
            new = replace(old, nonparabolicity_per_eV=value)
        else:
            masses = {"longitudinal_mass": value, "transverse_mass": value} if key == "electron_mass" else {}
            tensor = {"inverse_mass": value} if key == "inverse_mass" else {}
            blank: dict[str, Any] = {"longitudinal_mass": None, "transverse_mass": None, "axis": None}
            blank |= {"inverse_mass": (), "degeneracy": old.degeneracy or 1}
            new = replace(old, **(blank | masses | tensor))
        valleys = tuple(new if v is old else v for v in self.made.valleys)
        rows = [row for row in valley_rows(new) if ("nonparabolicity" in row[0]) == (key == "nonparabolicity")]
        rows = [row for row in rows if not row[0].endswith("_edge")]
        if old.name == ANY_VALLEY:
            rows = [("tunnelling_mass" if q == "any_mass" else q, *rest) for q, *rest in rows]  # type: ignore[misc]
        gone = {"zone_centre_longitudinal_mass", "zone_centre_transverse_mass", "zone_centre_mass"}
        dropped = gone if key == "inverse_mass" else gone - {"zone_centre_mass"} if key == "electron_mass" else set()
        made = self._listed(replace(self.made, valleys=valleys), rows)
        return replace(self, made=replace(made, values=tuple(v for v in made.values if v.quantity not in dropped)))

    def _valleys(self, valleys: tuple[Valley, ...]) -> _Changed:
        lowest, made = min(v.height_eV for v in valleys), self.made
        edges = tuple((scale, edge + lowest) for scale, edge in made.edges)
        kept = tuple(v for v in made.values if not v.quantity.endswith(VALLEY_PARTS))
        made = replace(made, valleys=in_order(valleys), edges=edges, unsolved_valleys=(), values=kept)
        if made.edge_scale is not None:
            made = made.at_edge(dict(edges)[made.edge_scale], made.edge_scale)
        rows = [row for valley in made.valleys for row in valley_rows(valley)]
        return replace(self, made=self._listed(made, rows))

    def _listed(self, made: Material, rows: list[tuple[str, float, str]]) -> Material:
        """The material with these values in its list, each telling what it replaces."""
        old = {v.quantity: v for v in made.values}
        new: dict[str, MaterialValue] = {}
        for quantity, value, unit in rows:
            source = given_text(self.own.given_in)
            if quantity in old:
                source += f", replaces {old[quantity].value:.6g}"
            source += f": {self.own.source}" if self.own.source else ""
            new[quantity] = MaterialValue(made.name, quantity, value, unit, None, source, False, value, value)
        return replace(made, values=tuple((old | new).values()))
