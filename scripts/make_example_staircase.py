"""Makes examples/measured_staircase.csv: the conductance of an invented wire, as it might have been measured.

    python scripts/make_example_staircase.py [FILE.csv]

A round GaAs wire with hard walls, 30 nm wide, in a bath of 4.2 K, whose electrons are warmer. Its levels are closed
forms, E = hbar^2 j^2/(2 m R^2) for the zeros j of the Bessel functions; G/G0 is the sum of 1/(1 + exp((E - E_F)/kT))
over them (R. Landauer (1957)), with a resistance in series, and Gaussian noise of a fixed seed. `TRUE` holds what a fit
should find.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
from scipy.constants import e, h, hbar, k, m_e
from scipy.special import expit, jn_zeros

TARGET = Path(__file__).resolve().parents[1] / "examples" / "measured_staircase.csv"
DIAMETER_nm, MASS = 30.0, 0.067
TRUE = {
    "lever_arm_eV_per_V": 0.031,
    "opens_at_V": -1.24,
    "series_resistance_ohm": 2150.0,
    "electron_temperature_K": 9.3,
}
NOISE_uS, SEED = 0.35, 20260507
VOLTAGES_V = np.round(np.arange(-1.70, 0.7001, 0.01), 3)


def wire_G0(fermi_eV: np.ndarray, temperature_K: float) -> np.ndarray:
    """Conductance of the wire itself in units of 2 e^2/h."""
    total = np.zeros_like(fermi_eV)
    for momentum in range(30):
        energy_eV = (hbar * jn_zeros(momentum, 15) / (DIAMETER_nm / 2 * 1e-9)) ** 2 / (2 * MASS * m_e * e)
        states = expit((fermi_eV[:, None] - energy_eV) / (k * temperature_K / e)).sum(axis=1)
        total += states if momentum == 0 else 2 * states
    return total


def measured_uS() -> np.ndarray:
    """Conductance in microsiemens at `VOLTAGES_V`, contacts and noise in it."""
    lowest_eV = (hbar * jn_zeros(0, 1)[0] / (DIAMETER_nm / 2 * 1e-9)) ** 2 / (2 * MASS * m_e * e)
    fermi_eV = lowest_eV + TRUE["lever_arm_eV_per_V"] * (VOLTAGES_V - TRUE["opens_at_V"])
    wire_S = 2 * e**2 / h * wire_G0(fermi_eV, TRUE["electron_temperature_K"])
    noise = np.random.default_rng(SEED).normal(scale=NOISE_uS, size=VOLTAGES_V.size)
    return 1e6 * wire_S / (1 + TRUE["series_resistance_ohm"] * wire_S) + noise


def main(target: Path) -> None:
    """Write."""
    rows = ["# invented: see scripts/make_example_staircase.py", "gate_voltage_V,conductance_uS"]
    rows += [f"{voltage:.2f},{value:.2f}" for voltage, value in zip(VOLTAGES_V, measured_uS(), strict=True)]
    target.write_text("\n".join(rows) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else TARGET)
