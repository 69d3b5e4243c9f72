"""One page of a day that a briefer can show: layers in time and height, profiles, temperature, fluxes, inputs and cautions."""

from __future__ import annotations

import io
import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from forcing.errors import DaylayerError
from slab.cautions import complete
from slab.export import write_atomically
from slab.inputs_words import known_words, real_warnings, telling_lines, untold_lines
from slab.narrative import day_sentences, headline
from slab.pictures_layers import day_layers, draw_layers, hours_from_start
from slab.pictures_strips import draw_fluxes, draw_profiles, draw_temperature, label_hours
from slab.pictures_style import LARGE, LINE, PAGE, PLAIN, SMALL, Placer, Ruler
from slab.pictures_wind import draw_wind
from slab.pictures_words import balloon_marks, balloon_title, write_words
from slab.wording import Clock, Units, units_named

__all__ = ["day", "save"]

Document = Mapping[str, Any]
Lines = list[tuple[str, bool]]

ENDINGS = ("png", "svg", "pdf")
LEFT, RIGHT = 0.058, 0.985  # page edges of what is drawn
WIDE = 0.635  # width of the panels that share the time axis
SIDE = 0.735  # left edge of the right column
HOURS, STRIP, WIND, RIBBON, GAP = 0.042, 0.08, 0.084, 0.072, 0.008  # heights of the hours, the strips, the gaps between
PROFILES_TO_TEXT = HOURS + 0.012 + RIBBON + WIND + STRIP + 3 * GAP - 0.062  # from the lower text up to the cautions
NO_STEP = "assumed, no step computed"
MOST_ROWS = 17  # of text in the lower columns
GUTTER = 1.64 / PAGE[0]  # least blank band left of the first hour, as a part of the page


def day(document: Document, *, units: str = "metric") -> Figure:
    """Draw the page of one result.

    Parameters
    ----------
    document : mapping
        The result document.
    units : {"metric", "us"}
        Heights in m or ft, temperatures in degrees C or F.

    Returns
    -------
    matplotlib.figure.Figure
        A4 landscape.
    """
    chosen = units_named(units)
    figure = Figure(figsize=PAGE, dpi=150)
    ruler, placer = Ruler(figure), Placer(figure)
    top = _header(figure, document, chosen, ruler)
    half = 0.5 * (WIDE - 0.02)
    left_column = _sentences(document, chosen, ruler, half)
    middle_column = _inputs(document, chosen, ruler, half)
    rows = max(len(left_column), min(len(middle_column), MOST_ROWS))
    right_column = _cautions(document, chosen, ruler)
    below = max(0.022 + rows * LINE, 0.012 + len(right_column) * LINE - PROFILES_TO_TEXT)
    left_over = _fill(middle_column, untold_lines(document, chosen), rows, half, ruler)
    right_column += _cut(
        _known(document, left_over, chosen, ruler), int((below + PROFILES_TO_TEXT - 0.012) / LINE) - len(right_column)
    )
    axes = _panels(figure, top, below)
    length = float(hours_from_start(document, document["series"]["time"][-1])) or 1.0
    gutter = length * (band := _band(document, chosen, ruler)) / (WIDE - band)
    layers, temperature, fluxes, theta, water, wind = axes
    for panel in (layers, temperature, wind, fluxes):
        panel.set_xlim(-gutter, length)
    shapes = day_layers(document)
    draw_layers(layers, shapes, document, chosen)
    write_words(layers, shapes, document, chosen, placer)
    draw_temperature(temperature, document, chosen, placer)
    draw_wind(wind, document, chosen, placer)
    draw_fluxes(fluxes, document, placer)
    _finish(figure, axes, document, chosen, length)
    theta.set_ylim(layers.get_ylim())
    water.set_ylim(layers.get_ylim())
    lines = draw_profiles(theta, water, document, chosen)
    if lines:
        theta.legend(
            handles=lines, loc="lower left", bbox_to_anchor=(-0.02, 1.005), fontsize=SMALL, frameon=False, ncols=2, borderaxespad=0.0,
            handlelength=2.6, columnspacing=1.2,
        )  # fmt: skip
    _column(figure, left_column, LEFT, below)
    _column(figure, _cut(middle_column, rows), LEFT + half + 0.02, below)
    _column(figure, right_column, SIDE, below + PROFILES_TO_TEXT)
    return figure


def save(figure: Figure, path: str | os.PathLike[str]) -> None:
    """Write a picture whole or not at all; the ending says how: png, svg or pdf.

    Raises
    ------
    DaylayerError
        For another ending, or a place that cannot be written.
    """
    ending = Path(path).suffix.lower().removeprefix(".")
    if ending not in ENDINGS:
        raise DaylayerError(
            f"picture ending {ending!r} is not known", place=str(path), remedy="end the name in .png, .svg or .pdf"
        )
    buffer = io.BytesIO()
    undated: dict[str, dict[str, Any]] = {"png": {}, "svg": {"Date": None}, "pdf": {"CreationDate": None}}
    with mpl.rc_context({"svg.hashsalt": "daylayer"}):
        figure.savefig(buffer, format=ending, metadata=undated[ending])
    write_atomically(path, buffer.getvalue())


def _header(figure: Figure, document: Document, units: Units, ruler: Ruler) -> float:
    """Title sentence and one line on where and when; returns the page height left under them."""
    y = 0.975
    for line in ruler.wrap(headline(document, units), RIGHT - 0.02, LARGE, bold=True):
        figure.text(0.015, y, line, fontsize=LARGE, fontweight="bold", va="top")
        y -= 1.25 * LARGE / 72.0 / PAGE[1]
    site, profile, clock = document["site"], document.get("profile") or {}, Clock.of(document)
    start = clock.local(clock.start)
    where = [
        site.get("name") or "site not named",
        *(
            []
            if site.get("latitude") is None
            else [f"{abs(site['latitude']):.2f}°{'N' if site['latitude'] >= 0 else 'S'}"]
        ),
        *(
            []
            if site.get("longitude") is None
            else [f"{abs(site['longitude']):.2f}°{'E' if site['longitude'] >= 0 else 'W'}"]
        ),
        *(
            []
            if site.get("elevation_m") is None
            else [f"{units.height_value(site['elevation_m']):.0f} {units.height_unit} above sea level"]
        ),
        f"from {start:%A} {start.day} {start:%B %Y} {clock.say(document['series']['time'][0])}",
        f"profile {profile.get('file') or 'not named'}",
    ]
    for line in ruler.wrap(", ".join(where), RIGHT - 0.02, PLAIN):
        figure.text(0.015, y, line, fontsize=PLAIN, va="top")
        y -= 1.25 * PLAIN / 72.0 / PAGE[1]
    return y


def _band(document: Document, units: Units, ruler: Ruler) -> float:
    """Width of the blank band left of the first hour: the words of the balloon fit into it."""
    words = [mark.words for mark in balloon_marks(document, units)] + [balloon_title(document)]
    words = [line for text in words for line in text.split("\n")]
    widest = max(ruler.width(text, SMALL) for text in words)
    return min(max(widest + 0.035, GUTTER), 0.45 * WIDE)


def _panels(figure: Figure, top: float, below: float) -> list[Axes]:
    """Layers, temperature, wind and fluxes under one another; two profiles beside the layers, on the same heights."""
    ribbon_y = below + HOURS + 0.012
    wind_y = ribbon_y + RIBBON + GAP
    strip_y = wind_y + WIND + GAP
    layers_y = strip_y + STRIP + GAP
    height = top - HOURS - 0.004 - layers_y
    narrow = 0.5 * (RIGHT - SIDE - 0.012)
    boxes = [
        (LEFT, layers_y, WIDE, height),
        (LEFT, strip_y, WIDE, STRIP),
        (LEFT, ribbon_y, WIDE, RIBBON),
        (SIDE, layers_y, narrow, height),
        (SIDE + narrow + 0.012, layers_y, narrow, height),
        (LEFT, wind_y, WIDE, WIND),
    ]
    return [figure.add_axes(box) for box in boxes]


def _finish(figure: Figure, axes: list[Axes], document: Document, units: Units, length: float) -> None:
    layers, temperature, fluxes, theta, water, wind = axes
    layers.set_ylabel(f"height above ground, {units.height_unit}", fontsize=PLAIN, labelpad=3)
    for panel in (layers, temperature, wind, fluxes):
        panel.tick_params(labelsize=SMALL, length=3, pad=2)
        for edge in ("top", "right"):
            panel.spines[edge].set_visible(False)
    for panel in (temperature, fluxes):
        panel.yaxis.set_major_locator(MaxNLocator(nbins=4, prune="both"))
    for panel in (temperature, wind):
        panel.xaxis.set_ticks([])
    label_hours(layers, document, length, local=True)
    label_hours(fluxes, document, length, local=False)
    for panel in (theta, water):
        panel.grid(axis="y", color="0.85", linewidth=0.5)
        panel.spines["top"].set_visible(False)
        panel.spines["right"].set_visible(False)
    water.tick_params(labelleft=False)


def _sentences(document: Document, units: Units, ruler: Ruler, width: float) -> Lines:
    lines: Lines = [("the day", True)]
    for sentence in day_sentences(document, units, brief=True):
        lines += [(line, False) for line in ruler.wrap(sentence, width, indent="   ")]
    return lines


def _inputs(document: Document, units: Units, ruler: Ruler, width: float) -> Lines:
    """Doubts and warnings first, then what was assumed with what a step in it changes."""
    lines: Lines = []
    said = [
        ("doubts", [units.restyle(item["text"]) for item in document.get("doubts") or []]),
        ("warnings", [units.restyle(text) for text in real_warnings(document)]),
        ("assumed; a step: change of greatest depth, highest temperature", telling_lines(document, units)),
    ]
    for heading, items in said:
        if items:
            lines.append((heading, True))
            lines += [(line, False) for item in items for line in ruler.wrap(item, width, indent="   ")]
    return lines


def _fill(lines: Lines, items: list[str], rows: int, width: float, ruler: Ruler) -> list[str]:
    """Add inputs without a step under a column while they fit; returns those that do not."""
    lines_of = [[(line, False) for line in ruler.wrap(item, width, indent="   ")] for item in items]
    if items and len(lines) + 1 + len(lines_of[0]) <= rows:
        lines.append((NO_STEP, True))
        while items and len(lines) + len(lines_of[0]) <= rows:
            lines += lines_of.pop(0)
            items = items[1:]
    return items


def _known(document: Document, untold: list[str], units: Units, ruler: Ruler) -> Lines:
    """Inputs given and observed, and those assumed without a step that found no room; they stand under the cautions."""
    lines: Lines = []
    said = [(source, [known_words(document, source, units)]) for source in ("given", "observed")]
    for heading, items in (*said, (NO_STEP, untold)):
        if any(items):
            lines.append((heading, True))
            lines += [(line, False) for item in items for line in ruler.wrap(item, RIGHT - SIDE, indent="   ")]
    return lines


def _cut(lines: Lines, rows: int) -> Lines:
    if len(lines) <= rows:
        return lines
    if rows < 1:
        return []
    return [*lines[: rows - 1], (f"and {len(lines) - rows + 1} more lines in the text output", True)]


def _column(figure: Figure, lines: Lines, x: float, top: float) -> None:
    for n, (text, bold) in enumerate(lines):
        figure.text(x, top - n * LINE, text, fontsize=SMALL, va="top", fontweight="bold" if bold else "normal")


def _cautions(document: Document, units: Units, ruler: Ruler) -> Lines:
    """Cautions, all of them; they stand under the profiles."""
    lines: Lines = [("cautions", True)]
    for item in complete(document, units):
        lines += [
            (line, False) for line in ruler.wrap(f"{item['code']}  {item['text']}", RIGHT - SIDE, indent="      ")
        ]
    return lines
