"""The whole problem: one scale of edges, the energy zero, its digest, orientation and potential."""

from __future__ import annotations

import math
import pickle
from collections.abc import Callable
from dataclasses import replace
from functools import partial

import numpy as np
import pytest

from wiresolve.describe import crystal
from wiresolve.describe.materials import GIVEN_SCALE, Material, look_up
from wiresolve.describe.problem import Accuracy, Carriers, Orientation, Potential, Problem
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Hexagon, Rectangle
from wiresolve.errors import InputError

COLD = Carriers(temperature_K=(4.2, 77))
WELL = Material.given("well", electron_mass=0.05, conduction_edge_eV=0.0)
BARRIER = Material.given("barrier", electron_mass=0.1, conduction_edge_eV=0.3)
BARE = Material.given("bare", electron_mass=0.05)
OXIDE = Material.given("oxide", permittivity=3.9)


def wire(core: str = "GaAs", *layers: Layer, materials: tuple[Material, ...] = (), **section: object) -> Problem:
    return Problem("wire", Section(Circle(16), core, layers, **section), COLD, materials=materials)  # type: ignore[arg-type]


def test_edges_of_the_table_are_kept() -> None:
    problem = wire("GaAs", Layer(8, "Al0.3Ga0.7As"))
    found = problem.resolved_materials()
    assert list(found) == ["GaAs", "Al0.3Ga0.7As"]
    assert replace(found["GaAs"], notes=()) == look_up("GaAs", 4.2)
    text, value = problem.energy_zero()
    assert "GaAs (core)" in text
    assert value == look_up("GaAs", 4.2).conduction_edge_eV


def test_lattice_temperature_is_the_first_of_the_carriers_unless_given() -> None:
    assert wire().lattice_temperature_K == 4.2
    warm = wire(lattice_temperature_K=300.0)
    assert warm.lattice_temperature_K == 300
    assert replace(warm.resolved_materials()["GaAs"], notes=()) == look_up("GaAs", 300)


def test_one_material_needs_no_edge() -> None:
    problem = wire("bare", Layer(2, "oxide", carriers="excluded"), materials=(BARE, OXIDE))
    assert problem.resolved_materials()["bare"].conduction_edge_eV == 0
    assert problem.energy_zero() == ("conduction edge of bare (core)", None)
    # A void core and a hidden piece do not count as materials.
    tube = wire("void", Layer(2, "bare"), materials=(BARE,))
    assert list(tube.resolved_materials()) == ["bare"]
    covered = Section(Circle(10), "GaAs", patches=(Patch(Circle(12), "bare"),))
    assert Problem("covered", covered, COLD, materials=(BARE,)).energy_zero()[0] == "conduction edge of bare (patch 1)"


def test_energy_zero_is_the_lowest_shifted_edge() -> None:
    shifted = wire("well", Layer(2, "barrier", offset_eV=-0.4), materials=(WELL, BARRIER))
    text, value = shifted.energy_zero()
    assert text == "conduction edge of barrier (layer 1), shifted by -0.4 eV"
    assert value == pytest.approx(-0.1)
    excluded = wire("well", Layer(2, "barrier"), materials=(WELL, BARRIER), carriers="excluded")
    assert excluded.energy_zero() == ("conduction edge of barrier (layer 1)", 0.3)
    around = wire("barrier", materials=(WELL, BARRIER), outside="well")
    assert around.energy_zero() == ("conduction edge of well (outside)", 0.0)
    assert around.resolved_materials()["well"].edge_scale == GIVEN_SCALE


@pytest.mark.parametrize(
    ("build", "field", "words"),
    [
        (lambda: wire("GaAz"), "section.material", "'GaAs'"),
        (lambda: wire("GaAs", Layer(2, "AlAz")), r"section.layers\[1\].material", "'AlAs'"),
        (lambda: wire("wel", materials=(WELL,)), "section.material", "'well'"),
        (lambda: wire(outside="GaAz"), "section.outside", "'GaAs'"),
        (lambda: wire("GaAs", Layer(2, "well"), materials=(WELL,)), "section", "no common offset scale"),
        (lambda: wire("GaAs", materials=(WELL,), outside="well"), "section", "no common offset scale"),
        (
            lambda: wire("well", Layer(2, "bare"), materials=(WELL, BARE)),
            "materials.bare.conduction_edge",
            "is missing",
        ),
        (lambda: wire("GaAs", Layer(2, "bare"), materials=(BARE,)), "materials.bare.conduction_edge", "one scale"),
        (lambda: wire("oxide", materials=(OXIDE,)), "section", "no mass"),
        (lambda: wire("GaAs", Layer(2, "oxide"), materials=(OXIDE,)), r"section.layers\[1\]", "no mass"),
        (lambda: wire("GaAs", materials=(OXIDE,), outside="oxide"), r"section\.outside", "no mass.*hard wall"),
        (lambda: wire("well", materials=(WELL, WELL)), "materials", "names of their own"),
        (lambda: wire("InSb", lattice_temperature_K=1900.0), "section.lattice_temperature", "closes"),
        (lambda: Problem("", Section(Circle(9), "GaAs"), COLD), "title", "empty"),
        (lambda: Problem("a\nb", Section(Circle(9), "GaAs"), COLD), "title", "printable"),
        (lambda: Problem("a", Circle(9), COLD), "section", "must be a Section"),  # type: ignore[arg-type]
        (lambda: Carriers("holes", temperature_K=(4,)), "kind", "bands mix"),
        (lambda: Carriers("muons", temperature_K=(4,)), "kind", '"electrons"'),
        (lambda: Carriers(temperature_K=()), "temperature", "one to 20"),
        (lambda: Carriers(temperature_K=(4, 4.0)), "temperature", "twice"),
        (lambda: Carriers(temperature_K=(-3,)), "temperature", "between 0 K and 2000 K"),
        (lambda: Carriers(temperature_K=(4,), fermi_level_eV=math.nan), "fermi_level", "finite"),
        (lambda: Accuracy(subbands=0), "subbands", "whole number from 1 to 500"),
        (lambda: Accuracy(subbands=4.5), "subbands", "whole number"),  # type: ignore[arg-type]
        (lambda: Accuracy(subbands=True), "subbands", "whole number"),
        (lambda: Accuracy(subbands=10**6), "subbands", "whole number"),
        (lambda: Accuracy(energy_eV=0), "energy", "must be positive"),
        (lambda: Accuracy(energy_eV=1e-43), "energy", "between 1e-09 eV and 1 eV"),
        (lambda: Potential(), "potential", "is empty"),
        (lambda: Potential(field_V_per_nm=(1, 2, 3)), "field", "two values"),  # type: ignore[arg-type]
        (lambda: Potential(field_V_per_nm=(50, 0)), "field", "between -10 V/nm"),
        (lambda: Potential(harmonic_eV=(0, 0)), "harmonic", "no spacing"),
        (lambda: Potential(harmonic_eV=(-1, 0)), "harmonic.x", "between 0 eV"),
        (lambda: Potential(harmonic_eV=(1e-9, 0.1)), "harmonic.x", "at least 1e-6 eV"),
    ],
)
def test_what_is_refused(build: Callable[[], object], field: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        build()
    assert caught.match(f"^{field}: ")


def test_numbers_of_numpy_are_numbers() -> None:
    plain = Problem("a", Section(Circle(16.0), "GaAs"), Carriers(temperature_K=(4.0,)), Accuracy(7, 0.5))
    typed = Section(Circle(np.float64(16)), "GaAs")
    carriers, accuracy = Carriers(temperature_K=(np.int64(4),)), Accuracy(np.int64(7), np.float32(0.5))  # type: ignore[arg-type]
    assert Problem("a", typed, carriers, accuracy).digest == plain.digest


def test_problems_are_values() -> None:
    one = wire("GaAs", Layer(8, "Al0.3Ga0.7As"))
    two = wire("GaAs", Layer(8.0, "Al0.3Ga0.7As"))
    assert one == two
    assert hash(one) == hash(two)
    assert one.digest == two.digest
    copy = pickle.loads(pickle.dumps(one))
    assert copy == one
    assert copy.digest == one.digest
    assert len(one.digest) == 64


def test_every_part_of_a_problem_changes_its_digest() -> None:
    one = wire("GaAs", Layer(8, "Al0.3Ga0.7As"), materials=(WELL,))
    section = one.section
    others = [
        replace(one, title="another"),
        replace(one, carriers=Carriers(temperature_K=(4.2,))),
        replace(one, carriers=replace(COLD, fermi_level_eV=0.1)),
        replace(one, accuracy=Accuracy(9)),
        replace(one, accuracy=Accuracy(10, 1e-5)),
        replace(one, materials=()),
        replace(one, materials=(replace(WELL, valleys=BARRIER.valleys),)),
        replace(one, orientation=Orientation((1, 1, 0), (0, 0, 1))),
        replace(one, potential=Potential(field_V_per_nm=(0.01, 0))),
        replace(one, potential=Potential(harmonic_eV=(0.01, 0))),
        replace(one, section=replace(section, shape=Circle(math.nextafter(16, 17)))),
        replace(one, section=replace(section, shape=Hexagon(across_flats_nm=16))),
        replace(one, section=replace(section, offset_eV=0.1)),
        replace(one, section=replace(section, outside="AlAs")),
        replace(one, section=replace(section, lattice_temperature_K=5.0)),
        replace(one, section=replace(section, layers=(Layer(8, "Al0.3Ga0.7As", carriers="excluded"),))),
        replace(one, section=replace(section, patches=(Patch(Circle(2), "GaAs"),))),
        replace(one, section=replace(section, patches=(Patch(Circle(2), "GaAs", (1, 0)),))),
    ]
    digests = {problem.digest for problem in (one, *others)}
    assert len(digests) == len(others) + 1
    assert replace(one, section=replace(section, lattice_temperature_K=4.2)).digest == one.digest


SLOPE = 0.01


def ramp(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    return SLOPE * x + np.cos(y)


def test_functions_are_known_by_name_or_code(monkeypatch: pytest.MonkeyPatch) -> None:
    def digest(potential: Potential) -> str:
        return replace(wire(), potential=potential).digest

    first = digest(Potential(function=ramp))
    assert digest(Potential(function=ramp)) == first
    assert digest(Potential(function=lambda x, y: 0.02 * x)) != digest(Potential(function=lambda x, y: 0.03 * x))
    monkeypatch.setitem(ramp.__globals__, "SLOPE", 0.02)
    assert digest(Potential(function=ramp)) != first

    def scaled(by: float) -> Potential:
        return Potential(function=lambda x, y: by * x)

    assert digest(scaled(0.1)) != digest(scaled(0.2))
    assert digest(scaled(0.1)) == digest(scaled(0.1))
    assert digest(Potential(function=ramp, name="a")) == digest(Potential(function=lambda x, y: y, name="a"))
    table = np.linspace(0, 1, 5)
    assert digest(Potential(function=lambda x, y: np.interp(x, table, table))) != first
    with pytest.raises(InputError, match="must have a name"):
        Potential(function=partial(ramp, y=0))
    thing = object()
    with pytest.raises(InputError, match="depends on a object"):
        Potential(function=lambda x, y: x * id(thing))


def test_orientation_proposes_the_nearest_up() -> None:
    assert Orientation((1, 1, 0), (0, 0, 1)).up == (0, 0, 1)
    # By hand: up less its part along the axis is (-1, -1, 2) / 3 and (-1, 1, 0) / 2.
    for axis, up, better in (((1, 1, 1), (0, 0, 1), (-1, -1, 2)), ((1, 1, 0), (0, 1, 0), (-1, 1, 0))):
        with pytest.raises(InputError, match=r"^orientation\.up: must be at right angles to the axis") as caught:
            replace(wire("GaAs"), orientation=Orientation(axis, up))
        assert f"the nearest is up = {list(better)}" in str(caught.value)
    with pytest.raises(InputError, match="axis: must not be zero"):
        Orientation((0, 0, 0), (0, 0, 1))
    with pytest.raises(InputError, match=r"up\[2\]: must be a whole number"):
        Orientation((1, 0, 0), (0, 0.5, 1))  # type: ignore[arg-type]
    with pytest.raises(InputError, match="axis: must be three whole numbers"):
        Orientation("110", (0, 0, 1))  # type: ignore[arg-type]


def test_proposals_are_orthogonal_and_near() -> None:
    random = np.random.default_rng(3)
    for axis, up in random.integers(-9, 10, (200, 2, 3)).tolist():
        if not any(axis) or not any(up):
            continue
        found = np.array(crystal.nearest_orthogonal(tuple(axis), tuple(up)))
        assert found.any()
        assert found @ axis == 0
        across = np.array(up) - np.array(axis) * (np.dot(axis, up) / np.dot(axis, axis))
        if np.linalg.norm(across) > 1e-9:
            cosine = found @ across / np.linalg.norm(found) / np.linalg.norm(across)
            assert math.degrees(math.acos(min(1.0, cosine))) < 5.6


def test_rotated_and_unrotated_sections_differ() -> None:
    flat = Problem("wire", Section(Rectangle(20, 10), "GaAs"), COLD)
    upright = Problem("wire", Section(Rectangle(20, 10, rotation_deg=90), "GaAs"), COLD)
    assert flat.digest != upright.digest
    swapped = Section(Rectangle(10, 20), "GaAs").pieces()[0].loop.sample(1)
    assert sorted(map(tuple, upright.section.pieces()[0].loop.sample(1))) == sorted(map(tuple, swapped))
