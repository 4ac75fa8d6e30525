"""Commands that help to write a wire file: `new` and `schema`."""

from __future__ import annotations

import json
from collections.abc import Mapping
from importlib import resources
from types import MappingProxyType

import click

import wiresolve.commands.options as options
from wiresolve.commands.terminal import say, say_json

STARTS: Mapping[str, str] = MappingProxyType(
    {
        "circle": "a round section",
        "ellipse": "a flattened round section",
        "rectangle": "a ridge, fin or sheet, its corners sharp or round",
        "hexagon": "a grown wire with six facets",
        "triangle": "a groove, or a wire with three facets",
        "trapezoid": "a mesa that is wider at its foot",
        "polygon": "any corners, listed as points",
        "outline": "a curve traced in a picture, from a text file of points",
        "mesh": "regions that another program has drawn or meshed",
        "core-shell": "a core with a shell of another material around it",
        "wrap-gate": "a channel with a gate all around it, for gate curves",
    }
)
"""What there are starting files of, each in a few words."""


_PARTS: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "outline": ("outline", "run"),
        "mesh": ("mesh", "run"),
        "core-shell": ("core-shell", "run"),
        "wrap-gate": ("wrap-gate",),
    }
)
"""What the files are put together from, where it is not the shape, `core` and `run`."""


def starting_file(name: str) -> str:
    """The text of one of the starting files."""
    folder = resources.files("wiresolve.commands") / "starting_files"
    parts = _PARTS.get(name, (name, "core", "run"))
    return "".join((folder / f"{part}.toml").read_text(encoding="utf-8") for part in parts)


@click.command(cls=options.Command, example="wiresolve new circle > my.toml")
@click.argument("shape", required=False, metavar="[SHAPE]", type=options.Words(tuple(STARTS)))
def new(shape: str | None) -> None:
    """Print a commented wire file to start from.

    It can be solved as it stands; what else can be said stands in it as comments. (A section from a file needs the
    file, of course: the comments show a small one.) Without SHAPE the choices are listed.
    """
    if shape is not None:
        say(starting_file(shape).rstrip("\n"))
        return
    width = 2 + max(map(len, STARTS))
    say("\n".join(f"{name:<{width}}{about}" for name, about in STARTS.items()))
    say("'wiresolve new SHAPE > my.toml' writes the file")


@click.command(cls=options.Command, example="wiresolve schema wire > wire.schema.json")
@click.argument("kind", metavar="KIND", type=options.Words(("wire", "result", "gate-curve")))
def schema(kind: str) -> None:
    """Print the JSON Schema of a kind of file.

    KIND is wire (wire files), result (result.json) or gate-curve (gate_curve.json).

    An editor with a TOML language server completes and explains the keys of a wire file whose first line is
    "#:schema ./wire.schema.json", the file beside it being what this command prints.
    """
    from wiresolve.output import schema as schemas

    say_json(json.dumps(schemas.schema(kind), indent=2, ensure_ascii=False))
