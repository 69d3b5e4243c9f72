"""The hours of a spray calendar as aligned text."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from datetime import datetime
from typing import Any

from slab.spray_words import plan_words, spray_wind
from slab.wording import Clock, Units, number

__all__ = ["hourly_lines"]

Document = Mapping[str, Any]
Hour = Mapping[str, Any]
Column = tuple[str, str, Callable[[Hour], str], bool]  # heading, unit, text of an hour, whether it is words
MISSING = "-"


def hourly_lines(document: Document, units: Units) -> list[str]:
    """Title, two heading lines, then a line for every local hour under its date."""
    clock, (low, high) = Clock.of(document), document["between_m"]
    columns = _columns(document, units)
    grid = [["local", *(name for name, *_ in columns)], [clock.offset()[3:], *(unit for _, unit, *_ in columns)]]
    dates = []
    for hour in document["calendar"]:
        local = clock.local(datetime.fromisoformat(hour["start"]))
        dates.append(local.date())
        grid.append([f"{local:%H:%M}", *(text(hour) for _, _, text, _ in columns)])
    widths = [max(len(row[n]) for row in grid) for n in range(len(grid[0]))]
    words = {n + 1 for n, column in enumerate(columns) if column[3]}
    lines = [_aligned(row, widths, words) for row in grid]
    out = [
        f"hour by hour: values of its middle; stability and difference from {low:g} to {high:g} m; heights above ground;",
        "invers and answer: the worst of its begin, middle and end; since: hours since the last break-up;",
        "a dash is none or not known; (+n): n more reasons, in the JSON",
        *lines[:2],
    ]
    day = None
    for date, line in zip(dates, lines[2:], strict=True):
        if date != day:
            day = date
            out.append(f"{date:%A} {date.day} {date:%B %Y}")
        out.append(line)
    return out


def _aligned(row: list[str], widths: list[int], words: set[int]) -> str:
    cells = (x.ljust(w) if n in words else x.rjust(w) for n, (x, w) in enumerate(zip(row, widths, strict=True)))
    return "  ".join(cells).rstrip()


def _columns(document: Document, units: Units) -> list[Column]:
    metric = units.name == "metric"
    kelvin, wind = ("K", "m/s") if metric else ("°F", "mph")
    boom = document["limits"]["wind_height_m"]
    tower: list[Column] = []
    if document["observed"] is not None:
        tower = [
            ("read", kelvin, _difference("observed_difference_K", metric), False),
            ("model", kelvin, _difference("temperature_difference_K", metric), False),
        ]

    def temperature(hour: Hour) -> str:
        value = hour["temperature_C"]
        return MISSING if value is None else number(units.temperature_value(value), 0.1 if metric else 1.0)

    boom_column: list[Column] = [] if boom == 10.0 else [(f"w{boom:g}m", wind, _wind("wind_boom_m_s", units), False)]
    return [
        ("invers", "", lambda hour: str(hour["inversion"]), True),
        ("stability", "", lambda hour: str(hour["stability"]).removeprefix("inversion, "), True),
        ("from", units.height_unit, _height("inversion_from_m", units), False),
        ("to", units.height_unit, _height("inversion_to_m", units), False),
        (f"{kelvin}/8m", "", _difference("per_8m_K", metric), False),
        *tower,
        ("regime", "", lambda hour: hour["regime"] or MISSING, True),
        *boom_column,
        ("w10m", wind, _wind("wind_10m_m_s", units), False),
        ("deltaT", kelvin, _difference("delta_t_K", metric), False),
        ("hum", "%", _plain("humidity_pct", 1.0), False),
        ("temp", units.temperature_unit, temperature, False),
        ("since", "h", _plain("since_break_up_h", 1.0), False),
        ("rain", "mm/h", _plain("rain_mm_h", 0.1), False),
        ("answer", "", _answer, True),
    ]


def _plain(key: str, step: float) -> Callable[[Hour], str]:
    return lambda hour: MISSING if hour[key] is None else number(hour[key], step)


def _difference(key: str, metric: bool) -> Callable[[Hour], str]:
    scale = 1.0 if metric else 1.8
    return lambda hour: MISSING if hour[key] is None else number(hour[key] * scale, 0.1)


def _wind(key: str, units: Units) -> Callable[[Hour], str]:
    return lambda hour: MISSING if hour[key] is None else spray_wind(units, hour[key]).split()[0]


def _height(key: str, units: Units) -> Callable[[Hour], str]:
    def text(hour: Hour) -> str:
        metres = hour[key]
        if metres is None:
            return MISSING
        fine = 0.5 if metres < 10.0 and units.name == "metric" else 1.0
        return number(units.height_value(metres), 10.0 if metres >= 20.0 else fine)

    return text


def _answer(hour: Hour) -> str:
    """Status, first reason, the mark of a plan, and dew or hoar frost."""
    text = str(hour["status"])
    if hour["reasons"]:
        more = len(hour["reasons"]) - 1
        text += f": {hour['reasons'][0]['text']}" + (f" (+{more})" if more else "")
    wet = f"; {hour['deposit']}" if hour["deposit"] not in (None, "none") else ""
    return f"{text} [{plan_words(hour['plan_only'])}]{wet}"
