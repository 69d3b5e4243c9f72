"""The spray calendar as text: sentences first, then the hours, what limits them, what to measure, and the cautions."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Mapping
from datetime import datetime
from typing import Any

from slab.products.spray_table import hourly_lines
from slab.spray_cautions import spray_cautions
from slab.spray_words import LIMIT_NAMES, heading_words, limit_sentences, profile_age, span, statement, stretch_mark
from slab.wording import Clock, Units, units_named

__all__ = ["spray_text"]

Document = Mapping[str, Any]
WIDTH = 118


def spray_text(document: Document, units: str = "metric") -> str:
    """Text of a spray calendar; the same statements as the JSON and the picture.

    Raises
    ------
    DaylayerError
        For units not known.
    """
    chosen = units_named(units)
    assumed = [
        f"{one['name']}: {one['value']}" + (f" ({one['why']})" if one["why"] else "")
        for one in document["assumptions"]
        if one["source"] == "assumed"
    ]
    spread = [f"{one['input']}: {one['step']}" for one in document["spread"]["steps"]]
    sections = [
        _heading(document, chosen),
        _wrapped(statement(document, chosen)),
        _wrapped(limit_sentences(document)),
        _stretches(document),
        hourly_lines(document, chosen),
        _definitions(document),
        _listed(f"spread: {document['spread']['members']} runs, all of these one step up or down together", spread),
        _listed("low ground", [document["low_ground"]["rule"]] if document["low_ground"]["fields"] else []),
        _listed("what to measure", document["measure"]),
        _listed("tower", [document["observed"]["method"]] if document["observed"] else []),
        _listed("assumed", assumed),
        _listed("warnings", document["warnings"]),
        _listed("cautions", [f"{one['code']} {one['text']}" for one in spray_cautions(document, chosen)]),
        _listed("doubts", [f"{one['code']}: {one['text']}" for one in document["doubts"]]),
    ]
    return "\n\n".join("\n".join(section) for section in sections if section) + "\n"


def _heading(document: Document, units: Units) -> list[str]:
    """What, where and from which profile: its age and distance are always said."""
    site, profile, clock = document["site"], document["profile"], Clock.of(document)
    start = clock.local(clock.start)
    height = f"{units.height_value(site['elevation_m']):.0f} {units.height_unit} above sea level"
    valid = datetime.fromisoformat(profile["valid"])
    lines = [
        f"{heading_words(document)}: {document['title']}",
        (
            f"site: {site['name']}, {abs(site['latitude']):.2f} {'N' if site['latitude'] >= 0 else 'S'} "
            f"{abs(site['longitude']):.2f} {'E' if site['longitude'] >= 0 else 'W'}, {height}; local time {clock.zone.key}, "
            f"{clock.offset()}"
        ),
        f"start: {start:%A} {start.day} {start:%B %Y} {clock.say(document['series']['time'][0])}",
        (
            f"profile: {profile['file'] or 'file not named'}, {profile['station'] or 'station not named'}, released "
            f"{valid:%Y-%m-%d %H:%M} UTC ({clock.local(valid):%H:%M} local); {profile_age(document)}; "
            f"{_rise(profile['height_difference_m'], units)}"
        ),
    ]
    return _wrapped(lines)


def _rise(metres: float | None, units: Units) -> str:
    if metres is None:
        return "height difference not known"
    if abs(metres) < 5.0:
        return "at the site's height"
    return f"{units.height(abs(metres))} {'higher' if metres > 0 else 'lower'} than the site"


def _stretches(document: Document) -> list[str]:
    clock = Clock.of(document)
    lines = ["stretches (local time), with the range in which an end may move"]
    for one in document["stretches"]:
        limit = LIMIT_NAMES.get(one["limit"], one["limit"])
        words = one["status"] if one["status"] in ("inside", "conditions only") else f"{one['status']}: {limit}"
        if one["status"] == "conditions only":
            words = (
                f"inversion {one['limit']}" if one["limit"] in ("present", "possible", "not known") else "no inversion"
            )
        also = ", ".join(LIMIT_NAMES[code] for code in one["also"])
        text = f"{span(clock, (one['start'], one['end']))}: {words}" + (f"; in it also {also}" if also else "")
        for word, key in (("start", "start_spread"), ("end", "end_spread")):
            if one[key]:
                text += f"; {word} {span(clock, one[key])}"
        lines += _wrapped([f"{text} [{stretch_mark(clock, one, document['now'])}]"], "  ")
    return lines


def _definitions(document: Document) -> list[str]:
    return _listed("words", [f"{name}: {text}" for name, text in document["definitions"].items()])


def _listed(heading: str, items: Iterable[str]) -> list[str]:
    items = list(items)
    return [heading, *_wrapped(items, "  ")] if items else []


def _wrapped(items: Iterable[str], indent: str = "") -> list[str]:
    return [
        line
        for item in items
        for line in textwrap.wrap(item, WIDTH, initial_indent=indent, subsequent_indent=indent + "  ")
    ]
