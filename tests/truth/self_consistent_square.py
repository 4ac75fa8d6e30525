"""Self-consistent electrons of a square wire in a square wrap-around gate, with one and two permittivities.

Computed by `tests/independent_square.py` (products of spectral elements that shrink towards the channel's edges, to a
last step of 1e-12 V). Each case was solved on at least three grids, of 3 to 8 layers in ratio 0.2 or 0.15 and degrees
9 to 17; `error_eV` is what the levels may still be off. One permittivity has all its digits with three layers. Two make
the potential singular at the channel's corners and converge by a factor of 6 to 9 a layer, from 4e-9 eV with three
layers of 0.2; six of 0.2 and five of 0.15 agree to 1e-11 eV. More layers add more rounding (3e-11 eV with seven of
0.15) than they take away, and only the potential in the corner itself gains.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from tests.charged_wires import GATE
from tests.truth._self_consistent import square_wire
from wiresolve.physics.response import response


@dataclass(frozen=True)
class Solved:
    """A case of `independent_square.CASES`: energies from the Fermi level, one valley's levels without spin, the
    electrons of all; the potential (band edge = minus potential) at the centre, the middle of a face x = a/2 and a
    corner of the channel.

    `parities` are those in x and y of each level, e for even and o for odd.
    """

    levels_eV: tuple[float, ...]
    parities: tuple[str, ...]
    line_density_by_level_per_nm: tuple[float, ...]
    line_density_per_nm: float
    centre_potential_V: float
    face_potential_V: float
    corner_potential_V: float
    error_eV: float
    capacitance_per_V_nm: float | None = None  # dN/dV in e/(V nm), by differences of sixth order


SOLVED = {
    "A": Solved(
        (-0.11855669117, 0.0962596655, 0.0962596655, 0.3128975797),
        ("ee", "eo", "oe", "oo"),
        (0.250783451, 2.6364825e-8, 2.6364825e-8, 1.7447e-22),
        0.25078350408,
        0.24655381639,
        0.31175190812,
        0.3322930206,
        1e-11,
        0.7944442689,
    ),
    "B": Solved(
        (-0.0371168221, -0.0320889781, 0.0030768747, 0.0244106128, 0.0296928368, 0.0453180069, 0.0646642179),
        ("ee", "eo", "ee", "oe", "oo", "eo", "oe"),
        (0.494688739, 0.459714532, 0.227096925, 0.124568601, 0.105524995, 0.0626540883, 0.0314079880),
        1.5220053888,
        0.0222816520,
        0.221186253,
        0.345258,
        1e-10,
    ),
    "C": Solved(
        (-0.11847860889, 0.0963276544, 0.0963276544, 0.3129570828),
        ("ee", "eo", "oe", "oo"),
        (0.25102884624, 0.0, 0.0, 0.0),
        0.25102884624,
        0.24645449254,
        0.31171453527,
        0.3322756827,
        1e-11,
        0.7922740934,
    ),
    "D": Solved(
        (-0.03812829085, 0.1977205569, 0.1977205569, 0.4335236636),
        ("ee", "eo", "oe", "oo"),
        (0.14031822556, 6.028938e-15, 6.028938e-15, 2.2209e-30),
        0.14031822556,
        0.20407687065,
        0.12055004345,
        0.0665851077,
        1e-11,
        1.187479562,
    ),
    "E": Solved(
        (-0.1775034201, -0.1379676141, -0.0510319464, -0.0477212762, -0.0105559106, 0.0795241545, 0.0797214364),
        ("ee", "eo", "oe", "ee", "oo", "eo", "oe"),
        (0.307260177, 0.270888772, 0.164746326, 0.159312336, 0.07489286, 0.0, 0.0),
        0.97710047162,
        0.2101308585,
        0.3367160224,
        0.407655,
        1e-10,
        2.945117878,
    ),
}
SOURCE = "tests/independent_square.py: products of spectral elements, Newton; stored digits good to 1e-10"
ASKED = "asked are 1e-6 eV and 1e-6 of the charge; the mesh is refined until the bars say 1e-6 eV"


def entries(name: str) -> list[dict[str, Any]]:
    """Energies, carriers, and where it is stored the capacitance of a case."""
    solved, count = SOLVED[name], len(SOLVED[name].levels_eV)
    common = {"digits": 6, "source": SOURCE, "tolerance_reason": ASKED}
    found = [
        {
            "id": f"self-consistent.square.{name}.energies",
            "what": f"subbands in eV from the Fermi level, square wire {name} in a square wrap gate",
            "value": list(solved.levels_eV),
            "scale": 1.0,
            "compute": lambda: square_wire(name, count).certified.energy_eV,
            **common,
        },
        {
            "id": f"self-consistent.square.{name}.carriers",
            "what": f"electrons per nm, square wire {name}",
            "value": solved.line_density_per_nm,
            "compute": lambda: square_wire(name, count).balanced.occupied.total_per_nm,
            **common,
        },
    ]
    if solved.capacitance_per_V_nm is not None:
        found.append(
            {
                "id": f"self-consistent.square.{name}.capacitance",
                "what": f"dN/dV in e/(V nm), square wire {name}",
                "value": solved.capacitance_per_V_nm,
                "compute": lambda: response(square_wire(name, count).balanced, GATE).carriers_per_V_nm,
                **common,
            }
        )
    return found


TRUTH: list[dict[str, Any]] = [entry for name in SOLVED for entry in entries(name)]
