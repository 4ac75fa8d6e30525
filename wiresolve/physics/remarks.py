"""What must be said beside the numbers: warnings with codes that describe themselves, and what was not modelled."""

from __future__ import annotations

import numpy as np

from wiresolve.physics.listing import Listing, carrying_piece
from wiresolve.physics.subbands import Certified
from wiresolve.physics.wire import Wire

Warning_ = tuple[str, str, str]

NOT_MODELLED = (
    "charge: fixed charge, gates and the carriers' own charge do not move the levels",
    "strain from lattice mismatch",
    "nonparabolicity: each material has one constant effective mass",
    "valleys other than the zone-centre one",
    "image charges from dielectric mismatch",
    "spin-orbit coupling and magnetic field",
    "scattering: conductance is ballistic, with perfect contacts",
    "variation of the section along the wire",
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
                else f"make {barrier.region} thicker, or write outside = a material"
            )
            warnings.append(("wall-too-near", f"the outer hard wall moves bound states by up to {far:.2g} meV", remedy))
    beyond = int(np.sum(certified.solved.level[wanted:] == certified.solved.level[wanted - 1]))
    if beyond:
        said.append(
            f"The last listed level has {beyond} more state{'s' if beyond > 1 else ''} that the list leaves out."
        )
    lowest = carrying_piece(wire)
    outside = np.flatnonzero(found.shares.get(lowest, np.ones(wanted))[:wanted] < 0.5)
    if len(outside):
        said.append(f"Subband {int(outside[0]) + 1} has most of its probability outside {lowest}.")
    used = {p.material for p in wire.problem.section.visible() if p.carriers}
    used |= {wire.problem.section.outside} if wire.problem.section.outside is not None else set()
    for name in sorted(used):
        warnings += [note for note in wire.materials[name].notes if note not in warnings]
    return tuple(warnings), tuple(said)
