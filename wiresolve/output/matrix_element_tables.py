"""Matrix elements as a table: `matrix_elements.csv`, a line a pair of modes."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.mode_elements import MatrixElements

Array = NDArray[np.float64]


def matrix_elements_csv(elements: MatrixElements) -> str:
    """The text of `matrix_elements.csv`: every ordered pair of modes of one kind of valleys, with error bars.

    Columns: `from` and `to` (numbers of subbands, from 1), their levels, the valley, then each element and its bar with
    the unit last; `overlap_in_<layer>` is its part in a layer, `roughness_<outline>_eV_per_nm` what 1 nm of outward
    motion couples. Complex elements have a second column, `..._imaginary...`. Lines in front that start with `#` say
    what it is.
    """
    lines = io.StringIO(newline="")
    lines.write("# wiresolve matrix elements between modes at the axial wave number 0\n")
    lines.write(f"# input digest {elements.digest}\n")
    columns = list(_columns(elements))
    table = csv.writer(lines, lineterminator="\n")
    table.writerow(["from", "to", "level_from", "level_to", "valley", *(name for name, _ in columns)])
    n = len(elements.level)
    for i in range(n):
        for j in range(n):
            if elements.valley[i] == elements.valley[j]:
                own = [f"{float(values[i, j]):.12g}" for _, values in columns]
                table.writerow([i + 1, j + 1, elements.level[i], elements.level[j], elements.valley[i], *own])
    return lines.getvalue()


def write_matrix_elements(elements: MatrixElements, path: str | Path) -> None:
    """Write `matrix_elements.csv` (see `matrix_elements_csv`)."""
    Path(path).write_text(matrix_elements_csv(elements), encoding="utf-8")


def _columns(elements: MatrixElements) -> Iterator[tuple[str, Array]]:
    """Names and values (n, n) of the columns, each element before its bar."""
    plain = [(name, "", getattr(elements, name), getattr(elements, f"{name}_error")) for name in _WITHOUT_UNIT]
    plain[2:2] = [
        (name, "_nm", getattr(elements, f"{name}_nm"), getattr(elements, f"{name}_error_nm")) for name in _LENGTHS
    ]
    for k, layer in enumerate(elements.layers):
        name = f"overlap_in_{_word(layer)}"
        plain.append((name, "", elements.layer_overlap[k], elements.layer_overlap_error[k]))
    for k, outline in enumerate(elements.outlines):
        name = f"roughness_{_word(outline.removeprefix('growth of '))}"
        values, errors = elements.roughness_eV_per_nm[k], elements.roughness_error_eV_per_nm[k]
        plain.append((name, "_eV_per_nm", values, errors))
    for name, unit, values, errors in plain:
        yield from _parts(name, unit, values)
        yield f"{name}_error{unit}", errors


_WITHOUT_UNIT = ("overlap", "envelope_overlap", "oscillator_x", "oscillator_y")
_LENGTHS = ("dipole_x", "dipole_y")


def _parts(name: str, unit: str, values: NDArray[Any]) -> Iterator[tuple[str, Array]]:
    yield f"{name}{unit}", np.asarray(values.real)
    if np.iscomplexobj(values):
        yield f"{name}_imaginary{unit}", np.asarray(values.imag)


def _word(name: str) -> str:
    return "_".join(name.split())
