"""Onset and end of the surface inversion by season, latitude, wind and cloud: ``python tests/bench/spray_ranges.py [--short]``.

Invented places under an invented afternoon-to-morning profile; median of the nine members against published ranges:

- from 1-2 h before sundown until about 1 h after sunrise (GRDC spray application manual 10.8)
- forms 2-3 h before sunset, ends 1-2 h after sunrise; extremes 3-5 h and 2-3 h (North Dakota State University, 6 June 2019)
- expected 3-4 h before sunset (Ontario ministry newsletter); until two hours after sunrise (DPIRD, July 2023)
- the rapid evening cooling lasts 60-90 min, mostly before sunset (Mahrt 2017)

What is held: clear and wind near the ground under 3 m/s, the median onset 0 to 5 h before sunset and the end 0 to 3 h after
sunrise; more wind or more cloud never makes it stronger, nor a difference over 1 K earlier or longer. For a difference just over
zero that is not so on moist ground: wind raises the evaporation of air that is dry, so that the heat flux turns down to half an
hour earlier (and a crop under cloud likewise), as the Penman-Monteith equation has it; on dry ground it moves by minutes.
"""

from __future__ import annotations

import argparse
import math
import sys
import tempfile
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

sys.path[:0] = [str(Path(__file__).resolve().parents[2])]

import numpy as np

from forcing.scenario import build
from forcing.scenario_types import Scenario
from slab.cycle import Run, run
from slab.products.spray_air import rows_of
from slab.products.spray_members import at_rows, member_of, members
from slab.products.spray_window import Night, nights, spells

BETWEEN = (1.5, 9.0)
HEIGHTS = (1.5, 2.0, 9.0, 10.0)
HOUR = 3600.0
STRONG = 1.0  # [K]


@dataclass(frozen=True, slots=True)
class Place:
    """An invented place and date: surface temperature [C] and dew point [C] at the start, degrees north."""

    name: str
    latitude: float
    day: str
    warm: float
    dew: float
    cover: str
    moisture: float


PLACES = (
    Place("spring 40 N", 40.0, "2026-04-15", 15.0, 5.0, "short grass", 0.5),
    Place("summer 40 N", 40.0, "2026-07-01", 29.0, 15.0, "green crop", 0.6),
    Place("autumn 40 N", 40.0, "2026-10-05", 18.0, 7.0, "stubble", 0.4),
    Place("winter 40 N", 40.0, "2026-01-20", 6.0, -3.0, "stubble", 0.6),
    Place("summer 52 N", 52.0, "2026-06-15", 21.0, 11.0, "short grass", 0.6),
    Place("dry summer 34 S", -34.0, "2026-01-10", 32.0, 8.0, "stubble", 0.1),
    Place("winter 32 S", -32.0, "2026-07-10", 16.0, 5.0, "green crop", 0.6),
)
WINDS = (2.0, 4.0, 7.0, 11.0)  # [m/s] that the pressure gradient keeps up
CLOUDS = (0.0, 0.4, 0.8)


def scenario_of(place: Place, wind: float, cloud: float, folder: Path, *, hours: float = 24.0) -> Scenario:
    """One case from noon by the sun (longitude 0) to the next: a mixed layer 1200 m deep under 5 K/km, dry above it."""
    lines = ["pressure_hPa,height_m,temperature_C,dewpoint_C,wind_dir_deg,wind_speed_m_s"]
    pressure, last = 1000.0, 0.0
    for height in (0.0, 10.0, 200.0, 600.0, 1200.0, 1300.0, 2000.0, 3000.0, 5000.0, 8000.0, 12000.0):
        warm = place.warm - 0.0098 * min(height, 1200.0) + (2.0 if height >= 1300.0 else 0.0)
        warm -= 0.0055 * max(0.0, height - 1300.0)
        pressure *= math.exp(-9.80665 * (height - last) / (287.05 * (warm + 273.15)))
        last = height
        dew = min(place.dew - 0.0018 * height - (8.0 if height >= 1300.0 else 0.0), warm - 1.0)
        speed = wind * (0.7 if height < 100.0 else 1.0)
        lines.append(f"{pressure:.2f},{height:.0f},{warm:.2f},{max(dew, -80.0):.2f},250,{speed:.1f}")
    path = folder / f"{place.name.replace(' ', '_')}_{wind:g}.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return build(
        {
            "title": place.name,
            "site": {"name": place.name, "latitude": place.latitude, "longitude": 0.0, "elevation": 100.0, "time_zone": "UTC"},
            "profile": {"file": str(path), "valid": f"{place.day}T12:00Z"},
            "surface": {"cover": place.cover, "soil_moisture": place.moisture},
            "weather": {"cloud_fraction": cloud, "pressure_gradient_wind_m_s": wind, "pressure_gradient_wind_from_deg": 250.0},
            "run": {"hours": hours},
        },
        folder=folder, source=place.name,
    )  # fmt: skip


@dataclass(frozen=True, slots=True)
class Result:
    """A case's night: wind at 10 m from onset to end [m/s], onset before sunset and end after sunrise [h], with early and late
    ends of their windows; strongest difference and length [h]; NaN where there is no inversion."""

    wind: float
    onset: float
    onset_range: tuple[float, float]
    end: float
    end_range: tuple[float, float]
    strongest: float
    length: float
    strong_onset: float
    strong_length: float


def strong(rows: np.ndarray, difference: np.ndarray, sunset: float) -> tuple[float, float]:
    """Onset [h before sunset, NaN without] and length [h] of a difference over 1 K."""
    found = [one for one in spells(rows, difference - STRONG) if math.isfinite(one.onset)]
    last = float(rows[-1])
    length = sum((one.end if math.isfinite(one.end) else last) - one.onset for one in found) / HOUR
    return ((sunset - found[0].onset) / HOUR if found else math.nan), length


def result_of(done: Run, *, spread: bool) -> Result:
    """Read a run's first evening and the morning after it."""
    site = done.scenario.site
    rows = rows_of(float(done.time[0]), float(done.time[-1]), site.time_zone)
    found = members(done, rows, BETWEEN) if spread else (member_of(done, rows, BETWEEN),)
    night: Night = max(nights(site, rows, found), key=lambda one: min(one.stop, rows[-1]) - max(one.start, rows[0]))
    onset, end = night.onset, night.end
    before = (night.sunset - onset.middle) / HOUR if onset else math.nan
    after = (end.middle - night.sunrise) / HOUR if end else math.nan
    difference, wind = found[0].difference, at_rows(done, done.fields["wind_10m"], rows)
    inside = difference > 0.0
    return Result(
        float(np.mean(wind[inside])) if inside.any() else math.nan, before,
        ((night.sunset - onset.late) / HOUR, (night.sunset - onset.early) / HOUR) if onset else (math.nan, math.nan), after,
        ((end.early - night.sunrise) / HOUR, (end.late - night.sunrise) / HOUR) if end else (math.nan, math.nan),
        float(np.nanmax(difference)), (end.middle - onset.middle) / HOUR if onset and end else math.nan,
        *strong(rows, difference, night.sunset),
    )  # fmt: skip


def cases(*, short: bool) -> Iterator[tuple[Place, float, float]]:
    """Place, wind, cloud: all winds under a clear sky, all clouds in light wind."""
    for place in PLACES[:3] if short else PLACES:
        for wind in WINDS:
            yield place, wind, 0.0
        for cloud in CLOUDS[1:]:
            yield place, WINDS[1], cloud


def line(place: Place, wind: float, cloud: float, one: Result) -> str:
    """One line of the table."""
    calm = cloud == 0.0 and one.wind < 3.0
    held = 0.0 <= one.onset <= 5.0 and 0.0 <= one.end <= 3.0
    return (
        f"{place.name:<16} {wind:5.0f} {cloud:6.1f} {one.wind:7.1f} {one.onset:8.1f} ({one.onset_range[0]:4.1f} to "
        f"{one.onset_range[1]:4.1f}) {one.end:8.1f} ({one.end_range[0]:4.1f} to {one.end_range[1]:4.1f}) {one.strongest:7.1f} "
        f"{one.length:7.1f}  {'' if not calm else 'in range' if held else 'OUT OF RANGE'}"
    )


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--short", action="store_true", help="three places, and no spread")
    short = parser.parse_args().short
    print("published: onset typically 1 to 4 h before sunset, up to 5; end 1 to 2 h after sunrise, up to 3")
    print(
        "place             wind  cloud  10 m     onset, h before sunset     end, h after sunrise     K 1.5-9 m  hours"
    )
    kept: dict[str, list[tuple[float, float, Result]]] = {}
    with tempfile.TemporaryDirectory() as folder:
        for place, wind, cloud in cases(short=short):
            done = run(scenario_of(place, wind, cloud, Path(folder)), heights=HEIGHTS)
            one = result_of(done, spread=not short)
            kept.setdefault(place.name, []).append((wind, cloud, one))
            print(line(place, wind, cloud, one), flush=True)
    print()
    for name, found in kept.items():
        for word, series in (
            ("wind", [one for _, cloud, one in found if cloud == 0.0]),
            ("cloud", [one for wind, _, one in found if wind == WINDS[1]]),
        ):
            wrong = [
                what
                for what, values in (
                    ("earlier", [one.onset for one in series]), ("longer", [one.length for one in series]),
                    ("stronger", [one.strongest for one in series]),
                    ("over 1 K earlier", [one.strong_onset for one in series]),
                    ("over 1 K longer", [one.strong_length for one in series]),
                )
                if any(b > a + 0.02 for a, b in pairwise(values))
            ]  # fmt: skip
            print(f"{name:<16} more {word:<5}: {'in order' if not wrong else 'not in order: ' + ', '.join(wrong)}")


if __name__ == "__main__":
    main()
