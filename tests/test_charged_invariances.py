"""What must not change, or change in a known way, for wires with gates and charge."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest

from tests.charged_wires import channel, insulating, wrapped
from wiresolve.describe.doping import Doping
from wiresolve.describe.gates import Gate, Insulator, Surface
from wiresolve.describe.materials import Material
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Polygon, Rectangle, Shape
from wiresolve.result import Result
from wiresolve.solve import solve

MASS = (0.05, 0.05, 0.05)
ACCURACY = Accuracy(4, 1e-4)


@cache
def solved(problem: Problem) -> Result:
    """The result, whose accuracy must have been met."""
    found = solve(problem)
    assert found.accuracy_met
    return found


def carriers(problem: Problem) -> float:
    """Electrons per nm."""
    density = solved(problem).line_density_per_nm
    assert density is not None
    return density


def close(one: Result, other: Result) -> None:
    """The energies of two results agree within their bars, which are no wider than asked for."""
    allowed = one.errors_eV + other.errors_eV
    assert (np.abs(one.energies_eV - other.energies_eV) <= allowed).all()


def isolated(doping: Doping, kelvin: float, materials: tuple[Material, ...] | None = None) -> Problem:
    """A doped round wire with no field outside."""
    return Problem(
        title="isolated",
        section=Section(shape=Circle(diameter_nm=16.0), material="channel", doping=doping),
        carriers=Carriers(temperature_K=(kelvin,)),
        accuracy=ACCURACY,
        materials=materials or (channel(MASS, 12.0),),
    )


AREA_nm2 = np.pi * 64


@pytest.mark.parametrize("temperature", [300.0, 4.2, 0.0])
def test_an_isolated_section_is_neutral(temperature: float) -> None:
    problem = isolated(Doping(donors_per_nm3=2e-3, acceptors_per_nm3=5e-4), temperature)
    assert carriers(problem) == pytest.approx(1.5e-3 * AREA_nm2, rel=1e-8)


def partly(donors_per_nm3: float, depth_eV: float = 0.03) -> Doping:
    """Donors that keep some electrons."""
    return Doping(donors_per_nm3=donors_per_nm3, ionisation="partial", donor_depth_eV=depth_eV)


@pytest.mark.parametrize("temperature", [300.0, 77.0])
def test_donors_that_keep_electrons_are_neutral_too(temperature: float) -> None:
    problem = isolated(partly(2e-3), temperature)
    held = carriers(problem)
    charge = solved(problem).charge
    assert charge is not None
    assert charge.gauss_error <= 1e-8
    assert 1e-6 * 2e-3 * AREA_nm2 < held < 0.999 * 2e-3 * AREA_nm2


def test_warmer_donors_give_more() -> None:
    assert carriers(isolated(partly(2e-3), 300.0)) > carriers(isolated(partly(2e-3), 77.0))


def test_cold_donors_below_the_first_level_keep_their_electrons() -> None:
    """Without temperature the electrons stay where they are lowest: on donors far below the first level."""
    assert carriers(isolated(partly(1e-4, 0.2), 0.0)) == 0


def gated(
    volts: tuple[float, float] = (0.3, -0.2),
    lineup_V: float = 0.0,
    sides: tuple[str, str] = ("left", "top"),
    shape: Shape | None = None,
    pinned: str | None = None,
    kappa: float = 12.0,
    valleys: int = 1,
    donors: float = 1e-3,
    kelvin: float = 77.0,
) -> Problem:
    """A rectangle with two gates at different voltages, each behind 2 nm of oxide."""
    gates = tuple(
        Gate(name, side, voltage_V=v, lineup_voltage_V=lineup_V, insulator=Insulator("oxide", 2.0))
        for name, side, v in zip(("one", "two"), sides, volts, strict=True)
    )
    return Problem(
        title="two gates",
        section=Section(
            shape=shape or Rectangle(width_nm=14.0, height_nm=10.0),
            material="channel",
            doping=Doping(donors_per_nm3=donors),
        ),
        carriers=Carriers(temperature_K=(kelvin,)),
        accuracy=ACCURACY,
        materials=(channel(MASS, kappa, valleys), insulating(kappa / 3)),
        gates=gates,
        surfaces=(Surface((pinned,), pinned_at_eV=0.1),) if pinned else (),
    )


def test_voltages_and_lineups_shifted_together_change_nothing() -> None:
    plain, shifted = solved(gated()), solved(gated((0.8, 0.3), lineup_V=0.5))
    assert shifted.energies_eV == pytest.approx(plain.energies_eV, abs=1e-10)
    assert carriers(gated((0.8, 0.3), lineup_V=0.5)) == pytest.approx(carriers(gated()), rel=1e-9)


def test_voltages_without_lineups_shift_levels() -> None:
    """The source's Fermi level is what voltages count from: the shift is no symmetry."""
    assert solved(gated((0.4, -0.1))).energies_eV[0] < solved(gated()).energies_eV[0] - 1e-3


def test_a_mirror_image_has_the_same_levels() -> None:
    close(solved(gated()), solved(gated(sides=("right", "top"))))
    assert carriers(gated(sides=("right", "top"))) == pytest.approx(carriers(gated()), rel=1e-4)


def test_a_mirror_image_of_a_pinned_trapezoid_has_the_same_levels() -> None:
    right = Polygon(points_nm=((0, 0), (16, 0), (12, 9), (0, 9)))
    left = Polygon(points_nm=((0, 0), (16, 0), (16, 9), (4, 9)))
    one, other = (
        gated(shape=right, sides=("side 2", "side 3"), pinned="side 4"),
        gated(shape=left, sides=("side 4", "side 3"), pinned="side 2"),
    )
    close(solved(one), solved(other))
    assert carriers(one) == pytest.approx(carriers(other), rel=1e-4)


def test_a_wire_turned_with_its_gates_has_the_same_levels() -> None:
    """By 90 degrees, and by 30 with gates on named sides."""
    upright = Rectangle(width_nm=14.0, height_nm=10.0)
    sides = ("side 4", "side 3")
    one, other = gated(shape=upright, sides=sides), gated(shape=replace(upright, rotation_deg=30.0), sides=sides)
    close(solved(one), solved(other))
    assert carriers(one) == pytest.approx(carriers(other), rel=1e-4)


def test_sides_are_named_as_seen() -> None:
    """Sides 4 and 3 of an upright rectangle are left and top: counted counter-clockwise from the bottom."""
    close(solved(gated(sides=("side 4", "side 3"))), solved(gated()))


@pytest.mark.parametrize("scale", [2, 3])
def test_permittivities_and_charges_scaled_together(scale: int) -> None:
    """Twice the permittivities, donors and valleys: the same potential and levels, twice the carriers."""
    plain, scaled = gated(), gated(kappa=12.0 * scale, valleys=scale, donors=1e-3 * scale)
    assert solved(scaled).energies_eV == pytest.approx(solved(plain).energies_eV, abs=1e-8)
    assert carriers(scaled) == pytest.approx(scale * carriers(plain), rel=1e-8)


def test_lengths_scaled_with_masses_and_charge() -> None:
    """Lengths times s, masses along x and y over s^2, donors over s^2: the same levels; with the axial mass as it is
    each level holds the same per length, and the charge per area falls with s^2 as the donors' does."""
    s = 1.5
    small = wrapped(
        Circle(diameter_nm=10.0), (channel((0.09, 0.09, 0.2), 12.0), insulating(4.0)), 2.0, 77.0, ACCURACY, 0.3,
        Doping(donors_per_nm3=1e-3),
    )  # fmt: skip
    masses = (0.09 / s**2, 0.09 / s**2, 0.2)
    large = wrapped(
        Circle(diameter_nm=10.0 * s), (channel(masses, 12.0), insulating(4.0)), 2.0 * s, 77.0, ACCURACY, 0.3,
        Doping(donors_per_nm3=1e-3 / s**2),
    )  # fmt: skip
    close(solved(small), solved(large))
    assert carriers(large) == pytest.approx(carriers(small), rel=1e-4)


def test_a_section_in_two_layers_of_one_material() -> None:
    whole = wrapped(
        Circle(diameter_nm=12.0), (channel(MASS, 12.0), insulating(4.0)), 2.0, 77.0, ACCURACY, 0.4,
        Doping(donors_per_nm3=1e-3),
    )  # fmt: skip
    layer = Layer(2.0, "channel", doping=Doping(donors_per_nm3=1e-3))
    section = replace(whole.section, shape=Circle(diameter_nm=8.0), layers=(layer,))
    split = replace(whole, section=section)
    close(solved(whole), solved(split))
    assert carriers(split) == pytest.approx(carriers(whole), rel=1e-4)


def test_a_patch_of_the_sections_own_material() -> None:
    plain = gated()
    patch = Patch(
        Rectangle(width_nm=5.0, height_nm=4.0), "channel", center_nm=(1.0, -1.0), doping=Doping(donors_per_nm3=1e-3)
    )
    patched = replace(plain, section=replace(plain.section, patches=(patch,)))
    close(solved(plain), solved(patched))
    assert carriers(patched) == pytest.approx(carriers(plain), rel=1e-4)


def test_no_charge_leaves_the_levels_of_an_uncharged_wire() -> None:
    """Far below pinch-off the potential is flat at the gate's: levels are those without a gate, shifted."""
    gate = wrapped(Circle(diameter_nm=12.0), (channel(MASS, 12.0), insulating(4.0)), 2.0, 4.2, ACCURACY, -0.5)
    alone = replace(gate, gates=(), materials=gate.materials[:1])
    assert not alone.charged
    close(solved(gate), replace(solved(alone), subbands=_raised(solved(alone), 0.5)))
    assert carriers(gate) < 1e-200


def _raised(result: Result, by_eV: float) -> tuple[object, ...]:
    return tuple(replace(s, energy_eV=s.energy_eV + by_eV) for s in result.subbands)


@pytest.mark.parametrize("carriers_there", ["excluded", "admitted"])
def test_an_insulator_drawn_as_a_layer(carriers_there: str) -> None:
    """A gate around its own insulator, and a gate on the rim of a section whose outer layer is that insulator."""
    oxide = Material.given("oxide", electron_mass=0.5, conduction_edge_eV=3.0, permittivity=4.0)
    base = wrapped(Circle(diameter_nm=12.0), (channel(MASS, 12.0), oxide), 2.0, 77.0, Accuracy(2, 2e-3), 0.3)
    with_insulator = replace(base, gates=(replace(base.gates[0], insulator=Insulator("oxide", 2.0, carriers_there)),))
    layer = Layer(2.0, "oxide", carriers=carriers_there)
    section = replace(base.section, layers=(layer,))
    with_layer = replace(base, section=section, gates=(replace(base.gates[0], insulator=None),))
    close(solved(with_insulator), solved(with_layer))
    assert carriers(with_insulator) == pytest.approx(carriers(with_layer), rel=1e-3)


def test_a_gate_takes_all_that_cold_donors_give() -> None:
    """Donors 0.1 eV below the edge, the gate at -0.4 V: all are charged, and the gate holds their electrons."""
    problem = wrapped(
        Circle(diameter_nm=12.0), (channel(MASS, 12.0), insulating(4.0)), 2.0, 0.0, ACCURACY, -0.4, partly(2e-4, 0.1)
    )
    charge = solved(problem).charge
    assert charge is not None
    assert carriers(problem) == 0
    assert [g.charge_per_nm for g in charge.gates] == pytest.approx([-2e-4 * np.pi * 36], rel=1e-8)
