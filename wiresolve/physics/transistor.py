"""The ballistic transistor at the top of its barrier: charge, current, injection velocity against both voltages.

K. Natori, J. Appl. Phys. 76, 4879 (1994); A. Rahman, J. Guo, S. Datta and M. Lundstrom, IEEE Trans. Electron Devices
50, 1853 (2003). All levels follow one shift U (eV):

    U = -(a_G V_G + a_D V_D) + (n - n0)/C,   n = sum N/2 [(1 + r) F_(-1/2)(eta_S) + (1 - r) F_(-1/2)(eta_D)],
    I = (2 e/h) kT sum (g/2) (1 - r) [F_0(eta_S) - F_0(eta_D)],

with 1 - r = T the transmission: of the carriers that the source sends over the barrier the part r comes back and is
there twice, the drain's reach it with the part 1 - r (M. Lundstrom, IEEE Electron Device Lett. 18, 361 (1997)).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from math import log
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import expit

from wiresolve.errors import InputError
from wiresolve.physics.conductance import Openings, openings, openings_of_rows
from wiresolve.physics.fermi import checked_temperature, fermi_integral
from wiresolve.physics.filling import Filling
from wiresolve.physics.rounded import ramp, ramp_window, step, window
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.statistics import effective_states, tail_density
from wiresolve.physics.transmission import Transmission
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, FARAD_PER_M, KB

Array = NDArray[np.float64]

_PASSES = 300
_ROUNDING = 1e-15
_FARTHEST_EV = 1e3
_DIFFERENCE_KT = 0.02
"""Step of the fourth-order difference that stands for the slope of a tabulated band's density."""


class States(Protocol):
    """Subbands that hold carriers; energies from the source's Fermi level where U = 0."""

    @property
    def openings(self) -> Openings:
        """Where their modes open."""

    def density(self, fermi_eV: Array, temperature_K: float) -> Array:
        """Line density in 1/nm of each subband in equilibrium, (n, *fermi); what is counted only comes last."""

    def slope(self, fermi_eV: Array, temperature_K: float) -> Array:
        """Its derivative by the Fermi level, 1/(eV nm)."""


@dataclass(frozen=True, eq=False)
class Rows:
    """Plain subbands e (1 + alpha e) = hbar^2 k^2/2m, e from their minimum: (n,) each; degeneracy = spin x valley."""

    energy_eV: Array
    axial_mass: Array
    degeneracy: Array
    alpha_per_eV: Array | None = None

    def __post_init__(self) -> None:
        energy = np.atleast_1d(np.asarray(self.energy_eV, dtype=float))
        object.__setattr__(self, "energy_eV", energy)
        for name in ("axial_mass", "degeneracy", "alpha_per_eV"):
            given = getattr(self, name)
            value = np.broadcast_to(np.asarray(0.0 if given is None else given, dtype=float), energy.shape)
            object.__setattr__(self, name, value)
        if not (self.axial_mass > 0).all():
            raise InputError("axial_mass", "must be positive", self.axial_mass.tolist())

    @cached_property
    def openings(self) -> Openings:
        """Where their modes open."""
        return openings_of_rows(self.energy_eV, self.degeneracy)

    def density(self, fermi_eV: Array, temperature_K: float) -> Array:
        """Line density in 1/nm of each subband in equilibrium, (n, *fermi)."""
        return self._of(fermi_eV, temperature_K, slope=False)

    def slope(self, fermi_eV: Array, temperature_K: float) -> Array:
        """Its derivative by the Fermi level, 1/(eV nm); infinite on an opening at T = 0."""
        return self._of(fermi_eV, temperature_K, slope=True)

    def _of(self, fermi_eV: Array, temperature_K: float, slope: bool) -> Array:
        fermi = np.asarray(fermi_eV, dtype=float)
        out = np.empty((self.energy_eV.size, *fermi.shape))
        assert self.alpha_per_eV is not None
        for alpha in np.unique(self.alpha_per_eV):
            same = np.flatnonzero(self.alpha_per_eV == alpha)
            filling = Filling(temperature_K, float(alpha))
            depth = fermi - self.energy_eV[same].reshape(-1, *[1] * fermi.ndim)
            weight = (self.degeneracy * np.sqrt(self.axial_mass))[same].reshape(-1, *[1] * fermi.ndim)
            out[same] = weight * (filling.slope(depth) if slope else filling.density(depth))
        return out


@dataclass(frozen=True, eq=False)
class SpectrumStates:
    """The subbands of a spectrum, with its tables and its tail; energies from the source's Fermi level."""

    spectrum: Spectrum

    @cached_property
    def openings(self) -> Openings:
        """Where their modes open."""
        return openings(self.spectrum)

    def density(self, fermi_eV: Array, temperature_K: float) -> Array:
        """Line density in 1/nm of each subband in equilibrium, (n + 1, *fermi), the tail last."""
        fermi = np.asarray(fermi_eV, dtype=float)
        tables, rows = self._closed
        out = np.empty((len(tables) + 1, *fermi.shape))
        out[:-1][~tables] = rows.density(fermi, temperature_K)
        for n in np.flatnonzero(tables):
            band = self.spectrum.bands[n]
            assert band is not None
            length = band.occupied_length(fermi, np.asarray(temperature_K, dtype=float))
            out[n] = self.spectrum.degeneracy[n] / np.pi * length
        out[-1] = tail_density(self.spectrum, fermi, temperature_K)
        return out

    @cached_property
    def _closed(self) -> tuple[NDArray[np.bool_], Rows]:
        """(n,) which subbands are tables, and all others as rows."""
        spectrum = self.spectrum
        energy, table = spectrum.energy_eV, spectrum.band_eV
        tables = np.zeros(energy.size, dtype=bool) if table is None else np.isfinite(table).all(axis=1)
        tables &= ~spectrum.parabolic
        alpha = np.zeros(energy.size)
        if spectrum.nonparabolicity_per_eV is not None:
            edge = 0.0 if spectrum.edge_eV is None else spectrum.edge_eV
            # e (1 + a e), e from the band edge, counted from the minimum e_n: a becomes a / (1 + 2 a e_n)
            alpha = spectrum.nonparabolicity_per_eV / (1 + 2 * spectrum.nonparabolicity_per_eV * (energy - edge))
        kept = ~tables
        # an axial mass may be unknown only where there is a table
        return tables, Rows(
            energy[kept], spectrum.axial_mass[kept], spectrum.degeneracy[kept].astype(float), alpha[kept]
        )

    def slope(self, fermi_eV: Array, temperature_K: float) -> Array:
        """Its derivative by the Fermi level, 1/(eV nm), by a difference of fourth order."""
        unit = _DIFFERENCE_KT * KB * max(temperature_K, 0.01)
        near, far = (
            self.density(fermi_eV + m * unit, temperature_K) - self.density(fermi_eV - m * unit, temperature_K)
            for m in (1, 2)
        )
        return np.asarray((8 * near - far) / (12 * unit))


@dataclass(frozen=True, eq=False)
class Transistor:
    """A channel between two contacts, seen at the top of its barrier.

    Parameters
    ----------
    states : subbands where no voltage is applied and the channel holds `reference_per_nm`; the source's Fermi level
        is 0.
    gate_coupling, drain_coupling : -dU/dV of each voltage without charge, dimensionless, 0 to 1 together.
    capacitance_per_V_nm : of the channel to all its electrodes, in e/(V nm).
    reference_per_nm : line density n0 that the energies of `states` hold for already.
    transmission : without tunnelling (a width of 0); `Open` is the ballistic limit. A mean free path goes with the
        length over which carriers scatter back: the whole channel near equilibrium, the first kT of its drop at a high
        drain voltage.

    Raises
    ------
    InputError : for a value outside these rules.
    """

    states: States
    transmission: Transmission
    temperature_K: float
    gate_coupling: float
    drain_coupling: float
    capacitance_per_V_nm: float
    reference_per_nm: float

    def __post_init__(self) -> None:
        checked_temperature(self.temperature_K)
        if not (self.gate_coupling > 0 and self.drain_coupling >= 0):
            rule = "must be positive, and that of the drain not negative"
            raise InputError("gate_coupling", rule, (self.gate_coupling, self.drain_coupling))
        if not self.capacitance_per_V_nm > 0:
            raise InputError("capacitance", "must be positive", self.capacitance_per_V_nm)
        if self.transmission.width_eV != 0:
            raise InputError(
                "transmission", "of a transistor must not tunnel", None, "use a mean free path or a number"
            )

    @cached_property
    def _returned(self) -> Array:
        """(n,) part r of the source's carriers that comes back, a subband; the last for those that are counted only."""
        count = self.states.density(np.zeros(1), self.temperature_K).shape[0]
        return 1 - self.transmission.part(np.arange(count))

    def density(self, shift_eV: ArrayLike, drain_V: ArrayLike) -> Array:
        """Line density in 1/nm at a level shift U; broadcast."""
        return self._both_contacts(self.states.density, shift_eV, drain_V)

    def density_slope(self, shift_eV: ArrayLike, drain_V: ArrayLike) -> Array:
        """-dn/dU in 1/(eV nm): the quantum capacitance in e/(V nm); broadcast."""
        return self._both_contacts(self.states.slope, shift_eV, drain_V)

    def at(self, gate_V: ArrayLike, drain_V: ArrayLike) -> Operation:
        """Level shift, charge and current at gate and drain voltages (both from the source); broadcast."""
        gate, drain = np.broadcast_arrays(np.asarray(gate_V, dtype=float), np.asarray(drain_V, dtype=float))
        shift = self._shift(gate, drain)
        flux, forward = self._fluxes(shift, drain)
        ahead = self.states.density(-shift, self.temperature_K).sum(axis=0)
        with np.errstate(divide="ignore", invalid="ignore"):
            velocity = 2 * forward / (FARAD_PER_M * np.asarray(ahead))
        return Operation(gate, drain, shift, self.density(shift, drain), flux, np.asarray(velocity))

    def transconductance(self, gate_V: ArrayLike, drain_V: ArrayLike) -> Array:
        """dI/dV_G in siemens; broadcast."""
        point = self.at(gate_V, drain_V)
        modes, thermal, span = self.states.openings, KB * self.temperature_K, point.drain_voltage_V[..., None]
        # dI/d(-U): the window between the two Fermi levels moves as a whole
        source = -point.level_shift_eV[..., None] - modes.energy_eV
        weights = modes.modes * self.transmission.part(modes.subband)
        gained = _steps_apart(source, source - span, thermal) @ weights
        if modes.ramp_eV.size:
            source = -point.level_shift_eV[..., None] - modes.ramp_eV
            grown = window(source - span, span, thermal, 0.0) @ modes.ramp_per_eV
            gained = gained + grown * self.transmission.part(modes.beyond)
        stored = self.density_slope(point.level_shift_eV, point.drain_voltage_V) / self.capacitance_per_V_nm
        return np.asarray(CONDUCTANCE_QUANTUM_SIEMENS * gained / 2 * self.gate_coupling / (1 + stored))

    def subthreshold_slope_mV_per_decade(self, gate_V: ArrayLike, drain_V: ArrayLike) -> Array:
        """Gate voltage per decade of current, ln 10 I/(dI/dV_G) in mV; at least ln 10 kT/(e a_G)."""
        current = self.at(gate_V, drain_V).current_A
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(1e3 * log(10) * current / self.transconductance(gate_V, drain_V))

    def gate_voltage_at(self, current_A: ArrayLike, drain_V: ArrayLike) -> Array:
        """Gate voltage at which a current flows, positive as the drain voltage is; broadcast. T > 0 or a current > 0.

        Raises
        ------
        InputError : for a current that is not positive, or a drain voltage that is not.
        """
        wanted, drain = np.broadcast_arrays(np.asarray(current_A, dtype=float), np.asarray(drain_V, dtype=float))
        if not ((wanted > 0).all() and (drain > 0).all()):
            raise InputError("current", "must be positive, and the drain voltage too", (current_A, drain_V))
        # I rises as U falls: a bracket, then halves
        unit = max(KB * self.temperature_K, 1e-3)
        low, high = np.full(wanted.shape, -unit), np.full(wanted.shape, unit)
        first = self.states.openings.energy_eV.min()
        for sign, end in ((1.0, low), (-1.0, high)):
            reach = unit
            while True:
                beyond = (self._fluxes(-(first + end), drain)[0] - wanted) * sign > 0
                if not beyond.any():
                    break
                if reach > _FARTHEST_EV:
                    raise InputError("current", "is more than the channel's subbands carry", current_A)
                end[beyond] -= sign * reach
                reach *= 2
        for _ in range(_PASSES):
            middle = (low + high) / 2
            over = self._fluxes(-(first + middle), drain)[0] > wanted
            low, high = np.where(over, low, middle), np.where(over, middle, high)
            if (high - low <= 4e-16 * np.maximum(np.abs(middle), unit)).all():
                break
        shift = -(first + (low + high) / 2)
        charge = (self.density(shift, drain) - self.reference_per_nm) / self.capacitance_per_V_nm
        return np.asarray((charge - shift - self.drain_coupling * drain) / self.gate_coupling)

    def barrier_lowering_mV_per_V(self, current_A: float, low_drain_V: float, high_drain_V: float) -> float:
        """By how many mV the gate voltage for one current falls with each V of drain voltage."""
        low, high = self.gate_voltage_at(current_A, np.array([low_drain_V, high_drain_V]))
        return float(1e3 * (low - high) / (high_drain_V - low_drain_V))

    def _both_contacts(self, held: Callable[[Array, float], Array], shift_eV: ArrayLike, drain_V: ArrayLike) -> Array:
        """(1 + r)/2 of what the source's Fermi level holds and (1 - r)/2 of what the drain's does."""
        shift, drain = np.broadcast_arrays(np.asarray(shift_eV, dtype=float), np.asarray(drain_V, dtype=float))
        source, far = (held(-shift - v, self.temperature_K) for v in (np.zeros(()), drain))
        with np.errstate(invalid="ignore"):
            sums = np.tensordot(1 + self._returned, source, 1) + np.tensordot(1 - self._returned, far, 1)
        return np.asarray(sums / 2)

    def _shift(self, gate: Array, drain: Array) -> Array:
        """The one U of each pair of voltages: U - (n(U) - n0)/C rises through its root, which is bracketed."""
        from scipy.optimize import elementwise

        capacitance = self.capacitance_per_V_nm
        drive = self.gate_coupling * gate + self.drain_coupling * drain + self.reference_per_nm / capacitance
        # n >= 0 bounds U below, and the charge that would be there bounds it above
        low = -drive
        high = low + self.density(low, drain) / capacitance
        margin = _ROUNDING * np.maximum(np.abs(low), np.abs(high) + 1e-3)

        def excess(shift: Array, drive: Array, drain: Array) -> Array:
            return np.asarray(shift + drive - self.density(shift, drain) / capacitance)

        found = elementwise.find_root(
            excess,
            (low - margin, high + margin),
            args=(drive, drain),
            tolerances={"xatol": 1e-17, "xrtol": 2e-16, "fatol": 0, "frtol": 0},
            maxiter=_PASSES,
        )
        return np.asarray(found.x)

    def _fluxes(self, shift: Array, drain: Array) -> tuple[Array, Array]:
        """Current, and what the source alone sends over the barrier, in A."""
        modes, thermal = self.states.openings, KB * self.temperature_K
        span, source = np.asarray(drain)[..., None], -shift[..., None] - modes.energy_eV
        through = window(source - span, span, thermal, 0.0) @ (modes.modes * self.transmission.part(modes.subband))
        sent = ramp(source, thermal, 0.0) @ modes.modes
        if modes.ramp_eV.size:
            source = -shift[..., None] - modes.ramp_eV
            grown = ramp_window(source, source - span, thermal, 0.0) @ modes.ramp_per_eV
            through = through + grown * self.transmission.part(modes.beyond)
            sent = sent + ramp_window(source, -np.inf, thermal, 0.0) @ modes.ramp_per_eV
        return CONDUCTANCE_QUANTUM_SIEMENS * through / 2, CONDUCTANCE_QUANTUM_SIEMENS * sent / 2


@dataclass(frozen=True, eq=False)
class Operation:
    """A transistor at its voltages (arrays of one shape).

    `level_shift_eV` is U, `injection_velocity_m_per_s` the mean velocity of the carriers that the source sends along.
    """

    gate_voltage_V: Array
    drain_voltage_V: Array
    level_shift_eV: Array
    line_density_per_nm: Array
    current_A: Array
    injection_velocity_m_per_s: Array


def thermal_velocity_m_per_s(axial_mass: ArrayLike, temperature_K: float) -> Array:
    """sqrt(2 kT/(pi m)): the injection velocity of thin carriers of a parabola."""
    # G0 kT/2 A are sent by a spin-resolved mode in the thin limit, over half its states N
    per_nm = effective_states(axial_mass, 1, temperature_K)
    return np.asarray(CONDUCTANCE_QUANTUM_SIEMENS * KB * temperature_K / (FARAD_PER_M * per_nm))


def injection_velocity_m_per_s(eta: ArrayLike, axial_mass: ArrayLike, temperature_K: float) -> Array:
    """sqrt(2 kT/(pi m)) F_0(eta)/F_(-1/2)(eta) of one parabola, eta = (E_F - E)/kT (Natori 1994)."""
    ratio = fermi_integral(0, eta) / fermi_integral(-0.5, eta)
    return np.asarray(thermal_velocity_m_per_s(axial_mass, temperature_K) * ratio)


def _steps_apart(high: Array, low: Array, thermal: float) -> Array:
    """Fermi function at one distance less that at a lower one; no digits are lost where they are near."""
    if thermal == 0:
        return step(high, 0.0, 0.0) - step(low, 0.0, 0.0)
    a, b = high / thermal, low / thermal
    swapped = b > a
    a, b = np.where(swapped, b, a), np.where(swapped, a, b)
    return np.asarray(np.where(swapped, -1, 1) * expit(a) * expit(-b) * -np.expm1(b - a))
