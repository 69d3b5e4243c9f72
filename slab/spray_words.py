"""What a spray calendar says in sentences, for text and picture alike."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import datetime
from typing import Any

from forcing.units import MILE_PER_HOUR_M_S
from slab.wording import Clock, Units, number

__all__ = [
    "LIMIT_NAMES",
    "from_now",
    "heading_words",
    "limit_sentences",
    "lines_of_inversion",
    "plan_words",
    "profile_age",
    "span",
    "spray_wind",
    "statement",
    "stretch_mark",
]

Document = Mapping[str, Any]

LIMIT_NAMES = {
    "inversion": "inversion",
    "possible inversion": "possible inversion",
    "wind": "wind",
    "hours": "hours from sunrise or to sunset",
    "delta-t": "Delta-T",
    "temperature": "temperature",
    "humidity": "humidity",
    "rain": "rain",
}
PLAN = "plan only"
PAST = "past"


def stretch_mark(clock: Clock, one: Mapping[str, Any], now: str) -> str:
    """The mark of a stretch: past, plan only, or past up to now and plan only from there."""
    begun = datetime.fromisoformat(one["start"]) < datetime.fromisoformat(now)
    if one["plan_only"] and begun:
        return f"{PAST} to {clock.say(now, utc=False, zone=False)}, then {PLAN}"
    return plan_words(one["plan_only"])


def plan_words(plan_only: bool) -> str:
    """The mark of an hour: a plan where it is still to come."""
    return PLAN if plan_only else PAST


def heading_words(document: Document) -> str:
    """What the page is: a plan while any of its hours is still to come, else a look back."""
    future = any(hour["plan_only"] for hour in document["calendar"])
    return "Spray calendar, plan only" if future else "Spray calendar of past hours, as modelled"


def span(clock: Clock, ends: Sequence[str] | None, *, joined: str = "to") -> str:
    """A range of hours in local time; a date that both ends share is said once."""
    if not ends:
        return "not known"
    early, late = (clock.say(one, utc=False, zone=False) for one in ends)
    first, _, date = early.partition(" on ")
    if date and late.endswith(f" on {date}"):
        early = first
    return f"{early} {joined} {late}"


def spray_wind(units: Units, value: float | None) -> str:
    """Wind near the ground: m/s, or mph in us units."""
    if value is None:
        return "not known"
    return f"{number(value, 0.1)} m/s" if units.name == "metric" else f"{number(value / MILE_PER_HOUR_M_S, 1.0)} mph"


def profile_age(document: Document) -> str:
    """Age of the profile at the moment the calendar is made, and its distance."""
    profile = document["profile"]
    far, hours = profile.get("distance_km"), profile["age_hours"]
    away = "at an unknown distance" if far is None else f"{far:.0f} km away"
    moment = f"{document['now'][:16].replace('T', ' ')} UTC"
    age = f"{_long(hours)} old at {moment}" if hours >= 0.0 else f"released {_long(-hours)} after {moment}"
    return f"{age}, {away}"


def _long(hours: float) -> str:
    return f"{hours:.1f} h" if hours < 72.0 else f"{hours / 24.0:.0f} days"


def _hours_from(window: Mapping[str, Any], event: str | None, name: str) -> str:
    """A window said from sunset or sunrise, such as "0.5 to 2.0 h before sunset"."""
    if event is None:
        return ""
    sun = datetime.fromisoformat(event)
    first, last = ((datetime.fromisoformat(window[key]) - sun).total_seconds() / 3600.0 for key in ("early", "late"))
    if last <= 0.0:
        return f", {-last:.1f} to {-first:.1f} h before {name}"
    if first >= 0.0:
        return f", {first:.1f} to {last:.1f} h after {name}"
    return f", {-first:.1f} h before to {last:.1f} h after {name}"


def lines_of_inversion(document: Document, units: Units) -> list[str]:
    """One sentence for every night that the run touches, those still ahead before those that are over."""
    now = datetime.fromisoformat(document["now"])
    over = [_is_over(night, now) for night in document["nights"]]
    ordered = [
        night
        for wanted in (False, True)
        for night, past in zip(document["nights"], over, strict=True)
        if past is wanted
    ]
    return [_night(document, night, units) for night in ordered]


def _is_over(night: Mapping[str, Any], now: datetime) -> bool:
    last = night["end"]["late"] if night["end"] else night["to"]
    return datetime.fromisoformat(last) < now


def _night(document: Document, night: Mapping[str, Any], units: Units) -> str:
    clock, (low, high) = Clock.of(document), document["between_m"]
    local = clock.local(datetime.fromisoformat(night["from"]))
    name = f"night from {local:%a} {local.day} {local:%b}"
    onset, end, parts = night["onset"], night["end"], []
    if onset:
        some = _members(onset["members"], night["of_members"])
        ends = span(clock, (onset["early"], onset["late"]), joined="and")
        parts.append(f"begins between {ends}{_hours_from(onset, night['sunset'], 'sunset')}{some}")
    elif night["there_before"]:
        parts.append("is there from before")
    if end:
        some = _members(end["members"], night["of_members"])
        ends = span(clock, (end["early"], end["late"]), joined="and")
        parts.append(f"ends between {ends}{_hours_from(end, night['sunrise'], 'sunrise')}{some}")
    elif night["goes_on"]:
        parts.append("does not end within this night of the run")
    if not parts:
        return f"{name}: {_nothing(document, night, clock)}."
    strong = night["strongest_difference_K"]
    if strong is not None and strong > 0.0:
        parts.append(f"at most {units.difference(strong)} between {low:g} and {high:g} m")
    return f"{name}: an inversion {', '.join(parts)}."


def _nothing(document: Document, night: Mapping[str, Any], clock: Clock) -> str:
    """A night without an inversion in the run, or one that the run says nothing about."""
    last, (low, high) = document["series"]["time"][-1], document["between_m"]
    stop, sunset = datetime.fromisoformat(last), night["sunset"]
    ended = clock.say(last, utc=False, zone=False)
    if sunset is not None and stop < datetime.fromisoformat(sunset):
        return f"not covered, the run ends at {ended}, before sunset"
    known = f" to {ended}, where the run ends" if stop < datetime.fromisoformat(night["to"]) else ""
    return f"no inversion between {low:g} and {high:g} m{known}"


def from_now(document: Document) -> list[str]:
    """What the inversion means for work that begins now: how far the next window is, or in which one this is."""
    clock, moment, times = Clock.of(document), document["now"], document["series"]["time"]
    now, last = datetime.fromisoformat(moment), datetime.fromisoformat(times[-1])
    if not datetime.fromisoformat(times[0]) <= now < last:
        return []
    here = f"Now, {clock.say(moment, utc=False)}"
    for night in document["nights"]:
        onset, end = night["onset"], night["end"]
        if _is_over(night, now) or not (onset or end or night["there_before"]):
            continue
        if onset and now < datetime.fromisoformat(onset["early"]):
            ahead = (datetime.fromisoformat(onset["early"]) - now).total_seconds() / 3600.0
            first = clock.say(onset["early"], utc=False, zone=False)
            return [
                f"{here}: the next inversion may begin from {first}, {ahead:.1f} h ahead; work still under way then may be in it."
            ]
        if onset and now <= datetime.fromisoformat(onset["late"]):
            window = span(clock, (onset["early"], onset["late"]))
            return [f"{here}, lies in the window of onset, {window}: an inversion may be there already."]
        if end and now >= datetime.fromisoformat(end["early"]):
            until = clock.say(end["late"], utc=False, zone=False)
            return [f"{here}, lies in the window of the end: an inversion may last to {until}, on low ground longer."]
        until = "does not end in the hours of the run"
        if end:
            until = f"ends between {span(clock, (end['early'], end['late']), joined='and')}, on low ground later"
        return [f"{here}: the run has an inversion; it {until}."]
    return [f"{here}: no inversion in any member to {clock.say(times[-1], utc=False, zone=False)}, where the run ends."]


def _members(have: int, of: int) -> str:
    return "" if have == of else f" (in {have} of {of} members)"


def limit_sentences(document: Document) -> list[str]:
    """Whose limits these are, and in which order they are named."""
    limits = document["limits"]
    height = f"wind is read at {limits['wind_height_m']:g} m ({limits['wind_height_source']})"
    if not limits["given"]:
        return [
            (
                f"No limits were given, so that no hour is called inside or outside: this shows conditions only; {height}. Put "
                "your own limits into the [limits] section of the scenario, with the authority and the date."
            )
        ]
    order = ", ".join(LIMIT_NAMES[one["code"]] for one in limits["order"])
    return [
        f"Your limits: {limits['authority']}, dated {limits['dated'] or 'not given'}; {height}: {_ranges(limits)}.",
        f"An hour is outside for its most limiting reason, in the order: {order}; what is not known never counts as inside.",
    ]


def _ranges(limits: Mapping[str, Any]) -> str:
    said = []
    for name, low, high, unit in (
        ("wind", "wind_min_m_s", "wind_max_m_s", " m/s"), ("Delta-T", "delta_t_min_K", "delta_t_max_K", " K"),
    ):  # fmt: skip
        ends = (limits[low], limits[high])
        if ends != (None, None):
            words = [f"{word} {value:g}" for word, value in zip(("from", "to"), ends, strict=True) if value is not None]
            said.append(f"{name} {' '.join(words)}{unit}")
    for key, form in (
        ("hours_after_sunrise", "from {:g} h after sunrise"), ("hours_before_sunset", "to {:g} h before sunset"),
        ("temperature_max_C", "at most {:g} °C"), ("humidity_min_pct", "humidity from {:g} %"),
        ("rain_free_hours", "no rain for {:g} h"),
    ):  # fmt: skip
        if limits[key] is not None:
            said.append(form.format(limits[key]))
    return ", ".join(said)


def statement(document: Document, units: Units) -> list[str]:
    """The answer in sentences: inside or not, the inversion by night, low ground, the tower."""
    clock = Clock.of(document)
    out = from_now(document)
    if document["limits"]["given"]:
        out += _inside(document, clock)
    if not document["summary"]["wind_known"]:
        out.append("The wind is not known: no hour can be inside.")
    out += lines_of_inversion(document, units)
    for field in document["low_ground"]["fields"]:
        said_ends = [span(clock, ends, joined="and") for ends in field["ends"] if ends]
        later = " to ".join(f"{x:.1f}" for x in field["later_h"])
        if said_ends:
            out.append(
                f"Field {units.height_value(field['below_m']):.0f} {units.height_unit} below the site: its inversion ends {later} h "
                f"later or later still, between {'; '.join(said_ends)}; begins earlier by an unknown time (few observations)."
            )
    seen = document["observed"]
    if seen:
        out.append(_tower(seen, clock, units))
    return out


def _inside(document: Document, clock: Clock) -> list[str]:
    """Stretches inside the user's limits: those to come, then those that are past."""
    found = [one for one in document["stretches"] if one["status"] == "inside"]
    coming = [_rest(one, document["now"]) for one in found if one["plan_only"]]
    past = [one for one in found if not one["plan_only"]]
    out = []
    if coming:
        said = "; ".join(_stretch(clock, one) for one in coming)
        out.append(f"Inside your own limits, with no inversion in any member: {said}. Plan only.")
    elif any(hour["plan_only"] for hour in document["calendar"]):
        out.append(
            "No hour to come is inside your own limits without a possible inversion or an input that is not known."
        )
    if past:
        said = "; ".join(_stretch(clock, one) for one in past)
        out.append(f"Of the past hours, as modelled, inside your own limits: {said}.")
    elif not coming:
        out.append("No past hour of the run is inside them as modelled.")
    return out


def _rest(one: Mapping[str, Any], now: str) -> Mapping[str, Any]:
    """What is still to come of a stretch."""
    begun = datetime.fromisoformat(one["start"]) < datetime.fromisoformat(now)
    return {**one, "start": now, "start_spread": None} if begun else one


def _stretch(clock: Clock, one: Mapping[str, Any]) -> str:
    text = span(clock, (one["start"], one["end"]))
    spreads = [
        f"{word} may move within {span(clock, one[key])}"
        for word, key in (("start", "start_spread"), ("end", "end_spread"))
        if one[key]
    ]
    return text + (f" ({', '.join(spreads)})" if spreads else "")


def _tower(seen: Mapping[str, Any], clock: Clock, units: Units) -> str:
    low, high = seen["heights_m"]
    text = (
        f"Tower to {clock.say(seen['last'], utc=False)}: {low:g} to {high:g} m {_signed(units, seen['observed_difference_K'])} "
        f"read, {_signed(units, seen['modelled_difference_K'])} modelled"
    )
    if seen["observed_wind_m_s"] is not None:
        text += f"; wind {spray_wind(units, seen['observed_wind_m_s'])} read, {spray_wind(units, seen['modelled_wind_m_s'])} modelled"
    return text + ". The windows above are recomputed from it."


def _signed(units: Units, kelvin: float) -> str:
    return units.difference(kelvin, signed=True)
