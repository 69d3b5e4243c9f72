"""Colours, lines and text fitting shared by the pictures.

Every pair of layer colours is at least 20 apart in CIE lightness (of 100), so that layers part in grey too; lines differ in
dash as well as in colour.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from itertools import pairwise
from typing import Any

from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from matplotlib.patheffects import withStroke
from matplotlib.text import Text
from matplotlib.transforms import Bbox

PAGE = (11.69, 8.27)  # A4 landscape, inches
SMALL, PLAIN, NAME, LARGE = 7.0, 8.0, 8.5, 13.0  # points; SMALL is the smallest text on a page
LINE = 1.22 * SMALL / 72.0 / PAGE[1]  # height of one line of small text as a part of the page

LAYERS = {
    "cloud": "#ffffff",
    "free air": "#b4c8d2",
    "mixed layer": "#c2803a",
    "residual layer": "#6f4f6b",
    "stable layer": "#1b2a4a",
}
FLUXES = {"soil": "#cdc193", "evaporation": "#3c83b0", "sensible heat": "#5a2812"}
INK = {
    "cloud": "black",
    "free air": "black",
    "mixed layer": "black",
    "residual layer": "white",
    "stable layer": "white",
}


def lightness(colour: str) -> float:
    """CIE lightness L* (0 black to 100 white) of an sRGB colour such as ``#b4c8d2`` (IEC 61966-2-1; CIE 15)."""
    red, green, blue = (int(colour[n : n + 2], 16) / 255.0 for n in (1, 3, 5))

    def linear(part: float) -> float:
        return part / 12.92 if part <= 0.04045 else float(((part + 0.055) / 1.055) ** 2.4)

    luminance = 0.2126 * linear(red) + 0.7152 * linear(green) + 0.0722 * linear(blue)
    return float(116.0 * luminance ** (1.0 / 3.0) - 16.0) if luminance > 0.008856 else 903.3 * luminance


def halo(colour: str, width: float = 2.0) -> list[Any]:
    """Outline that keeps words readable where they cross an edge."""
    return [withStroke(linewidth=width, foreground=colour)]


def canvas_of(figure: Figure) -> FigureCanvasAgg:
    """The figure's own Agg canvas."""
    canvas = figure.canvas
    return canvas if isinstance(canvas, FigureCanvasAgg) else FigureCanvasAgg(figure)


class Ruler:
    """Measures and breaks text into lines of a given width."""

    def __init__(self, figure: Figure) -> None:
        self._renderer: Any = canvas_of(figure).get_renderer()  # type: ignore[no-untyped-call]
        self._page = figure.get_size_inches()[0] * figure.dpi
        self._known: dict[tuple[str, float, bool], float] = {}

    def width(self, text: str, size: float, *, bold: bool = False) -> float:
        """Width of a text as a part of the page width."""
        key = (text, size, bold)
        if key not in self._known:
            font = FontProperties(size=size, weight="bold" if bold else "normal")
            self._known[key] = self._renderer.get_text_width_height_descent(text, font, False)[0] / self._page
        return self._known[key]

    def wrap(self, text: str, width: float, size: float = SMALL, *, indent: str = "", bold: bool = False) -> list[str]:
        """Lines of a text no wider than a part of the page width; a word longer than a line is cut."""
        space = self.width("a a", size, bold=bold) - self.width("aa", size, bold=bold)
        lines: list[str] = []
        line, used = "", 0.0
        for word in self._pieces(text.split(), width * 0.9, size, bold):
            long = self.width(word, size, bold=bold)
            if line.strip() and used + space + long > width:
                lines.append(line)
                line, used = indent, self.width(indent, size, bold=bold) if indent else 0.0
            gap = bool(line.strip())
            line = f"{line} {word}" if gap else line + word
            used += long + (space if gap else 0.0)
        return [*lines, line] if line.strip() else lines

    def _pieces(self, words: Iterable[str], width: float, size: float, bold: bool) -> Iterable[str]:
        for word in words:
            rest = word
            while self.width(rest, size, bold=bold) > width and len(rest) > 1:
                keep = max(1, int(len(rest) * width / self.width(rest, size, bold=bold)))
                yield rest[:keep]
                rest = rest[keep:]
            yield rest


class Placer:
    """Puts words where they cover no other words."""

    def __init__(self, figure: Figure) -> None:
        self._renderer: Any = canvas_of(figure).get_renderer()  # type: ignore[no-untyped-call]
        self._taken: list[Bbox] = []

    def reserve(self, text: Text) -> None:
        """Keep the place of words already drawn."""
        self._taken.append(text.get_window_extent(self._renderer))

    def reserve_box(self, axes: Axes, left: float, right: float) -> None:
        """Keep a part of the axes between two places along it [data coordinates] free."""
        frame = axes.get_window_extent(self._renderer)
        x0, x1 = (float(axes.transData.transform((x, 0.0))[0]) for x in (left, right))
        self._taken.append(Bbox.from_extents(x0, frame.y0, x1, frame.y1))

    def reserve_clear(self, axes: Axes, texts: Sequence[Text]) -> bool:
        """Keep the places of words already drawn if all are inside the axes and cover no others; else keep none."""
        frame = axes.get_window_extent(self._renderer)
        boxes = [text.get_window_extent(self._renderer) for text in texts]
        good = all(_inside(box, frame) and not any(_overlap(box, other) for other in self._taken) for box in boxes)
        if good:
            self._taken += boxes
        return good

    def reserve_line(self, axes: Axes, x: Iterable[float], y: Iterable[float], *, half: float = 2.5) -> None:
        """Keep a narrow band along a line [data coordinates], so that words stand beside it."""
        points = axes.transData.transform([(a, b) for a, b in zip(x, y, strict=True)])
        for (x0, y0), (x1, y1) in pairwise(points):
            if all(math.isfinite(value) for value in (x0, y0, x1, y1)):
                across, up = sorted((x0, x1)), sorted((y0, y1))
                self._taken.append(Bbox.from_extents(across[0] - half, up[0] - half, across[1] + half, up[1] + half))

    def place(self, axes: Axes, words: str, places: Sequence[tuple[float, float]], **style: Any) -> Text | None:
        """Draw words at the first place (data coordinates) inside the axes where they fit; None when there is none."""
        if not places:
            return None
        text = axes.text(*places[0], words, **style)
        frame, first = axes.get_window_extent(self._renderer), text.get_window_extent(self._renderer)
        points = axes.transData.transform(list(places))
        for place, shift in zip(places, points - points[0], strict=True):
            box = first.translated(*shift)
            if _inside(box, frame) and not any(_overlap(box, other) for other in self._taken):
                text.set_position(place)
                self._taken.append(box)
                return text
        text.remove()
        return None


def _inside(box: Bbox, frame: Bbox, margin: float = 1.0) -> bool:
    across = box.x0 >= frame.x0 + margin and box.x1 <= frame.x1 - margin
    return bool(across and box.y0 >= frame.y0 + margin and box.y1 <= frame.y1 - margin)


def _overlap(a: Bbox, b: Bbox, margin: float = 1.5) -> bool:
    return bool(a.x0 < b.x1 + margin and b.x0 < a.x1 + margin and a.y0 < b.y1 + margin and b.y0 < a.y1 + margin)


def spread(values: Sequence[float], gap: float, low: float, high: float) -> list[float]:
    """Move values apart to a least gap inside bounds, keeping their order and as near as can be to where they were.

    Values that cannot all fit keep the order with an even smaller gap.
    """
    order = sorted(range(len(values)), key=lambda n: values[n])
    if not order:
        return []
    gap = min(gap, (high - low) / max(len(order) - 1, 1))
    placed: list[float] = []
    for n in order:
        placed.append(max(values[n], placed[-1] + gap if placed else low))
    ceiling = high
    for n in reversed(range(len(placed))):
        placed[n] = min(placed[n], ceiling)
        ceiling = placed[n] - gap
    out = [0.0] * len(values)
    for position, n in zip(placed, order, strict=True):
        out[n] = position
    return out
