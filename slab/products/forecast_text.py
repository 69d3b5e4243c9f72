"""The forecast in words: what was assumed, the day in sentences, the hours in a table, and how far to trust it."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Mapping
from datetime import datetime
from typing import Any

from slab.cautions import complete
from slab.narrative import change_words, day_sentences, telling_sentence
from slab.products.forecast_table import blocks, hourly_table, roughness_of
from slab.wording import US, Clock, Units, units_named

__all__ = ["forecast_text"]

Document = Mapping[str, Any]
WIDTH = 110


def forecast_text(document: Document, units: str = "metric") -> str:
    """Text of a forecast.

    Parameters
    ----------
    document : mapping
        The result document.
    units : {"metric", "us"}
        us: ft above ground and sea level, kt, mph for the 20 ft wind, degrees F, and blocks for today, tonight and tomorrow.

    Raises
    ------
    DaylayerError
        For units not known.
    """
    chosen = units_named(units)
    sections = [
        _heading(document, chosen),
        _assumptions(document, chosen),
        _wrapped([*day_sentences(document, chosen), telling_sentence(document, chosen)]),
        ["by blocks of hours (temperature and humidity as five-unit ranges)", *_indented(blocks(document))]
        if chosen is US
        else [],
        [*_table_title(document, chosen), *hourly_table(document, chosen)],
        _definitions(document, chosen),
        _listed("repairs made to the profile", _repairs(document)),
        _listed("warnings", document.get("warnings") or []),
        _listed("cautions", [f"{item['code']} {item['text']}" for item in complete(document, chosen)]),
        _listed("doubts", [f"{item['code']}: {item['text']}" for item in document.get("doubts") or []]),
    ]
    return "\n\n".join("\n".join(section) for section in sections if section) + "\n"


def _heading(document: Document, units: Units) -> list[str]:
    site, profile, clock = document["site"], document.get("profile") or {}, Clock.of(document)
    name = site.get("name") or "site not named"
    start = clock.local(clock.start)
    lines = [
        f"{document.get('title') or name}",
        f"site: {name}, {_place(site)}, {_elevation(site, units)}; local time {clock.zone.key}, {clock.offset()}",
        f"start: {start:%A} {start.day} {start:%B %Y} {clock.say(document['series']['time'][0])}",
        f"profile: {_profile(profile, clock, units)}",
    ]
    sun = document.get("sun") or {}
    rise, fall = sun.get("sunrise"), sun.get("sunset")
    if rise and fall:
        lines.append(f"sun: rises {clock.say(rise)}, sets {clock.say(fall)}")
    return [part for line in lines for part in textwrap.wrap(line, WIDTH, subsequent_indent="  ")]


def _place(site: Document) -> str:
    latitude, longitude = site.get("latitude"), site.get("longitude")
    if latitude is None or longitude is None:
        return "position not known"
    return f"{abs(latitude):.2f} {'N' if latitude >= 0 else 'S'} {abs(longitude):.2f} {'E' if longitude >= 0 else 'W'}"


def _elevation(site: Document, units: Units) -> str:
    height = site.get("elevation_m")
    if height is None:
        return "elevation not known"
    return f"{units.height_value(height):.0f} {units.height_unit} above sea level"


def _profile(profile: Document, clock: Clock, units: Units) -> str:
    parts = [str(profile.get("file") or "file not named")]
    if profile.get("station"):
        parts.append(str(profile["station"]))
    valid = profile.get("valid")
    if valid:
        moment = datetime.fromisoformat(valid)
        parts.append(f"released {moment:%Y-%m-%d %H:%M} UTC ({clock.local(moment):%H:%M} local)")
    if profile.get("age_hours") is not None:
        parts.append(f"{profile['age_hours']:.1f} h old at the start")
    distance, rise = profile.get("distance_km"), profile.get("height_difference_m")
    parts.append("distance not known" if distance is None else f"{distance:.0f} km away")
    if rise is None:
        parts.append("height difference not known")
    elif abs(rise) < 5.0:
        parts.append("at the site's height")
    else:
        parts.append(f"{units.height(abs(rise))} {'higher' if rise > 0 else 'lower'} than the site")
    return ", ".join(parts)


def _assumptions(document: Document, units: Units) -> list[str]:
    """Inputs by source; beside an assumed one the change that a plausible step in it makes."""
    items = document.get("assumptions") or []
    if not items:
        return []
    lines: list[str] = []
    headings = (
        (
            "assumed",
            "assumed, with the change that a plausible step makes to the greatest depth and the highest temperature",
        ),
        ("given", "given by the user"),
        ("observed", "observed"),
    )
    for source, heading in headings:
        chosen = [item for item in items if item.get("source") == source]
        if chosen:
            lines.append(heading)
        for item in chosen:
            why = f" ({item['why']})" if item.get("why") else ""
            lines += _wrapped([f"{item['name']}: {item['value']}{why}"], "  ")
            step = change_words(item, units) if source == "assumed" else ""
            lines += _wrapped([step], "      ") if step else []
    return lines


def _table_title(document: Document, units: Units) -> list[str]:
    wind = "10 m"
    if units is US:
        wind = f"20 ft, from 10 m by the neutral logarithmic profile over a roughness of {roughness_of(document):g} m"
    return [
        "hour by hour: depth, condensation level and inversion top above ground;",
        f"wind at {wind}; transport wind through the depth; a dash is missing or none",
    ]


def _definitions(document: Document, units: Units) -> list[str]:
    summary = document["summary"]
    rows = [
        (item["definition"], units.height(item.get("height_m")), "")
        for item in summary.get("other_definitions") or []
    ]  # fmt: skip
    known = [item["height_m"] for item in summary.get("other_definitions") or [] if item.get("height_m") is not None]
    used = summary.get("mixing_depth_definition") or "not named"
    lines = [f"depth is by the {used}: {units.height(summary.get('mixing_depth_max_m'))} at its greatest"]
    if known:
        lines[0] += f"; other definitions give {units.height(min(known))} to {units.height(max(known))}"
    lines += _rows(rows)
    morning = [
        (item["definition"], units.height(item.get("height_m")), item.get("detail") or "")
        for item in (document.get("profile") or {}).get("tops") or []
    ]
    if morning:
        lines += ["tops in the measured profile", *_rows(morning)]
    for name, text in (document.get("definitions") or {}).items():
        lines += textwrap.wrap(f"{name}: {text}", WIDTH, initial_indent="  ", subsequent_indent="    ")
    return lines


def _rows(rows: Iterable[tuple[str, str, str]]) -> list[str]:
    rows = list(rows)
    if not rows:
        return []
    first, second = (max(len(row[n]) for row in rows) for n in (0, 1))
    return [f"  {name:<{first}}  {value:>{second}}  {detail}".rstrip() for name, value, detail in rows]


def _repairs(document: Document) -> list[str]:
    return [
        f"{item['name']}: {item['count']}" + (f" ({item['detail']})" if item.get("detail") else "")
        for item in document.get("repairs") or []
    ]


def _listed(heading: str, items: Iterable[str]) -> list[str]:
    items = list(items)
    return [heading, *_wrapped(items, "  ")] if items else []


def _wrapped(items: Iterable[str], indent: str = "") -> list[str]:
    return [
        line
        for item in items
        for line in textwrap.wrap(item, WIDTH, initial_indent=indent, subsequent_indent=indent + "  " * bool(indent))
    ]


def _indented(lines: Iterable[str]) -> list[str]:
    return [f"  {line}" for line in lines]
