"""The one operator: N-band assembly against dense references, Hermiticity, closed forms in k."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import scipy.linalg as dense

from wiresolve.bands.coefficients import Coefficients
from wiresolve.bands.effective_mass import coefficients, without_common_shear
from wiresolve.describe.section import Layer, Patch, Section
from wiresolve.describe.shapes import Circle, Rectangle
from wiresolve.describe.wirefile import parse
from wiresolve.fem import eigen
from wiresolve.fem.mesh import Mesh
from wiresolve.fem.meshing import Mesher, SizeField
from wiresolve.fem.space import Space
from wiresolve.physics.channel import Channel
from wiresolve.physics.pencil import Operator, build
from wiresolve.physics.solved import solve_on
from wiresolve.physics.subbands import certify
from wiresolve.physics.wire import Wire

WIDTH, HEIGHT = 11.0, 7.0
SIGMA_X = np.array([[0, 1], [1, 0]])
SIGMA_Y = np.array([[0, -1j], [1j, 0]])
SIGMA_Z = np.diag([1.0, -1.0])


def two_bands() -> Coefficients:
    """A made-up coupled two-band operator with every kind of term."""
    quadratic = np.zeros((3, 3, 2, 2), dtype=complex)
    quadratic[0, 0] = np.diag([0.6, 0.9]) + 0.1 * SIGMA_X
    quadratic[1, 1] = np.diag([0.5, 0.7]) + 0.05 * SIGMA_Y
    quadratic[2, 2] = np.diag([0.4, 0.8])
    quadratic[0, 1] = 0.07 * SIGMA_Z + 0.04j * SIGMA_X
    quadratic[1, 0] = quadratic[0, 1].conj().T
    quadratic[0, 2] = 0.06 * np.eye(2) + 0.03 * SIGMA_Y
    quadratic[2, 0] = quadratic[0, 2].conj().T
    quadratic[1, 2] = 0.05j * SIGMA_X
    quadratic[2, 1] = quadratic[1, 2].conj().T
    linear = np.array([0.08 * SIGMA_Y, 0.06 * SIGMA_X, 0.05 * SIGMA_Z], dtype=complex)
    return Coefficients(quadratic, linear, np.diag([0.0, 0.15]).astype(complex))


def coupling(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """A coupling that varies over the section."""
    return np.asarray(0.2 * np.cos(np.pi * x / WIDTH) * np.cos(2 * np.pi * y / HEIGHT) + 0.05 * x / WIDTH)


def spectral_reference(k: float, count: int, modes: int = 22) -> np.ndarray:
    """Energies of the two-band operator in the hard-walled rectangle from global polynomials (dense, spectral).

    The basis is P_(i+1) - P_(i-1) in each direction, which vanishes on the walls; Gauss-Legendre rules of 80 points are
    exact to rounding for it.
    """
    nodes, weights = np.polynomial.legendre.leggauss(80)
    tables = []
    for length in (WIDTH, HEIGHT):
        x = nodes * length / 2
        polynomials = [
            np.polynomial.Legendre.basis(i + 1) - np.polynomial.Legendre.basis(i - 1) for i in range(1, modes + 1)
        ]
        scale = [np.sqrt(4 * i + 2) for i in range(1, modes + 1)]
        values = np.array([p(nodes) / c for p, c in zip(polynomials, scale, strict=True)])
        slopes = np.array([p.deriv()(nodes) / c for p, c in zip(polynomials, scale, strict=True)])
        tables.append((x, weights * length / 2, values, slopes * 2 / length))
    (x, wx, fx, dx), (y, wy, fy, dy) = tables

    def pair(left_x: np.ndarray, right_x: np.ndarray, left_y: np.ndarray, right_y: np.ndarray) -> np.ndarray:
        return np.kron((left_x * wx) @ right_x.T, (left_y * wy) @ right_y.T)

    c = two_bands()
    value = pair(fx, fx, fy, fy)
    slope = {0: (dx, fy), 1: (fx, dy)}
    total = np.zeros((2 * modes**2,) * 2, dtype=complex)
    for i in range(2):
        for j in range(2):
            block = pair(slope[i][0], slope[j][0], slope[i][1], slope[j][1])
            total += np.kron(block, c.quadratic[i, j])
        forward = pair(fx, slope[i][0], fy, slope[i][1])  # <f| d_i f>
        total += np.kron(-0.5j * forward, c.linear[i]) + np.kron(0.5j * forward.T, c.linear[i])
        total += k * (np.kron(1j * forward.T, c.quadratic[i, 2]) + np.kron(-1j * forward, c.quadratic[2, i]))
    total += np.kron(value, c.constant + k * c.linear[2] + k**2 * c.quadratic[2, 2])
    xs, ys = np.meshgrid(x, y, indexing="ij")
    field = coupling(xs, ys)
    products = np.einsum("ax,bx,x->abx", fx, fx, wx).reshape(-1, len(x))
    inner = (products @ field) @ np.einsum("ay,by,y->aby", fy, fy, wy).reshape(-1, len(y)).T
    varying = inner.reshape(modes, modes, modes, modes).transpose(0, 2, 1, 3).reshape(modes**2, modes**2)
    total += np.kron(varying, SIGMA_X)
    mass = np.kron(value, np.eye(2))
    return np.asarray(dense.eigh(total, mass, eigvals_only=True, subset_by_index=(0, count - 1)))


@pytest.mark.parametrize("k", [0.0, 0.35])
def test_two_coupled_bands_against_a_spectral_reference(k: float) -> None:
    """Every term of the operator, with a coupling that varies over the section, on an even mesh (not graded)."""
    operator = Operator((two_bands(),), coupling=((coupling, SIGMA_X),))
    with Mesher(Section(Rectangle(width_nm=WIDTH, height_nm=HEIGHT), "a").pieces()) as mesher:
        mesh, _ = mesher.mesh(SizeField(0.5))
    pencil = build(Space(mesh), operator)
    energy, _ = eigen.lowest(pencil.at(k), pencil.mass, 8, -1.0)
    np.testing.assert_allclose(energy, spectral_reference(k, 8), rtol=2e-8)


def test_two_bands_split_by_regions_and_element_matrices_agree() -> None:
    """The same operator given over two regions of equal coefficients; element matrices sum to the global ones."""
    section = Section(Circle(diameter_nm=6), "a", layers=(Layer(2, "b"),))
    with Mesher(section.pieces()) as mesher:
        mesh, _ = mesher.mesh(SizeField(2.5))
    space = Space(mesh)
    operator = Operator((two_bands(), two_bands()), coupling=((coupling, SIGMA_X),))
    pencil = build(space, operator, released=space.wall)
    k = 0.2
    matrix = pencil.at(k).toarray()
    np.testing.assert_allclose(matrix, matrix.conj().T, atol=1e-14)
    summed = np.zeros_like(matrix)
    for number, local in enumerate(pencil.local(k)(space, slice(None))):
        at = (space.dofs[number][:, None] * 2 + np.arange(2)).ravel()
        summed[np.ix_(at, at)] += local
    np.testing.assert_allclose(summed, matrix, atol=1e-13 * np.abs(matrix).max())
    states = np.eye(len(matrix))[:, :5]
    for order, whole in enumerate((pencil.h0, pencil.h1, pencil.h2)):
        np.testing.assert_allclose(pencil.expected(order, states), whole.toarray()[:5, :5], atol=1e-13)


def test_coefficients_must_be_hermitian() -> None:
    good = two_bands()
    broken = good.quadratic.copy()
    broken[0, 1, 0, 1] += 0.1
    with pytest.raises(ValueError, match="A_ij"):
        Coefficients(broken, good.linear, good.constant)
    with pytest.raises(ValueError, match="linear"):
        Coefficients(good.quadratic, good.linear + 0.1j * np.eye(2), good.constant)
    with pytest.raises(ValueError, match="constant"):
        Coefficients(good.quadratic, good.linear, good.constant + 0.1j * np.eye(2))
    with pytest.raises(ValueError, match="shapes"):
        Coefficients(good.quadratic[:, :, :1], good.linear, good.constant)


TENSOR = np.array([[20.0, 3.0, 5.0], [3.0, 15.0, -4.0], [5.0, -4.0, 10.0]])
"""An invented inverse mass with all axis-plane terms, in 1/m0."""


def sections() -> dict[str, Section]:
    return {
        "one": Section(Rectangle(width_nm=12, height_nm=7), "a"),
        "two": Section(Rectangle(width_nm=16, height_nm=11), "b", patches=(Patch(Circle(diameter_nm=8), "a"),)),
    }


def solved(section: Section, tensors: dict[str, np.ndarray], edge: dict[str, float], sheared: bool = True):  # type: ignore[no-untyped-def]
    def operator(mesh: Mesh) -> Operator:
        inverse = [tensors[r.material] for r in mesh.regions]
        inverse = inverse if sheared else without_common_shear(inverse)
        return Operator(tuple(coefficients(w, edge[r.material]) for w, r in zip(inverse, mesh.regions, strict=True)))

    return certify(
        lambda distance: section.pieces(), [Channel("zone centre", "zone centre", 1, operator)], 4, 1e-6
    ).solved[0]


def test_axis_plane_terms_of_one_material_go_into_the_axial_mass() -> None:
    """Closed form: E(k) = E + hbar^2 k^2/2m (W_zz - w.W^-1.w), with the terms kept in the pencil and without them."""
    axial = TENSOR[2, 2] - TENSOR[2, :2] @ np.linalg.solve(TENSOR[:2, :2], TENSOR[:2, 2])
    section = sections()["one"]
    kept = solved(section, {"a": TENSOR}, {"a": 0.0})
    gone = solved(section, {"a": TENSOR}, {"a": 0.0}, sheared=False)
    np.testing.assert_allclose(kept.energy_eV[:4], gone.energy_eV[:4], rtol=1e-10)
    assert gone.pencil.uniform_axial_eV_nm2 == pytest.approx(0.0380998211096858 * axial, rel=1e-10)
    assert kept.pencil.h1 is not None
    assert gone.pencil.h1 is None
    for k in (0.1, 0.3):
        full, _ = eigen.lowest(kept.pencil.at(k), kept.pencil.mass, 4, kept.shift_eV)
        np.testing.assert_allclose(full, kept.energy_eV[:4] + 0.0380998211096858 * axial * k**2, atol=2e-6)


def test_axis_plane_terms_across_a_jump_keep_time_reversal() -> None:
    """E(k) = E(-k) for one band, Hermitian pencils, and a real difference from the operator without the terms."""
    tensors = {"a": TENSOR, "b": np.diag([9.0, 12.0, 8.0])}
    found = solved(sections()["two"], tensors, {"a": 0.0, "b": 0.25})
    pencil = found.pencil
    for k in (0.05, 0.4):
        forward, _ = eigen.lowest(pencil.at(k), pencil.mass, 4, found.shift_eV)
        backward, _ = eigen.lowest(pencil.at(-k), pencil.mass, 4, found.shift_eV)
        np.testing.assert_allclose(forward, backward, rtol=1e-11)
    assert without_common_shear([tensors["a"], tensors["b"]])[0][0, 2] == TENSOR[0, 2]


def test_bars_hold_for_the_two_band_operator() -> None:
    """The enriched step serves N bands and complex matrices: bars against the spectral reference."""
    section = Section(Rectangle(width_nm=WIDTH, height_nm=HEIGHT), "a")
    operator = Operator((two_bands(),), coupling=((coupling, SIGMA_X),))
    truth = spectral_reference(0.0, 6)
    for size in (4.0, 2.5):
        with Mesher(section.pieces()) as mesher:
            coarse, fine = mesher.mesh(SizeField(size))
        found = solve_on(coarse, fine, lambda mesh: operator, 8)
        error = np.abs(found.energy_eV[:6] - truth)
        assert (error <= found.bar_eV[:6]).all()
        assert np.median(found.bar_eV[:6] / error) < 20


def test_wire_file_operator_uses_the_exact_form() -> None:
    text = f"""
title = "tensor"
[section]
shape = "rectangle"
width = "12 nm"
height = "7 nm"
material = "a"
[materials.a]
inverse_mass = {TENSOR.tolist()}
[carriers]
temperature = "77 K"
"""
    wire = Wire(parse(text, Path()))
    with Mesher(wire.draw(0.0)) as mesher:
        mesh, _ = mesher.mesh(SizeField(3.0))
    assert wire.operator(mesh).by_region[0].quadratic[0, 2, 0, 0] == 0
