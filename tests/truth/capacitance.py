"""Capacitances of round metal cores: coaxial, in two layers, off centre, and above a plane."""

from __future__ import annotations

import math
from typing import Any

from tests.truth._fields import field, hole, meshed, piece
from wiresolve.describe.curves import Arc, Line, Loop, Segment, circle
from wiresolve.fem.corners import Corner, gradings
from wiresolve.fem.meshing import Grading
from wiresolve.physics.electrostatics import capacitances
from wiresolve.units import EPSILON0_PER_V_NM, FARAD_PER_M

COAXIAL = "2 pi eps / ln(outer/inner), elementary, e.g. J. D. Jackson, Classical Electrodynamics"
ABOVE = "2 pi eps / arccosh(h/R), elementary; O. Wunnicke, Appl. Phys. Lett. 89, 083102 (2006), Eq. (1)"
OFF_CENTRE = "2 pi eps / arccosh((a^2 + b^2 - d^2)/(2 a b)), W. R. Smythe, Static and Dynamic Electricity (from memory)"
WHY = "the field's energy is right to the square of the field's error; the mesh is fine enough for eight digits"


def coaxial(inner: float, outer: float, permittivity: float, shift: float = 0.0, size: float = 0.25) -> float:
    """F/m between two circles, the inner one off the centre by `shift`."""
    wall, core = circle(outer), hole(inner, (shift, 0.0))
    mesh = meshed([piece("layer 1", wall), core], size * (outer - inner), turn_cells=36)
    return mutual(field(mesh, {"layer 1": permittivity}, {"core": core.loop.segments, "wall": wall.segments}))


def two_layers() -> float:
    """F/m of two rings of unlike permittivity around a core."""
    wall, between, core = circle(9.0), circle(6.0), hole(5.0)
    mesh = meshed([piece("layer 2", wall), piece("layer 1", between), core], 0.7, turn_cells=36)
    gates = {"core": core.loop.segments, "wall": wall.segments}
    return mutual(field(mesh, {"layer 1": 3.9, "layer 2": 20.0}, gates))


def mutual(poisson: Any) -> float:
    """F/m from one gate to the other of two."""
    _, matrix = capacitances(poisson)
    return float(-matrix[0, 1] * FARAD_PER_M)


def above_plane(radius: float, height: float, reach: float, in_gap: float, growth: float) -> float:
    """F/m of a cylinder above a plane: half of it, up to a far quarter circle.

    The far circle once is grounded and once lets no field through: the true value lies between, and what the dipole
    field beyond the circle adds and takes is equal and opposite, so that the mean is right to (radius/reach)^4.

    Parameters
    ----------
    in_gap : size of cells in widths of the gap where they are, which goes like height - radius + x^2/(2 radius).
    growth : size of cells far away, in distances.
    """
    segments, gap = half_space(radius, height, reach), height - radius
    grades = (
        Grading(0.0, 0.0, radius, in_gap * radius / 2, 2.0, in_gap * gap),
        Grading(0.0, 0.0, 1.0, growth, 1.0, in_gap * gap),
    )
    mesh = meshed([piece("core", Loop(segments))], reach, 24, grades)
    found = []
    for ground in (("plane",), ("plane", "far")):
        metal, grounded = ([s for s in segments if s.name in names] for names in (("metal",), ground))
        found.append(2 * mutual(field(mesh, {"core": 3.9}, {"metal": metal, "ground": grounded})))
    return sum(found) / 2


def facing_arcs() -> float:
    """F/m between two quarters of a circle's rim, cells graded to their ends."""
    quarter = math.pi / 2
    names = ("top", "left", "bottom", "right")
    arcs = [Arc((0.0, 0.0), 7.0, (k + 0.5) * quarter, quarter, name) for k, name in enumerate(names)]
    corners = [Corner(*arc.start, 0.5) for arc in arcs]
    mesh = meshed([piece("core", Loop(tuple(arcs)))], 2.0, 12, gradings(corners, 2.0, 5.0, 1e-4))
    return mutual(field(mesh, {"core": 11.7}, {"left": [arcs[1]], "right": [arcs[3]]}))


def half_space(radius: float, height: float, reach: float) -> tuple[Segment, ...]:
    """What is above a plane and around a cylinder, right of their mirror line."""
    quarter = math.pi / 2
    return (
        Line((0.0, 0.0), (reach, 0.0), "plane"),
        Arc((0.0, 0.0), reach, 0.0, quarter, "far"),
        Line((0.0, reach), (0.0, height + radius), "mirror"),
        Arc((0.0, height), radius, quarter, -quarter, "metal"),
        Arc((0.0, height), radius, 0.0, -quarter, "metal"),
        Line((0.0, height - radius), (0.0, 0.0), "mirror"),
    )


def off_centre(inner: float, outer: float, shift: float, permittivity: float) -> float:
    """The closed form in F/m."""
    turned = math.acosh((inner**2 + outer**2 - shift**2) / (2 * inner * outer))
    return 2 * math.pi * EPSILON0_PER_V_NM * permittivity / turned * FARAD_PER_M


TRUTH: list[dict[str, Any]] = [
    {
        "id": "capacitance.coaxial-5-6",
        "what": "F/m between circles of 5 and 6 nm, permittivity 3.9",
        "value": 1.19002253367e-9,
        "digits": 8,
        "source": COAXIAL,
        "tolerance_reason": WHY,
        "compute": lambda: coaxial(5.0, 6.0, 3.9, size=0.6),
    },
    {
        "id": "capacitance.coaxial-15-25",
        "what": "F/m between circles of 15 and 25 nm, permittivity 20",
        "value": 2.17814065003e-9,
        "digits": 8,
        "source": COAXIAL,
        "tolerance_reason": WHY,
        "compute": lambda: coaxial(15.0, 25.0, 20.0),
    },
    {
        "id": "capacitance.two-layers",
        "what": "F/m of a core of 5 nm in rings to 6 nm (permittivity 3.9) and to 9 nm (20)",
        "value": 8.30058690976e-10,
        "digits": 8,
        "source": "two coaxial capacitors in series",
        "tolerance_reason": WHY,
        "compute": two_layers,
    },
    {
        "id": "capacitance.off-centre",
        "what": "F/m between circles of 4 and 10 nm, 4 nm off the centre, permittivity 9",
        "value": off_centre(4.0, 10.0, 4.0, 9.0),
        "digits": 8,
        "source": OFF_CENTRE,
        "tolerance_reason": WHY,
        "compute": lambda: coaxial(4.0, 10.0, 9.0, shift=4.0, size=0.2),
    },
    {
        "id": "capacitance.facing-arcs",
        "what": "F/m between two facing quarters of a circle's rim, permittivity 11.7",
        "value": 11.7 * EPSILON0_PER_V_NM * FARAD_PER_M,
        "digits": 5,
        "source": "the rim's other two quarters pose the same problem, so that C^2 = eps^2: a symmetric quadrilateral",
        "tolerance_reason": "at an end of a gate the potential goes like a square root: the smallest cells leave 3e-6",
        "compute": facing_arcs,
    },
    {
        "id": "capacitance.above-plane",
        "what": "F/m of a cylinder of 10 nm, its axis 20 nm above a plane, permittivity 3.9",
        "value": 1.64748441439e-10,
        "digits": 8,
        "source": ABOVE,
        "tolerance_reason": "the mean of a grounded and an insulated far circle at 1000 radii leaves 1e-11",
        "compute": lambda: above_plane(10.0, 20.0, 1e4, 0.12, 0.2),
    },
    {
        "id": "capacitance.almost-touching",
        "what": "F/m of a cylinder of 25 nm, 0.0001 nm above a plane, permittivity 3.9",
        "value": 7.67093595530e-8,
        "digits": 8,
        "source": ABOVE,
        "tolerance_reason": "cells about as long as the gap is wide, from 0.0001 nm on, and far ones as their distance",
        "compute": lambda: above_plane(25.0, 25.0001, 1e5, 1.5, 0.4),
    },
]
