"""The text of a TOML file as nested data."""

from __future__ import annotations

import re
import tomllib
from typing import Any

from wiresolve.errors import InputError

_LONG_KEY = re.compile(r"(?:\.[ \t]*[\w\"'-]+[ \t]*){40}")


def parse(text: str) -> dict[str, Any]:
    """What a TOML text holds; InputError, without a field, for what is none."""
    if _LONG_KEY.search(text):  # the time that tomllib needs for a dotted key grows with its square
        raise InputError("", "has a key of more than 40 parts")
    try:
        data = tomllib.loads(text)
    except RecursionError:
        raise InputError("", "is nested too deeply") from None
    except ValueError as fault:
        reason = re.sub(r"\s+", " ", str(fault))[:200]
        if twice := _written_twice(text, reason):
            raise InputError("", twice, remedy="take one of them out") from None
        raise InputError("", f"is not TOML: {reason}", remedy="texts stand in quotes, tables in [brackets]") from None
    _small_numbers(data)
    return data


def _written_twice(text: str, reason: str) -> str:
    """What is said of a key or a table that stands twice in a file; empty where something else is wrong."""
    found = re.fullmatch(r"Cannot (?:overwrite a value|declare .*) \(at line (\d+), column \d+\)", reason)
    if found is None:
        return ""
    number = int(found[1])
    line = text.split("\n")[number - 1].strip()
    name = re.match(r"\[+\s*[^\]]+?\s*\]+|[^=]+?(?=\s*=)", line)
    what = name[0][:60] if name else line[:60]
    return f"holds {what} twice, the second time in line {number}"


def _small_numbers(value: object) -> None:
    if isinstance(value, dict):
        for part in value.values():
            _small_numbers(part)
    elif isinstance(value, list):
        for part in value:
            _small_numbers(part)
    elif isinstance(value, int) and abs(value) >= 2**63:
        raise InputError("", "holds a whole number beyond the 64 bits that TOML allows")
