"""Text tables of points: columns of numbers, one point a line."""

from __future__ import annotations

import re

import numpy as np

from wiresolve.describe.input_files import InputFile
from wiresolve.errors import InputError

MOST_ROWS = 1_000_000


def read(
    field: str, file: InputFile, columns: int, optional: str = ""
) -> tuple[list[list[float]], list[str], list[int]]:
    """Rows of numbers, for each what stands behind it, or else its block between blank lines, and its line from 1.

    Columns are separated by commas, semicolons (then numbers may have decimal commas), tabs or blanks; lines that begin
    with # are skipped, and the first line may hold names. A row may have one column more if `optional` says what it is.
    """
    rows: list[list[float]] = []
    marks: list[str] = []
    lines: list[int] = []
    block, gap, first = 0, False, True
    for number, line in enumerate(file.text(field).splitlines(), 1):
        text = line.strip()
        if not text:
            gap = bool(rows)
            continue
        if text.startswith("#"):
            continue
        cells = [c.strip() for c in re.split(r"[;\t]" if ";" in text else r"\s*,\s*|\s+", text)]
        if ";" in text:
            cells = [c.replace(",", ".") for c in cells]
        while cells and not cells[-1]:
            cells.pop()
        try:
            values = [float(c) for c in cells[:columns]]
            if len(values) < columns:
                raise ValueError
        except ValueError:
            if first and any(re.search(r"[A-Za-z]", c) for c in cells) and len(cells) >= columns:
                first = False  # names of the columns
                continue
            rule = f"line {number} is no row of {columns} numbers"
            raise InputError(field, rule, text[:40], "write e.g. 12.5, -3.0") from None
        first = False
        if len(cells) > columns + bool(optional):
            more = f" and {optional}" if optional else ""
            raise InputError(field, f"line {number} has {len(cells)} columns", text[:40], f"{columns} numbers{more}")
        if not np.isfinite(values).all():
            raise InputError(field, f"line {number} holds a number that is not finite", text[:40])
        if gap:
            block, gap = block + 1, False
        rows.append(values)
        lines.append(number)
        marks.append(cells[columns] if len(cells) > columns else f"\n{block}")
        if len(rows) > MOST_ROWS:
            raise InputError(field, f"has more than {MOST_ROWS:,} rows", remedy="export fewer points")
    return rows, marks, lines
