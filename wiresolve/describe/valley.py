"""Valleys of a conduction band: masses, direction, degeneracy and nonparabolicity."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from wiresolve.describe import checks, crystal
from wiresolve.errors import InputError

InverseMass = tuple[tuple[float, float, float], ...]
"""Three rows of three numbers in 1/m0 in the wire's frame (x, y, axis); empty where no mass is known."""
LIGHTEST, HEAVIEST = 1e-3, 100.0
STEEPEST_per_eV = 1e3
ZONE_CENTRE = "zone centre"
ANY_VALLEY = "any"
"""Name of a valley that continues every valley of its neighbours: an insulator's tunnelling mass."""


@dataclass(frozen=True)
class Valley:
    """One kind of conduction valley, with all its equivalents, whose bottom lies `height_eV` above its material's edge.

    Its masses in m0 are one along `axis` and one across it; without an axis both are equal. `axis` is one of the
    equivalent directions of the crystal. With `zone_boundary` a valley and its opposite are one (X: 3, L: 4; without
    it silicon's Delta: 6). `inverse_mass` (1/m0, in the wire's frame) stands in place of masses and axis; there, and
    where the mass is isotropic, `degeneracy` tells for how many valleys it stands. `nonparabolicity_per_eV` is alpha
    of E (1 + alpha E) = hbar^2 k^2 / 2m, None where it is not known.
    """

    name: str
    height_eV: float = 0.0
    longitudinal_mass: float | None = None
    transverse_mass: float | None = None
    axis: crystal.Direction | None = None
    zone_boundary: bool = False
    inverse_mass: InverseMass = ()
    degeneracy: int | None = None
    nonparabolicity_per_eV: float | None = None

    def __post_init__(self) -> None:
        checks.text("name", self.name, 60)
        if self.name == ANY_VALLEY and self.axis is not None:
            rule = f'a valley named "{ANY_VALLEY}" continues those of its neighbours and has no direction of its own'
            raise InputError("axis", rule, list(self.axis), "take the axis out, or give the valley another name")
        self._set("height_eV", checks.in_range("edge", self.height_eV, -100, 100, "eV"))
        if not isinstance(self.inverse_mass, tuple) or self.inverse_mass:
            if any(value is not None for value in (self.longitudinal_mass, self.transverse_mass, self.axis)):
                raise InputError("inverse_mass", "is given beside masses or an axis", remedy="keep one of the two")
            self._set("inverse_mass", checked_tensor(self.inverse_mass))
        else:
            for field in ("longitudinal_mass", "transverse_mass"):
                if getattr(self, field) is None:
                    raise InputError(field, "is missing", remedy=f"write e.g. {field} = 0.19 (in m0)")
                self._set(field, checks.in_range(field, getattr(self, field), LIGHTEST, HEAVIEST, "m0"))
        if self.axis is not None:
            self._set("axis", crystal.direction("axis", self.axis))
        elif not self.inverse_mass and self.longitudinal_mass != self.transverse_mass:
            remedy = "write e.g. axis = [1, 0, 0], or give two equal masses"
            raise InputError("axis", "is missing: the two masses differ", remedy=remedy)
        if not isinstance(self.zone_boundary, bool):
            raise InputError("zone_boundary", "must be true or false", self.zone_boundary)
        if self.axis is not None and self.degeneracy is not None:
            rule = "is given beside an axis, whose equivalent directions are counted"
            raise InputError("degeneracy", rule, self.degeneracy, "take one of the two out")
        if self.axis is None:
            given = 1 if self.degeneracy is None else self.degeneracy
            self._set("degeneracy", checks.whole("valley_degeneracy", given, 1, 48))
        self._set("nonparabolicity_per_eV", checked_nonparabolicity(self.nonparabolicity_per_eV))

    def _set(self, name: str, value: object) -> None:
        object.__setattr__(self, name, value)

    @classmethod
    def isotropic(
        cls,
        mass: float,
        name: str = ZONE_CENTRE,
        *,
        height_eV: float = 0.0,
        nonparabolicity_per_eV: float | None = None,
    ) -> Valley:
        """A single valley with one mass in m0."""
        return cls(name, height_eV, mass, mass, nonparabolicity_per_eV=nonparabolicity_per_eV)

    @property
    def needs_orientation(self) -> bool:
        """Whether its tensor is known only once the crystal's directions in the wire are."""
        return self.axis is not None and self.longitudinal_mass != self.transverse_mass

    @property
    def tensor(self) -> InverseMass:
        """Inverse mass in 1/m0 in the wire's frame where it needs no orientation, else ()."""
        if self.inverse_mass or self.needs_orientation or self.longitudinal_mass is None:
            return self.inverse_mass
        inverse = 1 / self.longitudinal_mass
        return ((inverse, 0.0, 0.0), (0.0, inverse, 0.0), (0.0, 0.0, inverse))


def in_order(valleys: Sequence[Valley]) -> tuple[Valley, ...]:
    """Valleys with heights from the lowest of them, the lowest first."""
    lowest = min((v.height_eV for v in valleys), default=0.0)
    raised = [replace(v, height_eV=v.height_eV - lowest) for v in valleys] if lowest else valleys
    return tuple(sorted(raised, key=lambda v: v.height_eV))


def valley_rows(valley: Valley, alone: bool = False) -> list[tuple[str, float, str]]:
    """What is known of a valley as rows (quantity, value, unit); the names are plain where it is the only one."""
    prefix = "" if alone else valley.name.replace(" ", "_") + "_"
    rows: list[tuple[str, float, str]] = []
    if valley.inverse_mass:
        axes = ((0, 0, "xx"), (1, 1, "yy"), (2, 2, "zz"), (0, 1, "xy"), (0, 2, "xz"), (1, 2, "yz"))
        rows += [(f"{prefix}inverse_mass_{at}", valley.inverse_mass[i][j], "1/m0") for i, j, at in axes]
    elif valley.axis is None and valley.longitudinal_mass is not None:
        rows.append(("electron_mass" if alone else f"{prefix}mass", valley.longitudinal_mass, "m0"))
    elif valley.longitudinal_mass is not None and valley.transverse_mass is not None:
        rows.append((f"{prefix}longitudinal_mass", valley.longitudinal_mass, "m0"))
        rows.append((f"{prefix}transverse_mass", valley.transverse_mass, "m0"))
    if not alone:
        rows.append((f"{prefix}edge", valley.height_eV, "eV"))
    if valley.nonparabolicity_per_eV is not None:
        rows.append((f"{prefix}nonparabolicity", valley.nonparabolicity_per_eV, "1/eV"))
    return rows


def checked_nonparabolicity(value: object) -> float | None:
    """A nonparabolicity in 1/eV, not negative, or None."""
    return None if value is None else checks.in_range("nonparabolicity", value, 0, STEEPEST_per_eV, "1/eV")


def checked_tensor(rows: object) -> InverseMass:
    """An exactly symmetric inverse mass in 1/m0 from three rows of three numbers.

    Raises `InputError` where it is not symmetric positive definite, or its masses are out of range.
    """
    field, wanted = "inverse_mass", "write three rows of three numbers in 1/m0"
    if not _is_row(rows):
        raise InputError(field, "must be 3 x 3 numbers", rows, wanted)
    entries = []
    for i, row in enumerate(rows):  # type: ignore[var-annotated, arg-type]
        if not _is_row(row):
            raise InputError(field, "must be 3 x 3 numbers", row, wanted)
        entries.append([checks.finite(f"{field}[{i + 1}][{j + 1}]", value) for j, value in enumerate(row)])
    matrix = np.array(entries)
    size = float(np.abs(matrix).max())
    if size > 1e9:
        raise InputError(field, f"must lie below {1 / LIGHTEST:g} 1/m0", size)
    if float(np.abs(matrix - matrix.T).max()) > 1e-9 * size:
        i, j = divmod(int(np.argmax(np.abs(matrix - matrix.T))), 3)
        rule = f"must be symmetric, but its entries {i + 1},{j + 1} and {j + 1},{i + 1} differ"
        raise InputError(field, rule, [float(matrix[i, j]), float(matrix[j, i])])
    matrix = (matrix + matrix.T) / 2
    low, *_, high = np.linalg.eigvalsh(matrix)
    if low <= 0:
        raise InputError(field, "must be positive definite", remedy=f"its lowest eigenvalue is {low:.4g} 1/m0")
    if low < 1 / HEAVIEST * (1 - 1e-12) or high > 1 / LIGHTEST * (1 + 1e-12):
        rule = f"its masses must lie between {LIGHTEST:g} m0 and {HEAVIEST:g} m0"
        raise InputError(field, rule, f"{1 / high:.4g} m0 to {1 / low:.4g} m0")
    a, b, c = ((float(x), float(y), float(z)) for x, y, z in matrix)
    return a, b, c


def _is_row(value: object) -> bool:
    """Whether it is a list of three."""
    return isinstance(value, Sequence | np.ndarray) and not isinstance(value, str) and len(value) == 3
