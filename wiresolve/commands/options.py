"""What the commands share: the example that ends each one's help, and options that mean the same everywhere."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

from wiresolve.commands.terminal import log_to_stderr
from wiresolve.output.extras import CELLS

_Function = TypeVar("_Function", bound=Callable[..., Any])
_PATH = click.Path(path_type=Path)


class Command(click.Command):
    """A command whose help ends with one example to copy."""

    def __init__(self, *args: Any, example: str, **options: Any) -> None:
        super().__init__(*args, **options)
        self.example = example

    def format_epilog(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the example."""
        write_example(formatter, self.example)


class Words(click.Choice[str]):
    """One of some words; of another one the nearest is proposed."""

    def get_invalid_choice_message(self, value: object, ctx: click.Context | None) -> str:
        """What is said of another word."""
        from wiresolve.describe.checks import SHAPE_WORDS, nearest

        hint = nearest(value, self.choices, meant=SHAPE_WORDS)
        return super().get_invalid_choice_message(value, ctx).rstrip(".") + (f"; {hint}" if hint else "")


def write_example(formatter: click.HelpFormatter, example: str) -> None:
    """An example as the last part of a help text."""
    with formatter.section("Example"):
        formatter.write(f"{'':{formatter.current_indent}}{example}\n")


def _listen(context: click.Context, _: click.Parameter, wanted: bool) -> None:
    if wanted:
        if context.params.get("quiet"):
            raise click.UsageError("--verbose and --quiet contradict each other", context)
        context.call_on_close(log_to_stderr())


def file_argument(function: _Function) -> _Function:
    """The wire file."""
    return click.argument("file", type=_PATH)(function)


def out(text: str, metavar: str = "DIR") -> Callable[[_Function], _Function]:
    """Where the result goes."""
    return click.option("--out", type=_PATH, metavar=metavar, help=text)


def replace(text: str) -> Callable[[_Function], _Function]:
    """Whether what is there may be replaced."""
    return click.option("--replace", is_flag=True, help=text)


def as_json(text: str) -> Callable[[_Function], _Function]:
    """Data for programs on stdout."""
    return click.option("--json", "as_json", is_flag=True, help=text)


accuracy = click.option(
    "--accuracy", metavar="ENERGY", help='Wanted error of each energy, e.g. "0.1 meV", over the file\'s.'
)
quiet = click.option("--quiet", is_flag=True, is_eager=True, help="Print nothing but errors, and what --json asks for.")
verbose = click.option(
    "-v", "--verbose", is_flag=True, expose_value=False, callback=_listen, help="Log what happens to stderr."
)
strict = click.option("--strict", is_flag=True, help="Exit with 2 if there is any warning.")
no_figures = click.option("--no-figures", is_flag=True, help="Draw no figures.")
report = click.option("--report", is_flag=True, help="Also write report.html, one file with everything to read.")
vtk = click.option(
    "--vtk",
    type=Words(CELLS),
    default=CELLS[0],
    show_default=True,
    help="Cells of the files for ParaView: curved ones of fourth order, or flat ones that any program reads.",
)


def measured(column: str) -> Callable[[_Function], _Function]:
    """Points to lay over the staircase, in a file with this column."""
    text = f"Lay measured points over the staircase: columns {column} and conductance_G0 (or _uS, or resistance_ohm)."
    return click.option("--measured", type=_PATH, metavar="FILE.csv", help=text)


def together(*options: Callable[[_Function], _Function]) -> Callable[[_Function], _Function]:
    """Several options in the order in which they are to be listed."""

    def apply(function: _Function) -> _Function:
        for option in reversed(options):
            function = option(function)
        return function

    return apply
