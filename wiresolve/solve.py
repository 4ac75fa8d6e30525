"""The main story: from a problem to a complete result.

problem -> wire (pieces, operator, barrier) -> certified subband minima -> modes, axial masses, E(k)
        -> spectrum (with what lies above the listed states) -> what is measured -> verdict -> result
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from functools import lru_cache, partial
from importlib import metadata
from math import log, pi

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe.problem import Problem, require_problem
from wiresolve.fem.outline import outline_edges
from wiresolve.physics import carrying, remarks, spread, statistics, verdict
from wiresolve.physics.charge_sentence import charge_sentence
from wiresolve.physics.charged_subbands import ChargedSubbands, certify_charged
from wiresolve.physics.charged_wire import ChargedWire
from wiresolve.physics.conductance import conductance_through
from wiresolve.physics.electrostatics import PINNED
from wiresolve.physics.ladder import spectrum_of
from wiresolve.physics.listing import SPIN, Listing, listing
from wiresolve.physics.outline_motion import outline_motion
from wiresolve.physics.region_fields import cell_fields
from wiresolve.physics.rounded import NEAR_STEP_KT
from wiresolve.physics.sensitivity import (
    NOWHERE,
    OutlineSensitivity,
    Sensitivity,
    merged,
    outline_sensitivity,
    sensitivities,
    sensitivities_at_minima,
)
from wiresolve.physics.solved import levels
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.subbands import Certified, certify
from wiresolve.physics.wire import Wire
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
from wiresolve.units import KB

Array = NDArray[np.float64]
Progress = Callable[[str, float, str], None]

_CLOSED_KT = 3.0
"""A first level so far above the Fermi level conducts 1/20 of its step."""


def solve(problem: Problem, on_progress: Progress | None = None) -> Result:
    """Solve a wire.

    Parameters
    ----------
    problem : the whole description.
    on_progress : called with (stage, fraction done, detail) now and then.

    Returns
    -------
    Result
        Complete; where the accuracy could not be reached it holds the best that was found and says so
        (`accuracy_met`, a warning).

    Raises
    ------
    InputError, MeshError, ConvergenceError
        The section leaves nothing to solve, cannot be meshed, or its states cannot be accounted for.
    """
    from threadpoolctl import threadpool_limits

    require_problem(problem)
    clock, tell = _Clock(), on_progress or (lambda stage, fraction, detail: None)
    # More BLAS threads only get in each other's way at these sizes.
    with threadpool_limits(limits=1, user_api="blas"):
        wire = Wire(problem)
        wanted, accuracy = problem.accuracy.subbands, problem.accuracy.energy_eV
        charged = None
        with clock("subbands"):
            if problem.charged:
                charged = certify_charged(ChargedWire(wire), [{}], wanted, accuracy, on_progress)[0]
                certified = charged.certified
            else:
                certified = certify(wire.draw, wire.channels, wanted, accuracy, on_progress)
        tell("along the wire", 0.92, "masses and dispersion")
        with clock("axial"):
            found = listing(wire, certified)
        tell("above", 0.94, "states above the listed ones")
        with clock("above"):
            spectrum = spectrum_of(wire, certified, found)
        tell("dimensions", 0.96, "how levels move with them")
        with clock("sensitivities"):
            moved = ((), NOWHERE) if charged is not None else _sensitivities(wire, certified, found)
    tell("verdict", 0.98, "")
    with clock("measured"):
        return _assembled(wire, certified, found, spectrum, moved, clock, charged)


def _sensitivities(
    wire: Wire, certified: Certified, found: Listing
) -> tuple[tuple[Sensitivity, ...], OutlineSensitivity]:
    """How every listed energy moves with each dimension, mass and band edge, and the first two with each outline."""
    motion = outline_motion(wire.problem.section, outline_edges(certified.space.mesh))
    groups = {group.label: group for group in wire.groups}
    each = []
    for channel, solved, low, n in zip(
        certified.channels, certified.solved, certified.minima, certified.listed, strict=True
    ):
        materials, group = wire.materials, groups[channel.label]
        if n and low is not None:
            each.append(sensitivities_at_minima(motion, low, materials, group))
        else:
            each.append(sensitivities(motion, solved, materials, group, n) if n else ())
    level = levels(found.energy_eV, found.bar_eV)
    outlines = outline_sensitivity(motion, certified.solved, certified.minima, found.entries, level)
    return merged(each, found.entries), outlines


def _assembled(
    wire: Wire,
    certified: Certified,
    found: Listing,
    spectrum: Spectrum,
    moved: tuple[tuple[Sensitivity, ...], OutlineSensitivity],
    clock: _Clock,
    charged: ChargedSubbands | None,
) -> Result:
    problem, space = wire.problem, certified.space
    temperatures = problem.carriers.temperature_K
    fermi = problem.fermi_level_eV
    by_subband = None if fermi is None else statistics.line_density_by_subband(spectrum, fermi, temperatures[0])
    total = None if fermi is None else float(statistics.line_density(spectrum, fermi, temperatures[0]))
    if charged is not None:
        total = charged.balanced.occupied.total_per_nm
    potential = None if charged is None else charged.balanced.function
    outcome = remarks.Outcome(wire, certified, found, spectrum, total, potential)
    subbands = _subbands(certified, found, outcome.bound, None if by_subband is None else np.ravel(by_subband))
    remarked = remarks.on(outcome)
    level = levels(found.energy_eV, found.bar_eV)
    said = (
        carrying.sentence(found, certified),
        spread.sentence(problem.section, moved[0], level, temperatures[0], float(outcome.above_edge_eV[0]))
        if charged is None
        else charge_sentence(charged.balanced, wire),
        _rounding(problem),
        *remarked.said,
    )
    held = ""
    if charged is not None:
        held = " at these voltages, in the potential that they and the charge make"
        held = held if problem.gates else " in the potential that its charge makes"
        held = _closed(float(found.energy_eV[0]), KB * temperatures[0]) + held
    judged = verdict.judge(spectrum, temperatures, fermi, (text for text in said if text), held)
    zero_text, zero_value = problem.energy_zero()
    points = np.zeros((len(space.mesh.points), certified.wanted), dtype=found.states.dtype)
    points[space.nodes] = found.states
    mesh = space.mesh
    edges = _edges(spectrum)
    density_of_states = statistics.density_of_states(spectrum, edges)
    return Result(
        problem=problem,
        mesh=mesh,
        modes=points,
        cell_fields=cell_fields(wire, mesh, found.valley[0]),
        subbands=subbands,
        spectrum=spectrum,
        summary=MeshSummary(
            len(mesh.cells), len(certified.solved[0].pencil.kept), mesh.degree, space.area_nm2, certified.passes
        ),
        energy_zero_text=zero_text,
        energy_zero_on_common_scale_eV=zero_value,
        states_missed=certified.missed,
        accuracy_met=certified.met and bool((found.bar_eV <= problem.accuracy.energy_eV).all()),
        dispersion=_dispersion(found, spectrum, certified),
        density_of_states=DensityOfStates(edges, density_of_states.per_eV_nm, density_of_states.singular_at_eV),
        conductance=_curves(spectrum, temperatures, partial(conductance_through, given=problem.transport)),
        density=_curves(spectrum, temperatures, statistics.line_density),
        line_density_per_nm=total,
        sensitivities=moved[0],
        outline_sensitivity=moved[1],
        verdict=Verdict(judged.text, judged.single_subband, judged.steps, judged.effective_dimension),
        warnings=tuple(Warned(*w) for w in remarked.warnings),
        not_modelled=remarked.not_modelled,
        versions=versions(),
        timings_s=clock.seconds,
        charge=None if charged is None else _charge(wire, charged),
        finer_mesh=certified.solved[0].enriched.space.mesh,
    )


def _closed(first_eV: float, thermal_eV: float) -> str:
    """Said first of a wire whose first level lies well above the Fermi level: as it stands it is no channel."""
    if first_eV <= _CLOSED_KT * thermal_eV:
        return ""
    far = f", {first_eV / thermal_eV:.3g} kT" if thermal_eV > 0 else ""
    return f" that is closed (its first level lies {1e3 * first_eV:.3g} meV{far} above the Fermi level)"


def _rounding(problem: Problem) -> str:
    """What transmission, contacts or a saddle do to the steps, which are judged by temperature alone."""
    transport = problem.transport
    if transport is None or transport.is_open:
        return ""
    text = "Steps are those of a ballistic wire; what [transport] says counts in the curves of the conductance."
    if transport.saddle_curvature_eV is not None:
        width = log(81) / (2 * pi) * transport.saddle_curvature_eV
        text += f" Tunnelling at the saddle rounds each step further, by {1e3 * width:.3g} meV from 10 to 90 % of it."
    return text


def _charge(wire: Wire, charged: ChargedSubbands) -> Charge:
    problem, balanced, space = wire.problem, charged.balanced, charged.certified.space
    on_gates, given = balanced.charges_per_nm(), np.zeros(len(space.mesh.points))
    if wire.potential is not None:
        given[space.nodes] = wire.potential(*space.mesh.points[space.nodes].T)
    return Charge(
        gates=tuple(GateCharge(g.name, g.voltage_V, problem.lineup_V(g), on_gates[g.name]) for g in problem.gates),
        fixed_per_nm=balanced.fixed_per_nm(),
        pinned_per_nm=on_gates.get(PINNED, 0.0),
        passes=balanced.passes,
        residual_V=balanced.residual_V,
        gauss_error=balanced.gauss_error,
        potential_V=balanced.potential_V,
        density_per_nm3=balanced.density_at_points(),
        potential_error_eV=charged.potential_error_eV,
        given_eV=given,
        exchange_V=balanced.exchange_V,
    )


def _subbands(
    certified: Certified, found: Listing, bound: tuple[bool | None, ...], density: Array | None
) -> tuple[Subband, ...]:
    listed, effect = [], found.wall_effect_eV
    level = levels(found.energy_eV, found.bar_eV)
    for i in range(certified.wanted):
        shares = {name: float(share[i]) for name, share in found.shares.items()}
        mass, mass_error = found.axial_mass[i], found.axial_mass_error[i]
        moved = None if effect is None or not np.isfinite(effect[i]) else float(effect[i])
        listed.append(
            Subband(
                index=i + 1,
                level=int(level[i]),
                valley=found.valley[i],
                energy_eV=float(found.energy_eV[i]),
                error_eV=float(found.bar_eV[i]),
                k_min_per_nm=float(found.k_min_per_nm[i]),
                axial_mass=float(mass) if np.isfinite(mass) else None,
                axial_mass_error=float(mass_error) if np.isfinite(mass) else None,
                spin_degeneracy=SPIN,
                valley_degeneracy=found.valley_degeneracy[i],
                layer=max(shares, key=lambda name: shares[name]),
                shares=shares,
                bound=bound[i],
                wall_effect_eV=moved,
                line_density_per_nm=None if density is None else float(density[i]),
            )
        )
    return tuple(listed)


def _dispersion(found: Listing, spectrum: Spectrum, certified: Certified) -> Dispersion:
    """E(k) of all listed subbands at the wave numbers of the channel of the lowest one."""
    first = int(found.entries[0, 0])
    k = found.by_channel[first].bands.k_per_nm
    bound = max(
        own.bands.error_bound_eV
        for own, n in zip(found.by_channel, certified.listed, strict=True)
        if n
    )  # fmt: skip
    return Dispersion(k, spectrum.band_energies(k), bound)


def _curves(
    spectrum: Spectrum, temperatures: tuple[float, ...], quantity: Callable[[Spectrum, Array, float], Array]
) -> tuple[ThermalCurve, ...]:
    """The quantity from well below the first subband to beyond the last listed one, at T = 0 and each temperature."""
    curves = []
    listed = spectrum.energy_eV[: spectrum.listed]
    bottom, top = float(listed[0]), float(listed[-1])
    for temperature in dict.fromkeys((0.0, *temperatures)):
        thermal = KB * temperature
        margin = max(0.1 * (top - bottom), 6 * thermal, 1e-3)
        even = np.linspace(bottom - margin, max(_end(spectrum), bottom + margin), 301)
        # Steps that are narrower than the even points are apart get points of their own.
        near = (listed[:, None] + max(thermal, 1e-9) * np.array(NEAR_STEP_KT)).ravel()
        fermi = np.unique(np.concatenate([even, near[near <= even[-1]]]))
        curves.append(ThermalCurve(temperature, fermi, np.asarray(quantity(spectrum, fermi, temperature))))
    return tuple(curves)


def _end(spectrum: Spectrum) -> float:
    """Where curves end: beyond the last listed level, so that its step is seen, but before the next one."""
    listed = spectrum.listed
    bottom, top = float(spectrum.energy_eV[0]), float(spectrum.energy_eV[listed - 1])
    higher = spectrum.energy_eV[spectrum.level > spectrum.level[listed - 1]]
    room = 0.5 * float(higher[0] - top) if len(higher) else 0.0
    return top + min(room, 0.15 * (top - bottom) + 1e-3)


def _edges(spectrum: Spectrum) -> Array:
    bottom, top = float(spectrum.energy_eV[0]), float(spectrum.energy_eV[spectrum.listed - 1])
    span = max(top - bottom, 1e-3)
    # Not beyond the last solved state: what lies above it would be missing there.
    return np.linspace(bottom - 0.05 * span, min(top + 0.15 * span, float(spectrum.energy_eV[-1])), 241)


@lru_cache(maxsize=1)
def versions() -> dict[str, str]:
    found = {}
    for name in ("wiresolve", "numpy", "scipy", "scikit-fem", "gmsh", "meshio"):
        try:
            found[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            found[name] = "not installed"
    return found


class _Clock:
    """Seconds spent in each part."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}
        self._begun = time.perf_counter()

    @contextmanager
    def __call__(self, part: str) -> Iterator[None]:
        begun = time.perf_counter()
        yield
        self.seconds[part] = time.perf_counter() - begun
        self.seconds["total"] = time.perf_counter() - self._begun
