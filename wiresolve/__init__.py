"""Subbands of a nanowire's cross-section, each energy with its error bar, and what they mean for conductance.

    import wiresolve as ws

    problem = ws.load("wire.toml")
    result = ws.solve(problem)
    ws.write(result, "results/wire")
    ws.figures.modes(result).savefig("modes.png")

    Describe      Problem, Section, Layer, Patch, shapes, Material, Valley, Orientation, Carriers, Accuracy, Potential
    Run           load, solve, gate_curve, mesh, write
    Look at       Result, GateCurve, figures, gate_curve_figures, measured
    Compute on    matrix_elements, form_factors
    Faults        WiresolveError

`help(ws.solve)`, `help(ws.Section)` and so on tell the rest. A problem with gates and a sweep of voltages has a gate
curve, which is written likewise: `ws.gate_curve(problem)`.

Lengths are in nm, energies in eV, temperatures in K, masses in those of the free electron. Names are loaded when they
are first used (PEP 562).
"""

from __future__ import annotations

import importlib
import sys
from types import ModuleType
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from wiresolve.describe import shapes as shapes
    from wiresolve.describe.materials import Material as Material
    from wiresolve.describe.problem import Accuracy as Accuracy
    from wiresolve.describe.problem import Carriers as Carriers
    from wiresolve.describe.problem import Orientation as Orientation
    from wiresolve.describe.problem import Potential as Potential
    from wiresolve.describe.problem import Problem as Problem
    from wiresolve.describe.section import Layer as Layer
    from wiresolve.describe.section import Patch as Patch
    from wiresolve.describe.section import Section as Section
    from wiresolve.describe.valley import Valley as Valley
    from wiresolve.errors import WiresolveError as WiresolveError
    from wiresolve.gate_curve import gate_curve as gate_curve
    from wiresolve.gate_result import GateCurve as GateCurve
    from wiresolve.loading import load as load
    from wiresolve.mode_elements import form_factors as form_factors
    from wiresolve.mode_elements import matrix_elements as matrix_elements
    from wiresolve.output import figures as figures
    from wiresolve.output import gate_curve_figures as gate_curve_figures
    from wiresolve.output import measured as measured
    from wiresolve.output.writing import write as write
    from wiresolve.physics.section_mesh import mesh as mesh
    from wiresolve.result import Result as Result
    from wiresolve.solve import solve as solve

__version__ = "0.1.0"

_HOMES = {
    "Accuracy": "wiresolve.describe.problem:Accuracy",
    "Carriers": "wiresolve.describe.problem:Carriers",
    "GateCurve": "wiresolve.gate_result:GateCurve",
    "Layer": "wiresolve.describe.section:Layer",
    "Material": "wiresolve.describe.materials:Material",
    "Orientation": "wiresolve.describe.problem:Orientation",
    "Patch": "wiresolve.describe.section:Patch",
    "Potential": "wiresolve.describe.problem:Potential",
    "Problem": "wiresolve.describe.problem:Problem",
    "Result": "wiresolve.result:Result",
    "Section": "wiresolve.describe.section:Section",
    "Valley": "wiresolve.describe.valley:Valley",
    "WiresolveError": "wiresolve.errors:WiresolveError",
    "figures": "wiresolve.output.figures:",
    "form_factors": "wiresolve.mode_elements:form_factors",
    "gate_curve": "wiresolve.gate_curve:gate_curve",
    "gate_curve_figures": "wiresolve.output.gate_curve_figures:",
    "load": "wiresolve.loading:load",
    "matrix_elements": "wiresolve.mode_elements:matrix_elements",
    "measured": "wiresolve.output.measured:",
    "mesh": "wiresolve.physics.section_mesh:mesh",
    "shapes": "wiresolve.describe.shapes:",
    "solve": "wiresolve.solve:solve",
    "write": "wiresolve.output.writing:write",
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    module, _, member = _HOMES[name].partition(":")
    found: Any = importlib.import_module(module)
    if member:
        found = getattr(found, member)
    globals()[name] = found
    return found


def __dir__() -> list[str]:
    return sorted({*_HOMES, *(name for name in globals() if name.startswith("__") and name.endswith("__"))})


class _Package(ModuleType):
    """Keeps `wiresolve.solve` the function: importing the module of that name would bind the module here."""

    def __setattr__(self, name: str, value: Any) -> None:
        if not (isinstance(value, ModuleType) and _HOMES.get(name, "").endswith(f":{name}")):
            super().__setattr__(name, value)


sys.modules[__name__].__class__ = _Package
