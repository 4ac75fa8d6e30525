"""The README's tables of agreed digits, from the reference values in tests/truth.

    python scripts/agreed_digits.py              prints the tables
    python scripts/agreed_digits.py --measure    computes every value with the program and prints how far it agrees;
                                                 the exit code is 1 where a value agrees in fewer digits than it claims

What an entry of tests/truth holds is told in tests/truth/README.md.
"""

from __future__ import annotations

import argparse
import importlib.util
import itertools
import math
import sys
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

REPOSITORY = Path(__file__).resolve().parents[1]
KEYS = {"id", "what", "value", "digits", "source", "tolerance_reason", "compute"}
OPTIONAL_KEYS = {"scale"}


def load(folder: Path = REPOSITORY / "tests" / "truth") -> list[dict[str, Any]]:
    """All entries of the `TRUTH` lists in the Python files of a folder, file by file in the order of their names.

    Each gets a `topic`, the first line of its file's docstring.

    Raises
    ------
    ValueError
        where a file has no such list, or an entry lacks a key, has an unknown one or repeats an id.
    """
    if str(REPOSITORY) not in sys.path:  # the files share helpers as `tests.truth._...`
        sys.path.insert(0, str(REPOSITORY))
    entries: list[dict[str, Any]] = []
    for path in sorted(folder.glob("[!_]*.py")):
        specification = importlib.util.spec_from_file_location(f"truth_{path.stem}", path)
        assert specification is not None and specification.loader is not None
        module = importlib.util.module_from_spec(specification)
        sys.modules[specification.name] = module
        specification.loader.exec_module(module)
        topic = (module.__doc__ or path.stem).splitlines()[0].rstrip(".")
        for entry in getattr(module, "TRUTH", [None]):
            if not isinstance(entry, dict):
                raise ValueError(f"{path.name}: needs TRUTH, a list of dicts")
            if wrong := (KEYS - entry.keys()) | (entry.keys() - KEYS - OPTIONAL_KEYS):
                raise ValueError(f"{path.name}: {entry.get('id')}: missing or unknown keys {sorted(wrong)}")
            entries.append(entry | {"topic": topic})
    names = [entry["id"] for entry in entries]
    if repeated := {name for name in names if names.count(name) > 1}:
        raise ValueError(f"tests/truth: ids used twice: {sorted(repeated)}")
    return entries


def numbers(value: Any) -> list[float]:
    """A number or a sequence of numbers as a list of floats."""
    return [float(number) for number in np.ravel(value)]


def deviation(entry: Mapping[str, Any], found: Any) -> float:
    """The largest deviation of what the program found, relative to the value (or to the entry's `scale`)."""
    values, computed = numbers(entry["value"]), numbers(found)
    if len(values) != len(computed):
        raise ValueError(f"{entry['id']}: {len(computed)} values computed, {len(values)} wanted")
    scales = [float(entry["scale"])] * len(values) if "scale" in entry else [abs(value) for value in values]
    deviations = [abs(a - b) / scale for a, b, scale in zip(computed, values, scales, strict=True)]
    return math.inf if any(math.isnan(number) for number in deviations) else max(deviations)


def agrees(entry: Mapping[str, Any], found: Any) -> bool:
    """Whether the program's value agrees with the entry's in as many digits as the entry claims."""
    return deviation(entry, found) <= 10.0 ** -entry["digits"]


def shown(entry: Mapping[str, Any]) -> str:
    """The value as the table prints it: with the digits that are claimed; the ends of a list."""
    texts = [f"{number:.{max(entry['digits'], 3)}g}" for number in numbers(entry["value"])]
    return texts[0] if len(texts) == 1 else f"{texts[0]} ... {texts[-1]} ({len(texts)} values)"


def markdown(head: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """A table in Markdown."""
    cells = [head, ["---"] * len(head), *rows]
    return "\n".join("| " + " | ".join(cell.replace("|", "\\|") for cell in row) + " |" for row in cells)


def summary(entries: Sequence[Mapping[str, Any]]) -> str:
    """A row for each topic: how many numbers are compared, and in how many digits they must agree."""
    rows = []
    for topic, group in itertools.groupby(entries, key=lambda entry: entry["topic"]):
        listed = list(group)
        digits = sorted({entry["digits"] for entry in listed})
        span = str(digits[0]) if len(digits) == 1 else f"{digits[0]} to {digits[-1]}"
        rows.append([topic, str(sum(len(numbers(entry["value"])) for entry in listed)), span])
    return markdown(["reference", "numbers", "digits"], rows)


def table(entries: Sequence[Mapping[str, Any]]) -> str:
    """A row for each entry, with its value and source."""
    rows = [[entry["what"], shown(entry), str(entry["digits"]), entry["source"]] for entry in entries]
    return markdown(["what", "value", "digits", "source"], rows)


def measure(entries: Sequence[Mapping[str, Any]]) -> int:
    """Computes and prints how far every entry agrees; returns how many agree less than they claim."""
    short = 0
    for entry in entries:
        found = entry["compute"]()
        holds = agrees(entry, found)
        short += not holds
        verdict = "" if holds else ": TOO FEW"
        print(f"{entry['id']}: deviates by {deviation(entry, found):.1e}, claims {entry['digits']} digits{verdict}")
    print(f"{len(entries) - short} of {len(entries)} values agree as far as they claim")
    return short


def main() -> int:
    """Prints the tables or the measurement; returns the exit code."""
    parser = argparse.ArgumentParser(description="Prints the README's tables of agreed digits.")
    parser.add_argument("--measure", action="store_true", help="compute every value and print how far it agrees")
    arguments = parser.parse_args()
    entries = load()
    if arguments.measure:
        return int(measure(entries) > 0)
    print(summary(entries), table(entries), sep="\n\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
