"""The subband table: its entries, their levels, and how a notebook shows them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from html import escape

from wiresolve.describe.valley import ZONE_CENTRE
from wiresolve.physics.wording import significant, with_bar

MOST_ROWS = 40
"""Subbands that a notebook shows."""
_LOOK = "padding:2px 10px;font-size:14px;white-space:nowrap"
_RIGHT, _LEFT = f"text-align:right;{_LOOK}", f"text-align:left;{_LOOK}"
_WORDS = ("mostly in", "bound", "valleys")
"""Columns of words, flush left."""
_RULE = "border-top:1px solid rgba(128,128,128,.35)"


@dataclass(frozen=True)
class Subband:
    """One orbital state of one group of valleys: an entry of the subband table.

    `energy_eV` is the subband's minimum from the result's energy zero, `error_eV` the bar of its discretisation,
    `level` the cluster of entries that are equal within their bars (from 1), `axial_mass` in m0 (None where E(k)
    starts linearly), `shares` the probability by layer, `bound` and `wall_effect_eV` None where the outermost layer
    is no barrier, `line_density_per_nm` at the Fermi level and the first temperature (None without a Fermi level).
    """

    index: int
    level: int
    valley: str
    energy_eV: float
    error_eV: float
    k_min_per_nm: float
    axial_mass: float | None
    axial_mass_error: float | None
    spin_degeneracy: int
    valley_degeneracy: int
    layer: str
    shares: Mapping[str, float]
    bound: bool | None
    wall_effect_eV: float | None
    line_density_per_nm: float | None


class Subbands(tuple[Subband, ...]):
    """The entries of a result, lowest first: a tuple that a notebook shows as a table."""

    __slots__ = ()

    def _repr_html_(self) -> str:
        return table_html(self)


def levels(subbands: Sequence[Subband]) -> list[list[Subband]]:
    """The entries grouped by level, in order."""
    groups: dict[int, list[Subband]] = {}
    for subband in subbands:
        groups.setdefault(subband.level, []).append(subband)
    return list(groups.values())


def level_energy_eV(group: Sequence[Subband]) -> float:
    """Mean energy of a level's entries."""
    return sum(s.energy_eV for s in group) / len(group)


def states(group: Sequence[Subband]) -> int:
    """States at the bottom of a level, spin and valleys counted."""
    return sum(s.spin_degeneracy * s.valley_degeneracy for s in group)


def table_html(subbands: Sequence[Subband]) -> str:
    """The subbands as an HTML table, which takes its colours from the page; at most the first `MOST_ROWS`.

    Level and spacing to the next level stand once for all entries of a level. Columns that say nothing are left out.
    """
    valleys = any(s.valley != ZONE_CENTRE for s in subbands)
    bound = any(s.bound is not None for s in subbands)
    heads = ["level", "subband", "energy (meV)", "spacing to the next level (meV)", "axial mass (m0)", "spin × valleys"]
    heads += ["mostly in", *(["bound"] if bound else []), *(["valleys"] if valleys else [])]
    lines = ['<table style="border-collapse:collapse;background:transparent;color:inherit">', "<thead><tr>"]
    lines += [
        f'<th scope="col" style="{_LEFT if name in _WORDS else _RIGHT};white-space:normal">{name}</th>'
        for name in heads
    ]
    lines.append("</tr></thead><tbody>")
    shown, groups = 0, levels(subbands)
    for number, group in enumerate(groups):
        part = group[: MOST_ROWS - shown]
        if not part:
            break
        shown += len(part)
        above = groups[number + 1] if number + 1 < len(groups) else None
        spacing = "" if above is None else significant(1e3 * (level_energy_eV(above) - level_energy_eV(group)), 4)
        for s in part:
            once = f' rowspan="{len(part)}"' if s is part[0] else ""
            cells = [(str(s.level), once)] if once else []
            cells += [(str(s.index), ""), (with_bar(1e3 * s.energy_eV, 1e3 * s.error_eV), "")]
            cells += [(spacing, once)] if once else []
            mass = "none" if s.axial_mass is None else f"{s.axial_mass:.4f}"
            cells += [(mass, ""), (f"{s.spin_degeneracy} × {s.valley_degeneracy}", ""), (s.layer, "left")]
            cells += [({True: "yes", False: "no", None: ""}[s.bound], "left")] if bound else []
            cells += [(s.valley, "left")] if valleys else []
            lines.append(f'<tr style="background:transparent{";" + _RULE if once else ""}">')
            lines += [_cell(*cell) for cell in cells]
            lines.append("</tr>")
    lines.append("</tbody></table>")
    if len(subbands) > shown:
        lines.append(f"<p>and {len(subbands) - shown} more</p>")
    return "\n".join(lines)


def _cell(text: str, kind: str) -> str:
    """A cell of words ("left"), or of a number with attributes of its own."""
    style, more = (_LEFT, "") if kind == "left" else (_RIGHT, kind)
    return f'<td{more} style="{style};vertical-align:top">{escape(text)}</td>'
