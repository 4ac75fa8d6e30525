"""The page of a report: text made safe, tables, figures, and all of it in one file that asks for nothing else."""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import cache
from html import escape
from importlib import resources
from math import ceil, floor, log10
from typing import Any

_FILES = "wiresolve.output"
_FOLDER = "report_files"
_MANY = 9
"""Columns beyond which a table is set smaller in print."""
_LIBRARIES = ("d3.min.js", "plot.min.js")
_OWN = ("sums.js", "figures.js", "sliders.js", "gate_curve.js", "start.js")
"""Parts of one script, which see each other."""


@dataclass(frozen=True)
class Part:
    """A part of the page: its name in links, its heading, and what stands below, as HTML."""

    name: str
    heading: str
    body: str


@dataclass(frozen=True)
class Page:
    """What a page holds: texts are plain, the parts' bodies HTML; `data` is for the script."""

    title: str
    kind: str
    facts: tuple[str, ...]
    parts: tuple[Part, ...]
    data: dict[str, Any]


def text(value: object) -> str:
    """A text as HTML shows it, within elements and in quoted attributes."""
    return escape(str(value), quote=True)


def paragraph(words: str, kind: str = "") -> str:
    """A paragraph of plain text; nothing for none."""
    return f"<p{_class(kind)}>{text(words)}</p>" if words else ""


def listed(items: Iterable[str], kind: str = "") -> str:
    """A list of plain texts; nothing for none."""
    rows = "".join(f"<li>{text(item)}</li>" for item in items)
    return f"<ul{_class(kind)}>{rows}</ul>" if rows else ""


def table(
    caption: str, heads: Sequence[str], rows: Iterable[Sequence[str]], left: Iterable[int] = (0,), name: str = ""
) -> str:
    """A table of plain texts, the first cell of a row its heading; columns in `left` flush left. It can be scrolled."""
    flush = set(left)
    where = [' class="left"' if n in flush else "" for n in range(len(heads))]
    top = "".join(f'<th scope="col"{w}>{text(h)}</th>' for h, w in zip(heads, where, strict=True))
    body = ""
    for row in rows:
        first, *rest = [text(value) for value in row]
        cells = "".join(f"<td{w}>{value}</td>" for value, w in zip(rest, where[1:], strict=True))
        body += f'<tr><th scope="row"{where[0]}>{first}</th>{cells}</tr>'
    own = (f' id="{text(name)}"' if name else "") + _class("wide" if len(heads) > _MANY else "")
    return (
        f'<div class="scroll" tabindex="0" role="region" aria-label="{text(caption)}"><table{own}>'
        f"<caption><span>{text(caption)}</span></caption><thead><tr>{top}</tr></thead><tbody>{body}</tbody></table></div>"
    )


def folded(words: str, body: str) -> str:
    """HTML behind a line that opens it."""
    return f"<details><summary>{text(words)}</summary>{body}</details>" if body else ""


def figure(name: str, caption: str, numbers: str = "", fallback: str = "") -> str:
    """Where the script draws; `fallback` is a picture for readers without scripts, `numbers` a table behind a line."""
    picture = f"<noscript>{fallback}</noscript>" if fallback else ""
    return (
        f'<figure><div class="canvas" id="draw-{text(name)}">{picture}</div>'
        f"<figcaption>{text(caption)}</figcaption>{folded('Numbers of this figure', numbers)}</figure>"
    )


def picture(svg: bytes, words: str) -> str:
    """A drawing kept apart from the page, so that nothing in it can act on the page."""
    encoded = base64.b64encode(svg).decode("ascii")
    return f'<img class="picture" alt="{text(words)}" src="data:image/svg+xml;base64,{encoded}">'


def dial(name: str, label: str, unit: str, low: float, high: float, presets: Sequence[tuple[str, float]]) -> str:
    """A slider, a number field that holds the same value, and buttons that set it."""
    buttons = "".join(
        f'<button type="button" data-{text(name)}="{value!r}">{text(words)}</button>' for words, value in presets
    )
    # Rounded outwards: a browser shows the ends where a number lies beyond them.
    step = 10.0 ** (floor(log10(high - low)) - 4) if high > low else 1.0
    ends = f'min="{floor(low / step) * step:.10g}" max="{ceil(high / step) * step:.10g}"'
    return (
        f'<div class="dial"><label for="{name}-slider">{text(label)}</label>'
        f'<input type="range" id="{name}-slider" min="0" max="1000" step="1">'
        f'<span class="exact"><input type="number" id="{name}-number" {ends} step="any"'
        f' aria-label="{text(label)}, {text(unit)}">'
        f' <span aria-hidden="true">{text(unit)}</span></span>'
        f'<div class="presets">{buttons}</div></div>'
    )


def readings(rows: Sequence[tuple[str, str]]) -> str:
    """Numbers that follow the sliders: element names and labels."""
    cells = "".join(f'<div><dt>{text(label)}</dt><dd id="says-{text(name)}"></dd></div>' for name, label in rows)
    heard = '<p class="heard" id="announced" role="status" aria-live="polite"></p>'
    without = "<noscript><p>Sliders need JavaScript; figures and tables are there without it.</p></noscript>"
    return f'{without}<dl class="tiles">{cells}</dl>{heard}<p id="printed" class="printed"></p>'


def tiles(rows: Iterable[tuple[str, str, str]]) -> str:
    """Numbers that stand out: label, value and a remark of each."""
    cells = (f"<div><dt>{text(a)}</dt><dd>{text(b)}<small>{text(c)}</small></dd></div>" for a, b, c in rows)
    return f'<dl class="tiles">{"".join(cells)}</dl>'


def render(page: Page) -> str:
    """The whole file. Its policy forbids every request, and every script but the three that it brings along."""
    scripts = [*map(_file, _LIBRARIES), _own_script()]
    allowed = " ".join(f"'sha256-{_digest(script)}'" for script in scripts)
    policy = (
        f"default-src 'none'; img-src data:; style-src 'unsafe-inline'; script-src {allowed};"
        " base-uri 'none'; form-action 'none'"
    )
    links = "".join(f'<li><a href="#{text(p.name)}">{text(p.heading)}</a></li>' for p in page.parts)
    parts = "".join(
        f'<section id="{text(p.name)}" aria-labelledby="{text(p.name)}-heading">'
        f'<h2 id="{text(p.name)}-heading">{text(p.heading)}</h2>{p.body}</section>'
        for p in page.parts
    )
    facts = "".join(f"<li>{text(fact)}</li>" for fact in page.facts)
    code = "".join(f"<script>{script}</script>" for script in scripts)
    title = page.title or "Untitled wire"
    return (
        '<!doctype html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{policy}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        '<meta name="color-scheme" content="light dark">\n'
        f"<title>{text(title)}: {text(page.kind)}</title>\n<style>\n{_file('report.css')}</style>\n</head>\n<body>\n"
        f'<a class="skip" href="#main">Skip to the {text(page.parts[0].heading.lower())}</a>\n'
        f'<header class="head"><p class="kind">{text(page.kind)}</p><h1>{text(title)}</h1>'
        f'<ul class="facts">{facts}</ul></header>\n'
        f'<div class="columns"><nav aria-label="Parts of this report"><ol>{links}</ol></nav>\n'
        f'<main id="main" tabindex="-1">\n{parts}\n</main></div>\n'
        '<footer class="foot"><p>Written by wiresolve. Charts by Observable Plot and D3 (ISC licence; Copyright'
        " Observable, Inc., and Mike Bostock). This page holds all that it shows and asks no network.</p></footer>\n"
        f'<script type="application/json" id="report-data">{data_text(page.data)}</script>\n{code}\n</body>\n</html>\n'
    )


def data_text(data: Any) -> str:
    """JSON that can stand inside a script element: no text in it ends the element or opens a comment."""
    plain = json.dumps(data, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    return plain.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")


@cache
def _file(name: str) -> str:
    # Read as bytes: a digest is of these very characters.
    return (resources.files(_FILES) / _FOLDER / name).read_bytes().decode("utf-8").strip() + "\n"


@cache
def _own_script() -> str:
    return '"use strict";\n(() => {\n' + "\n".join(map(_file, _OWN)) + "})();\n"


@cache
def _digest(script: str) -> str:
    return base64.b64encode(hashlib.sha256(script.encode("utf-8")).digest()).decode("ascii")


def _class(kind: str) -> str:
    return f' class="{text(kind)}"' if kind else ""
