"""IGRA version 2 text (NOAA NCEI, igra2-data-format.txt): fixed columns, one or many records.

Header: ``#``, station 2-12, year 14-17, month 19-20, day 22-23, hour 25-26 (99 missing), release time 28-31 (HHMM,
9999 missing), number of levels 33-36, sources 38-54, latitude 56-62 and longitude 64-71 in 1e-4 degrees.
Levels: type 1 and 2 (the second is 1 at the ground), pressure 10-15 in Pa, height 17-21 in m above sea level,
temperature 23-27 in tenths C, relative humidity 29-33 in tenths %, dew-point depression 35-39 in tenths K, wind
direction 41-45, wind speed 47-51 in tenths m/s. -9999 is missing, -8888 was removed by the archive's own tests.
"""

from __future__ import annotations

import math
import re
from datetime import UTC, datetime, timedelta

from forcing.air import ZERO_CELSIUS, dew_point, saturation_vapour_pressure
from forcing.errors import ProfileError
from forcing.readers.text import NAN, WIDTH, Row, arrays
from forcing.sounding import Repair, Sounding

HEADER = re.compile(r"#[A-Z0-9]{11} [0-9 ]{4} [0-9 ]{2} [0-9 ]{2} [0-9 ]{2} [0-9 ]{4} [0-9 ]{4}")
MISSING = (-9999, -8888)


def looks_like(text: str) -> bool:
    """Tell whether the first line with text is a header of this format."""
    return HEADER.match(text.lstrip()[:200]) is not None


def read(text: str, name: str, valid: datetime | None = None) -> list[Sounding]:
    """Read the records of a file; with `valid` only those within 3 h of it, if there are any.

    Raises
    ------
    ProfileError
        A line that is not a header or a level, or a number that is not one.
    """
    lines = text.splitlines()
    heads = [i for i, line in enumerate(lines) if line.startswith("#")]
    if not heads:
        raise ProfileError("no header line starts with #", place=f"{name}, line 1", remedy="give IGRA version 2 text")
    spans = list(zip(heads, [*heads[1:], len(lines)], strict=True))
    if valid is not None:
        near = [s for s in spans if any(abs(t - valid) <= WIDTH for t in _times(lines[s[0]], s[0] + 1, name) if t)]
        spans = near or spans
    return [_record(lines, first, last, name) for first, last in spans]


def _whole(line: str, first: int, last: int, what: str, number: int, name: str) -> int:
    """Read the whole number in columns `first` to `last` (counted from 1); blank is missing."""
    text = line[first - 1 : last].strip()
    if not text:
        return -9999
    try:
        return int(text)
    except ValueError:
        raise ProfileError(
            f"{what} {text!r} in columns {first}-{last} is not a whole number",
            place=f"{name}, line {number}",
            remedy="columns must stay where the archive put them; fetch the file again",
        ) from None


def _times(line: str, number: int, name: str) -> tuple[datetime | None, datetime | None]:
    """Release time and nominal hour of a header, UTC."""

    def part(first: int, last: int, what: str) -> int:
        return _whole(line, first, last, what, number, name)

    year, month, day = part(14, 17, "year"), part(19, 20, "month"), part(22, 23, "day")
    try:
        date = datetime(year, month, day, tzinfo=UTC)
    except ValueError:
        raise ProfileError(
            f"date {line[13:23]!r} does not exist", place=f"{name}, line {number}", remedy="correct the header"
        ) from None
    hour, release = part(25, 26, "hour"), part(28, 31, "release time")
    nominal = date + timedelta(hours=hour) if 0 <= hour <= 23 else None
    hours, minutes = divmod(release, 100)
    if not 0 <= hours <= 23:
        return nominal, nominal
    let_go = date + timedelta(hours=hours, minutes=minutes if minutes < 60 else 0)
    if nominal is not None:  # the date belongs to the nominal hour, so 2331 for hour 00 is the evening before
        let_go = min((let_go + timedelta(days=d) for d in (-1, 0, 1)), key=lambda t: abs(t - nominal))
    return let_go, nominal


def _scaled(value: int, scale: float, offset: float = 0.0) -> float:
    return NAN if value in MISSING else value * scale + offset


def _level(line: str, number: int, name: str) -> tuple[Row, bool]:
    if len(line) < 51:
        line = line.ljust(51)

    def part(first: int, last: int, what: str) -> int:
        return _whole(line, first, last, what, number, name)

    if line[0] not in "123":
        raise ProfileError(
            f"{line[:8]!r} starts neither a header nor a level",
            place=f"{name}, line {number}",
            remedy="remove the line",
        )
    temperature = _scaled(part(23, 27, "temperature"), 0.1, ZERO_CELSIUS)
    depression = _scaled(part(35, 39, "dew-point depression"), 0.1)
    dewpoint = temperature - depression
    humidity = _scaled(part(29, 33, "relative humidity"), 0.001)
    if math.isnan(dewpoint) and math.isfinite(temperature) and humidity > 0.0:
        dewpoint = dew_point(humidity * saturation_vapour_pressure(temperature))
    row = Row(
        number,
        _scaled(part(10, 15, "pressure"), 1.0),
        _scaled(part(17, 21, "height"), 1.0),
        temperature,
        dewpoint,
        _scaled(part(47, 51, "wind speed"), 0.1),
        _scaled(part(41, 45, "wind direction"), 1.0),
    )
    return row, line[1] == "1"


def _degrees(line: str, first: int, last: int, what: str, number: int, name: str) -> float | None:
    value = _whole(line, first, last, what, number, name)
    return None if value in MISSING or abs(value) > 1_800_000 else value * 1e-4


def _record(lines: list[str], first: int, last: int, name: str) -> Sounding:
    head, number = lines[first], first + 1
    valid, nominal = _times(head, number, name)
    declared = _whole(head, 33, 36, "number of levels", number, name)
    body = [(i + 1, lines[i]) for i in range(first + 1, last) if lines[i].strip()]
    repairs: tuple[Repair, ...] = ()
    if body and last == len(lines) and len(body) <= declared and len(body[-1][1]) < 51:
        body.pop()  # a last line without its last column was cut off in transfer
    if len(body) < declared:
        lost = declared - len(body)
        repairs += (Repair("record cut short", lost, f"header declares {declared} levels, {len(body)} are there"),)
    rows: list[Row] = []
    ground: int | None = None
    for line_number, line in body:
        row, is_ground = _level(line, line_number, name)
        if is_ground and ground is None:
            ground = len(rows)
        rows.append(row)
    height = rows[ground].height if ground is not None else NAN
    return Sounding(
        *arrays(rows),
        lines=tuple(row.line for row in rows),
        valid=valid,
        nominal=nominal,
        latitude=_degrees(head, 56, 62, "latitude", number, name),
        longitude=_degrees(head, 64, 71, "longitude", number, name),
        elevation=height if math.isfinite(height) else None,
        station=head[1:12].strip(),
        file=name,
        format="igra",
        surface=ground,
        repairs=repairs,
    )
