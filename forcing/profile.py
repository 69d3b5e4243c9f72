"""The measured column made ready for use: stated tests, named and counted repairs, re-basing, interpolation.

Repairs by name, in the order they are made (each with the number of levels it touched and its rule in words):
what a reader mends (not-a-number cell, repeated header, humidity unit, message cut short, record cut short), pressure unit, temperature unit, dew point unit, pressure from height, level without pressure, reversed order,
level out of order, duplicate level, level below ground, ground temperature carried down, level without temperature,
dew point above temperature, dew point refused, humidity interpolated, humidity at the ground, humidity aloft,
elevation from pressure, height unit, height above ground, height replaced, height integrated, ground level added,
wind-only level placed, wind interpolated, wind held.

Flags by name (the level is kept): heights against hydrostatic, height against pressure, elevation against heights,
surface level missing, levels below ground, superadiabatic surface layer, surface temperature,
potential temperature drop, wind unit.
"""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime
from typing import Literal

import numpy as np

from forcing.air import (
    GRAVITY,
    each,
    potential_temperature,
    saturation_humidity,
    standard_height,
    temperature,
)
from forcing.errors import ProfileError
from forcing.ground import (
    DOUBT_NAMES,
    Column,
    column_of,
    cut_below,
    doubts,
    extend_down,
    fill_wind,
    level_at,
    place_wind_levels,
    pressure_by_theta,
    set_ground,
)
from forcing.heights import fill_humidity, settle_heights
from forcing.levels import (
    Levels,
    cap_dewpoint,
    fill_pressure,
    mend_units,
    merge_duplicates,
    order_levels,
    refuse_absurd,
    refuse_percent_dewpoint,
    repair,
    start,
)
from forcing.sounding import Array, Flag, Profile, Repair, Sounding

__all__ = [
    "Flag",
    "Profile",
    "Repair",
    "Sounding",
    "interpolate",
    "precipitable_water",
    "prepare",
    "rebase",
]

LEVELS_MIN = 3
TOP_MIN = 500.0  # m above ground: below this no day's mixed layer fits under the top of the profile


def _aware(valid: datetime | None, place: str) -> datetime | None:
    if valid is None:
        return None
    if valid.tzinfo is None:
        raise ProfileError(
            f"time {valid.isoformat()} has no offset from UTC", place=place, remedy="write it as 2026-07-01T12:00Z"
        )
    return valid.astimezone(UTC)


def _when(sounding: Sounding, valid: datetime | None, default: datetime | None, place: str) -> datetime:
    """Time of release: as told, else of the file, else the default."""
    when = _aware(valid, place) or _aware(sounding.valid, place) or _aware(default, place)
    if when is not None:
        return when
    told = f" ({'; '.join(sounding.notes)})" if sounding.notes else ""
    raise ProfileError(
        f"the file does not say when the balloon was released{told}",
        place=place,
        remedy="give the time with offset: --valid 2026-07-01T12:00Z, or valid under [profile] of a scenario",
    )


def _marked_ground(levels: Levels) -> tuple[Levels, tuple[Repair, ...]]:
    """Drop what lies below a level marked as ground; carry a missing temperature down to it (theta held)."""
    if levels.surface < 0:
        return levels, ()
    below = levels.surface
    done = repair("level below ground", below, "dropped: pressure above that of the marked ground level")
    levels = levels.take(np.arange(below, levels.pressure.size))
    warm = np.flatnonzero(np.isfinite(levels.temperature))
    if not warm.size or warm[0] == 0:
        return levels, done
    i = int(warm[0])
    theta = potential_temperature(float(levels.temperature[i]), float(levels.pressure[i]))
    value = levels.temperature.copy()
    value[0] = temperature(theta, float(levels.pressure[0]))
    detail = "missing at the marked ground level: potential temperature of the lowest level with one held"
    return replace(levels, temperature=value), done + repair("ground temperature carried down", 1, detail)


def _first_pass(sounding: Sounding) -> tuple[Levels, tuple[Repair, ...]]:
    place = sounding.file or "profile"
    if not sounding.pressure.size:
        raise ProfileError("holds no level", place=place, remedy="give at least 3 levels with pressure and temperature")
    mended, done = mend_units(sounding)
    refuse_percent_dewpoint(mended)
    refuse_absurd(mended)
    levels, more = fill_pressure(start(mended))
    done += more
    if not levels.pressure.size:
        raise ProfileError("no level has a pressure", place=place, remedy="give pressure at the levels, in hPa")
    for step in (order_levels, merge_duplicates, _marked_ground, cap_dewpoint):
        levels, more = step(levels)
        done += more
    return levels, done


def _with_temperature(levels: Levels, place: str) -> tuple[Levels, Levels, tuple[Repair, ...]]:
    warm = np.isfinite(levels.temperature)
    count = int(warm.sum())
    if count < LEVELS_MIN:
        raise ProfileError(
            f"{count} usable levels with pressure and temperature (of {levels.pressure.size})",
            place=place,
            remedy=f"at least {LEVELS_MIN} are needed; check that the file holds a whole sounding",
        )
    bare = int((~warm & ~(np.isfinite(levels.u) & np.isfinite(levels.v))).sum())
    done = repair("level without temperature", bare, "dropped: neither temperature nor wind")
    return levels.take(np.flatnonzero(warm)), levels.take(np.flatnonzero(~warm)), done


def prepare(
    sounding: Sounding,
    *,
    valid: datetime | None = None,
    latitude: float | None = None,
    longitude: float | None = None,
    elevation: float | None = None,
    utc_default: datetime | None = None,
) -> Profile:
    """Test a sounding, repair what has a named rule, and give a profile without gaps.

    Parameters
    ----------
    sounding : Sounding
    valid, latitude, longitude, elevation : optional
        Time (aware) and position of the *release*, over what the file says. Elevation in m above sea level; a site
        elsewhere is `rebase`'s business.
    utc_default : datetime, optional
        Time where neither `valid` nor the file has one.

    Raises
    ------
    ProfileError
        Values no balloon can meet, no order in pressure, under 3 levels with temperature, a top under 500 m above
        ground, no time or one without offset.
    """
    place = sounding.file or "profile"
    when = _when(sounding, valid, utc_default, place)
    levels, done = _first_pass(sounding)
    warm, windy, more = _with_temperature(levels, place)
    warm, humidity_known, last = fill_humidity(warm)
    done = sounding.repairs + done + more + last
    column, ground, more, flags = _on_ground(
        warm,
        sounding.elevation if elevation is None else elevation,
        marked=levels.surface >= 0,
        above_ground=sounding.heights_above_ground,
        place=place,
    )
    column, last = place_wind_levels(column, windy.pressure, windy.u, windy.v)
    done += more + last
    column, wind_known, more = fill_wind(column)
    _refuse_low_top(column, place)
    return Profile(
        *column,
        wind_known=wind_known,
        humidity_known=humidity_known,
        valid=when,
        latitude=_first(latitude, sounding.latitude),
        longitude=_first(longitude, sounding.longitude),
        elevation=ground,
        station=sounding.station,
        file=sounding.file,
        format=sounding.format,
        repairs=done + more,
        flags=flags + doubts(column),
    )


def _refuse_low_top(column: Column, place: str) -> None:
    if column.height[-1] < TOP_MIN:
        raise ProfileError(
            f"the profile ends {column.height[-1]:.0f} m above ground",
            place=place,
            remedy=f"it must reach {TOP_MIN:.0f} m; check the heights and that the file is complete",
        )


def _on_ground(
    warm: Levels, elevation: float | None, *, marked: bool, above_ground: bool, place: str
) -> tuple[Column, float, tuple[Repair, ...], tuple[Flag, ...]]:
    """Settle the heights and find the ground: column with height above it, its elevation, repairs, flags."""
    done: tuple[Repair, ...] = ()
    if elevation is None and above_ground:
        lowest = float(np.nan_to_num(warm.height[0]))
        elevation = float(standard_height(float(warm.pressure[0]))) - lowest
        done += repair(
            "elevation from pressure", 1, "heights are above ground: standard atmosphere at the lowest level"
        )
    warm, more, flags = settle_heights(warm, elevation=elevation, above_ground=above_ground)
    column, ground, last, doubtful = set_ground(
        column_of(warm), elevation, marked=marked, exact=above_ground, place=place
    )
    return column, ground, done + more + last, flags + doubtful


def _first(*values: float | None) -> float:
    return next((float(value) for value in values if value is not None), float("nan"))


def _column(profile: Profile) -> Column:
    return Column(profile.height, profile.pressure, profile.theta, profile.humidity, profile.u, profile.v)


def rebase(profile: Profile, elevation: float, rule: Literal["sea-level", "ground"]) -> Profile:
    """Move a profile to ground at another elevation by a named rule.

    ``"sea-level"``: the air at a height above sea level is the same. Over higher ground the levels below it are cut
    and a ground level is interpolated; over lower ground the lowest level's theta, humidity and wind are held down
    to it.

    ``"ground"``: the air follows the ground. Theta, humidity and wind keep their height above ground; pressure is
    integrated hydrostatically from the surface pressure that the profile has at the new elevation, and humidity is
    capped at saturation where the colder level cannot hold it.

    Parameters
    ----------
    elevation : float
        New ground, m above sea level.
    rule : {"sea-level", "ground"}

    Raises
    ------
    ProfileError
        The profile ends less than 500 m above the new ground, or the rule is unknown.
    """
    place = profile.file or "profile"
    column, shift = _column(profile), elevation - profile.elevation
    if rule not in ("sea-level", "ground"):
        raise ProfileError(f"unknown re-basing rule {rule!r}", place=place, remedy="use sea-level or ground")
    if shift > profile.height[-1] - TOP_MIN:
        raise ProfileError(
            f"ground at {elevation:.0f} m is within {TOP_MIN:.0f} m of the profile's top or above it",
            place=place,
            remedy="check the elevation, or use a profile that reaches higher",
        )
    if shift == 0.0:
        return profile
    moved = cut_below(column, shift) if shift > 0.0 else extend_down(column, shift)
    moved = moved.above(shift)
    capped = 0
    if rule == "ground":
        pressure = pressure_by_theta(column.height, column.theta, column.humidity, float(moved.pressure[0]))
        limit = each(saturation_humidity, each(temperature, column.theta, pressure), pressure)
        capped = int((column.humidity > limit).sum())
        moved = column._replace(pressure=pressure, humidity=np.minimum(column.humidity, limit))
    detail = f"{rule}: ground moved from {profile.elevation:.0f} to {elevation:.0f} m above sea level"
    done = profile.repairs + repair("re-based", 1, detail)
    done += repair("humidity capped", capped, "at saturation after re-basing")
    return replace(
        profile,
        height=moved.height,
        pressure=moved.pressure,
        theta=moved.theta,
        humidity=moved.humidity,
        u=moved.u,
        v=moved.v,
        elevation=float(elevation),
        repairs=done,
        flags=tuple(flag for flag in profile.flags if flag.name not in DOUBT_NAMES) + doubts(moved),
    )


def interpolate(profile: Profile, height: Array | float) -> Column:
    """Read a profile at heights (m above ground, shape (m,)): linear, pressure in its logarithm; NaN outside."""
    wanted = np.atleast_1d(np.asarray(height, dtype=np.float64))
    column = _column(profile)
    rows = np.array([level_at(column, float(z)) for z in wanted]).reshape(-1, 6)
    rows[(wanted < 0.0) | (wanted > profile.height[-1]), 1:] = np.nan
    return Column(*rows.T)


def precipitable_water(profile: Profile) -> float:
    """Water vapour of the whole profile, kg m-2 (mm): the integral of specific humidity over pressure / g."""
    q = profile.humidity
    return float(np.sum(0.5 * (q[1:] + q[:-1]) * -np.diff(profile.pressure)) / GRAVITY)
