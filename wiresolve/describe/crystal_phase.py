"""Wires that may have grown in another crystal than the table's."""

from __future__ import annotations

from dataclasses import replace

from wiresolve.describe.material import Material

OFTEN_WURTZITE = ("InAs", "InP", "GaAs", "AlAs", "AlGaAs", "InGaAs")
"""Zincblende materials of the table that thin wires along [111] often are wurtzite of."""
KNOWN = {
    "InAs": ": its gap is 0.46 eV there at low temperature (L. C. Dacal, A. Cantarero, arXiv 1310.5652), not 0.417"
}
"""What differs, where a number is at hand."""


def with_phase_note(material: Material, axis: tuple[int, int, int]) -> Material:
    """The table's material with a warning where a wire along this axis may be wurtzite."""
    along_111 = len({abs(v) for v in axis}) == 1
    letters = "".join(c for c in material.name if c.isalpha())
    family = letters if letters in OFTEN_WURTZITE else letters[2:4] + letters[:2] + letters[4:]
    if material.crystal != "zincblende" or not along_111 or family not in OFTEN_WURTZITE:
        return material
    text = f"{material.name} in the table is zincblende, but wires that grow along [111] are often wurtzite (along c),"
    text += f" with other gaps, masses and offsets{KNOWN.get(material.name, '')}"
    remedy = "check the crystal; if it is wurtzite describe it under [materials.NAME]"
    return replace(material, notes=(*material.notes, ("crystal-phase", text, remedy)))
