"""A small fixed set of runs with changed inputs, from which the spread of inversion onset and end is read.

Eight members, in each of which all six inputs are one step up or down (a two-level fractional factorial, so that every
input is up in four members and down in four, and no two go together), and the run itself: nine in all. A step stands for
one standard deviation of what an adviser does not know (our choice); an input at its bound moves one way only.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from forcing.assumptions import wind_near
from forcing.scenario_types import Scenario
from forcing.series import Series
from forcing.weather import FluxTable
from slab.cycle import Known, Run, run
from slab.march import Control

Array = NDArray[np.float64]
Change = Callable[[Scenario, Known, float], tuple[Scenario, Known]]

CONTROL = Control(2.0, 900.0, 900.0)  # coarser than the run itself; onset and end move by a few minutes
CLOUD_STEP = 0.2  # of the sky
WIND_STEP = 1.5  # [m s-1] of the wind aloft
MAST_WIND_STEP = 0.7  # [m s-1] of a given wind at 10 m
MOISTURE_STEP = 0.15  # of the way from wilting point to field capacity
RESISTANCE_FACTOR = 1.5  # of the least stomatal resistance
CONDUCTANCE_FACTOR = 1.5  # of the skin
LONGWAVE_STEP = 8.0  # [W m-2]
FLUX_STEP = 8.0  # [W m-2] of a sensible heat flux from a file


@dataclass(frozen=True, slots=True)
class Step:
    """One input that is not known well: its name, the step in words, and how a scenario is changed by it."""

    name: str
    words: str
    change: Change


@dataclass(frozen=True, slots=True)
class Member:
    """One run of the set on the rows of the calendar.

    Attributes
    ----------
    signs : tuple of float
        +1 or -1 by step; empty for the run itself.
    difference : ndarray, shape (n,)
        Temperature at the upper minus at the lower height [K].
    wind, temperature, vapour : ndarray, shape (n,)
        Wind at 10 m [m s-1], temperature [K] and specific humidity at 2 m.
    """

    signs: tuple[float, ...]
    difference: Array
    wind: Array
    temperature: Array
    vapour: Array


def _cloud(scenario: Scenario, known: Known, sign: float) -> tuple[Scenario, Known]:
    return replace(scenario, weather=scenario.weather.shifted("cloud_fraction", sign * CLOUD_STEP)), known


def _wind(scenario: Scenario, known: Known, sign: float) -> tuple[Scenario, Known]:
    weather, profile = scenario.weather, scenario.profile
    name = "pressure_gradient_wind_m_s"
    if weather.given(name) or not profile.wind_known:
        weather = weather.shifted(name, sign * WIND_STEP)
    if profile.wind_known:
        speed, _ = wind_near(profile)
        factor = max(0.2, 1.0 + sign * WIND_STEP / max(speed, WIND_STEP))
        profile = replace(profile, u=factor * profile.u, v=factor * profile.v)
    if weather.given("wind_10m_m_s"):
        weather = weather.shifted("wind_10m_m_s", sign * MAST_WIND_STEP)
    return replace(scenario, weather=weather, profile=profile), known


def _moisture(scenario: Scenario, known: Known, sign: float) -> tuple[Scenario, Known]:
    moved = min(1.0, max(0.0, scenario.soil_moisture + sign * MOISTURE_STEP))
    return replace(scenario, soil_moisture=moved), known._replace(soil=None)


def _resistance(scenario: Scenario, known: Known, sign: float) -> tuple[Scenario, Known]:
    cover = scenario.cover
    moved = cover.stomatal_resistance_min * RESISTANCE_FACTOR**sign
    return replace(scenario, cover=replace(cover, stomatal_resistance_min=moved)), known._replace(soil=None)


def _conductance(scenario: Scenario, known: Known, sign: float) -> tuple[Scenario, Known]:
    cover = scenario.cover
    moved = cover.skin_conductance * CONDUCTANCE_FACTOR**sign
    return replace(scenario, cover=replace(cover, skin_conductance=moved)), known._replace(soil=None)


def _longwave(scenario: Scenario, known: Known, sign: float) -> tuple[Scenario, Known]:
    anchor = known.anchor._replace(offset=known.anchor.offset + sign * LONGWAVE_STEP)
    return scenario, known._replace(anchor=anchor)


def _fluxes(scenario: Scenario, known: Known, sign: float) -> tuple[Scenario, Known]:
    table = scenario.fluxes
    assert table is not None
    name = "sensible_flux_W_m2"
    old = table.series[name]
    moved = {**table.series, name: Series(old.posix, old.values + sign * FLUX_STEP, old.direction)}
    return replace(scenario, fluxes=FluxTable(moved, table.file)), known


def steps_of(scenario: Scenario) -> tuple[Step, ...]:
    """The six inputs that are changed; with fluxes from a file those stand for the surface."""
    wind = f"{WIND_STEP:g} m/s more or less wind aloft"
    if scenario.weather.given("wind_10m_m_s"):
        wind += f", {MAST_WIND_STEP:g} m/s at 10 m"
    common = (
        Step("cloud", f"{CLOUD_STEP:g} of the sky more or less cloud", _cloud),
        Step("wind", wind, _wind),
    )
    if scenario.fluxes is not None:
        return (*common, Step("sensible heat flux", f"{FLUX_STEP:g} W/m² more or less from the file", _fluxes))
    return (
        *common,
        Step("soil moisture", f"{MOISTURE_STEP:g} more or less, of wilting point to field capacity", _moisture),
        Step("surface resistance", f"least stomatal resistance times or over {RESISTANCE_FACTOR:g}", _resistance),
        Step("skin", f"skin conductance times or over {CONDUCTANCE_FACTOR:g}", _conductance),
        Step("long-wave", f"{LONGWAVE_STEP:g} W/m² more or less from the sky", _longwave),
    )


def design(count: int) -> tuple[tuple[float, ...], ...]:
    """Signs of eight members for up to six steps: a 2^(6-3) fractional factorial (Box and Hunter 1961), generators
    D = AB, E = AC, F = BC."""
    rows = []
    for n in range(8):
        a, b, c = (1.0 if n >> bit & 1 else -1.0 for bit in range(3))
        rows.append((a, b, c, a * b, a * c, b * c)[:count])
    return tuple(rows)


def at_rows(done: Run, values: Array, rows: Array) -> Array:
    """A quantity of a run at the rows' times, linear between knots, NaN where the run did not get to."""
    usable = np.isfinite(values)
    if usable.sum() < 2:
        return np.full(rows.shape, math.nan)
    known = done.time[usable]
    return np.interp(rows, known, values[usable], left=math.nan, right=math.nan)


def difference_of(done: Run, between: tuple[float, float]) -> Array:
    """Temperature at the upper minus at the lower height [K], by knot."""
    low, high = (done.heights.index(z) for z in between)
    return np.asarray(done.temperatures[:, high] - done.temperatures[:, low])


def member_of(done: Run, rows: Array, between: tuple[float, float], signs: tuple[float, ...] = ()) -> Member:
    """A run read on the calendar's rows."""
    f = done.fields
    read = (difference_of(done, between), f["wind_10m"], f["temperature_2m"], f["humidity_2m"])
    return Member(signs, *(at_rows(done, values, rows) for values in read))


def members(done: Run, rows: Array, between: tuple[float, float]) -> tuple[Member, ...]:
    """The run itself, then the eight changed ones, each with all steps up or down at once.

    Parameters
    ----------
    done : Run
        The run; its long-wave anchor and soil are taken over where a step does not touch them.
    rows : ndarray, shape (n,)
        Seconds since 1970 UTC.
    between : tuple of float
        Lower and upper height [m].
    """
    steps = steps_of(done.scenario)
    known = Known(done.anchor, done.free, done.soil_start)
    found = [member_of(done, rows, between)]
    for signs in design(len(steps)):
        changed, taken = done.scenario, known
        for step, sign in zip(steps, signs, strict=True):
            changed, taken = step.change(changed, taken, sign)
        found.append(member_of(run(changed, control=CONTROL, heights=between, known=taken), rows, between, signs))
    return tuple(found)
