"""Meshes in Gmsh's open MSH format, 2.2 and 4.1, as text or binary.

Read here and not by a library, because numbers in such a file say how much memory to take and how often to repeat:
each is held against what the file holds before it is believed (Gmsh reference manual, "File formats").
"""

from __future__ import annotations

import re
import struct
import warnings
from collections.abc import Iterator

import numpy as np

from wiresolve.describe.mesh_data import Array, Block, Ints, MeshData
from wiresolve.errors import InputError

KINDS = {1: ("line", 2), 2: ("triangle", 3), 3: ("quad", 4), 8: ("line3", 3), 9: ("triangle6", 6), 10: ("quad9", 9)}
KINDS |= {15: ("vertex", 1), 16: ("quad8", 8)}
SOLID = {4, 5, 6, 7, 11, 12, 13, 14, 17, 18, 19}
_HIGHER = {20: 9, 21: 10, 22: 12, 23: 15, 24: 15, 25: 21, 26: 4, 27: 5, 28: 6, 36: 16, 37: 25}
DIMENSION = {"vertex": 0, "line": 1, "line3": 1}


class _Fault(Exception):
    """What is wrong with the file, in a few words."""


class _Numbers:
    """The numbers of a part of the file, one after the other; never more than there are."""

    def __init__(self, content: bytes, text: bool) -> None:
        self._text, self._content, self._at = text, content, 0
        if text:
            with warnings.catch_warnings():
                warnings.simplefilter("error")
                try:
                    self._values = np.fromstring(content.decode("ascii", "replace"), sep=" ")
                except (DeprecationWarning, ValueError):
                    raise _Fault("holds something else where numbers should be") from None

    def take(self, count: int, kind: str = "i4") -> Array:
        """The next `count` numbers, as floats."""
        size = 1 if self._text else np.dtype(kind).itemsize
        total = len(self._values) if self._text else len(self._content)
        if count < 0 or self._at + count * size > total:
            raise _Fault("ends too early, or a count in it is wrong")
        first, self._at = self._at, self._at + count * size
        if self._text:
            return np.asarray(self._values[first : self._at])
        return np.frombuffer(self._content, kind, count, first).astype(float)

    def whole(self, count: int, kind: str = "i4") -> Ints:
        """The next `count` numbers, which must be whole."""
        values = self.take(count, kind)
        if not (np.isfinite(values).all() and (values == np.rint(values)).all() and (abs(values) < 2**53).all()):
            raise _Fault("holds a fraction where a whole number should be")
        return np.asarray(values, dtype=np.int64)

    def one(self, kind: str = "i4") -> int:
        """The next number."""
        return int(self.whole(1, kind)[0])


def parse(field: str, content: bytes) -> MeshData:
    """The mesh in the bytes of an MSH file; InputError about `field` where it is damaged or of another version."""
    try:
        return _parsed(content)
    except _Fault as fault:
        remedy = "write the mesh anew, as MSH 4.1 or 2.2"
        raise InputError(field, f"cannot be read as an MSH mesh: it {fault}", remedy=remedy) from None


def _parsed(content: bytes) -> MeshData:
    head = re.match(
        rb"\s*(?:\$Comments.*?\$EndComments\s*)?\$MeshFormat\s+(\S+)\s+([01])\s+(\d+)[ \r]*\n", content, re.S
    )
    if head is None:
        raise _Fault("does not begin with $MeshFormat")
    version, text, size = head[1].decode("ascii", "replace"), head[2] == b"0", int(head[3])
    if not text and struct.unpack("<i", content[head.end() : head.end() + 4].ljust(4))[0] != 1:
        raise _Fault("is binary with the bytes in another order")
    if version in ("2", "2.1", "2.2"):
        names = _names(content)
        numbers, points = _nodes_2(_part(content, b"Nodes", text), text)
        rows = _elements_2(_part(content, b"Elements", text), text)
    elif version in ("4.1", "4"):
        if not text and size not in (4, 8):
            raise _Fault("has integers of an unknown size")
        long = f"u{size}" if not text else "u8"
        names = _names(content)
        groups = _entities(_part(content, b"Entities", text, needed=False), text, long)
        numbers, points = _nodes_4(_part(content, b"Nodes", text), text, long)
        rows = _elements_4(_part(content, b"Elements", text), text, long, groups)
    else:
        raise _Fault(f"is of version {version[:12]}, and 4.1 and 2.2 are known")
    return _assembled(numbers, points, list(rows), names)


def _part(content: bytes, name: bytes, text: bool, needed: bool = True) -> bytes:
    """What stands between $Name and $EndName."""
    begin = re.search(rb"\$" + name + rb"[ \r]*\n", content)
    # In binary data the closing words may stand by chance: those that a line follows are meant, the last ones.
    end = -1 if begin is None else content.find(b"$End" + name, begin.end())
    if begin is None or end < 0:
        if not needed and begin is None:
            return b""
        raise _Fault(f"has no ${name.decode()} closed by $End{name.decode()}: perhaps it is cut off")
    if not text:
        end = content.rfind(b"$End" + name)
    return content[begin.end() : end]


def _names(content: bytes) -> dict[tuple[int, int], str]:
    """Names of the physical groups by dimension and number."""
    part = _part(content, b"PhysicalNames", True, needed=False)
    found = {}
    for row in part.decode("utf-8", "replace").splitlines()[1:]:
        match = re.fullmatch(r'\s*(\d{1,3})\s+(\d{1,9})\s+"?(.*?)"?\s*', row)
        if match is None:
            if row.strip():
                raise _Fault("has a physical name that is no dimension, number and text")
            continue
        found[int(match[1]), int(match[2])] = "".join(c if c.isprintable() else "?" for c in match[3])
    return found


def _nodes_2(part: bytes, text: bool) -> tuple[Ints, Array]:
    line, _, rest = part.partition(b"\n")
    count = _count(line)
    if text:
        table = _Numbers(rest, True).take(4 * count).reshape(count, 4)
        return _whole(table[:, 0]), table[:, 1:]
    row = np.dtype([("number", "<i4"), ("place", "<f8", 3)])
    if count * row.itemsize > len(rest):
        raise _Fault("ends too early, or a count in it is wrong")
    binary = np.frombuffer(rest, row, count)
    return binary["number"].astype(np.int64), binary["place"].astype(float)


def _whole(values: Array) -> Ints:
    if not (np.isfinite(values).all() and (values == np.rint(values)).all() and (abs(values) < 2**53).all()):
        raise _Fault("holds a fraction where a whole number should be")
    return values.astype(np.int64)


def _count(line: bytes) -> int:
    try:
        count = int(line)
    except ValueError:
        raise _Fault("holds something else where a count should be") from None
    if count < 0:
        raise _Fault("holds a negative count")
    return count


def _elements_2(part: bytes, text: bool) -> Iterator[tuple[int, int, Ints]]:
    """Rows (kind's number, group, node numbers (c, nodes)), cell by cell or in runs."""
    line, _, rest = part.partition(b"\n")
    count, numbers = _count(line), _Numbers(rest, text)
    if count > len(rest):
        raise _Fault("ends too early, or a count in it is wrong")
    done = 0
    if text:
        flat, at = [int(v) for v in numbers.whole(len(numbers._values))], 0
        runs: dict[tuple[int, int], list[list[int]]] = {}
        while done < count:
            if at + 3 > len(flat):
                raise _Fault("ends too early, or a count in it is wrong")
            kind, tags = flat[at + 1], flat[at + 2]
            nodes = _size(kind)
            begin = at + 3 + tags
            if tags < 0 or begin + nodes > len(flat):
                raise _Fault("ends too early, or a count in it is wrong")
            runs.setdefault((kind, flat[at + 3] if tags else 0), []).append(flat[begin : begin + nodes])
            at, done = begin + nodes, done + 1
        for (kind, group), rows in runs.items():
            yield kind, group, np.array(rows, dtype=np.int64)
        return
    while done < count:
        kind, many, tags = (int(v) for v in numbers.whole(3))
        nodes = _size(kind)
        if many < 1 or tags < 0:
            raise _Fault("has a wrong count")
        table = numbers.whole(many * (1 + tags + nodes)).reshape(many, 1 + tags + nodes)
        groups = table[:, 1] if tags else np.zeros(many, dtype=np.int64)
        for one in np.unique(groups):
            yield kind, int(one), table[groups == one, 1 + tags :]
        done += many


def _size(kind: int) -> int:
    """Nodes of a kind of cells."""
    if kind in SOLID:
        raise _Fault("holds solid cells: it is a 3D mesh, and a plane cross-section is wanted")
    if kind in _HIGHER:
        raise _Fault("holds cells above the second order; export first or second order")
    if kind not in KINDS:
        raise _Fault(f"holds cells of an unknown kind ({kind})")
    return KINDS[kind][1]


def _entities(part: bytes, text: bool, long: str) -> dict[tuple[int, int], tuple[int, ...]]:
    """Physical groups of each entity, by its dimension and number."""
    found: dict[tuple[int, int], tuple[int, ...]] = {}
    if not part:
        return found
    numbers = _Numbers(part, text)
    for dimension, many in enumerate(numbers.whole(4, long)):
        for _ in range(int(many)):  # ends with the file at the latest
            tag = numbers.one()
            numbers.take(3 if dimension == 0 else 6, "f8")
            found[dimension, tag] = tuple(abs(int(v)) for v in numbers.whole(numbers.one(long)))
            if dimension:
                numbers.take(numbers.one(long))
    return found


def _nodes_4(part: bytes, text: bool, long: str) -> tuple[Ints, Array]:
    numbers = _Numbers(part, text)
    tags, places = [], []
    for _ in range(int(numbers.whole(4, long)[0])):
        dimension, _, parametric = (int(v) for v in numbers.whole(3))
        many = numbers.one(long)
        tags.append(numbers.whole(many, long))
        width = 3 + (dimension if parametric else 0)
        if not 3 <= width <= 6:
            raise _Fault("has a wrong count")
        places.append(numbers.take(width * many, "f8").reshape(many, width)[:, :3])
    if not tags:
        raise _Fault("has no nodes")
    return np.concatenate(tags), np.vstack(places)


def _elements_4(
    part: bytes, text: bool, long: str, groups: dict[tuple[int, int], tuple[int, ...]]
) -> Iterator[tuple[int, int, Ints]]:
    numbers = _Numbers(part, text)
    for _ in range(int(numbers.whole(4, long)[0])):
        dimension, entity, kind = (int(v) for v in numbers.whole(3))
        many, nodes = numbers.one(long), _size(kind)
        table = numbers.whole(many * (1 + nodes), long).reshape(many, 1 + nodes)
        named = groups.get((dimension, entity), ())
        if len(named) > 1 and dimension == 2:
            raise _Fault(f"has cells that are in two physical groups at once ({named[0]} and {named[1]})")
        yield kind, named[0] if named else 0, table[:, 1:]


def _assembled(
    numbers: Ints, points: Array, rows: list[tuple[int, int, Ints]], named: dict[tuple[int, int], str]
) -> MeshData:
    if not len(numbers):
        raise _Fault("has no nodes")
    order = np.argsort(numbers, kind="stable")
    ordered = numbers[order]
    if (ordered[1:] == ordered[:-1]).any():
        twice = int(ordered[1:][ordered[1:] == ordered[:-1]][0])
        raise _Fault(f"has two nodes of the number {twice}")
    names: dict[tuple[int, str], int] = {}
    blocks = []
    alike: dict[tuple[int, int], list[Ints]] = {}
    for kind_number, group, some in rows:
        alike.setdefault((kind_number, group), []).append(some)
    for (kind_number, group), parts in alike.items():
        nodes = np.vstack(parts)
        kind, _ = KINDS[kind_number]
        if kind == "vertex" or not len(nodes):
            continue
        at = np.minimum(np.searchsorted(ordered, nodes), len(ordered) - 1)
        if (wrong := ordered[at] != nodes).any():
            raise _Fault(f"has a cell with node {int(nodes[wrong][0])}, which is not there")
        dimension, index = DIMENSION.get(kind, 2), -1
        if group:
            name = named.get((dimension, group), str(group))
            index = names.setdefault((dimension, name), len(names))
        blocks.append(Block(kind, order[at], np.full(len(nodes), index, dtype=np.int64)))
    for dimension, name in ((d, n) for (d, _), n in named.items() if d == 2):
        names.setdefault((dimension, name), len(names))
    return MeshData(points, tuple(blocks), tuple(name for _, name in names), numbers)
