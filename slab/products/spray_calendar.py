"""The calendar: half-hour rows to hours, hours to stretches, with what limits them and how far their ends may move."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from itertools import groupby
from typing import Any

import numpy as np
from numpy.typing import NDArray

from forcing.air import ZERO_CELSIUS, relative_humidity
from forcing.scenario_types import Scenario
from forcing.sun import SunTimes
from slab.products.series import iso
from slab.products.spray_air import FieldAir, delta_t, stability_word
from slab.products.spray_limits import (
    INSIDE,
    NONE,
    NOT_KNOWN,
    POSSIBLE,
    PRESENT,
    RANK,
    Reason,
    in_order,
    reasons,
    spray_limits,
    status_of,
)
from slab.products.spray_members import Member
from slab.products.spray_window import ROW, Night, outward, share_with_inversion

Array = NDArray[np.float64]

HOUR = 3600.0
WORST = (PRESENT, POSSIBLE, NOT_KNOWN, NONE)
FEW, MOST = 0.1, 0.9  # shares of the members between which the end of a stretch may lie


@dataclass(frozen=True, slots=True)
class Rows:
    """What was judged at every half hour: state of the inversion, reasons, shares of the members."""

    states: tuple[str, ...]
    reasons: tuple[tuple[Reason, ...], ...]
    statuses: tuple[str, ...]
    with_inversion: Array
    inside: Array


def states_of(
    rows: Array, members: Sequence[Member], nights: Sequence[Night], read: NDArray[np.bool_]
) -> tuple[str, ...]:
    """State of the inversion by row: present in every member, possible in some or inside a window, none; a tower's reading
    (``read``) stands for itself."""
    share = share_with_inversion(members)
    windows = [outward(one) for night in nights for one in (night.onset, night.end) if one is not None]
    out = []
    for moment, part, seen in zip(rows, share, read, strict=True):
        if not math.isfinite(part):
            out.append(NOT_KNOWN)
        elif part >= 1.0:
            out.append(PRESENT)
        elif part > 0.0 or (not seen and any(early <= moment <= late for early, late in windows)):
            out.append(POSSIBLE)
        else:
            out.append(NONE)
    return tuple(out)


def _within(values: Array, low: float | None, high: float | None) -> NDArray[np.bool_]:
    inside = np.isfinite(values) if low is not None or high is not None else np.ones(values.shape, dtype=bool)
    if low is not None:
        inside &= values >= low
    if high is not None:
        inside &= values <= high
    return inside


def share_inside(
    scenario: Scenario, air: FieldAir, members: Sequence[Member], found: Sequence[Sequence[Reason]], pressure: float
) -> Array:
    """Share of the members that are inside all the user's limits and show no inversion, by row.

    The boom's wind of a member is its 10 m wind times the run's own ratio of the two; hours and rain are the same for all.
    """
    values = spray_limits(scenario.limits)
    common = np.array([not any(one.code in ("hours", "rain") for one in row) for row in found])
    ratio = air.wind / np.maximum(air.wind_10m, 0.1)
    total = np.zeros(air.time.shape)
    for one in members:
        usable = np.isfinite(one.temperature) & np.isfinite(one.vapour)
        wet, humid = np.full(air.time.shape, math.nan), np.full(air.time.shape, math.nan)
        for n in np.flatnonzero(usable & common):
            warm, vapour = float(one.temperature[n]), float(one.vapour[n])
            wet[n] = delta_t(warm, vapour, pressure)
            humid[n] = 100.0 * min(1.0, relative_humidity(warm, vapour, pressure))
        total += (
            common
            & (one.difference <= 0.0)
            & np.isfinite(air.wind)
            & _within(one.wind * ratio, values.get("wind_min_m_s"), values.get("wind_max_m_s"))
            & _within(wet, values.get("delta_t_min_K"), values.get("delta_t_max_K"))
            & _within(one.temperature - ZERO_CELSIUS, None, values.get("temperature_max_C"))
            & _within(humid, values.get("humidity_min_pct"), None)
        )
    return total / len(members)


def judge(
    scenario: Scenario, air: FieldAir, members: Sequence[Member], nights: Sequence[Night], suns: Sequence[SunTimes],
    pressure: float, read: NDArray[np.bool_],
) -> Rows:  # fmt: skip
    """Judge every row."""
    limited = bool(spray_limits(scenario.limits))
    states = states_of(air.time, members, nights, read)
    found = [tuple(reasons(scenario, air, n, state, suns)) for n, state in enumerate(states)]
    inside = share_inside(scenario, air, members, found, pressure) if limited else np.full(air.time.shape, math.nan)
    return Rows(
        states=states, reasons=tuple(found), statuses=tuple(status_of(one, limited=limited) for one in found),
        with_inversion=share_with_inversion(members), inside=inside,
    )  # fmt: skip


def _number(value: float, digits: int) -> float | None:
    return round(float(value), digits) if math.isfinite(value) else None


def hours(air: FieldAir, judged: Rows, *, limited: bool, now: float, seen: Mapping[str, Array]) -> list[dict[str, Any]]:
    """One entry for every local full hour: values of its middle, the worst of its begin, middle and end.

    Parameters
    ----------
    now : float
        Hours that end later are plans [s since 1970 UTC].
    seen : mapping of ndarray
        Further quantities by row to show with the hour, such as a tower's.
    """
    out = []
    first = air.first_hour
    for n in range(first, len(air.time) - 2, 2):
        three, mid = range(n, n + 3), n + 1
        found = in_order([one for k in three for one in judged.reasons[k]])
        state = min((judged.states[k] for k in three), key=WORST.index)
        out.append(
            {
                "start": iso(air.time[n]), "end": iso(air.time[n + 2]), "status": status_of(found, limited=limited),
                "plan_only": bool(air.time[n + 2] > now), "inversion": state,
                "reasons": [{"code": one.code, "kind": one.kind, "text": one.text} for one in found] if limited else [],
                "share_with_inversion": _number(float(np.max(judged.with_inversion[n : n + 3])), 3),
                "share_inside": _number(float(np.min(judged.inside[n : n + 3])), 3),
                "regime": air.regime[mid], "stability": stability_word(float(air.per_8m[mid])),
                "temperature_difference_K": _number(air.difference[mid], 2), "per_8m_K": _number(air.per_8m[mid], 2),
                "inversion_from_m": _number(air.inversion_from[mid], 1), "inversion_to_m": _number(air.inversion_to[mid], 0),
                "wind_boom_m_s": _number(air.wind[mid], 2), "wind_10m_m_s": _number(air.wind_10m[mid], 2),
                "delta_t_K": _number(air.delta_t[mid], 2), "temperature_C": _number(air.temperature[mid], 2),
                "humidity_pct": _number(air.humidity[mid], 1), "rain_mm_h": _number(air.rain[mid], 2),
                "deposit": air.deposit[mid], "since_break_up_h": _number(air.since[mid], 2),
                **{name: _number(values[mid], 2) for name, values in seen.items()},
            }
        )  # fmt: skip
    return out


def stretches(
    calendar: Sequence[Mapping[str, Any]], rows: Array, judged: Rows, nights: Sequence[Night]
) -> list[dict[str, Any]]:
    """Hours with the same answer and the same first reason, joined, with the range in which each end may lie."""

    def kind(hour: Mapping[str, Any]) -> tuple[str, str]:
        first = hour["reasons"][0]["code"] if hour["reasons"] else hour["inversion"] if hour["status"] != INSIDE else ""
        return hour["status"], first

    groups = [(key, list(part)) for key, part in groupby(calendar, key=kind)]
    out: list[dict[str, Any]] = []
    for n, ((status, code), part) in enumerate(groups):
        others = sorted({one["code"] for hour in part for one in hour["reasons"]} - {code}, key=RANK.__getitem__)
        around = [groups[k][0][1] if 0 <= k < len(groups) else "" for k in (n - 1, n + 1)]
        out.append(
            {
                "start": part[0]["start"], "end": part[-1]["end"], "hours": len(part), "status": status, "limit": code,
                "reason": part[0]["reasons"][0]["text"] if part[0]["reasons"] else None, "also": others,
                "plan_only": any(hour["plan_only"] for hour in part),
                "start_spread": _spread(part[0]["start"], (code, around[0]), rows, judged, nights),
                "end_spread": _spread(part[-1]["end"], (code, around[1]), rows, judged, nights),
            }
        )  # fmt: skip
    return out


def _spread(edge: str, codes: tuple[str, str], rows: Array, judged: Rows, nights: Sequence[Night]) -> list[str] | None:
    """Range in which an end of a stretch may lie: the nearest window of onset or end where the inversion decides, else
    where the members part; None where they all agree, it is no matter of the air, or the stretch is such a window itself."""
    if codes[0] in ("possible inversion", POSSIBLE):
        return None
    moment = datetime.fromisoformat(edge).timestamp()
    if any(code in ("inversion", "possible inversion", PRESENT, POSSIBLE) for code in codes):
        windows = [outward(one) for night in nights for one in (night.onset, night.end) if one is not None]
        near = [one for one in windows if one[0] - HOUR <= moment <= one[1] + HOUR]
        if near:
            early, late = min(near, key=lambda one: abs(0.5 * (one[0] + one[1]) - moment))
            return [iso(min(early, moment)), iso(max(late, moment))]
    parted = (judged.inside > FEW) & (judged.inside < MOST)
    touched = [k for k in np.flatnonzero(parted) if abs(rows[k] - moment) <= HOUR]
    if not touched:
        return None
    low = high = touched[0]
    while low > 0 and parted[low - 1]:
        low -= 1
    while high + 1 < len(rows) and parted[high + 1]:
        high += 1
    return [iso(rows[low] - ROW), iso(rows[high] + ROW)]
