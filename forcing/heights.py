"""Second part of making a column ready: humidity without gaps, and heights tested against hydrostatic balance."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from forcing.air import (
    GRAVITY,
    R_DRY,
    dew_point,
    each,
    humidity_from_vapour_pressure,
    saturation_vapour_pressure,
    standard_height,
    vapour_pressure,
    virtual,
)
from forcing.levels import Levels, median, repair
from forcing.sounding import Array, Flag, Repair
from forcing.units import FOOT_M

NEAR_GROUND = 5000.0  # m above the first level: heights here settle the elevation
ELEVATION_DOUBT = 50.0  # m, common practice: station and barometer heights differ by less
PRESSURE_DOUBT = 450.0  # m, about 50 hPa: a deep low at sea level is not a doubt
PRESSURE_STEP = 50.0  # Pa, half a unit of a pressure reported in whole hPa


def humidity_of(levels: Levels) -> Array:
    """Specific humidity, kg/kg, from dew point over water; NaN where missing."""
    q = np.full(levels.pressure.size, np.nan)
    known = np.isfinite(levels.dewpoint)
    if known.any():
        q[known] = each(
            humidity_from_vapour_pressure,
            each(saturation_vapour_pressure, levels.dewpoint[known]),
            levels.pressure[known],
        )
    return q


def fill_humidity(levels: Levels) -> tuple[Levels, bool, tuple[Repair, ...]]:
    """Fill missing dew points by three named rules; say whether any was known.

    Between known levels the dew point is linear in ln p (how significant levels are chosen). Below the lowest the
    specific humidity of that level is carried down, at most to saturation. Above the highest the dew-point depression
    of that level stays, and the specific humidity never exceeds that level's.
    """
    known = np.flatnonzero(np.isfinite(levels.dewpoint))
    if not known.size:
        return levels, False, ()
    log_p, dewpoint = -np.log(levels.pressure), levels.dewpoint.copy()
    missing = np.isnan(dewpoint)
    where = np.arange(dewpoint.size)
    low, high = int(known[0]), int(known[-1])
    inside = missing & (where > low) & (where < high)
    dewpoint[inside] = np.interp(log_p[inside], log_p[known], dewpoint[known])
    q = humidity_of(levels)
    below, above = where < low, where > high
    if below.any():
        carried = each(dew_point, each(vapour_pressure, np.full(low, q[low]), levels.pressure[below]))
        dewpoint[below] = np.minimum(carried, levels.temperature[below])
    if above.any():
        depression = levels.temperature[high] - dewpoint[high]
        count = int(above.sum())
        cap = each(dew_point, each(vapour_pressure, np.full(count, q[high]), levels.pressure[above]))
        dewpoint[above] = np.minimum(levels.temperature[above] - depression, cap)
    dewpoint = np.minimum(dewpoint, levels.temperature)
    done = repair("humidity interpolated", int(inside.sum()), "dew point linear in ln p between measured levels")
    done += repair("humidity at the ground", int(below.sum()), "specific humidity of the lowest measured level held")
    done += repair("humidity aloft", int(above.sum()), "dew-point depression of the highest measured level held")
    return replace(levels, dewpoint=dewpoint), True, done


def hydrostatic(levels: Levels) -> Array:
    """Height above the first level, m, from pressure and the mean virtual temperature of each layer."""
    q = np.nan_to_num(humidity_of(levels))
    warm = each(virtual, levels.temperature, q)
    steps = R_DRY / GRAVITY * 0.5 * (warm[1:] + warm[:-1]) * np.log(levels.pressure[:-1] / levels.pressure[1:])
    return np.concatenate(([0.0], np.cumsum(steps)))


def _unit(given: Array, above: Array) -> tuple[Array, tuple[Repair, ...]]:
    known = np.flatnonzero(np.isfinite(given))
    if known.size < 3:
        return given, ()
    ratio = median(np.diff(given[known]) / np.diff(above[known]))
    if 3.0 < ratio < 3.6:
        return given * FOOT_M, repair("height unit", int(known.size), "heights named m were feet: read as feet")
    if 0.0008 < ratio < 0.0012:
        return given * 1000.0, repair("height unit", int(known.size), "heights named m were km: read as km")
    return given, ()


def _agreeing(given: Array, above: Array, pressure: Array) -> list[int]:
    """Levels whose height follows from the one accepted below it, within rounding and 2 % of the thickness."""
    known = np.flatnonzero(np.isfinite(given))
    if not known.size:
        return []
    shift = given[known] - above[known]
    low = above[known] - above[known[0]] <= NEAR_GROUND
    middle = median(shift[low])
    near = known[np.abs(shift - middle) <= 60.0 + 0.01 * above[known]]
    if not near.size:
        return []
    accepted = [int(near[0])]
    for i in known[known > near[0]].tolist():
        j = accepted[-1]
        thick, claimed = above[i] - above[j], given[i] - given[j]
        rounding = R_DRY / GRAVITY * 250.0 * PRESSURE_STEP / pressure[i]
        if abs(claimed - thick) <= 20.0 + rounding + 0.02 * thick and 0.25 * thick <= claimed <= 4.0 * thick:
            accepted.append(i)
    return accepted


def settle_heights(
    levels: Levels, *, elevation: float | None, above_ground: bool
) -> tuple[Levels, tuple[Repair, ...], tuple[Flag, ...]]:
    """Give every level a height above sea level that agrees with hydrostatic balance.

    Heights that agree stay, the others are replaced; missing ones are integrated between (scaled to fit at both
    ends), above and below. Without any height, the first level is at `elevation` or, failing that, where the standard
    atmosphere has its pressure.
    """
    above = hydrostatic(levels)
    given, done = _unit(levels.height, above)
    standard = float(standard_height(float(levels.pressure[0])))
    agreed = _agreeing(given, above, levels.pressure)
    if agreed:
        offset = float(given[agreed[0]] - above[agreed[0]])
        # heights that start at zero beside an elevation that does not: they are above ground
        shifted = above_ground or (elevation is not None and abs(elevation) >= 100.0 and abs(offset) < 30.0)
        if shifted:
            base = standard if elevation is None else elevation
            given = given + base
            if not above_ground:
                done += repair("height above ground", len(agreed), "heights named above sea level start at the ground")
    known = int(np.isfinite(given).sum())
    if known >= 3 and len(agreed) < 0.5 * known:
        agreed = []
    anchor = agreed
    height = np.full(above.size, np.nan)
    if anchor:
        height[anchor] = given[anchor]
        at = np.asarray(anchor)
        height = given[anchor[0]] + np.interp(above, above[at], given[at] - given[anchor[0]])
        low, high = above < above[anchor[0]], above > above[anchor[-1]]
        height[low] = given[anchor[0]] + above[low] - above[anchor[0]]
        height[high] = given[anchor[-1]] + above[high] - above[anchor[-1]]
    else:
        base = standard if elevation is None else elevation
        height = base + above
        if elevation is None:
            done += repair("elevation from pressure", 1, "no height given: standard atmosphere at the lowest pressure")
    replaced = known - len(agreed)
    done += repair("height replaced", replaced, "disagreed with hydrostatic balance: integrated instead")
    done += repair("height integrated", above.size - known, "missing: hydrostatic with virtual temperature")
    flags = _doubts(height, above, standard, elevation, replaced=replaced, known=known)
    return replace(levels, height=height), done, flags


def _doubts(
    height: Array, above: Array, standard: float, elevation: float | None, *, replaced: int, known: int
) -> tuple[Flag, ...]:
    flags: tuple[Flag, ...] = ()
    if replaced and replaced >= 0.5 * known:
        flags += (Flag("heights against hydrostatic", 0, 0.0, f"{replaced} of {known} given heights disagreed"),)
    if abs(float(height[0]) - standard) > PRESSURE_DOUBT:
        text = f"lowest level at {height[0]:.0f} m, while its pressure belongs near {standard:.0f} m"
        flags += (Flag("height against pressure", 0, 0.0, text),)
    if elevation is not None and abs(float(height[0]) - elevation) > ELEVATION_DOUBT:
        text = f"lowest level at {height[0]:.0f} m, elevation given as {elevation:.0f} m"
        flags += (Flag("elevation against heights", 0, 0.0, text),)
    return flags
