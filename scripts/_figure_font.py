"""Makes wiresolve/output/fonts/figures.ttf: the letters of DejaVu Sans that figures use, without tables for layout.

    python scripts/_figure_font.py

Each PDF embeds the letters that it shows. To find them in the whole of DejaVu Sans, with its rules for ligatures and
scripts, takes longer than to draw the figure; in this part of it, which has none, a hundredth of a second. Other
letters, in a title, come from DejaVu Sans itself.
"""

from __future__ import annotations

from pathlib import Path

import matplotlib
from fontTools import subset

FAMILY = "DejaVu Sans Figures"
TARGET = Path(__file__).resolve().parents[1] / "wiresolve" / "output" / "fonts" / "figures.ttf"
LETTERS = [*range(0x20, 0x7F), *range(0xA0, 0x100), *range(0x2080, 0x208A)]
LETTERS += map(ord, "–—‘’“”…⁰¹²³⁴⁵⁶⁷⁸⁹⁻←↑→↓−≈≠≤≥∞αβγδεκλμπρστφψωħΔ")
DROPPED = ["FFTM", "GDEF", "GPOS", "GSUB", "MATH", "gasp", "kern"]


def main() -> None:
    options = subset.Options(drop_tables=DROPPED, layout_features=[], glyph_names=False, name_IDs=["*"], hinting=True)
    source = Path(matplotlib.get_data_path(), "fonts", "ttf", "DejaVuSans.ttf")
    font = subset.load_font(str(source), options)
    chosen = subset.Subsetter(options)
    chosen.populate(unicodes=LETTERS)
    chosen.subset(font)
    names = font["name"]
    for number, text in {1: FAMILY, 2: "Regular", 4: FAMILY, 6: FAMILY.replace(" ", ""), 16: FAMILY}.items():
        names.setName(text, number, 3, 1, 0x409)
        names.setName(text, number, 1, 0, 0)
    names.names = [record for record in names.names if record.nameID in (0, 1, 2, 4, 5, 6, 13, 14)]
    font["OS/2"].usWeightClass = 400
    font.recalcTimestamp = False  # the same bytes in every run
    TARGET.parent.mkdir(exist_ok=True)
    font.save(TARGET)


if __name__ == "__main__":
    main()
