"""Parts that reports of results and of gate curves share: materials, what is not modelled, warnings, the input."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from wiresolve.describe.problem import Problem
from wiresolve.output import tables
from wiresolve.output.measured import Measured
from wiresolve.output.report_page import Part, figure, folded, listed, paragraph, picture, table, text
from wiresolve.output.report_section import drawing
from wiresolve.output.target import FIGURES, INPUTS

Plain = Mapping[str, Any]
_STANDING = {"memory": "from memory", "conflict": "sources differ", "given": "given in the wire file"}
_MODES_CELLS = 20
MOST_MEASURED = 800
"""Measured points that a page draws."""
_NOTHING = 1e-20
"""Smaller numbers are shown as none."""


@dataclass(frozen=True)
class Folder:
    """A result folder as read: `found` is its JSON file, `written` its wire file, `pictures` its figures by name,
    `measured` the points that were laid over its staircase."""

    path: Path
    found: Plain
    problem: Problem
    written: str
    pictures: Mapping[str, bytes]
    measured: Measured | None = None

    def shown(self, name: str, words: str) -> str:
        """A figure of the folder as HTML; nothing where it was not drawn."""
        return picture(self.pictures[name], words) if name in self.pictures else ""

    def measured_points(self, low: float, high: float) -> list[tuple[float, float]]:
        """The measured points in view, from `low` to `high`, as (x, G0) pairs; at most `MOST_MEASURED` of them."""
        if self.measured is None:
            return []
        x, conductance = self.measured.x.tolist(), self.measured.conductance_G0.tolist()
        seen = self._in_view(low, high)
        return [(x[seen[n]], conductance[seen[n]]) for n in thinned(len(seen), MOST_MEASURED)]

    def measured_words(self, low: float, high: float) -> str:
        """What a caption says of them; nothing where there are none."""
        if self.measured is None:
            return ""
        count, seen = len(self.measured.x), len(self._in_view(low, high))
        if not seen:
            return f"None of {count:,} measured points is in view."
        part = f", of which {MOST_MEASURED:,} are drawn" if seen > MOST_MEASURED else ""
        among = f"{seen:,}" if seen == count else f"{seen:,} of {count:,}"
        return f"Circles: {among} measured points in view{part}, as they are, contacts included."

    def _in_view(self, low: float, high: float) -> list[int]:
        assert self.measured is not None
        return [n for n, x in enumerate(self.measured.x.tolist()) if low <= x <= high]


def pictures_in(folder: Path) -> dict[str, bytes]:
    """The SVG figures of a folder by name."""
    return {path.stem: path.read_bytes() for path in sorted((folder / FIGURES).glob("*.svg"))}


def verdict(folder: Folder, words: str, tiles: str, more: str = "") -> Part:
    """The answer first: its first sentence large, the rest below, then numbers and what is held against them."""
    status = folder.found["status"]
    marked = f'<p class="mark">Marked: {text(status)}.</p>' if status != tables.DONE else ""
    if not folder.found["accuracy_met"] and "accuracy" not in str(status):
        marked += '<p class="mark">The accuracy asked for was missed: these are the best values found.</p>'
    count = len(folder.found["warnings"])
    plural = "" if count == 1 else "s"
    warned = f'<p class="aside"><a href="#warnings">{count} warning{plural}, with remedies</a></p>' if count else ""
    lines = tables.by_temperature(words).splitlines()
    first, rest = _sentence(lines[0]) if lines else ("", "")
    following = [rest, *lines[1:]]
    body = paragraph(first, "answer") + marked + tiles
    body += "".join(paragraph(line) for line in following if line) + more + warned
    return Part("verdict", "Verdict", body)


def section(folder: Folder) -> Part:
    """The section to scale, and how it lies in the crystal."""
    return Part("section", "Section", drawing(folder.problem) + paragraph(_orientation(folder.problem), "aside"))


def modes(folder: Folder, listed_count: int) -> list[Part]:
    """The figure of the modes, where it was drawn."""
    words = f"The envelope functions of the first {min(listed_count, _MODES_CELLS)} subbands over the section"
    shown = folder.shown("modes", words)
    if not shown:
        return []
    note = "Each on its own scale: the two colours are the two signs, and where it vanishes the section is plain."
    caption = f"<figcaption>{text(note)}</figcaption>"
    return [Part("modes", "Modes", f'<figure class="plate" tabindex="0">{shown}{caption}</figure>')]


def closing(folder: Folder, accuracy: str, command: str) -> list[Part]:
    """Materials, what is not modelled, warnings, accuracy, and the input, in this order."""
    return [
        Part("materials", "Materials and their sources", materials(folder.found["materials"])),
        Part("not-modelled", "Not modelled", listed(_sentences(folder.found["not_modelled"]), "plain")),
        Part("warnings", "Warnings and remedies", warnings(folder.found["warnings"])),
        Part("accuracy", "Accuracy and mesh", accuracy),
        Part("input", "Input, and how to repeat it", repeated(folder, command)),
    ]


def materials(values: Sequence[Plain]) -> str:
    """A table for each material, its sources numbered below all."""
    told, numbers = _sources(list(dict.fromkeys(str(v["source"]) for v in values)))
    body = ""
    for name in dict.fromkeys(v["name"] for v in values):
        rows = [_value_row(v, numbers) for v in values if v["name"] == name]
        unsure = sum(v["provenance"] in ("memory", "conflict") for v in values if v["name"] == name)
        note = f", {unsure} of them from memory or told differently by sources" if unsure else ""
        heads = ("quantity", "value", "unit", "literature", "at", "standing", "source")
        # Long lists are folded; the summary tells what is in them.
        body += folded(
            f"{name}: {len(rows)} value{'' if len(rows) == 1 else 's'}{note}",
            table(name, heads, rows, left=(0, 2, 3, 5, 6)),
        )
    return f'{body}<h3>Sources</h3><ol class="sources">{told}</ol>' if values else paragraph("None of a table.")


def _sources(sources: Sequence[str]) -> tuple[str, dict[str, str]]:
    """Items of the list, what one publication says of several values below it by letters; and the number of each."""
    publications: dict[str, list[str]] = {}
    for source in sources:
        publications.setdefault(source.partition("; ")[0], []).append(source)
    items, numbers = "", {}
    for place, (publication, own) in enumerate(publications.items(), 1):
        if len(own) == 1:
            numbers[own[0]] = str(place)
            items += f"<li>{text(own[0])}</li>"
            continue
        remarks = sorted(own, key=len)
        numbers |= {source: f"{place}{_letters(n)}" for n, source in enumerate(remarks)}
        below = (text(source.partition("; ")[2] or "the value as it stands there") for source in remarks)
        lines = "".join(f"<li>{words}</li>" for words in below)
        items += f'<li>{text(publication)}<ol type="a">{lines}</ol></li>'
    return items, numbers


def _letters(number: int) -> str:
    """a to z, then aa, ab, ..., as browsers count."""
    return (_letters(number // 26 - 1) if number >= 26 else "") + chr(ord("a") + number % 26)


def _value_row(value: Plain, numbers: Mapping[str, str]) -> list[str]:
    low, high, kelvin = value["low"], value["high"], value["temperature_K"]
    between = "" if low is None or high is None or low == high else f"{low:.6g} to {high:.6g}"
    return [
        str(value["quantity"]).replace("_", " "),
        f"{value['value']:.6g}",
        str(value["unit"]),
        between,
        "" if kelvin is None else f"{kelvin:g} K",
        _STANDING.get(value["provenance"], str(value["provenance"])),
        f"[{numbers[str(value['source'])]}]",
    ]


def warnings(found: Sequence[Plain]) -> str:
    """Each with its remedy."""
    if not found:
        return paragraph("None.")
    rows = "".join(
        f"<li><h3><code>{text(w['code'])}</code></h3><p>{text(_capital(w['text']))}.</p>"
        f'<p class="remedy"><strong>Remedy:</strong> {text(w["remedy"])}.</p></li>'
        for w in found
    )
    return f'<ul class="cards">{rows}</ul>'


def accuracy(folder: Folder, largest_eV: float, rows: Sequence[tuple[str, str]]) -> str:
    """What was asked and reached, the mesh, the versions."""
    asked, met = folder.problem.accuracy.energy_eV, folder.found["accuracy_met"]
    reached = small_energy(largest_eV) if largest_eV else "below rounding"
    top = [("Accuracy asked for", f"{1e3 * asked:g} meV for each energy")]
    top.append(("Largest error bar", f"{reached}: {'within' if met else 'NOT within'} it"))
    versions = ", ".join(f"{name} {version}" for name, version in folder.found["versions"].items())
    return pairs([*top, *rows, ("Versions", versions)])


def pairs(rows: Iterable[tuple[str, str]]) -> str:
    """Labels and texts beside each other."""
    return f'<dl class="pairs">{"".join(f"<dt>{text(a)}</dt><dd>{text(b)}</dd>" for a, b in rows)}</dl>'


def repeated(folder: Folder, command: str) -> str:
    """The exact input, the line that reproduces the result, and the digest by which to know it."""
    files = [path for path, _ in folder.problem.files]
    beside = f" with the folder {INPUTS} of the result beside it" if files else ""
    wirefile = text(folder.written.strip())
    digest = f"Input digest: {folder.found['input_digest']}. A result of the same input shows the same."
    return (
        paragraph(f"Save this as input.toml{beside}, then type:")
        + f'<pre class="line"><code>{text(command)}</code></pre>'
        + f'<pre tabindex="0" role="region" aria-label="The wire file"><code>{wirefile}</code></pre>'
        + paragraph(digest, "aside")
    )


def facts(folder: Folder, extra: Iterable[str]) -> tuple[str, ...]:
    """What stands under the title."""
    version = folder.found["versions"].get("wiresolve", "")
    return (*extra, f"input {folder.found['input_digest'][:12]}", f"wiresolve {version}")


def through(problem: Problem) -> str:
    """What [transport] says, in words; empty where the wire is ballistic."""
    given = problem.transport
    if given is None or given.is_open:
        return ""
    said = []
    if given.transmission is not None:
        said.append(f"transmission {', '.join(f'{t:g}' for t in given.transmission)}")
    if given.mean_free_path_nm is not None:
        said.append(f"a mean free path of {given.mean_free_path_nm:g} nm on {given.length_nm:g} nm")
    if given.saddle_curvature_eV is not None:
        said.append(f"a saddle of {1e3 * given.saddle_curvature_eV:g} meV")
    if given.contact_resistance_ohm:
        said.append(f"{given.contact_resistance_ohm:g} ohm of contacts in series")
    return f"With {', '.join(said)}."


def occupation(caption: str) -> str:
    """The figure of carriers by level, with a table that the script keeps up to date."""
    heads = ("level", "carriers (1/nm)", "share (%)")
    return figure("occupation", caption, table("Carriers in each level", heads, (), left=(), name="numbers-occupation"))


def _orientation(problem: Problem) -> str:
    given = problem.orientation
    if given is None:
        return ""
    axis, up = (_direction(given.axis), _direction(given.up))
    return f"You look along the wire: its axis is the crystal's [{axis}], upwards is [{up}]."


def _direction(numbers: Iterable[float]) -> str:
    """Crystal direction: "110" or "1 -1 0"."""
    parts = [f"{n:g}" for n in numbers]
    return ("" if all(len(part) == 1 for part in parts) else " ").join(parts)


def _sentence(words: str) -> tuple[str, str]:
    """The first sentence, and the rest."""
    first, dot, rest = words.partition(". ")
    return (first + dot.strip(), rest.strip()) if dot else (words, "")


def _sentences(words: Iterable[str]) -> list[str]:
    return [_capital(w) + ("" if w.endswith(".") else ".") for w in words]


def _capital(words: str) -> str:
    """The first letter raised, unless the first word is a formula or a name."""
    first = re.match(r"[a-z]+\b", words)
    return words[:1].upper() + words[1:] if first and len(first[0]) > 1 else words


def small_energy(value_eV: float) -> str:
    """A small energy to two digits, rounded up, in the unit that needs no power of ten."""
    unit, name = next(((u, n) for u, n in ((1e-3, "meV"), (1e-6, "µeV")) if value_eV >= u / 1000), (1e-9, "neV"))
    return f"{tables.small(value_eV / unit)} {name}"


def short(value: float, bar: float, unit: str) -> tuple[str, str]:
    """A value to its bar, but to no more than four digits or hundredths, and the bar for the line below."""
    whole, plus, half = tables.with_bar(value, bar).partition(" ± ")
    if not plus:
        return f"{tables.significant(value, 4)} {unit}", ""
    size = math.floor(math.log10(abs(value))) if value else 0
    decimals = min(len(whole.partition(".")[2]), max(2, 3 - size))
    return f"{value:.{decimals}f} {unit}", f"± {half} {unit}, "


def thinned(count: int, most: int) -> list[int]:
    """At most so many places out of `count`, evenly, both ends with them."""
    if count <= most:
        return list(range(count))
    return sorted({round(n * (count - 1) / (most - 1)) for n in range(most)})


def number(value: float | None, digits: int = 4) -> str:
    """A number as tables show it; nothing for none."""
    if value is None or not math.isfinite(value):
        return ""
    if abs(value) < _NOTHING:
        return "0"
    if value != 0 and not 1e-4 <= abs(value) < 1e7:
        return f"{value:.{digits - 1}e}"
    return tables.significant(value, digits)
