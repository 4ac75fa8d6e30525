"""Carriers and potential that agree with each other, on one mesh and at one set of voltages.

A pass solves for the carriers' states in the potential, and then Poisson's equation for their charge, which follows a
change of the potential by the predictor of A. Trellakis, A. T. Galick, A. Pacelli and U. Ravaioli, J. Appl. Phys. 81,
7880 (1997). The potentials of the last passes are combined so that what they change is least (D. G. Anderson, J. ACM
12, 547 (1965)); nothing is damped.
"""

from __future__ import annotations

import logging
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from wiresolve.errors import ConvergenceError
from wiresolve.fem.nodal import NodalFunction
from wiresolve.physics.dopants import Dopants
from wiresolve.physics.exchange import LocalDensity
from wiresolve.physics.nonlinear_poisson import ChargedField, Solution
from wiresolve.physics.occupied import Carriers, Occupied
from wiresolve.physics.semiclassical import free_carriers
from wiresolve.units import KB

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

_log = logging.getLogger(__name__)

TOLERANCE_V = 1e-6
"""Passes are counted until one changes the potential by less than this at every point; those after it only polish."""
MOST_PASSES = 60
_LAST_V = 2e-9
"""Passes go on until they change the potential by less: what the carriers then lack of balance is below 1e-8."""
_MOST_POLISHING = 8
_POISSON_V = 1e-11
_START_V = 1e-5
_DEPTH = 4
"""How many passes are combined."""
_COLDEST_START_K = 4.0
_FAINT_PER_NM = 1e-5
"""A balance of charge is judged against no less than this, one carrier in a tenth of a millimetre: rounding makes 1e-14
of it at each volt."""


@dataclass(frozen=True, eq=False)
class Stage:
    """One mesh with its field, what holds carriers, dopants that are not all charged, and exchange where it counts."""

    field: ChargedField
    carriers: Carriers
    dopants: Dopants
    exchange: LocalDensity | None = None

    @property
    def places(self) -> Ints:
        """(k,) which of the field's charged cells admit carriers, in the order of the carriers' cells."""
        return np.searchsorted(self.field.cells, self.carriers.space.cells)

    def listing(self, needs: Sequence[int]) -> Stage:
        """The same with as many states of each group of valleys as a list takes, and two more, always solved."""
        return replace(self, carriers=replace(self.carriers, least=tuple(2 + n for n in needs)))


@dataclass(frozen=True, eq=False)
class Balanced:
    """Potential and carriers that agree.

    Attributes
    ----------
    stage : where.
    held_V : (h,) the potential where it is held.
    solution : the potential (n,) at the mesh's points, its load and its factor.
    occupied : the states in this potential.
    passes : how many times states were solved until a pass changed the potential by less than `TOLERANCE_V`.
    residual_V : by how much the last pass changed it, at most.
    exchange_V : (n,) what exchange and correlation add to the potential that electrons feel; None without them.
    """

    stage: Stage
    held_V: Array
    solution: Solution
    occupied: Occupied
    passes: int
    residual_V: float
    exchange_V: Array | None = None

    @property
    def potential_V(self) -> Array:
        """(n,) at the mesh's points."""
        return self.solution.phi

    @property
    def felt_V(self) -> Array:
        """(n,) the potential that electrons feel at the mesh's points: with exchange and correlation."""
        return _felt(self.solution.phi, self.exchange_V)

    @property
    def function(self) -> NodalFunction:
        """The potential that electrons feel, as a function."""
        return _function(self.stage, self.felt_V)

    def charges_per_nm(self) -> dict[str, float]:
        """Charge in e/nm of each gate, and of pinned surfaces."""
        return self.stage.field.field.charges(self.solution.phi, self._load())

    def fixed_per_nm(self) -> float:
        """Charge of dopants and surfaces in e/nm."""
        field = self.stage.field
        ionised, _ = self.stage.dopants.charge(field.at_quadrature(self.solution.phi))
        return float(field.field.fixed_load.sum() + field.total(ionised))

    def density_at_points(self) -> Array:
        """(n,) carriers in 1/nm^3 at the mesh's points, 0 where none may be; by |psi|^2."""
        return _at_points(self.occupied)

    def _load(self) -> Array:
        """(n,) of the carriers in this very potential, the dopants and all that is fixed."""
        field = self.stage.field
        density, _ = self.stage.dopants.charge(field.at_quadrature(self.solution.phi))
        density[self.stage.places] -= self.occupied.carriers_per_nm3
        return np.asarray(field.field.fixed_load + field.load(density))

    @property
    def gauss_error(self) -> float:
        """What gates, pinned surfaces, dopants and carriers together lack of neutrality, as a part of the largest.

        The charge on the gates is that of the field; the carriers are counted state by state.
        """
        on_gates = self.stage.field.field.charges(self.solution.phi, self.solution.load)
        fixed, carriers = self.fixed_per_nm(), self.occupied.total_per_nm
        scale = max(abs(fixed), carriers, *(abs(q) for q in on_gates.values()), _FAINT_PER_NM)
        return abs(sum(on_gates.values()) + fixed - carriers) / scale


def start(stage: Stage, held_V: Array) -> Array:
    """(n,) the potential with carriers filled place by place, as in a bulk crystal: a first guess."""
    field = stage.field
    kelvin = max(stage.carriers.temperature_K, _COLDEST_START_K)
    filled = free_carriers(stage.carriers.space, stage.carriers.operators, stage.carriers.degeneracies, kelvin)

    def charge(phi: Array) -> tuple[Array, Array]:
        density, slope = stage.dopants.charge(phi)
        held, rate = filled(phi[stage.places])
        density[stage.places] -= held
        slope[stage.places] -= rate
        return density, slope

    first = np.zeros(len(field.field.space.nodes))
    if len(field.field.held):
        first = field.field.solve_linear(field.field.fixed_load, held_V)
    return field.solve(held_V, charge, first, _START_V).phi


def balance(
    stage: Stage,
    held_V: Array,
    before: Balanced | None = None,
    guess: Array | None = None,
    on_pass: Callable[[int, float], None] | None = None,
) -> Balanced:
    """The potential in which the carriers' charge makes that very potential.

    Parameters
    ----------
    held_V : (h,) the potential where it is held.
    before : the balance at other voltages on the same mesh, from whose states all begins.
    guess : (n,) a first potential, instead of the one that `before` predicts.

    Raises
    ------
    ConvergenceError
        It was not reached; the message says how far it came.
    """
    if before is not None or guess is not None:
        try:
            return _balanced(stage, held_V, before, guess, on_pass)
        except (ConvergenceError, np.linalg.LinAlgError) as fault:
            _log.debug("from the start given: %s; trying another one", fault)
    try:
        return _balanced(stage, held_V, None, None, on_pass)
    except np.linalg.LinAlgError as fault:
        raise ConvergenceError(
            f"the states in this potential could not be found ({fault}); a lower voltage can"
        ) from fault


def _balanced(
    stage: Stage,
    held_V: Array,
    before: Balanced | None,
    guess: Array | None,
    on_pass: Callable[[int, float], None] | None,
) -> Balanced:
    counts: Sequence[int] | None = None
    occupied: Occupied | None = None
    exchange = None if stage.exchange is None else np.zeros(len(stage.field.field.space.nodes))
    if before is not None and before.stage is stage:
        exchange = before.exchange_V
        occupied = before.occupied
        counts = occupied.counts(len(stage.carriers.channels))
        if guess is None:
            guess = _predicted(stage, held_V, before.occupied, before.solution.phi, before.solution.phi).phi
    potential = start(stage, held_V) if guess is None else guess
    tried: list[Array] = []
    answered: list[Array] = []
    passes, last, reached = 0, np.inf, None
    thermal = KB * stage.carriers.temperature_K
    enough = max(_LAST_V, 1e-7 * thermal) if stage.exchange is None else _LAST_V / 30
    points = len(potential)
    state = potential if exchange is None else np.concatenate([potential, exchange])
    for number in range(1, MOST_PASSES + 1):
        potential, exchange = state[:points], state[points:] if exchange is not None else None
        occupied = stage.carriers.in_potential(_function(stage, _felt(potential, exchange)), counts, occupied)
        counts = occupied.counts(len(stage.carriers.channels))
        answer = _predicted(stage, held_V, occupied, potential, potential)
        after = answer.phi
        if stage.exchange is not None:
            after = np.concatenate([after, stage.exchange.potential_V(_at_points(occupied))])
        change = float(np.abs(after - state).max())
        _log.debug("pass %d: the potential changed by %.3g V", number, change)
        if on_pass is not None:
            on_pass(number, change)
        if passes == 0 and change <= TOLERANCE_V:
            passes = number
        last = change
        if change <= enough or (passes and number >= passes + _MOST_POLISHING):
            reached = answer
            exchange = after[points:] if exchange is not None else None
            break
        tried.append(state)
        answered.append(after)
        del tried[: -_DEPTH - 1], answered[: -_DEPTH - 1]
        state = _combined(tried, answered)
    if reached is None:
        reason = f"carriers and potential did not agree: after {MOST_PASSES} passes they still change by {last:.2g} V"
        raise ConvergenceError(reason)
    final = stage.carriers.in_potential(_function(stage, _felt(reached.phi, exchange)), counts, occupied)
    return Balanced(stage, held_V, reached, final, passes, last, exchange)


def _felt(potential: Array, exchange: Array | None) -> Array:
    return potential if exchange is None else potential + exchange


def _at_points(occupied: Occupied) -> Array:
    """(mesh points,) carriers in 1/nm^3, by |psi|^2."""
    found = np.zeros(len(occupied.space.mesh.points))
    found[occupied.space.nodes] = np.abs(occupied.states) ** 2 @ occupied.line_density_per_nm
    return found


def _function(stage: Stage, potential: Array) -> NodalFunction:
    return NodalFunction(stage.carriers.space.mesh, potential)


def _predicted(stage: Stage, held_V: Array, occupied: Occupied, at: Array, first: Array) -> Solution:
    """Poisson's equation with the carriers of some states found in the potential `at`."""
    field, places = stage.field, stage.places
    there = field.at_quadrature(at)[places]

    def charge(phi: Array) -> tuple[Array, Array]:
        density, slope = stage.dopants.charge(phi)
        held, rate = occupied.shifted(phi[places] - there)
        density[places] -= held
        slope[places] -= rate
        return density, slope

    return field.solve(held_V, charge, first, _POISSON_V)


def _combined(tried: Sequence[Array], answered: Sequence[Array]) -> Array:
    """The next potential: of all affine combinations of the last passes the one whose change would be least."""
    if len(tried) == 1:
        return answered[-1]
    changes = np.array([b - a for a, b in zip(tried, answered, strict=True)])
    steps = (changes[:-1] - changes[-1]).T
    weights, *_ = np.linalg.lstsq(steps, -changes[-1], rcond=1e-10)
    moved = (np.array(answered[:-1]) - answered[-1]).T
    return np.asarray(answered[-1] + moved @ weights)
