"""Onset and end of the surface inversion as windows, from the difference of two temperatures in all members."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from forcing.scenario_types import Site
from forcing.sun import SunTimes, sunrise_sunset
from slab.products.spray_members import Member
from slab.timing import TIMING, Timing

Array = NDArray[np.float64]

ROW = 1800.0  # [s] the calendar's rows
PERSISTENCE = 1800.0  # [s] a shorter inversion, or a shorter break in one, does not count (as the mesonets are scored)
LOW, HIGH = 0.1, 0.9  # shares of the members outside the window on either side
WIDTH_STEP = 1800.0  # [s] windows are rounded outward to this: no event is known to the minute


def timing_words(timing: Timing = TIMING) -> str:
    """The allowance in words, in minutes."""

    def said(early: float, late: float) -> str:
        return (
            f"{early / 60.0:.0f} min" if early == late else f"{early / 60.0:.0f} min earlier, {late / 60.0:.0f} later"
        )

    return f"onset {said(timing.onset_early, timing.onset_late)}, end {said(timing.end_early, timing.end_late)}"


@dataclass(frozen=True, slots=True)
class Spell:
    """One inversion: onset and end [s since 1970 UTC], NaN where it lies outside the run."""

    onset: float
    end: float


@dataclass(frozen=True, slots=True)
class Window:
    """An event as a range [s since 1970 UTC]: 10 %, half and 90 % of the members that have it, and how many have it.

    ``early`` and ``late`` are widened by what the model itself may be off.
    """

    early: float
    middle: float
    late: float
    have: int


@dataclass(frozen=True, slots=True)
class Night:
    """From one highest sun to the next: sunset and sunrise [s since 1970 UTC, NaN without], onset and end."""

    start: float
    stop: float
    sunset: float
    sunrise: float
    onset: Window | None
    end: Window | None
    members: int
    from_before: bool
    goes_on: bool
    strongest: float


def spells(time: Array, difference: Array) -> list[Spell]:
    """Stretches with a positive difference; what is shorter than 30 min, and breaks shorter than that, do not count."""
    known = np.isfinite(difference)
    t, d = time[known], difference[known]
    found: list[Spell] = []
    onset = -math.inf if t.size and d[0] > 0.0 else math.nan
    for (t0, d0), (t1, d1) in pairwise(zip(t, d, strict=True)):
        if d0 <= 0.0 < d1:
            onset = float(t0 + (t1 - t0) * d0 / (d0 - d1))
        elif d0 > 0.0 >= d1:
            found.append(Spell(onset, float(t0 + (t1 - t0) * d0 / (d0 - d1))))
            onset = math.nan
    if not math.isnan(onset):
        found.append(Spell(onset, math.inf))
    joined: list[Spell] = []
    for one in found:
        if joined and one.onset - joined[-1].end < PERSISTENCE:
            joined[-1] = Spell(joined[-1].onset, one.end)
        else:
            joined.append(one)
    edge = t[0] if t.size else 0.0
    last = t[-1] if t.size else 0.0
    return [
        Spell(one.onset if one.onset > -math.inf else math.nan, one.end if one.end < math.inf else math.nan)
        for one in joined
        if min(one.end, last) - max(one.onset, edge) >= PERSISTENCE or one.end == math.inf or one.onset == -math.inf
    ]


def suns(site: Site, start: float, end: float) -> list[SunTimes]:
    """Sun of every day that touches a span [s since 1970 UTC], the day before it and the day after it, by solar days."""
    first = datetime.fromtimestamp(start, UTC).date() - timedelta(days=2)
    days = math.ceil((end - start) / 86400.0) + 4
    return [sunrise_sunset(first + timedelta(days=n), site.latitude, site.longitude) for n in range(days + 1)]


def _window(values: Sequence[float], before: float, after: float) -> Window | None:
    known = [x for x in values if math.isfinite(x)]
    if not known:
        return None
    low, middle, high = (float(x) for x in np.quantile(known, (LOW, 0.5, HIGH)))
    early, late = middle - math.hypot(middle - low, before), middle + math.hypot(high - middle, after)
    return Window(early, middle, late, len(known))


def _in_night(found: list[Spell], start: float, stop: float) -> tuple[float, float, bool, bool]:
    """First onset and last end of one member in a night, whether it was there before and whether it goes on."""
    inside = [
        one for one in found if (math.isnan(one.onset) or one.onset < stop) and (math.isnan(one.end) or one.end > start)
    ]
    if not inside:
        return math.nan, math.nan, False, False
    first, last = inside[0], inside[-1]
    before = math.isnan(first.onset) or first.onset < start
    goes_on = math.isnan(last.end) or last.end > stop
    return (math.nan if before else first.onset), (math.nan if goes_on else last.end), before, goes_on


def nights(site: Site, rows: Array, members: Sequence[Member], *, timing: Timing = TIMING) -> list[Night]:
    """Windows by night, from highest sun to highest sun, for the nights that the rows touch."""
    per_member = [spells(rows, one.difference) for one in members]
    base = members[0].difference
    out = []
    for today, tomorrow in pairwise(suns(site, float(rows[0]), float(rows[-1]))):
        start, stop = today.solar_noon.timestamp(), tomorrow.solar_noon.timestamp()
        here = (rows >= start) & (rows < stop)
        if not here.any():
            continue
        seen = [_in_night(found, start, stop) for found in per_member]
        known = base[here & np.isfinite(base)]
        out.append(
            Night(
                start=start,
                stop=stop,
                sunset=today.sunset.timestamp() if today.sunset else math.nan,
                sunrise=tomorrow.sunrise.timestamp() if tomorrow.sunrise else math.nan,
                onset=_window([one[0] for one in seen], timing.onset_early, timing.onset_late),
                end=_window([one[1] for one in seen], timing.end_early, timing.end_late),
                members=len(members),
                from_before=seen[0][2],
                goes_on=seen[0][3],
                strongest=float(np.max(known)) if known.size else math.nan,
            )
        )
    return out


def outward(window: Window) -> tuple[float, float]:
    """Ends of a window rounded outward to the half hour [s since 1970 UTC]."""
    return (
        math.floor(window.early / WIDTH_STEP) * WIDTH_STEP,
        math.ceil(window.late / WIDTH_STEP) * WIDTH_STEP,
    )


def share_with_inversion(members: Sequence[Member]) -> Array:
    """Share of the members with a positive difference, by row; NaN where none got there."""
    values = np.array([one.difference for one in members])
    known = np.isfinite(values)
    count = known.sum(axis=0)
    positive = (np.where(known, values, 0.0) > 0.0).sum(axis=0)
    return np.where(count > 0, positive / np.maximum(count, 1), math.nan)


def since_break_up(time: Array, difference: Array) -> Array:
    """Hours since the last end of an inversion by row; NaN while one is there and before the first end in the run."""
    out = np.full(time.shape, math.nan)
    for one in spells(time, difference):
        if math.isfinite(one.end):
            out = np.where(time >= one.end, (time - one.end) / 3600.0, out)
        inside = (time > one.onset if math.isfinite(one.onset) else time >= time[0]) & (
            time < one.end if math.isfinite(one.end) else time <= time[-1]
        )
        out = np.where(inside, math.nan, out)
    return out
