"""What a notebook shows of a result: title, section, verdict, table and warnings, in the colours of the page."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape
from typing import Protocol

from wiresolve.physics.wording import by_temperature


class Told(Protocol):
    """A warning: what is the matter, and what to do."""

    @property
    def code(self) -> str: ...

    @property
    def text(self) -> str: ...

    @property
    def remedy(self) -> str: ...


def page(title: str, verdict: str, picture: str, table: str, warnings: Sequence[Told], foot: str) -> str:
    """One block of HTML; `picture` and `table` are HTML already, all other texts are escaped here."""
    lines = ['<div style="color:inherit;background:transparent;max-width:60em">']
    lines.append(f'<p style="font-size:115%;margin:.3em 0"><strong>{escape(title or "untitled")}</strong></p>')
    lines.append('<div style="display:flex;flex-wrap:wrap;gap:1.5em;align-items:flex-start">')
    sentences = "<br/>".join(escape(line) for line in by_temperature(verdict).splitlines())
    lines.append(f'<div>{picture}</div><p style="flex:1 1 22em;margin:.3em 0">{sentences}</p></div>')
    lines.append(table)
    for warning in warnings:
        # A bar and a word, not a colour alone: it is read on light and dark pages and without colours.
        lines.append('<p style="border-left:4px solid #D55E00;padding-left:.8em;margin:.6em 0">')
        lines.append(f"<strong>warning {escape(warning.code)}:</strong> {escape(warning.text)}<br/>")
        lines.append(f"<em>{escape(warning.remedy)}</em></p>")
    lines.append(f'<p style="opacity:.75;font-size:85%;margin:.6em 0">{escape(foot)}</p>')
    lines.append("</div>")
    return "\n".join(lines)


def table(heads: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """Numbers as an HTML table, which takes its colours from the page; texts are escaped here."""
    style = "text-align:right;padding:2px 10px;font-size:14px;white-space:nowrap"
    lines = ['<table style="border-collapse:collapse;background:transparent;color:inherit">', "<thead><tr>"]
    lines += [f'<th scope="col" style="{style}">{escape(head)}</th>' for head in heads]
    lines.append("</tr></thead><tbody>")
    for row in rows:
        cells = "".join(f'<td style="{style}">{escape(cell)}</td>' for cell in row)
        lines.append(f'<tr style="background:transparent;border-top:1px solid rgba(128,128,128,.35)">{cells}</tr>')
    return "\n".join([*lines, "</tbody></table>"])
