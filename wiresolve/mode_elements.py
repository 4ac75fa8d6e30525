"""Matrix elements between the listed subbands' modes, with error bars: input for scattering, optics and 1D models.

from wiresolve.mode_elements import form_factors, matrix_elements

elements = matrix_elements(result)
elements.dipole_x_nm[0, 1], elements.dipole_x_error_nm[0, 1]
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from wiresolve.errors import InputError
from wiresolve.fem.outline import outline_edges
from wiresolve.mode_groups import mode_groups
from wiresolve.physics import form_factors as forms
from wiresolve.physics import matrix_elements as blocks
from wiresolve.physics.matrix_elements import Barred
from wiresolve.physics.outline_motion import growths
from wiresolve.result import Result

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
MOST_VALUES = 50_000_000
"""Form factors that one call gives: with their bars they take 0.8 GB."""


@dataclass(frozen=True, eq=False)
class AlongOutlines:
    """How a displaced outline couples modes, place by place.

    Attributes
    ----------
    points_nm, normals : (p, 2) points of all outlines that carriers meet, and unit normals, away from the carriers at a
        wall and to one side at an interface.
    weights_nm : (p,) lengths of outline that the points stand for.
    values_eV_per_nm2 : (p, n, n) <i|change of H|j> for each nm of outline that moves 1 nm along its normal: at a wall
        -(hbar^2/2m) (d psi_i*/dn) (d psi_j/dn).
    """

    points_nm: Array
    normals: Array
    weights_nm: Array
    values_eV_per_nm2: NDArray[Any]


@dataclass(frozen=True, eq=False)
class MatrixElements:
    """Matrix elements of the n listed modes, at the axial wave number 0.

    Between modes of different valleys nothing is defined here: those elements are NaN, bars too. Elements hold for one
    spin and one of the valleys that an entry stands for. Inside a level of several modes they belong to the frame in
    which these are stored; `level_sums` does not.

    Attributes
    ----------
    valley, level : (n,) of each mode.
    energy_eV : (n,) at k = 0.
    layers : names of the pieces that carriers may enter.
    overlap : (n, n) between modes as they carry charge: the unit matrix, to the accuracy of everything below. Where
        masses grow with energy the folded-in bands' part is in it (see `physics.carried_modes`), as in all elements.
    envelope_overlap : (n, n) int psi_i* psi_j of the envelopes alone: the same where masses are constant.
    dipole_x_nm, dipole_y_nm : (n, n) <i|x|j>; the diagonal depends on the origin, the core's centroid.
    oscillator_x, oscillator_y : (n, n) (2 m0/hbar^2) (E_j - E_i) |<i|x|j>|^2, without unit.
    sum_rule_x, sum_rule_y : (n,) <i|m0/m_xx|i>, to which `oscillator_x[i]` adds up over all states, listed or not;
        NaN where masses grow with energy: the lower bands hold a part of the sum there.
    layer_overlap : (layers, n, n) the part of the overlap in each layer; what a change of its band edge couples.
    outlines : names as in the result's sensitivities: "growth of rim", "growth of core" and so on.
    roughness_eV_per_nm : (outlines, n, n) <i|change of H|j> where all of that outline moves outwards by 1 nm: at a wall
        -int (hbar^2/2m) (d psi_i*/dn) (d psi_j/dn) ds.
    along_outlines : the integrand of that.
    sums : what `level_sums` gives.
    digest : of the input.

    Each has a field of error bars of its shape, `overlap_error`, `dipole_x_error_nm` and so on.
    """

    valley: tuple[str, ...]
    level: Ints
    energy_eV: Array
    layers: tuple[str, ...]
    overlap: NDArray[Any]
    overlap_error: Array
    envelope_overlap: NDArray[Any]
    envelope_overlap_error: Array
    dipole_x_nm: NDArray[Any]
    dipole_x_error_nm: Array
    dipole_y_nm: NDArray[Any]
    dipole_y_error_nm: Array
    oscillator_x: Array
    oscillator_x_error: Array
    oscillator_y: Array
    oscillator_y_error: Array
    sum_rule_x: Array
    sum_rule_x_error: Array
    sum_rule_y: Array
    sum_rule_y_error: Array
    layer_overlap: NDArray[Any]
    layer_overlap_error: Array
    outlines: tuple[str, ...]
    roughness_eV_per_nm: NDArray[Any]
    roughness_error_eV_per_nm: Array
    along_outlines: AlongOutlines
    sums: Mapping[str, Barred]
    digest: str

    @property
    def penetration(self) -> Array:
        """(layers, n) probability of each mode in each layer."""
        return np.asarray(np.einsum("lii->li", self.layer_overlap).real)

    @property
    def penetration_error(self) -> Array:
        """(layers, n) its bars."""
        return np.asarray(np.einsum("lii->li", self.layer_overlap_error))

    def level_sums(self, of: str) -> tuple[Ints, Array, Array]:
        """Sums of |<i|f|j>|^2 over all i of one level and j of another, which no choice inside levels changes.

        Parameters
        ----------
        of : "overlap", "envelope_overlap", "dipole_x_nm", "dipole_y_nm", or "dipole_nm" for both directions together.

        Returns
        -------
        numbers of the levels, sums and bars, (levels, levels); pairs of different valleys add nothing. The last level
        holds only the modes that are listed of it.
        """
        if of not in self.sums:
            raise InputError("of", f"must be one of {', '.join(self.sums)}", of)
        found = self.sums[of]
        return np.unique(self.level), found.values, found.errors


@dataclass(frozen=True, eq=False)
class CoulombFormFactors:
    """F_ijkl(q) of some modes.

    Attributes
    ----------
    indices : (m,) which of the listed modes, from 0.
    q_per_nm : (k,).
    values, errors : (k, m, m, m, m); NaN where i and j, or k and l, belong to different valleys.
    """

    indices: Ints
    q_per_nm: Array
    values: NDArray[Any]
    errors: Array


@dataclass(frozen=True, eq=False)
class PlaneFormFactors:
    """<i|exp(i q.r)|j> at wave vectors in the section: `q_per_nm` (k, 2), `values` (complex) and `errors` (k, n, n)."""

    q_per_nm: Array
    values: NDArray[np.complex128]
    errors: Array


def matrix_elements(result: Result) -> MatrixElements:
    """All matrix elements of a result's modes.

    Raises
    ------
    ConvergenceError
        The modes are not states of the result's problem.
    """
    n = len(result.subbands)
    level = _level(result)
    edges = outline_edges(result.mesh)
    moving = growths(result.problem.section, edges)
    layers = tuple(r.name for r in result.mesh.regions if r.carriers)
    admitted = [k for k, r in enumerate(result.mesh.regions) if r.carriers]
    square = {name: blocks.without_groups(n) for name in _SQUARE}
    numbers = np.unique(level)
    nothing = np.zeros((len(numbers),) * 2)
    sums = {name: Barred(nothing, nothing) for name in blocks.SUMMED}
    rules = {name: Barred(np.full(n, np.nan), np.full(n, np.nan)) for name in ("sum_rule_x", "sum_rule_y")}
    stacked = {
        name: Barred(np.full((count, n, n), np.nan), np.full((count, n, n), np.nan))
        for name, count in (("layer_overlap", len(layers)), ("roughness_eV_per_nm", len(moving)))
    }
    energy = np.empty(n)
    profile: Any = None
    outline = None
    for group in mode_groups(result):
        rows, coarse = group.rows, group.coarse
        found = blocks.group_elements(coarse, group.fine, level[rows], numbers, moving, group.potential_error_eV)
        sums = {
            name: Barred(one.values + found.sums[name].values, one.errors + found.sums[name].errors)
            for name, one in sums.items()
        }
        energy[rows] = coarse.energy_eV
        for name in _SQUARE:
            square[name] = blocks.placed(square[name], getattr(found, name), rows)
        for name, whole in rules.items():
            own = getattr(found, name)
            whole.values[rows], whole.errors[rows] = own.values, own.errors
        shares = Barred(found.layer_overlap.values[admitted], found.layer_overlap.errors[admitted])
        stacked["layer_overlap"] = blocks.placed(stacked["layer_overlap"], shares, rows)
        stacked["roughness_eV_per_nm"] = blocks.placed(stacked["roughness_eV_per_nm"], found.roughness_eV_per_nm, rows)
        outline = found.outline
        if profile is None:
            profile = np.full((len(outline.points_nm), n, n), np.nan, dtype=outline.values.dtype)
        profile[:, rows[:, None], rows] = outline.values
    assert outline is not None
    return MatrixElements(
        valley=tuple(s.valley for s in result.subbands),
        level=level,
        energy_eV=energy,
        layers=layers,
        **{key: value for name in _SQUARE for key, value in _named(name, square[name])},
        **{key: value for name in rules for key, value in _named(name, rules[name])},
        **{key: value for name in stacked for key, value in _named(name, stacked[name])},
        outlines=tuple(moving),
        along_outlines=AlongOutlines(outline.points_nm, outline.normals, outline.weights_nm, profile),
        sums=sums,
        digest=result.problem.digest,
    )


_SQUARE = ("overlap", "envelope_overlap", "dipole_x_nm", "dipole_y_nm", "oscillator_x", "oscillator_y")
_UNITS = ("_eV_per_nm", "_nm")


def _named(name: str, barred: Barred) -> tuple[tuple[str, NDArray[Any]], tuple[str, Array]]:
    """A field and its bars' field: the unit stands last."""
    unit = next((u for u in _UNITS if name.endswith(u)), "")
    stem = name.removesuffix(unit)
    return (name, barred.values), (f"{stem}_error{unit}", barred.errors)


def form_factors(result: Result, q_per_nm: ArrayLike, indices: Sequence[int] | None = None) -> CoulombFormFactors:
    """Coulomb form factors F_ijkl(q) = int dr int dr' psi_i*(r) psi_j(r) K0(|q| |r - r'|) psi_k*(r') psi_l(r').

    Times 2 e^2/(4 pi eps) they are the matrix elements of the Coulomb energy at the axial momentum q in a uniform
    medium: K0 is the modified Bessel function, 2 K0(|q| rho) the Fourier transform of 1/sqrt(rho^2 + z^2) along z.

    Parameters
    ----------
    q_per_nm : one or several axial wave numbers; their sign does not matter, and none is 0, where F is infinite.
    indices : which of the listed modes, from 0; all unless given. Work and memory grow with the fourth power of their
        number.

    Raises
    ------
    InputError
        A q is 0 or not finite, there is no such mode, or more than `MOST_VALUES` numbers are asked for.
    """
    q = np.atleast_1d(np.abs(np.asarray(q_per_nm, dtype=float)))
    if q.ndim != 1 or not (np.isfinite(q).all() and (q > 0).all()):
        raise InputError("q_per_nm", "must be finite wave numbers other than 0", q_per_nm)
    picked = _picked(result, indices)
    level = _level(result)[picked]
    size = len(picked)
    if len(q) * size**4 > MOST_VALUES:
        rule = f"{size} modes and {len(q)} wave numbers are {len(q) * size**4:,} numbers, more than {MOST_VALUES:,}"
        raise InputError("indices", rule, remedy="name fewer modes, e.g. indices=[0, 1, 2]")
    values: Any = np.full((len(q), *(size,) * 4), np.nan)
    errors = np.full(values.shape, np.nan)
    groups = [(g, np.flatnonzero(np.isin(g.rows, picked))) for g in mode_groups(result)]
    groups = [(g, own) for g, own in groups if len(own)]
    place_of = {int(row): place for place, row in enumerate(picked)}
    rows_of = [np.array([place_of[int(r)] for r in g.rows[own]]) for g, own in groups]
    coarse = [forms.Pairs.of(g.coarse, own) for g, own in groups]
    fine = [forms.Pairs.of(g.fine, own) for g, own in groups]
    doubt = [blocks.doubts(g.coarse, g.fine, _level(result)[g.rows])[own] for g, own in groups]
    for k, wave in enumerate(q):
        here, there = forms.coulomb(coarse, float(wave)), forms.coulomb(fine, float(wave))
        for a, first in enumerate(rows_of):
            for b, second in enumerate(rows_of):
                place = np.ix_(np.array([k]), first, first, second, second)
                value, better = here[a][b], there[a][b]
                if np.iscomplexobj(value) and not np.iscomplexobj(values):
                    values = values.astype(complex)
                values[place] = value[None]
                states, own = (level[first], level[second]), (doubt[a], doubt[b])
                errors[place] = forms.bars(better - value, states, own, float(np.abs(value).max()))[None]
    return CoulombFormFactors(picked, np.atleast_1d(np.asarray(q_per_nm, dtype=float)), values, errors)


def plane_form_factors(result: Result, q_per_nm: ArrayLike) -> PlaneFormFactors:
    """<i|exp(i q.r)|j> for wave vectors q in the section, (k, 2) or one of them, in 1/nm.

    Raises
    ------
    InputError
        They are no finite pairs.
    """
    q = np.atleast_2d(np.asarray(q_per_nm, dtype=float))
    if q.ndim != 2 or q.shape[1] != 2 or not np.isfinite(q).all():
        raise InputError("q_per_nm", "must be pairs (q_x, q_y) of finite wave numbers", q_per_nm)
    n, level = len(result.subbands), _level(result)
    values = np.full((len(q), n, n), np.nan, dtype=complex)
    errors = np.full((len(q), n, n), np.nan)
    for group in mode_groups(result):
        rows = group.rows
        here, there = forms.plane(group.coarse, q), forms.plane(group.fine, q)
        place = np.ix_(np.arange(len(q)), rows, rows)
        values[place] = here
        doubt = blocks.doubts(group.coarse, group.fine, level[rows])
        errors[place] = blocks.block_bars(there - here, level[rows], 1.0) + blocks.hidden(np.ones(len(rows)), doubt)
    return PlaneFormFactors(q, values, errors)


def _level(result: Result) -> Ints:
    return np.array([s.level for s in result.subbands], dtype=np.int64)


def _picked(result: Result, indices: Sequence[int] | None) -> Ints:
    count = len(result.subbands)
    if indices is None:
        return np.arange(count)
    picked = np.asarray(indices, dtype=np.int64)
    if picked.ndim != 1 or not len(picked) or picked.min() < 0 or picked.max() >= count:
        raise InputError("indices", f"must be numbers of listed modes, from 0 to {count - 1}", list(indices))
    if len(np.unique(picked)) < len(picked):
        raise InputError("indices", "must name each mode once", list(indices))
    return picked


__all__ = [
    "AlongOutlines",
    "CoulombFormFactors",
    "MatrixElements",
    "PlaneFormFactors",
    "form_factors",
    "matrix_elements",
    "plane_form_factors",
]
