"""From bytes to text lines, and from rows of numbers to a `Sounding`: what every reader shares."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace
from datetime import datetime, timedelta
from typing import NamedTuple

import numpy as np

from forcing.errors import ProfileError
from forcing.sounding import Array, Sounding

WIDTH = timedelta(hours=3)  # a release belongs to an asked time within this
NAN = float("nan")
ASK = "--valid TIME, or valid under [profile] of a scenario"

# First bytes of files that are not text (their published format descriptions), and what to do about each.
MAGIC = (
    (b"BUFR", "a BUFR message", "decode it to a profile CSV first"),
    (b"GRIB", "a GRIB message", "give a sounding, not a field"),
    (b"\x1f\x8b", "a gzip archive", "unpack it first"),
    (b"PK\x03\x04", "a zip archive", "unpack it first"),
    (b"\x89HDF", "an HDF5 or netCDF-4 file", "write the profile as CSV"),
    (b"CDF", "a netCDF file", "write the profile as CSV"),
    (b"%PDF", "a PDF document", "write the profile as CSV"),
    (b"\x89PNG", "a picture", "give the file of numbers behind it"),
)


@dataclass(frozen=True, slots=True)
class Row:
    """One level in SI; NaN where missing."""

    line: int
    pressure: float = NAN
    height: float = NAN
    temperature: float = NAN
    dewpoint: float = NAN
    wind_speed: float = NAN
    wind_from: float = NAN


def decode(data: bytes, name: str) -> str:
    """Text of a file: UTF-8 (a leading mark is dropped), UTF-16 with its mark, or else latin-1; refuse binary."""
    if not data.strip():
        raise ProfileError("the file is empty (0 levels)", place=name, remedy="give a file that holds a sounding")
    head = data[:400]
    for magic, what, remedy in MAGIC:
        if head.startswith(magic) or (magic == b"BUFR" and magic in head):
            raise ProfileError(f"this is {what}, not text", place=name, remedy=remedy)
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        return _decoded(data, "utf-16", name)
    if b"\x00" in data:
        at = data.index(b"\x00")
        raise ProfileError(f"byte {at} is 0: not a text file", place=name, remedy="give CSV, TEMP or IGRA text")
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError:
        return data.decode("latin-1")


def _decoded(data: bytes, encoding: str, name: str) -> str:
    try:
        return data.decode(encoding)
    except UnicodeDecodeError as error:
        raise ProfileError(
            f"not readable as {encoding} at byte {error.start}", place=name, remedy="save it as UTF-8 text"
        ) from error


def number(text: str) -> float:
    """Read a decimal number; `ValueError` for anything else, also for what only Python calls one (1_000)."""
    if "_" in text:
        raise ValueError(text)
    return float(text)


def merge_rows(rows: Iterable[Row]) -> list[Row]:
    """Sort rows from the ground up and join those of equal pressure (parts of one message repeat levels)."""
    levels: list[Row] = []
    for row in sorted(rows, key=lambda r: -r.pressure):
        if not levels or levels[-1].pressure != row.pressure:
            levels.append(row)
            continue
        old = levels[-1]
        # temperature with its dew point and speed with its direction stay together
        warm = row if math.isnan(old.temperature) else old
        wind = row if math.isnan(old.wind_speed) else old
        levels[-1] = replace(
            old,
            height=row.height if math.isnan(old.height) else old.height,
            temperature=warm.temperature,
            dewpoint=warm.dewpoint,
            wind_speed=wind.wind_speed,
            wind_from=wind.wind_from,
        )
    return levels


class Columns(NamedTuple):
    """The first fields of `Sounding`, in its order."""

    pressure: Array
    height: Array
    temperature: Array
    dewpoint: Array
    wind_speed: Array
    wind_from: Array


def arrays(rows: list[Row]) -> Columns:
    """Turn rows into columns, shape (n,) each."""
    return Columns(*(np.array([getattr(row, name) for row in rows], dtype=np.float64) for name in Columns._fields))


def choose(soundings: list[Sounding], valid: datetime | None, name: str) -> Sounding:
    """Take the one release that is meant: the only one, or the one nearest to `valid` within 3 h.

    Raises
    ------
    ProfileError
        None within 3 h, several and no time asked, or several stations; the message lists what is there.
    """
    if valid is None:
        if len(soundings) == 1:
            return soundings[0]
        raise ProfileError(
            f"{len(soundings)} soundings in one file: {listing(soundings)}",
            place=name,
            remedy=f"say which one: {ASK}",
        )
    timed = [s for s in soundings if s.valid is not None or s.nominal is not None]
    if not timed and len(soundings) == 1:
        return replace(soundings[0], valid=valid)
    near = min(timed, key=lambda s: distance(s, valid), default=None)
    if near is None or distance(near, valid) > WIDTH:
        nearest = sorted(timed, key=lambda s: distance(s, valid)) or soundings
        words = "; the nearest are" if len(nearest) > 1 else "; there is"
        raise ProfileError(
            f"no sounding within 3 h of {valid:%Y-%m-%dT%H:%MZ}{words} {listing(nearest, whole=len(soundings))}",
            place=name,
            remedy=f"ask for one that is there: {ASK}",
        )
    others = [s for s in timed if s.station != near.station and distance(s, valid) == distance(near, valid)]
    if others:
        raise ProfileError(
            f"{1 + len(others)} stations at that time: {listing([near, *others])}",
            place=name,
            remedy="give a file with one of them",
        )
    return near


def distance(sounding: Sounding, valid: datetime) -> timedelta:
    """Time between `valid` and the nearer of release and nominal hour."""
    return min(abs(t - valid) for t in (sounding.valid, sounding.nominal) if t is not None)


def listing(soundings: list[Sounding], most: int = 6, *, whole: int | None = None) -> str:
    """Station and time of the first few soundings, for messages; of more than that many also the span of time.

    `whole` is the number the file holds, where the list leaves some out.
    """
    words = []
    for sounding in soundings[:most]:
        time = sounding.nominal or sounding.valid
        words.append(f"{sounding.station} {time:%Y-%m-%dT%H:%MZ}" if time else f"{sounding.station} (no date)")
    more = max(len(soundings), whole or 0) - len(words)
    if more <= 0:
        return ", ".join(words)
    times = sorted(time for one in soundings if (time := one.nominal or one.valid) is not None)
    span = f", from {times[0]:%Y-%m-%d} to {times[-1]:%Y-%m-%d}" if times else ""
    return ", ".join(words) + f" and {more} more{span}"
