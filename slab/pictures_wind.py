"""The wind strip of the page of a day: 10 m and transport wind, where the transport wind blows to, and the ventilation in figures."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator

from slab.pictures_layers import Array, column, hours_from_start
from slab.pictures_strips import Key, gutter_words, hour_marks, hours_apart
from slab.pictures_style import SMALL, Placer
from slab.wording import OPEN_GROUND_ROUGHNESS_M, Clock, Units

Document = Mapping[str, Any]

SURFACE, TRANSPORT = "#238b45", "#542788"
ARROWS, FIGURES = 0.42, 0.14  # height of the row of arrows and of the row of figures, as parts of the strip
NEAREST_H = 0.51  # an hour's mark takes the row this near to it [h]


def draw_wind(axes: Axes, document: Document, units: Units, placer: Placer) -> None:
    """Speeds of the 10 m wind (dashed) and the transport wind (solid), arrows to where it blows, ventilation in figures."""
    hours = hours_from_start(document, document["series"]["time"])
    rough = float((document.get("surface") or {}).get("roughness_momentum_m") or OPEN_GROUND_ROUGHNESS_M)
    near = np.array([_display(value, units, rough) for value in column(document, "wind_10m_m_s")])
    transport = np.array([units.speed_value(value) for value in column(document, "transport_wind_m_s")])
    axes.plot(hours, transport, color=TRANSPORT, linewidth=1.6, label="transport wind")
    axes.plot(hours, near, color=SURFACE, linewidth=1.3, dashes=(4, 1.5), label="wind near the ground")
    known = np.concatenate([transport[~np.isnan(transport)], near[~np.isnan(near)]])
    top = float(known.max()) if known.size else 1.0
    # the lower half holds the arrows and the figures, so zero stands in the middle of the strip
    axes.set_ylim(-1.15 * max(top, 1.0), 1.15 * max(top, 1.0))
    axes.yaxis.set_major_locator(MaxNLocator(nbins=6))
    axes.set_yticks([tick for tick in axes.get_yticks() if 0.0 <= tick <= 1.1 * top])
    metric = units.name == "metric"
    keys: list[Key] = [
        ("transport", TRANSPORT, None),
        ("at 10 m" if metric else "at 20 ft, mph", SURFACE, (4, 1.5)),
    ]
    low, high = (document["summary"].get(f"gust_{which}_m_s") for which in ("low", "high"))
    gusts = "" if low is None or high is None else f", gusts {units.speed_number(low)} to {units.speed_number(high)}"
    gutter_words(axes, f"wind, {units.speed_unit}{gusts}", keys, placer, rows=6)
    style: dict[str, Any] = {"transform": axes.transAxes, "fontsize": SMALL, "ha": "left", "va": "center"}
    placer.reserve(axes.text(0.006, ARROWS, "transport blows to", **style))
    placer.reserve(axes.text(0.006, FIGURES, f"ventilation, {units.ventilation_unit}", fontweight="bold", **style))
    _arrows_and_figures(axes, document, hours, units, placer)


def _display(ten_metre: float, units: Units, roughness: float) -> float:
    return units.surface_wind_value(ten_metre, roughness) if not math.isnan(ten_metre) else math.nan


def _arrows_and_figures(axes: Axes, document: Document, hours: Array, units: Units, placer: Placer) -> None:
    """An arrow and the ventilation at each labelled local hour, north up."""
    clock, length = Clock.of(document), float(hours[-1])
    low, high = axes.get_ylim()
    bearing, rate = column(document, "transport_wind_from_deg"), column(document, "ventilation_m2_s")
    for mark, _ in hour_marks(clock.start, length, clock.zone, hours_apart(length)):
        n = int(np.argmin(np.abs(hours - mark)))
        if abs(hours[n] - mark) > NEAREST_H:
            continue
        if not math.isnan(bearing[n]):
            turn = math.radians(bearing[n])
            half = np.array([-math.sin(turn), -math.cos(turn)]) * 5.0  # points
            place = (mark, low + ARROWS * (high - low))
            axes.annotate(
                "", xy=place, xytext=tuple(-2.0 * half), textcoords="offset points", annotation_clip=False,
                arrowprops={"arrowstyle": "->", "color": TRANSPORT, "linewidth": 1.1, "shrinkA": 0, "shrinkB": 0},
            )  # fmt: skip
        if not math.isnan(rate[n]):
            words, place = units.ventilation_number(float(rate[n])), (mark, low + FIGURES * (high - low))
            placer.place(axes, words, [place], fontsize=SMALL, ha="center", va="center")
