"""Numbers and words: bars and digits, `result.json`, `subbands.csv`, the printed table."""

from __future__ import annotations

import csv
import io
import json
import math
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.synthetic import charged_result, core_shell_result
from wiresolve.describe.section import Layer
from wiresolve.describe.wirefile import read
from wiresolve.output.sources import from_memory
from wiresolve.output.tables import (
    WIDTH,
    by_temperature,
    charge_lines,
    result_json,
    significant,
    small,
    step_table,
    subband_table,
    subbands_csv,
    summary,
    with_bar,
)
from wiresolve.solve import solve

STEP = {"opens_at_eV": 0.02, "opens_error_eV": 1e-5, "kind": "plateau", "contrast": 0.95}
GEOMETRIES = Path(__file__).parents[1] / "geometries"


@given(st.floats(-1e4, 1e4), st.floats(1e-8, 1e3))
def test_the_printed_interval_holds_the_given_one(value: float, bar: float) -> None:
    middle, half = (float(part) for part in with_bar(value, bar).split(" ± "))
    # Steps of the bar's last digit are counted to a millionth.
    slack = 1e-9 * max(1.0, abs(value)) + 1e-6 * half
    assert middle - half <= value - bar + slack
    assert middle + half >= value + bar - slack
    assert half <= max(1.5 * bar, bar + 2e-6) * (1 + 1e-12)


@pytest.mark.parametrize(
    ("value", "bar", "text"),
    [
        (33.07418, 0.0023, "33.074 ± 0.003"),
        (33.07418, 0.02, "33.07 ± 0.03"),
        (230.9776, 0.0097, "230.978 ± 0.011"),
        (1.25, 0.5, "1.2 ± 0.6"),
        (120.0, 25.0, "120 ± 25"),
        (5.0, 0.096, "5.00 ± 0.10"),
        (-0.0004, 0.001, "-0.0004 ± 0.0010"),
        (-0.00001, 0.001, "0.0000 ± 0.0011"),
        (5.0, 0.0, "5"),
        (1 / 3, 1e-15, "0.333333 ± 0.000001"),
    ],
)
def test_digits_follow_the_bar(value: float, bar: float, text: str) -> None:
    assert with_bar(value, bar) == text


def test_json_holds_the_result_to_the_last_bit() -> None:
    result = core_shell_result()
    text = result_json(result, status="done")
    data = json.loads(text)
    assert data.pop("status") == "done"
    assert data == json.loads(json.dumps(result.to_dict()))
    assert [s["energy_eV"] for s in data["subbands"]] == result.energies_eV.tolist()
    assert list(data) == sorted(data)
    assert result_json(result, status="done") == text
    assert not [line for line in text.splitlines() if line.strip().rstrip(",").replace(".", "").isdigit()]


def test_json_takes_numpy_and_refuses_what_is_no_number() -> None:
    result = core_shell_result()
    verdict = replace(result.verdict, single_subband={"holds": np.bool_(True), "n": np.int64(3), "x": np.float64(0.5)})
    data = json.loads(result_json(replace(result, verdict=verdict)))
    assert data["verdict"]["single_subband"] == {"holds": True, "n": 3, "x": 0.5}
    broken = replace(result.verdict, single_subband={"share": math.nan})
    with pytest.raises(ValueError, match=r"verdict\.single_subband\.share is nan"):
        result_json(replace(result, verdict=broken))


def test_csv_is_the_subbands() -> None:
    result = core_shell_result()
    lines = subbands_csv(result).splitlines()
    comments = [line for line in lines if line.startswith("#")]
    assert any(result.problem.digest in line for line in comments)
    rows = list(csv.DictReader(io.StringIO("\n".join(lines[len(comments) :]))))
    assert len(rows) == len(result.subbands)
    for row, subband in zip(rows, result.subbands, strict=True):
        assert float(row["energy_eV"]) == subband.energy_eV
        assert float(row["error_eV"]) == subband.error_eV
        assert (int(row["index"]), int(row["level"]), row["layer"]) == (subband.index, subband.level, subband.layer)
        assert float(row["share_core"]) + float(row["share_layer_1"]) == pytest.approx(1)
        assert row["bound"] == row["wall_effect_eV"] == ""


def test_spacings_stand_between_levels_in_meV_and_kT() -> None:
    result = core_shell_result(6)
    header, units, *rows = subband_table(result)
    assert rows.pop() == "and 1 more temperature, see result.json"
    assert "spacing" in header
    assert header.count("in kT at") == units.count(" K") == 2
    # Subbands 2 and 3 are a pair: only the second carries the spacing to level 3.
    pair = [row.split() for row in rows[1:3]]
    gap_meV = 1e3 * (result.energies_eV[3] - result.energies_eV[2])
    assert pair[0][5:] == ["0.0670", "core", "(GaAs)", "2", "x", "1"]
    assert float(pair[1][5]) == pytest.approx(gap_meV, rel=1e-3)
    # kT at 77 K is 6.6353 meV (CODATA: 8.617333e-5 eV/K times 77 K).
    assert float(pair[1][7]) == pytest.approx(gap_meV / 6.635347, rel=5e-3)


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (9.996, "10.0"),
        (7.6349, "7.63"),
        (10.0, "10.0"),
        (2763.4, "2760"),
        (0.0120004, "0.0120"),
        (99.96, "100"),
        (0.0, "0"),
    ],
)
def test_three_digits_everywhere(value: float, text: str) -> None:
    assert significant(value, 3) == text


def test_more_than_three_temperatures_are_in_the_file_only() -> None:
    result = core_shell_result(3)
    carriers = replace(result.problem.carriers, temperature_K=(0.0, 4.2, 20.0, 77.0, 150.0, 300.0))
    steps = [
        {"temperature_K": t, "levels": [dict.fromkeys(("level", "height_G0", "plateau_G0"), 1) | STEP]}
        for t in carriers.temperature_K
    ]
    many = replace(
        result,
        problem=replace(result.problem, carriers=carriers),
        verdict=replace(result.verdict, steps=tuple(steps)),
    )
    lines = subband_table(many)
    assert re.findall(r"([\d.]+) K", lines[1]) == ["4.2", "20"]
    assert lines[-1] == "and 3 more temperatures, see result.json"
    assert step_table(many)[0].split()[5:] == ["at", "0", "K", "at", "4.2", "K", "at", "20", "K"]
    assert step_table(many)[-1] == "and 3 more temperatures, see result.json"
    two = replace(many, problem=replace(result.problem, carriers=replace(carriers, temperature_K=(0.0, 4.2, 20.0))))
    assert not [line for line in subband_table(two) if "result.json" in line]


def test_a_long_table_is_cut_and_says_so() -> None:
    lines = subband_table(core_shell_result(45))
    assert len(lines) == 2 + 40 + 2
    assert lines[-2] == "and 5 more, see subbands.csv"
    assert len(subbands_csv(core_shell_result(45)).splitlines()) == 3 + 1 + 45


def test_the_summary_gives_the_verdict_first() -> None:
    result = core_shell_result()
    text = summary(result, "results/wire")
    order = [
        text.index(part) for part in ("One channel up to 77 K", "subband", "open-barrier", "Make the shell", "Files")
    ]
    assert order == sorted(order)
    assert "results/wire" in text.splitlines()[-1]
    assert "0 states missed" in text
    assert "ACCURACY MISSED" not in text
    assert "ACCURACY MISSED" in summary(replace(result, accuracy_met=False))
    assert max(len(line) for line in text.splitlines()) <= 120


def test_the_summary_tells_each_step_and_what_is_from_memory() -> None:
    """Steps of the solved main wire, against its own verdict; values without a checked text are named."""
    result = solve(read(GEOMETRIES / "core_shell_gaas.toml"))
    rows = step_table(result)
    assert rows[0].split() == ["step", "opens", "at", "height", "then", "at", "4.2", "K", "at", "77", "K"]
    warm = result.verdict.steps[1]["levels"]
    assert len(rows) == 2 + len(warm)
    for row, step in zip(rows[2:], warm, strict=True):
        # The contrast is cut to a tenth, as the verdict's.
        assert row.endswith(f"{step['kind']} {math.floor(1000 * step['contrast']) / 10:.1f} %")
        assert row.split()[0] == str(step["level"])
    assert [float(row.split()[5]) for row in rows[2:]] == [1, 3, 5, 6]
    # The gap and the valence edge of GaAs stand there from memory; so do its X and L valleys, which have no subband.
    assert from_memory(result) == "GaAs: zone centre gap, valence edge, conduction edge"
    assert "permittivity" not in from_memory(result)
    assert "Al0.3Ga0.7As: zone centre gap" in from_memory(result, "conflict")
    assert "Values from memory" in summary(result)


def test_only_values_that_were_used_are_named() -> None:
    """Silicon alone has its edge at zero: its average valence energy, from memory, sets nothing. In an oxide that
    admits carriers affinities set the step, and germanium beside silicon needs the average of both."""
    problem = read(GEOMETRIES / "silicon_wire.toml")
    few = replace(problem, accuracy=replace(problem.accuracy, subbands=2))
    alone = solve(few)
    assert "average" not in from_memory(alone) + from_memory(alone, "conflict")
    assert "conduction edge" not in from_memory(alone)
    for other, wanted, needless in (("SiO2", "affinity", "average"), ("Si0.7Ge0.3", "average", "affinity")):
        section = replace(problem.section, layers=(Layer(2.0, other),))
        both = solve(replace(few, section=section))
        said = " ".join(from_memory(both, provenance) for provenance in ("memory", "conflict", "checked", "derived"))
        assert (wanted in said, needless in said) == (True, False), said
        assert all(kind not in said for kind in ("zone centre", "all of X", "all of L"))


def test_a_wide_table_loses_what_matters_least_and_says_so() -> None:
    result = core_shell_result(3)
    named = [replace(s, valley="Delta [100] [010]", bound=True, layer="core") for s in result.subbands]
    wide = subband_table(replace(result, subbands=tuple(named)))
    assert max(len(line) for line in wide) <= WIDTH
    assert re.findall(r"([\d.]+) K", wide[1]) == ["4.2"]
    assert wide[-1] == "and 2 more temperatures, see result.json"
    # Layers that differ are worth more than a second temperature; here levels and subbands differ, too.
    apart = [replace(s, layer=name) for s, name in zip(named, ("core", "layer 1", "core"), strict=True)]
    lines = subband_table(replace(result, subbands=tuple(apart)))
    assert "layer 1 (Al0.3Ga0.7As)" in lines[3]
    assert re.findall(r"([\d.]+) K", lines[1]) == ["4.2"]
    same = [replace(s, level=s.index) for s in named]
    lines = subband_table(replace(result, subbands=tuple(same)))
    assert "all in core (GaAs)" in lines
    assert lines[1].split()[:2] == ["subband", "meV"]
    assert re.findall(r"([\d.]+) K", lines[1]) == ["4.2", "77"]


def test_each_temperature_has_a_line() -> None:
    text = "One channel. It opens. At 4.2 K (kT = 1): yes. At 300 K (kT = 26): no. Effective dimension 1. At 5 nm: so."
    assert by_temperature(text).splitlines() == [
        "One channel. It opens.",
        "At 4.2 K (kT = 1): yes.",
        "At 300 K (kT = 26): no.",
        "Effective dimension 1. At 5 nm: so.",
    ]
    assert by_temperature(text).replace("\n", " ") == text


def test_the_gates_and_what_they_balance_are_printed() -> None:
    result = charged_result()
    lines = charge_lines(result)
    assert [line.split() for line in lines[:5]] == [
        ["charge", "voltage", "lines", "up", "at", "charge"],
        ["on", "V", "V", "e/nm"],
        ["gate", "wrap", "0.25", "0.05", "+0.0125"],
        ["dopants,", "surfaces", "+0.0875"],
        ["carriers", "-0.1"],
    ]
    # Electrons count as negative, so the printed charges add up to nothing.
    assert sum(float(line.split()[-1]) for line in lines[2:5]) == pytest.approx(0.0, abs=1e-15)
    said = " ".join(lines[5:])
    assert "agree to 3.2e-08 V after 4 passes" in said
    assert "balance to 4.5e-14" in said
    assert "Up to 0.032 meV of the bars" in said
    assert "gate-curve" in said
    assert set(lines) <= set(summary(result).splitlines())
    assert charge_lines(core_shell_result(1)) == []


def test_a_pinned_surface_and_one_pass_are_named() -> None:
    result = charged_result()
    pinned = replace(result.charge, gates=(), pinned_per_nm=0.0125, passes=1)
    lines = charge_lines(replace(result, charge=pinned))
    assert lines[2].split() == ["pinned", "surfaces", "+0.0125"]
    assert "after 1 pass;" in " ".join(lines)


@given(st.floats(1e-12, 1e6))
def test_a_small_number_is_never_rounded_down(value: float) -> None:
    shown = float(small(value))
    assert value * (1 - 1e-8) <= shown <= 1.11 * value


def test_result_json_of_a_charged_wire_holds_gates_and_balance() -> None:
    found = json.loads(result_json(charged_result()))
    assert found["gates"] == [
        {"name": "wrap", "voltage_V": 0.25, "lineup_voltage_V": 0.05, "charge_per_nm": 0.0125},
    ]
    assert found["charge"] == {
        "fixed_per_nm": 0.0875,
        "pinned_per_nm": 0.0,
        "passes": 4,
        "residual_V": 3.2e-8,
        "gauss_error": 4.5e-14,
        "potential_error_eV": 3.14e-5,
    }
    assert json.loads(result_json(core_shell_result(1)))["charge"] is None
