"""The calendar and the record sheet as CSV: what the model said for every hour, and everything it said it from."""

from __future__ import annotations

import csv
import hashlib
import io
import json
import platform
from collections.abc import Mapping
from datetime import datetime
from pathlib import Path
from typing import Any

import numpy as np

from forcing.named_files import shown_files, shown_settings, shown_source
from forcing.scenario_types import Scenario
from slab.spray_words import heading_words, plan_words
from slab.wording import Clock

__all__ = ["calendar_csv", "record_csv"]

Document = Mapping[str, Any]

QUANTITIES = (
    "status", "inversion", "share_with_inversion", "share_inside", "stability", "regime", "temperature_difference_K", "per_8m_K",
    "inversion_from_m", "inversion_to_m", "wind_boom_m_s", "wind_10m_m_s", "delta_t_K", "temperature_C", "humidity_pct",
    "rain_mm_h", "deposit", "since_break_up_h", "observed_difference_K", "observed_wind_m_s",
)  # fmt: skip
TO_FILL_IN = (
    "measured_at", "measured_low_C", "measured_high_C", "measured_wind_m_s", "measured_wind_from", "field", "work_done",
    "operator", "remarks",
)  # fmt: skip


def _remarks(document: Document) -> list[str]:
    return [f"caution {one['code']}: {one['text']}" for one in document["cautions"]]


def _table(document: Document, extra: tuple[str, ...]) -> list[list[Any]]:
    clock = Clock.of(document)
    present = [name for name in QUANTITIES if document["calendar"] and name in document["calendar"][0]]
    rows: list[list[Any]] = [["hour_utc", "hour_local", "note", *present, "reasons", *extra]]
    for hour in document["calendar"]:
        local = clock.local(datetime.fromisoformat(hour["start"])).isoformat(timespec="minutes")
        values = ["" if hour[name] is None else hour[name] for name in present]
        why = "; ".join(one["text"] for one in hour["reasons"])
        rows.append([hour["start"], local, plan_words(hour["plan_only"]), *values, why, *("" for _ in extra)])
    return rows


def _written(comments: list[str], rows: list[list[Any]]) -> str:
    buffer = io.StringIO()
    for text in comments:
        for line in text.splitlines() or [""]:
            buffer.write(f"# {line}".rstrip() + "\n")
    csv.writer(buffer, lineterminator="\n").writerows(rows)
    return buffer.getvalue()


def calendar_csv(document: Document) -> str:
    """The hours as CSV under comment lines (``#``) with the cautions; every hour to come is marked "plan only"."""
    height = document["limits"]["wind_height_m"]
    head = [f"{heading_words(document)}: {document['title']}; boom wind at {height:g} m"]
    return _written([*head, *_remarks(document)], _table(document, ()))


def digest(path: str) -> str:
    """SHA-256 of a file, or "not readable"."""
    try:
        return hashlib.sha256(Path(path).read_bytes()).hexdigest()
    except OSError:
        return "not readable"


def _inputs(scenario: Scenario, observed: str) -> list[tuple[str, str, str]]:
    """Files that went in: what each is, its name to show, its path to hash; flags have no file of their own."""
    shown = shown_files(scenario)
    named = [("scenario", shown_source(scenario), scenario.source if scenario.text else "")]
    keys = (("profile", "profile", "file"), ("later profile", "profile", "later"), ("weather", "weather", "file"),
            ("fluxes", "surface", "fluxes"))  # fmt: skip
    for name, section, key in keys:
        values = scenario.settings.get(section)
        path = str(values.get(key) or "") if isinstance(values, Mapping) else ""
        named.append((name, shown.get(f"{section}.{key}", path), path))
    named.append(("observed", observed, observed))
    return [one for one in named if one[2]]


def record_csv(document: Document, scenario: Scenario) -> str:
    """Record sheet: inputs with hashes, versions, limits and the scenario's text as comment lines, then the hours with what
    the model stated and blank columns to fill in by hand.

    The same inputs, versions and moment give the same bytes again.
    """
    settings = json.dumps(shown_settings(scenario), sort_keys=True, default=str, ensure_ascii=False)
    observed = str((document["observed"] or {}).get("file", ""))
    limits = {key: value for key, value in document["limits"].items() if key != "order"}
    low, high = document["between_m"]
    comments = [
        f"{document['title']}: record sheet of the spray calendar made for {document['now']}",
        f"versions: daylayer {document['run']['version']}, python {platform.python_version()}, numpy {np.__version__}",
        f"site: {json.dumps(document['site'], ensure_ascii=False)}",
        f"profile: {json.dumps({k: v for k, v in document['profile'].items() if k != 'tops'}, ensure_ascii=False)}",
        *(f"input {name}: {shown}, sha256 {digest(path)}" for name, shown, path in _inputs(scenario, observed)),
        f"settings sha256: {hashlib.sha256(settings.encode()).hexdigest()}",
        f"settings: {settings}",
        f"limits: {json.dumps(limits, ensure_ascii=False)}",
        "order of reasons: " + ", ".join(one["code"] for one in document["limits"]["order"]),
        f"difference from {low:g} to {high:g} m; {document['spread']['members']} members: "
        + "; ".join(f"{one['input']} {one['step']}" for one in document["spread"]["steps"]),
        *(f"night: {json.dumps(one)}" for one in document["nights"]),
        *(f"low ground: {json.dumps(one)}" for one in document["low_ground"]["fields"]),
        *([f"tower: {json.dumps({k: v for k, v in document['observed'].items() if k != 'nights_before'})}"]
          if document["observed"] else []),
        *(f"{one['source']}: {one['name']}: {one['value']}" for one in document["assumptions"]),
        *(f"repair: {one['name']}: {one['count']}" for one in document["repairs"]),
        *(f"warning: {text}" for text in document["warnings"]),
        *(f"doubt: {one['text']}" for one in document["doubts"]),
        *_remarks(document),
        *([f"scenario text:\n{scenario.text}"] if scenario.text else []),
    ]  # fmt: skip
    return _written(comments, _table(document, TO_FILL_IN))
