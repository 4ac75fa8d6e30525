"""Problems of the self-consistent wires that the separate solvers know, and what the package finds for them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from tests.independent_round import Round
from tests.independent_square import Square
from wiresolve.describe.doping import Doping
from wiresolve.describe.gates import Gate, Insulator
from wiresolve.describe.materials import Material
from wiresolve.describe.operation import Voltages
from wiresolve.describe.problem import Accuracy, Carriers, Problem
from wiresolve.describe.section import Section
from wiresolve.describe.shapes import Circle, Rectangle, Shape
from wiresolve.physics.charged_subbands import ChargedSubbands, Meshes, certify_charged
from wiresolve.physics.charged_wire import ChargedWire
from wiresolve.physics.selfconsistent import Balanced, Stage, balance
from wiresolve.physics.wire import Wire

GATE = "wrap"


def channel(masses: tuple[float, float, float], permittivity: float, valleys: int = 1, **more: float) -> Material:
    """Masses along x, y and the wire in m0, with the band edge at the energy zero."""
    inverse = np.diag(1 / np.array(masses)).tolist()
    return Material.given(
        "channel",
        inverse_mass=inverse,
        conduction_edge_eV=more.get("edge_eV", 0.0),
        permittivity=permittivity,
        valley_degeneracy=valleys,
        gap_eV=more.get("gap_eV"),
    )


def insulating(permittivity: float) -> Material:
    """A material that carriers stay out of."""
    return Material.given("oxide", permittivity=permittivity)


def wrapped(
    shape: Shape,
    materials: tuple[Material, Material],
    insulator_nm: float,
    temperature_K: float,
    accuracy: Accuracy,
    gate_V: float = 0.0,
    doping: Doping | None = None,
    sweep: Voltages | None = None,
) -> Problem:
    """A section of "channel" in an insulator with the gate all around, whose scale begins at the band edge."""
    gate = Gate(GATE, "rim", voltage_V=gate_V, lineup_voltage_V=0.0, insulator=Insulator("oxide", insulator_nm))
    return Problem(
        title="self-consistent wire",
        section=Section(shape=shape, material="channel", doping=doping or Doping()),
        carriers=Carriers(temperature_K=(temperature_K,)),
        accuracy=accuracy,
        materials=materials,
        gates=(gate,),
        voltages=sweep,
    )


def of_round(wire: Round, subbands: int, energy_eV: float, sweep: Voltages | None = None) -> Problem:
    """The problem of a round wire of `independent_round`."""
    masses = (wire.mass, wire.mass, wire.axial_mass)
    return wrapped(
        Circle(diameter_nm=2 * wire.radius_nm),
        (channel(masses, wire.permittivity, wire.valleys), insulating(wire.insulator_permittivity)),
        wire.insulator_nm,
        wire.temperature_K,
        Accuracy(subbands, energy_eV),
        wire.gate_potential_V,
        Doping(donors_per_nm3=wire.donors_per_nm3),
        sweep,
    )


def of_square(wire: Square, subbands: int, energy_eV: float) -> Problem:
    """The problem of a square wire of `independent_square`."""
    return wrapped(
        Rectangle(width_nm=wire.side_nm, height_nm=wire.side_nm),
        (channel(wire.masses, wire.permittivity, wire.valleys), insulating(wire.insulator_permittivity)),
        wire.insulator_nm,
        wire.temperature_K,
        Accuracy(subbands, energy_eV),
        wire.gate_potential_V,
        Doping(donors_per_nm3=wire.donors_per_nm3),
    )


def certified(problem: Problem, *volts: Mapping[str, float]) -> tuple[ChargedSubbands, ...]:
    """The subbands at sets of voltages (those of the problem if there is none), on one mesh."""
    return certify_charged(
        ChargedWire(Wire(problem)), volts or ({},), problem.accuracy.subbands, problem.accuracy.energy_eV
    )


@dataclass(frozen=True, eq=False)
class OnMesh:
    """A problem on a mesh that is good at some voltages, to be balanced at many."""

    problem: Problem
    meshes: Meshes

    @cached_property
    def wire(self) -> ChargedWire:
        """The problem made ready."""
        return ChargedWire(Wire(self.problem))

    @cached_property
    def stage(self) -> Stage:
        """On the coarse mesh."""
        return self.wire.stage(self.meshes.coarse, self.meshes.field)

    def at(self, volts: Mapping[str, float], before: Balanced | None = None) -> Balanced:
        """The balance at voltages."""
        return balance(self.stage, self.meshes.field.held_values(self.wire.gate_V(volts)), before)

    def sweep(self, gate_V: Sequence[float], gate: str = GATE) -> list[Balanced]:
        """Balances, each from the last."""
        found: list[Balanced] = []
        for voltage in gate_V:
            found.append(self.at({gate: float(voltage)}, found[-1] if found else None))
        return found


def on_mesh(problem: Problem, *volts: Mapping[str, float], cold_K: float | None = None) -> OnMesh:
    """A mesh that serves at all of some voltages; with the carriers at another temperature if one is given."""
    meshes = certified(problem, *volts)[0].meshes
    if cold_K is not None:
        problem = at_temperature(problem, cold_K)
    return OnMesh(problem, meshes)


def at_temperature(problem: Problem, kelvin: float) -> Problem:
    """The same problem with colder or warmer carriers, and materials that stay as they are."""
    from dataclasses import replace

    lattice = problem.lattice_temperature_K
    section = replace(problem.section, lattice_temperature_K=lattice)
    return replace(problem, section=section, carriers=replace(problem.carriers, temperature_K=(kelvin,)))
