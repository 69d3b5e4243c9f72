"""Words and marks on the height-against-time panel: the balloon, definitions of the top, names of layers, the sun."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping
from datetime import datetime
from typing import Any, NamedTuple

import numpy as np
from matplotlib.axes import Axes
from matplotlib.text import Text

from slab.pictures_layers import Array, DayLayers, hours_from_start
from slab.pictures_style import INK, LAYERS, NAME, PAGE, SMALL, Placer, halo, spread
from slab.wording import Clock, Units

Document = Mapping[str, Any]
BAND_LETTERS = 26  # of a line of words in the band left of the first hour
PAPER = {"facecolor": "white", "edgecolor": "none", "pad": 0.7, "alpha": 0.88}


class Mark(NamedTuple):
    """A height in display units with its words."""

    height: float
    words: str
    main: bool = False


def balloon_marks(document: Document, units: Units) -> list[Mark]:
    """Tops found in the measured profile, long names on two lines."""
    marks = _marks((document.get("profile") or {}).get("tops"), units)
    return [mark._replace(words="\n".join(textwrap.wrap(mark.words, BAND_LETTERS))) for mark in marks]


def balloon_title(document: Document) -> str:
    """Release hour, local and UTC, and how long before the start; empty when it is not known."""
    released = (document.get("profile") or {}).get("valid")
    if not released:
        return ""
    moment, before = datetime.fromisoformat(released), -float(hours_from_start(document, released))
    late = f", {before:.0f} h before" if before > 0.75 else ""
    return f"balloon {Clock.of(document).local(moment):%H:%M} local\n{moment:%H:%M} UTC{late}"


def _marks(items: Any, units: Units) -> list[Mark]:
    return [
        Mark(units.height_value(item["height_m"]), f"{item['definition']} {_joined(units.height(item['height_m']))}")
        for item in items or []
        if item.get("height_m") is not None
    ]


def _joined(text: str) -> str:
    """Number and unit that no line break parts."""
    return text.replace(" ", "\u00a0")


def write_words(axes: Axes, layers: DayLayers, document: Document, units: Units, placer: Placer) -> None:
    """Write everything on the panel, most important first, so that what comes later gives way."""
    _balloon(axes, document, units, placer)
    _definitions(axes, document, units, placer)
    placer.reserve_box(axes, axes.get_xlim()[0], 0.0)  # the blank band
    _sun(axes, document, placer)
    _names(axes, layers, units.height_value(1.0), placer)


def _line_gap(axes: Axes) -> float:
    """Height of one line of small words in data units."""
    low, high = axes.get_ylim()
    return 1.4 * SMALL / 72.0 / (axes.get_position().height * PAGE[1]) * (high - low)


def _balloon(axes: Axes, document: Document, units: Units, placer: Placer) -> None:
    """Vertical trace at the release hour with the measured levels, and the tops in the measured profile as ticks."""
    title = balloon_title(document)
    if not title:
        return
    hour = float(hours_from_start(document, document["profile"]["valid"]))
    left, right = axes.get_xlim()
    top = axes.get_ylim()[1]
    shown = min(max(hour, 0.0), right)
    morning = (document.get("profiles") or {}).get("morning") or {}
    levels = [units.height_value(z) for z in morning.get("height_m") or [] if z is not None]
    levels = [z for z in levels if z <= top]
    axes.plot([shown, shown], [0.0, top], color="white", linewidth=3.2, zorder=4)
    axes.plot([shown, shown], [0.0, top], color="black", linewidth=1.0, dashes=(5, 1.5), zorder=4, label="balloon")
    axes.plot([shown] * len(levels), levels, "o", markersize=2.6, color="black", zorder=5, clip_on=False)
    marks = [mark for mark in balloon_marks(document, units) if mark.height <= top]
    # the words stand in the blank band or on the side away from the hour of the greatest depth, which has words of its own
    deepest = document["summary"].get("mixing_depth_max_time")
    side = 1.0 if deepest and 0.03 * right < shown and hours_from_start(document, deepest) < shown else -1.0
    reach = 0.012 * (right - left)
    gap = _line_gap(axes)
    style: dict[str, Any] = {"fontsize": SMALL, "ha": "right" if side < 0 else "left", "zorder": 6, "bbox": PAPER}
    placer.reserve(axes.text(shown + side * reach, top - 0.35 * gap, title, va="top", **style))
    placer.reserve_line(axes, [shown, shown], [0.0, top])
    tall = max((mark.words.count("\n") + 1 for mark in marks), default=1) * 0.9 * gap
    heights = spread([mark.height for mark in marks], max(tall, gap), 0.6 * tall, top - 2.8 * gap)
    for mark, at in zip(marks, heights, strict=True):
        elbow = [shown, shown + side * reach, shown + side * 2.2 * reach]
        axes.plot(elbow, [mark.height, mark.height, at], color="black", linewidth=0.8, zorder=5)
        placer.reserve(axes.text(shown + side * 2.5 * reach, at, mark.words, va="center", **style))


def _definitions(axes: Axes, document: Document, units: Units, placer: Placer) -> None:
    """Ticks at the hour of the greatest depth, one for each definition, with words."""
    summary = document["summary"]
    deepest, when = summary.get("mixing_depth_max_m"), summary.get("mixing_depth_max_time")
    if deepest is None or when is None:
        return
    hour = float(hours_from_start(document, when))
    used = Mark(
        units.height_value(deepest),
        f"{summary.get('mixing_depth_definition') or 'depth'} {_joined(units.height(deepest))}",
        True,
    )
    marks = [used, *_marks(summary.get("other_definitions"), units)]
    (left, right), top = axes.get_xlim(), axes.get_ylim()[1]
    marks = [mark for mark in marks if mark.height <= top]
    reach = 0.008 * (right - left)
    wide = 0.075 * max(len(mark.words) for mark in marks) / (axes.get_position().width * PAGE[0]) * (right - left)
    gap = _line_gap(axes)
    # kept clear of the lowest air, where the layer has its name, and of the sun's hours at the top
    heights = spread([mark.height for mark in marks], gap, min(0.45 * used.height, 0.5 * top), top - 2.0 * gap)
    sides = (1.0, -1.0) if hour + wide + 3.0 * reach < right else (-1.0, 1.0)
    for side in sides:
        style: dict[str, Any] = {
            "fontsize": SMALL,
            "ha": "left" if side > 0 else "right",
            "va": "center",
            "zorder": 6,
            "bbox": PAPER,
        }
        texts = [
            axes.text(hour + side * 3.2 * reach, at, mark.words, fontweight="bold" if mark.main else "normal", **style)
            for mark, at in zip(marks, heights, strict=True)
        ]
        if placer.reserve_clear(axes, texts) or (side == sides[-1] and _keep_clear(axes, texts, placer)):
            break
        for text in texts:
            text.remove()
    for mark, at in zip(marks, heights, strict=True):
        axes.plot([hour - reach, hour + reach], [mark.height] * 2, color="black", linewidth=1.6, zorder=5)
        axes.plot(
            [hour + side * reach, hour + side * 2.8 * reach], [mark.height, at], color="black", linewidth=0.7, zorder=5
        )


def _keep_clear(axes: Axes, texts: list[Text], placer: Placer) -> bool:
    """Keep those words that cover no others; the caution on the definition names the range of all."""
    for text in texts:
        if not placer.reserve_clear(axes, [text]):
            text.set_visible(False)
    return True


def _names(axes: Axes, layers: DayLayers, scale: float, placer: Placer) -> None:
    """Name each layer inside it, at the first of its thickest places that is clear."""
    zero, top = np.zeros_like(layers.hours), axes.get_ylim()[1] / scale
    mixed = np.nan_to_num(layers.mixed)
    night = np.fmax(layers.stable, mixed)
    ceiling = np.fmax(np.fmax(night, layers.residual), np.nan_to_num(layers.cloud_top))
    stirred = bool(np.any(~np.isnan(layers.night_mixing)))
    for level in (layers.night_mixing, layers.condensation):
        placer.reserve_line(axes, layers.hours, level * scale)
    _name(axes, "stable layer", layers, np.fmin(mixed, layers.stable) * scale, layers.stable * scale, placer)
    if stirred:
        ground = "stable layer" if np.any(layers.stable > 0.0) else "residual layer"
        _over(axes, "wind-mixed below the dashes", layers.hours, layers.night_mixing * scale, ground, placer)
    _name(axes, "mixed layer", layers, zero, mixed * scale, placer)
    _name(axes, "residual layer", layers, night * scale, layers.residual * scale, placer)
    # before the first day nothing says how far up yesterday's air reaches: that air has another name
    untold = (mixed == 0.0) & (layers.residual == 0.0)
    _name(axes, "free air", layers, np.where(untold, top, ceiling) * scale, (zero + top) * scale, placer)
    _name(axes, "air above", layers, np.where(untold, ceiling, top) * scale, (zero + top) * scale, placer)
    cloudy = layers.cloud_top
    _over(axes, "cumulus", layers.hours, cloudy * scale, "free air", placer, size=NAME, first=layers.cloud_part)
    _over(axes, "condensation level", layers.hours, layers.condensation * scale, "cloud", placer)
    if np.any(layers.missing):
        gone = layers.hours[layers.missing]
        places = [(float(gone.mean()), part * top * scale) for part in (0.5, 0.4, 0.6, 0.3, 0.7, 0.2, 0.8)]
        placer.place(axes, "no value", places, fontsize=SMALL, ha="center", va="center", bbox=PAPER, zorder=6)


def _over(
    axes: Axes,
    words: str,
    hours: Array,
    level: Array,
    ground: str,
    placer: Placer,
    *,
    size: float = SMALL,
    first: Array | None = None,
) -> None:
    """Write words just above a line, just below it or beside it, where they are clear."""
    low, high = axes.get_ylim()
    known = [int(n) for n in np.flatnonzero(~np.isnan(level)) if low <= level[n] <= high]
    if first is not None:
        known.sort(key=lambda n: -first[n])
    elif known:
        middle = float(np.median(hours[known]))
        known.sort(key=lambda n: abs(hours[n] - middle))
    gap = _line_gap(axes)
    above = [(hours[n], level[n] + lift * gap) for lift in (0.9, 1.4, -0.9, 2.2, -1.5) for n in known]
    beside = [(hours[n] + 0.012 * hours[-1], level[n] + lift * gap) for lift in (0.0, 0.7, -0.7, 1.2) for n in known]
    style: dict[str, Any] = {"fontsize": size, "va": "center", "zorder": 6, "color": INK[ground]}
    style["path_effects"] = halo(LAYERS[ground], 2.5)
    for align, places in (("center", above), ("left", beside)):
        if placer.place(axes, words, places, ha=align, **style) is not None:
            return


def _name(axes: Axes, name: str, layers: DayLayers, low: Array, high: Array, placer: Placer) -> None:
    gap = _line_gap(axes)
    thick = np.where(layers.missing, 0.0, high - low)
    order = [int(n) for n in np.argsort(-_smoothed(thick), kind="stable") if thick[n] > 0.0]
    deep = [n for n in order if thick[n] > 1.2 * gap]
    inside = [(layers.hours[n], low[n] + part * thick[n]) for part in (0.5, 0.4, 0.6, 0.3, 0.7, 0.2, 0.8) for n in deep]
    above = [(layers.hours[n], high[n] + lift * gap) for lift in (0.9, 1.3, 2.0) for n in order]
    style: dict[str, Any] = {"fontsize": NAME, "ha": "center", "va": "center", "zorder": 6}
    fill = name if name in LAYERS else "free air"
    style |= {"color": INK[fill], "path_effects": halo(LAYERS[fill], 2.5)}
    for places in (inside, above):
        if placer.place(axes, name, places, **style) is not None:
            return


def _smoothed(values: Array, half: int = 3) -> Array:
    """Running mean, so that the middle of a long stretch comes before its ends."""
    padded = np.pad(values, half, mode="constant")
    return np.convolve(padded, np.ones(2 * half + 1) / (2 * half + 1), mode="valid")


def _sun(axes: Axes, document: Document, placer: Placer) -> None:
    sun, clock = document.get("sun") or {}, Clock.of(document)
    right, top = axes.get_xlim()[1], axes.get_ylim()[1]
    for key in ("sunrise", "sunset"):
        if not sun.get(key):
            continue
        hour = float(hours_from_start(document, sun[key]))
        if not -0.5 <= hour <= right:
            continue
        hour = max(hour, 0.0)
        axes.plot([hour], [top], marker="v", markersize=6, color="black", clip_on=False, zorder=6, linestyle="none")
        words = f"{key} {clock.local(datetime.fromisoformat(sun[key])):%H:%M}"
        style: dict[str, Any] = {
            "fontsize": SMALL,
            "va": "center",
            "zorder": 6,
            "path_effects": halo(LAYERS["free air"]),
        }
        for align, shift in (("left", 0.012), ("right", -0.012)):
            places = [(hour + shift * right, (1.0 - drop) * top) for drop in (0.045, 0.09, 0.14)]
            if placer.place(axes, words, places, ha=align, **style) is not None:
                break
