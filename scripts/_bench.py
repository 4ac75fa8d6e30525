"""Speed and memory, never part of a test: ratios in one run, medians, one BLAS thread.

    scripts/bench [cases|geometries|by-hand|semiconductors|gates|growth|start] ...

cases       time to certified energies of ten states, each to 1e-6 of the tenth (and a little beyond)
geometries  every file in geometries/ at its own accuracy, from solve() to the complete result
by-hand     against two scripts as one would write them by hand, at equal error on a circle
semiconductors  all valleys of a silicon wire, growing masses, a mesh from elsewhere, sensitivities beside their solve
gates       passes of gate sweeps beside damped iteration, and warm times of their points
growth      time and memory of one solve with bars and count, up to 200,000 unknowns
start       import, --help, and a cold `wiresolve solve geometries/circle.toml` with all outputs
"""

from __future__ import annotations

import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
import numpy as np

ROOT = Path(__file__).resolve().parents[1]
MASS, HBAR2_OVER_2M0 = 0.05, 0.0380998211096858
PROBE = f'[materials.p]\nelectron_mass = {MASS}\nconduction_edge = "0 eV"\n'
BARRIER = '[materials.b]\nelectron_mass = 0.0879\nconduction_edge = "0.25 eV"\n'
HEAVY = (
    '[materials.b]\nelectron_mass = 0.08\nconduction_edge = "0.52 eV"\n'
    '[materials.c]\nelectron_mass = 0.023\nconduction_edge = "0 eV"\n'
)
L_POINTS = "[[0, 0], [10, 0], [10, 10], [-10, 10], [-10, -10], [0, -10]]"

# name, section, tenth energy in eV (to set the accuracy by), relative accuracy, most milliseconds, most unknowns
CASES = (
    ("circle", f'shape = "circle"\ndiameter = "20 nm"\nmaterial = "p"\n{PROBE}', 0.375, 1e-6, 150, 3000),
    (
        "ellipse 2:1",
        f'shape = "ellipse"\nwidth = "20 nm"\nheight = "10 nm"\nmaterial = "p"\n{PROBE}',
        0.76, 1e-6, 200, 0,
    ),
    (
        "rounded rectangle",
        f'shape = "rectangle"\nwidth = "20 nm"\nheight = "10 nm"\ncorner_radius = "2 nm"\nmaterial = "p"\n{PROBE}',
        0.66, 1e-6, 200, 0,
    ),
    (
        "round core-shell",
        'shape = "circle"\ndiameter = "20 nm"\nmaterial = "p"\n[[section.layers]]\nthickness = "8 nm"\nmaterial = "b"\n'
        + PROBE + BARRIER,
        0.24, 1e-6, 300, 0,
    ),
    ("hexagon", f'shape = "hexagon"\nacross_corners = "20 nm"\nmaterial = "p"\n{PROBE}', 0.45, 1e-6, 400, 0),
    ("L", f'shape = "polygon"\nunit = "nm"\npoints = {L_POINTS}\nmaterial = "p"\n{PROBE}', 0.43, 1e-6, 500, 0),
    (
        "hexagonal core, heavy shell",
        'shape = "hexagon"\nacross_flats = "20 nm"\nmaterial = "c"\n'
        '[[section.layers]]\nthickness = "8 nm"\nmaterial = "b"\n' + HEAVY,
        0.43, 1e-6, 1500, 0,
    ),
    ("circle", f'shape = "circle"\ndiameter = "20 nm"\nmaterial = "p"\n{PROBE}', 0.375, 1e-9 / 8.5, 0, 0),
    ("hexagon", f'shape = "hexagon"\nacross_corners = "20 nm"\nmaterial = "p"\n{PROBE}', 0.45, 1e-8, 0, 0),
)  # fmt: skip


def wire_text(section: str, energy_eV: float, count: int = 10) -> str:
    return (
        f'title = "bench"\n[section]\n{section}[carriers]\ntemperature = "77 K"\n'
        f'[accuracy]\nsubbands = {count}\nenergy = "{energy_eV:.6g} eV"\n'
    )


def median_ms(work: Callable[[], object], runs: int = 7) -> tuple[float, object]:
    work()
    seconds, last = [], None
    for _ in range(runs):
        begun = time.perf_counter()
        last = work()
        seconds.append(time.perf_counter() - begun)
    return 1e3 * statistics.median(seconds), last


def verdict(value: float, limit: float) -> str:
    return "" if not limit else ("  within " if value <= limit else "  ABOVE ") + f"{limit:g}"


def cases() -> None:
    import wiresolve as ws
    from wiresolve.describe.wirefile import parse

    print("ten states, each to a share of the tenth; milliseconds to certified energies (and to the whole result)")
    for name, section, tenth, share, limit, most in CASES:
        problem = parse(wire_text(section, max(share * tenth, 1e-9)), Path("."))
        certified = []

        def work(problem=problem, certified=certified):  # type: ignore[no-untyped-def]
            result = ws.solve(problem)
            certified.append(1e3 * result.timings_s["subbands"])
            return result

        whole, result = median_ms(work, 5)
        energies = statistics.median(certified[1:])
        widest = float(result.errors_eV.max()) / tenth
        print(
            f"{name:28s} {share:7.0e}  {energies:6.0f} ms{verdict(energies, limit):14s} ({whole:5.0f} ms)  "
            f"{result.summary.unknowns:6d} unknowns{verdict(result.summary.unknowns, most)}  "
            f"{result.summary.passes} passes  widest bar {widest:.1e}  met {result.accuracy_met}"
        )


def geometries() -> None:
    import wiresolve as ws

    print("\ngeometries at their own accuracy, solve() to the complete result")
    for path in sorted((ROOT / "geometries").glob("*.toml")):
        problem = ws.load(path)
        whole, result = median_ms(lambda problem=problem: ws.solve(problem), 5)
        print(f"{path.name:36s} {whole:6.0f} ms{verdict(whole, 250)}   {result.summary.unknowns} unknowns")


def exact_circle(radius: float = 10.0, count: int = 10) -> np.ndarray:
    from scipy.special import jn_zeros

    zeros = sorted(float(z) ** 2 for m in range(9) for z in jn_zeros(m, 5) for _ in range(1 if m == 0 else 2))
    return np.array(zeros[:count]) * HBAR2_OVER_2M0 / (MASS * radius**2)


def straight_quadratic(size: float, radius: float = 10.0) -> np.ndarray:
    """As one would write it by hand: a straight-edged mesh, quadratic elements, eigsh as it comes."""
    import gmsh
    import scipy.sparse.linalg as sparse_linalg
    from skfem import Basis, ElementTriP2, MeshTri, condense
    from skfem.models.poisson import laplace, mass

    gmsh.initialize([], readConfigFiles=False, interruptible=False)
    gmsh.option.setNumber("General.Terminal", 0)
    gmsh.model.occ.addDisk(0, 0, 0, radius, radius)
    gmsh.model.occ.synchronize()
    gmsh.option.setNumber("Mesh.MeshSizeMax", size)
    gmsh.model.mesh.generate(2)
    tags, xyz, _ = gmsh.model.mesh.getNodes()
    _, _, nodes = gmsh.model.mesh.getElements(2)
    gmsh.finalize()
    place = np.zeros(int(tags.max()) + 1, dtype=int)
    place[tags.astype(int)] = np.arange(len(tags))
    cells = place[nodes[0].astype(int)].reshape(-1, 3)
    used = np.unique(cells)
    number = np.zeros(len(tags), dtype=int)
    number[used] = np.arange(len(used))
    basis = Basis(MeshTri(np.ascontiguousarray(xyz.reshape(-1, 3)[used, :2].T), number[cells].T.copy()), ElementTriP2())
    stiff, weight, _, _ = condense(laplace.assemble(basis), mass.assemble(basis), D=basis.get_dofs())
    values = sparse_linalg.eigsh(stiff, k=10, M=weight, sigma=0, return_eigenvectors=False)
    return np.sort(values) * HBAR2_OVER_2M0 / MASS


def finite_differences(points: int, radius: float = 10.0) -> np.ndarray:
    """As one would write it by hand: a grid, five-point differences, points outside left away."""
    import scipy.sparse as sparse
    import scipy.sparse.linalg as sparse_linalg

    x = np.linspace(-radius, radius, points + 2)[1:-1]
    inside = (x[:, None] ** 2 + x[None] ** 2 < radius**2).ravel()
    line = sparse.diags_array([-np.ones(points - 1), 2 * np.ones(points), -np.ones(points - 1)], offsets=[-1, 0, 1])
    one = sparse.eye_array(points)
    grid = sparse.csr_array(sparse.kron(line, one) + sparse.kron(one, line))[inside][:, inside]
    values = sparse_linalg.eigsh(sparse.csc_array(grid), k=10, sigma=0, return_eigenvectors=False)
    return np.sort(values) / (x[1] - x[0]) ** 2 * HBAR2_OVER_2M0 / MASS


def by_hand() -> None:
    import wiresolve as ws
    from wiresolve.describe.wirefile import parse

    exact = exact_circle()
    print("\nagainst scripts written by hand: ten states of a circle, largest relative error")
    section = f'shape = "circle"\ndiameter = "20 nm"\nmaterial = "p"\n{PROBE}'
    problem = parse(wire_text(section, 1e-5 * float(exact[9])), Path("."))
    ours, result = median_ms(lambda: ws.solve(problem))
    error = float(np.max(np.abs(result.energies_eV / exact - 1)))
    print(f"wiresolve, whole result        {ours:9.0f} ms   error {error:.1e}   {result.summary.unknowns} unknowns")
    for size in (0.32, 0.16, 0.08):
        begun = time.perf_counter()
        found = straight_quadratic(size)
        seconds = time.perf_counter() - begun
        error = float(np.max(np.abs(found / exact - 1)))
        print(
            f"straight quadratic, cells {size:4.2f} nm {1e3 * seconds:7.0f} ms   error {error:.1e}  "
            f" {1e3 * seconds / ours:.0f} x"
        )
    for points in (100, 200, 400, 800):
        begun = time.perf_counter()
        found = finite_differences(points)
        seconds = time.perf_counter() - begun
        error = float(np.max(np.abs(found / exact - 1)))
        print(f"differences, {points:4d} points across {1e3 * seconds:7.0f} ms   error {error:.1e}")


SILICON = """[section]
shape = "circle"
diameter = "6 nm"
material = "Si"
[orientation]
axis = [1, 1, 0]
up = [0, 0, 1]
[carriers]
temperature = "300 K"
[accuracy]
subbands = 20
energy = "0.01 meV"
"""
GROWING = """[section]
shape = "hexagon"
across_flats = "20 nm"
material = "InAs"
[[section.layers]]
thickness = "8 nm"
material = "InP"
[carriers]
temperature = "77 K"
[accuracy]
subbands = 10
energy = "0.1 meV"
"""
IMPORTED = """[section]
shape = "mesh"
file = "large.msh"
unit = "nm"
[section.group_materials]
channel = "GaAs"
cladding = "Al0.3Ga0.7As"
[carriers]
temperature = "77 K"
[accuracy]
subbands = 10
energy = "0.1 meV"
"""


def semiconductors() -> None:
    import wiresolve as ws
    from wiresolve.describe.wirefile import parse

    print("\nsemiconductors, solve() to the complete result; sensitivities beside the rest of the solve")
    for name, text, limit in (("silicon, 6 nm, 20 entries", SILICON, 800), ("InAs hexagon in InP", GROWING, 0)):
        problem = parse(text, Path("."))
        shares = []

        def work(problem=problem, shares=shares):  # type: ignore[no-untyped-def]
            result = ws.solve(problem)
            moved = result.timings_s["sensitivities"]
            shares.append(moved / (result.timings_s["total"] - moved))
            return result

        whole, result = median_ms(work, 5)
        share = statistics.median(shares[1:])
        print(f"{name:28s} {whole:6.0f} ms{verdict(whole, limit)}   {result.summary.unknowns} unknowns", end="")
        print(f"   sensitivities {100 * share:.1f} %{verdict(share, 0.1)}")
    with tempfile.TemporaryDirectory() as folder:
        cells = large_mesh(Path(folder) / "large.msh")
        (Path(folder) / "wire.toml").write_text(IMPORTED, encoding="utf-8")
        whole, result = median_ms(lambda: ws.solve(ws.load(Path(folder) / "wire.toml")), 3)
    print(
        f"mesh of {cells} second-order cells {whole:6.0f} ms{verdict(whole, 3000)}   {result.summary.unknowns} unknowns"
    )


def large_mesh(target: Path) -> int:
    """A round core in a shell in 20,000 cells of second order; returns their number."""
    import gmsh

    gmsh.initialize([], readConfigFiles=False, interruptible=False)
    try:
        gmsh.option.setNumber("General.Terminal", 0)
        gmsh.option.setNumber("Mesh.MeshSizeMax", 0.304)
        inner, outer = (gmsh.model.occ.addCurveLoop([gmsh.model.occ.addCircle(0, 0, 0, r)]) for r in (8, 16))
        core = gmsh.model.occ.addPlaneSurface([inner])
        shell = gmsh.model.occ.addPlaneSurface([outer, inner])
        gmsh.model.occ.synchronize()
        gmsh.model.addPhysicalGroup(2, [core], name="channel")
        gmsh.model.addPhysicalGroup(2, [shell], name="cladding")
        gmsh.model.mesh.generate(2)
        gmsh.model.mesh.setOrder(2)
        gmsh.write(str(target))
        _, tags, _ = gmsh.model.mesh.getElements(2)
        return sum(len(t) for t in tags)
    finally:
        gmsh.finalize()


def growth() -> None:
    print("\ngrowth: a circle, 14 states with bars, and their count")
    sizes, seconds = [], []
    for size in (1.5, 0.6, 0.3, 0.171):
        found = subprocess.run(
            [sys.executable, __file__, "--one", str(size)], capture_output=True, text=True, check=True
        )
        unknowns, took, memory = (float(word) for word in found.stdout.split())
        sizes.append(unknowns)
        seconds.append(took)
        print(f"{unknowns:8.0f} unknowns   {took:6.2f} s   {memory:5.2f} GB at most")
    power = float(np.polyfit(np.log(sizes[1:]), np.log(seconds[1:]), 1)[0])
    print(f"time grows like n^{power:.2f}{verdict(power, 1.3)}; the largest{verdict(seconds[-1], 20)} s")


def one(size: float) -> None:
    from wiresolve.bands.effective_mass import coefficients
    from wiresolve.describe.section import Section
    from wiresolve.describe.shapes import Circle
    from wiresolve.fem import eigen
    from wiresolve.fem.meshing import Mesher, SizeField
    from wiresolve.physics.pencil import Operator
    from wiresolve.physics.solved import solve_on

    begun = time.perf_counter()
    with Mesher(Section(Circle(diameter_nm=20), "p").pieces()) as mesher:
        coarse, fine = mesher.mesh(SizeField(size))
    operator = Operator((coefficients(np.eye(3) / MASS, 0.0),))
    solved = solve_on(coarse, fine, lambda mesh: operator, 14)
    between = float(solved.energy_eV[9:11].mean())
    assert eigen.count_below(solved.pencil.h0, solved.pencil.mass, between) == 10
    seconds = time.perf_counter() - begun
    print(len(solved.pencil.kept), seconds, most_memory())


def most_memory() -> float:
    """Most memory of this process in GB, by the kernel's own mark where there is one: the other is inherited."""
    status = Path("/proc/self/status")
    if status.exists():
        return (
            next(int(row.split()[1]) for row in status.read_text().splitlines() if row.startswith("VmHWM")) * 1024 / 1e9
        )
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024 / 1e9


def start() -> None:
    print("\nstart, whole processes, wall time")

    def command(*words: str) -> float:
        return median_ms(lambda: subprocess.run([sys.executable, *words], check=True, capture_output=True), 5)[0]

    empty = command("-c", "pass")
    print(f"import wiresolve (without Python's own start) {command('-c', 'import wiresolve') - empty:6.0f} ms", end="")
    print(verdict(command("-c", "import wiresolve") - empty, 150))
    shown = command("-m", "wiresolve", "--help")
    print(f"wiresolve --help                              {shown:6.0f} ms{verdict(shown, 400)}")
    with tempfile.TemporaryDirectory() as folder:
        words = (
            "-m",
            "wiresolve",
            "solve",
            str(ROOT / "geometries/circle.toml"),
            "--out",
            f"{folder}/out",
            "--replace",
        )
        cold = command(*words)
    print(f"wiresolve solve geometries/circle.toml        {cold:6.0f} ms{verdict(cold, 3000)}")


def gates() -> None:
    from _bench_gates import gates as run

    run()


PARTS = {
    "cases": cases,
    "geometries": geometries,
    "by-hand": by_hand,
    "semiconductors": semiconductors,
    "gates": gates,
    "growth": growth,
    "start": start,
}


def main() -> int:
    words = sys.argv[1:]
    if words[:1] == ["--one"]:
        one(float(words[1]))
        return 0
    unknown = [word for word in words if word not in PARTS]
    if unknown:
        print(__doc__)
        return 2
    for name in words or PARTS:
        PARTS[name]()
    return 0


if __name__ == "__main__":
    sys.exit(main())
