"""What must be said beside the numbers: warnings with codes that describe themselves, and what was not modelled."""

from __future__ import annotations

import numpy as np

from wiresolve.physics.listing import Listing, carrying_piece
from wiresolve.physics.subbands import Certified
from wiresolve.physics.wire import Wire

Warning_ = tuple[str, str, str]

MASS_RANGE, MASS_FAR = 0.05, 0.2
"""Nonparabolicity times energy above the band edge from which a constant mass is warned of, and from which the verdict
says so: 0.05 makes the mass 10 % and 0.2 makes it 40 % heavier than at the edge."""


def not_modelled(wire: Wire) -> tuple[str, ...]:
    """What the result leaves out, as far as it matters to this wire."""
    section = wire.problem.section
    several = len(wire.materials) > 1
    return tuple(
        text
        for text, matters in (
            ("charge: fixed charge, gates and the carriers' own charge do not move the levels", True),
            ("strain from lattice mismatch", several),
            ("nonparabolicity: each material has one constant effective mass", True),
            ("valleys other than the zone-centre one", True),
            (
                "what lies behind a hard wall: behind a real barrier, which is not infinitely high, levels lie lower",
                section.outside is None,
            ),
            ("image charges from the jump of permittivity at surfaces and interfaces", True),
            ("spin-orbit coupling and magnetic field", True),
            ("scattering: conductance is ballistic, with perfect contacts", True),
            ("variation of the section along the wire", True),
        )
        if matters
    )


def on(wire: Wire, certified: Certified, found: Listing) -> tuple[tuple[Warning_, ...], tuple[str, ...]]:
    """Warnings as (code, text, remedy), and sentences for the verdict."""
    warnings: list[Warning_] = []
    said: list[str] = []
    wanted, accuracy = certified.wanted, wire.problem.accuracy.energy_eV
    energy, barrier, effect = found.energy_eV[:wanted], wire.barrier, certified.wall_effect_eV
    if not certified.met:
        widest = float(found.bar_eV[:wanted].max())
        warnings.append(
            (
                "accuracy-missed",
                f"the widest error bar is {1e3 * widest:.2g} meV, wider than the {1e3 * accuracy:.2g} meV asked for",
                "ask a coarser accuracy or fewer subbands",
            )
        )
    if barrier is not None and effect is not None:
        open_ = np.flatnonzero(energy >= barrier.edge_eV)
        if len(open_):
            name = barrier.region
            first = int(open_[0]) + 1
            text = f"{len(open_)} of {wanted} states, from number {first} on, lie above the edge of the outermost layer"
            warnings.append(
                (
                    "open-barrier",
                    f"{text} ({name}, {1e3 * barrier.edge_eV:.1f} meV); where the layer ends decides their energies",
                    "ask fewer subbands, or make the barrier higher",
                )
            )
            said.append(f"From number {first} on the listed states are not bound: they live outside the core.")
        near = (energy < barrier.edge_eV) & (effect > accuracy)
        if near.any():
            far = 1e3 * float(effect[near].max())
            remedy = (
                "ask fewer subbands: the states near the barrier's edge reach too far"
                if barrier.extendable
                else f"if that wall is no real surface, make {barrier.region} thicker, or write outside = a material"
            )
            warnings.append(("wall-too-near", f"the outer hard wall moves bound states by up to {far:.2g} meV", remedy))
    parts = certified.solved.pencil.space.parts
    if parts > 1:
        text = f"walls part the section into {parts} pieces that carry current side by side; levels of all are listed"
        warnings.append(
            ("separate-pieces", text, "solve each piece as a wire of its own, or move the patches together")
        )
        said.append(f"The section is {parts} separate pieces.")
    warned, sentence = _mass_range(wire, found)
    warnings += warned
    said += sentence
    beyond = int(np.sum(certified.solved.level[wanted:] == certified.solved.level[wanted - 1]))
    if beyond:
        said.append(
            f"The last listed level has {beyond} more state{'s' if beyond > 1 else ''} that the list leaves out."
        )
    lowest = _lowest_pieces(wire)
    inside = sum((found.shares[name][:wanted] for name in lowest if name in found.shares), np.zeros(wanted))
    outside = np.flatnonzero(inside < 0.5)
    if len(outside):
        said.append(f"Subband {int(outside[0]) + 1} has most of its probability outside {' and '.join(lowest)}.")
    used = {p.material for p in wire.problem.section.visible() if p.carriers}
    used |= {wire.problem.section.outside} if wire.problem.section.outside is not None else set()
    for name in sorted(used):
        warnings += [note for note in wire.materials[name].notes if note not in warnings]
    return tuple(warnings), tuple(said)


def _lowest_pieces(wire: Wire) -> list[str]:
    """Names of the pieces whose band edge is the lowest."""
    edges = {p.name: wire.edge_eV(p.material, p.offset_eV) for p in wire.problem.section.visible() if p.carriers}
    return [name for name, edge in edges.items() if edge < min(edges.values()) + 1e-9]


def _mass_range(wire: Wire, found: Listing) -> tuple[list[Warning_], list[str]]:
    """Energies at which the mass has grown: E (1 + alpha E) = parabolic energy with alpha = (1 - m)^2/gap.

    E. O. Kane, J. Phys. Chem. Solids 1, 249 (1957), for a hard wall; the estimate is for the size of the error only.
    """
    piece = carrying_piece(wire)
    material = wire.materials[piece.material]
    mass, gap = material.electron_mass, material.gap_eV
    if mass is None or gap is None:
        return [], []
    alpha = (1 - mass) ** 2 / gap
    above = found.energy_eV - wire.edge_eV(piece.material, piece.offset_eV)
    if above[0] <= 0 or alpha * above[0] <= MASS_RANGE:
        return [], []
    true = (np.sqrt(1 + 4 * alpha * np.maximum(above, 0)) - 1) / (2 * alpha)
    text = (
        f"the first level lies {1e3 * above[0]:.3g} meV above the edge of {piece.material}, whose gap is"
        f" {gap:.3g} eV: its mass grows with energy, which is not modelled. By a two-band estimate the level lies near"
        f" {1e3 * true[0]:.3g} meV"
    )
    higher = np.flatnonzero(true > true[0] + 1e-3 * abs(true[0]))
    if len(higher):
        spacing, real = above[higher[0]] - above[0], true[higher[0]] - true[0]
        text += f", and the first spacing is near {1e3 * real:.3g} meV instead of {1e3 * spacing:.3g} meV"
    far = alpha * above[0] > MASS_FAR
    said = [f"The constant mass of {piece.material} is far outside its range: energies and spacings are much too high."]
    return [("mass-range", text, "take a larger section, or correct energies by this estimate")], said if far else []
