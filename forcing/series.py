"""Time tables: CSV with a ``time`` column, checked on reading; the rules every such table shares.

Blank cells are missing. Values are linear in time between the values that are there; a direction turns the
shorter way round. Between two values more than three hours apart nothing is known.
"""

from __future__ import annotations

import csv
import difflib
import math
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from forcing.errors import WeatherError

Array = NDArray[np.float64]

#: Longest gap [s] that is bridged by interpolation (our choice).
LONGEST_GAP_S = 3 * 3600.0
_MISSING = frozenset({"", "nan", "na", "null", "-"})


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a time table: its bounds in its own unit, and the way to SI.

    ``si = value * factor + offset`` in ``si_unit``.
    """

    low: float
    high: float
    factor: float = 1.0
    offset: float = 0.0
    si_unit: str = ""
    direction: bool = False

    def si(self, value: float) -> float:
        """Bring a value of the column to SI."""
        return value * self.factor + self.offset


@dataclass(frozen=True, slots=True)
class Series:
    """The values of one column that are there.

    Attributes
    ----------
    posix : array (n,)
        Seconds since 1970 UTC, increasing.
    values : array (n,)
        SI (degrees for a direction), no NaN.
    """

    posix: Array
    values: Array
    direction: bool = False

    def sample(self, posix: Array, *, hold: bool) -> Array:
        """Interpolate linearly; outside the series hold the end value, or give NaN there and in long gaps."""
        if self.direction:
            radians = np.radians(self.values)
            east = np.interp(posix, self.posix, np.sin(radians))
            north = np.interp(posix, self.posix, np.cos(radians))
            found = np.degrees(np.arctan2(east, north)) % 360.0
            found = np.where(found >= 360.0, 0.0, found)  # the remainder of a tiny negative angle rounds to 360
        else:
            found = np.interp(posix, self.posix, self.values)
        if hold:
            return np.asarray(found, dtype=np.float64)
        outside = (posix < self.posix[0]) | (posix > self.posix[-1])
        after = np.clip(np.searchsorted(self.posix, posix, side="left"), 1, max(len(self.posix) - 1, 1))
        if len(self.posix) > 1:
            wide = self.posix[after] - self.posix[after - 1] > LONGEST_GAP_S
            on_value = np.isin(posix, self.posix)
            outside |= wide & ~on_value
        return np.where(outside, np.nan, found)

    def gap(self, start: float, end: float) -> tuple[float, float] | None:
        """First pair of times [s] more than three hours apart that overlaps the span from start to end, or None."""
        for before, after in zip(self.posix[:-1], self.posix[1:], strict=True):
            if after - before > LONGEST_GAP_S and after > start and before < end:
                return float(before), float(after)
        return None


def iso(posix: float) -> str:
    """UTC time as text, for messages."""
    return datetime.fromtimestamp(posix, UTC).strftime("%Y-%m-%dT%H:%MZ")


def parse_time(text: str, *, place: str) -> datetime:
    """Aware UTC datetime from ISO 8601 text with an offset; a naive time is refused."""
    try:
        when = datetime.fromisoformat(text.strip())
    except ValueError:
        raise WeatherError(
            f"'{text}' is not an ISO 8601 time", place=place, remedy="write for example 2026-07-01T12:00Z"
        ) from None
    if when.tzinfo is None:
        raise WeatherError(
            f"time '{text}' has no offset",
            place=place,
            remedy="add Z for UTC or an offset such as +02:00",
        )
    return when.astimezone(UTC)


def suggestion(name: str, known: Iterable[str]) -> str:
    """A remedy for an unknown name: the nearest known one, else the list."""
    names = list(known)
    near = difflib.get_close_matches(name.lower(), names, n=1, cutoff=0.6)
    return f"did you mean '{near[0]}'?" if near else "known: " + ", ".join(names)


def read_text(path: Path, *, error: Callable[..., Exception] = WeatherError) -> str:
    """Text of a UTF-8 file, with the typed error for a missing, unreadable, binary or empty one."""
    try:
        data = path.read_bytes()
    except FileNotFoundError:
        raise error("no such file", place=str(path), remedy="check the name and the folder") from None
    except OSError as problem:
        raise error(f"cannot be read: {problem.strerror}", place=str(path), remedy="name a readable file") from None
    if b"\0" in data:
        raise error("is a binary file, not text", place=str(path), remedy="name a text file")
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        line = data[: problem.start].count(b"\n") + 1
        raise error("is not UTF-8 text", place=f"{path}:{line}", remedy="save the file as UTF-8") from None
    if not text.strip():
        raise error("is empty", place=str(path), remedy="name a file with content")
    return text


def _header(cells: Sequence[str], known: Callable[[str], Column | None], names: Sequence[str], place: str) -> None:
    if len(cells) == 1 and (";" in cells[0] or "\t" in cells[0]):
        raise WeatherError("columns are not separated by commas", place=place, remedy="separate columns with commas")
    seen: set[str] = set()
    for name in cells:
        if name in seen:
            raise WeatherError(f"column '{name}' appears twice", place=place, remedy="keep one of them")
        seen.add(name)
        if name != "time" and known(name) is None:
            raise WeatherError(f"unknown column '{name}'", place=place, remedy=suggestion(name, names))
    if "time" not in seen:
        raise WeatherError("has no column 'time'", place=place, remedy="add a column time, ISO 8601 with offset")


def _value(text: str, name: str, column: Column, place: str) -> float:
    if text.lower() in _MISSING:
        return math.nan
    try:
        value = float(text)
    except ValueError:
        raise WeatherError(
            f"{name} is '{text}', not a number", place=place, remedy="leave it blank if missing"
        ) from None
    if not column.low <= value <= column.high:
        raise WeatherError(
            f"{name} is {text}, outside {column.low:g} to {column.high:g}",
            place=place,
            remedy="check the unit in the name",
        )
    return column.si(value)


def read_table(path: Path, known: Callable[[str], Column | None], names: Sequence[str]) -> dict[str, Series]:
    """Read a time table.

    Parameters
    ----------
    path : Path
        CSV, UTF-8; lines that start with ``#`` are comments.
    known : callable
        Column name to its `Column`, None for a name that is not known.
    names : sequence of str
        Names to suggest.

    Returns
    -------
    dict
        Column name to its SI `Series`; wholly blank columns are left out.

    Raises
    ------
    WeatherError
        Naming the file, the line, the value and a remedy.
    """
    lines = [
        (number, line)
        for number, line in enumerate(read_text(path).splitlines(), start=1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if not lines:
        raise WeatherError("holds comments only", place=str(path), remedy="add a header line and rows")
    rows = [(number, [cell.strip() for cell in next(csv.reader([line]))]) for number, line in lines]
    number, header = rows[0]
    _header(header, known, names, f"{path}:{number}")
    times: list[float] = []
    columns: dict[str, list[float]] = {name: [] for name in header if name != "time"}
    for number, cells in rows[1:]:
        place = f"{path}:{number}"
        if len(cells) != len(header):
            raise WeatherError(
                f"{len(cells)} cells under {len(header)} columns", place=place, remedy="leave a missing value blank"
            )
        row = dict(zip(header, cells, strict=True))
        when = parse_time(row.pop("time"), place=place).timestamp()
        if times and when <= times[-1]:
            word = "the same as" if when == times[-1] else "earlier than"
            raise WeatherError(
                f"time {iso(when)} is {word} the row before",
                place=place,
                remedy="put the rows in order of time, each once",
            )
        times.append(when)
        for name, text in row.items():
            column = known(name)
            if column is not None:
                columns[name].append(_value(text, name, column, place))
    if not times:
        raise WeatherError("has a header but no rows", place=str(path), remedy="add rows")
    return _series(np.asarray(times), columns, known)


def _series(
    posix: Array, columns: Mapping[str, Sequence[float]], known: Callable[[str], Column | None]
) -> dict[str, Series]:
    out: dict[str, Series] = {}
    for name, values in columns.items():
        array = np.asarray(values, dtype=np.float64)
        there = np.isfinite(array)
        column = known(name)
        if there.any() and column is not None:
            out[name] = Series(posix[there], array[there], column.direction)
    return out


def check_span(series: Series, name: str, start: float, end: float, *, place: str, ends: bool) -> None:
    """Raise where a series does not serve a span.

    Parameters
    ----------
    start, end : float
        The needed span [s since 1970 UTC].
    ends : bool
        Whether the series must also reach both ends.

    Raises
    ------
    WeatherError
        Naming the two times of a gap over three hours, or the end that is not covered.
    """
    gap = series.gap(start, end)
    if gap is not None:
        raise WeatherError(
            f"{name} has a gap from {iso(gap[0])} to {iso(gap[1])}, over 3 h",
            place=place,
            remedy="fill the gap with rows",
        )
    if ends and (series.posix[0] > start or series.posix[-1] < end):
        raise WeatherError(
            f"{name} covers {iso(series.posix[0])} to {iso(series.posix[-1])} but the run needs {iso(start)} to {iso(end)}",
            place=place,
            remedy="add rows, or shorten the run with hours",
        )
