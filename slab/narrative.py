"""The day in sentences, from the summary of a result; shared by the text and the picture."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime
from typing import Any

from slab.wording import CLOUD_SHOWN, UNKNOWN, Clock, Units, compass

__all__ = ["cumulus_words", "day_sentences", "evening_depth", "gust_words", "headline"]

Document = Mapping[str, Any]

FEW_CUMULUS = 0.02  # cumulus fraction that hours after the first stay under for "almost none" (our choice)
SCATTERED = 0.1  # cumulus fraction from which cumulus are not called few (our choice)
CLEARLY = 0.1  # part of the first day's depth that a later day's must differ by to be told (our choice)
CONVECTIVE = "the surface temperature at which the morning profile's own air would make cumulus without any mixing"


def headline(document: Document, units: Units) -> str:
    """One sentence: greatest depth, warmest and coldest hour with their days, and whether cumulus forms."""
    summary, clock = document["summary"], Clock.of(document, brief=True)
    depth, warmest = summary.get("mixing_depth_max_m"), summary.get("temperature_2m_max_C")
    coldest = summary.get("temperature_2m_min_C")

    def at(key: str) -> str:
        return clock.say(summary.get(key))

    parts = [
        "Depth of the mixed layer not known"
        if depth is None
        else f"Mixed layer to {units.height(depth)} above ground at {at('mixing_depth_max_time')} local",
        "highest temperature not known"
        if warmest is None
        else f"highest temperature {units.temperature(warmest)} at {at('temperature_2m_max_time')}",
    ]
    when = summary.get("temperature_2m_min_time")
    if coldest is not None and when is not None:
        parts.append(f"lowest {units.temperature(coldest)} at {clock.say_with_day(when)}")
    return f"{', '.join(parts)}; {cumulus_words(document, units, clock)}."


def day_sentences(document: Document, units: Units, *, brief: bool = False) -> list[str]:
    """The day in sentences, most important first; what is missing is said to be not known.

    Brief ones have local times alone and explain no terms: beside a picture whose axes have both clocks.
    """
    summary, clock = document["summary"], Clock.of(document, brief=brief)
    elevation = document["site"].get("elevation_m")
    sentences = [
        _depth(summary, clock, units, elevation) + _later_days(document, clock, units),
        _temperature(summary, clock, units),
        _breakup(document, clock),
        _capital(cumulus_words(document, units, clock)) + "." + _convective(summary, units, brief=brief),
        _wind(document, units, brief=brief),
        _evening(summary, clock) + evening_depth(document, units),
    ]
    night = _night(summary, clock, units)
    if night:
        sentences.append(night)
    note = summary.get("dry_outflow_note")
    deep = summary.get("inverted_v_depth_m")
    if note and deep is not None:
        sentences.append(
            f"Under the condensation level the air is dry adiabatic through {units.height(deep)} (inverted-V): "
            f"{str(note).rstrip('.')}."
        )
    excess = summary.get("superadiabatic_excess_K")
    if excess is not None:
        sentences.append(
            f"Near the ground the air is {units.difference(excess)} warmer than the mixed layer (superadiabatic excess)."
        )
    return sentences


def _greatest_later(document: Document, clock: Clock, said: str) -> list[tuple[float, int]]:
    """Greatest depth of each day after the one of a time, with its row."""
    first = clock.local(datetime.fromisoformat(said)).date()
    later: dict[Any, tuple[float, int]] = {}
    series = document["series"]
    rows = zip(series["time"], series["mixing_depth_m"], series["regime"], strict=True)
    for n, (time, depth, regime) in enumerate(rows):
        day = clock.local(datetime.fromisoformat(time)).date()
        convective = depth is not None and regime in {"mixed", "decaying"}
        if convective and day > first and depth > later.get(day, (0.0, 0))[0]:
            later[day] = (depth, n)
    return list(later.values())


def _later_days(document: Document, clock: Clock, units: Units) -> str:
    """Depths of later days that exceed the first day's or differ clearly from it."""
    summary, times = document["summary"], document["series"]["time"]
    said, depth = summary.get("mixing_depth_max_time"), summary.get("mixing_depth_max_m")
    if said is None or depth is None:
        return ""
    text = ""
    for later, n in _greatest_later(document, clock, said):
        more = later > depth and units.height(later) != units.height(depth)
        if more or abs(later - depth) >= CLEARLY * depth:
            ends = " (run ends)" if n == len(times) - 1 else ""
            text += f" Later {units.height(later)} at {clock.say(times[n])}{ends}."
    return text


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
        return f"{units.temperature(value)} at {clock.say_with_day(summary.get(f'temperature_2m_{which}_time'))}"

    humidity = summary.get("relative_humidity_2m_min_pct")
    dry = UNKNOWN if humidity is None else f"{humidity:.0f} %"
    when = summary.get("relative_humidity_2m_min_time")
    if humidity is not None and when is not None:
        dry += f" at {clock.say(when)}"
    return (
        f"The highest temperature at {units.length(2.0)} is {at('max')}, the lowest after it {at('min')}; "
        f"the lowest relative humidity is {dry}."
    )


def _window(summary: Document, key: str, clock: Clock) -> str:
    """An event as a window where the result holds one, else rounded to the half hour."""
    window = summary.get(key.replace("_time", "_window"))
    if window and all(window):
        return f"between {clock.say(window[0], half_hours=True)} and {clock.say(window[1], half_hours=True)}"
    return f"about {clock.say(summary[key], half_hours=True)}"


def _breakup(document: Document, clock: Clock) -> str:
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


def cumulus_words(document: Document, units: Units, clock: Clock) -> str:
    """Cumulus onset and base, or "no cumulus", or that it is not known."""
    summary = document["summary"]
    onset = summary.get("cumulus_onset_time")
    if onset is None:
        known = any(value is not None for value in document["series"].get("cumulus_fraction") or [])
        return "no cumulus" if known else "cumulus is not known"
    when = clock.say(onset, half_hours=True)
    base = _base(document, units, clock)
    hours = _hours_after(document, clock, onset)
    later = [fraction for _, fraction, _ in hours[1:]]
    if hours and later and max(later) < FEW_CUMULUS and hours[0][1] < SCATTERED:
        return f"a few cumulus around {when}, then almost none, {base}"
    return f"cumulus from about {when}, {base}"


def _hours_after(document: Document, clock: Clock, onset: str) -> list[tuple[datetime, float, float | None]]:
    """Time, cumulus fraction and condensation level of the rows of the onset's day, from the one nearest before it."""
    series, begun = document["series"], datetime.fromisoformat(onset)
    levels = series.get("condensation_level_m") or [None] * len(series["time"])
    rows = [
        (moment, float(fraction), level)
        for moment, fraction, level in zip(
            map(datetime.fromisoformat, series["time"]), series.get("cumulus_fraction") or [], levels, strict=False
        )
        if fraction is not None and clock.local(moment).date() == clock.local(begun).date()
    ]
    return [row for row in rows if row[0] >= begun]


def _base(document: Document, units: Units, clock: Clock) -> str:
    """Range of the cloud base over the hours with cumulus."""
    summary = document["summary"]
    first = summary.get("cumulus_base_m")
    hours = _hours_after(document, clock, summary["cumulus_onset_time"])
    known = [level for _, fraction, level in hours if fraction >= CLOUD_SHOWN and level is not None]
    known += [first] if first is not None else []
    if not known:
        return "base not known"
    low, high = min(known), max(known)
    low_text = units.height_number(low)
    span = "" if low_text == units.height_number(high) else f"{low_text} to "
    if clock.brief:
        return f"base {span}{units.height(high)}"
    elevation = document["site"].get("elevation_m")
    if span and elevation is not None and units.name == "us":
        sea = [units.height_number(value + elevation) for value in (low, high)]
        return f"base {span}{units.height(high)} above ground ({sea[0]} to {sea[1]} ft above sea level)"
    return f"base {span}{units.above_ground(high, elevation)}"


def _convective(summary: Document, units: Units, *, brief: bool) -> str:
    warm = summary.get("convective_temperature_C")
    meaning = "" if brief else f", {CONVECTIVE},"
    return "" if warm is None else f" The convective temperature{meaning} is {units.temperature(warm)}."


def _direction(document: Document) -> float | None:
    """Direction of the transport wind at the hour of the greatest depth [degrees it comes from]."""
    series, hour = document["series"], document["summary"].get("mixing_depth_max_time")
    known = dict(zip(series["time"], series.get("transport_wind_from_deg") or [], strict=False))
    value = document["summary"].get("transport_wind_from_deg", known.get(hour))
    return None if value is None else float(value)


def gust_words(document: Document, units: Units, *, brief: bool = False) -> str:
    """Range of the gusts mixed down, for which hours, and whose winds aloft they are."""
    low, high = (document["summary"].get(f"gust_{which}_m_s") for which in ("low", "high"))
    if low is None or high is None:
        return "gusts are not known"
    held = any(
        item.get("key") == "profile.later" and item.get("source") == "assumed"
        for item in document.get("assumptions") or []
    )
    aloft = "the winds aloft held from the release" if held else "the winds aloft of the run"
    meaning = "" if brief else "from the layer's mean wind to the strongest reached, "
    span = f"{units.speed_number(low)} to {units.speed(high)}"
    return f"gusts mixed down at any time of the day are {span}, {meaning}by {aloft}"


def _wind(document: Document, units: Units, *, brief: bool) -> str:
    summary, from_deg = document["summary"], _direction(document)
    speed = summary.get("transport_wind_m_s")
    direction = "" if from_deg is None or speed is None else f" from the {compass(from_deg)}"
    text = (
        f"At the greatest depth the transport wind is {units.speed(speed)}{direction}, "
        f"ventilation {units.ventilation(summary.get('ventilation_m2_s'))}; {gust_words(document, units, brief=brief)}."
    )
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
    known: dict[str, list[str]] = {}
    for key, words in events:
        if summary.get(key) is not None:
            known.setdefault(_window(summary, key, clock), []).append(words)
    if not known:
        return "When the evening inversion forms is not known from these hours."
    parts = [f"{_joined(words)} {when}" for when, words in known.items()]
    return f"In the evening {'; '.join(parts)}."


def _night(summary: Document, clock: Clock, units: Units) -> str:
    """Dew, frost, fog and the wind that would keep the night mixed; empty where no night was computed."""
    events = (
        ("dew_onset_time", "dew"),
        ("hoar_frost_onset_time", "hoar frost"),
        ("air_frost_onset_time", "air frost"),
        ("fog_onset_time", "fog, onset only,"),
    )
    known = [
        f"{words} from about {clock.say(summary[key], half_hours=True, utc=False)}"
        for key, words in events
        if summary.get(key) is not None
    ]
    wind = summary.get("mixed_night_wind_m_s")
    if wind is None:
        return ""
    least = (
        f"A wind of {units.speed(wind)} at {units.height(summary['mixed_night_wind_height_m'])} would keep the night's air mixed"
    )
    seen = _joined(known) if known else "no dew, frost or fog is computed"
    return f"In the first night {seen}. {least}."


def evening_depth(document: Document, units: Units) -> str:
    """What becomes of the depth after the day; empty where the run holds no residual layer over a night."""
    series = document["series"]
    tops = series.get("residual_top_m") or []
    methods = series.get("depth_method") or [""] * len(tops)
    mixed = next((n for n, regime in enumerate(series["regime"]) if regime in {"mixed", "decaying"}), len(tops))
    left = [
        top
        for top, method in list(zip(tops, methods, strict=False))[mixed:]
        if top is not None and str(method).startswith("stress")
    ]
    if not left:
        return ""
    return (
        " From then on the depth is that of shear-driven mixing; the day's layer stays above it as the residual layer, "
        f"up to {units.height(left[0])}."
    )


def _joined(words: list[str]) -> str:
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]
