"""A silicon sheet in a gate all around: which valleys does it fill, and is a plate a fair estimate of its capacitance?

    python examples/silicon_sheet.py [PICTURE.png]

The thin direction decides: valleys that are heavy across it (0.92 against 0.19 m0) lie lower, and carry at 0.19 m0
along the wire. The capacitance of a metal sheet lies between two closed forms: field lines kept straight across the
oxide (W. Thomson's principle) give flats/thickness + 2 pi/ln(1 + thickness/radius), a potential that falls evenly
across it (Dirichlet's) gives perimeter/thickness + pi, each times the permittivity.
"""

import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure
from scipy.constants import epsilon_0
from scipy.interpolate import griddata

import wiresolve as ws

WIRE = Path(__file__).resolve().parents[1] / "geometries" / "silicon_sheet.toml"
WIDTH_nm, HEIGHT_nm, CORNER_nm, OXIDE_nm, OXIDE_PERMITTIVITY = 25.0, 5.0, 2.0, 1.0, 3.9


def bounds() -> tuple[float, float]:
    """What the capacitance of a metal sheet cannot be below, and above, in F/m."""
    flats_nm = 2 * (WIDTH_nm + HEIGHT_nm) - 8 * CORNER_nm
    low = flats_nm / OXIDE_nm + 2 * np.pi / np.log(1 + OXIDE_nm / CORNER_nm)
    high = (flats_nm + 2 * np.pi * CORNER_nm) / OXIDE_nm + np.pi
    return epsilon_0 * OXIDE_PERMITTIVITY * low, epsilon_0 * OXIDE_PERMITTIVITY * high


def main(picture: str | None = None) -> tuple[ws.GateCurve, tuple[float, float]]:
    problem = ws.load(WIRE)
    curve = ws.gate_curve(replace(problem, voltages=replace(problem.voltages, count=2)))
    last, (low, high) = curve.points[-1], bounds()
    upright = sum(n for n, name in zip(last.line_density_by_subband_per_nm, last.valley, strict=True) if "001" in name)
    part = upright / last.line_density_per_nm
    print(f"lowest valleys: {last.valley[0]}; they hold {part:.0%} of {last.line_density_per_nm:.2f} electrons a nm")
    geometric, found = 1e9 * last.geometric_F_per_m, 1e9 * last.capacitance_F_per_m
    print(f"a metal sheet would have {geometric:.3f} nF/m, from {1e9 * low:.3f} to {1e9 * high:.3f} by closed forms")
    print(f"with electrons it has {found:.2f} nF/m at {last.gate_voltage_V:g} V")
    if picture:
        figure = Figure(figsize=(6.5, 2.4), dpi=150, layout="constrained")
        axes = figure.subplots()
        x, y = np.meshgrid(np.linspace(-13.6, 13.6, 545), np.linspace(-3.6, 3.6, 145))
        density = griddata(curve.mesh.points, last.density_per_nm3, (x, y))
        drawn = axes.pcolormesh(x, y, 1e21 * density, cmap="viridis", rasterized=True)
        figure.colorbar(drawn, ax=axes, label="Electrons (cm$^{-3}$)")
        axes.set(
            xlabel="x (nm)",
            ylabel="y (nm)",
            aspect="equal",
            title=f"Silicon sheet, {last.gate_voltage_V:g} V on its gate",
        )
        figure.savefig(picture)
    return curve, (low, high)


if __name__ == "__main__":
    main(*sys.argv[1:2])
