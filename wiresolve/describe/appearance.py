"""How parts of a section look in every picture: colours in order of appearance, round scale bars.

The colours are the eight of M. Okabe and K. Ito (Color Universal Design, 2008), which colour-blind readers tell apart.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

CYCLE = ("#0072B2", "#E69F00", "#009E73", "#CC79A7", "#56B4E9", "#D55E00", "#F0E442", "#000000")
INK = "#262626"
_FILLED, _KEPT_OUT = 0.72, 0.25
_RANK = {"core": 0, "layer": 1, "patch": 2, "insulator": 4, "below": 5, "above": 6, "beside": 7, "outside": 8}


def order_of_appearance(names: Sequence[str]) -> list[int]:
    """Regions from the core outwards, then patches, insulators, and what is around and outside."""

    def rank(number: int) -> tuple[int, int]:
        kind, _, count = names[number].partition(" ")
        return _RANK.get(kind, 3), int(count) if count.isdigit() else number

    return sorted(range(len(names)), key=rank)


def fill(place: int, carriers: bool) -> tuple[float, float, float]:
    """Red, green and blue (0 to 1) of the region at a place in the order of appearance.

    Softened, so that lines on it can be read; paler where carriers are kept out.
    """
    strength, code = (_FILLED if carriers else _KEPT_OUT), CYCLE[place % len(CYCLE)]
    red, green, blue = (1 - strength * (1 - int(code[k : k + 2], 16) / 255) for k in (1, 3, 5))
    return red, green, blue


def round_length(about: float) -> float:
    """The largest of 1, 2, 5 times a power of ten that is not above `about`: of a scale bar."""
    power = 10.0 ** math.floor(math.log10(about))
    return max(m * power for m in (1, 2, 5) if m * power <= about)
