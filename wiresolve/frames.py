"""Results for pandas and xarray, where these are installed. They are made of plain data and of arrays on the mesh."""

from __future__ import annotations

import importlib
import re
from collections.abc import Mapping, Sequence
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

import wiresolve.columns as columns
from wiresolve.errors import InputError

if TYPE_CHECKING:
    import pandas
    import xarray

Array = NDArray[np.float64]
Plain = Mapping[str, Any]
_UNITS: Mapping[str, str] = MappingProxyType(
    {
        **{"per_eV_nm": "1/(eV nm)", "V_per_K": "V/K", "W_per_K": "W/K", "F_per_m": "F/m", "per_nm3": "1/nm^3"},
        **{"per_nm2": "1/nm^2", "per_nm": "1/nm", "meV": "meV", "eV": "eV", "nm": "nm", "V": "V", "K": "K", "S": "S"},
        "G0": "2 e^2/h",
    }
)
"""Endings of names and the units that they stand for, the longest first."""
_LABELS: Mapping[str, tuple[str, str]] = MappingProxyType(
    {
        "axial_mass": ("axial mass", "m0"),
        "axial_mass_error": ("axial mass error", "m0"),
        "gate_coupling": ("first level's fall for each volt on the gate", "eV/V"),
        "coupling": ("level's fall for each volt on the gate", "eV/V"),
        "empty_coupling": ("first level's fall for each volt without carriers", "eV/V"),
        "psi_per_nm": ("envelope function", "1/nm"),
        "k_per_nm": ("wave number along the wire", "1/nm"),
        "conductance_fermi_eV": ("Fermi level", "eV"),
        "density_fermi_eV": ("Fermi level", "eV"),
    }
)
"""Words and units of names that do not tell them, or not in full."""


def subbands(data: Plain) -> pandas.DataFrame:
    """The subbands, indexed by `subband` from 1, with the columns of `subbands.csv`.

    Parameters
    ----------
    data : the content of `result.json`. Its title, digest and energy zero become `attrs` of the frame.

    Raises
    ------
    InputError
        pandas is not installed.
    """
    pd = _library("pandas")
    frame = pd.DataFrame(columns.subbands(data["subbands"], data["sensitivities"]))
    frame = frame.rename(columns={"index": "subband"}).set_index("subband")
    numbers = ("axial_mass", "axial_mass_error", "wall_effect_eV", "line_density_per_nm")
    frame = frame.astype(dict.fromkeys(numbers, "float64") | {"bound": "boolean"})
    frame.attrs = _about(data)
    return frame


def gate_curve(data: Plain) -> pandas.DataFrame:
    """The points of a sweep, indexed by `gate_voltage_V` in its order, with the columns of `gate_curve.csv`.

    Parameters
    ----------
    data : the content of `gate_curve.json`.

    Raises
    ------
    InputError
        pandas is not installed.
    """
    pd = _library("pandas")
    found = columns.gate_curve(data["points"], data["swept_gate"])
    whole = {
        name: pd.array(values, dtype="Int64") for name, values in found.items() if re.fullmatch(r"level_\d+", name)
    }
    rest = {name: _column(values) for name, values in found.items() if name not in whole}
    frame = pd.DataFrame(rest | whole)[list(found)].set_index("gate_voltage_V")
    frame.attrs = _about(data) | {"swept_gate": data["swept_gate"], "temperature_K": data["temperature_K"]}
    return frame


def _column(values: list[Any]) -> list[Any]:
    """Numbers that are missing as NaN, so that a column of numbers stays one."""
    numeric = all(value is None or isinstance(value, float) for value in values)
    return [np.nan if value is None else value for value in values] if numeric else values


def dataset(data: Plain, points: Array, modes: Array, fields: Mapping[str, Array]) -> xarray.Dataset:
    """A result as one dataset, its coordinates and variables named as in `result.json`, units as suffixes.

    Dimensions: `subband` (from 1), `k_per_nm` (of the dispersion), `bin` (of the density of states), `temperature_K`
    and `fermi_level` (of the curves; each temperature has Fermi levels of its own, and NaN beyond them), `node` (of
    the mesh). All have a `long_name` and `units`, which plots write on their axes; the Fermi levels of a curve are its
    coordinate: `conductance_G0.sel(temperature_K=77.0).plot(x="conductance_fermi_eV")`.

    Parameters
    ----------
    data : the content of `result.json`.
    points : (nodes, 2) in nm.
    modes : (nodes, subbands) in 1/nm.
    fields : further arrays (nodes,) by name.

    Raises
    ------
    InputError
        xarray is not installed.
    """
    xr = _library("xarray")
    rows, dispersion, states = data["subbands"], data["dispersion"], data["density_of_states"]
    edges = np.array(states["edges_eV"])
    kelvin = [curve["temperature_K"] for curve in data["conductance"]]
    longest = max((len(c["fermi_eV"]) for name in ("conductance", "density") for c in data[name]), default=0)
    coordinates: dict[str, Any] = {
        "subband": [row["index"] for row in rows],
        "k_per_nm": dispersion["k_per_nm"],
        "bin_from_eV": ("bin", edges[:-1]),
        "bin_to_eV": ("bin", edges[1:]),
        "temperature_K": kelvin,
        "x_nm": ("node", points[:, 0]),
        "y_nm": ("node", points[:, 1]),
    }
    coordinates |= {name: ("subband", [row[name] for row in rows]) for name in ("level", "valley", "layer")}
    variables: dict[str, Any] = {
        name: ("subband", np.array([row[name] for row in rows], dtype=float))
        for name in ("energy_eV", "error_eV", "k_min_per_nm", "axial_mass", "axial_mass_error", "line_density_per_nm")
    }
    variables["degeneracy"] = ("subband", [row["spin_degeneracy"] * row["valley_degeneracy"] for row in rows])
    variables["dispersion_energy_eV"] = (("subband", "k_per_nm"), np.array(dispersion["energy_eV"], dtype=float))
    variables["density_of_states_per_eV_nm"] = ("bin", states["per_eV_nm"])
    curves = {"conductance_fermi_eV": ("conductance", "fermi_eV"), "conductance_G0": ("conductance", "G_over_G0")}
    curves |= {"density_fermi_eV": ("density", "fermi_eV"), "density_per_nm": ("density", "per_nm")}
    for name, (curve, key) in curves.items():
        rows_of = [_padded(entry[key], longest) for entry in data[curve]]
        variables[name] = (("temperature_K", "fermi_level"), np.array(rows_of).reshape(len(kelvin), longest))
    variables["psi_per_nm"] = (("node", "subband"), modes)
    variables |= {name: ("node", values) for name, values in fields.items()}
    made: xarray.Dataset = xr.Dataset(variables, coordinates, _about(data))
    return _labelled(made.set_coords(["conductance_fermi_eV", "density_fermi_eV"]))


def curve_dataset(data: Plain, points: Array, fields: Mapping[str, Sequence[Array]]) -> xarray.Dataset:
    """A gate curve as one dataset, named as in `gate_curve.json`; what a point lacks is NaN.

    Dimensions: `gate_voltage_V` (in the order of the sweep), `subband` (the listed ones by energy, from 1), `node` (of
    the mesh).

    Parameters
    ----------
    data : the content of `gate_curve.json`.
    points : (nodes, 2) in nm.
    fields : arrays (nodes,) of each point by name, empty where the point failed.

    Raises
    ------
    InputError
        xarray is not installed.
    """
    xr = _library("xarray")
    rows, nodes = data["points"], len(points)
    most = max((len(row["energy_eV"]) for row in rows), default=0)
    single = (*columns.POINT, "passes", "residual_V", "gauss_error")
    variables: dict[str, Any] = {
        name: ("gate_voltage_V", np.array([row[name] for row in rows], dtype=float)) for name in single
    }
    for name in dict.fromkeys(name for row in rows for name in row["more"]):
        variables[name] = ("gate_voltage_V", np.array([row["more"].get(name) for row in rows], dtype=float))
    variables["converged"] = ("gate_voltage_V", [row["converged"] for row in rows])
    for name in ("energy_eV", "error_eV", "level", "axial_mass", "coupling", "line_density_by_subband_per_nm"):
        of_points = np.array([_padded(row[name], most) for row in rows]).reshape(len(rows), most)
        variables[name] = (("gate_voltage_V", "subband"), of_points)
    for name, values in fields.items():
        of_points = np.array([_padded(list(value), nodes) for value in values]).reshape(len(rows), nodes)
        variables[name] = (("gate_voltage_V", "node"), of_points)
    coordinates: dict[str, Any] = {
        "gate_voltage_V": [row["gate_voltage_V"] for row in rows],
        "subband": np.arange(1, most + 1),
        "x_nm": ("node", points[:, 0]),
        "y_nm": ("node", points[:, 1]),
    }
    about = _about(data) | {"swept_gate": data["swept_gate"], "temperature_K": data["temperature_K"]}
    made: xarray.Dataset = xr.Dataset(variables, coordinates, about)
    return _labelled(made)


def _labelled(made: xarray.Dataset) -> xarray.Dataset:
    """The same with `long_name` and `units` on all that has a name with its unit: plots label their axes by them."""
    for name in made.variables:
        long_name, unit = label(str(name))
        made[name].attrs |= {"long_name": long_name} | ({"units": unit} if unit else {})
    return made


def label(name: str) -> tuple[str, str]:
    """Words and unit of a name such as "conductance_fermi_eV"; the unit is empty where there is none."""
    if name in _LABELS:
        return _LABELS[name]
    ending = next((end for end in _UNITS if name.endswith(f"_{end}")), "")
    return name.removesuffix(f"_{ending}").replace("_", " "), _UNITS.get(ending, "")


def _padded(values: Sequence[float | None], length: int) -> Array:
    return np.concatenate([np.asarray(values, dtype=float), np.full(length - len(values), np.nan)])


def _about(data: Plain) -> dict[str, str]:
    zero = data["energy_zero"]["text"]
    return {"title": data["title"], "input_digest": data["input_digest"], "energies_from": zero}


def _library(name: str) -> Any:
    try:
        return importlib.import_module(name)
    except ImportError:
        remedy = f"pip install {name}, or take to_dict()"
        raise InputError(f"to_{name}()", f"needs {name}, which is not installed", remedy=remedy) from None
