"""The cautions that go with every forecast, in words, text and picture and JSON alike."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime
from typing import Any

from slab.wording import METRIC, Clock, Units

__all__ = ["complete", "forecast_cautions"]

Document = Mapping[str, Any]
FEW = 5  # assumed inputs that are named in a caution; more are counted


def complete(document: Document, units: Units = METRIC) -> list[dict[str, str]]:
    """Cautions of a document with those that must be shown and are missing added, in order of code.

    A caution that the document keeps in our own metric words is said again in the asked units.
    """
    own = {item["code"]: item["text"] for item in forecast_cautions(document)}
    given = {
        item["code"]: dict(item) for item in document.get("cautions") or [] if own.get(item["code"]) != item["text"]
    }
    due = {item["code"]: item for item in forecast_cautions(document, units)}
    return [
        *(given.get(code, item) for code, item in due.items()),
        *(x for code, x in given.items() if code not in due),
    ]


def forecast_cautions(document: Document, units: Units = METRIC) -> list[dict[str, str]]:
    """Cautions due with this forecast: G1 to G5, B1 to B3 where a ventilation class is shown, A1."""
    texts = {
        "G1": _one_profile(document, units),
        "G2": _not_valid(document),
        "G3": _definition(document, units),
        "G4": "Each change shown beside an input comes from one plausible step in it; together they do not include every error.",
        "G5": _repairs(document),
    }
    named = (document.get("summary") or {}).get("ventilation_class")
    if named:
        texts |= {
            "B1": "Official fire-weather forecasts and permits take precedence; this estimate may not be used to show permit "
            "compliance unless the authority says so.",
            "B2": "Depth says nothing about smoke after ignition stops; night drainage can carry smoke into valleys.",
            "B3": f"Ventilation table: {named.get('authority') or 'authority not named'}, dated "
            f"{named.get('dated') or 'not given'}. Other regions use other tables.",
        }
    also = " and above sea level" if units.name == "us" else ""
    texts["A1"] = (
        f"Not a weather briefing. Use official aviation weather sources; heights here are above ground{also} as stated."
    )
    return [{"code": code, "text": text} for code, text in texts.items()]


def _not_valid(document: Document) -> str:
    """What the run does not hold for, and which signs of it the run looks for."""
    snowy = any(
        item.get("name") == "land cover" and "snow" in str(item.get("value")).lower()
        for item in document.get("assumptions") or []
    )
    cases = "thunderstorm outflow, persistent rain or deep fog"
    if not snowy:
        cases = "thunderstorm outflow, persistent rain, deep fog or snow cover"
    wet = any("saturated" in str(item.get("code")) for item in document.get("doubts") or [])
    found = "found it, see the doubts" if wet else "found none"
    return (
        f"Not valid with fronts, sea or lake breezes, {cases}. Of their signs the run looks only for saturated air "
        f"(fog, stratus), and {found}."
    )


def _one_profile(document: Document, units: Units) -> str:
    profile = document.get("profile") or {}
    clock = Clock.of(document)
    place = profile.get("station") or profile.get("file") or "a place not named"
    distance = profile.get("distance_km")
    away = "distance not known" if distance is None else f"{units.distance(distance)} away"
    rise = profile.get("height_difference_m")
    if rise is None:
        level = "height difference not known"
    elif abs(rise) < 5.0:
        level = "at the site's height"
    else:
        level = f"{units.height(abs(rise))} {'higher' if rise > 0 else 'lower'} than the site"
    valid = profile.get("valid")
    when = "at an unknown time"
    if valid:
        moment = datetime.fromisoformat(valid)
        when = f"at {moment:%H:%M} UTC ({clock.local(moment):%H:%M} local)"
    return (
        "Model estimate from one profile treated as uniform over the area. "
        f"The profile is from {place}, {away}, {level}, launched {when}."
    )


def _definition(document: Document, units: Units) -> str:
    summary = document.get("summary") or {}
    used = summary.get("mixing_depth_definition") or "not named"
    known = [item["height_m"] for item in summary.get("other_definitions") or [] if item.get("height_m") is not None]
    if not known:
        return f"Depth definition used: {used}. Other definitions give no value on this profile."
    spread = f"{units.height(min(known))} to {units.height(max(known))}" if len(known) > 1 else units.height(known[0])
    return f"Depth definition used: {used}. Other definitions give {spread} from the same profile."


def _repairs(document: Document) -> str:
    repairs = [item for item in document.get("repairs") or [] if item.get("count")]
    text = "; ".join(f"{item['name']} {item['count']}" for item in repairs) or "none"
    assumed = [item["name"] for item in document.get("assumptions") or [] if item.get("source") == "assumed"]
    tail = f" Assumed, not observed: {', '.join(assumed)}." if assumed else ""
    if len(assumed) > FEW:
        tail = f" {len(assumed)} inputs are assumed, not observed; they are listed with the result."
    return f"Input repairs: {text}.{tail}"
