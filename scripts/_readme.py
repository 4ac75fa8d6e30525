"""Writes the generated blocks of README.md: the table of agreed digits, the commands and the keys of wire files.

    python scripts/_readme.py            writes them anew
    python scripts/_readme.py --check    exit code 1 where README.md differs from what would be written

A block stands between `<!-- begin: NAME -->` and `<!-- end: NAME -->`. Blocks of other names are left alone.
"""

from __future__ import annotations

import argparse
import re
import sys
from collections.abc import Iterable, Mapping
from pathlib import Path

import click

import wiresolve.cli
from agreed_digits import REPOSITORY, load, summary, table
from wiresolve.commands.options import Command
from wiresolve.describe import device_keys, wire_keys
from wiresolve.describe.key_kinds import Choice, Key, spelled


def commands() -> dict[str, click.Command]:
    """The real commands of the command line by name."""
    return dict(wiresolve.cli.program.commands)


def argument_text(parameter: click.Parameter) -> str:
    """How an argument or an option is written: `FILE`, `--out DIR`, `--json`."""
    choices = " or ".join(parameter.type.choices) if isinstance(parameter.type, click.Choice) else ""
    if isinstance(parameter, click.Argument):
        text = (parameter.metavar or (parameter.name or "").upper()).strip("[]")
        return text if parameter.required else f"[{text}]"
    name = ", ".join(parameter.opts)
    takes_value = isinstance(parameter, click.Option) and not parameter.is_flag and not parameter.count
    return f"{name} {choices or parameter.metavar or parameter.type.name.upper()}" if takes_value else name


def option_text(option: click.Option) -> str:
    """What an option does, with its default."""
    text = " ".join((option.help or "").split())
    return f"{text} [default: {option.default}]" if option.show_default and option.default is not None else text


def option_table(command: click.Command) -> list[str]:
    """The options as a Markdown table; nothing where there are none."""
    options = [p for p in command.params if isinstance(p, click.Option) and not p.hidden]
    rows = [f"| `{argument_text(p)}` | {option_text(p)} |" for p in options]
    return ["\n".join(["| option | what it does |", "| --- | --- |", *rows])] if rows else []


def command_reference() -> str:
    """Of the program and of each command: how it is called, what it does, its options, an example, in Markdown."""
    parts = ["**`wiresolve [OPTIONS] COMMAND`**", *option_table(wiresolve.cli.program)]
    for name, command in commands().items():
        arguments = [p for p in command.params if isinstance(p, click.Argument)]
        parts.append(f"**`{' '.join(['wiresolve', name, *map(argument_text, arguments)])}`**")
        parts.append(" ".join((command.help or "").split("\f")[0].split()))
        parts += option_table(command)
        assert isinstance(command, Command)
        parts.append(f"Example: `{command.example}`")
    return "\n\n".join(parts)


def key_table(keys: Iterable[Key], prefix: str = "") -> str:
    """Keys of a wire file as a Markdown table."""
    rows = [f"| `{prefix}{key.name}` | {example(key)} | {key.text} |" for key in keys]
    return "\n".join(["| key | such as | meaning |", "| --- | --- | --- |", *rows])


def example(key: Key) -> str:
    """A value of a key, as code."""
    text = spelled(key.kind)
    words = [f'"{word}"' for word in key.kind.words] if isinstance(key.kind, Choice) else [text]
    # Of many words one is enough: all units of a length, all shapes.
    return " or ".join(f"`{word}`" for word in (words if len(words) <= 4 else words[:1])) if text else ""


def without(keys: Iterable[Key], *names: str) -> list[Key]:
    """The keys but those of these names."""
    return [key for key in keys if key.name not in names]


def key_references() -> dict[str, str]:
    """The blocks about keys of wire files by name."""
    doping = [key.name for key in device_keys.DOPING]
    tables = wire_keys.TABLES
    run = {name: tables[name] for name in ("carriers", "accuracy", "orientation", "potential")}
    gates = {
        "gates": tables["gate"],
        "surfaces": tables["surface"],
        "surroundings": tables["surroundings"],
        "voltages": tables["voltages"],
        "transport": tables["transport"],
    }
    shapes = "\n".join(f"| `{name}` | {sizes} |" for name, sizes in wire_keys.SHAPES.items())
    interaction = [key for key in run["carriers"] if key.name == "interaction"]
    run["carriers"] = tuple(without(run["carriers"], "interaction"))
    return {
        "keys of the file": key_table(wire_keys.TOP),
        "keys of the section": key_table([wire_keys.SHAPE[0], *without(wire_keys.SECTION_OWN, *doping)]),
        "keys of shapes": f"| shape | sizes |\n| --- | --- |\n{shapes}\n\n{key_table(wire_keys.SHAPE[1:])}",
        "keys of layers": key_table(without(wire_keys.LAYER, *doping)),
        "keys of patches": key_table(without(wire_keys.PATCH, *doping)),
        "keys of outlines": key_table(wire_keys.OUTLINE),
        "keys of meshes": key_table(wire_keys.MESH),
        "keys of materials": key_table(wire_keys.MATERIAL),
        "keys of valleys": key_table(wire_keys.VALLEY),
        "keys of the run": joined(run),
        "keys of gates and charge": joined(
            gates,
            key_table(device_keys.DOPING, ""),
            key_table(interaction, "carriers."),
        ),
    }


def joined(tables: Mapping[str, Iterable[Key]], *more: str) -> str:
    """One Markdown table of several ones, each key with the name of its table."""
    parts = [key_table(keys, f"{name}.") for name, keys in tables.items()]
    head, *_ = parts
    rows = [row for part in (*parts, *more) for row in part.split("\n")[2:]]
    return "\n".join([*head.split("\n")[:2], *rows])


def agreed_digits() -> str:
    """The tables of agreed digits, the one by value folded."""
    entries = load()
    head = f"<details>\n<summary>All {len(entries)} entries, with their values and sources</summary>"
    return "\n\n".join([summary(entries), head, table(entries), "</details>"])


def renewed(text: str) -> str:
    """The README's text with its generated blocks written anew.

    Raises
    ------
    ValueError
        where a block is not there exactly once.
    """
    blocks = {"agreed-digits": agreed_digits(), "commands": command_reference(), **key_references()}
    for name, content in blocks.items():
        pattern = re.compile(rf"(<!-- begin: {name} -->\n).*?(<!-- end: {name} -->)", re.DOTALL)
        if len(pattern.findall(text)) != 1:
            raise ValueError(f"README.md: the block '{name}' must be there once")
        text = pattern.sub(lambda match, content=content: f"{match[1]}\n{content}\n\n{match[2]}", text)
    return text


def main() -> int:
    """Writes or checks README.md; returns the exit code."""
    parser = argparse.ArgumentParser(description="Writes the generated parts of README.md anew.")
    parser.add_argument("--check", action="store_true", help="write nothing; exit code 1 where they are stale")
    arguments = parser.parse_args()
    path: Path = REPOSITORY / "README.md"
    text = path.read_text(encoding="utf-8")
    fresh = renewed(text)
    if arguments.check and fresh != text:
        print("README.md: its generated parts are stale; ./scripts/readme writes them anew", file=sys.stderr)
        return 1
    if not arguments.check:
        path.write_text(fresh, encoding="utf-8")
    return 0


if __name__ == "__main__":
    sys.exit(main())
