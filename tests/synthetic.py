"""Results made by hand for the tests of the outputs: meshes from Gmsh, envelope functions in closed form."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import gmsh
import numpy as np
from scipy import special

from wiresolve.describe.gates import Gate
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Layer, Section
from wiresolve.describe.shapes import Circle, Rectangle
from wiresolve.fem.mesh import Mesh, Region
from wiresolve.physics.sensitivity import OutlineSensitivity
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.tail import Tail
from wiresolve.result import (
    Charge,
    DensityOfStates,
    Dispersion,
    GateCharge,
    MeshSummary,
    Result,
    Subband,
    ThermalCurve,
    Verdict,
    Warned,
)
from wiresolve.units import HBAR2_OVER_2M0, KB

CORE_NM, RADIUS_NM, MASS = 8.0, 12.0, 0.067
TEMPERATURES_K = (4.2, 77.0, 300.0)


def _gmsh_mesh(surfaces: list[int], regions: tuple[Region, ...], size_nm: float) -> Mesh:
    gmsh.model.occ.synchronize()
    gmsh.option.setNumber("Mesh.MeshSizeMax", size_nm)
    gmsh.model.mesh.generate(2)
    gmsh.model.mesh.setOrder(4)
    tags, xyz, _ = gmsh.model.mesh.getNodes()
    at = np.zeros(int(tags.max()) + 1, dtype=np.int64)
    at[tags.astype(np.int64)] = np.arange(len(tags))
    parts = [gmsh.model.mesh.getElements(2, s)[2][0].astype(np.int64).reshape(-1, 15) for s in surfaces]
    old = at[np.vstack(parts)]
    kept = np.unique(old)
    renumber = np.zeros(len(tags), dtype=np.int64)
    renumber[kept] = np.arange(len(kept))
    region = np.repeat(np.arange(len(parts)), [len(p) for p in parts])
    points = np.ascontiguousarray(xyz.reshape(-1, 3)[kept, :2])
    return Mesh(
        degree=4,
        points=points,
        cells=renumber[old],
        region=region,
        regions=regions,
        corners=np.zeros(0, dtype=np.int64),
    )


class _Drawing:
    def __enter__(self) -> Any:
        gmsh.initialize([], readConfigFiles=False, interruptible=False)
        gmsh.option.setNumber("General.Terminal", 0)
        return gmsh.model.occ

    def __exit__(self, *_: object) -> None:
        gmsh.finalize()


def parabolic_tail(energy_eV: Any, count: Any, axial_mass: float, points: int = 4001) -> Tail:
    """Subbands of one mass whose number, degeneracy included, is a straight line between the energies: in closed form.

    Where the slope of the number changes by c, c sqrt(m 2/hbar^2) (E - E_c)^(3/2) 2/(3 pi) states a length follow.
    """
    knots, number = np.asarray(energy_eV, dtype=float), np.asarray(count, dtype=float)
    changes = np.diff(np.diff(number) / np.diff(knots), prepend=0.0, append=0.0)
    grown = np.linspace(0, 1, points) ** 2
    grid = np.unique(np.concatenate([knots, *(e + 1.2 * grown for e in knots[[0, -1]])]))
    above = np.maximum(grid[:, None] - knots, 0.0)
    states = 2 / (3 * math.pi) * math.sqrt(axial_mass / HBAR2_OVER_2M0) * (above**1.5 @ changes)
    modes = np.interp(grid, knots, number)
    return Tail(grid, np.maximum.accumulate(modes), np.maximum.accumulate(np.maximum(states, 0.0)))


def round_mesh(size_nm: float = 3.0) -> Mesh:
    """A round core in a round shell, curved cells of degree 4."""
    with _Drawing() as occ:
        loops = [occ.addCurveLoop([occ.addCircle(0, 0, 0, r)]) for r in (RADIUS_NM, CORE_NM)]
        shell, core = occ.addPlaneSurface(loops), occ.addPlaneSurface(loops[1:])
        regions = (Region("layer 1", "Al0.3Ga0.7As", True, 0.0), Region("core", "GaAs", True, 0.0))
        return _gmsh_mesh([shell, core], regions, size_nm)


def rectangle_mesh(width_nm: float, height_nm: float, size_nm: float = 5.0) -> Mesh:
    """A rectangle around the origin, straight cells of degree 4."""
    with _Drawing() as occ:
        surface = occ.addRectangle(-width_nm / 2, -height_nm / 2, 0, width_nm, height_nm)
        return _gmsh_mesh([surface], (Region("core", "GaAs", True, 0.0),), size_nm)


def round_modes(points: np.ndarray, orders: list[tuple[int, int, bool]]) -> np.ndarray:
    """Modes of a round hard wall at RADIUS_NM, each normalised by its closed form.

    The integral of J_m(j r/R)^2 r over 0..R is R^2 J_(m+1)(j)^2 / 2 (DLMF 10.22.37).
    """
    r, angle = np.hypot(*points.T), np.arctan2(points[:, 1], points[:, 0])
    columns = []
    for m, n, sine in orders:
        zero = special.jn_zeros(m, n)[-1]
        around = math.pi if m else 2 * math.pi
        norm = math.sqrt(around / 2) * RADIUS_NM * abs(special.jv(m + 1, zero))
        turn = np.sin(m * angle) if sine else np.cos(m * angle)
        columns.append(special.jv(m, zero * np.minimum(r / RADIUS_NM, 1)) * turn / norm)
    return np.stack(columns, axis=1)


def round_orders(count: int) -> list[tuple[int, int, bool]]:
    """(m, n, sine) of the lowest entries of a round hard wall, pairs whole."""
    zeros = [(special.jn_zeros(m, 4)[n - 1], m, n) for m in range(8) for n in range(1, 5)]
    out: list[tuple[int, int, bool]] = []
    for _, m, n in sorted(zeros):
        out += [(m, n, False)] + ([(m, n, True)] if m else [])
    return out[:count]


def core_shell_problem(**carriers: Any) -> Problem:
    """The problem that goes with `core_shell_result`."""
    layer = Layer(thickness_nm=RADIUS_NM - CORE_NM, material="Al0.3Ga0.7As")
    return Problem(
        title="Round core in a shell",
        section=Section(shape=Circle(diameter_nm=2 * CORE_NM), material="GaAs", layers=(layer,)),
        carriers=Carriers(temperature_K=TEMPERATURES_K, **carriers),
        accuracy=Accuracy(subbands=10, energy_eV=1e-4),
    )


def rectangle_problem(width_nm: float, height_nm: float) -> Problem:
    """One subband of a plain rectangle at one temperature."""
    return Problem(
        title="Rectangle",
        section=Section(shape=Rectangle(width_nm=width_nm, height_nm=height_nm), material="GaAs"),
        carriers=Carriers(temperature_K=(300.0,)),
        accuracy=Accuracy(subbands=1, energy_eV=1e-4),
    )


def core_shell_result(count: int = 10, **changes: Any) -> Result:
    """A complete result: a round wire of mass 0.067, pairs as levels, a warning with its remedy."""
    mesh = round_mesh()
    orders = round_orders(count)
    energies = np.array([special.jn_zeros(m, n)[-1] ** 2 for m, n, _ in orders])
    energies *= HBAR2_OVER_2M0 / (MASS * RADIUS_NM**2)
    labels = list(dict.fromkeys((m, n) for m, n, _ in orders))
    subbands = tuple(
        Subband(
            index=i + 1,
            level=labels.index((m, n)) + 1,
            valley="zone centre",
            energy_eV=float(energy),
            error_eV=2.3e-6 * (i + 1),
            k_min_per_nm=0.0,
            axial_mass=MASS,
            axial_mass_error=1e-7,
            spin_degeneracy=2,
            valley_degeneracy=1,
            layer="core",
            shares={"core": 0.9 - 0.02 * i, "layer 1": 0.1 + 0.02 * i},
            bound=None,
            wall_effect_eV=None,
            line_density_per_nm=None,
        )
        for i, ((m, n, _), energy) in enumerate(zip(orders, energies, strict=True))
    )
    k = np.linspace(0, 0.6, 41)
    fermi = np.linspace(0, energies[-1] + 0.03, 301)
    thermal = [(t, (fermi[:, None] - energies) / (KB * t)) for t in TEMPERATURES_K]
    edges = np.linspace(0, energies[-1] + 0.03, 201)
    below = 4 * np.sqrt(MASS / HBAR2_OVER_2M0 * np.maximum(edges[:, None] - energies, 0)).sum(axis=1) / (2 * np.pi)
    barrier = np.where(mesh.region == 0, 0.3, 0.0)
    fields: dict[str, Any] = {
        "problem": core_shell_problem(),
        "mesh": mesh,
        "modes": round_modes(mesh.points, orders),
        "cell_fields": {
            "axial_mass_of_first_valleys_m0": np.where(mesh.region == 0, 0.09, MASS),
            "band_edge_of_first_valleys_eV": barrier,
        },
        "subbands": subbands,
        "spectrum": Spectrum(
            energy_eV=energies,
            error_eV=np.full(len(energies), 2.3e-6),
            axial_mass=np.full(len(energies), MASS),
            degeneracy=np.full(len(energies), 2),
            level=np.array([s.level for s in subbands]),
            listed=len(energies),
        ),
        "summary": MeshSummary(
            cells=len(mesh.cells),
            unknowns=len(mesh.points),
            degree=4,
            area_nm2=math.pi * RADIUS_NM**2,
            passes=2,
        ),
        "energy_zero_text": "the conduction edge of GaAs in core",
        "energy_zero_on_common_scale_eV": 0.0,
        "states_missed": 0,
        "accuracy_met": True,
        "sensitivities": (),
        "outline_sensitivity": OutlineSensitivity(np.zeros((0, 2, 2)), np.zeros(0), None),
        "dispersion": Dispersion(k, energies[:, None] + HBAR2_OVER_2M0 / MASS * k**2, 4e-8),
        "density_of_states": DensityOfStates(edges, np.diff(below) / np.diff(edges), np.unique(energies.round(12))),
        "conductance": tuple(ThermalCurve(t, fermi, special.expit(x).sum(axis=1)) for t, x in thermal),
        "density": tuple(ThermalCurve(t, fermi, special.expit(x).sum(axis=1)) for t, x in thermal),
        "line_density_per_nm": None,
        "verdict": Verdict("One channel up to 77 K. Steps are resolved at 4.2 K and merge at 300 K.", {}, (), ()),
        "warnings": (Warned("open-barrier", "The barrier is 4 nm thick and leaks.", "Make the shell thicker."),),
        "not_modelled": ("strain", "image charges"),
        "versions": {"wiresolve": "0.1.0"},
        "timings_s": {"solve": 0.1},
    }
    return Result(**{**fields, **changes})


def rectangle_result(width_nm: float = 20.0, height_nm: float = 10.0) -> Result:
    """One made-up mode x (w - x) y (h - y) of a rectangle, which cells of degree 4 hold exactly."""
    mesh = rectangle_mesh(width_nm, height_nm)
    x, y = mesh.points[:, 0] + width_nm / 2, mesh.points[:, 1] + height_nm / 2
    psi = 30 / (width_nm * height_nm) ** 2.5 * x * (width_nm - x) * y * (height_nm - y)
    other = core_shell_result(count=1)
    count = len(mesh.cells)
    return core_shell_result(
        count=1,
        problem=rectangle_problem(width_nm, height_nm),
        mesh=mesh,
        modes=psi[:, None],
        cell_fields={
            "axial_mass_of_first_valleys_m0": np.full(count, MASS),
            "band_edge_of_first_valleys_eV": np.zeros(count),
        },
        summary=MeshSummary(count, len(mesh.points), 4, width_nm * height_nm, 1),
        subbands=other.subbands,
    )


def charged_result(count: int = 3, kept_out: bool = False, **changes: Any) -> Result:
    """A round core in a shell under a wrap gate, its potential 0.1 V - r^2/(2000 nm^2 / V) and its density parabolas.

    `kept_out`: carriers are kept out of the shell, which has no band edge then.
    """
    given = core_shell_result(count)
    mesh, squared = given.mesh, (given.mesh.points**2).sum(axis=1)
    edge = np.where(mesh.region == 0, np.nan if kept_out else 0.3, 0.0)
    problem = Problem(
        title="Round core under a wrap gate",
        section=given.problem.section,
        carriers=Carriers(temperature_K=(77.0,)),
        accuracy=given.problem.accuracy,
        gates=(Gate("wrap", ("rim",), 0.25, lineup_voltage_V=0.05),),
    )
    charge = Charge(
        gates=(GateCharge("wrap", 0.25, 0.05, 0.0125),),
        fixed_per_nm=0.0875,
        pinned_per_nm=0.0,
        passes=4,
        residual_V=3.2e-8,
        gauss_error=4.5e-14,
        potential_V=0.1 - squared / 2000,
        density_per_nm3=1e-3 * np.maximum(1 - squared / CORE_NM**2, 0.0),
        potential_error_eV=np.full(count, 3.14e-5),
        given_eV=np.zeros(len(squared)),
    )
    fields: dict[str, Any] = {"problem": problem, "charge": charge, "line_density_per_nm": 0.1}
    fields["cell_fields"] = {**given.cell_fields, "band_edge_of_first_valleys_eV": edge}
    return replace(given, **(fields | changes))
