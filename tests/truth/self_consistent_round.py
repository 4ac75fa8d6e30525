"""Self-consistent electrons of a round wire in a wrap-around gate, against gate potential, from 300 K to T = 0.

Computed by `tests/independent_round.py` (Jacobi polynomials in the radius, exact density response, Newton), which
agrees with every digit of the three wires of `SPECTRAL`. Between 56 points with 40 states a momentum, and 72 with 52,
the levels change by less than 1e-11 eV and the line densities and capacitances by less than 1e-10 of themselves: all
digits below are good but perhaps the last.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from tests import independent_round
from tests.truth._self_consistent import in_pairs, round_wire, swept


@dataclass(frozen=True)
class Point:
    """A point of the sweep of `independent_round.INAS`: number `index` of `sweep_potentials_V(temperature_K)`.

    Energies count from the Fermi level; `momenta` are the levels' angular momenta l (pairs with l > 0 once). The
    potential's zero is where a band edge would be at the Fermi level.
    """

    temperature_K: float
    index: int
    line_density_per_nm: float
    capacitance_per_V_nm: float  # dN/dV in e/(V nm)
    centre_potential_V: float
    surface_potential_V: float
    levels_eV: tuple[float, ...]
    momenta: tuple[int, ...]


# fmt: off
SWEEP = (
    Point(300.0, 9, 0.00518479342, 0.1864294965, -0.0360887365, -0.0351711689,
      (0.0734785928, 0.1313040872, 0.2073765155, 0.2341817574, 0.3006625384, 0.3562552006), (0, 1, 2, 0, 3, 1)),
    Point(300.0, 19, 0.24550080649, 2.3456647008, 0.0898220290, 0.1263797704,
      (-0.0616662565, -0.0084588356, 0.0646377243, 0.0958395630, 0.1557986810, 0.2171049272), (0, 1, 2, 0, 3, 1)),
    Point(300.0, 29, 0.76783572623, 3.2327650704, 0.1653967439, 0.2619691782,
      (-0.1504742311, -0.1036109749, -0.0348935972, 0.0029654548, 0.0529424798, 0.1228187601), (0, 1, 2, 0, 3, 1)),
    Point(300.0, 39, 1.40412168550, 3.6421639157, 0.2247136259, 0.3870687094,
      (-0.2260747099, -0.1851243323, -0.1204579258, -0.0742405556, -0.0357511620, 0.0434817273), (0, 1, 2, 0, 3, 1)),
    Point(300.0, 49, 2.11326792359, 4.0617610990, 0.2751069947, 0.5054610150,
      (-0.2943093117, -0.2587828040, -0.1979212393, -0.1413642559, -0.1161799815, -0.0261733461), (0, 1, 2, 0, 3, 1)),
    Point(77.0, 9, 0.17187108037, 2.7945928884, 0.0844624959, 0.1127496650,
      (-0.0549052044, -0.0007937228, 0.0729654134, 0.1034380133, 0.1646369478, 0.2248300844), (0, 1, 2, 0, 3, 1)),
    Point(77.0, 19, 0.55735920849, 3.4582409933, 0.1470991709, 0.2201203140,
      (-0.1263022798, -0.0771069274, -0.0068334548, 0.0282245779, 0.0821835703, 0.1488047043), (0, 1, 2, 0, 3, 1)),
    Point(77.0, 29, 1.02399961549, 3.3834340013, 0.1938618062, 0.3200204091,
      (-0.1869781975, -0.1430063717, -0.0762005487, -0.0343608278, 0.0101933159, 0.0844889680), (0, 1, 2, 0, 3, 1)),
    Point(77.0, 39, 1.54040798802, 3.2540270050, 0.2404643884, 0.4153390645,
      (-0.2446844589, -0.2046544066, -0.1406677432, -0.0930565654, -0.0565174572, 0.0242437682), (0, 1, 2, 0, 3, 1)),
    Point(77.0, 49, 2.11822058272, 4.4583378300, 0.2736055539, 0.5050050931,
      (-0.2933005861, -0.2578803167, -0.1970829544, -0.1402384567, -0.1153858396, -0.0251186211), (0, 1, 2, 0, 3, 1)),
    Point(4.2, 9, 0.16659509591, 4.0864584334, 0.0854501051, 0.1132353510,
      (-0.0558552016, -0.0016944755, 0.0721062062, 0.1025526884, 0.1638115888, 0.2239468812), (0, 1, 2, 0, 3, 1)),
    Point(4.2, 19, 0.56084410552, 3.7322180263, 0.1465483546, 0.2197995083,
      (-0.1257362971, -0.0765544204, -0.0062967119, 0.0287586196, 0.0827056185, 0.1493404067), (0, 1, 2, 0, 3, 1)),
    Point(4.2, 29, 1.01753427298, 2.8199388561, 0.1944619605, 0.3206155826,
      (-0.1878289673, -0.1438954912, -0.0770963063, -0.0351419532, 0.0093015484, 0.0836798988), (0, 1, 2, 0, 3, 1)),
    Point(4.2, 39, 1.54073004881, 3.1687943727, 0.2404925917, 0.4153094169,
      (-0.2446671322, -0.2046234205, -0.1406302290, -0.0930525139, -0.0564767481, 0.0242520476), (0, 1, 2, 0, 3, 1)),
    Point(4.2, 49, 2.12402916813, 4.4086398535, 0.2726320265, 0.5044703779,
      (-0.2924188627, -0.2570288113, -0.1962536506, -0.1393436042, -0.1145741516, -0.0242384167), (0, 1, 2, 0, 3, 1)),
    Point(1.0, 9, 0.16687015280, 4.0292976389, 0.0853960484, 0.1132100303,
      (-0.0558046362, -0.0016469426, 0.0721513607, 0.1025998763, 0.1638548633, 0.2239938099), (0, 1, 2, 0, 3, 1)),
    Point(1.0, 19, 0.56089004134, 3.7283768002, 0.1465407747, 0.2197952796,
      (-0.1257288459, -0.0765471849, -0.0062896856, 0.0287657186, 0.0827124567, 0.1493474740), (0, 1, 2, 0, 3, 1)),
    Point(1.0, 29, 1.01753842033, 2.8198831589, 0.1944609440, 0.3206152008,
      (-0.1878282160, -0.1438948054, -0.0770956567, -0.0351411841, 0.0093021732, 0.0836806307), (0, 1, 2, 0, 3, 1)),
    Point(1.0, 39, 1.54073355519, 3.1687610947, 0.2404919804, 0.4153090941,
      (-0.2446665801, -0.2046228880, -0.1406297112, -0.0930519663, -0.0564762425, 0.0242525858), (0, 1, 2, 0, 3, 1)),
    Point(1.0, 49, 2.12404690168, 4.4081246973, 0.2726292909, 0.5044687455,
      (-0.2924162598, -0.2570262674, -0.1962511561, -0.1393410063, -0.1145716998, -0.0242358447), (0, 1, 2, 0, 3, 1)),
    Point(0.0, 9, 0.16688431061, 4.0263203286, 0.0853932650, 0.1132087270,
      (-0.0558020331, -0.0016444957, 0.0721536850, 0.1026023055, 0.1638570909, 0.2239962258), (0, 1, 2, 0, 3, 1)),
    Point(0.0, 19, 0.56089276601, 3.7281539695, 0.1465403251, 0.2197950288,
      (-0.1257284039, -0.0765467557, -0.0062892689, 0.0287661397, 0.0827128623, 0.1493478932), (0, 1, 2, 0, 3, 1)),
    Point(0.0, 29, 1.01753866952, 2.8198798144, 0.1944608830, 0.3206151779,
      (-0.1878281709, -0.1438947642, -0.0770956177, -0.0351411379, 0.0093022107, 0.0836806747), (0, 1, 2, 0, 3, 1)),
    Point(0.0, 39, 1.54073376589, 3.1687590956, 0.2404919437, 0.4153090747,
      (-0.2446665469, -0.2046228560, -0.1406296801, -0.0930519334, -0.0564762121, 0.0242526181), (0, 1, 2, 0, 3, 1)),
    Point(0.0, 49, 2.12404796520, 4.4080939275, 0.2726291268, 0.5044686476,
      (-0.2924161037, -0.2570261148, -0.1962510065, -0.1393408505, -0.1145715527, -0.0242356904), (0, 1, 2, 0, 3, 1)),
)
# fmt: on

# Levels (energy, l, line density), line density, band edge at centre and surface, all as printed.
SPECTRAL: dict[str, dict[str, Any]] = {
    "InAs, 77 K": {
        "levels": (
            (-0.1807143835, 0, 2.234392219e08),
            (-0.1362636865, 1, 3.878798078e08),
            (-0.0691406557, 2, 2.754692832e08),
            (-0.0279993122, 0, 8.551065491e07),
            (0.0174942556, 3, 5.177145440e06),
            (0.0910375811, 1, 8.353154168e01),
            (0.1221477159, 4, 7.684944232e-01),
            (0.2283110462, 2, 8.651153516e-08),
        ),
        "line_density_per_m": 9.7747619755e08,
        "centre_edge_eV": -0.1890139620,
        "surface_edge_eV": -0.3100174544,
    },
    "silicon, 300 K": {
        "levels": (
            (-0.0274369585, 0, 9.379805779e08),
            (0.0162432970, 1, 6.981796252e08),
            (0.0911033141, 2, 5.138284817e07),
            (0.1606493895, 0, 1.777393417e06),
            (0.1918040583, 3, 1.066271897e06),
            (0.3038154049, 1, 1.400689299e04),
            (0.3158831153, 4, 8.782417957e03),
            (0.4619076899, 5, 3.093931725e01),
        ),
        "line_density_per_m": 1.6904095626e09,
        "centre_edge_eV": -0.0069991383,
        "surface_edge_eV": -0.2724131580,
    },
    "GaAs with donors, 77 K": {
        "levels": (
            (-0.0295299271, 0, 1.413896048e08),
            (-0.0111023892, 1, 1.615029477e08),
            (0.0100769390, 2, 2.318193403e07),
            (0.0134197517, 0, 7.383248668e06),
            (0.0341541030, 3, 7.058930633e05),
            (0.0418689446, 1, 2.213160105e05),
            (0.0612196595, 4, 1.199510211e04),
            (0.0741798574, 2, 1.701231279e03),
        ),
        "line_density_per_m": 3.3439922606e08,
        "centre_edge_eV": -0.0455166000,
        "surface_edge_eV": 0.0238699885,
    },
}
"""The wires `INAS` at 0.4 V, `SILICON` and `GALLIUM_ARSENIDE` of `independent_round`, from two unrelated older codes: a
radial spectral one (these digits) and finite differences, whose limit agrees to 1e-9 eV."""

SPECTRAL_SOURCE = (
    "two unrelated radial solvers (Jacobi polynomials; finite differences with their limit), which agree to 1e-9 eV and"
    " 1e-8 of the charge"
)
SWEEP_SOURCE = "tests/independent_round.py: Jacobi polynomials in the radius, exact density response, Newton"
ASKED = "asked are 1e-6 eV and 1e-6 of the charge; the mesh is refined until the bars say 1e-6 eV"
FILLED = 5


def spectral(name: str) -> list[dict[str, Any]]:
    """A wire of `SPECTRAL`: its lowest levels as subbands, each one's carriers, and all carriers."""
    levels = SPECTRAL[name]["levels"][:FILLED]
    momenta = tuple(momentum for _, momentum, _ in levels)
    energies = in_pairs(tuple(e for e, *_ in levels), momenta)
    count = len(energies)

    def filled() -> list[float]:
        occupied = round_wire(name, count).balanced.occupied
        each = sorted(zip(occupied.energy_eV, occupied.line_density_per_nm, strict=True))[:count]
        return [float(sum(n for _, n in each[start : start + size])) for start, size in _places(momenta)]

    total = SPECTRAL[name]["line_density_per_m"] * 1e-9
    return [
        {
            "id": f"self-consistent.round.{name}.energies",
            "what": f"subbands in eV from the Fermi level, {name}, wrap gate",
            "value": energies,
            "digits": 6,
            "scale": 1.0,
            "source": SPECTRAL_SOURCE,
            "tolerance_reason": ASKED,
            "compute": lambda: round_wire(name, count).certified.energy_eV,
        },
        {
            "id": f"self-consistent.round.{name}.carriers",
            "what": f"electrons per nm, {name}, wrap gate",
            "value": total,
            "digits": 6,
            "source": SPECTRAL_SOURCE,
            "tolerance_reason": ASKED,
            "compute": lambda: round_wire(name, count).balanced.occupied.total_per_nm,
        },
        {
            "id": f"self-consistent.round.{name}.levels-carriers",
            "what": f"electrons per nm in each of the lowest levels, {name}, wrap gate, as parts of all",
            "value": [density * 1e-9 for *_, density in levels],
            "digits": 6,
            "scale": total,
            "source": SPECTRAL_SOURCE,
            "tolerance_reason": ASKED,
            "compute": filled,
        },
    ]


def _places(momenta: tuple[int, ...]) -> list[tuple[int, int]]:
    """Where the subbands of each level start, and how many they are."""
    sizes = [2 if momentum else 1 for momentum in momenta]
    return [(sum(sizes[:k]), size) for k, size in enumerate(sizes)]


def sweep(temperature_K: float) -> list[dict[str, Any]]:
    """The points of `SWEEP` at one temperature."""
    points = [p for p in SWEEP if p.temperature_K == temperature_K]
    every = independent_round.sweep_potentials_V(temperature_K)
    gate_V = tuple(float(every[p.index]) for p in points)
    energies = [e for p in points for e in in_pairs(p.levels_eV, p.momenta)]
    count = len(energies) // len(points)
    where = f"InAs, radius 15 nm, wrap gate at {gate_V[0]:.3g} to {gate_V[-1]:.3g} V, {temperature_K:g} K"

    def entry(
        what: str, said: str, value: list[float], compute: Callable[[], list[float]], **scale: float
    ) -> dict[str, Any]:
        return {
            "id": f"self-consistent.round-sweep.{temperature_K:g}K.{what}",
            "what": f"{said}, {where}",
            "value": value,
            "digits": 6,
            "source": SWEEP_SOURCE,
            "tolerance_reason": ASKED,
            "compute": compute,
            **scale,
        }

    return [
        entry("energies", "subbands in eV", energies, lambda: swept(temperature_K, gate_V, count)[2], scale=1.0),
        entry(
            "carriers",
            "electrons per nm",
            [p.line_density_per_nm for p in points],
            lambda: swept(temperature_K, gate_V, count)[0],
        ),
        entry(
            "capacitance",
            "dN/dV in e/(V nm)",
            [p.capacitance_per_V_nm for p in points],
            lambda: swept(temperature_K, gate_V, count)[1],
        ),
    ]


TRUTH: list[dict[str, Any]] = [entry for name in SPECTRAL for entry in spectral(name)]
TRUTH += [entry for kelvin in (300.0, 77.0, 4.2, 1.0, 0.0) for entry in sweep(kelvin)]
