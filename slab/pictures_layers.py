"""The layers of the height-against-time panel: their tops by hour, and how they are filled."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.patches import Polygon

from slab.pictures_style import LAYERS
from slab.wording import CLOUD_SHOWN, Units

Document = Mapping[str, Any]
Array = np.ndarray[Any, np.dtype[np.float64]]
CONVECTIVE = frozenset({"mixed", "decaying"})
ENTRAINMENT_TOP = 1.125  # the entrainment zone is a quarter of the depth, centred on it


@dataclass(frozen=True, slots=True)
class DayLayers:
    """Layer tops by output hour, all [m above ground], shape (n,); NaN where there is nothing to draw.

    ``hours`` counts from the first row; ``mixed``, ``residual`` and ``stable`` are zero where the layer is absent.
    """

    hours: Array
    mixed: Array
    residual: Array
    stable: Array
    night_mixing: Array
    condensation: Array
    cloud_base: Array
    cloud_top: Array
    cloud_part: Array
    missing: np.ndarray[Any, np.dtype[np.bool_]]


def column(document: Document, name: str) -> Array:
    """One series as floats, NaN where null or not in the document."""
    series = document["series"]
    values = series.get(name) or [None] * len(series["time"])
    return np.array([math.nan if value is None else float(value) for value in values])


def hours_from_start(document: Document, iso: str | Sequence[str]) -> Any:
    """Hours after the first row of one ISO time, or of many as an array."""
    start = datetime.fromisoformat(document["series"]["time"][0])
    if isinstance(iso, str):
        return (datetime.fromisoformat(iso) - start).total_seconds() / 3600.0
    return np.array([(datetime.fromisoformat(text) - start).total_seconds() / 3600.0 for text in iso])


def day_layers(document: Document) -> DayLayers:
    """Layer tops of a result, ready to draw."""
    depth = column(document, "mixing_depth_m")
    convective = np.array([regime in CONVECTIVE for regime in document["series"]["regime"]])
    mixed = np.where(convective, depth, 0.0)
    known = np.nan_to_num(column(document, "residual_top_m"))
    beside = np.zeros(len(known), dtype=bool)
    beside[:-1] |= known[1:] > 0.0
    beside[1:] |= known[:-1] > 0.0
    # the mixed layer's last hour is also the residual layer's first: no gap opens between two outputs
    residual = np.where((known == 0.0) & beside, np.nan_to_num(mixed), known)
    part = np.nan_to_num(column(document, "cumulus_fraction"))
    level = column(document, "condensation_level_m")
    cloudy = (part >= CLOUD_SHOWN) & ~np.isnan(depth)
    return DayLayers(
        hours=hours_from_start(document, document["series"]["time"]),
        mixed=mixed,
        residual=residual,
        stable=np.nan_to_num(column(document, "inversion_depth_m")),
        night_mixing=np.where(convective, math.nan, depth),
        condensation=np.where(convective, level, math.nan),
        cloud_base=np.where(cloudy, level, math.nan),
        cloud_top=np.where(cloudy, np.fmax(ENTRAINMENT_TOP * depth, 1.03 * level), math.nan),
        cloud_part=part,
        missing=np.isnan(depth),
    )


def panel_top(layers: DayLayers, document: Document) -> float:
    """Height [m] that the panel ends at: what is drawn and some free air above it."""
    tops = [
        np.nanmax(values, initial=0.0) for values in (layers.mixed, layers.residual, layers.stable, layers.night_mixing)
    ]
    clouds = np.nanmax(layers.cloud_top, initial=0.0)
    others = [item.get("height_m") or 0.0 for item in document["summary"].get("other_definitions") or []]
    return float(max(1.22 * max(tops), 1.12 * clouds, 1.1 * max(others, default=0.0), 200.0))


def draw_layers(axes: Axes, layers: DayLayers, document: Document, units: Units) -> None:
    """Fill the layers and draw their edges; each kind of line has its own dash."""
    top = units.height_value(panel_top(layers, document))
    scale = units.height_value(1.0)
    hours = layers.hours
    axes.set_ylim(0.0, top)
    axes.fill_between([hours[0], hours[-1]], 0.0, top, color=LAYERS["free air"], linewidth=0, label="free air")
    tops = {"residual layer": layers.residual, "stable layer": layers.stable, "mixed layer": layers.mixed}
    for name, values in tops.items():
        axes.fill_between(hours, 0.0, values * scale, color=LAYERS[name], linewidth=0, label=name)
    edges = (
        ("mixed layer top", np.where(layers.mixed > 0.0, layers.mixed, math.nan), "black", 1.6, None),
        (
            "residual top",
            np.where(layers.residual > np.nan_to_num(layers.mixed), layers.residual, math.nan),
            "black",
            0.8,
            (6, 2),
        ),
        ("night mixing depth", layers.night_mixing, "white", 1.2, (2, 1.5)),
        ("condensation level", layers.condensation, "black", 0.9, (1, 1.5)),
    )
    for name, values, colour, width, dash in edges:
        style: dict[str, Any] = {"dashes": dash} if dash else {}
        axes.plot(hours, values * scale, color=colour, linewidth=width, label=name, **style)
    _missing(axes, layers, top)
    _clouds(axes, layers, scale)


def _missing(axes: Axes, layers: DayLayers, top: float) -> None:
    step = 0.5 * float(np.median(np.diff(layers.hours))) if len(layers.hours) > 1 else 0.5
    for hour in layers.hours[layers.missing]:
        left, right = max(hour - step, layers.hours[0]), min(hour + step, layers.hours[-1])
        axes.fill_between(
            [left, right], 0.0, top, facecolor="white", edgecolor="0.45", hatch="////", linewidth=0, label="no value"
        )


def _clouds(axes: Axes, layers: DayLayers, scale: float) -> None:
    """Flat-based domes, wider for more cloud."""
    arc = np.linspace(0.0, math.pi, 25)
    step = float(np.median(np.diff(layers.hours))) if len(layers.hours) > 1 else 1.0
    for n in np.flatnonzero(~np.isnan(layers.cloud_base)):
        half = 0.5 * step * (0.45 + 0.5 * min(float(layers.cloud_part[n]) / 0.5, 1.0))
        base, height = layers.cloud_base[n], layers.cloud_top[n] - layers.cloud_base[n]
        outline = np.column_stack([layers.hours[n] + half * np.cos(arc), (base + height * np.sin(arc)) * scale])
        axes.add_patch(
            Polygon(outline, facecolor=LAYERS["cloud"], edgecolor="black", linewidth=0.7, label="cloud", zorder=3)
        )
