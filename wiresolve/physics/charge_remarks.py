"""Warnings about what charge would do: image charges at jumps of the permittivity, and the carriers' own charge."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

from wiresolve.describe.doping import SOLUBLE_PER_NM3
from wiresolve.describe.material import Material, Note
from wiresolve.describe.section import Section
from wiresolve.physics.borders import Borders
from wiresolve.physics.image_charge import ground_state_shift, second_state_shift
from wiresolve.physics.wording import figures, meV, signed_meV
from wiresolve.units import E2_OVER_4PI_EPS0

ALIKE = 0.15
"""Touching regions whose permittivities differ by no more than this part are one wire for image charges."""
SHARE = 0.05
"""Part of the first spacing from which a shift by image charges is warned of."""
SLIGHT = 0.25
"""What vacuum around the drawing adds is told where it is more than this part: the closed forms are no better."""
BARE = 0.1
"""Where more than this part of an outline is bare, what else lies farther out is left out."""
_FAR_eV = 1.0
"""Energies above this are not told by their size: no band reaches so far."""


@dataclass(frozen=True)
class Ring:
    """The jump of permittivity around a circle, of equal area with what it stands for.

    `outside` is the mean of what touches, by length; `bare` the part of the outline at which nothing is drawn and
    vacuum is assumed.
    """

    radius_nm: float
    inside: float
    outside: float
    bare: float


def rings(
    borders: Borders, materials: Mapping[str, Material], carrying: str, endless: frozenset[str] = frozenset()
) -> tuple[Ring, ...]:
    """The jumps of permittivity around a region, from the inside outwards; none where a permittivity is not known.

    Parameters
    ----------
    materials : by region. carrying : the region of the first level.
    endless : regions at whose outer boundary no vacuum begins: they go on outside, or a gate's metal is there.
    """
    own = materials[carrying].permittivity
    if own is None:
        return ()
    members, inside = _grown(borders, materials, {carrying}, own), own
    found: list[Ring] = []
    while not endless & members:
        touching: dict[str, float] = {}
        for name in members:
            for other, length in borders.around(name).items():
                if other not in members:
                    touching[other] = touching.get(other, 0.0) + length
        bare = sum(borders.free.get(name, 0.0) for name in members)
        values = [materials[name].permittivity for name in touching]
        total = bare + sum(touching.values())
        if any(value is None for value in values) or total == 0:
            return tuple(found)
        weighted = sum((v or 0.0) * length for v, length in zip(values, touching.values(), strict=True))
        outside = (weighted + bare) / total
        radius = math.sqrt(sum(borders.areas_nm2[name] for name in members) / math.pi)
        found.append(Ring(radius, inside, outside, bare / total))
        if bare > BARE * total:
            break
        members, inside = members | set(touching), outside
    return tuple(found)


def _grown(borders: Borders, materials: Mapping[str, Material], members: set[str], inside: float) -> set[str]:
    """The regions together with all that touch them, one after the other, and have nearly the same permittivity."""
    members, fresh = set(members), list(members)
    while fresh:
        for name in borders.around(fresh.pop()):
            value = materials[name].permittivity
            if name not in members and value is not None and abs(value - inside) <= ALIKE * inside:
                members.add(name)
                fresh.append(name)
    return members


def image_shift_eV(jumps: Sequence[Ring]) -> float:
    """How far image charges at all rings lift the lowest level: the closed form of one jump, added up.

    A jump farther out acts through those before it, as image charges in layers do: with 1 - r^2 of each, r the ratio of
    difference and sum of its permittivities, and screened by the innermost one.
    """
    parts = zip(_weights(jumps), jumps, strict=True)
    return sum(w * ground_state_shift(r.inside, r.outside, r.radius_nm) for w, r in parts)


def spacing_shift_eV(jumps: Sequence[Ring], state_radius_nm: float) -> float:
    """How far they widen the first spacing: of states in a smaller circle by the ratio of the areas."""
    found = 0.0
    for weight, ring in zip(_weights(jumps), jumps, strict=True):
        values = ring.inside, ring.outside, ring.radius_nm
        part = min(state_radius_nm / ring.radius_nm, 1.0) ** 2
        found += weight * part * (second_state_shift(*values) - ground_state_shift(*values))
    return found


def _weights(jumps: Sequence[Ring]) -> list[float]:
    found, through = [], 1.0
    for ring in jumps:
        found.append(through * ring.inside / jumps[0].inside)
        through *= 1 - ((ring.inside - ring.outside) / (ring.inside + ring.outside)) ** 2
    return found


def drawn(jumps: Sequence[Ring]) -> list[Ring]:
    """The jumps that do not rest on vacuum where nothing is drawn."""
    return [ring for ring in jumps if ring.bare <= BARE]


def shift_in_words(jumps: Sequence[Ring]) -> str:
    """How far image charges move all levels: by what is drawn, and with vacuum where nothing is drawn."""
    known, whole = drawn(jumps), signed_meV(image_shift_eV(jumps))
    by_drawn = image_shift_eV(known)
    if not any(ring.bare for ring in jumps):
        return f"about {whole}"
    if not known or len(known) == len(jumps):
        return f"about {whole}, with vacuum where nothing is drawn"
    if abs(image_shift_eV(jumps) - by_drawn) <= SLIGHT * abs(by_drawn):
        return f"about {signed_meV(by_drawn)}"
    return f"about {signed_meV(by_drawn)}, or {whole} with vacuum where nothing is drawn"


def on_image_charges(
    jumps: Sequence[Ring], state_radius_nm: float, spacing_eV: float | None, accuracy_eV: float
) -> list[Note]:
    """Image charges whose effect counts.

    Of jumps that are drawn: above the accuracy and a twentieth of the first spacing. Where vacuum has to be assumed:
    above the whole spacing, since a guess must be large to be worth a warning.
    """
    spacing = spacing_eV or 0.0
    for some, least in ((drawn(jumps), SHARE * spacing), (list(jumps), spacing)):
        if abs(image_shift_eV(some)) > max(accuracy_eV, least):
            break
    else:
        return []
    first, *farther = some
    if farther:
        # Jumps up and down add to one sum, which a single pair of numbers would contradict.
        around = ", then ".join(f"{ring.outside:.3g}" for ring in some)
        text = f"the permittivity is {first.inside:.3g} where the carriers are and, from there outwards, {around}"
    else:
        verb = "falls" if first.outside < first.inside else "rises"
        text = (
            f"the permittivity {verb} from {first.inside:.3g} where the carriers are to {first.outside:.3g} around it"
        )
    form = "sum of the closed forms" if farther else "closed form"
    wider = signed_meV(spacing_shift_eV(some, state_radius_nm))
    text += (
        f" (means along the outlines): image charges, not modelled, would move all levels by {shift_in_words(jumps)}"
    )
    if "vacuum" in shift_in_words(jumps) and len(some) < len(jumps):
        form = f"by what is drawn; {form}"
    sizes = " and ".join(figures(2 * ring.radius_nm) for ring in some)
    text += f", and the first spacing by {wider}"
    text += f" ({form} of a round wire of {sizes} nm diameter)"
    remedy = "count the shift in offsets and thresholds; draw what surrounds the wire to have it estimated"
    return [("dielectric-mismatch", text, remedy)]


def charge_energy_eV(line_density_per_nm: float, permittivity: float) -> float:
    """e^2 n L^2/(eps0 eps) for carriers spread evenly over a round wire, n by volume and L the radius.

    With N carriers per length it is e^2 N/(pi eps0 eps), whatever the radius: four times the energy that Gauss's law
    gives between axis and rim.
    """
    return 4 * E2_OVER_4PI_EPS0 * line_density_per_nm / permittivity


def harmless_density_per_nm(spacing_eV: float, permittivity: float) -> float:
    """The line density at which `charge_energy_eV` is the first spacing."""
    return spacing_eV / charge_energy_eV(1.0, permittivity)


def on_charge(
    line_density_per_nm: float | None,
    permittivity: float | None,
    spacing_eV: float | None,
    level_of: Callable[[float], float | None],
) -> list[Note]:
    """Carriers at the given Fermi level whose own charge would move the states.

    Parameters
    ----------
    level_of : the Fermi level at which the wire holds a line density, None where there is none.
    """
    if line_density_per_nm is None or permittivity is None or spacing_eV is None:
        return []
    energy = charge_energy_eV(line_density_per_nm, permittivity)
    if energy <= spacing_eV:
        return []
    size = f"= {meV(energy)}" if energy <= _FAR_eV else f"of more than {_FAR_eV:g} eV"
    text = f"at this Fermi level the wire holds {line_density_per_nm:.3g} carriers per nm, whose charge bends the bands"
    text += f" by e^2 n L^2 / eps {size} (L the radius of equal area), more than the first spacing of"
    text += f" {meV(spacing_eV)}; electrostatics are not modelled"
    limit = harmless_density_per_nm(spacing_eV, permittivity)
    level = level_of(limit)
    below = "a lower fermi_level" if level is None else f"a fermi_level below {_floored_meV(level)}"
    remedy = f"stay below {limit:.2g} carriers per nm ({below}), or give the potential by [potential]"
    return [("carrier-charge", text, remedy)]


def on_doping(section: Section) -> list[Note]:
    """More dopants than a crystal dissolves."""
    notes = []
    for piece in section.visible():
        doping = section.doping_of(piece.name)
        for kind, density in (("donors", doping.donors_per_nm3), ("acceptors", doping.acceptors_per_nm3)):
            if density > SOLUBLE_PER_NM3:
                text = f"{density * 1e21:.2g} cm^-3 of {kind} in {piece.name} are more than crystals dissolve (about"
                text += f" {SOLUBLE_PER_NM3 * 1e21:.0e} cm^-3): a part of them would not be charged"
                notes.append(("doping-solubility", text, f"give the {kind} that are charged, as measured"))
    return notes


def _floored_meV(energy_eV: float) -> str:
    """Rounded down to a tenth of a meV, so that what is said holds."""
    return f"{math.floor(1e4 * energy_eV) / 10:g} meV"
