"""The finished points of a sweep that is under way, kept in `DIR.partial` so that it can go on after any stop.

The folder holds `manifest.json` (whose points they are), and for each point `point_0001.npz` (fields on the mesh) and
`point_0001.json` (all else; it is written last, so a point that has one is whole). Every file is written under another
name and renamed.
"""

from __future__ import annotations

import dataclasses
import hashlib
import json
import os
import re
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import IO, Any
from zipfile import BadZipFile

import numpy as np

from wiresolve.describe.problem import Problem
from wiresolve.errors import InputError
from wiresolve.fem.mesh import Mesh
from wiresolve.gate_curve import Progress, Solver, Sweep, checked, gate_curve, solver_of
from wiresolve.gate_result import FIELDS, GateCurve, GatePoint
from wiresolve.output.target import readable
from wiresolve.solve import versions

FORMAT = "wiresolve-sweep-points-1"
_OURS = re.compile(r"manifest\.json|lock|point_\d{4,}\.(json|npz)|.*\.fresh")


def partial_folder(target: Path) -> Path:
    """Where the points of an unfinished sweep are kept, beside the folder that its result goes to."""
    return target.with_name(f"{target.name}.partial")


class Points:
    """The points on disk of one sweep, held by one run at a time (see `kept_points`).

    `field` is what errors call the folder.
    """

    def __init__(self, folder: Path, problem: Problem, field: str) -> None:
        self.folder, self.field = folder, field
        self._made = {"format": FORMAT, "input_digest": problem.digest, "wiresolve": versions()["wiresolve"]}
        self._at = checked(problem).voltages
        self._lock: IO[str] | None = None
        self._held, self._parents_made = False, [p for p in folder.parents if not p.exists()]

    def open(self, restart: bool) -> dict[int, GatePoint]:
        """The points found, by their place in the sweep from 0.

        Raises
        ------
        InputError
            The folder is no sweep's, is that of another wire file or version, or another run is at work in it.
        """
        if not self.folder.exists():
            return {}
        names = sorted(p.name for p in self.folder.iterdir()) if self.folder.is_dir() else ["?"]
        if not all(_OURS.fullmatch(name) for name in names):
            rule = f"needs {self.folder.name} beside it, which holds something else"
            raise InputError(self.field, rule, str(self.folder), "move that away, or give another folder")
        self._hold()
        if restart or self.count() == 0:
            self.discard()
            return {}
        manifest = self._manifest() or {}
        for key, what in (("input_digest", "another wire file"), ("wiresolve", "another version of wiresolve")):
            if manifest.get(key) != self._made[key]:
                self._refuse(f"belongs to an unfinished sweep of {what}")
        return {place: point for place in self._places() if (point := self._read(place)) is not None}

    def begin(self, mesh: Mesh) -> None:
        """Make the folder, if it is not there.

        Raises
        ------
        InputError
            Its points lie on another mesh.
        """
        digest = mesh_digest(mesh)
        manifest = self._manifest()
        if manifest is None:
            self.folder.mkdir(parents=True, exist_ok=True)
            self._hold()
            self._store("manifest.json", json.dumps({**self._made, "mesh_digest": digest}, indent=2).encode())
        elif manifest.get("mesh_digest") != digest:
            self._refuse("belongs to an unfinished sweep on another mesh (from another version of Gmsh?)")

    def keep(self, place: int, point: GatePoint) -> None:
        """Store a point, unless it failed: it is tried again when the sweep goes on."""
        if not point.converged:
            return
        with readable(self.folder, self.field):
            fields = {name: getattr(point, name) for name in FIELDS}
            with self._fresh(f"{_stem(place)}.npz") as file:
                np.savez(file, **fields)
            numbers = {f.name: getattr(point, f.name) for f in dataclasses.fields(point) if f.name not in FIELDS}
            self._store(f"{_stem(place)}.json", json.dumps(numbers, default=_listed).encode())

    def count(self) -> int:
        """How many points are kept."""
        return sum(1 for _ in self._places()) if self.folder.is_dir() else 0

    def discard(self) -> None:
        """Remove what this module put into the folder, and the folder if that empties it."""
        with suppress(FileNotFoundError):
            for path in self.folder.iterdir():
                if _OURS.fullmatch(path.name):
                    path.unlink()
            with suppress(OSError):
                self.folder.rmdir()
        self.release()

    def release(self) -> None:
        """Let another run have the folder."""
        self._held = False
        if self._lock is not None:
            self._lock.close()
            self._lock = None

    def close(self) -> None:
        """Release the folder; one without a point is removed, with the folders that were made on the way to it."""
        if self._held and self.count() == 0:
            self.discard()
        self.release()
        for parent in self._parents_made:
            with suppress(OSError):
                parent.rmdir()

    def _hold(self) -> None:
        self._held = True
        try:
            import fcntl
        except ImportError:  # no such locks on this system
            return
        self._lock = self._lock or open(self.folder / "lock", "a", encoding="utf-8")  # noqa: SIM115 - held for the run
        try:
            fcntl.flock(self._lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            self.release()
            rule = f"another run is at work in {self.folder.name}"
            raise InputError(self.field, rule, str(self.folder), "wait for it, or give another folder") from None

    def _refuse(self, rule: str) -> None:
        self.release()
        remedy = "give another folder, or say --restart to throw those points away"
        raise InputError(self.field, f"{self.folder.name} {rule}", str(self.folder), remedy)

    def _manifest(self) -> dict[str, Any] | None:
        try:
            found: dict[str, Any] = json.loads((self.folder / "manifest.json").read_text(encoding="utf-8"))
        except FileNotFoundError:
            return None
        except ValueError:
            return {}
        return found

    def _places(self) -> Iterator[int]:
        assert self._at is not None
        return (n for n in range(len(self._at.points)) if (self.folder / f"{_stem(n)}.json").exists())

    def _read(self, place: int) -> GatePoint | None:
        """A stored point; None for one that cannot be read, which is then solved again."""
        stem = self.folder / _stem(place)
        try:
            found = json.loads(stem.with_suffix(".json").read_text(encoding="utf-8"))
            with np.load(stem.with_suffix(".npz"), allow_pickle=False) as fields:
                found |= {name: fields[name] for name in FIELDS}
            return GatePoint(**{f.name: _typed(f.type, found[f.name]) for f in dataclasses.fields(GatePoint)})
        except (OSError, ValueError, KeyError, TypeError, EOFError, BadZipFile):
            return None

    def _store(self, name: str, content: bytes) -> None:
        with self._fresh(name) as file:
            file.write(content)

    @contextmanager
    def _fresh(self, name: str) -> Iterator[IO[bytes]]:
        """A file that is there under its name as a whole or not at all, even after a loss of power."""
        fresh = self.folder / f"{name}.fresh"
        with open(fresh, "wb") as file:
            yield file
            file.flush()
            os.fsync(file.fileno())
        os.replace(fresh, self.folder / name)


@contextmanager
def kept_points(target: Path, problem: Problem, field: str = "folder") -> Iterator[Points]:
    """The points beside a target for the time of a sweep; no folder without any is left.

    Whoever has written the curve calls `discard` on them.
    """
    points = Points(partial_folder(target), problem, field)
    try:
        yield points
    finally:
        points.close()


def swept(
    problem: Problem,
    points: Points,
    *,
    restart: bool = False,
    on_progress: Progress | None = None,
    on_start: Callable[[int], None] | None = None,
    solver: Solver | None = None,
) -> GateCurve:
    """A gate curve whose points are kept as they are solved; those found are not solved again.

    `on_start` is called with the number of points found once the mesh is made.

    Raises
    ------
    InputError
        As for `gate_curve` and `Points.open`.
    """
    with readable(points.folder, points.field):
        finished = points.open(restart)

    def made(given: Problem) -> Sweep:
        sweep = solver(given) if solver is not None else solver_of(given, on_progress)
        with readable(points.folder, points.field):
            points.begin(sweep.mesh)
        if on_start is not None:
            on_start(len(finished))
        return sweep

    return gate_curve(problem, on_progress, finished, points.keep, made)


def mesh_digest(mesh: Mesh) -> str:
    """SHA-256 of a mesh's points, cells and regions."""
    found = hashlib.sha256(repr((mesh.degree, mesh.regions)).encode())
    for array in (mesh.points, mesh.cells, mesh.region):
        found.update(np.ascontiguousarray(array).tobytes())
    return found.hexdigest()


def _stem(place: int) -> str:
    return f"point_{place + 1:04d}"


def _listed(value: Any) -> Any:
    if isinstance(value, np.ndarray | np.generic):
        return value.tolist()
    if isinstance(value, Mapping):
        return dict(value)
    raise TypeError(f"a {type(value).__name__} in a point of a sweep")


def _typed(kind: Any, value: Any) -> Any:
    """A value of JSON as the field of a `GatePoint` that it is of."""
    if kind == "Array":
        return np.asarray(value, dtype=float)
    if kind == "Ints":
        return np.asarray(value, dtype=np.int64)
    return tuple(value) if isinstance(value, list) else value
