"""Wires that may have grown in another crystal than the table's."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

from wiresolve.describe.material import Material
from wiresolve.describe.section import Section

OFTEN_WURTZITE = ("InAs", "InP", "GaAs", "AlAs", "AlGaAs", "InGaAs")
"""Zincblende materials of the table that thin wires along [111] often are wurtzite of."""
GROWN_ALONG_111 = ("InAs",)
"""Materials whose single wires, drawn without an orientation, are taken as grown along [111]: there numbers differ."""
KNOWN = {
    "InAs": "the gap of InAs is 0.46 eV there at low temperature, not 0.417 "
    "(L. C. Dacal, A. Cantarero, arXiv 1310.5652)"
}
"""What differs, where a number is at hand."""


def with_phase_note(
    materials: Mapping[str, Material], table: Sequence[str], section: Section, axis: tuple[int, int, int] | None
) -> dict[str, Material]:
    """The materials, with one warning (at the first one concerned) where the wire may be wurtzite.

    Parameters
    ----------
    table : names of the materials that are the table's own.
    axis : crystal direction along the wire; None where it is not given: then only a single grown wire may be one.
    """
    if axis is None:
        names = [section.material, *(layer.material for layer in section.layers)] if _grown(section) else []
    else:
        names = list(table) if len({abs(v) for v in axis}) == 1 else []
    zincblende = [n for n in table if n in names and materials[n].crystal == "zincblende" and _often_wurtzite(n)]
    if not zincblende:
        return dict(materials)
    several = len(zincblende) > 1
    who = f"{', '.join(zincblende[:-1])} and {zincblende[-1]}" if several else zincblende[0]
    text = f"{who} in the table {'are' if several else 'is'} zincblende, but "
    text += (
        "a wire like this one is often wurtzite (along c) if it was grown along [111]"
        if axis is None
        else ("wires that grow along [111] are often wurtzite (along c)")
    )
    text += ", with other gaps, masses and offsets"
    text += "".join(f"; {KNOWN[name]}" for name in zincblende if name in KNOWN)
    remedy = "check the crystal; if it is wurtzite describe it under [materials.NAME]"
    first = materials[zincblende[0]]
    return {**materials, first.name: replace(first, notes=(*first.notes, ("crystal-phase", text, remedy)))}


def _grown(section: Section) -> bool:
    """Whether the section looks like a single grown wire of a material that usually grows along [111]."""
    shape = section.shape.kind in ("circle", "hexagon", "outline")
    return shape and not section.patches and section.material in GROWN_ALONG_111


def _often_wurtzite(name: str) -> bool:
    letters = "".join(c for c in name if c.isalpha())
    return letters in OFTEN_WURTZITE or letters[2:4] + letters[:2] + letters[4:] in OFTEN_WURTZITE
