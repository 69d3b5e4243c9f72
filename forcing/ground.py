"""Third part of making a column ready: where the ground is, the wind at every level, and what looks doubtful."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from forcing.air import (
    GRAVITY,
    KAPPA,
    P_REFERENCE,
    R_DRY,
    each,
    potential_temperature,
    saturation_humidity,
    temperature,
    virtual,
)
from forcing.errors import ProfileError
from forcing.heights import humidity_of
from forcing.levels import Levels, repair
from forcing.sounding import Array, Flag, Repair

SAME_GROUND = 30.0  # m, common practice: release platform, barometer and map differ by less
SURFACE_GAP_MAX = 500.0  # m, the deepest layer that is filled in below the lowest level
THETA_DROP = 1.0  # K, Slonaker et al. 1996 (Weather and Forecasting 11, 350): a larger drop aloft is suspect
SURFACE_LAYER_TOP = 300.0  # m, superadiabatic layers must start at the ground and below this to be taken as genuine
SURFACE_EXCESS = 0.3  # K, rounding to 0.1 K and 1 hPa alone gives up to 0.2
SURFACE_EXCESS_DOUBT = 10.0  # K, common practice: larger excess of the lowest level suggests a warm sensor
JET_DOUBT = 110.0  # m s-1, common practice: stronger winds suggest knots read as m/s

DOUBT_NAMES = ("superadiabatic surface layer", "surface temperature", "potential temperature drop", "wind unit")


class Column(NamedTuple):
    """Levels as the model uses them, shape (n,) each; height in m (above sea level or ground), wind may be NaN."""

    height: Array
    pressure: Array
    theta: Array
    humidity: Array
    u: Array
    v: Array

    def keep(self, chosen: NDArray[np.bool_]) -> Column:
        """Keep the levels where the mask `chosen` is True."""
        return Column(*(values[chosen] for values in self))

    def above(self, base: float) -> Column:
        """Measure height from `base`."""
        return self._replace(height=self.height - base)


def column_of(levels: Levels) -> Column:
    """Turn levels with complete temperature and height into a column (humidity 0 where unknown)."""
    theta = each(potential_temperature, levels.temperature, levels.pressure)
    return Column(levels.height, levels.pressure, theta, np.nan_to_num(humidity_of(levels)), levels.u, levels.v)


def level_at(column: Column, height: float) -> tuple[float, float, float, float, float, float]:
    """Interpolate one level: theta, humidity, wind linear with height, pressure in its logarithm."""
    z = column.height
    log_p = float(np.interp(height, z, np.log(column.pressure)))
    rest = [float(np.interp(height, z, values)) for values in column[2:]]
    return height, float(np.exp(log_p)), rest[0], rest[1], rest[2], rest[3]


def prepend(level: tuple[float, float, float, float, float, float], column: Column) -> Column:
    """Put a level below a column."""
    return Column(*(np.concatenate(([value], values)) for value, values in zip(level, column, strict=True)))


def pressure_by_theta(height: Array, theta: Array, humidity: Array, start: float) -> Array:
    """Pressure, Pa, at levels up (or down) from `start` at the first: hydrostatic, in the Exner function."""
    warm = each(virtual, theta, humidity)
    layer = 0.5 * (warm[1:] + warm[:-1])
    exner = np.concatenate(([0.0], np.cumsum(-GRAVITY * KAPPA / R_DRY * np.diff(height) / layer)))
    exner += (start / P_REFERENCE) ** KAPPA
    return np.asarray(P_REFERENCE * exner ** (1.0 / KAPPA), dtype=np.float64)


def extend_down(column: Column, height: float) -> Column:
    """Add a level at `height` below the lowest: its theta, humidity and wind held, pressure hydrostatic."""
    z = np.array([column.height[0], height])
    theta, q = np.full(2, column.theta[0]), np.full(2, column.humidity[0])
    pressure = float(pressure_by_theta(z, theta, q, float(column.pressure[0]))[1])
    held = (float(column.theta[0]), float(column.humidity[0]), float(column.u[0]), float(column.v[0]))
    return prepend((height, pressure, *held), column)


def cut_below(column: Column, height: float) -> Column:
    """Drop the levels below `height` and put an interpolated one there (a level within 1 m of it gives way)."""
    return prepend(level_at(column, height), column.keep(column.height > height + 1.0))


def set_ground(
    column: Column, elevation: float | None, *, marked: bool, exact: bool, place: str
) -> tuple[Column, float, tuple[Repair, ...], tuple[Flag, ...]]:
    """Make height count from the ground; return also the elevation of the ground.

    A level marked as the ground is the ground, and so is a lowest level within 30 m of `elevation` (0.5 m where the
    file itself counts from the ground). A higher lowest level is extended down to the ground, levels below it are cut.
    """
    lowest = float(column.height[0])
    if elevation is None:
        return column.above(lowest), lowest, (), ()
    gap = lowest - elevation
    limit = 0.5 if exact else SAME_GROUND
    if marked or abs(gap) <= limit:
        return column.above(lowest), elevation if abs(gap) <= SAME_GROUND else lowest, (), ()
    if gap > SURFACE_GAP_MAX:
        raise ProfileError(
            f"lowest level at {lowest:.0f} m is {gap:.0f} m above the ground at {elevation:.0f} m",
            place=place,
            remedy=f"give the elevation of the release, or a profile that starts within {SURFACE_GAP_MAX:.0f} m of it",
        )
    if gap > 0.0:
        detail = f"lowest level {gap:.0f} m above ground: its theta, humidity and wind held down to it"
        flags = (Flag("surface level missing", 0, 0.0, detail),) if gap > SAME_GROUND else ()
        return (
            extend_down(column, elevation).above(elevation),
            elevation,
            repair("ground level added", 1, detail),
            flags,
        )
    below = int((column.height < elevation).sum())
    if column.height.size - below < 2:
        raise ProfileError(
            f"{below} of {column.height.size} levels lie below the ground at {elevation:.0f} m",
            place=place,
            remedy="check the elevation and whether heights are above sea level",
        )
    done = repair("level below ground", below, f"dropped: under {elevation:.0f} m; ground level interpolated")
    flag = Flag("levels below ground", 0, 0.0, f"{below} levels under the elevation of {elevation:.0f} m")
    return cut_below(column, elevation).above(elevation), elevation, done, (flag,)


def _at_most_saturated(theta: Array, humidity: Array, pressure: Array) -> Array:
    """Cap humidity: a straight line between two saturated levels runs above saturation."""
    return np.minimum(humidity, each(saturation_humidity, each(temperature, theta, pressure), pressure))


def place_wind_levels(column: Column, pressure: Array, u: Array, v: Array) -> tuple[Column, tuple[Repair, ...]]:
    """Put levels that have wind only into the column, at the height of their pressure, theta and humidity linear."""
    inside = np.isfinite(u) & np.isfinite(v) & (pressure < column.pressure[0]) & (pressure > column.pressure[-1])
    if not inside.any():
        return column, ()
    p = pressure[inside]
    z = np.interp(-np.log(p), -np.log(column.pressure), column.height)
    apart = np.array([float(np.min(np.abs(column.height - value))) > 0.5 for value in z])
    apart[1:] &= np.diff(z) > 0.5
    p, z = p[apart], z[apart]
    theta, q = (np.interp(z, column.height, values) for values in (column.theta, column.humidity))
    added = Column(z, p, theta, _at_most_saturated(theta, q, p), u[inside][apart], v[inside][apart])
    joined = Column(*(np.concatenate(pair) for pair in zip(column, added, strict=True)))
    order = np.argsort(joined.height, kind="stable")
    done = repair("wind-only level placed", int(apart.sum()), "temperature and humidity interpolated at its height")
    return Column(*(values[order] for values in joined)), done


def fill_wind(column: Column) -> tuple[Column, bool, tuple[Repair, ...]]:
    """Fill missing wind: components linear in ln p between known levels, held outside; say whether any is known."""
    known = np.isfinite(column.u) & np.isfinite(column.v)
    if not known.any():
        calm = np.zeros_like(column.theta)
        return column._replace(u=calm, v=calm.copy()), False, ()
    log_p = -np.log(column.pressure)
    u, v = (np.interp(log_p, log_p[known], values[known]) for values in (column.u, column.v))
    missing = ~known
    first, last = np.flatnonzero(known)[[0, -1]]
    outside = int(missing[:first].sum() + missing[last + 1 :].sum())
    done = repair("wind interpolated", int(missing.sum()) - outside, "components linear in ln p between known levels")
    done += repair("wind held", outside, "below the lowest or above the highest level with wind: that level's wind")
    return column._replace(u=u, v=v), True, done


def doubts(column: Column) -> tuple[Flag, ...]:
    """Flag a superadiabatic surface layer (kept), potential-temperature drops aloft (kept) and winds in knots."""
    flags: tuple[Flag, ...] = ()
    theta, z = column.theta, column.height
    steps = np.diff(theta)
    top = 0
    while top < steps.size and steps[top] < 0.0 and z[top] < SURFACE_LAYER_TOP:
        top += 1
    excess = float(theta[0] - theta[top])
    if excess > SURFACE_EXCESS:
        text = f"potential temperature falls {excess:.1f} K from the ground to {z[top]:.0f} m: kept as measured"
        flags += (Flag("superadiabatic surface layer", top, float(z[top]), text),)
    if excess > SURFACE_EXCESS_DOUBT:
        value = float(temperature(float(theta[0]), float(column.pressure[0]))) - 273.15
        flags += (Flag("surface temperature", 0, 0.0, f"{value:.1f} C is {excess:.1f} K over the air above it"),)
    for i in range(top, steps.size):
        if steps[i] < -THETA_DROP:
            text = f"potential temperature falls {-steps[i]:.1f} K from {z[i]:.0f} to {z[i + 1]:.0f} m"
            flags += (Flag("potential temperature drop", i + 1, float(z[i + 1]), text),)
    speed = np.hypot(column.u, column.v)
    if speed.size and float(speed.max()) > JET_DOUBT:
        i = int(speed.argmax())
        text = f"{speed[i]:.0f} m/s is beyond most jets: the file may hold knots"
        flags += (Flag("wind unit", i, float(z[i]), text),)
    return flags
