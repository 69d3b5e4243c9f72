"""The mesonet night of 22-23 March 2019: ``python tests/bench/mesonet_night.py [--measured-sun]``.

Every station starts at 20 UTC from a neutral layer at its own temperature and humidity, 1500 m deep, under 5 K/km; its measured
10 m wind is the weather; long-wave is of a clear sky. Only stations whose afternoon was unstable and dry are used. It is one
night: the stations are not independent of each other. Cloud was not measured, so that the baseline that asks for little of it
takes the sky as clear.
"""

from __future__ import annotations

import argparse
import math
import sys
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, date, datetime
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE), str(HERE.parents[1])]

import numpy as np
from night_scores import (
    Array,
    instant,
    mean_of_others,
    median_of_others,
    number,
    observed_folder,
    rank_correlation,
    rows,
    score_line,
)
from numpy.typing import NDArray

from forcing.air import EPSILON, GRAVITY, KAPPA, P_REFERENCE, R_DRY, saturation_vapour_pressure
from forcing.profile import Profile
from forcing.scenario import build
from forcing.scenario_parts import Parts
from forcing.scenario_types import Scenario
from forcing.series import Series
from forcing.sun import sunrise_sunset
from forcing.weather import Weather
from slab.cycle import run

Flags = NDArray[np.bool_]

SET = "mesonet_2019"
START = datetime(2019, 3, 22, 20, tzinfo=UTC)
HOURS = 22.0
GRID = 300.0  # [s] step of the measurements
PERSISTS = 1800.0  # [s]
SLOT = 1800.0  # [s]
SURFACE = {"cover": "short grass", "soil_moisture": 0.5}  # fixed beforehand, as for the plains nights
DEPTH, LAPSE = 1500.0, 0.005  # [m], [K m-1]
SMOOTHED = 6  # readings in the running mean of the wind, half an hour
DRY_AFTERNOON = 60.0  # [%] mean relative humidity in the first hour above which a station is left out; nor may it rain
HEIGHTS = (1.5, 2.0, 9.0, 10.0)
THRESHOLDS = (0.0, 1.0)  # [K] of T(9 m) - T(1.5 m)


@dataclass(frozen=True, slots=True)
class Station:
    """Readings of one station on the common grid of times, from the start on; SI, NaN missing."""

    name: str
    latitude: float
    longitude: float
    elevation: float
    time: Array
    low: Array
    high: Array
    dew_point: Array
    humidity: Array
    wind: Array
    wind_east: Array
    wind_north: Array
    pressure: Array
    sun: Array
    rain: float
    sunset: float
    sunrise: float

    @property
    def contrast(self) -> Array:
        """T(9 m) - T(1.5 m) [K]."""
        return self.high - self.low


def stations(folder: Path) -> list[Station]:
    """All stations."""
    places = {row["station"]: row for row in rows(folder / "stations.csv")}
    readings: dict[str, list[dict[str, str]]] = {}
    for row in rows(folder / "five_minute.csv"):
        readings.setdefault(row["station"], []).append(row)
    grid = START.timestamp() + np.arange(0.0, HOURS * 3600.0 + 1.0, GRID)
    return [_station(places[name], found, grid) for name, found in readings.items()]


def _station(place: dict[str, str], found: list[dict[str, str]], grid: Array) -> Station:
    time = np.array([instant(row["utc_time"]).timestamp() for row in found])

    def on_grid(name: str, offset: float = 0.0) -> Array:
        values = np.array([number(row[name]) for row in found]) + offset
        known = np.isfinite(values)
        return np.interp(grid, time[known], values[known])

    angle = np.radians([number(row["wind_dir_10m_deg"]) for row in found])
    speed = np.array([number(row["wind_speed_10m_ms"]) for row in found])
    known = np.isfinite(angle) & np.isfinite(speed)
    east, north = (np.interp(grid, time[known], -speed[known] * f(angle[known])) for f in (np.sin, np.cos))
    smooth = np.convolve(
        np.pad(on_grid("wind_speed_10m_ms"), SMOOTHED, mode="edge"), np.full(SMOOTHED, 1.0 / SMOOTHED), "same"
    )
    latitude, longitude = float(place["lat"]), float(place["lon"])
    dusk = sunrise_sunset(date(2019, 3, 22), latitude, longitude).sunset
    dawn = sunrise_sunset(date(2019, 3, 23), latitude, longitude).sunrise
    assert dusk is not None
    assert dawn is not None
    fallen = [number(row["rain"]) for row, t in zip(found, time, strict=True) if grid[0] - 7200.0 <= t <= grid[-1]]
    return Station(
        place["station"], latitude, longitude, float(place["elev_m"]), grid,
        on_grid("temperature_1p5m_C", 273.15), on_grid("temperature_9m_C", 273.15), on_grid("dewpoint_C", 273.15),
        on_grid("relative_humidity_1p5m_pct"), smooth[SMOOTHED:-SMOOTHED], east, north, 100.0 * on_grid("pressure_hPa"),
        on_grid("solar_radiation_Wm2"), float(np.nansum(fallen)), dusk.timestamp(), dawn.timestamp(),
    )  # fmt: skip


def usable(station: Station) -> bool:
    """Whether the first hour was unstable and dry, and no rain fell."""
    first = slice(0, round(3600.0 / GRID))
    return bool(
        np.mean(station.contrast[first]) < 0.0
        and np.mean(station.humidity[first]) < DRY_AFTERNOON
        and station.rain == 0.0
    )


def first_profile(station: Station) -> Profile:
    """The neutral layer under 5 K/km, with the wind of the first half hour at all heights; humidity thins above it."""
    first = slice(0, SMOOTHED)
    height = np.concatenate((np.arange(0.0, DEPTH, 100.0), np.arange(DEPTH, 12001.0, 250.0)))
    pressure_low = float(np.mean(station.pressure[first]))
    warm = float(np.mean(station.low[first])) + GRAVITY / 1005.0 * 1.5
    theta = warm * (P_REFERENCE / pressure_low) ** KAPPA + LAPSE * np.maximum(height - DEPTH, 0.0)
    steps = KAPPA * GRAVITY / R_DRY * np.diff(height) / (0.5 * (theta[1:] + theta[:-1]))
    exner = (pressure_low / P_REFERENCE) ** KAPPA - np.concatenate(([0.0], np.cumsum(steps)))
    pressure = P_REFERENCE * exner ** (1.0 / KAPPA)
    vapour = saturation_vapour_pressure(float(np.mean(station.dew_point[first])))
    humidity = EPSILON * vapour / (pressure_low - (1.0 - EPSILON) * vapour)
    at_top = float(np.interp(DEPTH, height, pressure))
    wet = np.where(height <= DEPTH, humidity, humidity * (pressure / at_top) ** 3)
    east, north = (float(np.mean(x[first])) for x in (station.wind_east, station.wind_north))
    flow = np.ones(height.size)
    return Profile(
        height=height, pressure=pressure, theta=theta, humidity=wet, u=east * flow, v=north * flow, wind_known=True,
        humidity_known=True, valid=START, latitude=station.latitude, longitude=station.longitude,
        elevation=station.elevation, station=station.name, file="neutral layer",
    )  # fmt: skip


def scenario_of(station: Station, *, measured_sun: bool) -> Scenario:
    """The scenario of one station."""
    settings: dict[str, object] = {
        "title": station.name,
        "site": {
            "name": station.name, "latitude": station.latitude, "longitude": station.longitude,
            "elevation": station.elevation, "time_zone": "Etc/GMT+6",
        },
        "surface": SURFACE,
        "run": {"hours": HOURS},
    }  # fmt: skip
    series = {"wind_10m_m_s": Series(station.time, station.wind)}
    if measured_sun:
        series["shortwave_down_W_m2"] = Series(station.time, np.maximum(station.sun, 0.0))
    parts = Parts(settings, first_profile(station), None, None, Weather(series=series))
    return build(settings, folder=HERE, source="mesonet_night", parts=parts)


def onset(time: Array, contrast: Array) -> float:
    """First time from which the contrast stays above zero for half an hour; NaN if never."""
    return _holds(time, contrast > 0.0)


def end(time: Array, contrast: Array, sunrise: float) -> float:
    """First time, from an hour before sunrise on, from which it stays at or below zero for half an hour; NaN if never."""
    return _holds(time, (contrast <= 0.0) & (time >= sunrise - 3600.0))


def _holds(time: Array, state: Flags) -> float:
    needed = round(PERSISTS / GRID)
    for i in range(time.size - needed):
        if state[i : i + needed + 1].all():
            return float(time[i])
    return math.nan


def slots(time: Array, values: Array) -> Array:
    """Means over half-hour slots."""
    n = round(SLOT / GRID)
    return np.asarray(values[: values.size // n * n].reshape(-1, n).mean(axis=1))


def contingency(said: Flags, seen: Flags) -> str:
    """Counts and rates of one yes-or-no statement."""
    hits, misses = int(np.sum(said & seen)), int(np.sum(~said & seen))
    false, quiet = int(np.sum(said & ~seen)), int(np.sum(~said & ~seen))
    found = hits / (hits + misses) if hits + misses else math.nan
    alarm = false / (hits + false) if hits + false else math.nan
    return f"{hits:>6}{misses:>8}{false:>8}{quiet:>8}   hit rate {found:.2f}   false alarm ratio {alarm:.2f}"


def timing_lines(used: list[Station], computed: list[Array]) -> list[str]:
    """Onset, end and strength, station by station and in sum."""
    seen, said = [], []
    lines = [f"{'station':<9}{'wind':>5} | onset from sunset (min) | end from sunrise (min) | mean by night (K) | most (K)",
             f"{'':<9}{'':>5} | {'measured':>10}{'computed':>10}   | {'measured':>10}{'computed':>10}  | measured computed | both"]  # fmt: skip
    for one, contrast in zip(used, computed, strict=True):
        dark = (one.time > one.sunset) & (one.time < one.sunrise)
        row: list[tuple[float, float, float, float]] = []
        for values in (one.contrast, contrast):
            row.append(
                (
                    (onset(one.time, values) - one.sunset) / 60.0,
                    (end(one.time, values, one.sunrise) - one.sunrise) / 60.0,
                    float(np.mean(values[dark])),
                    float(np.max(slots(one.time, values))),
                )
            )
        seen.append(row[0])
        said.append(row[1])
        first, second = row
        lines.append(
            f"{one.name:<9}{np.mean(one.wind[dark]):>5.1f} | {first[0]:>10.0f}{second[0]:>10.0f}   | {first[1]:>10.0f}{second[1]:>10.0f}  "
            f"| {first[2]:>8.2f}{second[2]:>9.2f} | {first[3]:.1f} {second[3]:.1f}"
        )
    a_all, b_all = np.array(seen), np.array(said)
    for j, (name, baseline) in enumerate(
        (("onset (min)", median_of_others), ("end (min)", median_of_others), ("mean T(9 m) - T(1.5 m) by night (K)", mean_of_others),
         ("largest half hour of it (K)", mean_of_others))
    ):  # fmt: skip
        a, b = a_all[:, j], b_all[:, j]
        both = np.isfinite(a) & np.isfinite(b)
        extra = [("rank corr.", rank_correlation(a[both], b[both])), ("stations", float(both.sum()))]
        lines.append(score_line(name, b[both] - a[both], extra))
        lines.append(score_line("   the other stations", baseline(a[both]) - a[both], []))
    return lines


def contingency_lines(used: list[Station], computed: list[Array]) -> list[str]:
    """Yes or no by half hours over all stations, beside the two baselines."""
    time = slots(used[0].time, used[0].time)
    rules: list[tuple[str, Callable[[int, float], Flags]]] = [
        ("computed", lambda i, k: slots(time, computed[i]) > k),
        ("sunset to sunrise", lambda i, _: (time > used[i].sunset) & (time < used[i].sunrise)),
        ("wind below 2 m/s (clear sky)", lambda i, _: slots(time, used[i].wind) < 2.0),
    ]
    lines = ["", f"half hours with an inversion over {len(used)} stations, 20 to 18 UTC (one night: not independent)"]
    for k in THRESHOLDS:
        seen = np.concatenate([slots(time, one.contrast) > k for one in used])
        lines.append(f"T(9 m) - T(1.5 m) above {k:g} K: {'hits':>12}{'misses':>8}{'false':>8}{'quiet':>8}")
        for name, rule in rules:
            said = np.concatenate([rule(i, k) for i in range(len(used))])
            lines.append(f"   {name:<32}{contingency(said, seen)}")
    return lines


def compute(station: Station, *, measured_sun: bool) -> Array:
    """T(9 m) - T(1.5 m) [K] of one station's run on the grid of the readings."""
    done = run(scenario_of(station, measured_sun=measured_sun), heights=HEIGHTS)
    contrast = done.temperatures[:, HEIGHTS.index(9.0)] - done.temperatures[:, HEIGHTS.index(1.5)]
    return np.interp(station.time, done.time, contrast)


def main() -> int:
    """Print the tables."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--measured-sun", action="store_true", help="give the measured short-wave too")
    told = parser.parse_args()
    folder = observed_folder() / SET
    if not folder.is_dir():
        print(f"the mesonet night is not at {folder}; set DAYLAYER_OBSERVED", file=sys.stderr)
        return 1
    everywhere = stations(folder)
    used = [one for one in everywhere if usable(one)]
    computed = [compute(one, measured_sun=told.measured_sun) for one in used]
    print(
        f"one night, {len(used)} of {len(everywhere)} stations (first hour unstable, below {DRY_AFTERNOON:.0f} %, no rain)"
    )
    print(
        f"given: {SURFACE}, measured 10 m wind{', measured short-wave' if told.measured_sun else ''}, clear-sky long-wave"
    )
    print("\n".join(timing_lines(used, computed) + contingency_lines(used, computed)))
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
