"""Heat and water of whole runs, recomputed from the profiles they put out, against the time-summed fluxes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from forcing.air import CP_DRY, GRAVITY, exner
from forcing.bundled import bundled, bundled_names
from forcing.scenario import load, with_setting
from forcing.scenario_types import Scenario
from forcing.sounding import Profile
from slab.cycle import DAY, Part, Run, run
from slab.handover import moved, nodes_now
from slab.rendered import offsets_of, part_at, profile_at

CLOSES = 1e-6
LID = 4500.0  # kg m-2, about 4.5 km: everything a run changes but for uniform heating lies below


def content(profile: Profile, lid: float) -> tuple[float, float]:
    """Heat [J m-2, in cp x surface exner x theta] and vapour [kg m-2] below a mass level."""
    mass = (profile.surface_pressure - profile.pressure) / GRAVITY
    inside = np.concatenate((mass[mass < lid], [lid]))
    theta, humidity = np.interp(inside, mass, profile.theta), np.interp(inside, mass, profile.humidity)
    d = np.diff(inside)
    joule = CP_DRY * exner(profile.surface_pressure)
    return (
        joule * float(np.sum(d * 0.5 * (theta[1:] + theta[:-1]))),
        float(np.sum(d * 0.5 * (humidity[1:] + humidity[:-1]))),
    )


def held(done: Run, knot: int, lid: float) -> tuple[float, float]:
    """Content below a mass level at a knot: of the profile put out by day, of the cells put out by night."""
    part = part_at(done, knot)
    if part.course is None:
        return content(profile_at(done, knot, softened=False), lid)
    note, cells = part.course.notes[knot], np.diff(np.concatenate(([0.0], part.course.mass)))
    edge = float(part.course.mass[-1])
    table = nodes_now(part.air, offsets_of(done, knot))
    above = np.concatenate(([edge], table[(table > edge) & (table < lid)], [lid]))
    theta, humidity, _, _ = moved(part.air, part.later, offsets_of(done, knot), above)
    d = np.diff(above)
    heat = float(np.dot(cells, note.theta)) + float(np.sum(d * 0.5 * (theta[1:] + theta[:-1])))
    water = float(np.dot(cells, note.humidity)) + float(np.sum(d * 0.5 * (humidity[1:] + humidity[:-1])))
    return CP_DRY * exner(done.surface_pressure) * heat, water


def received(done: Run, start: int, end: int, lid: float) -> tuple[float, float]:
    """Heat [J m-2] and vapour [kg m-2] that surface, advection, radiation and cumulus gave the air between two knots."""
    joule = CP_DRY * exner(done.surface_pressure)
    f = done.fields
    heat = sum(f[name][end] - f[name][start] for name in ("surface_heat", "aloft_heat"))
    vapour = sum(f[name][end] - f[name][start] for name in ("surface_vapour", "aloft_vapour"))
    for part in done.parts:
        first, last = max(part.first, start), min(part.last, end)
        if last <= first:
            continue
        over = lid if part.kind == DAY else lid - float(part.course.mass[-1])  # type: ignore[union-attr]
        warmed, moistened = _uniform(done, part.first, first, last)
        heat += over * warmed
        vapour += over * moistened
    return joule * heat, vapour


def _uniform(done: Run, begin: int, first: int, last: int) -> tuple[float, float]:
    """Uniform warming [K] and moistening [kg kg-1] between two knots of a part: rates times time."""
    hours = (done.time[last] - done.time[first]) / 3600.0
    weather = done.scenario.weather
    middle = np.array([0.5 * (done.time[first] + done.time[last])])
    heat = float(weather.sample("heat_advection_K_h", middle)[0]) + done.free.heating
    return 3600.0 * hours * heat, 3600.0 * hours * float(weather.sample("moisture_advection_g_kg_h", middle)[0])


def steady(name: str) -> Scenario:
    """A bundled scenario without what moves the air aloft unevenly (sinking, a later profile), so that sums are plain."""
    scenario = load(bundled(name))
    scenario = replace(scenario, run=replace(scenario.run, hours=min(scenario.run.hours, 26.0)))
    for key in ("profile.later", "profile.later_valid", "weather.divergence_per_s"):
        section, _, entry = key.partition(".")
        if entry in scenario.settings.get(section, {}):  # type: ignore[operator]
            scenario = with_setting(scenario, key, None)
    return with_setting(scenario, "weather.divergence_per_s", 0.0)  # left out, air sinks as its cooling asks for


def check(done: Run, start: int, end: int) -> None:
    lid = min(LID, 0.9 * float(np.asarray(done.parts[0].air.mass)[-1]))
    before, after = held(done, start, lid), held(done, end, lid)
    given, evaporated = received(done, start, end, lid)
    # relative to what the surface turned over, or to the heat of a tenth of a kelvin and 1e-5 of the water where little did
    turnover = float(np.sum(np.abs(np.diff(done.fields["sensible_energy"][start : end + 1]))))
    assert abs(after[0] - before[0] - given) < CLOSES * max(turnover, 0.1 * lid * CP_DRY), (after[0] - before[0], given)
    assert abs(after[1] - before[1] - evaporated) < CLOSES * before[1], (after[1] - before[1], evaporated)


@pytest.mark.parametrize("name", bundled_names())
def test_heat_and_water_close(name: str) -> None:
    done = run(steady(name))
    for part in done.parts:
        if part.last - part.first >= 3:
            check(done, part.first, part.last - 1)
    check(done, 0, int(done.parts[-1].last))


@pytest.mark.parametrize("name", ["summer_plain", "spring_crop"])
def test_heat_and_water_close_with_advection(name: str) -> None:
    scenario = with_setting(steady(name), "weather.heat_advection_K_h", 0.3)
    done = run(with_setting(scenario, "weather.moisture_advection_g_kg_h", 0.05))
    check(done, 0, int(done.parts[-1].last))


def fine(done: Run, part: Part, knot: int, low: float, lid: float) -> tuple[float, float]:
    """Heat and vapour of the air aloft between two mass levels by the midpoint rule on 200 000 points.

    Air that sinks through the cap is not linear between the levels of any table, so the table itself is not used.
    """
    edges = np.linspace(low, lid, 200001)
    theta, humidity, _, _ = moved(part.air, part.later, offsets_of(done, knot), 0.5 * (edges[1:] + edges[:-1]))
    d = (lid - low) / 200000
    return CP_DRY * exner(done.surface_pressure) * float(np.sum(theta)) * d, float(np.sum(humidity)) * d


def exactly(done: Run, part: Part, knot: int, lid: float) -> tuple[float, float]:
    """Content of slab or cells, and of the air above them."""
    f = done.fields
    if part.course is None:
        mass = f["mass"][knot]
        above = fine(done, part, knot, mass, lid)
        joule = CP_DRY * exner(done.surface_pressure)
        return joule * mass * f["theta"][knot] + above[0], mass * f["humidity"][knot] + above[1]
    note, cells = part.course.notes[knot], np.diff(np.concatenate(([0.0], part.course.mass)))
    above = fine(done, part, knot, float(part.course.mass[-1]), lid)
    joule = CP_DRY * exner(done.surface_pressure)
    return joule * float(np.dot(cells, note.theta)) + above[0], float(np.dot(cells, note.humidity)) + above[1]


@pytest.mark.parametrize("divergence", [1e-5, -3e-6])
@pytest.mark.parametrize("name", ["summer_plain", "dry_desert"])
def test_heat_and_water_close_with_sinking_air(name: str, divergence: float) -> None:
    """Column change = surface + what sinking carries sideways out of slab or cells + change of the air aloft itself."""
    done = run(with_setting(steady(name), "weather.divergence_per_s", divergence))
    joule = CP_DRY * exner(done.surface_pressure)
    lid = min(LID, *(0.9 * float(nodes_now(p.air, offsets_of(done, p.last - 1))[-1]) for p in done.parts))
    for part in done.parts:
        a, b = part.first, part.last - 1
        if b - a < 3:
            continue
        low = 0.0 if part.course is None else float(part.course.mass[-1])
        got, start = exactly(done, part, b, lid), exactly(done, part, a, lid)
        own, own_start = fine(done, part, b, low, lid), fine(done, part, a, low, lid)
        f = done.fields
        heat = joule * sum(f[n][b] - f[n][a] for n in ("surface_heat", "aloft_heat")) + own[0] - own_start[0]
        water = sum(f[n][b] - f[n][a] for n in ("surface_vapour", "aloft_vapour")) + own[1] - own_start[1]
        turnover = float(np.sum(np.abs(np.diff(f["sensible_energy"][a : b + 1])))) + abs(own[0] - own_start[0])
        assert abs(got[0] - start[0] - heat) < CLOSES * max(turnover, 0.1 * lid * CP_DRY)
        assert abs(got[1] - start[1] - water) < CLOSES * start[1]
