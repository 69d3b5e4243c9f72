"""The words under the bands of a spray calendar: legend, the answer, what to measure, limits and cautions."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle

from slab.pictures_style import LINE, SMALL, Ruler
from slab.spray_cautions import spray_cautions
from slab.spray_words import limit_sentences, statement
from slab.wording import Units

__all__ = ["HATCHES", "SHADES", "UNKNOWN_HATCH", "write_below"]

Document = Mapping[str, Any]
Lines = list[tuple[str, bool]]

SHADES = ("#ffffff", "#c0c4e1", "#858bbd", "#4c5292", "#191d46")
"""No member, some, about half, most, every member: one hue, each step at least 20 apart in CIE lightness."""
HATCHES = {
    "wind": "////",
    "hours": "....",
    "delta-t": "xxxx",
    "temperature": "++++",
    "humidity": "\\\\\\\\",
    "rain": "oooo",
}
UNKNOWN_HATCH = "----"
LEFT, MIDDLE, RIGHT = 0.02, 0.505, 0.985
SHARES = ("no member", "under a third, or in a window", "about half", "most", "every member")
MEANINGS = {
    "wind": "wind", "hours": "sun: hours from sunrise, to sunset", "delta-t": "ΔT: Delta-T", "temperature": "warm: temperature",
    "humidity": "dry: humidity", "rain": "rain",
}  # fmt: skip


def write_below(figure: Figure, document: Document, units: Units, ruler: Ruler, top: float) -> None:
    """Legend from ``top`` down, then two columns: the answer and what to measure; limits and cautions."""
    below = _legend(figure, top, ruler)
    width = MIDDLE - LEFT - 0.02
    left: Lines = [("what the model indicates", True)]
    left += _lines(statement(document, units), ruler, width)
    left += [("what to measure", True), *_lines(document["measure"][:4], ruler, width)]
    right: Lines = [("cautions", True)]
    right += _lines([f"{one['code']}  {one['text']}" for one in spray_cautions(document, units)], ruler, RIGHT - MIDDLE)
    right += [("limits", True), *_lines(limit_sentences(document), ruler, RIGHT - MIDDLE)]
    doubts = [f"{one['code']}: {one['text']}" for one in document["doubts"]]
    right += [("doubts", True), *_lines(doubts, ruler, RIGHT - MIDDLE)] if doubts else []
    rows = int((below - 0.012) / LINE)
    for x, lines in ((LEFT, left), (MIDDLE, right)):
        for n, (text, bold) in enumerate(_cut(lines, rows)):
            figure.text(x, below - n * LINE, text, fontsize=SMALL, va="top", fontweight="bold" if bold else "normal")


def _lines(items: list[str], ruler: Ruler, width: float) -> Lines:
    return [(line, False) for item in items for line in ruler.wrap(item, width, indent="   ")]


def _cut(lines: Lines, rows: int) -> Lines:
    if len(lines) <= rows:
        return lines
    return [*lines[: rows - 1], (f"and {len(lines) - rows + 1} more lines in the text output", True)]


def _legend(figure: Figure, top: float, ruler: Ruler) -> float:
    """Shades and hatches with words; returns the height below them."""
    x, y, box = LEFT, top - 0.018, (0.022, 0.014)
    figure.text(x, y + 0.003, "inversion in", fontsize=SMALL)
    x += ruler.width("inversion in", SMALL) + 0.008
    entries = [(shade, "", name) for shade, name in zip(SHADES, SHARES, strict=True)]
    entries += [("#ffffff", pattern, MEANINGS[code]) for code, pattern in HATCHES.items()]
    entries.append(("#ffffff", UNKNOWN_HATCH, "?: not known"))
    for colour, pattern, name in entries:
        wide = box[0] + 0.006 + ruler.width(name, SMALL) + 0.012
        if x + wide > RIGHT:
            x, y = LEFT, y - 0.020
        patch = Rectangle((x, y), *box, transform=figure.transFigure, facecolor=colour, edgecolor="#8d93c4", hatch=pattern,
                          linewidth=0.4)  # fmt: skip
        figure.add_artist(patch)
        figure.text(x + box[0] + 0.005, y + 0.003, name, fontsize=SMALL)
        x += wide
    figure.add_artist(Line2D([x + 0.004, x + 0.004], [y, y + box[1]], color="#000000", linewidth=2.2))
    figure.text(x + 0.010, y + 0.003, "now", fontsize=SMALL)
    x += 0.010 + ruler.width("now", SMALL) + 0.014
    for mark, name in (("^", "sunrise"), ("v", "sunset")):
        figure.add_artist(
            Line2D([x], [y + 0.5 * box[1]], marker=mark, color="#000000", markersize=5.5, linestyle="none")
        )
        figure.text(x + 0.008, y + 0.003, name, fontsize=SMALL)
        x += 0.008 + ruler.width(name, SMALL) + 0.014
    return y - 0.012
