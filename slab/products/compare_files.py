"""A comparison as one long CSV table and as CF NetCDF: every answer and every hour of every day and change."""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Iterator, Mapping, Sequence
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np

from slab.glossary import describe
from slab.products.compare_answers import HOURLY, QUANTITIES

Document = Mapping[str, Any]
FILL = 9.969209968386869e36  # default fill of a double in the NetCDF-3 format
#: CF names where the hourly quantity is one of the forecast's series under another name here.
_OWN_NAMES: Mapping[str, str] = {"skin_temperature_C": "surface_temperature"}


def compare_csv(document: Document) -> str:
    """Long table: change, day, time (blank for an answer of the whole day), quantity, unit, base, changed, difference.

    Differences are changed minus base; missing is blank.
    """
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(["change", "day", "time_utc", "time_local", "quantity", "unit", "base", "changed", "difference"])
    for row in _rows(document):
        writer.writerow(["" if cell is None else cell for cell in row])
    return buffer.getvalue()


def _rows(document: Document) -> Iterator[list[Any]]:
    for change in document["changes"]:
        for base, other in zip(document["days"]["runs"], change["runs"], strict=True):
            for name, quantity in QUANTITIES.items():
                pair = base["answers"][name], other["answers"][name]
                yield [change["name"], base["day"], None, None, name, quantity.unit, *pair, _gap(*pair)]
            zone = ZoneInfo(base["time_zone"])
            later = {text: n for n, text in enumerate(other["series"]["time"])}
            for n, text in enumerate(base["series"]["time"]):
                local = datetime.fromisoformat(text).astimezone(zone).isoformat(timespec="seconds")
                for name, quantity in HOURLY.items():
                    after = other["series"][name][later[text]] if text in later else None
                    pair = base["series"][name][n], after
                    yield [change["name"], base["day"], text, local, name, quantity.unit, *pair, _gap(*pair)]


def _gap(before: float | None, after: float | None) -> float | None:
    return None if before is None or after is None else round(after - before, 4) + 0.0


def compare_netcdf(document: Document) -> bytes:
    """CF-1.11 NetCDF: dimensions change, day, hour; base and changed values of every answer and hourly quantity."""
    from scipy.io import netcdf_file

    buffer = io.BytesIO()
    file = netcdf_file(buffer, mode="w", version=2)
    runs, changes = document["days"]["runs"], document["changes"]
    hours = sorted({hour for run in runs for hour in run["series"]["hour_local"]})
    _describe(file, document)
    for name, size in (("change", len(changes)), ("day", len(runs)), ("hour", len(hours))):
        file.createDimension(name, size)
    _words(file, "change_name", "change", [change["name"] for change in changes])
    _words(file, "day_name", "day", [run["day"] for run in runs])
    hour = file.createVariable("hour", "d", ("hour",))
    hour[:] = np.array(hours, dtype=float)
    hour.units, hour.long_name = "h", "local hour counted from midnight of the first day"
    for name, quantity in QUANTITIES.items():
        base = np.array([_number(run["answers"][name]) for run in runs])
        changed = np.array([[_number(run["answers"][name]) for run in change["runs"]] for change in changes])
        _pair(file, name, quantity.unit, quantity.meaning, ("day",), base, changed)
    for name, quantity in HOURLY.items():
        base = np.array([_on_hours(run, name, hours) for run in runs])
        changed = np.array([[_on_hours(run, name, hours) for run in change["runs"]] for change in changes])
        _pair(file, f"hourly_{name}", quantity.unit, quantity.meaning, ("day", "hour"), base, changed, _standard(name))
    file.flush()
    return buffer.getvalue()


def _standard(name: str) -> str | None:
    entry = describe(name)
    return _OWN_NAMES.get(name) or (entry.standard_name if entry else None)


def _number(value: float | None) -> float:
    return math.nan if value is None else float(value)


def _on_hours(run: Document, name: str, hours: Sequence[int]) -> list[float]:
    known = dict(zip(run["series"]["hour_local"], run["series"][name], strict=True))
    return [_number(known.get(hour)) for hour in hours]


def _pair(file: Any, name: str, unit: str, meaning: str, dimensions: tuple[str, ...], base: np.ndarray,
          changed: np.ndarray, standard: str | None = None) -> None:  # fmt: skip
    """Base case and changed values of one quantity."""
    for prefix, values, axes in (("base", base, dimensions), ("changed", changed, ("change", *dimensions))):
        variable = file.createVariable(f"{prefix}_{name}", "d", axes)
        variable[:] = np.where(np.isfinite(values), values, FILL)
        variable._FillValue = np.array(FILL)
        variable.units = _ascii("h" if unit == "h" else unit)
        variable.long_name = _ascii(f"{meaning}, {'base case' if prefix == 'base' else 'after the change'}")
        if standard:
            variable.standard_name = standard
        if unit in ("degC", "K"):
            variable.units_metadata = "temperature: difference" if "strength" in name else "temperature: on_scale"
        variable.coordinates = "change_name day_name" if prefix == "changed" else "day_name"


def _words(file: Any, name: str, dimension: str, words: Sequence[str]) -> None:
    """Labels as characters."""
    length = max(len(word) for word in words)
    axis = f"{name}_length"
    file.createDimension(axis, length)
    variable = file.createVariable(name, "c", (dimension, axis))
    variable[:] = np.array([list(_ascii(word).ljust(length)) for word in words], dtype="S1")
    variable.long_name = name.replace("_", " ")


def _describe(file: Any, document: Document) -> None:
    file.Conventions = "CF-1.11"
    file.title = _ascii(f"{document['title']}: base case and changes of ground")
    # without a date, so that a repeat is the same file
    file.history = f"written by daylayer {document['run']['version']}"
    file.source = "daylayer: mixed layer by day and stable column by night over one ground, base case and changes"
    file.comment = "; ".join(_ascii(item["text"]) for item in document["cautions"])
    keys = ("base", "patch", "threshold_C", "spread", "observed", "not_modelled", "warnings", "run")
    file.settings = _ascii(json.dumps({key: document[key] for key in keys}, ensure_ascii=True, default=str))
    described = [
        {key: change[key] for key in ("name", "text", "steps", "effectiveness")} for change in document["changes"]
    ]
    file.changes = _ascii(json.dumps(described, ensure_ascii=True))


def _ascii(text: str) -> str:
    return text.encode("ascii", "replace").decode("ascii")
