"""The user's own limits against one moment: every reason why it lies outside them, most limiting first.

The order is fixed and printed: an inversion, a possible inversion, wind, hours from sunrise and sunset, Delta-T,
temperature, humidity, rain. What is outside comes before what is unknown; what is unknown never counts as inside.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from forcing.scenario_types import Limits, Scenario
from forcing.sun import SunTimes
from slab.products.spray_air import FieldAir

PRESENT, POSSIBLE, NONE, NOT_KNOWN = "present", "possible", "none", "not known"
INSIDE, OUTSIDE, UNKNOWN, CONDITIONS = "inside", "outside", "unknown", "conditions only"
ORDER = (
    ("inversion", "an inversion in every member"),
    ("possible inversion", "an inversion in some members, or inside the window of onset or end"),
    ("wind", "wind at the stated height"),
    ("hours", "hours from sunrise and to sunset"),
    ("delta-t", "Delta-T"),
    ("temperature", "temperature"),
    ("humidity", "humidity"),
    ("rain", "rain in the hours that follow"),
)
RANK = {code: n for n, (code, _) in enumerate(ORDER)}
SPRAY_KEYS = (
    "wind_min_m_s", "wind_max_m_s", "delta_t_min_K", "delta_t_max_K", "hours_after_sunrise", "hours_before_sunset",
    "temperature_max_C", "humidity_min_pct", "rain_free_hours",
)  # fmt: skip
HOUR = 3600.0


@dataclass(frozen=True, slots=True)
class Reason:
    """Why a moment is not inside: the limit's code, "outside" or "unknown", and words."""

    code: str
    kind: str
    text: str


def spray_limits(limits: Limits | None) -> dict[str, float]:
    """The limits that bear on spraying, by name; empty where the user gave none."""
    if limits is None:
        return {}
    values = {key: getattr(limits, key) for key in SPRAY_KEYS}
    return {key: float(value) for key, value in values.items() if value is not None}


def _range(code: str, name: str, unit: str, value: float, low: float | None, high: float | None) -> list[Reason]:
    if low is None and high is None:
        return []
    if not math.isfinite(value):
        return [Reason(code, UNKNOWN, f"{name} not known")]
    if low is not None and value < low:
        return [Reason(code, OUTSIDE, f"{name} {_apart(value, low)}{unit}, below {low:g}")]
    if high is not None and value > high:
        return [Reason(code, OUTSIDE, f"{name} {_apart(value, high)}{unit}, above {high:g}")]
    return []


def _apart(value: float, limit: float) -> str:
    """A value with as many decimals as it takes to be seen apart from its limit, one to three."""
    for digits in (1, 2):
        if round(value, digits) != round(limit, digits):
            return f"{value:.{digits}f}"
    return f"{value:.3f}"


def _hours(values: dict[str, float], moment: float, suns: Sequence[SunTimes]) -> list[Reason]:
    after, before = values.get("hours_after_sunrise"), values.get("hours_before_sunset")
    if after is None and before is None:
        return []
    nearest = min(suns, key=lambda one: abs(one.solar_noon.timestamp() - moment))
    if nearest.sunrise is None or nearest.sunset is None:
        return [
            Reason("hours", UNKNOWN, f"no sunrise or sunset that day ({nearest.polar or 'one of them is missing'})")
        ]
    risen = (moment - nearest.sunrise.timestamp()) / HOUR
    left = (nearest.sunset.timestamp() - moment) / HOUR
    if after is not None and risen < after:
        side = f"{risen:.1f} h after" if risen >= 0.0 else f"{-risen:.1f} h before"
        return [Reason("hours", OUTSIDE, f"{side} sunrise, your limit is {after:g} h after")]
    if before is not None and left < before:
        side = f"{left:.1f} h before" if left >= 0.0 else f"{-left:.1f} h after"
        return [Reason("hours", OUTSIDE, f"{side} sunset, your limit is {before:g} h before")]
    return []


def _rain(values: dict[str, float], scenario: Scenario, moment: float) -> list[Reason]:
    hours = values.get("rain_free_hours")
    if hours is None:
        return []
    span = moment + np.arange(0.0, hours * HOUR + 1.0, 1800.0)
    rain = scenario.weather.sample("rain_mm_h", span)
    if np.any(rain > 0.0):
        return [Reason("rain", OUTSIDE, f"rain within {hours:g} h")]
    if not np.all(np.isfinite(rain)):
        return [Reason("rain", UNKNOWN, f"rain in the next {hours:g} h not known")]
    return []


def inversion_reasons(state: str) -> list[Reason]:
    """What the state of the inversion adds."""
    if state == PRESENT:
        return [Reason("inversion", OUTSIDE, "inversion")]
    if state == POSSIBLE:
        return [Reason("possible inversion", OUTSIDE, "inversion possible")]
    if state == NOT_KNOWN:
        return [Reason("inversion", UNKNOWN, "inversion not known")]
    return []


def reasons(scenario: Scenario, air: FieldAir, row: int, state: str, suns: Sequence[SunTimes]) -> list[Reason]:
    """Why one row is not inside the user's limits, most limiting first; empty where it is inside.

    Wind that is not known is always a reason, whether the limits speak of wind or not.
    """
    values = spray_limits(scenario.limits)
    wind = float(air.wind[row])
    found = inversion_reasons(state)
    if math.isfinite(wind):
        found += _range("wind", "wind", " m/s", wind, values.get("wind_min_m_s"), values.get("wind_max_m_s"))
    else:
        found.append(Reason("wind", UNKNOWN, "wind not known"))
    found += _hours(values, float(air.time[row]), suns)
    found += _range(
        "delta-t", "Delta-T", " K", float(air.delta_t[row]), values.get("delta_t_min_K"), values.get("delta_t_max_K")
    )
    found += _range(
        "temperature", "temperature", " °C", float(air.temperature[row]), None, values.get("temperature_max_C")
    )
    found += _range("humidity", "humidity", " %", float(air.humidity[row]), values.get("humidity_min_pct"), None)
    found += _rain(values, scenario, float(air.time[row]))
    return in_order(found)


def in_order(found: Sequence[Reason]) -> list[Reason]:
    """Outside before unknown, then by the fixed order; one reason by limit and kind, and a possible inversion only where
    there is no present one."""
    first: dict[tuple[str, str], Reason] = {}
    for one in found:
        first.setdefault((one.code, one.kind), one)
    if ("inversion", OUTSIDE) in first:
        first.pop(("possible inversion", OUTSIDE), None)
    return sorted(first.values(), key=lambda one: (one.kind == UNKNOWN, RANK[one.code]))


def status_of(found: Sequence[Reason], *, limited: bool) -> str:
    """Inside only with limits and without any reason; without limits only conditions are shown."""
    if not limited:
        return CONDITIONS
    if any(one.kind == OUTSIDE for one in found):
        return OUTSIDE
    return UNKNOWN if found else INSIDE
