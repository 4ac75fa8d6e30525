"""What may stand behind a key of a wire file, as data: for the schema that editors use, and for the documentation."""

from __future__ import annotations

from dataclasses import dataclass

from wiresolve.units import UNITS

SAMPLES = {
    "length": "10 nm",
    "energy": "0.1 eV",
    "temperature": "77 K",
    "angle": "30 deg",
    "electric field": "0.01 V/nm",
    "voltage": "0.5 V",
    "resistance": "500 ohm",
    "sheet density": "1e12 cm^-2",
    "density": "1e18 cm^-3",
}
"""A quantity of each dimension that wire files have."""


@dataclass(frozen=True)
class Quantity:
    """A text with a unit. `signed` where it may be negative; otherwise `zero` tells whether it may be 0."""

    dimension: str
    sample: str = ""
    signed: bool = False
    zero: bool = False

    @property
    def units(self) -> tuple[str, ...]:
        """The spellings of its units."""
        return tuple(UNITS[self.dimension])

    @property
    def example(self) -> str:
        """A quantity of the kind."""
        return self.sample or SAMPLES[self.dimension]


@dataclass(frozen=True)
class Text:
    """A text of at most so many characters; `usual` are texts that mean something special or are good to propose."""

    sample: str
    longest: int = 200
    usual: tuple[str, ...] = ()


@dataclass(frozen=True)
class Choice:
    """One of some words."""

    words: tuple[str, ...]


@dataclass(frozen=True)
class Number:
    """A bare number within a range."""

    sample: float
    low: float | None = None
    high: float | None = None


@dataclass(frozen=True)
class Whole:
    """A whole number within a range."""

    sample: int
    low: int
    high: int


@dataclass(frozen=True)
class Flag:
    """True or false."""


@dataclass(frozen=True)
class Row:
    """A list of `least` to `most` entries of one kind, no two of them equal where they are `distinct`."""

    of: Kind
    least: int
    most: int | None = None
    distinct: bool = False
    sample: str = ""


@dataclass(frozen=True)
class Either:
    """One of several kinds, the usual one first."""

    kinds: tuple[Kind, ...]


@dataclass(frozen=True)
class Inner:
    """A table with keys of its own (named in `wire_keys.TABLES`), or with `many` a list of such tables."""

    table: str
    many: bool = False
    sample: str = ""


@dataclass(frozen=True)
class Named:
    """A table whose keys are names that the user chooses, all with values of one kind."""

    of: Kind
    sample: str = ""


Kind = Quantity | Text | Choice | Number | Whole | Flag | Row | Either | Inner | Named


@dataclass(frozen=True)
class Key:
    """A key of a wire file, what may stand behind it, and what it means (Markdown, one paragraph)."""

    name: str
    kind: Kind
    text: str


def spelled(kind: Kind) -> str:
    """A value of a kind as it is typed in a wire file; empty where only a table can show it."""
    match kind:
        case Quantity():
            return f'"{kind.example}"'
        case Text():
            return f'"{kind.sample}"'
        case Choice():
            return " or ".join(f'"{word}"' for word in kind.words)
        case Number() | Whole():
            return f"{kind.sample:g}"
        case Flag():
            return "true"
        case Row():
            return kind.sample or f"[{spelled(kind.of)}]"
        case Either():
            return spelled(kind.kinds[0])
        case Inner() | Named():
            return kind.sample
