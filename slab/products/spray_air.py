"""Air over the field by half-hour rows: wind at the boom, Delta-T, the inversion from which height to which."""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import datetime
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from forcing.air import ZERO_CELSIUS, relative_humidity, wet_bulb
from forcing.scenario_types import Scenario
from forcing.similarity import momentum_span
from slab.cycle import Run
from slab.inversions import rising_inversion
from slab.products.series import regime_word, screen_profile
from slab.products.spray_members import at_rows, difference_of
from slab.products.spray_window import ROW, since_break_up
from slab.rendered import part_at, profile_at

Array = NDArray[np.float64]

BOOM_HEIGHT = 2.0  # [m] where the user's limits name no height of the wind
MAST = 10.0  # [m]
PER_METRES = 8.0  # [m] the difference is scaled to this depth
DRY_LAPSE = 9.80665 / 1005.0  # [K m-1]
NEUTRAL = 0.1  # [K per 8 m] of potential temperature: less than sensors tell apart (EPA-454/R-99-005, 8.1.3)
SLIGHT, DISTINCT = 1.0, 2.5  # [K per 8 m] upper ends of a slight and a distinct inversion (our choice)
DEPOSITS = ("none", "dew", "hoar frost")
LEAST_HEIGHT = 0.05  # [m] lowest height that a wind is read at


@dataclass(frozen=True, slots=True)
class FieldAir:
    """Air over the field, by row; NaN where not known.

    Attributes
    ----------
    time : ndarray, shape (n,)
        Seconds since 1970 UTC.
    temperature, delta_t : ndarray
        At 2 m [C], dry minus wet bulb there [K].
    humidity : ndarray
        Relative, at 2 m [percent].
    wind, wind_10m : ndarray
        At the boom's height and at 10 m [m s-1].
    difference : ndarray
        Temperature at the upper minus at the lower height [K].
    inversion_from, inversion_to : ndarray
        Base and top of the surface inversion [m above ground].
    rain : ndarray
        [mm h-1]
    since : ndarray
        Hours since the last break-up.
    first_hour : int
        Index of the first row on a local full hour.
    """

    time: Array
    first_hour: int
    boom_height: float
    between: tuple[float, float]
    temperature: Array
    humidity: Array
    delta_t: Array
    wind: Array
    wind_10m: Array
    difference: Array
    inversion_from: Array
    inversion_to: Array
    regime: tuple[str | None, ...]
    deposit: tuple[str | None, ...]
    rain: Array
    since: Array

    @property
    def per_8m(self) -> Array:
        """The difference scaled to 8 m [K]."""
        return np.asarray(self.difference * PER_METRES / (self.between[1] - self.between[0]))


def rows_of(start: float, end: float, time_zone: str) -> Array:
    """Every local full and half hour in a span [s since 1970 UTC]."""
    offset = datetime.fromtimestamp(start, ZoneInfo(time_zone)).utcoffset()
    shift = offset.total_seconds() % ROW if offset is not None else 0.0
    first = math.ceil((start + shift) / ROW - 1e-9) * ROW - shift
    return np.arange(first, end + 1e-6, ROW)


def first_hour(rows: Array, time_zone: str) -> int:
    """Index of the first row on a local full hour; the number of rows where there is none."""
    zone = ZoneInfo(time_zone)
    return next((n for n, t in enumerate(rows) if datetime.fromtimestamp(float(t), zone).minute == 0), len(rows))


def wind_is_known(scenario: Scenario) -> bool:
    """Whether profile or weather say anything about the wind."""
    weather = scenario.weather
    return scenario.profile.wind_known or weather.given("pressure_gradient_wind_m_s") or weather.given("wind_10m_m_s")


def wind_at(done: Run, knot: int, height: float) -> float:
    """Wind [m s-1] at a height [m above displacement], by similarity.

    Up to 10 m the 10 m wind times the ratio of the integrated similarity profiles; by night between the column's own
    cells, which the profile only spreads.
    """
    f = done.fields
    rough = done.ground.roughness_momentum
    stable, high = float(f["inverse_obukhov"][knot]), float(f["wind_10m"][knot])
    if not math.isfinite(high):
        return math.nan

    def span(z: float) -> float:
        return momentum_span(z + rough, rough, stable)

    z = max(height, LEAST_HEIGHT)
    if done.day[knot]:
        return high * span(z) / span(MAST)
    course = part_at(done, knot).course
    assert course is not None
    note, cells = course.notes[knot], course.height
    speed = np.hypot(note.u, note.v)
    if z <= cells[0]:
        return float(speed[0] * span(z) / span(float(cells[0])))
    i = min(int(np.searchsorted(cells, z, side="right")) - 1, len(cells) - 2)
    low, top = span(float(cells[i])), span(float(cells[i + 1]))
    share = (span(z) - low) / (top - low) if top > low else 0.0
    return float(speed[i] + min(1.0, max(0.0, share)) * (speed[i + 1] - speed[i]))


def delta_t(temperature: float, humidity: float, pressure: float) -> float:
    """Dry minus wet bulb [K]; thermodynamic wet bulb (ASHRAE Handbook Fundamentals 2017, chapter 1)."""
    return temperature - wet_bulb(temperature, humidity, pressure)


def stability_word(per_8m: float) -> str:
    """Stability between the two heights, from the temperature difference scaled to 8 m [K]."""
    if not math.isfinite(per_8m):
        return "not known"
    if per_8m > 0.0:
        return (
            "inversion, slight" if per_8m < SLIGHT else "inversion, distinct" if per_8m < DISTINCT else "inversion, marked"
        )
    lift = per_8m + DRY_LAPSE * PER_METRES
    if lift > NEUTRAL:
        return "stable without inversion"
    return "near neutral" if lift > -NEUTRAL else "unstable"


def field_air(done: Run, rows: Array, between: tuple[float, float], boom_height: float) -> FieldAir:
    """Read a run on the calendar's rows; what a profile has to be drawn for is read at the nearest knot."""
    f = done.fields
    temperature = at_rows(done, f["temperature_2m"], rows)
    vapour = at_rows(done, f["humidity_2m"], rows)
    known = wind_is_known(done.scenario)
    difference = at_rows(done, difference_of(done, between), rows)
    wet, humid = np.full(rows.shape, math.nan), np.full(rows.shape, math.nan)
    base, top, wind = (np.full(rows.shape, math.nan) for _ in range(3))
    regime: list[str | None] = [None] * len(rows)
    deposit: list[str | None] = [None] * len(rows)
    for n, moment in enumerate(rows):
        if not (math.isfinite(temperature[n]) and math.isfinite(vapour[n])):
            continue
        wet[n] = delta_t(float(temperature[n]), float(vapour[n]), done.surface_pressure)
        humid[n] = 100.0 * min(1.0, relative_humidity(float(temperature[n]), float(vapour[n]), done.surface_pressure))
        knot = int(np.argmin(np.where(np.isfinite(f["temperature_2m"]), np.abs(done.time - moment), math.inf)))
        wind[n] = wind_at(done, knot, boom_height)
        regime[n] = regime_word(done, knot)
        found = rising_inversion(*screen_profile(done, knot, profile_at(done, knot)))
        if difference[n] > 0.0:
            base[n], top[n] = (found.base, found.top) if found.present and found.base < between[1] else between
        course = part_at(done, knot).course
        deposit[n] = DEPOSITS[course.notes[knot].deposit] if course is not None else DEPOSITS[0]
    nothing = np.full(rows.shape, math.nan)
    rain = done.scenario.weather.sample("rain_mm_h", rows) * 3600.0
    return FieldAir(
        time=rows, first_hour=first_hour(rows, done.scenario.site.time_zone), boom_height=boom_height, between=between, temperature=temperature - ZERO_CELSIUS, humidity=humid,
        delta_t=wet, wind=wind if known else nothing,
        wind_10m=at_rows(done, f["wind_10m"], rows) if known else nothing, difference=difference, inversion_from=base,
        inversion_to=top, regime=tuple(regime), deposit=tuple(deposit), rain=rain, since=since_break_up(rows, difference),
    )  # fmt: skip
