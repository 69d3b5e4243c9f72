"""A measured or computed profile described: levels, repairs, doubts, tops by definition, inversion, heat, cloud.

The document is a plain dict, also what `daylayer sounding --json` writes. Missing is None. Keys:

    schema              "daylayer/1"
    kind                "sounding"
    profile             file, format, station, valid (UTC, ISO), latitude, longitude, elevation_m, levels (number),
                        top_m, surface_pressure_hPa, wind_known, humidity_known
    levels              equal-length lists: height_m (above ground), height_msl_m, pressure_hPa, temperature_C,
                        dewpoint_C, theta_K, mixing_ratio_g_kg, wind_m_s, wind_from_deg
    repairs             list of name, count, detail
    flags               list of name, level (index from 0), height_m, detail
    definitions         name to one line of explanation, for every name used below
    tops                list of definition, height_m, detail
    tops_range          low_m, high_m over the definitions that answered
    critical_richardson the critical number used
    inversion           base_m, top_m, strength_K by the rule "rising"; null without one
    inversion_tables    the same by the rule of the observed tables
    superadiabatic      depth_m, excess_K; null without one
    cloud               condensation_level_surface_m, condensation_level_mean_m, mean_theta_K, mean_mixing_ratio_g_kg,
                        convective_level_m, convective_temperature_C
    heat                inversion_MJ_m2, convective_MJ_m2
    precipitable_water_mm
    summary             one sentence or two
    cautions, doubts    lists of code, text
"""

from __future__ import annotations

import re
from datetime import datetime
from math import isfinite
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from forcing.air import ZERO_CELSIUS, each, relative_humidity
from forcing.profile import precipitable_water
from forcing.sounding import Profile
from forcing.units import FOOT_M, METRIC, Style
from slab.heat import CloudLevels, cloud_levels, heat_to_break
from slab.inversions import RULES, Inversion, superadiabatic_layer, surface_inversions
from slab.tops import CRITICAL_RICHARDSON, EXPLANATIONS, TABLES_RISE, Top, all_tops

Document = dict[str, Any]

SATURATED: Final = 0.98
"""Relative humidity above which a level is read as cloud or fog (common practice)."""


def number(value: float, decimals: int) -> float | None:
    """Rounded, or None where it is missing."""
    return round(float(value), decimals) if isfinite(value) else None


def _numbers(values: NDArray[np.float64], decimals: int) -> list[float | None]:
    return [number(float(value), decimals) for value in values]


def wind(profile: Profile) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Speed [m/s] and direction the wind blows from [degrees], NaN where no wind is known."""
    if not profile.wind_known:
        empty = np.full_like(profile.height, np.nan)
        return empty, empty
    speed = np.hypot(profile.u, profile.v)
    return speed, np.mod(np.degrees(np.arctan2(-profile.u, -profile.v)), 360.0)


def _levels(profile: Profile) -> dict[str, list[float | None]]:
    speed, direction = wind(profile)
    ratio = 1000.0 * profile.humidity / (1.0 - profile.humidity)
    return {
        "height_m": _numbers(profile.height, 1),
        "height_msl_m": _numbers(profile.height + profile.elevation, 1),
        "pressure_hPa": _numbers(profile.pressure / 100.0, 2),
        "temperature_C": _numbers(profile.temperature - ZERO_CELSIUS, 2),
        "dewpoint_C": _numbers(_if(profile.humidity_known, profile.dewpoint - ZERO_CELSIUS), 2),
        "theta_K": _numbers(profile.theta, 3),
        "mixing_ratio_g_kg": _numbers(_if(profile.humidity_known, ratio), 4),
        "wind_m_s": _numbers(speed, 2),
        "wind_from_deg": _numbers(direction, 1),
    }


def _if(known: bool, values: NDArray[np.float64]) -> NDArray[np.float64]:
    return values if known else np.full_like(values, np.nan)


def _inversion(found: Inversion) -> dict[str, float | None] | None:
    if not found.present:
        return None
    return {
        "base_m": number(found.base, 1),
        "top_m": number(found.top, 1),
        "strength_K": number(found.strength, 2),
    }


def _about(profile: Profile) -> dict[str, Any]:
    return {
        "file": profile.file,
        "format": profile.format,
        "station": profile.station,
        "valid": profile.valid.strftime("%Y-%m-%dT%H:%M:%SZ"),
        "latitude": number(profile.latitude, 4),
        "longitude": number(profile.longitude, 4),
        "elevation_m": number(profile.elevation, 1),
        "levels": int(profile.height.size),
        "top_m": number(float(profile.height[-1]), 1),
        "surface_pressure_hPa": number(profile.surface_pressure / 100.0, 2),
        "wind_known": profile.wind_known,
        "humidity_known": profile.humidity_known,
    }


def _cloud(cloud: CloudLevels) -> dict[str, float | None]:
    ratio = cloud.mean_humidity / (1.0 - cloud.mean_humidity)
    return {
        "condensation_level_surface_m": number(cloud.surface_parcel, 1),
        "condensation_level_mean_m": number(cloud.mean_parcel, 1),
        "mean_theta_K": number(cloud.mean_theta, 2),
        "mean_mixing_ratio_g_kg": number(1000.0 * ratio, 3),
        "convective_level_m": number(cloud.convective_level, 1),
        "convective_temperature_C": number(cloud.convective_temperature - ZERO_CELSIUS, 2),
    }


def saturated_level(profile: Profile, ceiling: float) -> float | None:
    """Lowest height [m] up to `ceiling` where the air is saturated (98 % or more), or None."""
    if not profile.humidity_known:
        return None
    moisture = each(relative_humidity, profile.temperature, profile.humidity, profile.pressure)
    wet = np.flatnonzero((moisture >= SATURATED) & (profile.height <= ceiling))
    return float(profile.height[int(wet[0])]) if wet.size else None


def _doubts(profile: Profile, tops: tuple[Top, ...]) -> list[dict[str, str]]:
    found = []
    depth = tops[0].height
    if not isfinite(depth):
        text = f"the layer reaches the profile's top at {profile.height[-1]:.0f} m above ground; its depth is unknown"
        found.append({"code": "top_of_profile", "text": text})
    wet = saturated_level(profile, depth if isfinite(depth) else float(profile.height[-1]))
    if wet is not None:
        text = f"the air is saturated at {wet:.0f} m above ground, inside the layer; dry definitions do not hold there"
        found.append({"code": "saturated_layer", "text": text})
    return found


def cautions(document: Document, style: Style) -> list[dict[str, str]]:
    """Cautions that belong to a description, with heights in the style's unit."""
    span, repairs = document["tops_range"], document["repairs"]
    spread = "no definition could answer"
    if span["low_m"] is not None:
        spread = f"the definitions give {style.height(span['low_m'])} to {style.height(span['high_m'])} above ground"
    found = [{"code": "G3", "text": f"Mixing depth has no single definition: from this profile {spread}."}]
    if repairs:
        made = sum(one["count"] for one in repairs)
        text = f"Input repairs: {len(repairs)} kinds touching {made} levels or values; each is listed by name."
        found.append({"code": "G5", "text": text})
    text = "Not a weather briefing. Use official aviation weather sources; heights are above ground or sea level as stated."
    return [*found, {"code": "A1", "text": text}]


_METRES = re.compile(r"(\d+(?:\.\d+)?) (k?m)\b(?!/)")
_GRADIENT = re.compile(r"(-?\d+(?:\.\d+)?) (K|g/kg) per 100 m\b")


def restyle(words: str, style: Style) -> str:
    """Words of a detail or an explanation with their heights in the style's unit; metric ones stay as they are.

    Gradients are told per 100 ft; potential temperatures and the thresholds on them stay in K.
    """
    if style.length == "m":
        return words
    words = _GRADIENT.sub(lambda found: f"{float(found[1]) * FOOT_M:.2g} {found[2]} per 100 ft", words)
    return _METRES.sub(lambda found: style.height(float(found[1]) * (1000.0 if found[2] == "km" else 1.0)), words)


def sentence(document: Document, style: Style) -> str:
    """The answer in one sentence, with heights and differences in the style's unit."""
    about, depth = document["profile"], document["tops"][0]["height_m"]
    inversion, layer = document["inversion"], document["superadiabatic"]
    where = f" over {about['station']}" if about["station"] else ""
    valid = datetime.fromisoformat(about["valid"])
    when = f"{valid:%H:%M} UTC on {valid.day} {valid:%B %Y}"
    if inversion is not None:
        strength, top = style.difference(inversion["strength_K"]), style.height(inversion["top_m"])
        state = f"a surface inversion of {strength} reaches {top} above ground"
    elif layer is not None:
        excess, top = style.difference(layer["excess_K"]), style.height(layer["depth_m"])
        state = f"the lowest {top} are superadiabatic by {excess}"
    else:
        state = "the air at the ground is neither inverted nor superadiabatic"
    if depth is None:
        mixed = "no top is found below the profile's end"
    else:
        mixed = f"virtual potential temperature is {TABLES_RISE:g} K over its minimum at {style.height(depth)}"
    return f"At {when}{where} {state}; {mixed}."


def describe(profile: Profile, *, critical: float = CRITICAL_RICHARDSON) -> Document:
    """Everything the `sounding` command says about a profile, as the document described at the head of the module.

    Parameters
    ----------
    profile : Profile
        Measured or computed.
    critical : float
        Critical bulk Richardson number.
    """
    layer = superadiabatic_layer(profile)
    tops = all_tops(profile, critical=critical, start=layer.depth if layer else 0.0)
    rising, tables = surface_inversions(profile)
    cloud = cloud_levels(profile)
    known = [top.height for top in tops if isfinite(top.height)]
    low, high = (number(min(known), 1), number(max(known), 1)) if known else (None, None)
    water = precipitable_water(profile) if profile.humidity_known else float("nan")
    rules = {f"inversion ({name})": text for name, text in RULES.items()}
    document: Document = {
        "schema": "daylayer/1",
        "kind": "sounding",
        "summary": "",
        "profile": _about(profile),
        "levels": _levels(profile),
        "repairs": [{"name": one.name, "count": one.count, "detail": one.detail} for one in profile.repairs],
        "flags": [
            {"name": f.name, "level": f.level_index, "height_m": number(f.height_m, 1), "detail": f.detail}
            for f in profile.flags
        ],
        "definitions": {**EXPLANATIONS, **rules},
        "tops": [{"definition": t.definition, "height_m": number(t.height, 1), "detail": t.detail} for t in tops],
        "tops_range": {"low_m": low, "high_m": high},
        "critical_richardson": critical,
        "inversion": _inversion(rising),
        "inversion_tables": _inversion(tables),
        "superadiabatic": None
        if layer is None
        else {"depth_m": number(layer.depth, 1), "excess_K": number(layer.excess, 2)},
        "cloud": _cloud(cloud),
        "heat": {
            "inversion_MJ_m2": number(heat_to_break(profile, rising) / 1e6, 3),
            "convective_MJ_m2": number(cloud.convective_heat / 1e6, 3),
        },
        "precipitable_water_mm": number(water, 2),
        "cautions": [],
        "doubts": _doubts(profile, tops),
    }
    document["summary"] = sentence(document, METRIC)
    document["cautions"] = cautions(document, METRIC)
    return document
