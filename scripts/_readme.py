"""Writes the generated blocks of README.md: the table of agreed digits and the commands.

    python scripts/_readme.py            writes them anew
    python scripts/_readme.py --check    exit code 1 where README.md differs from what would be written

A block stands between `<!-- begin: NAME -->` and `<!-- end: NAME -->`. Blocks of other names are left alone.
"""

from __future__ import annotations

import argparse
import re
import sys
from pathlib import Path

import click

import wiresolve.cli
from agreed_digits import REPOSITORY, load, summary, table


def commands() -> dict[str, click.Command]:
    """The real commands of the command line by name."""
    groups = [thing for thing in vars(wiresolve.cli).values() if isinstance(thing, click.Group)]
    return dict(groups[0].commands)


def argument_text(parameter: click.Parameter) -> str:
    """How an argument or an option is written: `FILE`, `--out DIR`, `--json`."""
    if isinstance(parameter, click.Argument):
        text = parameter.metavar or (parameter.name or "").upper()
        return text if parameter.required else f"[{text}]"
    name = ", ".join(parameter.opts)
    takes_value = isinstance(parameter, click.Option) and not parameter.is_flag and not parameter.count
    return f"{name} {parameter.metavar or parameter.type.name.upper()}" if takes_value else name


def command_reference() -> str:
    """One paragraph and one table of options for each command, in Markdown."""
    parts = []
    for name, command in commands().items():
        arguments = [p for p in command.params if isinstance(p, click.Argument)]
        options = [p for p in command.params if isinstance(p, click.Option) and not p.hidden]
        parts.append(f"**`{' '.join(['wiresolve', name, *map(argument_text, arguments)])}`**")
        parts.append(" ".join((command.help or "").split("\f")[0].split()))
        if options:
            rows = [f"| `{argument_text(p)}` | {' '.join((p.help or '').split())} |" for p in options]
            parts.append("\n".join(["| option | what it does |", "| --- | --- |", *rows]))
    return "\n\n".join(parts)


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
    blocks = {"agreed-digits": agreed_digits(), "commands": command_reference()}
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
