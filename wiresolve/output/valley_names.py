"""The label of a group of valleys, taken apart and shortened."""

from __future__ import annotations

import re


def members(label: str) -> tuple[str, list[str]]:
    """The kind and the directions of a group of valleys: "L", ["[1-11]", "[1-1-1]"]."""
    directions = re.findall(r"\[[^\]]*\]", label)
    return label.partition(" [")[0], directions


def short_valleys(label: str) -> str:
    """A group of valleys with up to two of its directions: "L [111] [11-1] and 2 more"."""
    kind, directions = members(label)
    rest = f"and {len(directions) - 2} more" if len(directions) > 2 else ""
    return " ".join(part for part in (kind, *directions[:2], rest) if part)
