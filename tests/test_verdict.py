"""The verdict: opposite answers for opposite wires, both sides of each threshold, limits from closed forms."""

from __future__ import annotations

import json
from math import log, pi
from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import jn_zeros

from tests.synthetic import parabolic_tail
from wiresolve.errors import InputError
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.thermal import (
    boltzmann_sums,
    direction_dimensions,
    effective_dimension,
    first_level_share,
    first_level_share_at,
)
from wiresolve.physics.verdict import judge
from wiresolve.units import HBAR2_OVER_2M0, KB


def spectrum_of(energies_eV: Any, mass: float = 0.067, degeneracy: int = 2, **more: Any) -> Spectrum:
    """Parabolas of one mass; energies equal within 1e-9 eV make one level."""
    energies = np.asarray(energies_eV, dtype=float)
    count = energies.size
    states = {
        "energy_eV": energies,
        "error_eV": np.zeros(count),
        "axial_mass": np.full(count, mass),
        "degeneracy": np.full(count, degeneracy),
        "level": 1 + np.concatenate([[0], np.cumsum(np.diff(energies) > 1e-9)]),
        "listed": count,
    }
    return Spectrum(**{**states, **more})


def disk(diameter_nm: float, mass: float, count: int = 60) -> Spectrum:
    """A hard-wall circle, from the zeros of Bessel functions."""
    zeros = [z for order in range(30) for z in np.repeat(jn_zeros(order, 20), 1 if order == 0 else 2)]
    return spectrum_of(
        np.sort(HBAR2_OVER_2M0 / mass * (2 * np.array(zeros) / diameter_nm) ** 2)[:count], mass, listed=10
    )


def box(width_nm: float, height_nm: float, mass: float, highest_eV: float, **more: Any) -> Spectrum:
    """A hard-wall rectangle with its energies by direction, up to an energy above the first level."""
    unit = HBAR2_OVER_2M0 * pi**2 / mass
    first = unit * (width_nm**-2 + height_nm**-2)
    most = [int(side * np.sqrt((first + highest_eV) / unit)) + 1 for side in (width_nm, height_nm)]
    i, j = (grid.ravel() for grid in np.meshgrid(np.arange(1, most[0] + 1), np.arange(1, most[1] + 1)))
    parts = np.column_stack([unit * (i / width_nm) ** 2, unit * (j / height_nm) ** 2])
    total = parts.sum(axis=1)
    order = np.argsort(total, kind="stable")
    order = order[total[order] <= first + highest_eV]
    return spectrum_of(
        total[order], mass, direction_energy_eV=parts[order], direction_names=("width", "height"), listed=1, **more
    )


# Shares and dimension


@pytest.mark.parametrize(("spacing_kT", "percent"), [(3, 90.9), (4, 96.5)])
def test_share_of_the_first_level_below_a_pair(spacing_kT: float, percent: float) -> None:
    # 1/(1 + 2 exp(-D)), worked out apart from the program
    kT = KB * 20.0
    share = first_level_share(spectrum_of([0.1, 0.1 + spacing_kT * kT, 0.1 + spacing_kT * kT]), 20.0)
    assert round(100 * float(share), 1) == percent


def test_shares_weigh_mass_and_degeneracy() -> None:
    kT = KB * 100.0
    spectrum = spectrum_of([0.1, 0.1 + kT], axial_mass=[0.1, 0.4], degeneracy=[2, 8])
    assert float(first_level_share(spectrum, 100.0)) == pytest.approx(1 / (1 + 4 * 2 * np.exp(-1)), rel=1e-13)


def test_filling_moves_carriers_up_and_thin_carriers_do_not_see_the_fermi_level() -> None:
    spectrum = spectrum_of([0.05, 0.06, 0.06])
    thin = float(first_level_share(spectrum, 30.0))
    levels = [-0.5, 0.0, 0.05, 0.08]
    shares = [float(first_level_share_at(spectrum, level, 30.0)) for level in levels]
    assert shares[0] == pytest.approx(thin, rel=1e-12)
    assert shares == sorted(shares, reverse=True)
    # at T = 0: roots of the distances; an empty wire keeps the thin limit
    assert float(first_level_share_at(spectrum, 0.07, 0.0)) == pytest.approx(2**0.5 / (2**0.5 + 2), rel=1e-13)
    assert float(first_level_share_at(spectrum, 0.04, 0.0)) == 1


def test_effective_dimension_of_a_harmonic_section() -> None:
    # a level spacing x kT adds 2 x/(exp(x) - 1) to d for each of the two directions: from 1 towards 5
    spacing = 0.002
    number = np.arange(300)
    energies = np.sort((spacing * (1 + number[:, None] + number[None, :])).ravel())[:40000]
    spectrum = spectrum_of(energies)
    for temperature in (1.0, 10.0, 30.0, 100.0):
        x = spacing / (KB * temperature)
        expected = 1 + 2 * 2 * x / np.expm1(x)
        assert float(effective_dimension(spectrum, temperature)) == pytest.approx(expected, rel=1e-9)


def test_effective_dimension_goes_from_wire_to_sheet_to_bulk() -> None:
    mass, kT = 0.2, KB * 300

    def wide(side: float) -> float:
        # sum over n >= 1 of exp(-c n^2) is sqrt(pi/c)/2 - 1/2 but for exp(-pi^2/c), by Poisson's summation
        c = HBAR2_OVER_2M0 * pi**2 / (mass * side**2 * kT)
        states = (pi / c) ** 0.5 / 2
        return states / (states - 0.5) - 2 * c

    assert float(effective_dimension(box(3, 3, mass, 1.0), 300.0)) == pytest.approx(1, abs=1e-7)
    for side in (50.0, 400.0, 2000.0):
        assert float(effective_dimension(box(side, 3, mass, 34 * kT), 300.0)) == pytest.approx(1 + wide(side), rel=1e-7)
    assert 1 + wide(2000.0) == pytest.approx(2, abs=5e-3)
    for side in (40.0, 200.0):
        assert float(effective_dimension(box(side, side, mass, 34 * kT), 300.0)) == pytest.approx(
            1 + 2 * wide(side), rel=1e-7
        )
    assert 1 + 2 * wide(200.0) == pytest.approx(3, abs=5e-2)


def test_dimension_by_direction_adds_up() -> None:
    spectrum = box(60, 5, 0.2, 0.8)
    parts, known = direction_dimensions(spectrum, [0.0, 77.0, 300.0])
    assert known == pytest.approx(1, rel=1e-14)
    assert 1 + parts.sum(axis=0) == pytest.approx(effective_dimension(spectrum, [0.0, 77.0, 300.0]), rel=1e-12)
    assert parts[:, 0] == pytest.approx([0, 0], abs=1e-12)
    assert parts[0, 2] > 1
    assert parts[1, 2] < 0.1


def test_a_tail_counts_in_shares_and_dimension() -> None:
    # a sheet whose upper subbands are replaced by their smooth count, W/pi sqrt((E - E_thin) m/h2) - 1/2 orbital states
    width, height, mass = 500.0, 3.0, 0.2
    whole = box(width, height, mass, 1.2)
    kept = 60
    energies = whole.energy_eV[:kept]
    thin = HBAR2_OVER_2M0 * pi**2 / mass / height**2
    grid = energies[-1] + np.linspace(0, 0.6, 1001)
    count = 2 * (width / pi * np.sqrt((grid - thin) * mass / HBAR2_OVER_2M0) - 0.5)
    tail = parabolic_tail(grid, np.maximum(count - 2 * kept, 0), mass, 201)
    short = spectrum_of(energies, mass, tails=(tail,))
    cut = spectrum_of(energies, mass)
    for temperature in (100.0, 200.0):
        exact, found = boltzmann_sums(whole, temperature), boltzmann_sums(short, temperature)
        assert float(found.tail_share) > 0.01
        assert float(found.tail_share + found.share.sum()) == pytest.approx(1, rel=1e-13)
        assert float(found.share[0]) == pytest.approx(float(exact.share[0]), rel=2e-3)
        assert float(found.energy_kT) == pytest.approx(float(exact.energy_kT), rel=2e-3)
        assert abs(float(boltzmann_sums(cut, temperature).energy_kT) / float(exact.energy_kT) - 1) > 0.02


# Common practice


def test_room_temperature_is_about_25_meV_and_a_thin_slab_is_ten_times_that() -> None:
    # common practice, no source: kT is about 25 meV; across 5 nm of silicon (light mass 0.19) the second level lies
    # about 250 meV above the first, ten times kT. The closed form gives 237.5 meV and 9.2.
    kT = KB * 300
    assert 0.0245 < kT < 0.0262
    spacing = 3 * HBAR2_OVER_2M0 * pi**2 / 0.19 / 5**2
    assert round(1e4 * spacing) == 2375
    assert round(spacing / kT, 1) == 9.2
    slab = box(2000, 5, 0.19, 20 * kT)
    judged = judge(slab, [300.0], None)
    width, height = judged.effective_dimension[0]["directions"]
    assert (width["frozen"], height["frozen"]) == (False, True)
    assert height["frozen_up_to_K"] > 300


# Three wires with opposite answers


def test_a_narrow_light_wire_in_the_cold_is_single_subband_with_plateaus() -> None:
    judged = judge(disk(30, 0.023), [4.2, 77.0], None)
    assert all(row["holds"] for row in judged.single_subband["per_temperature"])
    assert [table["levels"][0]["kind"] for table in judged.steps] == ["plateau", "plateau"]
    assert all(row["frozen"] for row in judged.effective_dimension)
    assert "single-subband channel up to" in judged.text
    assert "(a two-fold orbital) 65.5 meV above it" in judged.text  # 5.783 and 14.682 times h2 4/(m D^2)


def test_a_medium_wire_is_single_subband_without_resolved_steps() -> None:
    # first spacing 4.5 kT below a pair: 97.8 % in the first level, yet no plateau
    temperature = 50.0
    kT = KB * temperature
    spectrum = spectrum_of([0.1, 0.1 + 4.5 * kT, 0.1 + 4.5 * kT, 0.1 + 9 * kT])
    judged = judge(spectrum, [temperature], None)
    assert judged.single_subband["per_temperature"][0]["holds"]
    assert [row["kind"] for row in judged.steps[0]["levels"]][:2] == ["merged", "merged"]
    assert "At 50 K" in judged.text
    assert "single-subband, the first level holds 97.8 % of few carriers" in judged.text
    assert "none of 2 steps resolved as plateaus" in judged.text


def test_a_wide_warm_sheet_is_neither() -> None:
    judged = judge(box(100, 5, 0.2, 25 * KB * 300, degeneracy=4), [300.0], 0.1)
    (row,) = judged.single_subband["per_temperature"]
    assert not row["holds"]
    assert row["share_at_fermi_level"] < row["share_non_degenerate"] < 0.2
    assert judged.steps[0]["levels"][0]["kind"] == "merged"
    (dimension,) = judged.effective_dimension
    assert not dimension["frozen"]
    assert dimension["d"] > 1.9
    assert [part["frozen"] for part in dimension["directions"]] == [False, True]
    assert "not single-subband" in judged.text
    assert "height is frozen out up to" in judged.text


# Both sides of each threshold


def test_single_subband_on_both_sides_of_95_percent() -> None:
    # a pair D kT above: share 1/(1 + 2 exp(-D)) = 0.95 at D = ln 38
    for factor, holds in ((1.001, True), (0.999, False)):
        spacing = log(38) * KB * 30 * factor
        judged = judge(spectrum_of([0.1, 0.1 + spacing, 0.1 + spacing, 0.2]), [30.0], None)
        assert judged.single_subband["per_temperature"][0]["holds"] is holds
        assert judged.single_subband["holds_up_to_K"] == pytest.approx(30 * factor, rel=1e-4)
        assert judged.single_subband["threshold_share"] == 0.95


def test_the_fermi_level_decides_where_there_is_one() -> None:
    spectrum = spectrum_of([0.1, 0.12, 0.12, 0.2])
    thin = judge(spectrum, [30.0], None).single_subband
    filled = judge(spectrum, [30.0], 0.118).single_subband
    assert thin["per_temperature"][0]["holds"]
    assert thin["per_temperature"][0]["share_at_fermi_level"] is None
    assert not filled["per_temperature"][0]["holds"]
    assert filled["per_temperature"][0]["share_non_degenerate"] >= 0.95
    assert filled["holds_up_to_K"] < 30 < thin["holds_up_to_K"] == filled["holds_up_to_K_non_degenerate"]
    limit = filled["holds_up_to_K"]
    assert float(first_level_share_at(spectrum, 0.118, 0.999 * limit)) > 0.95
    assert float(first_level_share_at(spectrum, 0.118, 1.001 * limit)) < 0.95
    above = judge(spectrum, [0.0, 4.2], 0.15).single_subband
    assert above["holds_up_to_K"] == 0
    assert not any(row["holds"] for row in above["per_temperature"])


def test_frozen_on_both_sides_of_a_tenth() -> None:
    # two single levels D kT apart add 2 D/(exp(D) + 1) to d
    ratio = float(brentq(lambda d: 2 * d / (np.exp(d) + 1) - 0.1, 2, 20))
    spectrum = spectrum_of([0.1, 0.11, 0.9])
    limit = 0.01 / KB / ratio
    for factor, frozen in ((0.999, True), (1.001, False)):
        (row,) = judge(spectrum, [factor * limit], None).effective_dimension
        assert row["frozen"] is frozen
        assert row["frozen_up_to_K"] == pytest.approx(limit, rel=1e-4)


def test_each_direction_freezes_at_its_own_temperature() -> None:
    # the levels 1 and 2 of each direction alone matter where it freezes, 3 and more far above
    spectrum = box(40, 8, 0.067, 3.0)
    (row,) = judge(spectrum, [10.0], None).effective_dimension
    by_name = {part["name"]: part["frozen_up_to_K"] for part in row["directions"]}

    def added(temperature: float, side: float) -> float:
        energy = HBAR2_OVER_2M0 * pi**2 / 0.067 / side**2 * (np.arange(1, 60) ** 2 - 1)
        weight = np.exp(-energy / (KB * temperature))
        return float(2 * (weight @ energy) / weight.sum() / (KB * temperature)) - 0.1

    assert by_name["width"] == pytest.approx(brentq(added, 5, 400, args=(40.0,)), rel=1e-4)
    assert by_name["height"] == pytest.approx(brentq(added, 100, 1000, args=(8.0,)), rel=1e-4)
    assert row["frozen_up_to_K"] == pytest.approx(by_name["width"], rel=1e-4)
    assert by_name["width"] < by_name["height"]


# What else it must do


def test_limits_are_not_searched_where_the_states_are_not_known() -> None:
    # two levels 10 meV apart and nothing known above: 8 kT reach them at 14.5 K, where the first still holds all
    judged = judge(spectrum_of([0.1, 0.11]), [4.2], None)
    assert judged.single_subband["searched_up_to_K"] == pytest.approx(0.01 / (8 * KB))
    assert judged.single_subband["holds_up_to_K"] == judged.single_subband["searched_up_to_K"]
    assert "single-subband channel up to at least 14.5 K" in judged.text
    stiff = judge(spectrum_of([0.1, 1.5, 9.0]), [300.0], None)
    assert stiff.single_subband["holds_up_to_K"] == 1000
    assert "single-subband channel up to 1000 K and above" in stiff.text


def test_a_direction_is_not_judged_where_too_few_carriers_have_known_energies() -> None:
    whole = box(40, 8, 0.067, 1.0)
    assert whole.direction_energy_eV is not None
    directions = whole.direction_energy_eV.copy()
    directions[1:] = np.nan
    few = spectrum_of(
        whole.energy_eV, 0.067, direction_energy_eV=directions, direction_names=("width", "height"), listed=3
    )
    cold, warm = judge(few, [4.2, 300.0], None).effective_dimension
    assert [part["frozen"] for part in cold["directions"]] == [True, True]
    assert [part["d"] for part in warm["directions"]] == [None, None]
    assert [part["frozen"] for part in warm["directions"]] == [None, None]
    assert warm["d"] == pytest.approx(float(effective_dimension(whole, 300.0)), rel=1e-12)


@pytest.mark.parametrize("fermi_eV", [None, 0.06])
def test_the_verdict_is_plain_data(fermi_eV: float | None) -> None:
    judged = judge(disk(30, 0.023), [0.0, 77.0, 300.0], fermi_eV, ["Channel 4 lies in the shell."])
    data = [judged.single_subband, judged.steps, judged.effective_dimension]
    assert json.loads(json.dumps(data, allow_nan=False)) == json.loads(json.dumps(data))
    assert judged.text.endswith("Channel 4 lies in the shell.")
    assert "\n" not in judged.text
    assert len(judged.steps) == len(judged.effective_dimension) == 3
    assert judged.effective_dimension[0]["d"] == 1
    row = judged.steps[1]
    assert row["thermal_energy_eV"] == pytest.approx(6.6353466e-3, rel=1e-7)  # CODATA 2018
    assert row["thermal_width_eV"] == pytest.approx(23.393e-3, rel=1e-4)  # 3.5255 kT
    assert "kT = 6.64 meV, thermal width 3.53 kT = 23.4 meV, first spacing 9.87 kT" in judged.text


def test_one_level_alone_is_judged() -> None:
    judged = judge(spectrum_of([0.1]), [4.2], None)
    assert judged.single_subband["per_temperature"][0]["share_non_degenerate"] == 1
    assert judged.steps[0]["levels"][0]["kind"] is None
    assert "no level above it is known" in judged.text


def test_shares_just_short_of_the_threshold_are_not_rounded_up() -> None:
    spacing = log(38) * KB * 30 * 0.9999
    judged = judge(spectrum_of([0.1, 0.1 + spacing, 0.1 + spacing, 0.2]), [30.0], None)
    assert "not single-subband, the first level holds 94.9 % of few carriers" in judged.text


@pytest.mark.parametrize(
    ("temperatures", "fermi", "field"),
    [
        ([], None, "temperature"),
        ([-1.0], None, "temperature"),
        ([np.nan], None, "temperature"),
        ([4.2], np.nan, "fermi_level"),
    ],
)
def test_bad_input_is_refused(temperatures: list[float], fermi: float | None, field: str) -> None:
    with pytest.raises(InputError) as caught:
        judge(spectrum_of([0.1, 0.2]), temperatures, fermi)
    assert caught.value.field == field
    assert "\n" not in str(caught.value)
