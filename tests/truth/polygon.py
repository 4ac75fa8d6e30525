"""Regular polygons, and polygons with re-entrant corners: the L and two drums that sound alike."""

from __future__ import annotations

import math
from typing import Any

from tests.truth._wires import eigenvalues, regular_polygon
from wiresolve.describe.shapes import Hexagon, Polygon

HEXAGON = [
    ("7.15533913392605512821001761683", 1),
    ("18.131677865534", 2),
    ("32.451857514401", 2),
    ("37.4913528767982985166141322846", 1),
    ("47.6293657738571170112547403210", 1),
    ("52.63789013914324596711729", 1),
    ("60.105112094168", 2),
    ("70.140363652018", 2),
]
"""Eigenvalues of the regular hexagon of side 1 and their degeneracy."""
AREA_PI = {
    5: "6.022137932042633878298008710",
    7: "5.866449312655985857712474942",
    8: "5.838491433592442850516640380",
    10: "5.811260359219116022788816469",
}
"""First eigenvalue of the regular polygon of area pi, by its number of sides."""
L_SHAPE = [
    "9.639723844021941052711",
    "15.19725192645434327488",
    "19.73920880217871723767",
    "29.52148111414488329822",
    "31.91263595713776220033",
    "41.47450989021492233881",
    "44.94848778135123015283",
    "49.34802200544679309417",
    "49.34802200544679309417",
    "56.70960988738512071422",
]
L_CORNERS = ((0, 0), (1, 0), (1, 1), (-1, 1), (-1, -1), (0, -1))
"""Eigenvalues and corners of three unit squares around a re-entrant corner."""
DRUMS = ["2.53794399980", "3.65550971352", "5.17555935622", "6.53755744376", "7.24807786256", "9.20929499840"]
DRUM_CORNERS = (
    ((0, 0), (0, 1), (2, 3), (2, 2), (3, 2), (2, 1), (1, 1), (1, 0)),
    ((1, 0), (0, 1), (0, 2), (2, 2), (2, 3), (3, 2), (2, 1), (1, 1)),
)
"""Seven right triangles with legs of 1; the eigenvalues are for legs of 2."""


def area(sides: int) -> float:
    """Of the regular polygon of circumradius 1."""
    return sides / 2 * math.sin(2 * math.pi / sides)


def firsts() -> list[float]:
    return [float(eigenvalues(regular_polygon(n), 1, 1e-7)[0]) * area(n) / math.pi for n in AREA_PI]


TRUTH: list[dict[str, Any]] = [
    {
        "id": "polygon.hexagon",
        "what": "regular hexagon of side 1, twelve levels",
        "value": [float(text) for text, degeneracy in HEXAGON for _ in range(degeneracy)],
        "digits": 9,
        "source": "L. M. Cureton and J. R. Kuttler, J. Sound Vib. 220, 83 (1999); R. S. Jones, arXiv:1712.06082 "
        "(2017); digits by point matching",
        "tolerance_reason": "asked for 2e-7 of energies from 7.2 to 70; the pairs are known to 12 digits",
        "compute": lambda: eigenvalues(Hexagon(across_corners_nm=2.0), 12, 2e-7),
    },
    {
        "id": "polygon.regular",
        "what": "regular pentagon, heptagon, octagon, decagon of area pi, first level",
        "value": [float(text) for text in AREA_PI.values()],
        "digits": 8,
        "source": "R. S. Jones, arXiv:1712.06082 (2017); P. Grinfeld and G. Strang, J. Math. Anal. Appl. 385, 135 "
        "(2012)",
        "tolerance_reason": "asked for 1e-7 of energies from 6 on",
        "compute": firsts,
    },
    {
        "id": "polygon.L",
        "what": "L of three unit squares, ten levels",
        "value": [float(text) for text in L_SHAPE],
        "digits": 8,
        "source": "L. N. Trefethen and T. Betcke, Contemp. Math. 412, 297 (2006); T. Betcke and L. N. Trefethen, SIAM "
        "Rev. 47, 469 (2005), first level; the others by their method with 110 digits",
        "tolerance_reason": "asked for 2e-7 of energies from 9.6 on",
        "compute": lambda: eigenvalues(Polygon(points_nm=L_CORNERS), 10, 2e-7),
    },
    *(
        {
            "id": f"polygon.drum-{number}",
            "what": f"drum {number} of a pair that sounds alike, six levels",
            "value": [float(text) for text in DRUMS],
            "digits": 7,
            "source": "C. Gordon, D. Webb, S. Wolpert, Invent. Math. 110, 1 (1992); T. A. Driscoll, SIAM Rev. 39, 1 "
            "(1997), 12 digits from memory, confirmed to 9 by the method of particular solutions",
            "tolerance_reason": "asked for 1e-6 of energies from 10 on",
            "compute": lambda corners=corners: eigenvalues(Polygon(points_nm=corners), 6, 1e-6) / 4,
        }
        for number, corners in enumerate(DRUM_CORNERS, 1)
    ),
]
