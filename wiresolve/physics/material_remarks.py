"""Warnings about what the materials are taken to be: masses, valleys, lattices and surfaces."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from contextlib import suppress

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.curves import Loop
from wiresolve.describe.material import ZONE_CENTRE, Material, Note
from wiresolve.describe.materials import alloy_fraction, table_values
from wiresolve.describe.section import Section
from wiresolve.errors import InputError
from wiresolve.physics.borders import Borders
from wiresolve.physics.wording import meV, signed_meV

Array = NDArray[np.float64]

TWO_BAND_RANGE = 0.5
"""Nonparabolicity times energy above the edge up to which the two-band form is trusted: the mass has doubled there, and
bands that the form leaves out (Kane's F and the upper conduction band) are no small correction any more."""
PARABOLIC_FAR = 0.2
"""From here on the verdict says that parabolic energies are far off: the mass at the level is 40 % heavier."""
CURRENT_nm, THRESHOLD_nm = 5.0, 3.0
"""Widths of silicon wires below which bulk masses overestimate the on-current and the threshold voltage: J. Wang and
others, cond-mat/0412278."""
MISFIT = 0.005
CLOSE_kT, CLOSE_eV = 6.0, 0.1
INDIUM_RICH = 0.8


def parabolic_error_eV(above_edge_eV: Array, alpha_per_eV: Array) -> Array:
    """How far levels of a constant mass lie above those of e (1 + alpha e) = parabolic energy, exact for hard walls.

    E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957).
    """
    above = np.maximum(above_edge_eV, 0.0)
    return np.asarray(above - 2 * above / (1 + np.sqrt(1 + 4 * alpha_per_eV * above)))


def on_parabolic(
    above_edge_eV: Array, alpha_per_eV: Array, second: int | None, materials: Sequence[str], accuracy_eV: float
) -> tuple[list[Note], list[str]]:
    """The error of a constant mass where it is known to grow, if above the accuracy, and a sentence where it is large.

    Parameters
    ----------
    above_edge_eV, alpha_per_eV : (n,) of the listed states, in the layer that holds most of each; materials likewise.
    second : index of the first state of the second level, None where there is none.
    """
    error = parabolic_error_eV(above_edge_eV, alpha_per_eV)
    if error.max() <= accuracy_eV:
        return [], []
    worst = int(np.argmax(error))
    text = f'with model = "parabolic" the mass of {materials[worst]} does not grow with energy:'
    text += f" by e (1 + alpha e) the first level lies {meV(error[0])} too high"
    if worst:
        text += f", number {worst + 1} lies {meV(error[worst])} too high"
    if second is not None:
        spacing = above_edge_eV[second] - above_edge_eV[0]
        lost = error[second] - error[0]
        text += f", and the first spacing of {meV(spacing)} is {meV(lost)} too wide"
    remedy = 'take model = "parabolic" out, unless it is to be compared with another constant-mass calculation'
    said = []
    if alpha_per_eV[0] * (above_edge_eV[0] - error[0]) > PARABOLIC_FAR:
        said = [f"A constant mass of {materials[0]} is far from true here: energies and spacings are much too high."]
    return [("parabolic-forced", text, remedy)], said


def on_two_bands(above_edge_eV: Array, alpha_per_eV: Array, materials: Sequence[str]) -> list[Note]:
    """Levels so high that e (1 + alpha e) is not trusted."""
    growth = alpha_per_eV * above_edge_eV
    far = np.flatnonzero(growth > TWO_BAND_RANGE)
    if not len(far):
        return []
    first = int(far[0])
    text = f"from number {first + 1} on, energies lie beyond the range of the two-band mass of {materials[first]}:"
    text += (
        f" number {first + 1} lies {meV(above_edge_eV[first])} above its edge (alpha E = {growth[first]:.2g}), and from"
    )
    text += f" {TWO_BAND_RANGE:g} on bands count that this mass leaves out"
    remedy = "rely on the lower levels only, or take a larger section (there is no eight-band model yet)"
    return [("mass-range", text, remedy)]


def on_silicon(width_nm: float, name: str, material: Material) -> list[Note]:
    """Quantities that bulk masses give wrong in thin wires of silicon."""
    if not _is_silicon(material) or width_nm >= CURRENT_nm:
        return []
    wrong = "the on-current" if width_nm >= THRESHOLD_nm else "the on-current and the threshold voltage"
    text = f"{material.name} ({name}) is {width_nm:.3g} nm wide: masses of the bulk overestimate {wrong} of silicon"
    text += f" wires below {CURRENT_nm:g} nm (threshold: {THRESHOLD_nm:g} nm; J. Wang and others, cond-mat/0412278)."
    text += " Band edges alone were found fair down to 1.54 nm"
    remedy = "use level energies, and take currents and thresholds from a model of atoms, or correct masses to one"
    return [("mass-range", text, remedy)]


def _is_silicon(material: Material) -> bool:
    base = material.extends or material.name
    if base == "Si":
        return True
    found = _fraction(base)
    return found is not None and found[0] == "SiGe" and material.valley == "Delta"


def _fraction(name: str) -> tuple[str, float] | None:
    try:
        return alloy_fraction(name)
    except InputError:
        return None


def narrowest_nm(section: Section, name: str) -> float:
    """The width of a piece where it is narrowest between two parallel lines, or a layer's thickness.

    What patches cover of it is not seen.
    """
    layers = {f"layer {k}": layer for k, layer in enumerate(section.layers, 1)}
    if name in layers and (thickness := layers[name].thickness_nm) is not None:
        return min([thickness, *(t for _, t in layers[name].sides or () if t > 0)])
    return min(_between_lines(piece.loop) for piece in section.pieces() if piece.name == name)


def _between_lines(loop: Loop) -> float:
    """The least distance of two parallel lines that hold the outline between them: to 1e-5 for smooth ones."""
    points = np.vstack([s.point(np.linspace(0, 1, 33)) for s in loop.segments])
    along = np.diff(points, axis=0)
    along = along[np.hypot(*along.T) > 0]
    across = np.column_stack([-along[:, 1], along[:, 0]]) / np.hypot(*along.T)[:, None]
    # The narrowest strip has a side of the convex hull on one of its lines; all sides are among the directions tried.
    return min(float(np.ptp(points @ direction)) for direction in across)


def on_lattices(
    borders: Borders, materials: Mapping[str, Material], carrying: str, valley: str, kelvin: float
) -> list[Note]:
    """Touching materials whose lattices differ, with no strain: the worst pair.

    Parameters
    ----------
    materials : by region. carrying : the region of the first level, and its valley.
    """
    worst: tuple[float, str, str] | None = None
    for one, two in borders.between:
        a, b = materials[one], materials[two]
        size = misfit(a, b)
        if size is None or abs(size) <= MISFIT or a.name == b.name:
            continue
        if worst is None or abs(size) > abs(worst[0]):
            worst = size, one, two
    if worst is None:
        return []
    size, one, two = worst
    if materials[two].name == materials[carrying].name:
        size, one, two = misfit(materials[two], materials[one]) or 0.0, two, one
    a, b = materials[one], materials[two]
    text = f"the lattice of {b.name} ({two}) is {100 * abs(size):.2g} % {'larger' if size > 0 else 'smaller'} than that"
    text += f" of {a.name} ({one}), and strain is not modelled"
    shift = hydrostatic_shift_eV(a, valley, size, kelvin)
    if shift is not None:
        text += f": if {a.name} took up all of it, its conduction edge would move by about {signed_meV(shift)}"
    remedy = "shift the edge by an offset, or check that the interface is relaxed"
    return [("lattice-mismatch", text, remedy)]


def misfit(inner: Material, outer: Material) -> float | None:
    """(a_outer - a_inner)/a_inner of two crystals of one kind of lattice, None where they cannot be compared."""
    cubic = ("zincblende", "diamond")
    alike = inner.crystal == outer.crystal or (inner.crystal in cubic and outer.crystal in cubic)
    if not alike or inner.lattice_constant_nm is None or outer.lattice_constant_nm is None:
        return None
    return outer.lattice_constant_nm / inner.lattice_constant_nm - 1


def hydrostatic_shift_eV(material: Material, valley: str, misfit: float, kelvin: float) -> float | None:
    """Shift of a valley's edge where a cubic layer takes up a misfit along two axes: a 2 (1 - C12/C11) misfit.

    C. G. Van de Walle, Phys. Rev. B 39, 1871 (1989), equations 3 to 5 and 9, for a plane (001); the shear part is
    left out. None where the table does not hold the deformation potential or the elastic constants.
    """
    numbers = {v.quantity: v.value for v in material.values}
    base = material.extends or material.name
    with suppress(InputError):
        numbers = {v.quantity: v.value for v in table_values(base, kelvin)} | numbers
    potential = "conduction_deformation" if valley == ZONE_CENTRE else f"{valley}_dilation_deformation"
    try:
        ratio = numbers["elastic_C12"] / numbers["elastic_C11"]
        return numbers[potential] * 2 * (1 - ratio) * misfit
    except KeyError:
        return None


def on_surfaces(borders: Borders, materials: Mapping[str, Material], admitted: Iterable[str]) -> list[Note]:
    """Bare surfaces at which carriers pile up whatever the wire is meant to be."""
    rim = sum(borders.free.values())
    for name in admitted:
        material = materials[name]
        if borders.free.get(name, 0.0) < 1e-3 * rim or not _accumulates(material):
            continue
        text = f"the surface of {material.name} ({name}) is bare: its states usually pin the Fermi level above the"
        text += " conduction edge (InAs: by about 0.16 eV), and bend the bands so that electrons gather at the surface"
        remedy = "cover it with a shell that admits carriers, or give the surface potential by [potential]"
        return [("surface-accumulation", text, remedy)]
    return []


def _accumulates(material: Material) -> bool:
    base = material.extends or material.name
    if base in ("InAs", "InSb"):
        return True
    found = _fraction(base)
    return found is not None and found[0] == "InGaAs" and found[1] >= INDIUM_RICH


def window_eV(thermal_eV: float) -> float:
    """How near valleys of another kind matter."""
    return max(CLOSE_kT * thermal_eV, CLOSE_eV)


def on_valleys(
    lowest_eV: Mapping[str, float], bounds_eV: Mapping[str, tuple[float, str]], thermal_eV: float
) -> tuple[list[Note], list[str]]:
    """Valleys of another kind near the carrying one.

    Parameters
    ----------
    lowest_eV : the lowest level of every kind of valley that was solved; the least is the carrying one.
    bounds_eV : of kinds that were not solved, an energy that their levels lie above, and what to do to have them.
    """
    carrying = min(lowest_eV, key=lambda kind: lowest_eV[kind])
    first, window = lowest_eV[carrying], window_eV(thermal_eV)
    notes: list[Note] = []
    near = {k: e - first for k, e in lowest_eV.items() if k != carrying and e - first < window}
    for kind, away in near.items():
        text = f"the lowest level of the {kind} valleys lies {meV(away)} above that of the {carrying} ones, which"
        text += " is less than their edges are known to: another valley may carry"
        remedy = "compare this distance with the spread of the two edges (wiresolve materials NAME)"
        notes.append(("valley-close", text, remedy))
    hidden = {k: (e - first, r) for k, (e, r) in bounds_eV.items() if k not in lowest_eV and e - first < window}
    for kind, (away, remedy) in hidden.items():
        where = f"{meV(abs(away))} {'above' if away >= 0 else 'below'} the first level"
        text = f"the {kind} valleys were not solved, and their edge lies {where}: they may carry, too"
        notes.append(("valley-close", text, remedy))
    kinds = ", ".join(dict.fromkeys([*near, *hidden]))
    return notes, [f"Valleys of another kind ({kinds}) lie close."] if notes else []
