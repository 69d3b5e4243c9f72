"""The hourly table and the blocks of hours (today, tonight, tomorrow) of a forecast."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from datetime import datetime, timedelta
from typing import Any, NamedTuple

from slab.wording import OPEN_GROUND_ROUGHNESS_M, US, Clock, Units, cloud_percent, compass, number

__all__ = ["METHODS", "blocks", "hourly_table", "roughness_of"]

Document = Mapping[str, Any]
Column = tuple[str, str, str, Callable[[Any], str]]
MISSING = "-"
METHODS = "depth is by the slab top, by the stress of shear-driven mixing, or by the bulk Richardson number"
NARROW = 2.0  # a night's depths further apart than this factor are told by their greatest, not as a range (our choice)


def roughness_of(document: Document) -> float:
    """Roughness length [m] of the document's surface, short grass where it names none."""
    return float((document.get("surface") or {}).get("roughness_momentum_m") or OPEN_GROUND_ROUGHNESS_M)


def _columns(units: Units, roughness: float) -> list[Column]:
    """Name, unit, series name and format of each column."""
    metric = units.name == "metric"

    def change(value: float) -> str:
        return number(value if metric else value * 1.8, 0.1)

    surface_wind = ("wind", "m/s") if metric else ("wind", "mph")
    return [
        ("state", "", "regime", str),
        ("depth", units.height_unit, "mixing_depth_m", units.height_number),
        ("by", "", "depth_method", lambda text: str(text).split()[0]),
        ("temp", units.temperature_unit, "temperature_2m_C", units.temperature_number),
        ("dew", units.temperature_unit, "dewpoint_2m_C", units.temperature_number),
        ("hum", "%", "relative_humidity_2m_pct", lambda value: number(value, 1.0)),
        (*surface_wind, "wind_10m_m_s", lambda value: number(units.surface_wind_value(value, roughness), 0.1 if metric else 1.0)),
        ("transp", units.speed_unit, "transport_wind_m_s", units.speed_number),
        ("from", "deg", "transport_wind_from_deg", lambda value: number(value % 360.0, 10.0)),
        ("ventil", units.ventilation_unit, "ventilation_m2_s", units.ventilation_number),
        ("cond", units.height_unit, "condensation_level_m", units.height_number),
        ("cum", "%", "cumulus_fraction", cloud_percent),
        ("inv", units.height_unit, "inversion_depth_m", units.height_number),
        ("str", "K" if metric else "°F", "inversion_strength_K", change),
    ]  # fmt: skip


def hourly_table(document: Document, units: Units) -> list[str]:
    """Aligned lines: local hour, UTC hour, then the quantities; ``-`` where a value is missing."""
    series, clock = document["series"], Clock.of(document)
    moments = [datetime.fromisoformat(text) for text in series["time"]]
    columns = [column for column in _columns(units, roughness_of(document)) if column[2] in series]
    grid = [["local", "utc", *(name for name, *_ in columns)], ["", "", *(unit for _, unit, *_ in columns)]]
    for n, moment in enumerate(moments):
        unknown = series["mixing_depth_m"][n] is None
        cells = [
            MISSING if unknown and key == "depth_method" else _cell(series[key][n], form) for _, _, key, form in columns
        ]
        grid.append([f"{clock.local(moment):%H:%M}", f"{moment:%H:%M}", *cells])
    widths = [max(len(row[n]) for row in grid) for n in range(len(grid[0]))]
    words = {n + 2 for n, column in enumerate(columns) if column[2] in {"regime", "depth_method"}}
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


class _Stretch(NamedTuple):
    """Rows of one block of hours, with the edges of the block."""

    name: str
    night: bool
    rows: list[int]
    begin: datetime
    end: datetime
    cut: bool  # whether the run ends inside it


def _stretches(document: Document) -> list[_Stretch]:
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
    edges = [moments[0], *(_edge(moments[rows[0]], light, sun, clock) for light, rows in groups[1:]), moments[-1]]
    found = []
    for n, (light, rows) in enumerate(groups):
        opening = clock.local(moments[rows[0]])
        days = (opening.date() - first).days
        if not light and opening.hour < 12:
            days -= 1  # the small hours belong to the evening before
        found.append(_Stretch(_named(light, days), not light, rows, edges[n], edges[n + 1], n == len(groups) - 1))
    return found


def _edge(row: datetime, light: bool, sun: Document, clock: Clock) -> datetime:
    """Sunrise or sunset at or just before the first row of a block."""
    rise, fall = sun.get("sunrise"), sun.get("sunset")
    if not (rise and fall):
        return clock.local(row).replace(hour=6 if light else 18, minute=0)
    moment = datetime.fromisoformat(rise if light else fall)
    return row - timedelta(seconds=(row - moment).total_seconds() % 86400.0)


def _named(light: bool, days: int) -> str:
    if light:
        return "today" if days == 0 else "tomorrow" if days == 1 else f"day {days + 1}"
    if days < 0:
        return "before sunrise"
    return "tonight" if days == 0 else "tomorrow night" if days == 1 else f"night {days + 1}"


def _is_day(moment: datetime, sun: Document, clock: Clock) -> bool:
    rise, fall = sun.get("sunrise"), sun.get("sunset")
    if rise and fall:
        opened = datetime.fromisoformat(rise)
        length = (datetime.fromisoformat(fall) - opened).total_seconds() % 86400.0
        return (moment - opened).total_seconds() % 86400.0 < length
    return 6 <= clock.local(moment).hour < 18


def blocks(document: Document) -> list[str]:
    """A few lines a block in us units: depth at its deepest hour, ranges of temperature, humidity and winds."""
    clock = Clock.of(document)
    roughness = roughness_of(document)
    lines = []

    def near_ground(value: float) -> float:
        return US.surface_wind_value(value, roughness)

    for block in _stretches(document):
        series = {key: [values[n] for n in block.rows] for key, values in document["series"].items()}
        begin, end = clock.local(block.begin), clock.local(block.end)
        lines.append(f"{block.name}, {begin:%H:%M} to {end:%H:%M} local{', where the run ends' if block.cut else ''}")
        lines += [f"  mixing depth      {text}" for text in _depths(document, series, clock, night=block.night)]
        which, pick = ("lowest", min) if block.night else ("highest", max)
        lines.append(
            f"  {which + ' temp':<16}  {_five(_pick(series, 'temperature_2m_C', pick, US.temperature_value), '°F')}"
        )
        dry, dry_pick = ("highest", max) if block.night else ("lowest", min)
        lines.append(
            f"  {dry + ' humid':<16}  {_five(_pick(series, 'relative_humidity_2m_pct', dry_pick, float), '%')}"
        )
        lines.append(f"  20 ft wind        {_range(series.get('wind_10m_m_s', []), near_ground, 'mph')}")
        wind = _range(series.get("transport_wind_m_s", []), US.speed_value, "kt")
        lines.append(f"  transport wind    {wind}{_from(series)}")
        lines.append(f"  ventilation       {_most(series, clock)}")
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


def _depths(document: Document, series: Document, clock: Clock, *, night: bool) -> list[str]:
    """A night's range; else the greatest depth with its hour, and between which hours it is over half of that."""
    elevation = document["site"].get("elevation_m")
    known = [
        (depth, time) for depth, time in zip(series["mixing_depth_m"], series["time"], strict=True) if depth is not None
    ]
    if not known:
        return ["not known"]
    low, (high, when) = min(known)[0], max(known, key=lambda pair: pair[0])
    if night and high <= NARROW * low:
        return [_heights(low, high, elevation)]
    summary = document["summary"]
    exact, exact_time = summary.get("mixing_depth_max_m"), summary.get("mixing_depth_max_time")
    if exact is not None and exact_time is not None and series["time"][0] <= exact_time <= series["time"][-1]:
        high, when = exact, exact_time
    limit = 500.0 * max(1.0, US.height_value(high) // 1000.0)
    deep = [time for depth, time in known if US.height_value(depth) > limit]
    lines = [f"{_heights(high, high, elevation)}, at {_hour(when, clock)}"]
    if len(deep) > 1 and not night:
        lines.append(f"over {limit:.0f} ft above ground from {_hour(deep[0], clock)} to {_hour(deep[-1], clock)}")
    return lines


def _hour(iso: str, clock: Clock) -> str:
    return f"{clock.local(datetime.fromisoformat(iso)):%H:%M}"


def _heights(low: float, high: float, elevation: float | None) -> str:
    text = f"{_span(US.height_number(low), US.height_number(high))} ft above ground"
    if elevation is not None:
        above = [number(US.height_value(value + elevation), 100.0) for value in (low, high)]
        text += f", {_span(*above)} ft above sea level"
    return text


def _most(series: Document, clock: Clock) -> str:
    """Greatest ventilation with its hour."""
    rows = zip(series.get("ventilation_m2_s", []), series["time"], strict=False)
    known = [(value, time) for value, time in rows if value is not None]
    if not known:
        return "not known"
    most, when = max(known)
    return f"up to {US.ventilation(most)}, at {_hour(when, clock)}"


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
