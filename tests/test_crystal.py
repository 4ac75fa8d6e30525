"""Crystal directions, the wire's frame, and tensors turned into it, against closed forms and their digits."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest

from wiresolve.describe import crystal
from wiresolve.errors import InputError

# Rotated masses. Formulas: F. Stern and W. E. Howard, Phys. Rev. 163, 816 (1967); A. Rahman, M. S. Lundstrom,
# A. W. Ghosh, J. Appl. Phys. 97, 053702 (2005). Digits computed from them apart from this program. Masses in m0: Si
# rounded, "Hensel" as measured (J. C. Hensel, H. Hasegawa, M. Nakayama, Phys. Rev. 138, A225 (1965)), "NSM" as quoted
# in the NSM Archive; Ge: B. W. Levinger, D. R. Frankl, J. Phys. Chem. Solids 20, 281 (1961).
# By wire: masses along and across a valley, wire axis, up; then for each valley its direction, how many valleys carry
# with the same transport mass (spin apart), and the numbers transport mass, 1/W_zz, W_xx, W_yy, W_xy, the two in-plane
# principal masses, their geometric mean, and W^-1 w with the in-plane block W and the axis-plane column w (the bottom
# lies at k = -W^-1 w k_z).
Members = tuple[tuple[tuple[int, int, int], int, str], ...]
TABLE: dict[str, tuple[tuple[float, float], tuple[int, int, int], tuple[int, int, int], Members]] = {
    "Si.100": (
        (0.916, 0.19), (0, 0, 1), (0, 1, 0),
        (
            ((1, 0, 0), 4, "0.1900000000 0.1900000000 1.0917030568 5.2631578947 0.0000000000 "
             "0.1900000000 0.9160000000 0.4171810159 0.0000000000 0.0000000000"),
            ((0, 1, 0), 4, "0.1900000000 0.1900000000 5.2631578947 1.0917030568 0.0000000000 "
             "0.1900000000 0.9160000000 0.4171810159 0.0000000000 0.0000000000"),
            ((0, 0, 1), 2, "0.9160000000 0.9160000000 5.2631578947 5.2631578947 0.0000000000 "
             "0.1900000000 0.1900000000 0.1900000000 0.0000000000 0.0000000000"),
        ),
    ),
    "Si.111": (
        (0.916, 0.19), (1, 1, 1), (1, 1, -2),
        (
            ((1, 0, 0), 6, "0.4320000000 0.2582195846 3.1774304758 4.5679154217 -1.2041952868 "
             "0.1900000000 0.4028703704 0.2766683400 -0.6860839326 -0.3961107432"),
            ((0, 1, 0), 6, "0.4320000000 0.2582195846 3.1774304758 4.5679154217 1.2041952868 "
             "0.1900000000 0.4028703704 0.2766683400 0.6860839326 -0.3961107432"),
            ((0, 0, 1), 6, "0.4320000000 0.2582195846 5.2631578947 2.4821880028 0.0000000000 "
             "0.1900000000 0.4028703704 0.2766683400 0.0000000000 0.7922214863"),
        ),
    ),
    "Si_Hensel.100": (
        (0.9163, 0.1905), (0, 0, 1), (0, 1, 0),
        (
            ((1, 0, 0), 4, "0.1905000000 0.1905000000 1.0913456292 5.2493438320 0.0000000000 "
             "0.1905000000 0.9163000000 0.4177979775 0.0000000000 0.0000000000"),
            ((0, 1, 0), 4, "0.1905000000 0.1905000000 5.2493438320 1.0913456292 0.0000000000 "
             "0.1905000000 0.9163000000 0.4177979775 0.0000000000 0.0000000000"),
            ((0, 0, 1), 2, "0.9163000000 0.9163000000 5.2493438320 5.2493438320 0.0000000000 "
             "0.1905000000 0.1905000000 0.1905000000 0.0000000000 0.0000000000"),
        ),
    ),
    "Si_Hensel.110": (
        (0.9163, 0.1905), (1, 1, 0), (1, -1, 0),
        (
            ((0, 0, 1), 2, "0.1905000000 0.1905000000 1.0913456292 5.2493438320 0.0000000000 "
             "0.1905000000 0.9163000000 0.4177979775 0.0000000000 0.0000000000"),
            ((1, 0, 0), 4, "0.5534000000 0.3154231117 5.2493438320 3.1703447306 0.0000000000 "
             "0.1905000000 0.3154231117 0.2451287473 0.0000000000 -0.6557643657"),
            ((0, 1, 0), 4, "0.5534000000 0.3154231117 5.2493438320 3.1703447306 0.0000000000 "
             "0.1905000000 0.3154231117 0.2451287473 0.0000000000 0.6557643657"),
        ),
    ),
    "Si_Hensel.112": (
        (0.9163, 0.1905), (1, 1, -2), (1, -1, 0),
        (
            ((1, 0, 0), 4, "0.3114666667 0.2194742037 3.8633444311 3.1703447306 -1.6974956581 "
             "0.1905000000 0.5604296340 0.3267443118 -0.5492488247 -0.6726896812"),
            ((0, 1, 0), 4, "0.3114666667 0.2194742037 3.8633444311 3.1703447306 1.6974956581 "
             "0.1905000000 0.5604296340 0.3267443118 -0.5492488247 0.6726896812"),
            ((0, 0, 1), 2, "0.6743666667 0.4036579434 3.8633444311 5.2493438320 0.0000000000 "
             "0.1905000000 0.2588430873 0.2220576685 0.5073581156 0.0000000000"),
        ),
    ),
    "Si_NSM.110": (
        (0.98, 0.19), (1, 1, 0), (1, -1, 0),
        (
            ((0, 0, 1), 2, "0.1900000000 0.1900000000 1.0204081633 5.2631578947 0.0000000000 "
             "0.1900000000 0.9800000000 0.4315089802 0.0000000000 0.0000000000"),
            ((1, 0, 0), 4, "0.5850000000 0.3182905983 5.2631578947 3.1417830290 0.0000000000 "
             "0.1900000000 0.3182905983 0.2459170870 0.0000000000 -0.6752136752"),
            ((0, 1, 0), 4, "0.5850000000 0.3182905983 5.2631578947 3.1417830290 0.0000000000 "
             "0.1900000000 0.3182905983 0.2459170870 0.0000000000 0.6752136752"),
        ),
    ),
    "Si_NSM.111": (
        (0.98, 0.19), (1, 1, 1), (1, 1, -2),
        (
            ((1, 0, 0), 6, "0.4533333333 0.2598139535 3.1417830290 4.5560329395 -1.2247763498 "
             "0.1900000000 0.4107352941 0.2793558768 -0.7114326826 -0.4107458508"),
            ((0, 1, 0), 6, "0.4533333333 0.2598139535 3.1417830290 4.5560329395 1.2247763498 "
             "0.1900000000 0.4107352941 0.2793558768 0.7114326826 -0.4107458508"),
            ((0, 0, 1), 6, "0.4533333333 0.2598139535 5.2631578947 2.4346580738 0.0000000000 "
             "0.1900000000 0.4107352941 0.2793558768 0.0000000000 0.8214917017"),
        ),
    ),
    "Ge.100": (
        (1.59, 0.0815), (0, 0, 1), (0, 1, 0),
        (
            ((1, 1, 1), 4, "0.5843333333 0.1191951556 8.3896027061 8.3896027061 -3.8803359442 "
             "0.0815000000 0.2217655448 0.1344391755 -0.8605248146 -0.8605248146"),
            ((-1, 1, 1), 4, "0.5843333333 0.1191951556 8.3896027061 8.3896027061 3.8803359442 "
             "0.0815000000 0.2217655448 0.1344391755 0.8605248146 -0.8605248146"),
            ((1, -1, 1), 4, "0.5843333333 0.1191951556 8.3896027061 8.3896027061 3.8803359442 "
             "0.0815000000 0.2217655448 0.1344391755 -0.8605248146 0.8605248146"),
            ((1, 1, -1), 4, "0.5843333333 0.1191951556 8.3896027061 8.3896027061 -3.8803359442 "
             "0.0815000000 0.2217655448 0.1344391755 0.8605248146 0.8605248146"),
        ),
    ),
    "Ge.111": (
        (1.59, 0.0815), (1, 1, 1), (1, 1, -2),
        (
            ((-1, 1, 1), 3, "0.2491111111 0.0911037769 4.5092667618 9.6830480208 -4.4806260039 "
             "0.0815000000 0.5201895629 0.2059015526 1.6481067248 0.9515348612"),
            ((1, -1, 1), 3, "0.2491111111 0.0911037769 4.5092667618 9.6830480208 4.4806260039 "
             "0.0815000000 0.5201895629 0.2059015526 -1.6481067248 0.9515348612"),
            ((1, 1, -1), 3, "0.2491111111 0.0911037769 12.2699386503 1.9223761324 0.0000000000 "
             "0.0815000000 0.5201895629 0.2059015526 0.0000000000 -1.9030697224"),
            ((1, 1, 1), 1, "1.5900000000 1.5900000000 12.2699386503 12.2699386503 0.0000000000 "
             "0.0815000000 0.0815000000 0.0815000000 0.0000000000 0.0000000000"),
        ),
    ),
    "Ge.112": (
        (1.59, 0.0815), (1, 1, -2), (1, -1, 0),
        (
            ((1, 1, 1), 1, "0.0815000000 0.0815000000 0.6289308176 12.2699386503 0.0000000000 "
             "0.0815000000 1.5900000000 0.3599791661 0.0000000000 0.0000000000"),
            ((-1, 1, 1), 2, "0.4167222222 0.1032732666 10.9764933356 4.5092667618 3.1682810313 "
             "0.0815000000 0.3109625383 0.1591962527 0.5688151337 -1.3933068355"),
            ((1, -1, 1), 2, "0.4167222222 0.1032732666 10.9764933356 4.5092667618 -3.1682810313 "
             "0.0815000000 0.3109625383 0.1591962527 0.5688151337 1.3933068355"),
            ((1, 1, -1), 1, "1.4223888889 0.5201895629 10.9764933356 12.2699386503 0.0000000000 "
             "0.0815000000 0.0911037769 0.0861681949 -0.3332954980 0.0000000000"),
        ),
    ),
}  # fmt: skip


CASES = [(name, member) for name, (_, _, _, members) in TABLE.items() for member in members]


@pytest.mark.parametrize(("name", "member"), CASES, ids=[f"{n} {m[0]}" for n, m in CASES])
def test_rotated_masses_to_all_digits(name: str, member: tuple[tuple[int, int, int], int, str]) -> None:
    masses, axis, up, members = TABLE[name]
    direction, count, text = member
    found = np.array(crystal.inverse_mass_tensor(direction, *masses, crystal.frame(axis, up)))
    plane, column = found[:2, :2], found[:2, 2]
    transport = 1 / (found[2, 2] - column @ np.linalg.solve(plane, column))
    principal = sorted(1 / np.linalg.eigvalsh(plane))
    shift = np.linalg.solve(plane, column)
    numbers = [transport, 1 / found[2, 2], plane[0, 0], plane[1, 1], plane[0, 1], *principal]
    numbers += [math.sqrt(principal[0] * principal[1]), *shift]
    for value, wanted in zip(numbers, text.split(), strict=True):
        assert value == pytest.approx(float(wanted), rel=0, abs=0.6e-10), wanted
    # The same valleys come out of `equivalents`, and those of one transport mass are as many as the table says.
    at_boundary = name.startswith("Ge")
    equals = crystal.equivalents(direction, at_boundary, "diamond")
    assert len(equals) == len(members)
    alike = 0
    for other, valleys in equals:
        tensor = np.array(crystal.inverse_mass_tensor(other, *masses, crystal.frame(axis, up)))
        mass = 1 / (tensor[2, 2] - tensor[:2, 2] @ np.linalg.solve(tensor[:2, :2], tensor[:2, 2]))
        alike += valleys if abs(mass - transport) < 1e-9 else 0
    assert alike == count


def test_a_sheet_on_001_along_110() -> None:
    """Oblique valleys of Si: 2 ml mt / (ml + mt) across the width, (ml + mt) / 2 along the axis (Rahman and others)."""
    along, across = 0.9163, 0.1905
    frame = crystal.frame((1, 1, 0), (0, 0, 1))
    for direction in ((1, 0, 0), (0, 1, 0)):
        tensor = crystal.inverse_mass_tensor(direction, along, across, frame)
        assert 1 / tensor[0][0] == pytest.approx(2 * along * across / (along + across), rel=1e-14)
        assert 1 / tensor[1][1] == pytest.approx(across, rel=1e-14)
        axial = tensor[2][2] - tensor[0][2] ** 2 / tensor[0][0]
        assert 1 / axial == pytest.approx((along + across) / 2, rel=1e-14)
        assert tensor[1][2] == pytest.approx(0, abs=1e-15)
    assert round(2 * along * across / (along + across), 3) == 0.315
    assert round((along + across) / 2, 3) == 0.553


def random_pairs(count: int) -> list[tuple[tuple[int, int, int], tuple[int, int, int]]]:
    """Pairs of integer directions at right angles."""
    random, found = np.random.default_rng(7), []
    while len(found) < count:
        a, b = random.integers(-9, 10, (2, 3))
        c = np.cross(a, b)
        if c.any() and np.abs(c).max() <= crystal.LARGEST_INDEX:
            found.append((tuple(a.tolist()), tuple(c.tolist())))
    return found


def test_frames_are_right_handed_and_orthonormal() -> None:
    for axis, up in random_pairs(200):
        frame = np.array(crystal.frame(axis, up))
        assert np.abs(frame @ frame.T - np.eye(3)).max() < 1e-15
        assert np.linalg.det(frame) == pytest.approx(1, abs=2e-15)
        assert frame[2] == pytest.approx(np.array(axis) / np.linalg.norm(axis), abs=1e-15)
        assert frame[1] @ np.array(up) == pytest.approx(np.linalg.norm(up), rel=1e-14)


def test_a_turned_tensor_keeps_its_invariants() -> None:
    masses = (1.59, 0.0815)
    for axis, up in random_pairs(100):
        for direction in itertools.product((1, -1), repeat=3):
            rows = crystal.inverse_mass_tensor(direction, *masses, crystal.frame(axis, up))
            tensor = np.array(rows)
            assert (tensor == tensor.T).all()
            assert np.linalg.det(tensor) == pytest.approx(1 / (masses[0] * masses[1] ** 2), rel=1e-12)
            assert np.trace(tensor) == pytest.approx(1 / masses[0] + 2 / masses[1], rel=1e-14)
            turned = np.array(crystal.frame(axis, up))
            n = np.array(direction) / math.sqrt(3)
            bulk = np.eye(3) / masses[1] + (1 / masses[0] - 1 / masses[1]) * np.outer(n, n)
            assert np.abs(tensor - turned @ bulk @ turned.T).max() < 2e-14


def test_turning_the_crystal_by_its_own_symmetry_changes_no_set_of_valleys() -> None:
    """The tensors of all equivalents are the same set in frames that the cube's symmetry makes equal."""

    def tensors(axis: tuple[int, int, int], up: tuple[int, int, int]) -> np.ndarray:
        frame = crystal.frame(axis, up)
        rows = [crystal.inverse_mass_tensor(d, 1.3, 0.23, frame) for d, _ in crystal.equivalents((1, 1, 1), True, None)]
        flat = [np.round(np.ravel(row), 10).tolist() for row in rows]
        return np.array(sorted(flat))

    assert np.allclose(tensors((1, 1, 0), (0, 0, 1)), tensors((0, 1, 1), (1, 0, 0)), atol=1e-9)
    assert np.allclose(tensors((1, 1, 2), (1, 1, -1)), tensors((2, 1, 1), (-1, 1, 1)), atol=1e-9)
    assert not np.allclose(tensors((1, 1, 0), (0, 0, 1)), tensors((1, 0, 0), (0, 0, 1)), atol=1e-3)


@pytest.mark.parametrize(
    ("axis", "at_boundary", "kind", "directions", "valleys"),
    [
        ((1, 0, 0), False, "diamond", 3, 6),  # Delta
        ((1, 0, 0), True, "zincblende", 3, 3),  # X
        ((0, 0, -1), True, "zincblende", 3, 3),
        ((1, 1, 1), True, "diamond", 4, 4),  # L
        ((-1, 1, 1), True, None, 4, 4),
        ((1, 1, 0), True, "diamond", 6, 6),
        ((1, 2, 3), False, "diamond", 24, 48),
        ((0, 0, 1), True, "wurtzite", 1, 1),
        ((0, 0, 1), False, "wurtzite", 1, 2),
        ((1, 0, 0), True, "wurtzite", 3, 3),  # the three M points of a hexagonal zone
        ((2, 1, 0), True, "wurtzite", 3, 3),
        ((1, 0, 1), True, "wurtzite", 6, 6),
        ((3, 1, 1), False, "wurtzite", 12, 24),
    ],
)
def test_how_many_valleys_a_direction_stands_for(
    axis: tuple[int, int, int], at_boundary: bool, kind: str | None, directions: int, valleys: int
) -> None:
    found = crystal.equivalents(axis, at_boundary, kind)
    assert len(found) == directions
    assert sum(count for _, count in found) == valleys
    known = {d for d, _ in found}
    assert not any((-a, -b, -c) in known for a, b, c in known)
    lengths = {round(math.hypot(*crystal.cartesian(d, kind, 1.6)), 12) for d in known}
    assert len(lengths) == 1


def test_a_hexagonal_lattice() -> None:
    first, second, third = (crystal.cartesian(d, "wurtzite", 1.626) for d in ((1, 0, 0), (0, 1, 0), (0, 0, 1)))
    assert np.dot(first, second) == pytest.approx(-0.5)  # 120 degrees between the two lattice vectors
    assert math.hypot(*second) == pytest.approx(1)
    assert third == (0, 0, 1.626)
    frame = crystal.frame((0, 0, 1), (1, 0, 0), "wurtzite", 1.626)
    tensor = crystal.inverse_mass_tensor(crystal.cartesian((0, 0, 1), "wurtzite", 1.626), 0.2, 0.25, frame)
    assert np.allclose(tensor, np.diag([4, 4, 5]), atol=1e-15)
    across = crystal.frame((1, 2, 0), (0, 0, 1), "wurtzite", 1.626)
    assert np.allclose(crystal.inverse_mass_tensor((0, 0, 1), 0.2, 0.25, across), np.diag([4, 5, 4]), atol=1e-15)


@pytest.mark.parametrize(
    ("axis", "up", "proposal"),
    [
        ((0, 0, 1), (1, 0, 0), None),
        ((0, 0, 1), (1, 2, 0), None),
        ((1, 0, 0), (1, 2, 0), None),  # a1 . (a1 + 2 a2) = 1 - 1
        ((1, 0, 0), (0, 0, 1), None),
        ((1, 1, 0), (1, -1, 0), None),
        ((1, 0, 0), (0, 1, 0), (1, 2, 0)),  # 120 degrees apart; the nearest at 90 degrees
        ((0, 0, 1), (1, 0, 1), (1, 0, 0)),
    ],
)
def test_right_angles_in_wurtzite(
    axis: tuple[int, int, int], up: tuple[int, int, int], proposal: tuple[int, int, int] | None
) -> None:
    if proposal is None:
        crystal.orthogonal(axis, up, "wurtzite", 1.626)
        return
    with pytest.raises(InputError, match="hexagonal lattice") as caught:
        crystal.orthogonal(axis, up, "wurtzite", 1.626)
    assert f"the nearest is up = {list(proposal)}" in str(caught.value)


def test_a_slanted_axis_of_wurtzite_without_a_near_partner() -> None:
    with pytest.raises(InputError, match="choose an axis along c"):
        crystal.orthogonal((1, 0, 3), (1, 0, 0), "wurtzite", 1.626)
    crystal.orthogonal((1, 0, 3), (1, 2, 0), "wurtzite", 1.626)  # the one direction across both


@pytest.mark.parametrize("axis", [(7, 11, 13), (50, 49, 47), (0, 0, 17), (1, 1, 1), (37, 0, 0)])
def test_parallel_directions_get_a_proposal_too(axis: tuple[int, int, int]) -> None:
    with pytest.raises(InputError, match="the nearest is up"):
        crystal.orthogonal(axis, axis)
    found = crystal.nearest_orthogonal(axis, axis)
    assert found is not None
    assert any(found)
    assert sum(p * q for p, q in zip(axis, found, strict=True)) == 0


@pytest.mark.parametrize("bad", [(0, 0, 0), (1, 0), (1.5, 0, 0), "110", (1, 0, 51), None, (True, 0, 1)])
def test_bad_directions(bad: object) -> None:
    with pytest.raises(InputError, match="axis"):
        crystal.direction("axis", bad)
