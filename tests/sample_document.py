"""Invented result documents, built by formula, for the tests of pictures, text and files.

No number here was observed or computed by a model: they have the shape of a result, nothing more.
"""

from __future__ import annotations

import math
from datetime import UTC, datetime, timedelta
from typing import Any

Document = dict[str, Any]


def sample(
    *,
    hours: int = 36,
    depth_max: float = 1850.0,
    night_depth: float = 90.0,
    cumulus: bool = True,
    missing: bool = False,
    southern: bool = False,
    limits: bool = False,
    crowded: bool = False,
    released_after_h: float = 0.1,
    coldest: float = 11.0,
    warmest: float = 28.5,
) -> Document:
    """Build one invented document with hourly rows from dawn."""
    zone, offset = ("Etc/GMT-10", 10) if southern else ("Etc/GMT+6", -6)
    start = datetime(2026, 7, 14, 20, tzinfo=UTC) if southern else datetime(2026, 7, 14, 11, tzinfo=UTC)
    rise, set_ = (6.9, 17.2) if southern else (4.9, 19.4)
    rows = [
        _row(start, offset, n, rise, set_, depth_max, night_depth, cumulus, coldest, warmest) for n in range(hours + 1)
    ]
    series: dict[str, list[Any]] = {name: [row[name] for row in rows] for name in rows[0]}
    if missing:
        for name in ("mixing_depth_m", "ventilation_m2_s", "temperature_2m_C", "sensible_flux_W_m2"):
            series[name][5:8] = [None] * 3
        for name in ("transport_wind_m_s", "transport_wind_from_deg", "wind_10m_m_s", "ventilation_m2_s"):
            series[name] = [None] * len(rows)
    document: Document = {
        "schema": "daylayer/1",
        "title": "Invented plain, a clear day",
        "site": {
            "name": "Invented plain",
            "latitude": -34.6 if southern else 41.2,
            "longitude": 148.1 if southern else -97.4,
            "elevation_m": 450.0,
            "time_zone": zone,
        },
        "profile": _release(start + timedelta(hours=released_after_h), missing),
        "assumptions": _assumptions(),
        "repairs": [
            {"name": "levels removed", "count": 2, "detail": "pressure not falling"},
            {"name": "heights filled", "count": 11, "detail": "integrated hydrostatically"},
        ],
        "warnings": ["the air aloft is held as the balloon found it; no later profile was given"],
        "cautions": [
            {
                "code": "G2",
                "text": "Not valid with fronts, sea or lake breezes, thunderstorm outflow, persistent rain, deep fog or snow "
                "cover; the run has detected no signs of these.",
            },
        ],
        "doubts": [{"code": "wind-unknown", "text": "the profile carries no wind and the weather gives none"}]
        if missing
        else [],
        "summary": _summary(series, start, offset, rise, set_, cumulus, missing, limits),
        "series": series,
        "definitions": {"slab top": "height of the density jump at the top of the mixed slab"},
        "profiles": _profiles(series, start, depth_max, coldest),
        "sun": {
            "sunrise": _iso(_at(start, offset, rise)),
            "sunset": _iso(_at(start, offset, set_)),
            "solar_noon": _iso(_at(start, offset, (rise + set_) / 2)),
        },
        "run": {"hours": hours, "output_minutes": 60, "entrainment": "sheared", "flux_ratio": 0.2, "version": "0.1.0"},
    }
    return _crowd(document) if crowded else document


def _crowd(document: Document) -> Document:
    """The same document with far more words than a day usually has."""
    names = ["dry adiabat and constant mixing ratio", "virtual potential temperature plus 0.5 K", "wind speed maximum"]
    document["profile"]["tops"] += [
        {"definition": name, "height_m": 205.0 + 9.0 * n, "detail": ""} for n, name in enumerate(names)
    ]
    deepest = document["summary"]["mixing_depth_max_m"]
    document["summary"]["other_definitions"] += [
        {"definition": name, "height_m": deepest + 5.0 * n} for n, name in enumerate(names)
    ]
    document["profile"]["station"] = "an invented release field with a long name beside the long invented river"
    document["warnings"] += [
        f"invented warning {n}: something about this profile deserves a second look before use" for n in range(3)
    ]
    document["doubts"] = [{"code": "old-profile", "text": "the profile is over 12 h old"}]
    document["cautions"] += [
        {"code": "X1", "text": "an invented caution that the product adds to the usual ones. " * 3}
    ]
    return document


def _iso(moment: datetime) -> str:
    return moment.astimezone(UTC).isoformat(timespec="seconds").replace("+00:00", "Z")


def _at(start: datetime, offset: int, local_hour: float) -> datetime:
    midnight = (start + timedelta(hours=offset)).replace(hour=0, minute=0, second=0)
    return midnight - timedelta(hours=offset) + timedelta(hours=local_hour)


def _row(
    start: datetime,
    offset: int,
    n: int,
    rise: float,
    set_: float,
    depth_max: float,
    night_depth: float,
    cumulus: bool,
    coldest: float,
    warmest: float,
) -> dict[str, Any]:
    moment = start + timedelta(hours=n)
    local = (moment + timedelta(hours=offset)).hour
    first = n < 14
    day = (local - rise) / (set_ - rise)
    up = 0.0 < day < 1.0
    heat = math.sin(math.pi * day) if up else 0.0
    mixed = 0.08 < day < 0.82
    decaying = 0.82 <= day < 0.97
    night_hours = ((local - set_) % 24.0) if not up else 0.3 if day > 0.5 else 11.0
    grown = 1.0 / (1.0 + math.exp(-14.0 * (day - 0.38)))
    depth = night_depth + (depth_max - night_depth) * grown if mixed or decaying else night_depth
    inversion = None if (mixed and day > 0.3) or decaying else 60.0 + 16.0 * min(night_hours, 11.0)
    warm = (
        0.5 - 0.5 * math.cos(math.pi * min(max((local - rise) / (15.5 - rise), 0.0), 1.0))
        if local >= rise and local <= 15.5
        else (math.exp(-((local - 15.5) % 24.0) / 4.0))
    )
    temperature = coldest + (warmest - coldest) * warm
    base = max(125.0 * (temperature - 12.4), 60.0) + (0.0 if cumulus else 0.35 * depth_max)
    entrained = 1.125 * depth
    cloud = min(0.35, 0.9 * (entrained - base) / depth_max) if cumulus and mixed and entrained > base > 200.0 else 0.0
    wind = 2.0 + 3.5 * heat
    transport = wind * 1.5 if mixed or decaying else wind
    direction = (220.0 + 3.0 * n) % 360.0
    humidity = 100.0 / math.exp(0.062 * max(temperature - 12.4, 0.05))
    return {
        "time": _iso(moment),
        "regime": "mixed" if mixed else "decaying" if decaying else "stable",
        "mixing_depth_m": round(depth, 1),
        "depth_method": "slab top" if mixed or decaying else "stress at 5 % of the surface value",
        "residual_top_m": None
        if (mixed and grown > 0.55) or decaying
        else round(depth_max * (0.72 if first else 0.98), 1),
        "theta_K": round(temperature + 277.0, 2),
        "mixing_ratio_g_kg": round(9.5 - 1.8 * heat, 2),
        "temperature_2m_C": round(temperature, 2),
        "dewpoint_2m_C": round(min(temperature, 12.4 - 2.0 * heat), 2),
        "relative_humidity_2m_pct": round(min(humidity, 100.0), 1),
        "wind_10m_m_s": round(wind, 2),
        "transport_wind_m_s": round(transport, 2),
        "transport_wind_from_deg": direction,
        "ventilation_m2_s": round(depth * transport, 0),
        "shortwave_down_W_m2": round(930.0 * heat, 1),
        "longwave_down_W_m2": round(320.0 + 30.0 * warm, 1),
        "net_radiation_W_m2": round(640.0 * heat - 70.0 * (1.0 - heat), 1),
        "sensible_flux_W_m2": round(270.0 * heat - 22.0 * (0.0 if heat > 0.1 else 1.0), 1),
        "latent_flux_W_m2": round(240.0 * heat, 1),
        "ground_flux_W_m2": round(130.0 * heat - 40.0 * (1.0 - heat), 1),
        "condensation_level_m": round(base, 0),
        "cumulus_fraction": round(cloud, 3),
        "inversion_depth_m": inversion,
        "inversion_strength_K": None if inversion is None else round(1.0 + 0.5 * min(night_hours, 11.0), 2),
        "temperature_9m_C": round(temperature + (0.0 if inversion is None else 1.2), 2),
    }


def _release(start: datetime, missing: bool) -> Document:
    return {
        "file": "invented_plain.csv",
        "format": "table",
        "station": "Invented release field",
        "valid": _iso(start),
        "age_hours": None,
        "distance_km": None if missing else 14.0,
        "height_difference_m": None if missing else -32.0,
        "tops": [
            {"definition": "parcel", "height_m": 160.0, "detail": "screen parcel"},
            {"definition": "virtual temperature gradient", "height_m": 232.0, "detail": ""},
            {"definition": "humidity gradient", "height_m": 1350.0, "detail": ""},
            {
                "definition": "bulk Richardson 0.25",
                "height_m": None if missing else 210.0,
                "detail": "critical number 0.25",
            },
        ],
    }


def _assumptions() -> list[Document]:
    def one(
        name: str, value: str, source: str, why: str, step: str, depth: float | None, warm: float | None
    ) -> Document:
        return {
            "name": name,
            "value": value,
            "source": source,
            "why": why,
            "step": step,
            "effect_on_depth_m": depth,
            "effect_on_max_temperature_K": warm,
        }

    return [
        one("cover", "short grass", "given", "from the scenario", "", None, None),
        one("soil moisture", "0.40", "assumed", "middle of the range", "+0.20", -210.0, -1.3),
        one("cloud fraction", "0.10", "given", "from the weather table", "", None, None),
        one("aerosol optical depth", "0.12", "assumed", "clean continental air", "+0.10", -35.0, -0.2),
        one("divergence", "0 per s", "assumed", "no subsidence given", "+5e-6 per s", -160.0, 0.1),
        one("deep soil temperature", "19.2 C", "assumed", "mean of dawn air and residual layer", "+2 K", 40.0, 0.3),
        one("later profile", "none", "assumed", "the air aloft is held", "", None, None),
    ]


def _peak(values: list[Any], times: list[str], pick: Any) -> tuple[float | None, str | None]:
    known = [(value, time) for value, time in zip(values, times, strict=True) if value is not None]
    return pick(known, key=lambda pair: pair[0]) if known else (None, None)


def _summary(
    series: Document, start: datetime, offset: int, rise: float, set_: float, cumulus: bool, missing: bool, limits: bool
) -> Document:
    times = series["time"]
    depth, depth_time = _peak(series["mixing_depth_m"], times, max)
    warm, warm_time = _peak(series["temperature_2m_C"], times, max)
    cold, cold_time = _peak(series["temperature_2m_C"], times, min)
    clouds = [n for n, value in enumerate(series["cumulus_fraction"]) if value]
    at = times.index(depth_time)
    return {
        "mixing_depth_max_m": depth,
        "mixing_depth_max_time": depth_time,
        "mixing_depth_definition": "slab top",
        "other_definitions": [
            {"definition": "encroachment", "height_m": round(depth * 0.86, 0)},
            {"definition": "parcel", "height_m": round(depth * 0.97, 0)},
            {"definition": "bulk Richardson 0.25", "height_m": round(depth * 1.06, 0)},
            {"definition": "humidity gradient", "height_m": None},
        ],
        "temperature_2m_max_C": warm,
        "temperature_2m_max_time": warm_time,
        "temperature_2m_min_C": cold,
        "temperature_2m_min_time": cold_time,
        "relative_humidity_2m_min_pct": min(series["relative_humidity_2m_pct"]),
        "inversion_gone_time": None if missing else _iso(_at(start, offset, rise + 3.7)),
        "inversion_heat_needed_MJ_m2": 1.42,
        "inversion_heat_expected_MJ_m2": 6.9,
        "convective_temperature_C": 26.4,
        "cumulus_onset_time": times[clouds[0]] if cumulus and clouds else None,
        "cumulus_base_m": series["condensation_level_m"][clouds[0]] if cumulus and clouds else None,
        "gust_low_m_s": None if missing else 7.5,
        "gust_high_m_s": None if missing else 12.0,
        "transport_wind_m_s": series["transport_wind_m_s"][at],
        "ventilation_m2_s": series["ventilation_m2_s"][at],
        "ventilation_class": {"name": "middle", "authority": "invented county", "dated": "2026-01-01"}
        if limits
        else None,
        "sensible_flux_reversal_time": _iso(_at(start, offset, set_ - 1.1)),
        "inversion_onset_time": _iso(_at(start, offset, set_ - 0.6)),
        "mixing_end_time": _iso(_at(start, offset, set_ + 0.4)),
        "inverted_v_depth_m": 1400.0 if not cumulus else None,
        "dry_outflow_note": "dry outflow gusts are plausible under any shower" if not cumulus else None,
        "superadiabatic_excess_K": 1.4,
    }


def _profile(moment: str, depth: float, theta: float, water: float, surface: float) -> Document:
    heights = [
        0.0,
        20.0,
        60.0,
        120.0,
        200.0,
        320.0,
        500.0,
        800.0,
        1200.0,
        1600.0,
        2000.0,
        2600.0,
        3200.0,
        4000.0,
        5000.0,
        6000.0,
    ]
    heights = sorted({*heights, round(depth, 0), round(depth * 1.05, 0)})
    warm = [
        theta + (surface - theta) * math.exp(-z / 90.0) + (0.0 if z <= depth else 0.8 + 0.0045 * (z - depth))
        for z in heights
    ]
    ratio = [water if z <= depth else max(water * math.exp(-(z - depth) / 1400.0) - 1.2, 0.3) for z in heights]
    return {
        "valid": moment,
        "height_m": heights,
        "pressure_hPa": [round(960.0 * math.exp(-z / 8200.0), 1) for z in heights],
        "theta_K": [round(x, 2) for x in warm],
        "mixing_ratio_g_kg": [round(x, 2) for x in ratio],
        "temperature_C": [round(x - 277.0 - 0.0098 * z, 2) for x, z in zip(warm, heights, strict=True)],
        "dewpoint_C": [round(12.0 - 0.004 * z, 2) for z in heights],
        "wind_m_s": [round(3.0 + 0.002 * z, 2) for z in heights],
        "wind_from_deg": [220.0] * len(heights),
    }


def _profiles(series: Document, start: datetime, depth_max: float, coldest: float) -> Document:
    top = 0.72 * depth_max
    return {
        "morning": _profile(_iso(start + timedelta(minutes=5)), top, coldest + 285.5, 8.6, coldest + 277.0),
        "afternoon": _profile(series["time"][10], depth_max, coldest + 294.0, 7.7, coldest + 295.5),
    }


CASES: dict[str, dict[str, Any]] = {
    "plain": {},
    "twelve hours": {"hours": 12},
    "missing values": {"missing": True},
    "no cumulus": {"cumulus": False, "limits": True},
    "very deep": {"depth_max": 4500.0, "night_depth": 150.0, "warmest": 38.0, "coldest": 17.0, "cumulus": False},
    "very shallow": {"depth_max": 230.0, "night_depth": 30.0, "coldest": -6.0, "warmest": 2.0, "cumulus": False},
    "old balloon": {"released_after_h": -9.0},
    "late balloon": {"released_after_h": 7.0, "depth_max": 1200.0},
    "crowded": {"crowded": True, "limits": True},
    "southern winter": {"southern": True, "depth_max": 900.0, "coldest": 3.0, "warmest": 13.5},
}
