"""Warnings about walls and barriers: real ones taken as hard, open ones, and outlines that stand for others."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.material import Material, Note
from wiresolve.describe.offsets import barrier_height_eV
from wiresolve.physics.borders import Borders
from wiresolve.physics.wording import meV
from wiresolve.units import HBAR2_OVER_2M0

Array = NDArray[np.float64]

SOFT = 0.05
"""Part of a barrier's height from which a level sees that it is not hard."""
HELD = 0.5
"""Part of the height up to which a barrier acts like a hard wall farther out."""
OUTSIDE_SHARE = 0.5
TOUCH = 0.02
"""Borders shorter than this part of a region's outline are left out."""


def bound_state(energy_eV: float, wall_effect_eV: float | None, edge_eV: float) -> bool | None:
    """Whether a state lies below the outer barrier's edge: None where only the hard wall lifts it above."""
    if energy_eV < edge_eV:
        return True
    return None if energy_eV - (wall_effect_eV or 0.0) < edge_eV else False


@dataclass(frozen=True)
class Wall:
    """A region that keeps carriers out, or a hard wall, as a level in the region beside it sees it.

    `height_eV` is the conduction edge's step on `scale`, offsets included; `depth_nm` how much farther out the wall
    seems to stand (None where the barrier's mass is not known).
    """

    region: str
    material: str
    height_eV: float
    scale: str
    depth_nm: float | None


def wall_depth_nm(inner_mass: float, outer_mass: float, height_eV: float) -> float:
    """How much farther out a high barrier seems to stand than it does: (m_out/m_in)/kappa, kappa^2 = m_out V 2/hbar^2.

    From psi and psi'/m continuous (D. J. BenDaniel and C. B. Duke, Phys. Rev. 152, 683 (1966)); levels well below the
    edge fall as if the section had grown by it.
    """
    return math.sqrt(HBAR2_OVER_2M0 * outer_mass / height_eV) / inner_mass


def walls(
    borders: Borders,
    materials: Mapping[str, Material],
    excluded: Sequence[str],
    offsets_eV: Mapping[str, float],
    place: str,
    inner_mass: float,
) -> list[Wall]:
    """The excluded regions with a known edge that a region touches.

    Parameters
    ----------
    materials, offsets_eV : by region. place : where the level lives. inner_mass : its mean mass in the plane.
    """
    around, found = borders.around(place), []
    outline = sum(around.values()) + borders.free.get(place, 0.0)
    for name in excluded:
        if around.get(name, 0.0) < TOUCH * outline:
            continue
        step = barrier_height_eV(materials[place], materials[name])
        if step is None:
            continue
        height = step[0] + offsets_eV[name] - offsets_eV[place]
        inverse = materials[name].inverse_mass
        depth = None
        if inverse and height > 0:
            outer_mass = 1 / math.sqrt(np.linalg.det(np.array(inverse)[:2, :2]))
            depth = wall_depth_nm(inner_mass, float(outer_mass), height)
        found.append(Wall(name, materials[name].name, height, step[1], depth))
    return found


def on_soft_walls(seen: Sequence[Wall], above_edge_eV: float, place: str) -> list[Note]:
    """Real barriers that were taken as hard although the first level lies above a twentieth of them."""
    soft = [wall for wall in seen if above_edge_eV > SOFT * wall.height_eV]
    if not soft:
        return []
    wall = min(soft, key=lambda w: w.height_eV)
    if wall.height_eV <= 0:
        text = f"{wall.material} ({wall.region}) was taken as a hard wall, but its conduction edge lies"
        text += f" {meV(abs(wall.height_eV))} below that of {place} (scale: {wall.scale}): it would hold carriers"
    else:
        part = 100 * above_edge_eV / wall.height_eV
        text = (
            f"{wall.material} ({wall.region}) was taken as a hard wall, but its barrier is {wall.height_eV:.3g} eV high"
        )
        text += f" (scale: {wall.scale}) and the first level lies {meV(above_edge_eV)}, {part:.2g} % of it, above"
        text += f" the edge of {place}: levels lie lower than listed"
        if above_edge_eV > HELD * wall.height_eV:
            text += ", if they are held at all"
        elif wall.depth_nm is not None:
            text += f", about as if that wall stood {wall.depth_nm:.2g} nm farther out"
    kind = wall.region.split()[0]
    remedy = f'write carriers = "admitted" for {wall.region}'
    if kind in ("below", "above", "beside"):  # no carriers are solved for in surroundings
        remedy = f"draw {wall.region} as a layer or patch of the section, carriers admitted"
    elif kind != "insulator":  # an outside material is refused where a gate ends the section
        remedy += f', or outside = "{wall.material}"'
    if wall.depth_nm is None and wall.height_eV > 0:
        remedy += ", with an electron_mass for it"
    return [("soft-wall", text, remedy)]


@dataclass(frozen=True)
class OuterBarrier:
    """The outermost layer where it is a barrier, as each listed state of its valleys sees it.

    `edge_eV` (n,) is the layer's band edge for the state's valleys, with the least given potential along its outer
    wall; `effect_eV` (n,) how far the state falls when that wall is left free (NaN where it was not asked).
    """

    region: str
    extendable: bool
    edge_eV: Array
    effect_eV: Array

    def bound(self, energy_eV: Array) -> list[bool | None]:
        """Whether each state is bound: None where nobody can tell."""
        return [
            bound_state(float(e), float(w) if np.isfinite(w) else None, float(b)) if np.isfinite(b) else None
            for e, w, b in zip(energy_eV, self.effect_eV, self.edge_eV, strict=True)
        ]


def on_outer_barrier(barrier: OuterBarrier, energy_eV: Array, accuracy_eV: float) -> tuple[list[Note], list[str]]:
    """States that the outermost layer does not hold, and those whose wall is seen."""
    notes: list[Note] = []
    said: list[str] = []
    bound = barrier.bound(energy_eV)
    name, count = barrier.region, len(energy_eV)
    open_ = [i for i, held in enumerate(bound) if held is False]
    if open_:
        first = open_[0] + 1
        edge = 1e3 * float(barrier.edge_eV[open_[0]])
        text = f"{len(open_)} of {count} states, from number {first} on, lie above the edge of the outermost layer"
        text += f" ({name}, {edge:.1f} meV); where the layer ends decides their energies"
        notes.append(("open-barrier", text, "ask fewer subbands, or make the barrier higher"))
        said.append(f"From number {first} on the listed states are not bound: they live outside the core.")
    unsure = [i for i, held in enumerate(bound) if held is None and np.isfinite(barrier.edge_eV[i])]
    with np.errstate(invalid="ignore"):
        seen = barrier.effect_eV > accuracy_eV
    near = [i for i, held in enumerate(bound) if held and seen[i]] + unsure
    if near:
        far = float(np.nanmax(barrier.effect_eV[near]))
        text = f"the outer hard wall moves bound states by up to {meV(far, 2)}"
        if unsure:
            numbers = ", ".join(str(i + 1) for i in unsure)
            text += f"; it alone lifts number {numbers} above the edge of {name}: weakly bound or not at all"
        remedy = f"if that wall is no real surface, make {name} thicker, or write outside = a material"
        if barrier.extendable:
            remedy = "ask fewer subbands: the states near the barrier's edge reach too far"
        notes.append(("wall-too-near", text, remedy))
    return notes, said


def on_outermost_states(share: Array, name: str) -> list[Note]:
    """Listed states that live in the outermost layer, which is a barrier.

    Parameters
    ----------
    share : (n,) probability of each listed state there.
    """
    there = np.flatnonzero(share > OUTSIDE_SHARE)
    if not len(there):
        return []
    numbers = ", ".join(str(i + 1) for i in there[:8]) + (", ..." if len(there) > 8 else "")
    text = (
        f"of {'state' if len(there) == 1 else 'states'} {numbers} most lies in the outermost layer ({name}): they are"
    )
    text += " made by its outer wall, not by the wire"
    remedy = "ask fewer subbands, or leave these channels out of conductance and density"
    return [("outermost-states", text, remedy)]


def on_outline(note: str | None, missed_area: float, highest_eV: float, accuracy_eV: float) -> list[Note]:
    """Edges of an imported mesh that stand for curves.

    Parameters
    ----------
    note : the difference in words. missed_area : as a part of the whole. highest_eV : above the lowest band edge.
    """
    moved = highest_eV * missed_area
    if note is None or abs(moved) <= accuracy_eV:
        return []
    text = f"{note}: levels lie up to about {meV(abs(moved), 2)} too {'high' if moved > 0 else 'low'}"
    remedy = "export second-order cells or a finer boundary, or draw the section with a shape"
    return [("polygonal-outline", text, remedy)]
