"""Which valleys carry: the sentence about them in the verdict, and the groups as they were understood."""

from __future__ import annotations

import numpy as np

from wiresolve.bands.valleys import ValleyGroup
from wiresolve.physics.listing import Listing
from wiresolve.physics.subbands import Certified
from wiresolve.physics.wire import Wire


def sentence(found: Listing, certified: Certified) -> str:
    """The valleys of the lowest level, their mass along the wire, and how far up the next ones begin."""
    count, mass = found.valley_degeneracy[0], found.axial_mass[0]
    several = "" if count == 1 else f" ({count} of them)"
    heavy = f", with an axial mass of {mass:.3g} m0" if np.isfinite(mass) else ""
    text = f"The first subband is of the {found.valley[0]} valley{'' if count == 1 else 's'}{several}{heavy}"
    others = [(float(e), v) for e, v in zip(found.energy_eV, found.valley, strict=True) if v != found.valley[0]]
    others += [(energy, channel.label) for channel, energy in certified.above]
    if not others:
        return f"{text}."
    energy, label = min(others)
    return f"{text}; those of {label} begin {1e3 * (energy - float(found.energy_eV[0])):.3g} meV higher."


def described(wire: Wire) -> list[tuple[str, str]]:
    """Rows (key, text) of the groups of valleys: how many each stands for, edges, and masses in each material."""
    rows = []
    for group in wire.groups:
        left = ", not solved: its carriers would leave into the material outside" if group in wire.leaking else ""
        edges = ", ".join(f"{1e3 * e:.4g} meV in {n}" for n, e in wire.edges_eV(group).items())
        text = f"stands for {group.degeneracy}, edge {edges}; {_masses(group)}{left}"
        rows.append((f"valleys.{group.label}", text))
    for name, energy in wire.unsolved:
        why = "no [orientation]" if wire.problem.orientation is None else "masses not known in every material"
        rows.append((f"valleys.{name}", f"not solved ({why}); their edge lies at {1e3 * energy:.4g} meV or above"))
    return rows


def _masses(group: ValleyGroup) -> str:
    """Masses along the wire and across it, in m0, by material."""
    texts = []
    for name, tensor in group.inverse_mass.items():
        low, high = np.linalg.eigvalsh(tensor[:2, :2])
        along = tensor[2, 2] - tensor[2, :2] @ np.linalg.solve(tensor[:2, :2], tensor[:2, 2])
        across = f"{1 / low:.4g}" if high - low < 1e-9 * high else f"{1 / high:.4g} and {1 / low:.4g}"
        alpha = group.nonparabolicity_per_eV[name]
        grows = f", growing by {alpha:.3g}/eV" if alpha else ""
        texts.append(f"{name}: mass {1 / along:.4g} m0 along the wire, {across} m0 across it{grows}")
    return "; ".join(texts)
