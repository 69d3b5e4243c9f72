"""Profile CSV: one level per line, the unit in the column name, blank is missing.

Columns (any order): ``pressure_hPa`` or ``_Pa``; ``height_m`` (above sea level) or ``height_agl_m`` (above ground);
``temperature_C`` or ``_K``; one of ``dewpoint_C``, ``dewpoint_K``, ``relative_humidity_pct``,
``mixing_ratio_g_kg``; ``wind_dir_deg`` (blows from); ``wind_speed_m_s``, ``_ms`` or ``_kt``. Lines that start with
``#`` are comments; ``# key: value`` with key valid, latitude, longitude, elevation_m or station is read.
Comma, semicolon (decimal comma allowed) or tab between cells.
"""

from __future__ import annotations

import csv
from dataclasses import replace
from datetime import UTC, datetime

import numpy as np

from forcing.air import (
    ZERO_CELSIUS,
    dew_point,
    each,
    humidity_from_mixing_ratio,
    saturation_vapour_pressure,
    vapour_pressure,
)
from forcing.errors import ProfileError
from forcing.levels import mend_units
from forcing.readers.text import NAN, Row, arrays
from forcing.readers.text import number as decimal
from forcing.sounding import Array, Repair, Sounding
from forcing.units import KNOT_M_S

# column -> (quantity, factor, offset to SI)
COLUMNS = {
    "pressure_hPa": ("pressure", 100.0, 0.0),
    "pressure_Pa": ("pressure", 1.0, 0.0),
    "height_m": ("height", 1.0, 0.0),
    "height_agl_m": ("height", 1.0, 0.0),
    "temperature_C": ("temperature", 1.0, ZERO_CELSIUS),
    "temperature_K": ("temperature", 1.0, 0.0),
    "dewpoint_C": ("dewpoint", 1.0, ZERO_CELSIUS),
    "dewpoint_K": ("dewpoint", 1.0, 0.0),
    "relative_humidity_pct": ("relative_humidity", 0.01, 0.0),
    "mixing_ratio_g_kg": ("mixing_ratio", 0.001, 0.0),
    "wind_dir_deg": ("wind_from", 1.0, 0.0),
    "wind_speed_m_s": ("wind_speed", 1.0, 0.0),
    "wind_speed_ms": ("wind_speed", 1.0, 0.0),
    "wind_speed_kt": ("wind_speed", KNOT_M_S, 0.0),
}
HUMIDITY = ("dewpoint", "relative_humidity", "mixing_ratio")
# widest values of the two quantities that are not kept as read (SI); the others are tested later
BOUNDS = {"relative_humidity": (0.0, 1.1), "mixing_ratio": (0.0, 0.06)}
KEYS = ("valid", "latitude", "longitude", "elevation_m", "station")


def looks_like(text: str) -> bool:
    """Tell whether the first line that is no comment names a column of this format."""
    for line in text.splitlines():
        if line.strip() and not line.lstrip().startswith("#"):
            lower = line.lower()
            return "pressure" in lower or any(name.lower() in lower for name in COLUMNS)
    return False


def read(text: str, name: str) -> Sounding:
    """Read one profile.

    Raises
    ------
    ProfileError
        Unknown, repeated or missing columns, a cell that is no number, a line with too many cells.
    """
    lines = text.splitlines()
    told = _metadata(lines, name)
    body = [(i + 1, line) for i, line in enumerate(lines) if line.strip() and not line.lstrip().startswith("#")]
    if not body:
        raise ProfileError("no header line (0 levels)", place=name, remedy=f"name the columns: {', '.join(COLUMNS)}")
    number, header = body[0]
    delimiter = next((mark for mark in (";", "\t") if mark in header), ",")
    names = _names(header, delimiter, number, name)
    rows: list[Row] = []
    values: list[dict[str, float]] = []
    again = cells_nan = 0
    for number, line in body[1:]:
        cells = _cells(line, delimiter, number, name)
        if [cell.strip() for cell in cells] == list(names):
            again += 1
            continue
        level, count = _level(cells, names, delimiter, number, name)
        cells_nan += count
        values.append(level)
        rows.append(Row(number, **{key: value for key, value in level.items() if key not in HUMIDITY[1:]}))
    if not rows:
        raise ProfileError(
            "a header but no level (0 lines of numbers)", place=f"{name}, line {body[0][0]}", remedy="add the levels"
        )
    repairs: tuple[Repair, ...] = ()
    if again:
        repairs += (Repair("repeated header", again, "a line equal to the header among the levels: dropped"),)
    if cells_nan:
        repairs += (Repair("not-a-number cell", cells_nan, "nan in the table: read as missing"),)
    numbers = {key: _told_number(told, key, name) for key in ("latitude", "longitude", "elevation_m")}
    sounding = Sounding(
        *arrays(rows),
        lines=tuple(row.line for row in rows),
        valid=_told_time(told, name),
        latitude=numbers["latitude"],
        longitude=numbers["longitude"],
        elevation=numbers["elevation_m"],
        station=told.get("station", ("", 0))[0],
        file=name,
        format="csv",
        heights_above_ground="height_agl_m" in names,
        repairs=repairs,
    )
    return _with_dewpoint(sounding, values)


def _metadata(lines: list[str], name: str) -> dict[str, tuple[str, int]]:
    told: dict[str, tuple[str, int]] = {}
    for i, line in enumerate(lines):
        if not line.lstrip().startswith("#") or ":" not in line:
            continue
        key, value = (part.strip() for part in line.lstrip().lstrip("#").split(":", 1))
        if key in KEYS:
            if key in told and told[key][0] != value:
                raise ProfileError(
                    f"{key} {value!r} contradicts line {told[key][1]} ({told[key][0]!r})",
                    place=f"{name}, line {i + 1}",
                    remedy="keep one; one release per file",
                )
            told[key] = (value, i + 1)
    return told


def _told_number(told: dict[str, tuple[str, int]], key: str, name: str) -> float | None:
    if key not in told:
        return None
    value, line = told[key]
    low, high = {"latitude": (-90.0, 90.0), "longitude": (-180.0, 360.0)}.get(key, (-500.0, 9000.0))
    try:
        number = decimal(value)
    except ValueError:
        number = NAN
    if not low <= number <= high:
        raise ProfileError(
            f"{key} {value!r} is not a number from {low:g} to {high:g}",
            place=f"{name}, line {line}",
            remedy="degrees north and east, m above sea level, with a decimal point",
        )
    return number


def _told_time(told: dict[str, tuple[str, int]], name: str) -> datetime | None:
    if "valid" not in told:
        return None
    value, line = told["valid"]
    place, remedy = f"{name}, line {line}", "write it as 2026-07-01T12:00Z"
    try:
        time = datetime.fromisoformat(value)
    except ValueError:
        raise ProfileError(f"valid {value!r} is not an ISO 8601 time", place=place, remedy=remedy) from None
    if time.tzinfo is None:
        raise ProfileError(f"valid {value!r} has no offset from UTC", place=place, remedy=remedy)
    return time.astimezone(UTC)


def _cells(line: str, delimiter: str, number: int, name: str) -> list[str]:
    try:
        return next(csv.reader([line], delimiter=delimiter))
    except csv.Error as error:
        raise ProfileError(
            f"{line[:20]!r}... is no table line: {error}", place=f"{name}, line {number}", remedy="remove the line"
        ) from None


def _names(header: str, delimiter: str, number: int, name: str) -> list[str]:
    place = f"{name}, line {number}"
    names = [cell.strip() for cell in _cells(header, delimiter, number, name)]
    seen: dict[str, str] = {}
    for column in names:
        if column not in COLUMNS:
            import difflib  # only an error needs it

            close = difflib.get_close_matches(column, COLUMNS, n=1, cutoff=0.5)
            hint = f"did you mean {close[0]}?" if close else f"known are {', '.join(COLUMNS)}"
            raise ProfileError(f"unknown column {column!r}", place=place, remedy=f"{hint} Or remove the column")
        quantity = "humidity" if COLUMNS[column][0] in HUMIDITY else COLUMNS[column][0]
        if quantity in seen:
            raise ProfileError(
                f"columns {seen[quantity]!r} and {column!r} both give {quantity}",
                place=place,
                remedy="keep one of them",
            )
        seen[quantity] = column
    for needed in ("pressure", "temperature"):
        if needed not in seen:
            options = " or ".join(c for c, (quantity, *_) in COLUMNS.items() if quantity == needed)
            raise ProfileError(f"no {needed} column in {header.strip()!r}", place=place, remedy=f"add {options}")
    if ("wind_from" in seen) != ("wind_speed" in seen):
        has = seen.get("wind_from") or seen["wind_speed"]
        raise ProfileError(
            f"{has!r} without its partner", place=place, remedy="give wind_dir_deg and wind_speed_m_s, or neither"
        )
    return names


def _level(cells: list[str], names: list[str], delimiter: str, number: int, name: str) -> tuple[dict[str, float], int]:
    place = f"{name}, line {number}"
    if len(cells) > len(names) and any(cell.strip() for cell in cells[len(names) :]):
        raise ProfileError(
            f"{len(cells)} cells under {len(names)} columns",
            place=place,
            remedy="use a decimal point, or a semicolon between cells with decimal commas",
        )
    if len(cells) < len(names):
        raise ProfileError(
            f"{len(cells)} cells under {len(names)} columns",
            place=place,
            remedy="complete the line (blank cells for missing values) or remove it",
        )
    values: dict[str, float] = {}
    count = 0
    for column, cell in zip(names, cells, strict=False):
        quantity, factor, offset = COLUMNS[column]
        text = cell.strip().replace(",", ".") if delimiter == ";" else cell.strip()
        if text.lower() == "nan":
            count += 1
            continue
        if not text:
            continue
        try:
            value = decimal(text)
        except ValueError:
            raise ProfileError(
                f"{column} {cell.strip()!r} is not a number", place=place, remedy="leave the cell blank where missing"
            ) from None
        low, high = BOUNDS.get(quantity, (-float("inf"), float("inf")))
        values[quantity] = value * factor + offset
        if not low <= values[quantity] <= high:
            raise ProfileError(
                f"{column} {text} is outside {low / factor:g} to {high / factor:g}",
                place=place,
                remedy="correct it, or leave the cell blank where missing",
            )
    return values, count


def _humidity(values: list[dict[str, float]]) -> tuple[str, Array, tuple[Repair, ...]]:
    """Name and numbers of a humidity column other than dew point ("" where there is none)."""
    for quantity in HUMIDITY[1:]:
        column = np.array([row.get(quantity, NAN) for row in values])
        known = np.isfinite(column)
        if not known.any():
            continue
        if quantity == "relative_humidity" and known.sum() >= 3 and column[known].max() <= 0.01:
            detail = "values named percent were fractions of 1: read as fractions"
            return quantity, column * 100.0, (Repair("humidity unit", int(known.sum()), detail),)
        return quantity, column, ()
    return "", np.full(len(values), NAN), ()


def _with_dewpoint(sounding: Sounding, values: list[dict[str, float]]) -> Sounding:
    """Turn relative humidity or mixing ratio into dew point, after units of temperature and pressure are mended."""
    quantity, column, repairs = _humidity(values)
    if not quantity:
        return sounding
    mended, done = mend_units(sounding)
    t, p = mended.temperature, mended.pressure
    usable = (
        (column > 0.0) & (t > 150.0) & (t < 350.0) if quantity == "relative_humidity" else (column > 0.0) & (p > 0.0)
    )
    dewpoint = np.full(column.size, NAN)
    if usable.any():
        if quantity == "relative_humidity":
            vapour = column[usable] * each(saturation_vapour_pressure, t[usable])
        else:
            vapour = each(vapour_pressure, each(humidity_from_mixing_ratio, column[usable]), p[usable])
        dewpoint[usable] = each(dew_point, vapour)
    return replace(mended, dewpoint=dewpoint, repairs=sounding.repairs + repairs + done)
