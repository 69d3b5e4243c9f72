"""The spray calendar for the wall: a band for every local day, one hue for the inversion, hatches for other limits, words.

The darker an hour, the more members show an inversion in it, so that onset and end fade in and out over their spread. What
else limits an hour is hatched, each limit with a pattern of its own.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle

from slab.pictures_spray_strip import Day, days_of, draw_strip
from slab.pictures_spray_words import SHADES, write_below
from slab.pictures_style import LARGE, NAME, PAGE, SMALL, Ruler, halo
from slab.spray_words import heading_words, profile_age
from slab.wording import Clock, Units, number, units_named

__all__ = ["spray_page"]

Document = Mapping[str, Any]

LEFT, RIGHT, TOP = 0.115, 0.985, 0.915
BANDS, BAND = 0.50, (0.146, 0.215)  # height of all days, and least and most of one, with its gap, as parts of the page
LINE_WIND, LINE_DELTA = "#20244f", "#565c99"


def spray_page(document: Document, *, units: str = "metric") -> Figure:
    """Draw the calendar of one result on A4 landscape.

    Parameters
    ----------
    document : mapping
        The result document of a spray calendar.
    units : {"metric", "us"}
        Heights in m or ft, wind in m/s or mph, Delta-T in K or degrees F.
    """
    chosen = units_named(units)
    figure = Figure(figsize=PAGE, dpi=150)
    ruler, days = Ruler(figure), days_of(document)
    _title(figure, document)
    step = min(BAND[1], max(BAND[0], BANDS / max(len(days), 1)))
    for n, day in enumerate(days):
        top = TOP - n * step
        _band(figure, document, day, chosen, (top, step))
    write_below(figure, document, chosen, ruler, TOP - len(days) * step - 0.012)
    return figure


def _title(figure: Figure, document: Document) -> None:
    limits = document["limits"]
    figure.text(0.02, 0.975, heading_words(document), fontsize=LARGE, va="top", fontweight="bold")
    figure.text(0.42, 0.970, document["title"], fontsize=NAME, va="top")
    whose = (
        f"your limits: {limits['authority']}, dated {limits['dated'] or 'not given'}"
        if limits["given"]
        else "no limits were given: conditions only"
    )
    clock = Clock.of(document)
    figure.text(0.02, 0.940, f"{whose}; local time {clock.zone.key}, {clock.offset()}; profile {profile_age(document)}",
                fontsize=SMALL, va="top")  # fmt: skip


def _band(figure: Figure, document: Document, day: Day, units: Units, place: tuple[float, float]) -> None:
    """A day: the strip of hours, the inversion's depth and strength, wind, Delta-T."""
    top, step = place
    usable = step - 0.030
    parts = (0.37, 0.27, 0.18, 0.18)
    figure.text(
        0.012, top - 0.003, f"{day.date:%a} {day.date.day} {day.date:%b}", fontsize=NAME, va="top", fontweight="bold"
    )
    y = top
    for n, share in enumerate(parts):
        height = usable * share
        y -= height
        axes = figure.add_axes((LEFT, y, RIGHT - LEFT, height - 0.002))
        axes.set_xlim(0.0, 24.0)
        axes.set_xticks([])
        axes.set_yticks([])
        for side in axes.spines.values():
            side.set_linewidth(0.5)
        if n == 0:
            draw_strip(axes, document, day)
        else:
            (_depth, _wind, _delta)[n - 1](axes, document, day, units)
        if n == 3:
            axes.set_xticks(range(0, 25, 1), [f"{h:02d}" for h in range(25)], fontsize=SMALL)
            axes.tick_params(length=2, pad=1)


def _label(axes: Axes, text: str) -> None:
    axes.text(-0.006, 0.5, text, transform=axes.transAxes, ha="right", va="center", fontsize=SMALL)


def _values(day: Day, key: str) -> tuple[np.ndarray, np.ndarray]:
    hours = sorted(day.hours)
    values = [np.nan if day.hours[h][key] is None else float(day.hours[h][key]) for h in hours]
    return np.array(hours, dtype=float) + 0.5, np.array(values)


def _depth(axes: Axes, document: Document, day: Day, units: Units) -> None:
    """Top of the inversion as bars from the ground, with the strength as words on them."""
    _label(axes, f"inversion top, {units.height_unit}\n{'K' if units.name == 'metric' else '°F'} per 8 m")
    tops = [hour["inversion_to_m"] for hour in document["calendar"] if hour["inversion_to_m"]]
    most = max([50.0, *tops])
    axes.set_ylim(0.0, 1.9 * most)
    for at, hour in day.hours.items():
        top = hour["inversion_to_m"]
        if top is None:
            continue
        axes.add_patch(Rectangle((at + 0.04, 0.0), 0.92, top, facecolor=SHADES[2], edgecolor=SHADES[4], linewidth=0.4))
        scale = 1.0 if units.name == "metric" else 1.8
        axes.text(at + 0.5, 1.82 * most, number(hour["per_8m_K"] * scale, 0.1), ha="center", va="top", fontsize=SMALL)
        axes.text(at + 0.5, 0.04 * most, number(units.height_value(top), 10.0 if top >= 20.0 else 1.0), ha="center",
                  va="bottom", fontsize=SMALL, path_effects=halo("#ffffff", 1.4))  # fmt: skip


def _limited(
    axes: Axes, day: Day, key: str, ends: Sequence[float | None], style: tuple[str, str], factor: float, every: float
) -> None:
    """A line with the user's window as a band behind it, and its values above it."""
    x, y = _values(day, key)
    y = y * factor
    low, high = (None if end is None else end * factor for end in ends)
    known = y[np.isfinite(y)]
    top = max([1.0, *(known.tolist()), *([high] if high is not None else [])]) * 2.1
    axes.set_ylim(0.0, top)
    if low is not None or high is not None:
        axes.axhspan(low or 0.0, high if high is not None else top / 2.1, color="#e9e9e9", linewidth=0.0, zorder=0)
    for edge in (low, high):
        if edge is not None:
            axes.axhline(edge, color="#6a6a6a", linewidth=0.5, linestyle=(0, (4, 2)), zorder=1)
    axes.plot(x, y, color=style[0], linestyle=style[1], linewidth=1.2, zorder=2)
    if known.size == 0 and day.hours:
        axes.text(0.5, 0.5, "not known", transform=axes.transAxes, ha="center", va="center", fontsize=SMALL)
    for at, value in zip(x, y, strict=True):
        if np.isfinite(value):
            axes.text(at, 0.95 * top, number(value, every), ha="center", va="top", fontsize=SMALL)


def _wind(axes: Axes, document: Document, day: Day, units: Units) -> None:
    limits = document["limits"]
    metric = units.name == "metric"
    _label(axes, f"wind at {limits['wind_height_m']:g} m, {'m/s' if metric else 'mph'}")
    ends = (limits["wind_min_m_s"], limits["wind_max_m_s"])
    _limited(
        axes, day, "wind_boom_m_s", ends, (LINE_WIND, "-"), 1.0 if metric else 1.0 / 0.44704, 0.1 if metric else 1.0
    )


def _delta(axes: Axes, document: Document, day: Day, units: Units) -> None:
    limits = document["limits"]
    metric = units.name == "metric"
    _label(axes, f"Delta-T, {'K' if metric else '°F'}")
    ends = (limits["delta_t_min_K"], limits["delta_t_max_K"])
    _limited(axes, day, "delta_t_K", ends, (LINE_DELTA, "--"), 1.0 if metric else 1.8, 0.1 if metric else 1.0)
