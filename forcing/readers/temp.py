"""WMO FM 35 TEMP text, a fixed land station: parts TTAA, TTBB and, where present, TTCC and TTDD.

Code form, groups and code tables: WMO-No. 306, Manual on Codes, Volume I.1, FM 35 TEMP; table 1734 (last
level with wind); single groups in `temp_codes`. Pressure is in whole hPa, in tenths of
hPa above 100 hPa (parts C and D). Groups are of five characters, ``/`` for missing.
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta

from forcing.errors import ProfileError
from forcing.readers.temp_codes import depression, geopotential, temperature, wind
from forcing.readers.text import ASK, NAN, WIDTH, Row, arrays, merge_rows
from forcing.sounding import Repair, Sounding
from forcing.units import KNOT_M_S

PARTS = ("TTAA", "TTBB", "TTCC", "TTDD")
OTHERS = {"UU": "a ship", "II": "a mobile land station", "XX": "a dropsonde", "PP": "a wind-only (PILOT) report"}
START = re.compile(r"\b(TT|UU|II|XX|PP)(AA|BB|CC|DD)\b")
GROUP = re.compile(r"[0-9/]{5}")
HEADING = re.compile(r"[A-Z]{4}[0-9]{0,2}|[A-Z]{3}|NNNN|ZCZC|TEMP")
LAST_WIND = {"A": {"0": 1000, "9": 925, "8": 850, "7": 700, "5": 500, "4": 400, "3": 300, "2": 200, "1": 100}}
LAST_WIND["C"] = {"7": 70, "5": 50, "3": 30, "2": 20, "1": 10}
SECTIONS = ("31313", "41414", "51515", "52525", "61616", "62626")  # release, clouds, regional and national groups
MANDATORY_A = {"00": 1000, "92": 925, "85": 850, "70": 700, "50": 500, "40": 400, "30": 300, "25": 250}
MANDATORY_A |= {"20": 200, "15": 150, "10": 100}
MANDATORY_C = {"70": 70, "50": 50, "30": 30, "20": 20, "10": 10}


@dataclass(frozen=True, slots=True)
class Group:
    """Five characters and the line they stand on."""

    text: str
    line: int

    @property
    def missing(self) -> bool:
        """Tell whether nothing but slashes is there."""
        return set(self.text) <= {"/"}


@dataclass(slots=True)
class Part:
    """One part of a message: its letter, place and groups."""

    letter: str
    line: int
    day: int
    hour: int
    knots: bool
    last: str
    station: str
    groups: list[Group] = field(default_factory=list)
    cut: int = 0


def looks_like(text: str) -> bool:
    """Tell whether a part of an upper-air message starts here."""
    return START.search(text) is not None


def read(text: str, name: str, valid: datetime | None = None) -> list[Sounding]:
    """Read every sounding of a bulletin; parts of one station and hour become one.

    `valid` gives year and month (the message has only day and hour): the nearest date that fits, within 3 h of it.

    Raises
    ------
    ProfileError
        A ship, mobile, dropsonde or wind-only report, a group that is not one, or a time that does not fit `valid`.
    """
    parts = _parts(text, name)
    keys = list(dict.fromkeys((part.station, part.day, part.hour) for part in parts))
    found = [_sounding([p for p in parts if (p.station, p.day, p.hour) == key], name, valid) for key in keys]
    full = [sounding for sounding in found if sounding.pressure.size]
    if not full:
        raise ProfileError(
            f"no level in {', '.join('TT' + p.letter * 2 for p in parts)}",
            place=f"{name}, line {parts[0].line}",
            remedy="give a message with parts TTAA and TTBB that is not NIL",
        )
    return full


def _parts(text: str, name: str) -> list[Part]:
    parts: list[Part] = []
    words = [
        (word, i + 1)
        for i, line in enumerate(text.splitlines())
        for word in line.replace("=", " = ").replace("\x01", " ").replace("\x03", " ").split()
    ]
    at = 0
    while at < len(words):
        match = START.fullmatch(words[at][0])
        if match is None:
            at += 1
            continue
        line = words[at][1]
        if match[1] != "TT":
            raise ProfileError(
                f"{words[at][0]} is {OTHERS[match[1]]}",
                place=f"{name}, line {line}",
                remedy="give a land TEMP (TTAA, TTBB)",
            )
        end = at + 1
        while end < len(words) and words[end][0] != "=" and not START.fullmatch(words[end][0]):
            end += 1
        part = _part(match[2][0], line, words[at + 1 : end], name, final=end == len(words))
        if part is not None:
            parts.append(part)
        at = end
    if not parts:
        raise ProfileError("no part of the message has a station and levels", place=name, remedy="give TTAA and TTBB")
    return parts


def _part(letter: str, line: int, words: Sequence[tuple[str, int]], name: str, *, final: bool) -> Part | None:
    """Check the groups of one part; None where it is NIL. A heading that follows it ends it."""
    place = f"{name}, line {line}"
    if any(word == "NIL" for word, _ in words):
        return None
    groups: list[Group] = []
    cut = 0
    for i, (word, number) in enumerate(words):
        if GROUP.fullmatch(word):
            groups.append(Group(word, number))
        elif HEADING.fullmatch(word) and len(groups) > 2:
            break
        elif final and i == len(words) - 1 and re.fullmatch(r"[0-9/]{1,4}", word):
            cut = 1
        else:
            raise ProfileError(
                f"group {word!r} is not 5 figures or slashes",
                place=f"{name}, line {number}",
                remedy="join a group that was split, or remove what is not of the message",
            )
    if len(groups) < 2:
        raise ProfileError(
            f"TT{letter * 2} ends after {len(groups)} groups", place=place, remedy="give the whole message"
        )
    head, station = groups[0].text, groups[1].text
    if not head[:4].isdigit() or not station.isdigit():
        raise ProfileError(
            f"day, hour and station {head} {station} are not figures", place=place, remedy="correct the two groups"
        )
    day, hour = int(head[:2]), int(head[2:4])
    knots, day = day > 50, day - 50 if day > 50 else day
    if not (1 <= day <= 31 and hour <= 23):
        raise ProfileError(f"day {day} and hour {hour} in {head} do not exist", place=place, remedy="correct the group")
    return Part(letter, line, day, hour, knots, head[4], station, groups[2:], cut)


class _Cursor:
    """Walk over the groups of a part."""

    def __init__(self, groups: Sequence[Group]) -> None:
        self.groups, self.at = groups, 0

    def peek(self) -> str:
        return self.groups[self.at].text if self.at < len(self.groups) else ""

    def line(self) -> int:
        return self.groups[min(self.at, len(self.groups) - 1)].line

    def take(self) -> Group | None:
        """Next group, or None where the message ends."""
        if self.at >= len(self.groups):
            return None
        self.at += 1
        return self.groups[self.at - 1]


def _air(group: Group | None) -> tuple[float, float]:
    """Temperature and dew point of a TTTaDD group, K."""
    if group is None or not group.text[:3].isdigit():
        return NAN, NAN
    warm = temperature(group.text[:3])
    return warm, warm - depression(group.text[3:]) if group.text[3:].isdigit() else NAN


def _flow(group: Group | None, part: Part) -> tuple[float, float]:
    """Speed, m/s, and direction of a ddfff group."""
    if group is None or not group.text.isdigit():
        return NAN, NAN
    angle, speed = wind(group.text)
    return speed * (KNOT_M_S if part.knots else 1.0), angle


def _pressure(code: str, part: Part) -> float:
    """Pressure, Pa, of PPP: thousands are left out up to 100 hPa (parts A, B), tenths of hPa above (C, D)."""
    if not code.isdigit():
        return NAN
    value = int(code)
    if part.letter in "CD":
        return value * 10.0
    return (value + 1000 if value < 100 else value) * 100.0


def _mandatory(part: Part) -> list[Row]:
    """Rows of part A or C, the ground first in A."""
    levels = MANDATORY_A if part.letter == "A" else MANDATORY_C
    last = LAST_WIND[part.letter].get(part.last, 9999 if part.last == "/" else 0)
    cursor, rows = _Cursor(part.groups), []
    before = 0
    while cursor.peek():
        code, line = cursor.peek(), cursor.line()
        if code in SECTIONS:
            break
        head = code[:2]
        if head in ("77", "66", "88"):
            rows += _special(cursor, part)
            continue
        group = cursor.take()
        if part.letter == "A" and head == "99":
            pressure = _pressure(code[2:], part)
            air, flow = _air(cursor.take()), _flow(cursor.take(), part)
            rows.append(Row(line, pressure, NAN, *air, *flow))
        elif head in levels and levels[head] in _next(list(levels.values()), before) and group is not None:
            level = before = levels[head]
            height = geopotential(code[2:], level) if code[2:].isdigit() else NAN
            air = _air(cursor.take())
            flow = _flow(cursor.take(), part) if level >= last else (NAN, NAN)
            rows.append(Row(line, level * 100.0, height, *air, *flow))
        else:
            raise ProfileError(
                f"group {code} is not the next mandatory level in TT{part.letter * 2}",
                place=f"line {line}",
                remedy="correct or complete the groups before it",
            )
    return rows


def _next(levels: list[int], before: int) -> list[int]:
    """Levels that may follow `before` (any may be first); 925 hPa is lacking in older messages."""
    if before == 0:
        return levels
    rest = levels[levels.index(before) + 1 :]
    return rest[:2] if rest[:1] == [925] else rest[:1]


def _special(cursor: _Cursor, part: Part) -> list[Row]:
    """Rows of a tropopause (88) or maximum wind (77, 66) group and what follows it."""
    group = cursor.take()
    if group is None or group.text[2:] == "999":
        return []
    pressure = _pressure(group.text[2:], part)
    if group.text[:2] == "88":
        air = _air(cursor.take())
        row = Row(group.line, pressure, NAN, *air, *_flow(cursor.take(), part))
    else:
        speed, angle = _flow(cursor.take(), part)
        if cursor.peek()[:1] == "4" and cursor.peek() != "41414":  # vertical shear at the maximum, not used
            cursor.take()
        row = Row(group.line, pressure, wind_speed=speed, wind_from=angle)
    return [row] if math.isfinite(pressure) else []


def _significant(part: Part) -> list[Row]:
    """Rows of part B or D: temperature levels, then winds after 21212."""
    cursor, rows, winds = _Cursor(part.groups), [], False
    expected = "00" if part.letter == "B" else "11"
    while cursor.peek():
        code, line = cursor.peek(), cursor.line()
        if code in SECTIONS:
            break
        cursor.take()
        if code == "21212":
            winds, expected = True, ""
            continue
        if not (code[0] == code[1] and code[0].isdigit()) or (expected and code[:2] != expected):
            raise ProfileError(
                f"group {code} does not start a significant level in TT{part.letter * 2}"
                + (f" (expected {expected}...)" if expected else ""),
                place=f"line {line}",
                remedy="correct or complete the groups before it",
            )
        step = (int(code[0]) % 9) + 1
        expected = f"{step}{step}"
        pressure = _pressure(code[2:], part)
        group = cursor.take()
        if math.isnan(pressure) or group is None:
            continue
        if winds:
            speed, angle = _flow(group, part)
            rows.append(Row(line, pressure, wind_speed=speed, wind_from=angle))
        else:
            rows.append(Row(line, pressure, NAN, *_air(group)))
    return rows


def _release(parts: Sequence[Part]) -> tuple[int, int] | None:
    """Hour and minute of release from 8HHMM after 31313."""
    for part in parts:
        codes = [group.text for group in part.groups]
        if "31313" not in codes:
            continue
        for code in codes[codes.index("31313") + 1 :][:3]:
            if code[0] == "8" and code.isdigit() and int(code[1:3]) < 24 and int(code[3:]) < 60:
                return int(code[1:3]), int(code[3:])
            if code in ("41414", "51515", "61616"):
                break
    return None


def _date(parts: Sequence[Part], valid: datetime | None, name: str) -> tuple[datetime | None, datetime | None]:
    """Release time and nominal hour, UTC, from the day and hour of the message and the date around `valid`."""
    if valid is None:
        return None, None
    first = parts[0]
    asked = valid.astimezone(UTC)
    days = [asked.replace(minute=0, second=0, microsecond=0) + timedelta(days=d) for d in (-1, 0, 1)]
    near = [d.replace(hour=first.hour) for d in days if d.day == first.day]
    let_go = _release(parts)
    best = min(near, key=lambda t: abs(t - asked), default=None)
    released = best
    if best is not None and let_go is not None:
        clock = best.replace(hour=let_go[0], minute=let_go[1])
        released = min((clock + timedelta(days=d) for d in (-1, 0, 1)), key=lambda t: abs(t - best))
    if best is None or released is None or min(abs(best - asked), abs(released - asked)) > WIDTH:
        raise ProfileError(
            f"the message is of day {first.day} at {first.hour:02d} UTC, not within 3 h of {asked:%Y-%m-%dT%H:%MZ}",
            place=f"{name}, line {first.line}",
            remedy=f"correct the valid time: {ASK}",
        )
    return released, best


def _sounding(parts: Sequence[Part], name: str, valid: datetime | None) -> Sounding:
    rows: list[Row] = []
    try:
        for part in sorted(parts, key=lambda p: p.letter):
            rows += _mandatory(part) if part.letter in "AC" else _significant(part)
    except ProfileError as error:
        raise ProfileError(error.problem, place=f"{name}, {error.place}", remedy=error.remedy) from None
    grounds = [r.pressure for p in parts for r in _ground(p)]
    merged = merge_rows(row for row in rows if math.isfinite(row.pressure))
    if grounds:  # mandatory levels under the ground carry a reduced height and no measurement
        merged = [row for row in merged if row.pressure <= grounds[0]]
    when, nominal = _date(parts, valid, name)
    first, cut = parts[0], sum(part.cut for part in parts)
    detail = "the last group was not complete: dropped"
    notes = () if when else (f"the message says day {first.day} at {first.hour:02d} UTC, no month or year",)
    return Sounding(
        *arrays(merged),
        lines=tuple(row.line for row in merged),
        valid=when,
        nominal=nominal,
        station=first.station,
        file=name,
        format="temp",
        notes=notes,
        surface=0 if grounds and merged else None,
        repairs=(Repair("message cut short", cut, detail),) if cut else (),
    )


def _ground(part: Part) -> list[Row]:
    if not part.groups:
        return []
    code, number = part.groups[0].text, part.groups[0].line
    if (part.letter == "A" and code[:2] == "99") or (part.letter == "B" and code[:2] == "00"):
        pressure = _pressure(code[2:], part)
        return [Row(number, pressure)] if math.isfinite(pressure) else []
    return []
