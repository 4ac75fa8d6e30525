"""Conductance and resolved steps against closed forms, mode counting by quadrature, and a plain search of the slope."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq

from tests.synthetic import parabolic_tail
from wiresolve.errors import InputError
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.transport import (
    HIGHEST_TEMPERATURE_K,
    conductance,
    in_siemens,
    kind_of_step,
    step_limits,
    steps,
)
from wiresolve.units import HBAR2_OVER_2M0, KB


def wire(energies_eV: Any, levels: Any = None, **more: Any) -> Spectrum:
    """Parabolas of one mass, spin degenerate; each a level of its own unless said otherwise."""
    count = len(energies_eV)
    states = {
        "energy_eV": energies_eV,
        "error_eV": np.zeros(count),
        "axial_mass": np.full(count, 0.067),
        "degeneracy": np.full(count, 2),
        "level": np.arange(1, count + 1) if levels is None else levels,
        "listed": count,
    }
    return Spectrum(**{**states, **more})


def bell(x: Any) -> Any:
    """-df/dE times kT."""
    return 0.25 / np.cosh(np.asarray(x) / 2) ** 2


# Conductance


def test_absolute_zero_gives_the_staircase() -> None:
    spectrum = wire([0.1, 0.2, 0.2, 0.4])
    fermi = [0.0, 0.1 - 1e-12, 0.1, 0.1 + 1e-12, 0.15, 0.2, 0.3, 1.0]
    assert conductance(spectrum, fermi, 0.0).tolist() == [0, 0, 0.5, 1, 1, 2, 3, 4]
    assert conductance(spectrum, fermi, 1e-12).tolist() == [0, 0, 0.5, 1, 1, 2, 3, 4]


def test_spin_and_valley_count() -> None:
    # one spin-resolved mode is half a quantum; four valleys with both spins are four
    spectrum = wire([0.1, 0.2], degeneracy=[1, 8])
    assert conductance(spectrum, [0.15, 0.3], 0.0).tolist() == [0.5, 4.5]
    assert float(in_siemens(4.5)) == pytest.approx(4.5 * 7.748091729e-5, rel=1e-9)  # CODATA 2018


@pytest.mark.parametrize("temperature_K", [0.05, 4.2, 300.0])
def test_far_above_all_steps_every_mode_conducts(temperature_K: float) -> None:
    spectrum = wire([0.1, 0.2, 0.2])
    assert float(conductance(spectrum, 1e3, temperature_K)) == pytest.approx(3, rel=1e-14)
    assert float(conductance(spectrum, -1e3, temperature_K)) == 0


def test_shape_of_the_fermi_levels_is_kept_and_bad_temperature_refused() -> None:
    assert conductance(wire([0.1]), np.zeros((2, 3)), 4.2).shape == (2, 3)
    assert conductance(wire([0.1]), 0.1, 4.2).shape == ()
    for call in (conductance, lambda s, f, t: steps(s, t)):
        with pytest.raises(InputError, match=r"^temperature: "):
            call(wire([0.1]), 0.1, -4.2)


def off_centre(square: float = -0.4, cube: float = 0.9) -> tuple[Any, Any, float]:
    """A band with its minimum (0.1 eV) off the centre: k, E(k), and E(0)."""
    k = np.linspace(0.0, 0.7, 33)
    centre = 0.1 - 4 * square**3 / (27 * cube**2)
    return k, centre + square * k**2 + cube * k**3, centre


def test_a_minimum_off_the_centre_opens_two_modes_of_which_one_closes() -> None:
    k, table, centre = off_centre()
    spectrum = wire([0.1], k_per_nm=k, band_eV=table[None, :])
    assert conductance(spectrum, [0.09, 0.101, centre - 1e-9, centre + 1e-9, 0.3, 2.0], 0.0).tolist() == [
        0,
        2,
        2,
        1,
        1,
        1,
    ]
    (step,) = steps(spectrum, 4.2)
    assert step["height_G0"] == 2
    for temperature in (4.2, 77.0, 300.0):
        kT = KB * temperature
        fermi = np.array([0.08, 0.1, 0.105, 0.12, 0.15])
        # M(E) (-df/dE) over the stretch with two modes and the one with one mode
        expected = [
            2 * quad(lambda e, m=m, kT=kT: bell((e - m) / kT) / kT, 0.1, centre, epsabs=1e-14)[0]
            + quad(
                lambda e, m=m, kT=kT: bell((e - m) / kT) / kT,
                centre,
                m + 60 * kT,
                points=[max(m, centre)],
                epsabs=1e-14,
            )[0]
            for m in fermi
        ]
        assert conductance(spectrum, fermi, temperature) == pytest.approx(expected, rel=1e-8, abs=1e-13)


def test_a_monotonic_table_conducts_like_its_minimum() -> None:
    k = np.linspace(0.0, 0.7, 33)
    table = 0.1 + HBAR2_OVER_2M0 / 0.067 * k**2 / (1 + k**2)
    fermi = np.linspace(0.0, 0.3, 7)
    bent = wire([0.1], k_per_nm=k, band_eV=table[None, :])
    assert bent.bands[0] is not None
    assert conductance(bent, fermi, 77.0) == pytest.approx(conductance(wire([0.1]), fermi, 77.0), rel=1e-14)


@pytest.mark.parametrize("temperature_K", [0.0, 300.0])
def test_the_tail_conducts_like_the_steps_it_stands_for(temperature_K: float) -> None:
    many = wire([0.05, *(0.1 + (np.arange(2000) + 0.5) * 1e-5)])
    tail = wire([0.05], tails=(parabolic_tail([0.1, 0.12], [0.0, 4000.0], 0.067),))
    fermi = np.array([0.02, 0.07, 0.113, 0.2])
    expected = conductance(many, fermi, temperature_K)
    assert conductance(tail, fermi, temperature_K) == pytest.approx(expected, rel=1e-6)


def test_a_tail_just_above_the_steps_is_never_left_out() -> None:
    # a tail 20 kT up still adds the last digits
    spectrum = wire([0.05], tails=(parabolic_tail([0.05 + 20 * KB * 50, 0.3], [0.0, 1e6], 0.067),))
    added = conductance(spectrum, 0.0, 50.0) / conductance(wire([0.05]), 0.0, 50.0) - 1
    width = (0.25 - 20 * KB * 50) / (KB * 50)
    assert float(added) == pytest.approx(1e6 / 2 / width * np.exp(-20), rel=1e-3)


# Steps

TWO_STEPS = [
    # spacing in kT, modes of the two steps, contrast in percent
    (4.0, (1, 1), 22),
    (6.0, (1, 1), 64),
    (8.0, (1, 1), 86),
    (10.0, (1, 1), 95),
    (4.0, (1, 2), 0),
    (6.5, (1, 2), 60),
    (7.0, (1, 2), 68),
    (8.0, (1, 2), 80),
    (10.0, (1, 2), 92),
]


def two_steps(spacing_kT: float, modes: tuple[int, int], temperature_K: float = 10.0) -> Spectrum:
    """Two levels so many kT apart, each with so many entries."""
    lower, upper = modes
    energies = [0.05] * lower + [0.05 + spacing_kT * KB * temperature_K] * upper
    return wire(energies, [1] * lower + [2] * upper)


@pytest.mark.parametrize(("spacing_kT", "modes", "percent"), TWO_STEPS)
def test_contrast_of_two_steps(spacing_kT: float, modes: tuple[int, int], percent: int) -> None:
    # percentages: the closed form sum of w p(x - x_n), p = 1/(4 cosh^2(x/2)), worked out apart from the program
    first, last = steps(two_steps(spacing_kT, modes), 10.0)
    assert round(100 * first["contrast"]) == percent
    assert first["spacing_over_kT"] == pytest.approx(spacing_kT, rel=1e-12)
    assert first["kind"] == kind_of_step(first["contrast"])
    assert last["contrast"] is last["kind"] is last["spacing_to_next_eV"] is None
    mirrored = steps(two_steps(spacing_kT, modes[::-1]), 10.0)[0]
    assert mirrored["contrast"] == pytest.approx(first["contrast"], abs=1e-9)


def test_two_equal_steps_are_one_bump_below_2_63_kT() -> None:
    # p has its inflection points at x = -+ 2 arcosh(sqrt(3/2)) = -+ 1.317
    merging = 4 * np.arccosh(np.sqrt(1.5))
    assert merging == pytest.approx(2.634, abs=5e-4)
    for spacing in (1.0, 2.0, 2.6, merging):
        assert steps(two_steps(spacing, (1, 1)), 10.0)[0]["contrast"] == 0


def test_a_spacing_of_4_kT_is_never_called_a_plateau() -> None:
    assert steps(two_steps(4.0, (1, 1)), 10.0)[0]["kind"] == "shoulder"
    assert steps(two_steps(4.0, (1, 2)), 10.0)[0]["kind"] == "merged"


def isolated(contrast: float) -> float:
    """Spacing in kT at which two equal, isolated steps have this contrast: 1 - 2 p(D/2)/(p(0) + p(D))."""
    return float(brentq(lambda d: 1 - 2 * bell(d / 2) / (bell(0) + bell(d)) - contrast, 3, 20, xtol=1e-13))


@pytest.mark.parametrize(
    ("contrast", "above", "below"),
    [(0.9, "plateau", "shoulder"), (0.2, "shoulder", "merged")],
)
def test_kinds_on_both_sides_of_their_thresholds(contrast: float, above: str, below: str) -> None:
    spacing = isolated(contrast)
    assert steps(two_steps(spacing * 1.0001, (1, 1)), 10.0)[0]["kind"] == above
    assert steps(two_steps(spacing * 0.9999, (1, 1)), 10.0)[0]["kind"] == below
    assert kind_of_step(contrast) == above
    assert kind_of_step(np.nextafter(contrast, 0)) == below


def test_limits_are_where_the_contrast_crosses_the_thresholds() -> None:
    spectrum = wire([0.05, 0.07])
    (limit,) = step_limits(spectrum)
    assert limit["plateau_up_to_K"] == pytest.approx(0.02 / KB / isolated(0.9), rel=1e-5)
    assert limit["shoulder_up_to_K"] == pytest.approx(0.02 / KB / isolated(0.2), rel=1e-5)


def test_contrast_and_limits_of_a_whole_spectrum_against_a_plain_search() -> None:
    generator = np.random.default_rng(7)
    for _ in range(8):
        energies = 0.05 + np.cumsum(generator.exponential(0.005, 7))
        modes = generator.integers(1, 4, 7)
        spectrum = wire(energies, degeneracy=2 * modes)
        kT = KB * 11.0

        def slope(x: Any, energies: Any = energies, modes: Any = modes, kT: float = kT) -> Any:
            return (modes * bell((np.asarray(x)[..., None] - energies) / kT)).sum(axis=-1)

        table, limits = steps(spectrum, 11.0), step_limits(spectrum)
        for n in range(6):
            values = slope(np.linspace(energies[n], energies[n + 1], 20001))
            expected = max(0.0, 1 - values.min() / min(values[0], values[-1]))
            assert table[n]["contrast"] == pytest.approx(expected, abs=1e-7)
            for key, threshold in (("plateau_up_to_K", 0.9), ("shoulder_up_to_K", 0.2)):
                reached = limits[n][key]
                if reached < HIGHEST_TEMPERATURE_K:
                    assert steps(spectrum, 0.998 * reached)[n]["contrast"] >= threshold
                    assert steps(spectrum, 1.002 * reached)[n]["contrast"] < threshold


def test_a_degenerate_pair_is_one_step_of_two_quanta() -> None:
    # levels 1 and 2-fold, opening at 10, 25, 44 meV; the pair's entries differ within their bars
    spectrum = wire([0.010, 0.025, 0.025 + 1e-9, 0.044], [1, 2, 2, 3], error_eV=[1e-6, 2e-6, 3e-6, 4e-6])
    table = steps(spectrum, 4.2)
    assert [row["level"] for row in table] == [1, 2, 3]
    assert [row["height_G0"] for row in table] == [1, 2, 1]
    assert [row["plateau_G0"] for row in table] == [1, 3, 4]
    assert [row["opens_at_eV"] for row in table] == [0.010, 0.025, 0.044]
    assert table[1]["opens_error_eV"] == 3e-6
    assert [row["kind"] for row in table] == ["plateau", "plateau", None]


def test_extra_states_shape_the_last_listed_step_but_get_no_row() -> None:
    alone = wire([0.05, 0.06])
    followed = wire([0.05, 0.06, 0.07, 0.07, 0.07], [1, 2, 3, 3, 3], listed=2)
    assert steps(alone, 4.2)[1]["kind"] is None
    table = steps(followed, 4.2)
    assert [row["level"] for row in table] == [1, 2]
    assert table[1]["spacing_to_next_eV"] == pytest.approx(0.01)
    assert [limit["level"] for limit in step_limits(followed)] == [1, 2]
    # a heavy third step leaves less of the second plateau than a light one
    lighter = wire([0.05, 0.06, 0.07], listed=2)
    assert steps(followed, 15.0)[1]["contrast"] < steps(lighter, 15.0)[1]["contrast"]


def test_at_absolute_zero_every_step_is_a_plateau() -> None:
    table = steps(wire([0.05, 0.05 + 1e-8, 0.06]), 0.0)
    assert [row["kind"] for row in table] == ["plateau", "plateau", None]
    assert [row["contrast"] for row in table] == [1, 1, None]
    assert [row["spacing_over_kT"] for row in table] == [None, None, None]


def test_wide_spacings_hold_to_the_end_of_the_search() -> None:
    (limit,) = step_limits(wire([0.05, 2.05]))
    assert limit["plateau_up_to_K"] == limit["shoulder_up_to_K"] == HIGHEST_TEMPERATURE_K
