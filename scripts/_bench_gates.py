"""Gates and charge: passes at every point of sweeps, the same by damped iteration, and warm times in CPU seconds."""

from __future__ import annotations

import statistics
import time
from pathlib import Path
from typing import Any

import numpy as np
from _damped import MIXINGS, damped_passes

ROUND = """title = "round"
[section]
shape = "circle"
diameter = "{diameter} nm"
material = "c"
[[gates]]
name = "wrap"
touches = "rim"
insulator = {{ material = "o", thickness = "5 nm" }}
lineup_voltage = "0 V"
[voltages]
gate = "wrap"
from = "{low} V"
to = "{high} V"
count = 50
[carriers]
kind = "electrons"
temperature = "{kelvin} K"
[accuracy]
subbands = 6
energy = "0.1 meV"
[materials.c]
electron_mass = 0.023
conduction_edge = "0 eV"
permittivity = 15.15
{growth}
[materials.o]
permittivity = 9.0
"""
HEXAGON = """title = "hexagon"
[section]
shape = "hexagon"
across_flats = "{diameter} nm"
material = "c"
donors = "5e16 cm^-3"
[[gates]]
name = "back"
lineup_voltage = "0 V"
[surroundings]
below = [{{ material = "o", thickness = "100 nm" }}, {{ gate = "back" }}]
beside = "air"
[voltages]
gate = "back"
from = "{low} V"
to = "{high} V"
count = 50
[carriers]
kind = "electrons"
temperature = "{kelvin} K"
[accuracy]
subbands = 6
energy = "0.1 meV"
[materials.c]
electron_mass = 0.023
conduction_edge = "0 eV"
permittivity = 15.15
{growth}
[materials.o]
permittivity = 3.9
"""
SILICON = """title = "silicon"
[section]
shape = "circle"
diameter = "6 nm"
material = "Si"
[orientation]
axis = [1, 1, 2]
up = [1, 1, -1]
[[gates]]
name = "wrap"
touches = "rim"
insulator = {{ material = "SiO2", thickness = "1 nm" }}
lineup_voltage = "0 V"
[voltages]
gate = "wrap"
from = "0 V"
to = "1 V"
count = 50
[carriers]
kind = "electrons"
temperature = "300 K"
model = "{model}"
[accuracy]
subbands = 10
energy = "0.1 meV"
"""
_STEP_V = 5e-4
"""Balances agree to some nV: differences over less than this would show that."""
GROWING = "nonparabolicity = 1.5"
# name, text, diameter, range in V, temperatures, most passes
SWEEPS: tuple[tuple[str, str, float, float, float, tuple[float, ...], int], ...] = (
    ("round wrap gate", ROUND, 30, -0.1, 0.75, (300, 77, 4.2, 0), 8),
    ("doped hexagon, back gate", HEXAGON, 40, -2.0, 4.0, (77, 4.2, 1.5, 0), 12),
)
DAMPED = (
    ("round, 30 nm", ROUND, 30, 0.05, 0.7, (300, 4.2), 2.0),
    ("round, 120 nm", ROUND, 120, 0.0, 0.35, (4.2,), 5.0),
    ("doped hexagon, back gate", HEXAGON, 40, 0.0, 4.0, (4.2,), 2.0),
)


def sweep_of(text: str, **fields: Any) -> Any:
    from wiresolve.describe.wirefile import parse
    from wiresolve.sweep import WireSweep

    return WireSweep(parse(text.format(**({"growth": ""} | fields)), Path(".")))


def passes() -> None:
    print("\npasses until a pass changes the potential by less than 1e-6 V, at every point of sweeps of 50 points")
    for name, text, size, low, high, temperatures, most in SWEEPS:
        for kelvin in temperatures:
            sweep = sweep_of(text, diameter=size, low=low, high=high, kelvin=kelvin)
            counts, gauss, filled, before = [], 0.0, 0, None
            begun = time.process_time()
            for voltage in sweep.problem.voltages.points:
                stage = sweep._ends[0].balanced.stage
                held = sweep.meshes.field.held_values(sweep.charged.gate_V({sweep._swept: voltage}))
                before = balanced(stage, held, before)
                counts.append(before.passes)
                gauss = max(gauss, before.gauss_error)
                filled = int((before.occupied.energy_eV < 0).sum())
            seconds = (time.process_time() - begun) / len(counts)
            worst = max(counts)
            slope, lost = capacitance_check(sweep, before)
            print(
                f"{name:26s} {kelvin:5g} K  most {worst:2d}{'  within' if worst <= most else '  ABOVE'} {most}  "
                f"mean {statistics.mean(counts):4.1f}  {filled:2d} filled  Gauss {gauss:.0e}  "
                f"dN/dV {slope:.4g}/(V nm), differences tell {lost:.0e} of it else  {seconds:.3f} s a balance",
                flush=True,
            )


def balanced(stage: Any, held: Any, before: Any) -> Any:
    from wiresolve.physics.selfconsistent import balance

    return balance(stage, held, before)


def capacitance_check(sweep: Any, here: Any) -> tuple[float, float]:
    """The answer of the carriers to the gate at a balance, and how far differences of balances are from it."""
    from wiresolve.physics.response import response
    from wiresolve.units import KB

    stage, gate = here.stage, sweep._swept
    answer = response(here, gate).carriers_per_V_nm
    step = max(0.05 * KB * stage.carriers.temperature_K, _STEP_V)
    one = sweep.meshes.field.held_values({gate: 1.0})
    at = [balanced(stage, here.held_V + n * step * one, here).occupied.total_per_nm for n in (1, -1, 2, -2)]
    found = (8 * (at[0] - at[1]) - (at[2] - at[3])) / (12 * step)
    return answer, abs(found / answer - 1)


def damped() -> None:
    from wiresolve.physics.selfconsistent import start

    print(f"\ndamped iteration, the best of {MIXINGS}, and these steps, from the same start (carriers place by place)")
    for name, text, size, low, high, temperatures, least in DAMPED:
        for kelvin in temperatures:
            sweep = sweep_of(text, diameter=size, low=low, high=high, kelvin=kelvin)
            stage = sweep._ends[0].balanced.stage
            ratios = []
            for voltage in np.linspace(low, high, 3):
                held = sweep.meshes.field.held_values(sweep.charged.gate_V({sweep._swept: float(voltage)}))
                first = start(stage, held)
                own = balanced_from(stage, held, first)
                density, potential = as_functions(stage, held)
                best = None
                for mixing in MIXINGS:
                    found = damped_passes(density, potential, first, mixing, most=(best[0] - 1) if best else 200)
                    best = (found, mixing) if found is not None else best
                if best is None:
                    ratios.append(np.inf)
                    print(f"  {name:26s} {kelvin:5g} K {voltage:6.3f} V  {own:3d}  none of the mixings within 200")
                    continue
                ratios.append(best[0] / own)
                print(f"  {name:26s} {kelvin:5g} K {voltage:6.3f} V  {own:3d}  damped {best[0]} (mixing {best[1]})")
            ratio = min(ratios)
            print(
                f"  at least {ratio:.1f} times fewer{'  within' if ratio >= least else '  BELOW'} {least:g}", flush=True
            )


def balanced_from(stage: Any, held: Any, first: Any) -> int:
    from wiresolve.physics.selfconsistent import balance

    return int(balance(stage, held, guess=first).passes)


def as_functions(stage: Any, held: Any) -> tuple[Any, Any]:
    """Density from potential, and potential from density, as the package has them."""
    from wiresolve.fem.nodal import NodalFunction

    field, last = stage.field, [None]

    def density(phi: Any) -> Any:
        occupied = stage.carriers.in_potential(NodalFunction(stage.carriers.space.mesh, phi), None, last[0])
        last[0] = occupied
        found, _ = stage.dopants.charge(field.at_quadrature(phi))
        found[stage.places] -= occupied.carriers_per_nm3
        return found

    def potential(charge: Any) -> Any:
        return field.field.solve_linear(field.field.fixed_load + field.load(charge), held)

    return density, potential


def warm() -> None:
    print("\na warm point of a sweep, all its numbers and bars: CPU seconds, the median of five")
    wrapped: dict[str, Any] = {"diameter": 30, "low": -0.1, "high": 0.75, "kelvin": 77}
    backed: dict[str, Any] = {"diameter": 40, "low": -2.0, "high": 4.0, "kelvin": 4.2}
    cases: tuple[tuple[str, str, dict[str, Any], float, int], ...] = (
        ("round wrap gate", ROUND, wrapped, 0.3, 1),
        ("the same, mass grows", ROUND, wrapped | {"growth": GROWING}, 0.3, 1),
        ("doped hexagon, back gate", HEXAGON, backed, 1.5, 1),
        ("the same, mass grows", HEXAGON, backed | {"growth": GROWING}, 1.5, 1),
        ("silicon, three groups", SILICON, {"model": "parabolic"}, 15.0, 50),
        ("the same, mass grows", SILICON, {"model": "nonparabolic"}, 15.0, 50),
    )
    for name, text, fields, limit, times in cases:
        begun = time.process_time()
        sweep = sweep_of(text, **fields)
        points = len(sweep.mesh.points)
        cold, seconds = time.process_time() - begun, []
        at = sweep.problem.voltages.points[25:31]
        before = sweep.point(at[0], None)
        for voltage in at[1:]:
            begun = time.process_time()
            before = sweep.point(voltage, before)
            seconds.append(time.process_time() - begun)
        took = times * statistics.median(seconds)
        print(
            f"{name:26s} {took:6.2f} s{'  within' if took <= limit else '  ABOVE'} {limit:g}"
            f"{'' if times == 1 else ' for 50'}   mesh and both ends {cold:.1f} s, {points} points",
            flush=True,
        )


def gates() -> None:
    """All three."""
    passes()
    damped()
    warm()
