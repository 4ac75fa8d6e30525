"""Linear transport and carriers in equilibrium: constants, Fermi-Dirac integrals, Landauer sums, line densities."""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.optimize import brentq

from wiresolve.physics.fermi import fermi_integral, occupation
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.statistics import effective_states, line_density_by_subband, subband_density
from wiresolve.physics.transport import conductance, in_siemens
from wiresolve.physics.verdict import THERMAL_WIDTH_KT
from wiresolve.units import KB, RESISTANCE_QUANTUM_OHM

CODATA = "CODATA 2018 and 2022 (E. Tiesinga and others, Rev. Mod. Phys. 93, 025010 (2021)); exact since SI 2019"
LANDAUER = (
    "R. Landauer, IBM J. Res. Dev. 1, 223 (1957); M. Buettiker, Phys. Rev. Lett. 57, 1761 (1986); thermal rounding: "
    "P. F. Bagwell and T. P. Orlando, Phys. Rev. B 40, 1456 (1989); evaluated from the closed form"
)
INTEGRALS = (
    "J. S. Blakemore, Solid-State Electronics 25, 1067 (1982); DLMF 25.12(iii); evaluated by quadrature to 30 digits"
)
ETAS = [-10.0, -4.0, -2.0, -1.0, 0.0, 1.0, 2.0, 5.0, 10.0, 20.0]
MASS_REASON = "the electron's mass differs by 1.4e-9 between CODATA 2018 and 2022"


def four_subbands() -> Spectrum:
    """Subbands at 10, 25, 25 and 44.5 meV."""
    return Spectrum(
        energy_eV=np.array([0.010, 0.025, 0.025, 0.0445]),
        error_eV=np.zeros(4),
        axial_mass=np.full(4, 0.067),
        degeneracy=np.full(4, 2),
        level=np.array([1, 2, 2, 3]),
        listed=4,
    )


def landauer(temperature_K: float) -> Any:
    return conductance(four_subbands(), np.array([0.005, 0.010, 0.020, 0.030, 0.060]), temperature_K)


def half_width_kT() -> float:
    """Full width at half maximum of -df/dE = f (1 - f)/kT from the program's Fermi function at 1 K."""
    unit = KB * 1.0

    def above_half(x: float) -> float:
        filling = float(occupation(x * unit, 0.0, 1.0))
        return filling * (1 - filling) - 1 / 8

    return 2 * float(brentq(above_half, 0.0, 10.0, xtol=1e-14))


def round_silicon_wire() -> Any:
    """Line density of each level at the Fermi level (0 eV), orbital pairs together, in 1/m."""
    energy = [-0.0274369585, 0.0162432970, 0.0911033141, 0.1606493895, 0.1918040583]
    count = len(energy)
    spectrum = Spectrum(energy, np.zeros(count), np.full(count, 0.916), np.full(count, 4), range(1, count + 1), count)
    return line_density_by_subband(spectrum, 0.0, 300.0) * np.array([1, 2, 2, 1, 2]) * 1e9


TRUTH: list[dict[str, Any]] = [
    {
        "id": "conductance.quantum",
        "what": "conductance quantum 2e²/h in siemens",
        "value": 0.000077480917298636498182,
        "digits": 14,
        "source": CODATA,
        "tolerance_reason": "exact constants in double precision",
        "compute": lambda: float(in_siemens(1.0)),
    },
    {
        "id": "conductance.resistance",
        "what": "resistance quantum h/2e² in ohm",
        "value": 12906.40372965225,
        "digits": 14,
        "source": CODATA,
        "tolerance_reason": "exact constants in double precision",
        "compute": lambda: RESISTANCE_QUANTUM_OHM,
    },
    {
        "id": "conductance.thermal-energy",
        "what": "kT in meV at 300, 77, 4.2 and 1 K",
        "value": [25.851999786436, 6.6353466118518, 0.36192799701010, 0.086173332621452],
        "digits": 13,
        "source": CODATA,
        "tolerance_reason": "exact constants, printed with 14 digits",
        "compute": lambda: [1e3 * KB * temperature for temperature in (300, 77, 4.2, 1)],
    },
    {
        "id": "conductance.thermal-width",
        "what": "width of -df/dE at half maximum in kT, 4 ln(1 + sqrt 2)",
        "value": [3.52549434807817210, 3.52549434807817210],
        "digits": 13,
        "source": "elementary closed form",
        "tolerance_reason": "root of a smooth function in double precision",
        "compute": lambda: [half_width_kT(), THERMAL_WIDTH_KT],
    },
    {
        "id": "conductance.landauer-4K",
        "what": "G/G0 of subbands at 10, 25, 25, 44.5 meV, 4.2 K, Fermi level 5 to 60 meV",
        "value": [1.0006072159827e-6, 0.5, 1.0000020012134, 2.9999979987856, 4.0],
        "digits": 12,
        "source": LANDAUER,
        "tolerance_reason": "printed with 14 digits; differences of meV in double precision lose one",
        "compute": lambda: landauer(4.2),
    },
    {
        "id": "conductance.landauer-300K",
        "what": "the same at 300 K",
        "value": [1.2614818329081, 1.4261739843762, 1.7784594374927, 2.1440532861225, 3.1087783066822],
        "digits": 13,
        "source": LANDAUER,
        "tolerance_reason": "printed with 14 digits",
        "compute": lambda: landauer(300.0),
    },
    {
        "id": "fermi.minus-three-halves",
        "what": "Fermi-Dirac integral of order -3/2, eta -10 to 20",
        "value": [
            0.0000453970150131481524,
            0.0178516446265064670,
            0.113143846617372053,
            0.236814181329560772,
            0.380104812609684017,
            0.445724940212100741,
            0.418151353737953549,
            0.268859976530017399,
            0.180928068599584352,
            0.126556258999540663,
        ],
        "digits": 13,
        "source": INTEGRALS,
        "tolerance_reason": "double precision; a sum over poles cancels two digits at most",
        "compute": lambda: fermi_integral(-1.5, ETAS),
    },
    {
        "id": "fermi.one-half",
        "what": "Fermi-Dirac integral of order 1/2, eta -10 to 20",
        "value": [
            0.0000453992010526413275,
            0.0181982035083671088,
            0.129298513320075591,
            0.327795159260711548,
            0.765147024625407945,
            1.57564077615130023,
            2.82372127740158413,
            8.84420889524295389,
            24.0846569646376536,
            67.4915122216589205,
        ],
        "digits": 12,
        "source": INTEGRALS,
        "tolerance_reason": "double precision; a sum over poles cancels three digits at most",
        "compute": lambda: fermi_integral(0.5, ETAS),
    },
    {
        "id": "fermi.injection-1d",
        "what": "F_0/F_(-1/2), the 1D ballistic injection velocity over its thin limit, eta -2, 0, 2, 5",
        "value": [
            213338.344153 / 207854.978321,
            238178.897829 / 207854.978321,
            301915.051056 / 207854.978321,
            420815.171398 / 207854.978321,
        ],
        "digits": 11,
        "source": "K. Natori, J. Appl. Phys. 76, 4879 (1994); A. Rahman, J. Guo, S. Datta, M. Lundstrom, IEEE Trans. "
        "Electron Devices 50, 1853 (2003); velocities evaluated from the closed form",
        "tolerance_reason": "the velocities are printed with 12 digits",
        "compute": lambda: fermi_integral(0, [-2, 0, 2, 5]) / fermi_integral(-0.5, [-2, 0, 2, 5]),
    },
    {
        "id": "fermi.injection-2d",
        "what": "F_(1/2)/F_0, the same in two dimensions",
        "value": [
            211736.869287 / 207854.978321,
            229445.668505 / 207854.978321,
            275949.407715 / 207854.978321,
            367169.435495 / 207854.978321,
        ],
        "digits": 11,
        "source": "K. Natori, J. Appl. Phys. 76, 4879 (1994); velocities evaluated from the closed form",
        "tolerance_reason": "the velocities are printed with 12 digits",
        "compute": lambda: fermi_integral(0.5, [-2, 0, 2, 5]) / fermi_integral(0, [-2, 0, 2, 5]),
    },
    {
        "id": "density.one-subband",
        "what": "line density per m of one subband, mass 0.023, 77 K, eta -2, 0, 2, 5",
        "value": [4415788.925458, 21599412.12231, 52286284.06118, 88304180.23295],
        "digits": 9,
        "source": "S. Luryi, Appl. Phys. Lett. 52, 501 (1988); D. L. John, L. C. Castro, D. L. Pulfrey, J. Appl. Phys. "
        "96, 5180 (2004); evaluated from the closed form",
        "tolerance_reason": MASS_REASON,
        "compute": lambda: 1e9 * subband_density(0.0, 0.023, 2, np.array([-2, 0, 2, 5]) * KB * 77, 77.0),
    },
    {
        "id": "density.quantum-capacitance",
        "what": "quantum capacitance of the same in F/m, e² N F_(-3/2)/kT",
        "value": [9.755219362682e-11, 3.277249217413e-10, 3.605285045957e-10, 2.318100477674e-10],
        "digits": 9,
        "source": "S. Luryi, Appl. Phys. Lett. 52, 501 (1988); evaluated from the closed form",
        "tolerance_reason": MASS_REASON,
        "compute": lambda: (
            1.602176634e-19 * 1e9 * effective_states(0.023, 2, 77.0) / (KB * 77) * fermi_integral(-1.5, [-2, 0, 2, 5])
        ),
    },
    {
        "id": "density.absolute-zero",
        "what": "line density per m at T = 0, 10 meV above one subband, mass 0.067: 2 k_F/pi",
        "value": 84422081.5376,
        "digits": 9,
        "source": "elementary closed form",
        "tolerance_reason": MASS_REASON,
        "compute": lambda: float(1e9 * subband_density(0.0, 0.067, 2, 0.010, 0.0)),
    },
    {
        "id": "density.round-silicon-wire",
        "what": "line densities per m of the levels of a gated round wire, axial mass 0.916, two valleys, 300 K",
        "value": [9.379805779e08, 6.981796252e08, 5.138284817e07, 1.777393417e06, 1.066271897e06],
        "digits": 7,
        "source": "method of F. Stern, J. Comput. Phys. 6, 56 (1970); levels and densities from a "
        "spectral solution in the radius",
        "tolerance_reason": "the levels are printed to 1e-10 eV, 4e-9 of kT; the mass differs between CODATA sets",
        "compute": round_silicon_wire,
    },
]
