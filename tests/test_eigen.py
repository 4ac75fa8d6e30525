"""Counted eigenpairs: none missing, whole levels, the same every time."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import scipy.linalg as dense
import scipy.sparse as sparse

from wiresolve.describe.wirefile import parse
from wiresolve.errors import ConvergenceError
from wiresolve.fem import eigen
from wiresolve.physics import solved
from wiresolve.physics.subbands import certify
from wiresolve.physics.wire import Wire


def grid(n: int, dtype: Any = float) -> tuple[Any, Any]:
    """Five-point Laplacian on an n x n square (orbital pairs) and an uneven diagonal mass."""
    line = sparse.diags_array([-np.ones(n - 1), 2 * np.ones(n), -np.ones(n - 1)], offsets=[-1, 0, 1])
    one = sparse.eye_array(n)
    laplacian = sparse.csr_array(sparse.kron(line, one) + sparse.kron(one, line), dtype=dtype)
    return laplacian, sparse.csr_array(sparse.eye_array(n * n), dtype=dtype)


def exact(n: int) -> np.ndarray:
    wave = 4 * np.sin(np.pi * np.arange(1, n + 1) / (2 * (n + 1))) ** 2
    return np.sort((wave[:, None] + wave[None]).ravel())


def test_lowest_states_of_a_grid_in_closed_form() -> None:
    """4 sin^2(pi i/2(n+1)) + the same in y: the eigenvalues of the five-point grid."""
    h, m = grid(24)
    energy, states = eigen.lowest(h, m, 12, -0.01)
    np.testing.assert_allclose(energy, exact(24)[:12], rtol=1e-12)
    np.testing.assert_allclose(states.T @ (m @ states), np.eye(12), atol=1e-12)
    np.testing.assert_allclose(h @ states, (m @ states) * energy, atol=1e-11)


@pytest.mark.parametrize("count", [130, 333])
def test_many_states_come_in_windows(count: int) -> None:
    """More states than one window holds, orbital pairs and all, in closed form."""
    h, m = grid(40)
    energy, states = eigen.lowest(h, m, count, -0.01)
    np.testing.assert_allclose(energy, exact(40)[:count], rtol=1e-11)
    np.testing.assert_allclose(states.T @ (m @ states), np.eye(count), atol=1e-11)


def test_large_definite_systems_keep_their_digits(monkeypatch: pytest.MonkeyPatch) -> None:
    """A factor in single precision and conjugate gradients give what a factor in double precision gives."""
    h, m = grid(30)
    matrix = sparse.csc_array(h + 0.01 * m)
    right = np.random.default_rng(5).normal(size=(900, 9))
    plain = eigen.solve_definite(matrix, right)
    monkeypatch.setattr(eigen, "SINGLE_FROM", 100)
    rough = eigen.solve_definite(matrix, right)
    assert np.linalg.norm(rough - plain) < 1e-8 * np.linalg.norm(plain)
    phase = sparse.diags_array(np.exp(1j * np.random.default_rng(3).uniform(0, 6, 900)))
    turned = sparse.csc_array(phase @ matrix @ phase.conj())
    answer = eigen.solve_definite(turned, phase @ right)
    assert np.linalg.norm(answer - phase @ plain) < 1e-8 * np.linalg.norm(plain)


def test_complex_pencil_keeps_pairs_orthonormal() -> None:
    """A gauge factor on every node leaves the energies and makes the pencil complex; pairs stay orthonormal."""
    h, m = grid(20)
    phase = sparse.diags_array(np.exp(1j * np.random.default_rng(3).uniform(0, 6, 400)))
    turned = sparse.csr_array(phase @ h @ phase.conj())
    energy, states = eigen.lowest(turned, m.astype(complex), 9, -0.01)
    np.testing.assert_allclose(energy, exact(20)[:9], rtol=1e-11)
    np.testing.assert_allclose(states.conj().T @ (m @ states), np.eye(9), atol=1e-11)


@pytest.mark.parametrize("seed", range(6))
def test_count_is_that_of_a_dense_solver(seed: int) -> None:
    """Inertia of random sparse pencils, real, complex and four-band, definite and indefinite."""
    random = np.random.default_rng(seed)
    h, _ = grid(9)
    if seed % 3 == 1:
        phase = sparse.diags_array(np.exp(1j * random.uniform(0, 6, 81)))
        h = sparse.csr_array(phase @ h @ phase.conj())
    if seed % 3 == 2:
        bands = random.normal(size=(4, 4)) + 1j * random.normal(size=(4, 4))
        h = sparse.csr_array(sparse.kron(h, np.eye(4)) + sparse.kron(sparse.eye_array(81), bands + bands.conj().T))
    shifts = sparse.diags_array(random.uniform(-2, 2, h.shape[0]))
    h = sparse.csr_array(h + shifts)
    m = sparse.csr_array(sparse.diags_array(random.uniform(0.5, 2, h.shape[0])))
    energies = dense.eigvalsh(h.toarray(), m.toarray())
    for energy in random.uniform(energies[0] - 1, energies[-1] + 1, 8):
        assert eigen.count_below(h, m, float(energy)) == np.sum(energies < energy)


def test_same_bytes_twice() -> None:
    h, m = grid(24)
    first, second = (eigen.lowest(h, m, 10, -0.01) for _ in range(2))
    assert first[0].tobytes() == second[0].tobytes()
    assert first[1].tobytes() == second[1].tobytes()


def test_more_states_than_unknowns_is_refused() -> None:
    h, m = grid(5)
    with pytest.raises(ConvergenceError, match="26 states were asked of a mesh with 25 unknowns"):
        eigen.lowest(h, m, 26, -0.01)


ROUND = """
title = "pairs"
[section]
shape = "circle"
diameter = "10 nm"
material = "probe"
[materials.probe]
electron_mass = 0.05
[carriers]
temperature = "77 K"
[accuracy]
subbands = 6
"""


@pytest.mark.parametrize("lost", [1, 2, 4])
def test_a_state_that_the_solver_drops_is_caught(monkeypatch: pytest.MonkeyPatch, lost: int) -> None:
    """One of a pair is taken out of the eigensolver's answer: the count sees it and a wider solve brings it back."""
    wire = Wire(parse(ROUND, Path()))
    honest, calls = eigen.lowest, []

    def forgetful(hamiltonian: Any, mass: Any, count: int, shift: float) -> Any:
        calls.append(count)
        if len(calls) > 1:
            return honest(hamiltonian, mass, count, shift)
        energy, states = honest(hamiltonian, mass, count + 1, shift)
        return np.delete(energy, lost), np.delete(states, lost, axis=1)

    monkeypatch.setattr(solved.eigen, "lowest", forgetful)
    found = certify(wire.draw, wire.channels, 6, 1e-4)
    assert len(calls) == 2
    assert found.missed == 0
    monkeypatch.undo()
    whole = certify(wire.draw, wire.channels, 6, 1e-4)
    np.testing.assert_allclose(found.energy_eV, whole.energy_eV, rtol=1e-12)


def test_a_state_that_stays_lost_is_an_error(monkeypatch: pytest.MonkeyPatch) -> None:
    wire = Wire(parse(ROUND, Path()))
    honest = eigen.lowest

    def blind(hamiltonian: Any, mass: Any, count: int, shift: float) -> Any:
        energy, states = honest(hamiltonian, mass, count + 1, shift)
        return np.delete(energy, 1), np.delete(states, 1, axis=1)

    monkeypatch.setattr(solved.eigen, "lowest", blind)
    with pytest.raises(ConvergenceError, match="missing"):
        certify(wire.draw, wire.channels, 6, 1e-4)
