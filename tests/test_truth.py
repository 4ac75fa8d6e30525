"""Every reference value of tests/truth: the program agrees in as many digits as the entry claims."""

from __future__ import annotations

import importlib.util
from pathlib import Path
from typing import Any

import pytest

SCRIPT = Path(__file__).resolve().parents[1] / "scripts" / "agreed_digits.py"
specification = importlib.util.spec_from_file_location("agreed_digits", SCRIPT)
assert specification is not None and specification.loader is not None
agreed_digits = importlib.util.module_from_spec(specification)
specification.loader.exec_module(agreed_digits)

ENTRIES: list[dict[str, Any]] = agreed_digits.load()


def test_there_are_reference_values() -> None:
    assert ENTRIES


@pytest.mark.parametrize("entry", ENTRIES, ids=[entry["id"] for entry in ENTRIES])
def test_program_agrees(entry: dict[str, Any]) -> None:
    found = entry["compute"]()
    assert agreed_digits.agrees(entry, found), (
        f"deviates by {agreed_digits.deviation(entry, found):.2e}; {entry['digits']} digits are claimed because "
        f"{entry['tolerance_reason']}"
    )


@pytest.mark.parametrize("entry", ENTRIES, ids=[entry["id"] for entry in ENTRIES])
def test_entry_names_its_source(entry: dict[str, Any]) -> None:
    assert entry["source"].strip()
    assert entry["tolerance_reason"].strip()
    assert entry["digits"] >= 1


def test_a_deviating_value_is_seen() -> None:
    entry = {"id": "probe", "value": [2.0, 4.0], "digits": 3}
    assert agreed_digits.agrees(entry, [2.0, 4.003])
    assert not agreed_digits.agrees(entry, [2.0, 4.005])
    assert not agreed_digits.agrees(entry, [float("nan"), 4.0])
    with pytest.raises(ValueError, match="1 values computed, 2 wanted"):
        agreed_digits.agrees(entry, [2.0])
