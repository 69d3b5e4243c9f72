"""The plains nights of 21-22 May 2023, afternoon sounding in, next dawn out: ``python tests/bench/observed_nights.py``.

Nothing but the afternoon sounding and ``observed_nights.toml`` beside this file is given. The computed column is read at the
release hour on the release's levels by the same two rules as the measured one. It is one date: ten stations under one weather.
``--set vienna_2015`` takes the other set through the same constants, midday to midnight over five months, without the table.
"""

from __future__ import annotations

import argparse
import math
import sys
import tomllib
from dataclasses import dataclass
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE), str(HERE.parents[1])]

import numpy as np
from night_scores import (
    Array,
    instant,
    mae,
    mean_of_others,
    median_of_others,
    observed_folder,
    rank_correlation,
    rows,
    score_line,
)

from forcing.air import each, relative_humidity
from forcing.profile import Profile, prepare
from forcing.readers import read_sounding
from forcing.scenario import build
from forcing.scenario_types import Scenario
from slab.cycle import Run, run
from slab.inversions import Inversion, rising_inversion, tables_inversion
from slab.rendered import profile_at
from slab.tops import tables_depth

SET = "plains_2023"
LAST_GRID_METRE = 10.0
BROAD = 0.9  # the top is broad: from where temperature first has this share of the strength to where it last has


@dataclass(frozen=True, slots=True)
class Night:
    """One afternoon release and the dawn release after it."""

    name: str
    afternoon: Profile
    dawn: Profile
    path: Path
    surface_before: float  # [K]
    surface: float  # [K]
    told_top: float  # [m] of the tables
    told_strength: float  # [K]


@dataclass(frozen=True, slots=True)
class Reading:
    """What is read off one dawn column, measured or computed: K and m."""

    surface: float
    rising: Inversion
    tables: Inversion
    contrast: float
    low_edge: float
    high_edge: float


def constants() -> dict[str, dict[str, object]]:
    """The one set of constants."""
    return tomllib.loads((HERE / "observed_nights.toml").read_text(encoding="utf-8"))


def _profile(folder: Path, about: dict[str, str]) -> Profile:
    sounding = read_sounding(folder / about["file"], valid=instant(about["utc_time"]))
    return prepare(
        sounding, latitude=float(about["lat"]), longitude=float(about["lon"]), elevation=float(about["elev_m"])
    )


def nights(folder: Path) -> list[Night]:
    """All nights of the set."""
    index = {row["file"]: row for row in rows(folder / "index.csv")}
    return [
        Night(
            row["night_id"], _profile(folder, index[row["first_file"]]), _profile(folder, index[row["second_file"]]),
            folder / row["first_file"], float(row["surface_temperature_first_C"]) + 273.15,
            float(row["surface_temperature_second_C"]) + 273.15, float(row["inversion_top_agl_m"]),
            float(row["inversion_strength_K"]),
        )
        for row in rows(folder / "night_pairs.csv")
    ]  # fmt: skip


def guessed_cloud(
    profile: Profile, *, critical_humidity: float, deep_m: float, highest_m: float
) -> tuple[float, float]:
    """Cloud fraction and base [m] guessed from an afternoon's humidity; the rule stands in the file of constants."""
    humidity = each(relative_humidity, profile.temperature, profile.humidity, profile.pressure)
    z = np.arange(0.0, highest_m + 1.0, LAST_GRID_METRE)
    values = np.interp(z, profile.height, humidity)
    running = np.concatenate(([0.0], np.cumsum(0.5 * (values[1:] + values[:-1]))))
    n = round(deep_m / LAST_GRID_METRE)
    means = (running[n:] - running[:-n]) / n
    foot = z[: means.size]
    means = means[foot >= tables_depth(profile).height]
    foot = foot[-means.size :]
    most = int(np.argmax(means))
    excess = (1.0 - min(float(means[most]), 1.0)) / (1.0 - critical_humidity)
    return max(0.0, 1.0 - math.sqrt(excess)), float(foot[most])


def scenario_of(night: Night, given: dict[str, dict[str, object]]) -> Scenario:
    """The scenario of one night."""
    start = night.afternoon
    fraction, base = guessed_cloud(start, **given["cloud"])  # type: ignore[arg-type]
    hours = (night.dawn.valid - start.valid).total_seconds() / 3600.0
    settings = {
        "title": night.name,
        "site": {
            "name": night.name, "latitude": start.latitude, "longitude": start.longitude, "elevation": start.elevation,
            "time_zone": "UTC",
        },
        "profile": {"file": str(night.path), "valid": start.valid.isoformat()},
        "surface": given["surface"],
        "weather": {"cloud_fraction": fraction, "cloud_base_m": base} | given.get("weather", {}),
        "run": {"hours": hours},
    }  # fmt: skip
    return build(settings, folder=night.path.parent, source="observed_nights")


def read(height: Array, temperature: Array, surface: float) -> Reading:
    """Read one column [m above ground, K]."""
    rising, tables = rising_inversion(height, temperature), tables_inversion(height, temperature)
    low = high = math.nan
    if rising.present:
        z = np.arange(0.0, 2.0 * rising.top + LAST_GRID_METRE, LAST_GRID_METRE)
        warm = np.interp(z, height, temperature) >= temperature[0] + BROAD * rising.strength
        first = int(np.argmax(warm))
        low, high = float(z[first]), float(z[first + int(np.argmin(np.append(warm[first:], False))) - 1])
    contrast = float(np.interp(100.0, height, temperature) - np.interp(2.0, height, temperature))
    return Reading(surface, rising, tables, contrast, low, high)


def read_run(done: Run, night: Night) -> Reading:
    """The computed dawn on the levels of the measured one."""
    column = profile_at(done, len(done.time) - 1)
    levels = night.dawn.height
    levels = levels[levels <= column.height[-1]]
    temperature = np.interp(levels, column.height, column.temperature)
    return read(levels, temperature, float(done.fields["temperature_2m"][-1]))


def table(all_nights: list[Night], measured: list[Reading], computed: list[Reading], clouds: list[float]) -> list[str]:
    """The nights one by one; measured first."""
    lines = [
        f"measured / computed; tops by the rule `rising` (tables' rule); range: where it has {BROAD:.0%} of the strength",
        (
            f"{'night':<14}{'cloud':>6} | {'dawn T (C)':>14} | {'strength (K)':>13} | {'T100-T2 (K)':>13} | {'top (m)':>11}"
            f" {'(tables)':>12} | {'range computed':>14}"
        ),
    ]
    for night, a, b, cloud in zip(all_nights, measured, computed, clouds, strict=True):
        lines.append(
            f"{night.name:<14}{cloud:>6.2f} | {a.surface - 273.15:>6.1f} {b.surface - 273.15:>6.1f} "
            f"| {a.rising.strength:>6.1f} {b.rising.strength:>6.1f} | {a.contrast:>6.1f} {b.contrast:>6.1f} "
            f"| {a.rising.top:>5.0f} {b.rising.top:>5.0f} ({a.tables.top:>4.0f} {b.tables.top:>4.0f}) "
            f"| {b.low_edge:>5.0f}-{b.high_edge:.0f}"
        )
    return lines


def scores(all_nights: list[Night], measured: list[Reading], computed: list[Reading]) -> list[str]:
    """Errors beside the baselines made of the other nights."""
    before = np.array([night.surface_before for night in all_nights])
    dawn = np.array([night.surface for night in all_nights])
    cold = np.array([one.surface for one in computed])
    drop = dawn - before
    climate = before + mean_of_others(drop) - dawn
    lines = [score_line("dawn temperature (K)", cold - dawn, [("rank corr. of the drop", rank_correlation(cold - before, drop))]),
             score_line("   climatological drop of the other nights", climate, []),
             f"   model's error against climatology's: {mae(cold - dawn) / mae(climate) - 1.0:+.0%}"]  # fmt: skip
    for rule in ("rising", "tables"):
        for what, unit, baseline in (("strength", "K", mean_of_others), ("top", "m", median_of_others)):
            a = np.array([getattr(getattr(one, rule), what) for one in measured])
            b = np.array([getattr(getattr(one, rule), what) for one in computed])
            other = "mean" if what == "strength" else "median"
            lines.append(score_line(f"{what} by `{rule}` ({unit})", b - a, [("rank corr.", rank_correlation(a, b))]))
            lines.append(score_line(f"   {other} of the other nights", baseline(a) - a, []))
    a, b = (np.array([one.contrast for one in side]) for side in (measured, computed))
    lines.append(score_line("T(100 m) - T(2 m) (K)", b - a, [("rank corr.", rank_correlation(a, b))]))
    lines.append(score_line("   mean of the other nights", mean_of_others(a) - a, []))
    told = np.array([one.rising.top for one in measured])
    inside = [c.low_edge - 5.0 <= top <= c.high_edge + 5.0 for c, top in zip(computed, told, strict=True)]
    lines.append(f"measured top inside the computed range: {sum(inside)} of {len(inside)}")
    return lines


def main() -> int:
    """Print the tables."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--set", default=SET, choices=(SET, "vienna_2015"), help="folder of observed nights")
    parser.add_argument("--cover", help="land cover in place of the fixed one, to see what it decides")
    told = parser.parse_args()
    name = told.set
    folder = observed_folder() / name
    if not folder.is_dir():
        print(f"observed nights are not at {folder}; set DAYLAYER_OBSERVED", file=sys.stderr)
        return 1
    given, all_nights = constants(), nights(folder)
    if told.cover:
        given["surface"]["cover"] = told.cover
    cases = [scenario_of(night, given) for night in all_nights]
    computed = [read_run(run(case), night) for case, night in zip(cases, all_nights, strict=True)]
    measured = [read(night.dawn.height, night.dawn.temperature, night.surface) for night in all_nights]
    clouds = [float(case.weather.constants["cloud_fraction"]) for case in cases]
    gaps = [
        (a.tables.top - night.told_top, a.tables.strength - night.told_strength)
        for a, night in zip(measured, all_nights, strict=True)
    ]
    about = "one date, 21-22 May 2023, stations under one weather: not a climate of nights" if name == SET else name
    print(f"{len(all_nights)} nights ({about})")
    print(f"given: afternoon sounding; {given['surface']}; cloud by rule {given['cloud']}; everything else by default")
    print(f"night_pairs.csv from the measured dawns by the tables' rule: largest difference of top "
          f"{max(abs(x) for x, _ in gaps):.0f} m, of strength {max(abs(x) for _, x in gaps):.2f} K")  # fmt: skip
    if name == SET:
        print("\n".join(table(all_nights, measured, computed, clouds)))
    print("\n".join(scores(all_nights, measured, computed)))
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
