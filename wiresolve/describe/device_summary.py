"""What a problem's gates, surfaces, surroundings, sweep and transport were understood to be, as rows with units."""

from __future__ import annotations

from collections.abc import Sequence

from wiresolve.describe import drawing
from wiresolve.describe.doping import PARTIAL, Doping
from wiresolve.describe.gates import Gate, Slab, Surroundings, Touch
from wiresolve.describe.problem import Problem
from wiresolve.describe.section import ADMITTED
from wiresolve.describe.setting import REACH, Boundary, Setting, setting
from wiresolve.units import format_quantity

PER_CM3, PER_CM2 = 1e21, 1e14
Rows = list[tuple[str, str]]


def rows(problem: Problem) -> Rows:
    """Rows (key, text with units) of all that is not the section itself; none for a wire without gates and charge."""
    found: Rows = []
    if problem.charged:
        drawn = setting(problem)
        found += [
            (f"gates[{k}]", _gate(problem, gate, face))
            for k, (gate, face) in enumerate(zip(problem.gates, drawn.gates, strict=True), 1)
        ]
        for k, (surface, face) in enumerate(zip(problem.surfaces, drawn.surfaces, strict=True), 1):
            what = f"band edge pinned at {_energy(surface.pinned_at_eV or 0.0)} from the Fermi level"
            if surface.charge_per_nm2 is not None:
                what = f"charge density {surface.charge_per_nm2 * PER_CM2:.6g} cm^-2"
            found.append((f"surfaces[{k}]", f"{_touches(surface.touches)}, {_nm(face.length_nm)} long, {what}"))
        if problem.surroundings is not None:
            found += _surroundings(problem.surroundings, drawn, problem)
        if fixed := _fixed(problem, drawn):
            found.append(("fixed_charge", fixed))
        found.append(("carriers.interaction", problem.carriers.interaction))
    return found + _operation(problem)


def _fixed(problem: Problem, drawn: Setting) -> str:
    """The charge of dopants and surfaces for each nm of wire, and what balances it; empty without any."""
    section, areas = problem.section, drawing.visible_areas(problem.section)
    charge = sum(section.doping_of(name).net_per_nm3 * area for name, area in areas.items())
    lines = zip(problem.surfaces, drawn.surfaces, strict=True)
    charge += sum((surface.charge_per_nm2 or 0.0) * face.length_nm for surface, face in lines)
    parts = [section.doping_of(name) for name in areas]
    if charge == 0 and not any(part.any for part in parts):
        return ""
    text = f"{charge:+.6g} e/nm"
    if any(part.ionisation == PARTIAL for part in parts):
        text += " if all dopants are charged"
    if not drawn.gates and all(surface.pinned_at_eV is None for surface in problem.surfaces):
        text += "; no gate and no pinned surface, so that carriers balance it"
    return text


def doped(doping: Doping) -> str:
    """The words for a part's dopants, after a comma; empty for none."""
    words = ""
    for kind in ("donor", "acceptor"):
        if density := getattr(doping, f"{kind}s_per_nm3"):
            words += f", {kind}s {density * PER_CM3:.6g} cm^-3"
            if doping.ionisation == PARTIAL:
                words += f" ionised in part from {_energy(getattr(doping, f'{kind}_depth_eV'))}"
    return words


def _gate(problem: Problem, gate: Gate, face: Boundary) -> str:
    given = problem.surroundings
    end = "below" if given is not None and gate.name == given.below_gate else "above"
    words = [f"'{gate.name}'", f"on {_touches(gate.touches)}" if gate.touches else f"at the end of what lies {end}"]
    if (between := gate.insulator) is not None:
        carriers = ", carriers admitted" if between.carriers == ADMITTED else ""
        words.append(f"around {_nm(between.thickness_nm)} of {between.material}{carriers}")
    if gate.touches:
        words.append(f"{_nm(face.length_nm)} long")
    lineup = f"line-up voltage {_volt(problem.lineup_V(gate))}"
    if gate.work_function_eV is not None:
        lineup += f" (work function {gate.work_function_eV:.6g} eV)"
    swept = problem.voltages is not None and problem.voltages.gate == gate.name
    return ", ".join([*words, lineup, f"voltage {_volt(gate.voltage_V)}{' outside of its sweep' if swept else ''}"])


def _surroundings(given: Surroundings, drawn: Setting, problem: Problem) -> Rows:
    found: Rows = []
    for side, slabs, gate in (("below", given.below, given.below_gate), ("above", given.above, given.above_gate)):
        if slabs:
            end = "" if gate is None else f", then gate '{gate}'"
            found.append((f"surroundings.{side}", f"{_stack(slabs)}{end}{_foot(side, drawn, problem)}"))
    found.append(("surroundings.beside", str(given.beside)))
    if drawn.box is not None:
        (x0, y0), (x1, y1) = drawn.box
        width, height = (format_quantity(v, "length", "um", 3) for v in (x1 - x0, y1 - y0))
        found.append(("surroundings.size", f"endless (cut off at {width} by {height}, {REACH:g} times what is inside)"))
    return found


def _stack(slabs: Sequence[Slab]) -> str:
    return ", then ".join(f"{_nm(slab.thickness_nm)} of {slab.material}" for slab in slabs)


def _foot(side: str, drawn: Setting, problem: Problem) -> str:
    """How far a round face is sunk into the flat one, in words."""
    ys = {p.name: [y for s in p.loop.segments for _, y in (s.start, s.end)] for p in drawn.around}
    own = [y for p in drawn.pieces(problem.section) if p.name.split()[0] not in ("beside", "below", "above")
           for _, y in p.loop.sample(64)]  # fmt: skip
    depth = max(ys["below 1"]) - min(own) if side == "below" else max(own) - min(ys["above 1"])
    return f"; a round face is sunk {_nm(depth)} into it" if depth > 1e-4 * (max(own) - min(own)) else ""


def _operation(problem: Problem) -> Rows:
    found: Rows = []
    if (sweep := problem.voltages) is not None:
        step = (sweep.to_V - sweep.from_V) / (sweep.count - 1)
        ends = f"from {_volt(sweep.from_V)} to {_volt(sweep.to_V)}"
        found.append(("voltages", f"gate '{sweep.gate}' {ends} in {sweep.count} points, {_volt(step)} apart"))
        if sweep.drain_V:
            found.append(("voltages.drain", ", ".join(_volt(v) for v in sweep.drain_V)))
    if (given := problem.transport) is not None:
        if given.length_nm is not None and given.mean_free_path_nm is not None:
            found.append(("transport.length", _nm(given.length_nm)))
            found.append(("transport.mean_free_path", _nm(given.mean_free_path_nm)))
        if given.transmission is not None:
            found.append(("transport.transmission", ", ".join(f"{t:g}" for t in given.transmission)))
        if given.saddle_curvature_eV is not None:
            found.append(("transport.saddle", f"hbar omega along the wire {_energy(given.saddle_curvature_eV)}"))
        found.append(("transport.contact_resistance", f"{given.contact_resistance_ohm:.6g} ohm"))
    return found


def _touches(touches: Sequence[Touch]) -> str:
    return " and ".join(
        f"'{touch}'" if isinstance(touch, str) else f"the rim from {touch.from_deg:g} to {touch.to_deg:g} deg"
        for touch in touches
    )


def _nm(value: float) -> str:
    return format_quantity(value, "length", digits=6)


def _volt(value: float) -> str:
    return format_quantity(value, "voltage", digits=6)


def _energy(value: float) -> str:
    return format_quantity(value, "energy", "meV", 6)
