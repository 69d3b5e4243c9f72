"""The strips under the layers (temperature, fluxes), the hours along them, and the profiles beside them."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from datetime import UTC, datetime, timedelta, tzinfo
from typing import Any

import numpy as np
from matplotlib.axes import Axes

from slab.pictures_layers import Array, column, hours_from_start
from slab.pictures_style import FLUXES, SMALL, Placer, halo
from slab.wording import Clock, Units

Document = Mapping[str, Any]
Key = tuple[str, str, tuple[float, float] | None]


def draw_temperature(axes: Axes, document: Document, units: Units, placer: Placer) -> None:
    """2 m temperature (solid) and dew point (dashed), the warmest and coldest hour in figures."""
    hours = hours_from_start(document, document["series"]["time"])
    warm = _display(column(document, "temperature_2m_C"), units)
    dew = _display(column(document, "dewpoint_2m_C"), units)
    axes.plot(hours, warm, color="#8c2d04", linewidth=1.6, label="temperature")
    axes.plot(hours, dew, color="#08519c", linewidth=1.3, dashes=(4, 1.5), label="dew point")
    known = np.concatenate([warm[~np.isnan(warm)], dew[~np.isnan(dew)]])
    if known.size:
        low, high = float(known.min()), float(known.max())
        room = max(high - low, 2.0)
        axes.set_ylim(low - 0.3 * room, high + 0.4 * room)
    gutter_words(
        axes,
        f"at {units.length(2.0)}, {units.temperature_unit}",
        [("temperature", "#8c2d04", None), ("dew point", "#08519c", (4, 1.5))],
        placer,
    )
    summary = document["summary"]
    for which, lift in (("max", 1.0), ("min", -1.0)):
        value, when = summary.get(f"temperature_2m_{which}_C"), summary.get(f"temperature_2m_{which}_time")
        if value is not None and when is not None:
            at = float(hours_from_start(document, when))
            _figure_at(axes, at, units.temperature_value(value), units.temperature_number(value), lift, placer)


def _display(values: Array, units: Units) -> Array:
    return np.array([units.temperature_value(value) for value in values])


def _figure_at(axes: Axes, hour: float, value: float, words: str, lift: float, placer: Placer) -> None:
    low, high = axes.get_ylim()
    step = (high - low) * 0.17 * lift
    near = 0.015 * axes.get_xlim()[1]
    shifts = [near * n for n in (0.0, 1.0, -1.0, 2.0, -2.0) if hour + near * n >= near]
    places = [(hour + shift, value + part * step) for part in (1.0, 0.8, -1.0) for shift in shifts]
    placer.place(
        axes, words, places, fontsize=SMALL, fontweight="bold", ha="center", va="center", path_effects=halo("white")
    )


def draw_fluxes(axes: Axes, document: Document, placer: Placer) -> None:
    """Where the net radiation goes, as a stacked ribbon: above zero leaves the surface, below zero reaches it."""
    hours = hours_from_start(document, document["series"]["time"])
    parts = {
        "soil": column(document, "ground_flux_W_m2"),
        "evaporation": column(document, "latent_flux_W_m2"),
        "sensible heat": column(document, "sensible_flux_W_m2"),
    }
    hatches = {"soil": "", "evaporation": "\\\\\\\\", "sensible heat": ""}
    for sign in (1.0, -1.0):
        floor = np.zeros_like(hours)
        for name, values in parts.items():
            piece = np.where(np.isnan(values), math.nan, np.maximum(sign * values, 0.0))
            roof = floor + piece
            axes.fill_between(
                hours, sign * floor, sign * roof, facecolor=FLUXES[name], hatch=hatches[name], edgecolor="0.85", linewidth=0,
                label=name if sign > 0 else None,
            )  # fmt: skip
            floor = np.where(np.isnan(roof), floor, roof)
    net = column(document, "net_radiation_W_m2")
    axes.plot(hours, net, color="black", linewidth=1.2, dashes=(3, 1.2), label="net radiation")
    axes.plot([0.0, hours[-1]], [0.0, 0.0], color="black", linewidth=0.6)
    low, high = axes.get_ylim()
    axes.set_ylim(min(low, -0.25 * high), max(1.1 * high, 50.0))
    keys: list[Any] = [
        *([] if np.all(np.isnan(net)) else [("net radiation (down)", "black", (3, 1.2))]),
        *((name, FLUXES[name], None) for name in reversed(parts) if not np.all(np.isnan(parts[name]))),
    ]
    gutter_words(axes, "W/m², away from the surface", keys, placer, wide=True)


def gutter_words(
    axes: Axes, unit: str, keys: Sequence[Key], placer: Placer, *, wide: bool = False, rows: int | None = None
) -> None:
    """Names of the lines, with a piece of each, in the blank band left of the first hour; ``rows`` of it in all."""
    style: dict[str, Any] = {"transform": axes.transAxes, "fontsize": SMALL, "ha": "left"}
    placer.reserve(axes.text(0.006, 0.97, unit, va="top", fontweight="bold", **style))
    rows = rows or len(keys) + 1
    for n, (words, colour, dash) in enumerate(keys, start=1):
        y = 1.0 - (n + 0.5) / rows
        width = 6.0 if wide and dash is None else 1.6
        dashes: dict[str, Any] = {"dashes": dash} if dash else {}
        axes.plot(
            [0.008, 0.034],
            [y, y],
            transform=axes.transAxes,
            color=colour,
            linewidth=width,
            solid_capstyle="butt",
            **dashes,
        )
        placer.reserve(axes.text(0.042, y, words, va="center", **style))


def hour_marks(start: datetime, length: float, zone: tzinfo, every: int) -> Iterator[tuple[float, datetime]]:
    """Hours after the start of each whole multiple of ``every`` hours on a zone's clock, with the time there."""
    moment = start.astimezone(UTC).replace(minute=0, second=0, microsecond=0)
    end = start + timedelta(hours=length)
    while moment <= end:
        there = moment.astimezone(zone)
        if moment >= start and there.minute == 0 and there.hour % every == 0:
            yield (moment - start).total_seconds() / 3600.0, there
        moment += timedelta(minutes=15)


def hours_apart(length: float) -> int:
    """Hours between the marks of a time axis of so many hours."""
    return 1 if length <= 8 else 2 if length <= 16 else 3 if length <= 40 else 6


def label_hours(axes: Axes, document: Document, length: float, *, local: bool) -> None:
    """Hours along one edge: local on top, UTC at the bottom, the date at the first mark and after midnight."""
    clock = Clock.of(document)
    every = hours_apart(length)
    marks = list(hour_marks(clock.start, length, clock.zone if local else UTC, every))
    axes.xaxis.set_ticks([mark for mark, _ in marks], [_hour_words(n, marks) for n in range(len(marks))])
    axes.xaxis.set_ticks_position("top" if local else "bottom")
    axes.tick_params(axis="x", labelsize=SMALL, length=3, pad=2)
    name = f"local hour, {clock.offset()}" if local else "UTC hour"
    y, va = (1.0, "bottom") if local else (0.0, "top")
    axes.annotate(
        name, (0.006, y), xycoords="axes fraction", xytext=(0, 4 if local else -4), textcoords="offset points", fontsize=SMALL, ha="left",
        va=va, fontweight="bold",
    )  # fmt: skip
    for mark, there in marks:
        if not local and there.hour != 0:
            continue
        axes.axvline(mark, color="0.25" if there.hour == 0 else "0.6", linewidth=0.5, dashes=(1, 3), zorder=2)


def _hour_words(n: int, marks: list[tuple[float, datetime]]) -> str:
    there = marks[n][1]
    # the first date gives way to a change of date close behind it
    if (n == 0 and len({mark.date() for _, mark in marks[:4]}) == 1) or (
        n > 0 and there.date() != marks[n - 1][1].date()
    ):
        return f"{there:%H}\n{there:%a} {there.day} {there:%b}"
    return f"{there:%H}"


def draw_profiles(theta: Axes, water: Axes, document: Document, units: Units) -> list[Any]:
    """Morning (dashed) and afternoon (solid) potential temperature and mixing ratio; returns the lines for a key."""
    clock = Clock.of(document)
    lines: list[Any] = []
    styles = (("morning", "#08519c", (4, 1.5)), ("afternoon", "#8c2d04", None))
    top = theta.get_ylim()[1]
    for axes, key, name in (
        (theta, "theta_K", "potential temperature, K"),
        (water, "mixing_ratio_g_kg", "mixing ratio, g/kg"),
    ):
        seen: list[float] = []
        for when, colour, dash in styles:
            profile = (document.get("profiles") or {}).get(when)
            if not profile or not profile.get(key):
                continue
            height = np.array([math.nan if z is None else units.height_value(z) for z in profile["height_m"]])
            values = np.array([math.nan if x is None else float(x) for x in profile[key]])
            moment = clock.local(datetime.fromisoformat(profile["valid"]))
            dashes: dict[str, Any] = {"dashes": dash} if dash else {}
            (line,) = axes.plot(values, height, color=colour, linewidth=1.6, label=f"profile {moment:%H:%M}", **dashes)
            lines += [line] if axes is theta else []
            inside = values[(height <= top) & ~np.isnan(values)]
            seen += [float(x) for x in inside]
        if seen:
            room = max(max(seen) - min(seen), 0.5)
            axes.set_xlim(min(seen) - 0.08 * room, max(seen) + 0.08 * room)
        axes.set_xlabel(name, fontsize=SMALL, labelpad=2)
        axes.tick_params(labelsize=SMALL, length=3, pad=2)
        axes.locator_params(axis="x", nbins=4)
    return lines
