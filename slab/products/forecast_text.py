"""The forecast in words: what was assumed, the day in sentences, the hours in a table, and how far to trust it."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Mapping
from datetime import datetime
from typing import Any

from slab.cautions import complete
from slab.inputs_words import known_words, real_warnings, telling_lines, untold_lines
from slab.narrative import day_sentences, headline
from slab.products.forecast_table import METHODS, blocks, hourly_table, roughness_of
from slab.products.series import RICHARDSON, SLAB_TOP, STRESS
from slab.wording import US, Clock, Units, units_named

__all__ = ["forecast_text"]

Document = Mapping[str, Any]
WIDTH = 110
METHOD_NAMES = (SLAB_TOP, STRESS, RICHARDSON)
SAID_ABOVE = {"gust range"}  # definitions that the sentences of the day hold already
REGIME_WORDS = {
    "turbulent": "stable, and the wind can carry all the heat that the ground asks of the air",
    "intermittent": "stable, and the wind can carry only a part of it, half or more",
    "very stable": "stable, and the wind can carry less than half of it",
    "unstable": "the ground heats the air already, but the night's column still carries the hour",
}


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
        _wrapped([headline(document, chosen)]) + _doubts(document, chosen),
        _assumptions(document, chosen),
        _wrapped(day_sentences(document, chosen)),
        ["by blocks of hours (temperature and humidity as five-unit ranges)", *_indented(blocks(document))]
        if chosen is US
        else [],
        [*_table_title(document, chosen), *hourly_table(document, chosen)],
        _definitions(document, chosen),
        _listed("repairs made to the profile", _repairs(document)),
        _listed("warnings", [chosen.restyle(text) for text in real_warnings(document)]),
        _listed("cautions", [f"{item['code']} {item['text']}" for item in complete(document, chosen)]),
    ]
    return "\n\n".join("\n".join(section) for section in sections if section) + "\n"


def _heading(document: Document, units: Units) -> list[str]:
    site, profile, clock = document["site"], document.get("profile") or {}, Clock.of(document)
    name = site.get("name") or "site not named"
    start = clock.local(clock.start)
    lines = [
        f"{document.get('title') or name}",
        f"site: {name}, {_place(site)}, {_elevation(site, units)}; local time {clock.zone.key}, {clock.offset()}",
        f"start: {start:%A} {start.day} {start:%B %Y} {clock.say(document['series']['time'][0])}{_sun(document, clock)}",
        f"profile: {_profile(document, profile, clock, units)}",
    ]
    return [part for line in lines for part in textwrap.wrap(line, WIDTH, subsequent_indent="  ")]


def _sun(document: Document, clock: Clock) -> str:
    sun = document.get("sun") or {}
    rise, fall = sun.get("sunrise"), sun.get("sunset")
    if not (rise and fall):
        return ""
    return f"; sunrise {clock.say(rise, utc=False)}, sunset {clock.say(fall, utc=False)}"


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


def _profile(document: Document, profile: Document, clock: Clock, units: Units) -> str:
    parts = [str(profile.get("file") or "file not named")]
    if profile.get("station"):
        parts.append(str(profile["station"]))
    if profile.get("valid"):
        parts.append(_released(document, profile, clock))
    doubted = any(item["code"] == "profile_age" for item in document.get("doubts") or [])
    if doubted and profile.get("age_hours") is not None:
        parts.append(f"{profile['age_hours']:.0f} h old now")
    distance, rise = profile.get("distance_km"), profile.get("height_difference_m")
    parts.append("distance not known" if distance is None else f"{units.distance(distance)} away")
    if rise is None:
        parts.append("height difference not known")
    elif abs(rise) < 5.0:
        parts.append("at the site's height")
    else:
        parts.append(f"{units.height(abs(rise))} {'higher' if rise > 0 else 'lower'} than the site")
    return ", ".join(parts)


def _released(document: Document, profile: Document, clock: Clock) -> str:
    """When the balloon left the ground, by the clock or counted from the start of the run."""
    moment = datetime.fromisoformat(profile["valid"])
    age = profile.get("age_at_start_hours")
    if age is None:
        age = (datetime.fromisoformat(document["series"]["time"][0]) - moment).total_seconds() / 3600.0
    if abs(age) < 0.05:
        return "released at the start of the run"
    said = f"released {moment:%Y-%m-%d %H:%M} UTC ({clock.local(moment):%H:%M} local)"
    return f"{said}, {abs(age):.1f} h {'before' if age > 0 else 'after'} the start of the run"


def _doubts(document: Document, units: Units) -> list[str]:
    return _wrapped([f"doubt, {item['code']}: {units.restyle(item['text'])}" for item in document.get("doubts") or []])


def _assumptions(document: Document, units: Units) -> list[str]:
    """Inputs by source; beside an assumed one the change that a plausible step in it makes."""
    letters = WIDTH - 2
    assumed = telling_lines(document, units, letters=letters) + untold_lines(document, units, letters=letters)
    lines = [
        "assumed, most telling first; then a plausible step: change of the greatest depth, of the highest temperature"
    ]
    lines = [*lines, *_wrapped(assumed, "  ")] if assumed else []
    known = ((source, known_words(document, source, units)) for source in ("given", "observed"))
    return lines + [line for source, words in known if words for line in _wrapped([f"{source}: {words}"], more="  ")]


def _table_title(document: Document, units: Units) -> list[str]:
    wind = "10 m"
    if units is US:
        rough = units.length(roughness_of(document))
        wind = f"20 ft, from {units.length(10.0)} by the neutral logarithmic profile over a roughness of {rough}"
    title = (
        f"hour by hour, local time {Clock.of(document).offset()}: depth, condensation level (cond) and inversion top (inv) above "
        f"ground; {METHODS}; wind at {wind}; transport wind through the depth; cum cumulus; str inversion strength; "
        "a dash is missing or none"
    )
    return _wrapped([title])


def _definitions(document: Document, units: Units) -> list[str]:
    summary = document["summary"]
    used, greatest = (
        summary.get("mixing_depth_definition") or "not named",
        units.height(summary.get("mixing_depth_max_m")),
    )
    lines = [
        f"depth is by the {used}, {greatest} at its greatest; the same hour {_tops(summary.get('other_definitions'), units)}"
    ]
    known = {**REGIME_WORDS, **(document.get("definitions") or {})}
    unseen = {"mixed", "decaying", *REGIME_WORDS, *METHOD_NAMES} - {
        *document["series"]["regime"],
        *(document["series"].get("depth_method") or METHOD_NAMES),
    }
    lines += [f"{name}: {units.restyle(text)}" for name, text in known.items() if name not in unseen | SAID_ABOVE]
    return _wrapped(lines, more="  ")


def _tops(items: Iterable[Document] | None, units: Units) -> str:
    known = [f"{item['definition']} {units.height(item.get('height_m'))}" for item in items or []]
    return f"by other definitions: {', '.join(known)}" if known else "no other definition gives a value"


def _repairs(document: Document) -> list[str]:
    return [
        f"{item['name']}: {item['count']}" + (f" ({item['detail']})" if item.get("detail") else "")
        for item in document.get("repairs") or []
    ]


def _listed(heading: str, items: Iterable[str]) -> list[str]:
    items = list(items)
    return [heading, *_wrapped(items, "  ")] if items else []


def _wrapped(items: Iterable[str], indent: str = "", more: str | None = None) -> list[str]:
    more = indent + "  " * bool(indent) if more is None else more
    return [
        line for item in items for line in textwrap.wrap(item, WIDTH, initial_indent=indent, subsequent_indent=more)
    ]


def _indented(lines: Iterable[str]) -> list[str]:
    return [f"  {line}" for line in lines]
