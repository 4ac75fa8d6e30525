"""Which of the values that a run stands on are unsure: from memory, or told differently by different texts."""

from __future__ import annotations

from collections.abc import Iterable

from wiresolve.describe.material import GIVEN_SCALE, VACUUM_LEVEL, Material
from wiresolve.describe.problem import Problem
from wiresolve.describe.valley import ZONE_CENTRE
from wiresolve.fem.mesh import Mesh
from wiresolve.output.valley_names import members
from wiresolve.result import Result, Warned

_KINDS = {ZONE_CENTRE: "zone_centre_", "X": "X_", "L": "L_", "Delta": "Delta_"}
_SCALE = ("valence_edge", "model_solid_valence_average", "conduction_edge")
_WALLS = "soft-wall"


def from_memory(result: Result, provenance: str = "memory") -> str:
    """The values of a provenance ("memory", "conflict") that a result stands on (see `unsure`)."""
    return unsure(result.problem, result.mesh, (s.valley for s in result.subbands), result.warnings, provenance)


def unsure(
    problem: Problem, mesh: Mesh, valleys: Iterable[str], warnings: Iterable[Warned], provenance: str = "memory"
) -> str:
    """The values of a provenance that a run used, by material; empty where there are none.

    Left out are valleys without a listed subband, and whatever only sets band edges against each other where nothing
    is set so. A valley of which everything is so is named once.
    """
    found = []
    materials = problem.resolved_materials()
    carrying = {r.material for r in mesh.regions if r.carriers}
    kinds = {members(valley)[0] for valley in valleys}
    walls = any(w.code == _WALLS for w in warnings)
    for material in materials.values():
        if not walls and material.name not in carrying:
            used = {"permittivity", "lattice_constant", "lattice_constant_c"}
        else:
            used = {v.quantity for v in material.values} - _unused(material, materials, carrying, kinds, walls)
        names = {v.quantity: v.provenance == provenance for v in material.values if v.quantity in used}
        said: dict[str, None] = {}
        for name in (n for n, unsure in names.items() if unsure):
            prefix = next((p for p in _KINDS.values() if name.startswith(p)), None)
            whole = prefix is not None and all(names[n] for n in names if n.startswith(prefix))
            said[f"all of {prefix}" if whole else name] = None
        if said:
            found.append(f"{material.name}: {', '.join(name.strip('_').replace('_', ' ') for name in said)}")
    return "; ".join(found)


def _unused(
    material: Material, materials: dict[str, Material], carrying: set[str], kinds: set[str], walls: bool
) -> set[str]:
    """Quantities of a material that nothing stands on."""
    others = tuple(prefix for kind, prefix in _KINDS.items() if kind not in kinds)
    unused = {v.quantity for v in material.values if others and v.quantity.startswith(others)}
    conductors = [m for m in materials.values() if m.name in carrying and not m.insulator]
    beside = any(materials[name].insulator for name in carrying if name in materials)
    by_vacuum = material.edge_scale == VACUUM_LEVEL
    # One semiconductor alone has its edge at zero; insulators are set beside it by affinities.
    if not walls and (len(conductors) < 2 or material.edge_scale in (VACUUM_LEVEL, GIVEN_SCALE)):
        unused |= set(_SCALE)
    if not walls and not (len(carrying) > 1 and (beside or by_vacuum)):
        unused.add("electron_affinity")
    from_average = any(v.quantity == "model_solid_valence_average" for v in material.values)
    if ZONE_CENTRE not in kinds and not (from_average and "model_solid_valence_average" not in unused):
        unused.add("spin_orbit_splitting")
    return unused
