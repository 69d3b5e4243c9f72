"""Write the result document as JSON, CSV or CF NetCDF, whole or not at all."""

from __future__ import annotations

import contextlib
import csv
import io
import json
import math
import os
import uuid
from collections.abc import Iterable, Mapping, Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np

from forcing.errors import DaylayerError
from slab.glossary import describe, sensor_height

__all__ = ["netcdf_bytes", "to_csv", "to_json", "to_netcdf", "write_atomically"]

Document = Mapping[str, Any]

_ORDER = (
    "schema", "title", "site", "profile", "assumptions", "repairs", "warnings", "cautions", "doubts", "summary", "series",
    "definitions", "profiles", "sun", "run",
)  # fmt: skip
_FILL = 9.969209968386869e36  # default fill of a double in the NetCDF-3 format
_REFERENCES = "Lilly 1968; Tennekes 1973; Batchvarova and Gryning 1991; Romps 2017"


def write_atomically(path: str | os.PathLike[str], content: str | bytes) -> None:
    """Write a file whole or not at all: a temporary name beside it, then a rename.

    Raises
    ------
    DaylayerError
        When the place cannot be written; nothing is left behind.
    """
    target = Path(path)
    data = content.encode("utf-8") if isinstance(content, str) else content
    temporary = target.with_name(f".{target.name}.{uuid.uuid4().hex[:12]}.part")
    try:
        if target.is_dir():
            raise IsADirectoryError(21, "is a folder")
        if target.exists() and not target.is_file():
            target.write_bytes(data)  # a device or a pipe: renaming over it would replace it
        else:
            temporary.write_bytes(data)
            temporary.replace(target.resolve())
    except OSError as error:
        raise DaylayerError(
            f"cannot be written ({error.strerror or error})",
            place=str(target),
            remedy="name a file in an existing folder that you may write to",
        ) from error
    finally:
        with contextlib.suppress(OSError):
            temporary.unlink(missing_ok=True)


def _strict(value: Any) -> Any:
    """Copy of a value that strict JSON can hold: not a number becomes null, aware times become UTC text."""
    if isinstance(value, Mapping):
        return {str(key): _strict(inner) for key, inner in value.items()}
    if isinstance(value, np.ndarray):
        return [_strict(inner) for inner in value.tolist()]
    if isinstance(value, (list, tuple)):
        return [_strict(inner) for inner in value]
    if isinstance(value, np.generic):
        return _strict(value.item())
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, datetime):
        if value.tzinfo is None:
            raise DaylayerError(f"time {value.isoformat()} has no offset", remedy="give aware times only")
        return value.astimezone(UTC).isoformat().replace("+00:00", "Z")
    if value is None or isinstance(value, (str, int, bool)):
        return value
    raise DaylayerError(f"a value of type {type(value).__name__} has no place in a result", remedy="give plain values")


def to_json(document: Document, *, indent: int | None = 1) -> str:
    """Strict JSON text of a result: no NaN, missing is null, top keys always in the same order."""
    plain = _strict(document)
    known = [key for key in _ORDER if key in plain]
    ordered = {key: plain[key] for key in [*known, *(key for key in plain if key not in _ORDER)]}
    return json.dumps(ordered, indent=indent, allow_nan=False, ensure_ascii=False) + "\n"


def moments(document: Document) -> list[datetime]:
    """Aware UTC times of the series."""
    return [datetime.fromisoformat(text).astimezone(UTC) for text in document["series"]["time"]]


def to_csv(document: Document) -> str:
    """Series as CSV text: UTC and local time first, unit in every column name, blank for missing."""
    series = _strict(document["series"])
    zone = ZoneInfo(document["site"]["time_zone"])
    names = [name for name in series if name != "time"]
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(["time_utc", "time_local", *names])
    for n, moment in enumerate(moments(document)):
        utc = moment.isoformat(timespec="seconds").replace("+00:00", "Z")
        cells = ["" if series[name][n] is None else series[name][n] for name in names]
        writer.writerow([utc, moment.astimezone(zone).isoformat(timespec="seconds"), *cells])
    return buffer.getvalue()


def to_netcdf(document: Document, path: str | os.PathLike[str]) -> None:
    """Write the series as a CF-1.11 time series of one place (NetCDF-3, 64-bit offsets).

    Raises
    ------
    DaylayerError
        When the file cannot be written.
    """
    write_atomically(path, netcdf_bytes(document))


def netcdf_bytes(document: Document) -> bytes:
    """Bytes of the CF NetCDF file of a result."""
    from scipy.io import netcdf_file

    buffer = io.BytesIO()
    file = netcdf_file(buffer, mode="w", version=2)
    _describe_file(file, document)
    _put_place(file, document)
    series = _strict(document["series"])
    heights: dict[float, str] = {}
    for name, values in series.items():
        if name == "time":
            continue
        if _is_words(values):
            _put_flags(file, name, values)
        else:
            _put_numbers(file, name, values, heights)
    file.flush()
    return buffer.getvalue()


def _describe_file(file: Any, document: Document) -> None:
    run, profile = document.get("run", {}), document.get("profile", {})
    version = run.get("version", "unknown")
    settings = {
        key: document.get(key) for key in ("run", "profile", "summary", "assumptions", "cautions", "warnings", "doubts")
    }
    attributes = {
        "Conventions": "CF-1.11",
        "featureType": "timeSeries",
        "title": document.get("title") or f"mixing layer at {document['site'].get('name') or 'the site'}",
        "institution": "not stated",
        "source": f"daylayer {version}, one-column model of the mixed layer and the stable night",
        "history": f"computed by daylayer {version} from the profile valid {profile.get('valid') or 'at an unknown time'}",
        "references": _REFERENCES,
        "comment": json.dumps(_strict(settings), allow_nan=False),
    }
    for name, text in attributes.items():
        setattr(file, name, _ascii(text))


def _put_place(file: Any, document: Document) -> None:
    site = document["site"]
    times = moments(document)
    start = times[0]
    file.createDimension("time", len(times))
    unit = f"seconds since {start.strftime('%Y-%m-%d %H:%M:%S')}"
    time_attributes = {"units": unit, "calendar": "standard", "units_metadata": "leap_seconds: none"}
    elapsed = [(moment - start).total_seconds() for moment in times]
    _variable(
        file, "time", elapsed, ("time",), standard_name="time", long_name="time, UTC", axis="T", **time_attributes
    )
    released = document.get("profile", {}).get("valid")
    if released:
        offset = (datetime.fromisoformat(released) - start).total_seconds()
        _variable(
            file, "profile_time", offset, (), standard_name="forecast_reference_time",
            long_name="time of the profile the run starts from", **time_attributes,
        )  # fmt: skip
    place = (
        ("latitude", site.get("latitude"), "degrees_north", "latitude"),
        ("longitude", site.get("longitude"), "degrees_east", "longitude"),
    )
    for name, value, units, standard in place:
        _variable(file, name, value, (), units=units, standard_name=standard, long_name=f"{name} of the site")
    _variable(
        file, "surface_altitude", site.get("elevation_m"), (), units="m", standard_name="surface_altitude",
        long_name="ground above sea level",
    )  # fmt: skip
    _variable(
        file, "reference_pressure", 1.0e5, (), units="Pa", standard_name="reference_pressure",
        long_name="reference pressure of potential temperature",
    )  # fmt: skip
    label = _ascii(site.get("name") or "site").encode("ascii")
    file.createDimension("name_length", len(label))
    names = file.createVariable("station_name", "c", ("name_length",))
    names[:] = np.frombuffer(label, dtype="S1")
    names.cf_role, names.long_name, names.standard_name = "timeseries_id", "name of the site", "platform_name"


def _put_numbers(file: Any, name: str, values: Sequence[Any], heights: dict[float, str]) -> None:
    entry = describe(name)
    attributes: dict[str, str] = {"long_name": name, "units": "1"}
    coordinates = ["latitude", "longitude", "surface_altitude", "station_name"]
    if entry is not None:
        signed = f"{entry.meaning}, {entry.sign}" if entry.sign else entry.meaning
        attributes = {"long_name": signed, "units": entry.unit}
        if entry.standard_name:
            attributes["standard_name"] = entry.standard_name
        if entry.temperature:
            attributes["units_metadata"] = f"temperature: {entry.temperature}"
        if entry.standard_name == "air_potential_temperature":
            coordinates.append("reference_pressure")
        height = sensor_height(name)
        if height is not None:
            coordinates.append(_put_height(file, height, heights))
    if "profile_time" in file.variables:
        coordinates.append("profile_time")
    attributes["coordinates"] = " ".join(coordinates)
    _variable(file, _cf_name(name), values, ("time",), **attributes)


def _put_height(file: Any, height: float, heights: dict[float, str]) -> str:
    if height not in heights:
        heights[height] = f"height_{height:g}m".replace(".", "_")
        _variable(
            file, heights[height], height, (), units="m", standard_name="height", positive="up", axis="Z",
            long_name="height above ground",
        )  # fmt: skip
    return heights[height]


def _put_flags(file: Any, name: str, values: Sequence[str | None]) -> None:
    """Words as whole numbers with their meanings; blanks in a word become underscores, as CF asks."""
    words = sorted({word for word in values if word is not None})
    variable = file.createVariable(name, "i1", ("time",))
    entry = describe(name)
    variable.long_name = _ascii(entry.meaning if entry else name)
    variable._FillValue = np.array(-1, dtype="i1")
    if words:
        variable.flag_values = np.arange(len(words), dtype="i1")
        variable.flag_meanings = _ascii(" ".join(_flag(word) for word in words))
    variable.coordinates = "latitude longitude surface_altitude station_name"
    variable[:] = np.array([-1 if word is None else words.index(word) for word in values], dtype="i1")


def _variable(file: Any, name: str, values: Any, dimensions: tuple[str, ...], **attributes: str) -> None:
    variable = file.createVariable(name, "d", dimensions)
    numbers = np.array([_FILL if value is None else value for value in _listed(values)], dtype=float)
    if dimensions:
        variable[:] = numbers
        if dimensions == ("time",) and name != "time":
            variable._FillValue = np.array(_FILL)
    else:
        if values is None:
            variable._FillValue = np.array(_FILL)
        variable.data[()] = numbers[0]  # assignValue raises IndexError on a scalar variable in scipy 1.17
    for key, text in attributes.items():
        setattr(variable, key, _ascii(text))


def _listed(values: Any) -> Iterable[Any]:
    return values if isinstance(values, (list, tuple)) else [values]


def _is_words(values: Sequence[Any]) -> bool:
    return any(isinstance(value, str) for value in values)


def _cf_name(name: str) -> str:
    return name.replace(".", "_")


def _flag(word: str) -> str:
    kept = "".join(letter if letter.isascii() and letter.isalnum() else "_" for letter in word.replace("%", "percent"))
    return "_".join(part for part in kept.split("_") if part) or "unnamed"


def _ascii(text: str) -> str:
    return text.encode("ascii", "replace").decode("ascii")
