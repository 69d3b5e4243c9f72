"""Whole runs: any starting hour and latitude, a later profile, measured inputs, and what day and night hand over."""

from __future__ import annotations

import math
import os
import subprocess
import sys
from copy import deepcopy
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np
import pytest
from column import column
from invented import fluxes, scenario

from forcing.air import CP_DRY, exner
from forcing.bundled import bundled, bundled_names
from forcing.errors import ScenarioError
from forcing.scenario import load
from forcing.series import Series
from forcing.sounding import Profile
from slab.cycle import DAY, NIGHT, Run, run
from slab.handover import moved
from slab.record import SUMS
from slab.rendered import offsets_of, part_at, profile_at
from slab.start import mixed_mass

MORNING = ((0.0, 288.0), (200.0, 293.0), (1200.0, 294.0), (1300.0, 297.0), (7000.0, 322.0))
AFTERNOON = ((0.0, 301.0), (50.0, 299.5), (1500.0, 299.5), (1600.0, 302.0), (7000.0, 326.0))
COLD = ((0.0, 255.0), (300.0, 262.0), (1500.0, 268.0), (7000.0, 290.0))
JUMP = 1.5  # K of 2 m temperature between the knots around a hand-over, ten minutes apart


def at(hour: int, minute: int = 0, *, month: int = 6, day: int = 1) -> datetime:
    return datetime(2024, month, day, hour, minute, tzinfo=UTC)


def morning(wind: float | None = 5.0) -> Profile:
    return column(MORNING, humidity=0.007, wind=wind)


def afternoon() -> Profile:
    return column(AFTERNOON, humidity=0.007, wind=5.0)


def kinds(done: Run) -> list[str]:
    return [part.kind for part in done.parts]


def sound(done: Run) -> None:
    """What holds of every run that reaches its end: all known, depths positive, parts joined, screen air continuous."""
    f = done.fields
    assert done.stopped == "end of the run"
    for name in ("depth", "theta", "humidity", "temperature_2m", "humidity_2m", "wind_10m", "sensible", "latent"):
        assert np.all(np.isfinite(f[name])), name
    assert np.all(f["depth"] >= 0.0)
    assert np.all(f["depth"][done.day] >= 15.0)
    assert np.all(f["humidity_2m"] > 0.0)
    for before, after in zip(done.parts, done.parts[1:], strict=False):
        assert before.last == after.first
        assert before.kind != after.kind
    for part in done.parts[1:]:
        near = f["temperature_2m"][max(part.first - 1, 0) : part.first + 3]
        assert np.max(np.abs(np.diff(near))) < JUMP, (part.kind, near)


# --- any hour, any latitude


def test_a_run_from_local_midnight() -> None:
    done = run(scenario(morning(), valid=at(6), hours=30.0))
    sound(done)
    assert kinds(done) == [NIGHT, DAY, NIGHT]
    assert np.nanmax(done.fields["depth"]) > 1000.0


def test_a_run_from_noon() -> None:
    done = run(scenario(afternoon(), valid=at(18), hours=30.0))
    sound(done)
    assert kinds(done) == [DAY, NIGHT, DAY]
    assert done.fields["depth"][0] > 1000.0, "a mixed layer that is there is taken over whole"


@pytest.mark.parametrize("before", [1.0, 2.0, 3.0])
def test_a_run_from_shortly_before_sunset_has_its_night_at_once(before: float) -> None:
    sunset = at(1, 50, day=2)
    done = run(scenario(afternoon(), valid=sunset - timedelta(hours=before), hours=26.0))
    sound(done)
    assert kinds(done)[:3] == [DAY, NIGHT, DAY]
    assert done.time[done.parts[0].last] - done.time[0] <= 3600.0 * before
    dark = (done.time > sunset.timestamp() + 1800.0) & (done.time < sunset.timestamp() + 8.0 * 3600.0)
    assert not np.any(done.day[dark])


def test_the_south_has_its_day_in_its_own_hours() -> None:
    """The same air at the mirrored latitude, half a year later and with the same sun time, makes nearly the same day."""
    north = run(scenario(morning(), valid=at(11), hours=14.0))
    south = run(scenario(morning(), valid=at(11, month=12), latitude=-40.0, hours=14.0))
    sound(south)
    assert kinds(south) == kinds(north)
    assert np.nanmax(south.fields["depth"]) == pytest.approx(np.nanmax(north.fields["depth"]), rel=0.1)


def test_the_wind_turns_the_other_way_in_the_south() -> None:
    """Friction turns the wind near the ground toward low pressure: left of a west wind in the north, right in the south."""
    turned = {}
    for latitude, month in ((45.0, 6), (-45.0, 12)):
        done = run(scenario(morning(wind=8.0), valid=at(11, month=month), latitude=latitude, hours=9.0))
        turned[latitude] = float(done.fields["north"][done.parts[1].last - 12])
    assert turned[45.0] > 0.1
    assert turned[-45.0] < -0.1


def test_a_polar_day_has_no_sunset_and_a_polar_night_no_day() -> None:
    light = run(scenario(afternoon(), valid=at(12, day=21), latitude=78.0, longitude=15.0, hours=36.0))
    sound(light)
    assert np.all(light.fields["shortwave_down"] > 0.0)
    cold = column(COLD, humidity=0.0008, wind=4.0)
    dark = run(scenario(cold, valid=at(0, month=12, day=21), latitude=78.0, longitude=15.0, cover="old snow", hours=36.0))
    assert kinds(dark) == [NIGHT]
    assert np.all(dark.fields["shortwave_down"] == 0.0)
    assert np.all(np.isfinite(dark.fields["temperature_2m"]))


def test_nothing_happens_at_midnight_utc() -> None:
    """Turned to where midnight UTC falls in the afternoon, the run has no more of a step there than beside it."""
    done = run(scenario(morning(), valid=at(17), longitude=175.0, hours=14.0))
    k = int(np.flatnonzero(done.time == at(0, day=2).timestamp())[0])
    assert done.day[k]
    for name in ("depth", "theta", "temperature_2m", "sensible", "shortwave_down", "wind_10m"):
        change = np.diff(done.fields[name])
        assert abs(change[k] - change[k - 1]) <= 2.0 * np.max(np.abs(np.diff(change[k - 8 : k + 8]))) + 1e-9
        assert abs(change[k]) <= 1.5 * np.max(np.abs(change[k - 8 : k + 8])) + 1e-9
    shifted = run(scenario(morning(), valid=at(11), longitude=-95.0, hours=14.0))
    eastward = run(scenario(morning(), valid=at(11) - timedelta(hours=12), longitude=85.0, hours=14.0))
    assert np.nanmax(eastward.fields["depth"]) == pytest.approx(np.nanmax(shifted.fields["depth"]), rel=0.02)


# --- what is aloft


def later_day() -> tuple[Profile, Profile]:
    then = column(tuple((z, t + 4.0) for z, t in AFTERNOON), humidity=0.004, wind=9.0)
    return morning(), replace(then, valid=at(22))


def test_air_aloft_moves_to_the_later_profile_and_gets_there() -> None:
    before, then = later_day()
    done = run(scenario(before, later=then, hours=12.0))
    k = int(np.flatnonzero(done.time == at(22).timestamp())[0])
    heights = np.arange(done.fields["depth"][k] + 400.0, 6000.0, 100.0)
    assert heights.size > 20
    part = part_at(done, k)
    mass = np.interp(heights, np.asarray(part.air.height), np.asarray(part.air.mass))
    theta, humidity, _, _ = moved(part.air, part.later, offsets_of(done, k), mass)
    warmed = done.fields["warmed"][k]
    of_later = np.interp(mass, (then.surface_pressure - then.pressure) / 9.80665, then.theta)
    assert np.max(np.abs(theta - warmed - of_later)) < 0.05
    assert np.max(np.abs(humidity - 0.004)) < 1e-5
    half = int(np.flatnonzero(done.time == at(16, 30).timestamp())[0])
    part = part_at(done, half)
    begun = (done.time[part.first] - done.time[0]) / (11.0 * 3600.0)  # the way is counted anew from every hand-over
    assert done.fields["later"][half] == pytest.approx((0.5 - begun) / (1.0 - begun), abs=0.01)


def test_warmer_air_aloft_holds_the_layer_down() -> None:
    before, then = later_day()
    held = run(scenario(before, hours=12.0))
    warmed = run(scenario(before, later=then, hours=12.0))
    assert np.nanmax(warmed.fields["depth"]) < np.nanmax(held.fields["depth"]) - 20.0


def test_divergence_beside_a_later_profile_is_refused() -> None:
    before, then = later_day()
    with pytest.raises(ScenarioError, match="later profile and a divergence") as caught:
        run(scenario(before, later=then, weather={"divergence_per_s": 1e-5}, hours=12.0))
    assert caught.value.remedy


def test_a_layer_at_the_top_of_its_profile_stops_the_run() -> None:
    low = column(((0.0, 288.0), (100.0, 290.0), (1400.0, 292.0)), humidity=0.005, wind=4.0)
    done = run(scenario(low, hours=16.0))
    assert done.stopped == "top of the profile reached"
    depth = done.fields["depth"]
    assert np.nanmax(depth) <= 1400.0
    last = int(np.flatnonzero(np.isfinite(depth))[-1])
    assert last < len(depth) - 10
    for values in done.fields.values():
        assert np.all(np.isnan(values[last + 1 :])), "nothing is extrapolated"


# --- what is given instead of computed


def test_fluxes_from_a_file_are_what_the_day_gets() -> None:
    start, hours = at(11), 12.0
    table = fluxes(start, hours, lambda h: 200.0 * math.sin(math.pi * h / 12.0), lambda h: 90.0)
    done = run(scenario(morning(), fluxes=table, hours=hours))
    day = next(part for part in done.parts if part.kind == DAY)
    k = np.arange(day.first, day.last)
    expected = table.sample("sensible_flux_W_m2", done.time[k])
    assert np.allclose(done.fields["sensible"][k], expected, rtol=1e-9)
    f = done.fields
    seconds = np.diff(done.time[day.first : day.last])
    given = float(np.sum(seconds * 0.5 * (expected[1:] + expected[:-1])))
    taken = f["sensible_energy"][day.last - 1] - f["sensible_energy"][day.first]
    assert taken == pytest.approx(given, rel=1e-4)
    assert np.all(np.isnan(f["net_radiation"][k]))
    assert np.all(np.isnan(f["ground"][k]))


@pytest.mark.parametrize(
    ("name", "value", "field"),
    [
        ("shortwave_down_W_m2", 500.0, "shortwave_down"),
        ("longwave_down_W_m2", 370.0, "longwave_down"),
        ("net_radiation_W_m2", 350.0, "net_radiation"),
        ("wind_10m_m_s", 6.0, "wind_10m"),
    ],
)
def test_measured_inputs_are_met(name: str, value: float, field: str) -> None:
    done = run(scenario(morning(), valid=at(14), weather={name: value}, hours=5.0))
    day = done.fields[field][done.day]
    assert day.size > 12
    assert np.allclose(day, value, rtol=1e-3), (day.min(), day.max())
    free = run(scenario(morning(), valid=at(14), hours=5.0))
    assert np.nanmax(np.abs(free.fields[field][free.day] - value)) > 0.05 * value, "it would have been another"


def test_a_wind_measured_at_night_pulls_the_lowest_air_to_it() -> None:
    blown = run(scenario(afternoon(), valid=at(1, day=2), weather={"wind_10m_m_s": 4.0}, hours=8.0))
    k = int(blown.time.size) - 6
    assert not blown.day[k]
    assert blown.fields["wind_10m"][k] == pytest.approx(4.0, rel=0.15)


# --- profiles of every kind


def test_a_neutral_start_is_one_slab_to_its_cap() -> None:
    neutral = column(((0.0, 295.0), (1500.0, 295.0), (1600.0, 298.0), (7000.0, 320.0)), humidity=0.006, wind=5.0)
    done = run(scenario(neutral, valid=at(15), hours=14.0))
    sound(done)
    day = next(part for part in done.parts if part.kind == DAY)
    assert done.time[day.first] - done.time[0] <= 3600.0
    assert 1400.0 < done.fields["depth"][day.first] < 1620.0


def test_a_superadiabatic_start_is_mixed_without_making_heat() -> None:
    profile = afternoon()
    done = run(scenario(profile, valid=at(18), hours=8.0))
    sound(done)
    low = profile.height <= 1500.0
    mean = float(np.trapezoid(profile.theta[low], profile.pressure[low]) / np.ptp(profile.pressure[low])) * -1.0
    assert done.fields["theta"][0] == pytest.approx(mean, abs=0.05)


def test_without_any_wind_in_the_profile_one_is_assumed() -> None:
    done = run(scenario(morning(wind=None), hours=24.0))
    sound(done)
    assert float(np.max(done.fields["wind_10m"])) > 1.0


def test_calm_air_runs() -> None:
    done = run(scenario(morning(wind=0.0), hours=24.0))
    assert done.stopped == "end of the run"
    assert np.all(np.isfinite(done.fields["temperature_2m"]))
    assert np.all(done.fields["depth"] >= 0.0)


def test_a_site_at_four_thousand_metres() -> None:
    points = tuple((z, t + 38.0) for z, t in MORNING)
    high = column(points, humidity=0.002, wind=5.0, surface_pressure=62000.0, elevation=4000.0)
    low = run(scenario(column(points, humidity=0.002, wind=5.0, surface_pressure=100000.0), hours=12.0))
    done = run(scenario(high, hours=12.0))
    sound(done)
    assert np.nanmax(done.fields["depth"]) > np.nanmax(low.fields["depth"]) + 100.0, "the same flux deepens thin air more"


# --- from day to night and back


@pytest.fixture(scope="module")
def whole() -> dict[str, Run]:
    return {name: run(load(bundled(name))) for name in bundled_names()}


@pytest.mark.parametrize("name", bundled_names())
def test_nothing_jumps_near_the_ground_at_a_hand_over(whole: dict[str, Run], name: str) -> None:
    """Of the runs with fluxes from a file 2 K are let pass: their friction velocity is not the column's own."""
    done = whole[name]
    assert {DAY, NIGHT} <= set(kinds(done))
    allowed = 2.0 if done.scenario.fluxes is not None else JUMP
    for part in done.parts[1:]:
        near = slice(part.first - 2, min(part.first + 4, len(done.time)))
        assert np.max(np.abs(np.diff(done.fields["temperature_2m"][near]))) < allowed, part
        assert np.max(np.abs(np.diff(done.fields["wind_10m"][near]))) < 2.5, part


@pytest.mark.parametrize("name", bundled_names())
def test_heat_and_vapour_pass_a_hand_over_whole(whole: dict[str, Run], name: str) -> None:
    """The content of the air before and after, both read from the parts' own integrals."""
    done = whole[name]
    for before, after in zip(done.parts, done.parts[1:], strict=False):
        k = after.first
        if after.kind == DAY:
            start = mixed_mass(after.air)
            assert done.fields["mass"][k] == pytest.approx(start, rel=1e-9)
            assert before.course is not None
            given = before.course.handover
            assert done.fields["heat"][k] == given.heat
            assert done.fields["vapour"][k] == given.vapour
        sums = [done.fields[n][k] for n in ("surface_heat", "surface_vapour", "aloft_heat", "aloft_vapour")]
        ahead = [done.fields[n][k + 1] for n in ("surface_heat", "surface_vapour", "aloft_heat", "aloft_vapour")]
        behind = [done.fields[n][k - 1] for n in ("surface_heat", "surface_vapour", "aloft_heat", "aloft_vapour")]
        assert len(sums) <= SUMS
        joule = CP_DRY * exner(done.surface_pressure)
        assert abs(joule * (ahead[0] - sums[0])) < 1e5
        assert abs(joule * (sums[0] - behind[0])) < 1e5, "the running sums go on, they do not start anew"


@pytest.mark.parametrize("name", ["summer_plain", "dry_desert", "southern_wheat"])
def test_the_residual_layer_stays_through_the_night(whole: dict[str, Run], name: str) -> None:
    done = whole[name]
    night = next(p for p in done.parts[1:] if p.kind == NIGHT)
    top = done.residual_top[night.first : night.last + 1]
    assert np.all(np.isfinite(top))
    assert np.all(np.diff(top) <= 1e-6), "it only sinks"
    assert top[0] == pytest.approx(done.fields["depth"][night.first - 1], rel=0.01)
    k = (night.first + night.last) // 2
    column_now = profile_at(done, k)
    deep = top[k - night.first]
    inside = (column_now.height > 0.4 * deep) & (column_now.height < 0.85 * deep)
    assert np.ptp(column_now.theta[inside]) < 0.5, "still mixed aloft"
    above = np.interp(1.25 * deep, column_now.height, column_now.theta)
    assert above > np.mean(column_now.theta[inside]) + 0.5, "and still capped"
    morning_after = next((p for p in done.parts if p.first == night.last), None)
    if morning_after is not None:
        assert np.isfinite(done.residual_top[morning_after.first]), "known until the next slab reaches it"


def test_depth_shrinks_around_sunset_and_never_freezes(whole: dict[str, Run]) -> None:
    for done in whole.values():
        evening = next(p for p in done.parts[1:] if p.kind == NIGHT)
        before = done.fields["depth"][evening.first - 1]
        if before < 500.0:
            continue  # a slab as shallow as the winds' own layer has nothing to shrink to
        after = done.fields["depth"][evening.first + 1 : evening.first + 12]
        assert np.all(after < before)
        assert np.unique(np.round(after, 3)).size > 3


# --- purity and speed


def test_the_same_inputs_give_the_same_numbers_and_stay_as_they_were() -> None:
    case = load(bundled("humid_lowland"))
    case = replace(case, run=replace(case.run, hours=14.0))
    kept = deepcopy(case)
    first, second = run(case), run(case)
    for name, values in first.fields.items():
        assert np.array_equal(values, second.fields[name], equal_nan=True), name
    assert np.array_equal(first.temperatures, second.temperatures, equal_nan=True)
    for name in ("height", "pressure", "theta", "humidity", "u", "v"):
        assert np.array_equal(getattr(case.profile, name), getattr(kept.profile, name))
    assert case.weather.constants == kept.weather.constants
    assert all(np.array_equal(s.values, kept.weather.series[n].values) for n, s in case.weather.series.items())
    assert case.settings == kept.settings
    assert isinstance(next(iter(case.weather.series.values())), Series)


TWIN = """
import sys, numpy as np
from dataclasses import replace
from forcing.bundled import bundled
from forcing.scenario import load
from slab.cycle import run
case = load(bundled("summer_plain"))
done = run(replace(case, run=replace(case.run, hours=14.0)))
np.savez(sys.argv[1], temperatures=done.temperatures, day=done.day, **done.fields)
"""


@pytest.mark.slow
def test_the_compiled_twin_says_the_same(tmp_path: Path) -> None:
    """Night, day and night again by kernels that are plain and compiled; compiling takes one to two minutes of processor."""
    found = []
    for compiled in ("0", "1"):
        path = tmp_path / f"{compiled}.npz"
        done = subprocess.run(
            [sys.executable, "-W", "ignore", "-c", TWIN, str(path)], capture_output=True, text=True, check=False,
            env={**os.environ, "DAYLAYER_COMPILED": compiled}, cwd=Path(__file__).parent.parent,
        )  # fmt: skip
        assert done.returncode == 0, done.stderr[-2000:]
        found.append(np.load(path))
    plain, twin = found
    for name in plain.files:
        if name == "day":
            assert np.array_equal(plain[name], twin[name])
            continue
        known = np.isfinite(plain[name])
        assert np.array_equal(known, np.isfinite(twin[name])), name
        size = float(np.max(np.abs(plain[name][known])))
        assert np.max(np.abs(plain[name][known] - twin[name][known])) <= 1e-6 * size, name
