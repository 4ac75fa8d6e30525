"""Small meshes for tests, made of arrays alone, and their text as MSH files."""

from __future__ import annotations

import meshio
import numpy as np

Arrays = tuple[np.ndarray, dict[str, np.ndarray], dict[str, np.ndarray]]
"""Points (n, 3), cells by kind, and for each kind the number of each cell's group."""


def disk(
    radius: float, rings: int, *, order: int = 2, core_rings: int = 0, center: tuple[float, float] = (0, 0)
) -> Arrays:
    """A disk of rings of triangles, 6 k edges around the ring k; group 1 up to `core_rings`, 2 beyond.

    The nodes of the rings, and of second order the middles of their edges, lie on circles.
    """
    first = [0, *(1 + 3 * k * (k - 1) for k in range(1, rings + 1))]
    places = [(0.0, 0.0)]
    for k in range(1, rings + 1):
        places += [(radius * k / rings, 2 * np.pi * i / (6 * k)) for i in range(6 * k)]
    triangles, group = [], []
    for k in range(1, rings + 1):
        for sextant in range(6):
            for i in range(k):
                a = first[k] + (sextant * k + i) % (6 * k)
                b = first[k] + (sextant * k + i + 1) % (6 * k)
                inner = first[k - 1] + (sextant * (k - 1) + i) % max(6 * (k - 1), 1)
                triangles.append((a, b, inner))
                group.append(1 if k <= core_rings else 2)
                if i + 1 < k:
                    after = first[k - 1] + (sextant * (k - 1) + i + 1) % (6 * (k - 1))
                    triangles.append((inner, b, after))
                    group.append(1 if k <= core_rings else 2)
    polar = np.array(places)
    cells, points = np.array(triangles), polar[:, :1] * np.column_stack([np.cos(polar[:, 1]), np.sin(polar[:, 1])])
    kind = "triangle"
    if order == 2:
        kind, (cells, points) = "triangle6", _second_order(cells, points, polar)
    space = np.column_stack([points + center, np.zeros(len(points))])
    return space, {kind: cells}, {kind: np.array(group)}


def _second_order(cells: np.ndarray, points: np.ndarray, polar: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    middles: dict[tuple[int, int], int] = {}
    more, rows = [], []
    for cell in cells.tolist():
        row = list(cell)
        for a, b in zip(cell, cell[1:] + cell[:1], strict=True):
            key = (min(a, b), max(a, b))
            if key not in middles:
                middles[key] = len(points) + len(more)
                (ra, ta), (rb, tb) = polar[a], polar[b]
                middle = (points[a] + points[b]) / 2
                if ra == rb:
                    angle = ta + ((tb - ta + np.pi) % (2 * np.pi) - np.pi) / 2
                    middle = ra * np.array([np.cos(angle), np.sin(angle)])
                more.append(middle)
            row.append(middles[key])
        rows.append(row)
    return np.array(rows), np.vstack([points, more])


def rectangle(
    width: float, height: float, columns: int, rows: int, *, kind: str = "triangle", split: int = 0
) -> Arrays:
    """A rectangle from the origin on, of triangles or quads of any order; group 1 for the first `split` columns."""
    step = 1 if kind in ("triangle", "quad") else 2
    nx, ny = step * columns + 1, step * rows + 1
    x, y = np.meshgrid(np.linspace(0, width, nx), np.linspace(0, height, ny), indexing="ij")
    number = np.arange(nx * ny).reshape(nx, ny)
    cells, group = [], []
    for i in range(columns):
        for j in range(rows):
            n = number[step * i : step * (i + 1) + 1, step * j : step * (j + 1) + 1]
            a, b, c, d = n[0, 0], n[-1, 0], n[-1, -1], n[0, -1]
            own = 1 if i < split else 2
            if kind == "triangle":
                cells += [(a, b, c), (a, c, d)]
                group += [own, own]
                continue
            row = [a, b, c, d]
            if step == 2:
                row += [n[1, 0], n[2, 1], n[1, 2], n[0, 1]] + ([n[1, 1]] if kind == "quad9" else [])
            cells.append(tuple(row))
            group.append(own)
    points = np.column_stack([x.ravel(), y.ravel(), np.zeros(nx * ny)])
    return points, {kind: np.array(cells)}, {kind: np.array(group)}


KINDS = {"line": 1, "triangle": 2, "quad": 3, "line3": 8, "triangle6": 9, "quad9": 10, "quad8": 16}


def msh(arrays: Arrays, names: dict[int, str], version: str = "4.1", lines: dict[int, str] | None = None) -> bytes:
    """The text of an MSH file; `names` of groups of cells by number, `lines` those of kinds that are lines."""
    points, cells, groups = arrays
    rows = ["$MeshFormat", f"{version} 0 8", "$EndMeshFormat"]
    every = [(2, n, name) for n, name in names.items()] + [(1, n, name) for n, name in (lines or {}).items()]
    rows += ["$PhysicalNames", str(len(every)), *(f'{d} {n} "{name}"' for d, n, name in every), "$EndPhysicalNames"]
    dimension = {kind: 1 if kind.startswith("line") else 2 for kind in cells}
    parts = [(kind, int(n)) for kind in cells for n in np.unique(groups[kind])]
    if version == "4.1":
        curves = sorted({n for kind, n in parts if dimension[kind] == 1})
        faces = sorted({n for kind, n in parts if dimension[kind] == 2})
        rows += ["$Entities", f"0 {len(curves)} {len(faces)} 0"]
        rows += [f"{n} 0 0 0 0 0 0 {f'1 {n}' if n else '0'} 0" for n in (*curves, *faces)]
        rows += ["$EndEntities", "$Nodes", f"1 {len(points)} 1 {len(points)}", f"2 1 0 {len(points)}"]
        rows += [str(k + 1) for k in range(len(points))]
        rows += [" ".join(f"{v:.17g}" for v in point) for point in points]
        total = sum(len(c) for c in cells.values())
        rows += ["$EndNodes", "$Elements", f"{len(parts)} {total} 1 {total}"]
        for kind, n in parts:
            mine = cells[kind][groups[kind] == n]
            rows.append(f"{dimension[kind]} {n} {KINDS[kind]} {len(mine)}")
            rows += [f"{k + 1} " + " ".join(str(v + 1) for v in row) for k, row in enumerate(mine.tolist())]
    else:
        rows += ["$Nodes", str(len(points))]
        rows += [f"{k + 1} " + " ".join(f"{v:.17g}" for v in point) for k, point in enumerate(points)]
        rows += ["$EndNodes", "$Elements", str(sum(len(c) for c in cells.values()))]
        for kind, n in parts:
            for row in cells[kind][groups[kind] == n].tolist():
                rows.append(f"1 {KINDS[kind]} 2 {n} {n} " + " ".join(str(v + 1) for v in row))
    return "\n".join([*rows, "$EndElements", ""]).encode()


def by_meshio(arrays: Arrays, name: str = "region") -> meshio.Mesh:
    """The same as a mesh of meshio, the groups' numbers as cell data."""
    points, cells, groups = arrays
    return meshio.Mesh(points, list(cells.items()), cell_data={name: [groups[kind] for kind in cells]})
