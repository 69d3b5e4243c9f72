"""One page of a profile: potential temperature and mixing ratio against height, tops by definition as marks with words."""

from __future__ import annotations

from pathlib import Path
from typing import Any, Final

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from forcing.air import VIRTUAL, ZERO_CELSIUS
from forcing.units import STYLES, Style, Unit
from forcing.units import SUFFIXES as UNITS
from slab.pictures_style import LARGE, LINE, PAGE, PLAIN, SMALL, Ruler, halo, spread
from slab.products.sounding import cautions, restyle, sentence

Array = NDArray[np.float64]
Document = dict[str, Any]

THETA: Final = "#1b2a4a"
WATER: Final = "#3c83b0"
MARK: Final = "#8a3b12"
SHADE: Final = "#cfd6db"
LEFT, RIGHT = 0.065, 0.985
WORDS: Final = 0.69
"""Left edge of the words beside the panels, as a part of the page."""
FLOOR: Final = 1500.0
"""m: the panels reach at least this high, where the profile does."""
HEADROOM: Final = 1.12


def _array(values: list[float | None]) -> Array:
    return np.array([np.nan if value is None else value for value in values], dtype=np.float64)


def _ceiling(document: Document) -> float:
    """Height [m above ground] up to which the panels are drawn."""
    heights = [top["height_m"] for top in document["tops"]] + [document["cloud"]["convective_level_m"]]
    wanted = max([FLOOR, *[HEADROOM * height for height in heights if height is not None]])
    return float(min(wanted, document["profile"]["top_m"]))


class _Data:
    """The levels drawn, up to the ceiling, which is put in as a level of its own."""

    def __init__(self, document: Document, length: Unit) -> None:
        levels = document["levels"]
        height = _array(levels["height_m"])
        self.ceiling = _ceiling(document)
        self.metres = np.append(height[height < self.ceiling], self.ceiling)
        self.height = self.metres / length.factor
        self.theta = self._at(height, levels["theta_K"])
        self.ratio = self._at(height, levels["mixing_ratio_g_kg"])
        humidity = np.nan_to_num(self.ratio) / (1000.0 + np.nan_to_num(self.ratio))
        self.virtual = self.theta * (1.0 + VIRTUAL * humidity)
        speed, direction = _array(levels["wind_m_s"]), np.radians(_array(levels["wind_from_deg"]))
        self.u = self._at(height, list(-speed * np.sin(direction)))
        self.v = self._at(height, list(-speed * np.cos(direction)))

    def _at(self, height: Array, values: list[float | None]) -> Array:
        return np.asarray(np.interp(self.metres, height, _array(values)), dtype=np.float64)

    def read(self, values: Array, metres: float) -> float:
        """A drawn curve's value at a height [m]."""
        return float(np.interp(metres, self.metres, values))


def page(document: Document, *, units: str = "metric") -> Figure:
    """Draw the description of a profile on one page, A4 landscape.

    Parameters
    ----------
    document : dict
        What `slab.products.sounding.describe` gives.
    units : {"metric", "us"}
        Units of heights, wind and words.
    """
    style = STYLES[units]
    length = UNITS[style.length]
    figure = Figure(figsize=PAGE, dpi=150)
    ruler = Ruler(figure)
    top = _header(figure, document, style, ruler)
    foot = _footer(figure, document, style, ruler)
    data = _Data(document, length)
    bottom, height = foot + 0.075, top - foot - 0.105
    theta = figure.add_axes((LEFT, bottom, 0.27, height))
    water = figure.add_axes((LEFT + 0.285, bottom, 0.17, height), sharey=theta)
    wind = figure.add_axes((LEFT + 0.47, bottom, 0.115, height), sharey=theta)
    theta.set_ylim(0.0, data.ceiling / length.factor)
    _theta(theta, data, document, length, style)
    _water(water, data, document, style)
    _wind(wind, data, document, style)
    for axes in (theta, water, wind):
        _shade(axes, document, length)
        axes.tick_params(labelsize=SMALL, labelleft=axes is theta, length=2.5)
        axes.grid(visible=True, axis="y", color="#e3e3e3", linewidth=0.6)
        axes.set_axisbelow(True)
        for side in ("top", "right"):
            axes.spines[side].set_visible(False)
    theta.set_ylabel(f"height above ground, {style.length}", fontsize=PLAIN)
    _marks(figure, (theta, water, wind), data, document, style, ruler)
    return figure


def draw(document: Document, path: Path, *, units: str = "metric") -> None:
    """Write the page to a file; its ending (png, svg, pdf) says how."""
    undated: dict[str, dict[str, Any]] = {".png": {}, ".svg": {"Date": None}, ".pdf": {"CreationDate": None}}
    ending = path.suffix.lower()
    with mpl.rc_context({"svg.hashsalt": "daylayer"}):
        page(document, units=units).savefig(path, format=ending.removeprefix("."), metadata=undated.get(ending, {}))


def _header(figure: Figure, document: Document, style: Style, ruler: Ruler) -> float:
    y = 0.968
    for line in ruler.wrap(sentence(document, style), RIGHT - LEFT, LARGE, bold=True):
        figure.text(LEFT - 0.045, y, line, fontsize=LARGE, fontweight="bold", va="top")
        y -= 1.3 * LARGE / 72.0 / PAGE[1]
    about = document["profile"]
    where = f"{about['file'] or 'computed'}, ground at {style.height(about['elevation_m'])} above sea level"
    figure.text(LEFT - 0.045, y, where, fontsize=PLAIN, va="top", color="#444444")
    return y - 0.03


def _answers(document: Document, style: Style) -> list[str]:
    cloud, heat, inversion = document["cloud"], document["heat"], document["inversion"]
    lines = []
    if inversion is not None:
        lines.append(
            f"Surface inversion {style.height(inversion['base_m'])} to {style.height(inversion['top_m'])}, "
            f"{style.difference(inversion['strength_K'])}; {heat['inversion_MJ_m2']:.2f} MJ m-2 break it (hatched)."
        )
    if document["superadiabatic"] is not None:
        layer = document["superadiabatic"]
        lines.append(
            f"Superadiabatic up to {style.height(layer['depth_m'])}, excess {style.difference(layer['excess_K'])}."
        )
    if cloud["convective_temperature_C"] is not None:
        kelvin = cloud["convective_temperature_C"] + ZERO_CELSIUS
        lines.append(
            f"Convective temperature {style.degrees(kelvin)} (dotted), cumulus base then "
            f"{style.height(cloud['convective_level_m'])}, after {heat['convective_MJ_m2']:.1f} MJ m-2."
        )
    if cloud["condensation_level_mean_m"] is not None:
        lines.append(
            f"Condensation level now: {style.height(cloud['condensation_level_mean_m'])} for the lowest 100 hPa mixed, "
            f"{style.height(cloud['condensation_level_surface_m'])} for the lowest level."
        )
    return lines


def _footer(figure: Figure, document: Document, style: Style, ruler: Ruler) -> float:
    half = 0.46
    left = [line for text in _answers(document, style) for line in ruler.wrap(text, half)]
    notes = [one["text"] for one in [*document["doubts"], *cautions(document, style)]]
    right = [line for text in notes for line in ruler.wrap(text, half)]
    top = 0.02 + LINE * max(len(left), len(right), 1)
    for x, lines in ((LEFT - 0.045, left), (LEFT - 0.045 + half + 0.02, right)):
        for n, line in enumerate(lines):
            figure.text(x, top - n * LINE, line, fontsize=SMALL, va="top")
    return top


def _theta(axes: Axes, data: _Data, document: Document, length: Unit, style: Style) -> None:
    axes.plot(data.theta, data.height, color=THETA, linewidth=2.0, label="potential temperature")
    if document["profile"]["humidity_known"]:
        axes.plot(data.virtual, data.height, color=THETA, linewidth=1.0, linestyle=(0, (4, 2)), label="virtual")
    inversion = document["inversion"]
    if inversion is not None:
        z = np.linspace(0.0, inversion["top_m"], 60)
        curve = np.interp(z, data.metres, data.theta)
        axes.fill_betweenx(
            z / length.factor, curve, curve[-1], facecolor="none", edgecolor=MARK, hatch="//////", linewidth=0.0
        )
    level, warm = document["cloud"]["convective_level_m"], document["cloud"]["convective_temperature_C"]
    if level is not None and warm is not None and level <= data.ceiling:
        start = data.read(data.theta, level)
        axes.plot([start, start], [0.0, level / length.factor], color=MARK, linewidth=1.4, linestyle=":")
    low, high = float(min(data.theta.min(), data.virtual.min())), float(max(data.theta.max(), data.virtual.max()))
    axes.set_xlim(low - 0.06 * (high - low) - 0.5, high + 0.06 * (high - low) + 0.5)
    axes.set_xlabel("potential temperature, K", fontsize=PLAIN)
    axes.legend(
        loc="lower left", bbox_to_anchor=(-0.01, 1.0), fontsize=SMALL, frameon=False, ncols=2, borderaxespad=0.0
    )


def _water(axes: Axes, data: _Data, document: Document, style: Style) -> None:
    axes.set_xlabel("mixing ratio, g/kg", fontsize=PLAIN)
    if not document["profile"]["humidity_known"]:
        axes.text(0.5, 0.5, "no humidity\nin the profile", transform=axes.transAxes, ha="center", fontsize=SMALL)
        axes.set_xticks([])
        return
    axes.plot(data.ratio, data.height, color=WATER, linewidth=2.0)
    axes.set_xlim(0.0, 1.1 * float(np.nanmax(data.ratio)) + 0.1)


def _wind(axes: Axes, data: _Data, document: Document, style: Style) -> None:
    speed_unit = "m/s" if style.speed == "m_s" else style.speed
    axes.set_xlabel(f"wind, {speed_unit}", fontsize=PLAIN)
    if not document["profile"]["wind_known"]:
        axes.text(0.5, 0.5, "no wind\nin the profile", transform=axes.transAxes, ha="center", fontsize=SMALL)
        axes.set_xticks([])
        return
    axes.set_title("arrows: to where it blows,\nnorth is up", fontsize=SMALL, loc="left", pad=2.0)
    factor = UNITS[style.speed].factor
    speed = np.hypot(data.u, data.v) / factor
    axes.plot(speed, data.height, color="#333333", linewidth=1.2)
    reach = 1.55 * float(speed.max()) + 0.5
    axes.set_xlim(0.0, reach)
    shown = np.linspace(0.03, 0.97, 14) * data.ceiling
    u, v = np.interp(shown, data.metres, data.u), np.interp(shown, data.metres, data.v)
    size = np.maximum(np.hypot(u, v), 0.1)
    y = shown / data.metres[-1] * data.height[-1]
    axes.quiver(
        np.full(shown.size, 0.88 * reach), y, u / size, v / size,
        angles="uv", pivot="mid", scale_units="width", scale=5.0, width=0.014, headwidth=5.0, headlength=5.0,
        headaxislength=4.5, color="#333333",
    )  # fmt: skip


def _shade(axes: Axes, document: Document, length: Unit) -> None:
    inversion = document["inversion"]
    if inversion is not None:
        axes.axhspan(
            inversion["base_m"] / length.factor,
            inversion["top_m"] / length.factor,
            color=SHADE,
            zorder=0,
            linewidth=0.0,
        )


def _marks(
    figure: Figure, panels: tuple[Axes, ...], data: _Data, document: Document, style: Style, ruler: Ruler
) -> None:
    """Draw each definition's height through the panels, with its words at the right."""
    length = UNITS[style.length].factor
    frame = panels[0].get_position()
    known = [top for top in document["tops"] if top["height_m"] is not None and top["height_m"] <= data.ceiling]
    width = RIGHT - WORDS - 0.012
    blocks = [ruler.wrap(restyle(document["definitions"][top["definition"]], style), width) for top in known]
    places = [frame.y0 + frame.height * top["height_m"] / data.ceiling for top in known]
    rows = 1.25 + max((len(block) for block in blocks), default=1)
    silent = [top for top in document["tops"] if top["height_m"] is None]
    room = LINE * (1 + len(silent)) if silent else 0.0
    words = spread(places, rows * LINE + 0.006, frame.y0 + room + 0.5 * rows * LINE, frame.y1)
    for top, block, place, word in zip(known, blocks, places, words, strict=True):
        for axes in panels:
            axes.axhline(top["height_m"] / length, color=MARK, linewidth=0.8, alpha=0.75, zorder=1.5)
        curve = data.read(data.theta, top["height_m"])
        panels[0].plot([curve], [top["height_m"] / length], marker="_", markersize=13, color=MARK, markeredgewidth=2.2)
        edge = panels[-1].get_position().x1
        line = mpl.lines.Line2D(
            [edge, WORDS - 0.022, WORDS - 0.006], [place, word, word],
            transform=figure.transFigure, color=MARK, linewidth=0.7,
        )  # fmt: skip
        figure.add_artist(line)
        title = f"{top['definition']}: {style.height(top['height_m'])}"
        figure.text(WORDS, word, title, fontsize=PLAIN, fontweight="bold", va="center", path_effects=halo("white"))
        for n, text in enumerate(block):
            figure.text(WORDS, word - (n + 1.05) * LINE, text, fontsize=SMALL, va="center", color="#333333")
    for n, top in enumerate(silent):
        text = f"{top['definition']}: not told, {restyle(top['detail'], style)}"
        figure.text(WORDS, frame.y0 + (len(silent) - 1 - n) * LINE, text, fontsize=SMALL, va="center", color="#333333")
