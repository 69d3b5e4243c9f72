"""The day in sentences, from the summary of a result; shared by the text and the picture."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime
from typing import Any

from slab.wording import UNKNOWN, Clock, Units, compass

__all__ = ["change_words", "cumulus_words", "day_sentences", "headline", "most_telling", "telling_sentence"]

Document = Mapping[str, Any]


def headline(document: Document, units: Units) -> str:
    """One sentence: depth at its greatest, warmest hour, and whether cumulus forms."""
    summary, clock = document["summary"], Clock.of(document)
    depth = summary.get("mixing_depth_max_m")
    warmest = summary.get("temperature_2m_max_C")
    parts = [
        "The depth of the mixed layer is not known"
        if depth is None
        else f"The mixed layer reaches {units.height(depth)} above ground at "
        f"{clock.say(summary.get('mixing_depth_max_time'), utc=False, zone=False)}",
        "the highest temperature is not known"
        if warmest is None
        else f"the air {units.temperature(warmest)} at {clock.say(summary.get('temperature_2m_max_time'), utc=False)} time",
    ]
    return f"{parts[0]}, {parts[1]}; {cumulus_words(document, units, short=True)}."


def day_sentences(document: Document, units: Units) -> list[str]:
    """The day in sentences, most important first; what is missing is said to be not known."""
    summary, clock = document["summary"], Clock.of(document)
    elevation = document["site"].get("elevation_m")
    sentences = [
        _depth(summary, clock, units, elevation) + _later_day(document, clock, units),
        _temperature(summary, clock, units),
        _breakup(document, clock, units),
        _capital(cumulus_words(document, units)) + ".",
        _wind(document, units),
        _evening(summary, clock),
    ]
    deep = summary.get("inverted_v_depth_m")
    if deep is not None:
        note = summary.get("dry_outflow_note")
        sentences.append(
            f"Under the condensation level the air is dry adiabatic through {units.height(deep)} (inverted-V)"
            + (f": {str(note).rstrip('.')}." if note else ".")
        )
    excess = summary.get("superadiabatic_excess_K")
    if excess is not None:
        sentences.append(
            f"Near the ground the air is {units.difference(excess)} warmer than the mixed layer (superadiabatic excess)."
        )
    return sentences


def most_telling(document: Document) -> list[Document]:
    """Assumed inputs with a computed change, the largest change of depth first."""
    items = [item for item in document.get("assumptions") or [] if item.get("effect_on_depth_m") is not None]
    return sorted(items, key=lambda item: -abs(float(item["effect_on_depth_m"])))


def telling_sentence(document: Document, units: Units) -> str:
    """Which assumed input would change the depth most; empty where no step was computed."""
    telling = most_telling(document)
    if not telling or not telling[0]["effect_on_depth_m"]:
        return ""
    return f"What would change the depth most: {telling[0]['name']} ({change_words(telling[0], units)})."


def change_words(item: Document, units: Units) -> str:
    """What the step in an assumed input changes: greatest depth, then highest temperature; empty where not computed."""
    depth, warm = item.get("effect_on_depth_m"), item.get("effect_on_max_temperature_K")
    changes = [
        *([units.height_change(depth)] if depth is not None else []),
        *([units.difference(warm, signed=True)] if warm is not None else []),
    ]
    return f"{item.get('step') or 'one step'}: {', '.join(changes)}" if changes else ""


def _later_day(document: Document, clock: Clock, units: Units) -> str:
    """The greatest depth of the days after the one the summary speaks of."""
    said = document["summary"].get("mixing_depth_max_time")
    if said is None:
        return ""
    first = clock.local(datetime.fromisoformat(said)).date()
    later: dict[Any, tuple[float, str]] = {}
    series = document["series"]
    for time, depth, regime in zip(series["time"], series["mixing_depth_m"], series["regime"], strict=True):
        day = clock.local(datetime.fromisoformat(time)).date()
        if (
            depth is not None
            and regime in {"mixed", "decaying"}
            and day > first
            and depth > later.get(day, (0.0, ""))[0]
        ):
            later[day] = (depth, time)
    return "".join(f" Later {units.height(depth)} at {clock.say(time)}." for depth, time in later.values())


def _depth(summary: Document, clock: Clock, units: Units, elevation: float | None) -> str:
    depth = summary.get("mixing_depth_max_m")
    if depth is None:
        return "The depth of the mixed layer is not known."
    definition = summary.get("mixing_depth_definition") or "definition not named"
    return (
        f"The mixed layer reaches {units.above_ground(depth, elevation)} at {clock.say(summary.get('mixing_depth_max_time'))}, "
        f"by the {definition}."
    )


def _temperature(summary: Document, clock: Clock, units: Units) -> str:
    def at(which: str) -> str:
        value = summary.get(f"temperature_2m_{which}_C")
        if value is None:
            return UNKNOWN
        return f"{units.temperature(value)} at {clock.say(summary.get(f'temperature_2m_{which}_time'))}"

    humidity = summary.get("relative_humidity_2m_min_pct")
    dry = "not known" if humidity is None else f"{humidity:.0f} %"
    return (
        f"The highest temperature at 2 m is {at('max')}, the lowest {at('min')}; the lowest relative humidity is {dry}."
    )


def _window(summary: Document, key: str, clock: Clock) -> str:
    """An event as a window where the result holds one, else rounded to the half hour."""
    window = summary.get(key.replace("_time", "_window"))
    if window and all(window):
        return f"between {clock.say(window[0], half_hours=True)} and {clock.say(window[1], half_hours=True)}"
    return f"about {clock.say(summary[key], half_hours=True)}"


def _breakup(document: Document, clock: Clock, units: Units) -> str:
    summary = document["summary"]
    needed, expected = summary.get("inversion_heat_needed_MJ_m2"), summary.get("inversion_heat_expected_MJ_m2")
    if needed is not None and needed <= 0.0:
        return "There is no surface inversion to break in the morning."
    heat = "the heat it takes is not known" if needed is None else f"it takes {needed:.2f} MJ/m²"
    if expected is not None:
        heat += f", {expected:.2f} MJ/m² expected"
    if summary.get("inversion_gone_time") is not None:
        return f"The morning inversion is gone {_window(summary, 'inversion_gone_time', clock)}; {heat}."
    if needed is None:
        return "When the morning inversion breaks is not known."
    return f"The morning inversion is not seen to break in these hours; {heat}."


def cumulus_words(document: Document, units: Units, *, short: bool = False) -> str:
    """Cumulus onset and base, or "no cumulus", or that it is not known."""
    summary, clock = document["summary"], Clock.of(document)
    onset = summary.get("cumulus_onset_time")
    warm = summary.get("convective_temperature_C")
    tail = "" if short or warm is None else f" (convective temperature {units.temperature(warm)})"
    if onset is not None:
        base = summary.get("cumulus_base_m")
        high = "base not known" if base is None else f"base {units.height(base)}"
        if not short and base is not None:
            high = f"base {units.above_ground(base, document['site'].get('elevation_m'))}"
        return f"cumulus from about {clock.say(onset, half_hours=True, utc=not short, zone=not short)}, {high}{tail}"
    if any(value is not None for value in document["series"].get("cumulus_fraction") or []):
        return f"no cumulus{tail}"
    return f"cumulus is not known{tail}"


def _direction(document: Document) -> float | None:
    """Direction of the transport wind at the hour of the greatest depth [degrees it comes from]."""
    series, hour = document["series"], document["summary"].get("mixing_depth_max_time")
    known = dict(zip(series["time"], series.get("transport_wind_from_deg") or [], strict=False))
    value = document["summary"].get("transport_wind_from_deg", known.get(hour))
    return None if value is None else float(value)


def _wind(document: Document, units: Units) -> str:
    summary, from_deg = document["summary"], _direction(document)
    speed = summary.get("transport_wind_m_s")
    direction = "" if from_deg is None or speed is None else f" from the {compass(from_deg)}"
    text = (
        f"At the greatest depth the transport wind is {units.speed(speed)}{direction}, "
        f"ventilation {units.ventilation(summary.get('ventilation_m2_s'))}"
    )
    low, high = summary.get("gust_low_m_s"), summary.get("gust_high_m_s")
    if low is None or high is None:
        text += "; gusts are not known."
    else:
        text += f"; gusts mixed down {units.speed(low).split()[0]} to {units.speed(high)}."
    named = summary.get("ventilation_class")
    if named:
        text += (
            f" The user's table of {named.get('authority') or 'an authority not named'} "
            f"({named.get('dated') or 'no date'}) calls this class {named.get('name')!r}."
        )
    return text


def _evening(summary: Document, clock: Clock) -> str:
    events = (
        ("sensible_flux_reversal_time", "the sensible heat flux turns downward"),
        ("inversion_onset_time", "a surface inversion forms"),
        ("mixing_end_time", "convective mixing ends"),
    )
    known = [f"{words} {_window(summary, key, clock)}" for key, words in events if summary.get(key) is not None]
    if not known:
        return "When the evening inversion forms is not known from these hours."
    return f"In the evening {', '.join(known)}."


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]
