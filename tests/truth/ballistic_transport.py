"""Transmission, finite drain voltage, thermopower and ballistic transistors: closed forms and a scalar root."""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
from scipy.optimize import brentq

from wiresolve.physics.capacitance import in_F_per_m, per_V_nm, quantum_capacitance_per_V_nm
from wiresolve.physics.conductance import Openings, current, openings_of_rows, transmitted_conductance
from wiresolve.physics.thermoelectric import (
    LORENZ_V2_PER_K2,
    THERMAL_QUANTUM_W_PER_K2,
    Thermoelectric,
    thermoelectric,
)
from wiresolve.physics.transistor import (
    Operation,
    Rows,
    Transistor,
    injection_velocity_m_per_s,
    thermal_velocity_m_per_s,
)
from wiresolve.physics.transmission import Open, Saddle
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, KB

NATORI = (
    "K. Natori, J. Appl. Phys. 76, 4879 (1994); A. Rahman, J. Guo, S. Datta, M. Lundstrom, IEEE Trans. Electron "
    "Devices 50, 1853 (2003)"
)
SADDLE = "M. Buettiker, Phys. Rev. B 41, 7906 (1990), Eqs. (3) to (5); evaluated from the closed form"
MASS_REASON = "printed with 10 to 12 digits; worked out with the electron's mass of CODATA 2022"
ETAS = np.array([-2.0, 0.0, 2.0, 5.0])


def saddle(along: float, across: float, energies: list[float]) -> Any:
    """G/G0 at T = 0 of a saddle-shaped constriction at energies above its top, all in units of hbar omega_x's eV."""
    levels = across * (np.arange(12) + 0.5)
    return transmitted_conductance(openings_of_rows(levels, 2), Saddle(along), np.array(energies), 0.0)


def one_step() -> Openings:
    """A single subband of both spins."""
    return openings_of_rows([0.0], [2])


def drain_currents_uA() -> Any:
    return 1e6 * current(one_step(), Open(), 0.05, np.array([0.001, 0.01, 0.1, 0.5]), 77.0, lowered_part=0.0)


def thermal_step(eta: float) -> Thermoelectric:
    return thermoelectric(one_step(), Open(), eta * KB * 300.0, 300.0)


@cache
def best_eta() -> float:
    """Where S^2 G is largest: d/d eta (L_1^2/L_0) = 0 is L_1/L_0 = -2 eta for a single step (its derivatives are p)."""
    return float(brentq(lambda eta: -float(thermal_step(eta).seebeck_V_per_K) / KB + 2 * eta, -2.0, -0.5, xtol=1e-15))


def best_power_factor() -> float:
    return float(thermal_step(best_eta()).power_factor_W_per_K2) / (CONDUCTANCE_QUANTUM_SIEMENS * KB**2)


@cache
def transistor(gate_V: float) -> Operation:
    device = Transistor(
        states=Rows(np.array([0.3]), np.array([0.19]), np.array([4])),
        transmission=Open(),
        temperature_K=300.0,
        gate_coupling=1.0,
        drain_coupling=0.0,
        capacitance_per_V_nm=float(per_V_nm(1e-9)),
        reference_per_nm=0.0,
    )
    return device.at(gate_V, 0.5)


def operation(gate_V: float) -> list[float]:
    """Level shift in eV, line density per m, current in uA."""
    point = transistor(gate_V)
    return [float(point.level_shift_eV), 1e9 * float(point.line_density_per_nm), 1e6 * float(point.current_A)]


def injection(mass: float) -> Any:
    thin = thermal_velocity_m_per_s(mass, 300.0)
    return np.append(thin, injection_velocity_m_per_s(ETAS, mass, 300.0))


def capacitance() -> Any:
    rows = Rows(np.array([0.0]), np.array([0.023]), np.array([2]))
    return in_F_per_m(quantum_capacitance_per_V_nm(rows, ETAS * KB * 77.0, 77.0))


def frozen() -> list[float]:
    """Density of states per eV nm and Fermi velocity in m/s of one subband, twice the source's mean velocity."""
    rows = Rows(np.array([-0.010]), np.array([0.067]), np.array([2]))
    device = Transistor(rows, Open(), 0.0, 1.0, 0.0, 1.0, float(rows.density(np.zeros(()), 0.0).sum()))
    mean = float(device.at(0.0, 0.0).injection_velocity_m_per_s)
    return [float(quantum_capacitance_per_V_nm(rows, 0.0, 0.0)), 2 * mean]


TRUTH: list[dict[str, Any]] = [
    {
        "id": "transport.saddle-3",
        "what": "G/G0 of a saddle, hbar omega_y three times hbar omega_x, at 0 to 10 hbar omega_x above its top",
        "value": [
            8.06930062092231e-5,
            0.0414238324477897,
            0.500000006512412,
            1.00000000000053,
            1.5,
            2.0,
            3.04142368174608,
        ],
        "digits": 13,
        "source": SADDLE,
        "tolerance_reason": "printed with 15 digits",
        "compute": lambda: saddle(1.0, 3.0, [0, 1, 1.5, 3, 4.5, 6, 10]),
    },
    {
        "id": "transport.saddle-2.5",
        "what": "the same, hbar omega_y 2.5 times hbar omega_x, at 0 to 5 hbar omega_x",
        "value": [
            0.000388052619182321,
            0.00890331135017829,
            0.0414238386787759,
            0.827897826263172,
            0.998216731128220,
            1.00888653585008,
            2.0,
        ],
        "digits": 13,
        "source": SADDLE,
        "tolerance_reason": "printed with 15 digits",
        "compute": lambda: saddle(2.0, 5.0, [0, 1, 1.5, 3, 4.5, 6, 10]),
    },
    {
        "id": "transport.drain-current",
        "what": "current in uA of one open subband, 50 meV below the source's Fermi level, 77 K, 1 mV to 0.5 V",
        "value": [0.077436300578124, 0.77384627417767, 3.8740458649318, 3.8743202492161],
        "digits": 13,
        "source": NATORI + "; evaluated from the closed form",
        "tolerance_reason": "printed with 14 digits",
        "compute": drain_currents_uA,
    },
    {
        "id": "transport.thermal-quantum",
        "what": "quantum of thermal conductance over T in W/K², pi² k²/(3 h)",
        "value": [9.46431151638664e-13, 9.46431151638664e-13],
        "digits": 13,
        "source": "L. G. C. Rego and G. Kirczenow, Phys. Rev. Lett. 81, 232 (1998); J. B. Pendry, J. Phys. A 16, 2161 "
        "(1983)",
        "tolerance_reason": "exact constants, printed with 15 digits; the constant, and half a step far below E_F",
        "compute": lambda: [
            THERMAL_QUANTUM_W_PER_K2,
            float(thermal_step(200.0).thermal_conductance_W_per_K) / 2 / 300.0,
        ],
    },
    {
        "id": "transport.lorenz",
        "what": "Lorenz number in V²/K², pi²/3 (k/e)²",
        "value": 2.4430045090737e-8,
        "digits": 13,
        "source": "exact constants",
        "tolerance_reason": "printed with 14 digits",
        "compute": lambda: LORENZ_V2_PER_K2,
    },
    {
        "id": "transport.power-factor",
        "what": "largest S²G of one step in (k/e)² G0, and the eta where it lies",
        "value": [1.26538684548, -1.14455444091],
        "digits": 11,
        "source": "R. Kim, S. Datta, M. S. Lundstrom, J. Appl. Phys. 105, 034506 (2009); N. Nakpathomkun, H. Q. Xu, "
        "H. Linke, Phys. Rev. B 82, 235428 (2010); evaluated by a search to 30 digits",
        "tolerance_reason": "printed with 12 digits",
        "compute": lambda: [best_power_factor(), best_eta()],
    },
    {
        "id": "transport.injection-0.067",
        "what": "injection velocity in m/s, mass 0.067, 300 K: thin limit, eta -2, 0, 2, 5",
        "value": [207854.978321, 213338.344153, 238178.897829, 301915.051056, 420815.171398],
        "digits": 10,
        "source": NATORI + "; evaluated from the closed form",
        "tolerance_reason": MASS_REASON,
        "compute": lambda: injection(0.067),
    },
    {
        "id": "transport.injection-0.19",
        "what": "the same, mass 0.19",
        "value": [123430.086004, 126686.261639, 141437.275550, 179285.581797, 249891.790983],
        "digits": 10,
        "source": NATORI + "; evaluated from the closed form",
        "tolerance_reason": MASS_REASON,
        "compute": lambda: injection(0.19),
    },
    {
        "id": "transport.quantum-capacitance",
        "what": "quantum capacitance in F/m of one subband, mass 0.023, 77 K, eta -2, 0, 2, 5",
        "value": [9.755219362682e-11, 3.277249217413e-10, 3.605285045957e-10, 2.318100477674e-10],
        "digits": 10,
        "source": "S. Luryi, Appl. Phys. Lett. 52, 501 (1988); evaluated from the closed form",
        "tolerance_reason": MASS_REASON,
        "compute": capacitance,
    },
    {
        "id": "transport.absolute-zero",
        "what": "T = 0, 10 meV above one subband of mass 0.067: states per eV nm, Fermi velocity in m/s",
        "value": [4.22110407688, 229133.345025],
        "digits": 11,
        "source": "elementary closed form",
        "tolerance_reason": MASS_REASON,
        "compute": frozen,
    },
    {
        "id": "transport.transistor-off",
        "what": "top of the barrier at 0.2 V: shift in eV, density per m, current in uA",
        "value": [-0.199348041002, 4069208.00226, 0.0808077276432],
        "digits": 11,
        "source": NATORI + ", Eqs. (1) to (11); scalar root to 30 digits",
        "tolerance_reason": MASS_REASON,
        "compute": lambda: operation(0.2),
    },
    {
        "id": "transport.transistor-on",
        "what": "the same at 0.6 V",
        "value": [-0.499132691206, 629564223.154, 30.8597403941],
        "digits": 11,
        "source": NATORI + ", Eqs. (1) to (11); scalar root to 30 digits",
        "tolerance_reason": MASS_REASON,
        "compute": lambda: operation(0.6),
    },
]
