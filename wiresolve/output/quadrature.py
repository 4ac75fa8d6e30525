"""Modes at quadrature points with weights: `modes.npz`, for people who compute on.

Integrals over the section are plain sums: int psi_i* f psi_j = sum_p weights_p conj(psi_pi) f(x_p, y_p) psi_pj.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.fem.space import Space
from wiresolve.mode_groups import channels_of, listed_modes
from wiresolve.physics.wire import Wire
from wiresolve.result import Result

Array = NDArray[np.float64]


def points(result: Result) -> dict[str, NDArray[Any]]:
    """The arrays of `modes.npz`, for p points, n modes, v groups of valleys and l layers.

    Returns
    -------
    points_nm (p, 2), weights_nm2 (p,) : the points, twelve digits of a polynomial of degree 12 on a straight cell.
    modes_per_nm (p, n), gradients_per_nm2 (p, 2, n) : envelope functions at k = 0, of integral 1, and their slopes.
    layer, material (p,) : numbers among `layer_names` (l,) and `material_names`.
    valley (n,) : number among `valley_names` (v,).
    band_edge_eV, nonparabolicity_per_eV (v, l), inverse_mass_per_m0 (v, l, 3, 3) : of each group of valleys in each
        layer, axes x, y, and z along the wire; not a number where carriers are kept out.
    potential_eV (p,) : what is added to the band edge there, 0 without field or charge.
    energy_eV, error_eV, k_min_per_nm, level, spin_degeneracy, valley_degeneracy (n,) : as in the table of subbands.
    carried (n,) : int of what the mode carries in units of int |psi|^2: above 1 where masses grow with energy.
    title, input_digest, energy_zero, versions : texts.
    """
    space = Space(result.mesh)
    places, weights = space.quadrature_points.reshape(-1, 2), space.quadrature_weights.ravel()
    n, regions = len(result.subbands), result.mesh.regions
    modes = np.zeros((len(weights), n), dtype=result.modes.dtype)
    slopes = np.zeros((len(weights), 2, n), dtype=result.modes.dtype)
    carried, potential = np.ones(n), np.zeros(len(weights))
    rule = len(weights) // len(space.cells)
    for number, (rows, _, own) in enumerate(listed_modes(result)):
        for several in own.chunks():
            rows_here = (several[:, None] * rule + np.arange(rule)).ravel()
            modes[rows_here[:, None], rows] = own.values(several).reshape(-1, len(rows))
            slopes[rows_here[:, None, None], np.arange(2)[:, None], rows] = own.slopes(several)[0].reshape(
                -1, 2, len(rows)
            )
        carried[rows] = own.norm
        if number == 0:
            potential = own.operator.potential_on(own.space).ravel()
    labels = list(dict.fromkeys(s.valley for s in result.subbands))
    layers = [region.name for region in regions]
    materials = list(dict.fromkeys(region.material for region in regions))
    region = result.mesh.region[space.cells]
    of_region = np.array([materials.index(r.material) for r in regions])
    edge, alpha, inverse_mass = _tables(result, labels)
    return {
        "points_nm": places,
        "weights_nm2": weights,
        "modes_per_nm": modes,
        "gradients_per_nm2": slopes,
        "layer": np.repeat(region, rule),
        "material": np.repeat(of_region[region], rule),
        "layer_names": np.array(layers),
        "material_names": np.array(materials),
        "valley": np.array([labels.index(s.valley) for s in result.subbands]),
        "valley_names": np.array(labels),
        "band_edge_eV": edge,
        "nonparabolicity_per_eV": alpha,
        "inverse_mass_per_m0": inverse_mass,
        "potential_eV": potential,
        "energy_eV": result.energies_eV,
        "error_eV": result.errors_eV,
        "k_min_per_nm": np.array([s.k_min_per_nm for s in result.subbands]),
        "level": np.array([s.level for s in result.subbands]),
        "spin_degeneracy": np.array([s.spin_degeneracy for s in result.subbands]),
        "valley_degeneracy": np.array([s.valley_degeneracy for s in result.subbands]),
        "carried": carried,
        "title": np.array(result.problem.title),
        "input_digest": np.array(result.problem.digest),
        "energy_zero": np.array(result.energy_zero_text),
        "versions": np.array([f"{name} {version}" for name, version in result.versions.items()]),
    }


def write_points(result: Result, path: str | Path) -> None:
    """Write `modes.npz` (see `points`); `numpy.load` reads it."""
    with Path(path).open("wb") as file:
        np.savez(file, allow_pickle=False, **points(result))


def _tables(result: Result, labels: list[str]) -> tuple[Array, Array, Array]:
    """Band edges and nonparabolicities (v, l), and inverse masses (v, l, 3, 3)."""
    wire, regions = Wire(result.problem), result.mesh.regions
    shape = len(labels), len(regions)
    edge, alpha, tensor = np.full(shape, np.nan), np.full(shape, np.nan), np.full((*shape, 3, 3), np.nan)
    groups = {group.label: group for group in wire.groups}
    operators = {channel.label: channel.operator_of(result.mesh) for channel in channels_of(result)}
    for v, label in enumerate(labels):
        group, operator = groups[label], operators[label]
        for r, region in enumerate(regions):
            if region.carriers:
                edge[v, r] = wire.edge_eV(region.material, region.offset_eV, group)
                alpha[v, r] = operator.nonparabolicity_per_eV[r] if operator.nonparabolic else 0.0
                tensor[v, r] = group.inverse_mass[region.material]
    return edge, alpha, tensor
