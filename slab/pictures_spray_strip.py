"""The strip of a day's hours: shaded by members with an inversion, hatched by what else limits an hour, with words."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date, datetime
from typing import Any

from matplotlib.axes import Axes
from matplotlib.patches import Rectangle

from slab.pictures_spray_words import HATCHES, SHADES, UNKNOWN_HATCH
from slab.pictures_style import SMALL, halo
from slab.spray_words import plan_words
from slab.wording import Clock

__all__ = ["Day", "days_of", "draw_strip", "shade"]

Document = Mapping[str, Any]
Hour = Mapping[str, Any]

DAYS_MOST = 4
WORDS = {
    "inversion": ("invers", "inversion"), "possible inversion": ("maybe", "inversion possible"), "wind": ("wind", "wind"),
    "hours": ("sun", "hours from the sun"), "delta-t": ("ΔT", "Delta-T"), "temperature": ("warm", "temperature"),
    "humidity": ("dry", "humidity"), "rain": ("rain", "rain"), "inside": ("inside", "inside your limits"),
    "none": ("none", "no inversion"),
}  # fmt: skip
"""Words for up to two hours and for more."""
MARK = "#000000"
SUN_MARKS = {"sunrise": "^", "sunset": "v"}


@dataclass(frozen=True, slots=True)
class Day:
    """One local date with its hours, by the hour they begin at."""

    date: date
    hours: Mapping[int, Hour]


def shade(share: float | None, state: str = "") -> str:
    """Colour of a share of the members with an inversion; inside a window of onset or end never quite white."""
    if share is None or (share <= 0.0 and state != "possible"):
        return SHADES[0]
    if share >= 1.0:
        return SHADES[4]
    return SHADES[1] if share < 0.34 else SHADES[2] if share < 0.67 else SHADES[3]


def days_of(document: Document) -> list[Day]:
    """Hours of the calendar by local date, in order; where clocks go back an hour stands for the later of two."""
    clock = Clock.of(document)
    found: dict[date, dict[int, Hour]] = {}
    for hour in document["calendar"]:
        local = clock.local(datetime.fromisoformat(hour["start"]))
        found.setdefault(local.date(), {})[local.hour] = hour
    return [Day(day, hours) for day, hours in found.items()][:DAYS_MOST]


def draw_strip(axes: Axes, document: Document, day: Day) -> None:
    """Half hours shaded by share of members, hours hatched by their most limiting other reason, and words."""
    axes.set_ylim(0.0, 1.0)
    middle = _shades(axes, document, day)
    for at, hour in day.hours.items():
        _hatch(axes, at, hour)
        words = plan_words(hour["plan_only"]).replace(" ", "\n")
        _write(axes, (at + 0.5, 0.36), words, middle.get(at, SHADES[0]))
    for at, long, word in _words(day):
        _write(axes, (at + 0.5 * long, 0.83), word, middle.get(at + long // 2, SHADES[0]))
    for at, long in _gaps(day):
        axes.add_patch(Rectangle((at, 0.0), long, 1.0, facecolor="#ffffff", linewidth=0.0, zorder=1.5))
        _write(axes, (at + 0.5 * long, 0.5), "not in the run" if long > 2 else "–", SHADES[0])
    for at in range(1, 24):
        axes.axvline(at, color="#8a8a8a", linewidth=0.35, zorder=3)
    _marks(axes, document, day)


def _marks(axes: Axes, document: Document, day: Day) -> None:
    """Sunrise and sunset at the foot of the strip, and a bar for the present moment."""
    for night in document["nights"]:
        for key, mark in SUN_MARKS.items():
            at = _clock_hour(document, day, night[key])
            if at is not None:
                axes.plot(at, 0.09, mark, color=MARK, markeredgecolor="white", markersize=5.5, zorder=5)
    now = _clock_hour(document, day, document["now"])
    if now is not None:
        axes.axvline(now, color=MARK, linewidth=2.2, zorder=3.5)


def _clock_hour(document: Document, day: Day, moment: str | None) -> float | None:
    """Hour of the day's clock, None on another day."""
    if moment is None:
        return None
    local = Clock.of(document).local(datetime.fromisoformat(moment))
    return local.hour + local.minute / 60.0 if local.date() == day.date else None


def _shades(axes: Axes, document: Document, day: Day) -> dict[int, str]:
    """Shade the half hours around every row; returns the shade in the middle of each hour."""
    clock, series, middle = Clock.of(document), document["series"], {}
    rows = zip(series["time"], series["share_with_inversion"], series["inversion_state"], strict=True)
    for moment, share, state in rows:
        local = clock.local(datetime.fromisoformat(moment))
        at = 24.0 * (local.date() - day.date).days + local.hour + local.minute / 60.0
        if -0.25 <= at <= 24.25:
            colour = shade(share, state)
            axes.add_patch(Rectangle((at - 0.25, 0.0), 0.5, 1.0, facecolor=colour, linewidth=0.0))
            if local.minute == 30:
                middle[int(at)] = colour
    return middle


def _gaps(day: Day) -> list[tuple[int, int]]:
    """Stretches of the day without an hour: where each begins and how many hours it lasts."""
    found: list[tuple[int, int]] = []
    for at in range(24):
        if at in day.hours:
            continue
        if found and sum(found[-1]) == at:
            found[-1] = (found[-1][0], found[-1][1] + 1)
        else:
            found.append((at, 1))
    return found


def _hatch(axes: Axes, at: int, hour: Hour) -> None:
    others = [one for one in hour["reasons"] if one["code"] in HATCHES]
    if not others or hour["inversion"] in ("present", "possible"):
        return
    first = others[0]
    pattern = UNKNOWN_HATCH if first["kind"] == "unknown" else HATCHES[first["code"]]
    axes.add_patch(
        Rectangle((at, 0.0), 1.0, 1.0, facecolor="none", edgecolor="#8d93c4", hatch=pattern, linewidth=0.0, zorder=2)
    )


def _write(axes: Axes, at: tuple[float, float], words: str, ground: str) -> None:
    """Words on a shade, white on the dark ones."""
    dark = ground in SHADES[3:]
    ink, around = ("white", SHADES[4]) if dark else ("black", "#ffffff")
    axes.text(*at, words, ha="center", va="center", fontsize=SMALL, linespacing=0.95, color=ink,
              path_effects=halo(around, 1.6), zorder=4)  # fmt: skip


def _words(day: Day) -> list[tuple[int, int, str]]:
    """Neighbouring hours with one answer: where they begin, how many they are, and a word that fits their width."""
    found: list[tuple[int, int, str]] = []
    for at in sorted(day.hours):
        code = _code(day.hours[at])
        if found and found[-1][2] == code and found[-1][0] + found[-1][1] == at:
            found[-1] = (found[-1][0], found[-1][1] + 1, code)
        else:
            found.append((at, 1, code))
    return [
        (at, long, WORDS[code.rstrip("?")][0 if long < 3 else 1] + "?" * code.endswith("?")) for at, long, code in found
    ]


def _code(hour: Hour) -> str:
    """What an hour is about: its most limiting reason, or what the answer is; "?" behind what is not known."""
    if hour["reasons"]:
        first = hour["reasons"][0]
        return str(first["code"]) + ("?" if first["kind"] == "unknown" else "")
    if hour["status"] == "inside":
        return "inside"
    state = {"present": "inversion", "possible": "possible inversion", "not known": "inversion?"}
    return state.get(hour["inversion"], "none")
