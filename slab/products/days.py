"""Days to run a comparison over: bundled invented typical days, or the morning releases of a folder or an archive."""

from __future__ import annotations

import csv
import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from pathlib import Path

import numpy as np

from forcing.air import each, relative_humidity
from forcing.bundled import folder
from forcing.errors import DaylayerError, ScenarioError
from forcing.profile import prepare
from forcing.readers import read_all
from forcing.scenario import build
from forcing.scenario_parts import Parts
from forcing.scenario_types import Scenario, Settings
from forcing.series import suggestion
from forcing.sounding import Profile, Sounding
from forcing.weather import Weather

ALL = "all"
EARLIEST = -2.0  # [h] solar time; a release from here to LATEST is before the day (22 h of the evening before)
LATEST = 10.0  # [h] solar time
BEST_HOUR = 5.0  # [h] solar time; of several releases before one day the nearest to it is used
CLEAR_BELOW = 0.85  # [1] relative humidity that no level of a clear morning reaches (our choice)
CLEAR_LAYER = (500.0, 8000.0)  # [m above ground] where it is looked at
DAYS_FILE, PROFILES_FILE = "typical_days.csv", "typical_profiles.csv"


@dataclass(frozen=True, slots=True)
class Day:
    """One day of a comparison: its base case, or why it cannot be used."""

    name: str
    scenario: Scenario | None
    problem: str = ""


def climates() -> tuple[str, ...]:
    """Climates that have bundled days."""
    return tuple(dict.fromkeys(row["climate"] for row in _rows(DAYS_FILE)))


def _rows(name: str) -> list[dict[str, str]]:
    with (folder() / name).open(newline="", encoding="utf-8") as lines:
        return list(csv.DictReader(lines))


def typical_days(climate: str, settings: Settings) -> list[Day]:
    """The bundled invented days of one climate, or all, over the ground of ``settings``.

    Site, profile and haze come from the bundle; ``surface``, ``run``, ``covers`` and ``change`` from the settings.
    """
    known = climates()
    if climate not in (ALL, *known):
        raise ScenarioError(
            f"no bundled days of '{climate}'", place="--days", remedy=suggestion(climate, (ALL, *known))
        )
    return [_typical(row, settings) for row in _rows(DAYS_FILE) if climate in (ALL, row["climate"])]


def _typical(row: Mapping[str, str], settings: Settings) -> Day:
    levels = [level for level in _rows(PROFILES_FILE) if level["day"] == row["day"]]

    def column(name: str, scale: float = 1.0, offset: float = 0.0) -> np.ndarray:
        return np.array([float(level[name]) * scale + offset for level in levels])

    latitude, longitude, elevation = (float(row[key]) for key in ("latitude", "longitude", "elevation_m"))
    sounding = Sounding(
        column("pressure_hPa", 100.0), column("height_m"), column("temperature_C", 1.0, 273.15),
        column("dewpoint_C", 1.0, 273.15), column("wind_speed_m_s"), column("wind_dir_deg"),
        tuple(range(2, len(levels) + 2)), valid=datetime.fromisoformat(row["valid"]), latitude=latitude,
        longitude=longitude, elevation=elevation, station=row["title"], file=row["day"], format="bundled",
    )  # fmt: skip
    site = {
        "name": row["title"], "latitude": latitude, "longitude": longitude, "elevation": elevation,
        "time_zone": row["time_zone"],
    }  # fmt: skip
    weather = {"aerosol_optical_depth": float(row["aerosol_optical_depth"]), "cloud_fraction": 0.0}
    return Day(row["day"], _built({**settings, "site": site, "weather": weather}, row["day"], sounding))


def _built(settings: Settings, name: str, sounding: Sounding) -> Scenario:
    """A scenario over a profile that was read already."""
    site = settings["site"]
    assert isinstance(site, Mapping)
    original = prepare(
        sounding,
        latitude=sounding.latitude if sounding.latitude is not None else site.get("latitude"),
        longitude=sounding.longitude if sounding.longitude is not None else site.get("longitude"),
        elevation=site.get("elevation") if sounding.elevation is None else None,
    )
    full = {**settings, "title": f"{settings.get('title', 'comparison')}, {name}", "profile": {"file": sounding.file}}
    parts = Parts(full, original, None, None, Weather())
    return build(full, folder=Path(), source=name, parts=parts)


def profile_days(place: Path, settings: Settings, *, months: Sequence[int] = (), clear_only: bool = False) -> list[Day]:
    """One day for every release of the night or morning in a folder of profiles, or of one file with many.

    Parameters
    ----------
    settings : mapping
        Site, surface, weather and run for all days; the position of a release is taken from its file where it has one.
    months : sequence of int
        1 to 12; empty means all.
    clear_only : bool
        Use only mornings on which no level from 500 to 8000 m above ground has a relative humidity of 85 % or more.

    Returns
    -------
    list of Day
        In order of time; what was left out is there with its reason.

    Raises
    ------
    ScenarioError
        No such place, no profile in it, or a weather file, which is of one day only.
    """
    weather = settings.get("weather")
    if isinstance(weather, Mapping) and "file" in weather:
        raise ScenarioError(
            "a weather file holds one day only",
            place="--profiles",
            remedy="give constants in [weather], or drop the file",
        )
    files = (
        [place]
        if place.is_file()
        else sorted(p for p in place.glob("*") if p.is_file() and p.suffix.lower() != ".toml")
    )
    if not files:
        raise ScenarioError(
            "no profiles there", place=f"--profiles {place}", remedy="name a folder of profiles, or a file with many"
        )
    days: list[tuple[str, Day]] = []
    morning: dict[tuple[str, str], tuple[float, Sounding]] = {}
    for file in files:
        try:
            releases = read_all(file)
        except DaylayerError as problem:
            days.append((file.name, Day(file.name, None, str(problem))))
            continue
        for release in releases:
            _sort_in(release, file, settings, months, days, morning)
    for (date, name), (_, release) in morning.items():
        days.append((date + name, _day(f"{date} {name}", release, settings, clear_only)))
    return [day for _, day in sorted(days, key=lambda item: item[0])]


def _sort_in(release: Sounding, file: Path, settings: Settings, months: Sequence[int], days: list[tuple[str, Day]],
             morning: dict[tuple[str, str], tuple[float, Sounding]]) -> None:  # fmt: skip
    """Keep a release as the one of its morning, or note why not."""
    site = settings.get("site")
    own = site.get("longitude") if isinstance(site, Mapping) else None
    longitude = release.longitude if release.longitude is not None else own
    when = release.valid
    if when is None or longitude is None:
        lack = "time" if when is None else "longitude"
        days.append((file.name, Day(file.name, None, f"the file does not say its {lack}")))
        return
    solar = when + timedelta(hours=float(longitude) / 15.0)
    if months and solar.month not in months:
        days.append((f"{solar:%Y-%m-%d}", Day(f"{when:%Y-%m-%dT%H:%MZ}", None, "month not asked for")))
        return
    hour = (solar.hour + solar.minute / 60.0 - EARLIEST) % 24.0 + EARLIEST
    solar = solar - timedelta(hours=EARLIEST)  # its date is that of the day to come
    if hour > LATEST:
        days.append(
            (
                f"{solar:%Y-%m-%d}",
                Day(f"{when:%Y-%m-%dT%H:%MZ}", None, f"not of the night or morning ({hour:.0f} h solar)"),
            )
        )
        return
    key, gap = (f"{solar:%Y-%m-%d}", release.station or file.name), abs(hour - BEST_HOUR)
    if key not in morning or gap < morning[key][0]:
        morning[key] = (gap, release)


def _day(name: str, release: Sounding, settings: Settings, clear_only: bool) -> Day:
    try:
        scenario = _built(settings, name, release)
    except DaylayerError as problem:
        return Day(name, None, str(problem))
    dampest = moistest(scenario.profile)
    if clear_only and dampest >= CLEAR_BELOW:
        return Day(name, None, f"not clear: {dampest:.0%} humid between 500 and 8000 m")
    return Day(name, scenario)


def moistest(profile: Profile) -> float:
    """Highest relative humidity over water [1] between 500 and 8000 m above ground; NaN where no level lies there."""
    inside = (profile.height >= CLEAR_LAYER[0]) & (profile.height <= CLEAR_LAYER[1])
    if not inside.any():
        return math.nan
    columns = (profile.temperature[inside], profile.humidity[inside], profile.pressure[inside])
    return float(np.max(each(relative_humidity, *columns)))


def left_out(days: Sequence[Day]) -> Iterator[tuple[str, int, str]]:
    """Reasons why days were left out, how many each, and the first such day."""
    found: dict[str, list[str]] = {}
    for day in days:
        if day.scenario is None:
            reason = day.problem.split(" (")[0] if day.problem.startswith(("not ", "month")) else day.problem
            found.setdefault(reason.split(":")[0] if reason.startswith("not clear") else reason, []).append(day.name)
    for reason, names in found.items():
        yield reason, len(names), names[0]
