"""The hourly table and the blocks of hours (today, tonight, tomorrow) of a forecast."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from datetime import datetime
from typing import Any

from slab.wording import OPEN_GROUND_ROUGHNESS_M, US, Clock, Units, compass, number, two_figures

__all__ = ["blocks", "hourly_table", "roughness_of"]

Document = Mapping[str, Any]
Column = tuple[str, str, str, Callable[[Any], str]]
MISSING = "-"


def roughness_of(document: Document) -> float:
    """Roughness length [m] of the document's surface, short grass where it names none."""
    return float((document.get("surface") or {}).get("roughness_momentum_m") or OPEN_GROUND_ROUGHNESS_M)


def _columns(units: Units, roughness: float) -> list[Column]:
    """Name, unit, series name and format of each column."""
    metric = units.name == "metric"
    temperature_step = 0.1 if metric else 1.0

    def height(value: float) -> str:
        return number(units.height_value(value), 10.0 if metric else 50.0)

    def warmth(value: float) -> str:
        return number(units.temperature_value(value), temperature_step)

    def change(value: float) -> str:
        return number(value if metric else value * 1.8, 0.1)

    surface_wind = ("wind", "m/s") if metric else ("wind", "mph")
    return [
        ("state", "", "regime", str),
        ("depth", units.height_unit, "mixing_depth_m", height),
        ("temp", units.temperature_unit, "temperature_2m_C", warmth),
        ("dew pt", units.temperature_unit, "dewpoint_2m_C", warmth),
        ("humid", "%", "relative_humidity_2m_pct", lambda value: number(value, 1.0)),
        (*surface_wind, "wind_10m_m_s", lambda value: number(units.surface_wind_value(value, roughness), 0.1 if metric else 1.0)),
        ("transp", units.speed_unit, "transport_wind_m_s", lambda value: number(units.speed_value(value), 0.1 if metric else 1.0)),
        ("from", "deg", "transport_wind_from_deg", lambda value: number(value % 360.0, 10.0)),
        ("ventil", units.ventilation_unit, "ventilation_m2_s", lambda value: two_figures(units.ventilation_value(value))),
        ("condens", units.height_unit, "condensation_level_m", height),
        ("cumul", "%", "cumulus_fraction", lambda value: number(100.0 * value, 1.0)),
        ("invers", units.height_unit, "inversion_depth_m", height),
        ("stren", "K" if metric else "°F", "inversion_strength_K", change),
    ]  # fmt: skip


def hourly_table(document: Document, units: Units) -> list[str]:
    """Aligned lines: local hour, UTC hour, then the quantities; ``-`` where a value is missing."""
    series, clock = document["series"], Clock.of(document)
    moments = [datetime.fromisoformat(text) for text in series["time"]]
    columns = [column for column in _columns(units, roughness_of(document)) if column[2] in series]
    offset = clock.offset()
    grid = [["local", "utc", *(name for name, *_ in columns)], [offset[3:], "", *(unit for _, unit, *_ in columns)]]
    for n, moment in enumerate(moments):
        cells = [_cell(series[key][n], form) for _, _, key, form in columns]
        grid.append([f"{clock.local(moment):%H:%M}", f"{moment:%H:%M}", *cells])
    widths = [max(len(row[n]) for row in grid) for n in range(len(grid[0]))]
    words = {n + 2 for n, column in enumerate(columns) if column[3] is str}
    lines = [_aligned(row, widths, words) for row in grid]
    out = lines[:2]
    day = None
    for moment, line in zip(moments, lines[2:], strict=True):
        local = clock.local(moment)
        if local.date() != day:
            day = local.date()
            out.append(f"{local:%A} {local.day} {local:%B %Y}")
        out.append(line)
    return out


def _cell(value: Any, form: Callable[[Any], str]) -> str:
    return MISSING if value is None else form(value)


def _aligned(row: Sequence[str], widths: Sequence[int], words: set[int]) -> str:
    cells = [
        text.ljust(w) if n in words else text.rjust(w) for n, (text, w) in enumerate(zip(row, widths, strict=True))
    ]
    return "  ".join(cells).rstrip()


def _stretches(document: Document) -> Iterator[tuple[str, list[int]]]:
    """Rows grouped into today, tonight, tomorrow, ... by the sun; 06 to 18 local where the sun's times are missing."""
    clock = Clock.of(document)
    sun = document.get("sun") or {}
    moments = [datetime.fromisoformat(text) for text in document["series"]["time"]]
    groups: list[tuple[bool, list[int]]] = []
    for n, moment in enumerate(moments):
        light = _is_day(moment, sun, clock)
        if not groups or groups[-1][0] != light:
            groups.append((light, []))
        groups[-1][1].append(n)
    first = clock.local(moments[0]).date()
    for light, rows in groups:
        opening = clock.local(moments[rows[0]])
        days = (opening.date() - first).days
        if not light and opening.hour < 12 and days > 0:
            days -= 1  # the small hours belong to the evening before
        yield _named(light, days), rows


def _named(light: bool, days: int) -> str:
    if light:
        return "today" if days == 0 else "tomorrow" if days == 1 else f"day {days + 1}"
    return "tonight" if days == 0 else "tomorrow night" if days == 1 else f"night {days + 1}"


def _is_day(moment: datetime, sun: Document, clock: Clock) -> bool:
    rise, fall = sun.get("sunrise"), sun.get("sunset")
    if rise and fall:
        opened = datetime.fromisoformat(rise)
        length = (datetime.fromisoformat(fall) - opened).total_seconds() % 86400.0
        return (moment - opened).total_seconds() % 86400.0 < length
    return 6 <= clock.local(moment).hour < 18


def blocks(document: Document) -> list[str]:
    """One line a block in us units: ranges of depth, temperature, humidity and winds."""
    clock = Clock.of(document)
    elevation = document["site"].get("elevation_m")
    roughness = roughness_of(document)
    lines = []

    def near_ground(value: float) -> float:
        return US.surface_wind_value(value, roughness)

    for name, rows in _stretches(document):
        series = {key: [values[n] for n in rows] for key, values in document["series"].items()}
        begin, end = (clock.local(datetime.fromisoformat(series["time"][n])) for n in (0, -1))
        lines.append(f"{name}, {begin:%H:%M} to {end:%H:%M} local")
        lines.append(f"  mixing depth      {_depths(series.get('mixing_depth_m', []), elevation)}")
        night = name.endswith("night") or name.startswith("night")
        which, pick = ("lowest", min) if night else ("highest", max)
        lines.append(
            f"  {which + ' temp':<16}  {_five(_pick(series, 'temperature_2m_C', pick, US.temperature_value), '°F')}"
        )
        dry, dry_pick = ("highest", max) if night else ("lowest", min)
        lines.append(
            f"  {dry + ' humid':<16}  {_five(_pick(series, 'relative_humidity_2m_pct', dry_pick, float), '%')}"
        )
        lines.append(f"  20 ft wind        {_range(series.get('wind_10m_m_s', []), US.surface_wind_value, 'mph')}")
        wind = _range(series.get("transport_wind_m_s", []), US.speed_value, "kt")
        lines.append(f"  transport wind    {wind}{_from(series)}")
        vent = [value for value in series.get("ventilation_m2_s", []) if value is not None]
        lines.append(f"  ventilation       {'not known' if not vent else 'up to ' + US.ventilation(max(vent))}")
    return lines


def _pick(series: Document, key: str, pick: Callable[..., Any], convert: Callable[[float], float]) -> float | None:
    known = [value for value in series.get(key, []) if value is not None]
    return convert(pick(known)) if known else None


def _five(value: float | None, unit: str) -> str:
    """Five-unit range that holds a value."""
    if value is None:
        return "not known"
    low = 5 * int(value // 5)
    if unit == "%" and low >= 100:
        low = 95
    return f"{low} to {low + 5} {unit}"


def _depths(values: Sequence[float | None], elevation: float | None) -> str:
    known = [value for value in values if value is not None]
    if not known:
        return "not known"
    low, high = min(known), max(known)
    text = f"{_span(US.height(low).split()[0], US.height(high).split()[0])} ft above ground"
    if elevation is not None:
        above = [number(US.height_value(value + elevation), 100.0) for value in (low, high)]
        text += f", {_span(*above)} ft above sea level"
    return text


def _range(values: Sequence[float | None], convert: Callable[[float], float], unit: str) -> str:
    known = [convert(value) for value in values if value is not None]
    return f"{_span(number(min(known), 1.0), number(max(known), 1.0))} {unit}" if known else "not known"


def _span(low: str, high: str) -> str:
    return low if low == high else f"{low} to {high}"


def _from(series: Document) -> str:
    known = [value for value in series.get("transport_wind_from_deg", []) if value is not None]
    if not known:
        return ""
    first, last = compass(known[0]), compass(known[-1])
    return f" from the {first}" if first == last else f" from the {first}, later {last}"
