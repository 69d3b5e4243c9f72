"""First part of making a column ready: units, absurd values, order, duplicates, dew point above temperature."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from forcing.air import ZERO_CELSIUS
from forcing.errors import ProfileError
from forcing.sounding import Array, Repair, Sounding

# Widest values a balloon can meet; limits are common practice, set outside the records of the free air.
PRESSURE_RANGE = (50.0, 110_000.0)  # Pa
TEMPERATURE_RANGE = (ZERO_CELSIUS - 110.0, ZERO_CELSIUS + 58.0)  # K
DEWPOINT_RANGE = (ZERO_CELSIUS - 150.0, ZERO_CELSIUS + 40.0)  # K
HEIGHT_RANGE = (-500.0, 60_000.0)  # m above sea level
WIND_MAX = 150.0  # m s-1
DEWPOINT_EXCESS = 0.5  # K, rounding of temperature and dew point to tenths or to a code of two digits


@dataclass(frozen=True, slots=True)
class Levels:
    """Working copy of the levels (SI, NaN missing); ``surface`` is the index of the marked ground level or -1."""

    pressure: Array
    height: Array
    temperature: Array
    dewpoint: Array
    u: Array
    v: Array
    lines: NDArray[np.int64]
    surface: int
    file: str

    def take(self, index: Sequence[int] | NDArray[np.int64]) -> Levels:
        """Keep the levels at `index`, in that order."""
        chosen = np.asarray(index, dtype=np.int64)
        found = np.flatnonzero(chosen == self.surface)
        return Levels(
            self.pressure[chosen],
            self.height[chosen],
            self.temperature[chosen],
            self.dewpoint[chosen],
            self.u[chosen],
            self.v[chosen],
            self.lines[chosen],
            int(found[0]) if found.size else -1,
            self.file,
        )

    def where(self, index: int) -> str:
        """File, line and pressure of a level, for messages."""
        return f"{self.file or 'profile'}, line {int(self.lines[index])}"


def repair(name: str, count: int, detail: str) -> tuple[Repair, ...]:
    """Give one `Repair`, or none where nothing was touched."""
    return (Repair(name, count, detail),) if count else ()


def median(values: Array) -> float:
    """Median of values without gaps, NaN of none; numpy's own loads masked arrays, which costs a third of a start."""
    if not values.size:
        return float("nan")
    ordered = np.sort(values)
    return 0.5 * float(ordered[(values.size - 1) // 2] + ordered[values.size // 2])


def _middle(values: Array) -> float:
    return median(values[np.isfinite(values)])


def _top(values: Array) -> float:
    known = values[np.isfinite(values)]
    return float(known.max()) if known.size else float("nan")


def _celsius_mixed_up(name: str, values: Array) -> tuple[Array, tuple[Repair, ...]]:
    middle, count = _middle(values), int(np.isfinite(values).sum())
    if middle > 400.0:
        return values - ZERO_CELSIUS, repair(f"{name} unit", count, "values named C were kelvins: read as K")
    if middle < 100.0:
        return values + ZERO_CELSIUS, repair(f"{name} unit", count, "values named K were degrees C: read as C")
    return values, ()


def mend_units(sounding: Sounding) -> tuple[Sounding, tuple[Repair, ...]]:
    """Read whole columns in the unit they are evidently in: Pa, hPa or kPa; C or K."""
    done: tuple[Repair, ...] = ()
    pressure, highest = sounding.pressure, _top(sounding.pressure)
    for low, high, factor, words in (
        (3.0e4 * 100, 1.1e5 * 100, 0.01, "values named hPa were Pa: read as Pa"),
        (3.0e4 / 100, 1.1e5 / 100, 100.0, "values named Pa were hPa: read as hPa"),
        (5.0e3, 1.1e4, 10.0, "values named hPa were kPa: read as kPa"),
        (50.0, 110.0, 1000.0, "values named Pa were kPa: read as kPa"),
    ):
        if low < highest <= high:
            pressure = pressure * factor
            done += repair("pressure unit", int(np.isfinite(pressure).sum()), words)
            break
    temperature, more = _celsius_mixed_up("temperature", sounding.temperature)
    dewpoint, last = _celsius_mixed_up("dew point", sounding.dewpoint)
    mended = replace(sounding, pressure=pressure, temperature=temperature, dewpoint=dewpoint)
    return mended, done + more + last


def refuse_percent_dewpoint(sounding: Sounding) -> None:
    """Raise where the dew point column evidently holds relative humidity in percent."""
    celsius = sounding.dewpoint - ZERO_CELSIUS
    both = np.isfinite(sounding.temperature) & np.isfinite(celsius)
    excess = both & (sounding.dewpoint - sounding.temperature > 5.0) & (celsius >= 0.0) & (celsius <= 105.0)
    if both.sum() >= 2 and excess.sum() > 0.5 * both.sum():
        first = int(np.flatnonzero(excess)[0])
        raise ProfileError(
            f"dew point {celsius[first]:.1f} C lies above temperature {sounding.temperature[first] - ZERO_CELSIUS:.1f} C "
            f"at {int(excess.sum())} of {int(both.sum())} levels, as relative humidity in percent would",
            place=f"{sounding.file or 'profile'}, line {sounding.lines[first]}",
            remedy="name the column relative_humidity_pct if it holds percent",
        )


def refuse_absurd(sounding: Sounding) -> None:
    """Raise on the first value that no balloon can have met, naming line, value and remedy."""
    columns = (
        ("pressure", sounding.pressure, PRESSURE_RANGE, 0.0, 0.01, "hPa"),
        ("temperature", sounding.temperature, TEMPERATURE_RANGE, ZERO_CELSIUS, 1.0, "C"),
        ("dew point", sounding.dewpoint, DEWPOINT_RANGE, ZERO_CELSIUS, 1.0, "C"),
        ("height", sounding.height_msl, HEIGHT_RANGE, 0.0, 1.0, "m"),
        ("wind speed", sounding.wind_speed, (0.0, WIND_MAX), 0.0, 1.0, "m/s"),
        ("wind direction", sounding.wind_from, (0.0, 360.0), 0.0, 1.0, "degrees"),
    )
    for name, values, (low, high), offset, scale, unit in columns:
        wrong = np.flatnonzero((values < low) | (values > high) | np.isinf(values))
        if wrong.size:
            i = int(wrong[0])
            bounds = f"{(low - offset) * scale:g} to {(high - offset) * scale:g} {unit}"
            raise ProfileError(
                f"{name} {(values[i] - offset) * scale:g} {unit} is outside {bounds}",
                place=f"{sounding.file or 'profile'}, line {sounding.lines[i]}",
                remedy="correct the value or its unit, or leave it empty where it is missing",
            )


def start(sounding: Sounding) -> Levels:
    """Turn a sounding into working levels, wind as components (calm air needs no direction)."""
    speed, angle = sounding.wind_speed, np.radians(sounding.wind_from)
    calm = speed == 0.0
    return Levels(
        sounding.pressure,
        sounding.height_msl,
        sounding.temperature,
        sounding.dewpoint,
        np.where(calm, 0.0, -speed * np.sin(angle)),
        np.where(calm, 0.0, -speed * np.cos(angle)),
        np.asarray(sounding.lines, dtype=np.int64),
        -1 if sounding.surface is None else sounding.surface,
        sounding.file,
    )


def fill_pressure(levels: Levels) -> tuple[Levels, tuple[Repair, ...]]:
    """Give levels with a height but no pressure one, linear in ln p with height; drop levels with neither."""
    p, z = levels.pressure, levels.height
    known = np.isfinite(p) & np.isfinite(z)
    lost = ~np.isfinite(p)
    low, high = (z[known].min(), z[known].max()) if known.sum() >= 2 else (np.inf, -np.inf)
    fillable = lost & (z >= low) & (z <= high)
    if fillable.any():
        order = np.argsort(z[known], kind="stable")
        p = p.copy()
        p[fillable] = np.exp(np.interp(z[fillable], z[known][order], np.log(p[known][order])))
    done = repair("pressure from height", int(fillable.sum()), "pressure interpolated in ln p between levels with both")
    dropped = int((~np.isfinite(p)).sum())
    done += repair("level without pressure", dropped, "dropped: neither pressure nor a height between known ones")
    kept = replace(levels, pressure=p).take(np.flatnonzero(np.isfinite(p)))
    return kept, done


def _longest_fall(values: Array) -> list[int]:
    """Indices of a longest non-rising subsequence (patience sorting, O(n log n))."""
    tails: list[float] = []
    at: list[int] = []
    before: list[int] = []
    for i, value in enumerate((-values).tolist()):
        place = bisect_right(tails, value)  # a tie may follow a tie: duplicates are merged later
        before.append(at[place - 1] if place else -1)
        if place == len(tails):
            tails.append(value)
            at.append(i)
        else:
            tails[place], at[place] = value, i
    chain = []
    i = at[-1] if at else -1
    while i >= 0:
        chain.append(i)
        i = before[i]
    return chain[::-1]


def order_levels(levels: Levels) -> tuple[Levels, tuple[Repair, ...]]:
    """Turn a profile given from the top down; drop the fewest levels that leave pressure falling upward."""
    n = levels.pressure.size
    done: tuple[Repair, ...] = ()
    steps = np.diff(levels.pressure)
    if n >= 2 and (steps > 0.0).sum() > 0.8 * (steps != 0.0).sum():
        levels = levels.take(np.arange(n)[::-1])
        done += repair("reversed order", n, "levels came from the top down: turned round")
    kept = _longest_fall(levels.pressure)
    lost = n - len(kept)
    if 3 * lost > n:
        first = int(np.flatnonzero(np.diff(levels.pressure) > 0.0)[0]) + 1
        raise ProfileError(
            f"pressure {levels.pressure[first] / 100:g} hPa does not fall with height, as at {lost} of {n} levels",
            place=levels.where(first),
            remedy="sort the levels from the ground up and give one release per file",
        )
    done += repair("level out of order", lost, "dropped: pressure does not fall from the level below")
    return levels.take(kept), done


def merge_duplicates(levels: Levels) -> tuple[Levels, tuple[Repair, ...]]:
    """Make one level of neighbours with equal pressure: the first known value of every quantity stays."""
    same = np.flatnonzero(np.diff(levels.pressure) == 0.0) + 1
    if not same.size:
        return levels, ()
    columns = [c.copy() for c in (levels.height, levels.temperature, levels.dewpoint, levels.u, levels.v)]
    surface = levels.surface
    keep = np.ones(levels.pressure.size, dtype=bool)
    head = 0
    for i in range(1, levels.pressure.size):
        if levels.pressure[i] != levels.pressure[head]:
            head = i
            continue
        keep[i] = False
        surface = head if surface == i else surface
        for column in columns:
            if np.isnan(column[head]):
                column[head] = column[i]
    height, temperature, dewpoint, u, v = columns
    merged = replace(levels, height=height, temperature=temperature, dewpoint=dewpoint, u=u, v=v, surface=surface)
    detail = "merged with the level of equal pressure: the first known value of each quantity stays"
    return merged.take(np.flatnonzero(keep)), repair("duplicate level", int(same.size), detail)


def cap_dewpoint(levels: Levels) -> tuple[Levels, tuple[Repair, ...]]:
    """Set a dew point up to 0.5 K above temperature equal to it; treat a larger excess as missing."""
    with np.errstate(invalid="ignore"):
        excess = levels.dewpoint - levels.temperature
        slight = (excess > 0.0) & (excess <= DEWPOINT_EXCESS)
        wrong = excess > DEWPOINT_EXCESS
    dewpoint = np.where(slight, levels.temperature, levels.dewpoint)
    dewpoint = np.where(wrong, np.nan, dewpoint)
    done = repair("dew point above temperature", int(slight.sum()), "by at most 0.5 K: set to saturation")
    done += repair("dew point refused", int(wrong.sum()), "over 0.5 K above temperature: taken as missing")
    return replace(levels, dewpoint=dewpoint), done
