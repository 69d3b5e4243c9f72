"""Read soundings: the format is recognised by content, or named.

Formats: ``csv`` (profile table, unit in the column name), ``temp`` (WMO FM 35 TEMP text), ``igra`` (IGRA version 2).
"""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

from forcing.errors import ProfileError
from forcing.readers import igra, table, temp
from forcing.readers.text import choose, decode
from forcing.sounding import Sounding

FORMATS = ("csv", "temp", "igra")

__all__ = ["FORMATS", "detect", "looks_like_sounding", "parse", "parse_all", "read_all", "read_sounding"]


def detect(text: str, name: str) -> str:
    """Name the format of a text, or raise `ProfileError`."""
    head = text.lstrip()[:2000].lower()
    if head.startswith(("<!doctype", "<html", "<?xml")) or "<html" in head:
        first = text.lstrip().splitlines()[0][:40]
        raise ProfileError(
            f"this is a web page ({first!r}), not a sounding",
            place=f"{name}, line 1",
            remedy="save the data, not the page around it",
        )
    kind = _kind(text)
    if kind is not None:
        return kind
    first = next((line.strip() for line in text.splitlines() if line.strip()), "")[:40]
    raise ProfileError(
        f"format not recognised from {first!r}",
        place=f"{name}, line 1",
        remedy=f"name one of {', '.join(FORMATS)}, or give a CSV whose header names pressure_hPa and temperature_C",
    )


def _kind(text: str) -> str | None:
    if igra.looks_like(text):
        return "igra"
    if temp.looks_like(text):
        return "temp"
    return "csv" if table.looks_like(text) else None


def looks_like_sounding(text: str) -> bool:
    """Whether a text is of a format that is read here, by its first lines."""
    return _kind(text) is not None


def parse_all(
    data: bytes | str, name: str, *, format: str | None = None, valid: datetime | None = None
) -> tuple[Sounding, ...]:
    """Read all soundings of a text (or its bytes); `name` stands for the file in messages."""
    text = decode(data if isinstance(data, bytes) else data.encode(), name)
    when = _utc(valid, name)
    if format is not None and format not in FORMATS:
        raise ProfileError(f"unknown format {format!r}", place=name, remedy=f"use one of {', '.join(FORMATS)}")
    kind = format or detect(text, name)
    if kind == "igra":
        return tuple(igra.read(text, name, when))
    if kind == "temp":
        return tuple(temp.read(text, name, when))
    return (table.read(text, name),)


def parse(data: bytes | str, name: str, *, format: str | None = None, valid: datetime | None = None) -> Sounding:
    """Read the one sounding that is meant: the only one, or the nearest to `valid` (aware) within 3 h."""
    found = list(parse_all(data, name, format=format, valid=valid))
    when = _utc(valid, name)
    if when is not None and len(found) == 1 and found[0].valid is None:
        return replace(found[0], valid=when)
    return choose(found, when, name)


def read_sounding(path: str | Path, *, format: str | None = None, valid: datetime | None = None) -> Sounding:
    """Read one sounding from a file.

    Parameters
    ----------
    path : path
    format : {"csv", "temp", "igra"}, optional
        Left out, it is recognised by content.
    valid : datetime, optional
        Aware. Which release of many (nearest within 3 h); for TEMP the year and month; for a table without a time
        its time.

    Raises
    ------
    ProfileError
        The file is missing, empty, binary, of no known format, not decodable, or has no such release. Source of each
        format: see its module.
    """
    return parse(_bytes(path), Path(path).name, format=format, valid=valid)


def read_all(path: str | Path, *, format: str | None = None, valid: datetime | None = None) -> tuple[Sounding, ...]:
    """Read every sounding of a file, in file order (with `valid`, an archive gives only those within 3 h)."""
    return parse_all(_bytes(path), Path(path).name, format=format, valid=valid)


def _utc(valid: datetime | None, name: str) -> datetime | None:
    if valid is None:
        return None
    if valid.tzinfo is None:
        raise ProfileError(
            f"time {valid.isoformat()} has no offset from UTC", place=name, remedy="write it as 2026-07-01T12:00Z"
        )
    return valid.astimezone(UTC)


def _bytes(path: str | Path) -> bytes:
    try:
        return Path(path).read_bytes()
    except OSError as error:
        reason = error.strerror or "not readable"
        raise ProfileError(f"cannot be read: {reason}", place=str(path), remedy="check the path") from error
