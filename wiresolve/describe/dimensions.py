"""The lengths by which a section is given, each with the outlines that another value would draw."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

from wiresolve.describe.curves import Loop
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.describe.section import ADMITTED, Layer, Patch, Section
from wiresolve.describe.shapes import Shape

_ANY = "any"


@dataclass(frozen=True, eq=False)
class Dimension:
    """A length of a section.

    Attributes
    ----------
    path : of its key in the wire file, as in `section.layers[1].thickness`.
    value_nm : as it is given.
    loops : the outlines that it draws at another value, by the number of the piece (`Section.pieces`); `InputError`
        where there are none.
    """

    path: str
    value_nm: float
    loops: Callable[[float], Mapping[int, Loop]]


def dimensions(section: Section) -> tuple[Dimension, ...]:
    """The core's lengths, thicknesses of layers, and lengths and places of patches, in the order of the wire file."""
    inner = len(section.pieces()) - len(section.patches)
    # Layers without patches, in any material that admits carriers: only the outlines are wanted.
    bare = (
        section
        if inner == 1
        else replace(
            section,
            material=_ANY,
            carriers=ADMITTED,
            outside=None,
            patches=(),
            layers=tuple(replace(layer, material=_ANY, carriers=ADMITTED) for layer in section.layers),
        )
    )

    def drawn(**changes: Any) -> Mapping[int, Loop]:
        return dict(enumerate(piece.loop for piece in replace(bare, **changes).pieces()))

    def of_layer(k: int, change: Callable[[float], Layer]) -> Callable[[float], Mapping[int, Loop]]:
        before, after = bare.layers[:k], bare.layers[k + 1 :]
        return lambda value: drawn(layers=(*before, change(value), *after))

    def of_patch(k: int, change: Callable[[float], Patch]) -> Callable[[float], Mapping[int, Loop]]:
        def loops(value: float) -> Mapping[int, Loop]:
            patch = change(value)
            return {inner + k: patch.shape.loop().moved(*patch.center_nm)}

        return loops

    def of_shape(change: Callable[[float], Shape]) -> Callable[[float], Mapping[int, Loop]]:
        if inner == 1:
            return lambda value: {0: change(value).loop()}
        return lambda value: drawn(shape=change(value))

    found = [Dimension(f"section.{key}", value, of_shape(change)) for key, value, change in _lengths(section.shape)]
    for k, layer in enumerate(bare.layers):
        path = f"section.layers[{k + 1}]"
        if layer.thickness_nm is not None:
            change = _with(layer, "thickness_nm")
            found.append(Dimension(f"{path}.thickness", layer.thickness_nm, of_layer(k, change)))
        for n, (side, coat) in enumerate(layer.sides or ()):
            if coat > 0:
                found.append(Dimension(f"{path}.sides.{side}", coat, of_layer(k, _with_side(layer, n))))
    for k, patch in enumerate(section.patches):
        path = f"section.patches[{k + 1}]"
        for key, value, change in _lengths(patch.shape):
            found.append(Dimension(f"{path}.{key}", value, of_patch(k, _with_shape(patch, change))))
        for axis in (0, 1):
            place = patch.center_nm[axis]
            found.append(Dimension(f"{path}.center[{axis + 1}]", place, of_patch(k, _with_center(patch, axis))))
    return tuple(found)


def _lengths(shape: Shape) -> Iterator[tuple[str, float, Callable[[float], Shape]]]:
    for key in (*LENGTH_KEYS.get(shape.kind, ()), "corner_radius"):
        value = getattr(shape, f"{key}_nm", None)
        if value:
            yield key, float(value), _with(shape, f"{key}_nm")


def _with(given: Any, field: str) -> Callable[[float], Any]:
    return lambda value: replace(given, **{field: value})


def _with_side(given: Layer, n: int) -> Callable[[float], Layer]:
    sides = given.sides or ()
    return lambda value: replace(given, sides=(*sides[:n], (sides[n][0], value), *sides[n + 1 :]))


def _with_shape(given: Patch, change: Callable[[float], Shape]) -> Callable[[float], Patch]:
    return lambda value: replace(given, shape=change(value))


def _with_center(given: Patch, axis: int) -> Callable[[float], Patch]:
    x, y = given.center_nm
    return lambda value: replace(given, center_nm=(value, y) if axis == 0 else (x, value))
