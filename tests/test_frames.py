"""Data frames and datasets hold what the files hold, and say so where their library is missing."""

from __future__ import annotations

import csv
import importlib
import json
from dataclasses import replace
from io import StringIO

import matplotlib.pyplot as plt
import numpy as np
import pandas as pd
import pytest
import xarray as xr

from tests.gate_sweeps import PlateSweep, swept_problem
from tests.synthetic import charged_result, core_shell_result
from wiresolve import frames
from wiresolve.errors import InputError
from wiresolve.gate_curve import gate_curve
from wiresolve.gate_result import GateCurve
from wiresolve.output.gate_curve_tables import gate_curve_csv
from wiresolve.output.tables import cell, result_json, subbands_csv


def columns_of(text: str) -> dict[str, list[str]]:
    """The columns of a CSV file that begins with remarks."""
    head, *rows = csv.reader(StringIO("\n".join(line for line in text.splitlines() if not line.startswith("#"))))
    return {name: [row[n] for row in rows] for n, name in enumerate(head)}


def shown(values: pd.Series | pd.Index) -> list[str]:
    """A column as the CSV file writes it."""
    return [cell(None if pd.isna(value) else value) for value in values.tolist()]


def test_the_frame_of_subbands_holds_the_csv() -> None:
    for result in (core_shell_result(7), charged_result()):
        frame, table = result.to_pandas(), columns_of(subbands_csv(result))
        assert list(table) == ["index", *frame.columns]
        assert shown(frame.index) == table["index"]
        for name in frame.columns:
            assert shown(frame[name]) == table[name], name
        assert frame.loc[2, "energy_eV"] == result.subbands[1].energy_eV
        assert frame.attrs["input_digest"] == result.problem.digest


def test_columns_of_numbers_are_numbers() -> None:
    subbands = tuple(
        replace(s, axial_mass=None, wall_effect_eV=None, bound=None) for s in core_shell_result(2).subbands
    )
    frame = replace(core_shell_result(2), subbands=subbands).to_pandas()
    assert {frame[name].dtype for name in ("energy_eV", "axial_mass", "wall_effect_eV", "line_density_per_nm")} == {
        np.dtype("float64")
    }
    assert frame["bound"].dtype == "boolean"
    assert frame["bound"].isna().all()


def test_a_dataset_labels_its_axes() -> None:
    for data in (charged_result().to_xarray(), core_shell_result(3).to_xarray(), curve_of().to_xarray()):
        for name in map(str, data.variables):
            assert data[name].attrs["long_name"], name
            ending = next((end for end in ("_eV", "_nm", "_V", "_K", "_G0", "_S") if name.endswith(end)), None)
            assert ending is None or data[name].attrs["units"], name
    found = core_shell_result(3).to_xarray()
    assert found.psi_per_nm.attrs == {"long_name": "envelope function", "units": "1/nm"}
    assert found.temperature_K.attrs == {"long_name": "temperature", "units": "K"}
    assert found.density_of_states_per_eV_nm.attrs["units"] == "1/(eV nm)"
    assert found.axial_mass.attrs["units"] == "m0"
    one = found.conductance_G0.sel(temperature_K=77.0)
    assert one.conductance_fermi_eV.dims == ("fermi_level",)
    assert one.attrs["units"] == "2 e^2/h"
    (line,) = one.plot(x="conductance_fermi_eV")
    assert line.axes.get_xlabel() == "Fermi level [eV]"
    plt.close("all")


def curve_of() -> GateCurve:
    return gate_curve(swept_problem(), solver=PlateSweep)


def test_the_frame_of_a_file_is_that_of_the_result() -> None:
    result = core_shell_result(3)
    pd.testing.assert_frame_equal(frames.subbands(json.loads(result_json(result))), result.to_pandas())


def test_the_frame_of_a_gate_curve_holds_the_csv() -> None:
    curve = gate_curve(swept_problem(4), solver=lambda given: PlateSweep(given, failing=(1,)))
    frame, table = curve.to_pandas(), columns_of(gate_curve_csv(curve))
    assert list(table) == ["gate_voltage_V", *frame.columns]
    assert shown(frame.index) == table["gate_voltage_V"]
    for name in frame.columns:
        assert shown(frame[name]) == table[name], name
    assert frame["energy_1_eV"].dtype == np.dtype("float64")
    assert frame["converged"].tolist() == [True, False, True, True]
    assert frame.attrs["swept_gate"] == "wrap"


def test_the_dataset_of_a_gate_curve_holds_points_and_fields() -> None:
    curve = gate_curve(swept_problem(4), solver=lambda given: PlateSweep(given, failing=(1,)))
    found = curve.to_xarray()
    assert dict(found.sizes) == {"gate_voltage_V": 4, "subband": 6, "node": len(curve.mesh.points)}
    last = found.sel(gate_voltage_V=curve.points[3].gate_voltage_V)
    np.testing.assert_array_equal(last["energy_eV"], curve.points[3].energy_eV)
    np.testing.assert_array_equal(last["potential_V"], curve.points[3].potential_V)
    assert float(last["conductance_G0"]) == curve.points[3].conductance_G0
    assert float(last["level_spacing_eV"]) == curve.points[3].more["level_spacing_eV"]
    failed = found.isel(gate_voltage_V=1)
    assert np.isnan(failed["energy_eV"]).all()
    assert np.isnan(failed["density_per_nm3"]).all()
    assert found["converged"].values.tolist() == [True, False, True, True]


def test_the_dataset_holds_subbands_curves_and_modes() -> None:
    result = core_shell_result(5)
    found = result.to_xarray()
    assert isinstance(found, xr.Dataset)
    assert dict(found.sizes) == {
        "subband": 5,
        "k_per_nm": len(result.dispersion.k_per_nm),
        "bin": len(result.density_of_states.per_eV_nm),
        "temperature_K": 3,
        "fermi_level": max(len(c.fermi_eV) for c in (*result.conductance, *result.density)),
        "node": len(result.mesh.points),
    }
    np.testing.assert_array_equal(found["energy_eV"], result.energies_eV)
    np.testing.assert_array_equal(found["psi_per_nm"].sel(subband=2), result.modes[:, 1])
    np.testing.assert_array_equal(found["x_nm"], result.mesh.points[:, 0])
    curve = found["conductance_G0"].sel(temperature_K=77.0).dropna("fermi_level")
    np.testing.assert_array_equal(curve, result.conductance[1].values)
    bands = found["dispersion_energy_eV"].sel(subband=1, k_per_nm=result.dispersion.k_per_nm[3])
    assert float(bands) == result.dispersion.energy_eV[0, 3]
    assert found.attrs["input_digest"] == result.problem.digest


def test_curves_of_other_lengths_are_padded() -> None:
    result = core_shell_result(2)
    first, *others = result.conductance
    short = replace(first, fermi_eV=first.fermi_eV[:5], values=first.values[:5])
    found = replace(result, conductance=(short, *others)).to_xarray()
    curve = found["conductance_G0"].sel(temperature_K=short.temperature_K)
    np.testing.assert_array_equal(curve[:5], short.values)
    assert np.isnan(curve[5:]).all()


def test_a_charged_wire_has_its_potential_at_the_nodes() -> None:
    result = charged_result()
    assert result.charge is not None
    found = result.to_xarray()
    np.testing.assert_array_equal(found["potential_V"], result.charge.potential_V)
    np.testing.assert_array_equal(found["density_per_nm3"], result.charge.density_per_nm3)


@pytest.mark.parametrize("name", ["pandas", "xarray"])
def test_a_missing_library_is_named(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    def missing(module: str) -> None:
        raise ImportError(f"No module named {module!r}")

    result = core_shell_result(1)
    monkeypatch.setattr(importlib, "import_module", missing)
    with pytest.raises(InputError, match=rf"to_{name}\(\): needs {name}, which is not installed; pip install {name}"):
        getattr(result, f"to_{name}")()
