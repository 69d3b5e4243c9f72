"""The driver: a run through day and night from one profile; it picks day or night from the virtual surface flux."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from forcing.air import GRAVITY, KAPPA, P_REFERENCE, coriolis
from forcing.cover import ground as ground_of
from forcing.errors import ModelError, ScenarioError
from forcing.free_air import FreeAir, free_air, free_from
from forcing.longwave_column import Anchor
from forcing.scenario_types import Scenario
from forcing.surface import Ground, soil_layers
from forcing.table import (
    DIVERGENCE,
    LATENT,
    LATER_WEIGHT,
    NET_RADIATION,
    SENSIBLE,
    SHORTWAVE,
    Knots,
    knot_times,
    tabulate,
)
from slab.column import Aloft, as_numbers, from_profile, mean_below, on_same_levels, origins
from slab.daytime import EAST, HEAT, MASS, MEMBERS, NORTH, SOIL, SOIL_LAYERS, SURFACE_HEAT, VAPOUR, Offsets, Place
from slab.growth import CLOSURES, Closure
from slab.handover import RESIDUAL, Handover, column_after_slab
from slab.march import EVENING, FAILED, RAN_TO_END, REACHED_TOP, STANDARD, Control, march, scratch
from slab.nightfall import MORNING, MORNING_DEPTH, NightCourse, through_night
from slab.radiation import NightSky, anchored, sky_column
from slab.record import FIELDS, INDEX, NAMES, SUMS
from slab.start import GroundStart, ground_start, mixed_mass, sheared_mass, yesterday

Array = NDArray[np.float64]

HEIGHTS = (1.5, 2.0, 9.0, 10.0)  # [m] temperatures kept beside the screen's
STOPS = {RAN_TO_END: "end of the run", REACHED_TOP: "top of the profile reached"}
DAY, NIGHT = "day", "night"
AT_START, AT_DAWN = 2, 6  # knots that a slab waits for a first upward flux: one started at dusk never gets it


@dataclass(frozen=True, slots=True)
class Part:
    """One stretch of day or night, from knot ``first`` to ``last``, with what is needed to draw its column again.

    ``air`` the column handed over at its start and ``later`` the profile it moves to; ``start`` what the column held:
    heat [K kg m-2] and vapour [kg m-2]; ``course`` the night's own notes.
    """

    kind: str
    first: int
    last: int
    air: Aloft
    later: Aloft | None
    course: NightCourse | None


@dataclass(frozen=True, slots=True)
class Run:
    """A finished run, by knot.

    Attributes
    ----------
    time : ndarray, shape (n,)
        Seconds since 1970 UTC.
    fields : dict of ndarray, shape (n,)
        The record's members by name (`slab.record.NAMES`); NaN after a stop.
    temperatures : ndarray, shape (n, k)
        [K] at ``heights`` [m above ground].
    day : ndarray of bool, shape (n,)
        Whether the slab (True) or the night's column (False) carried the knot.
    residual_top : ndarray, shape (n,)
        [m above ground], NaN before a layer was left behind.
    parts : tuple of Part
    stopped : str
        Why the run ended.
    """

    scenario: Scenario
    time: Array
    fields: dict[str, Array]
    heights: tuple[float, ...]
    temperatures: Array
    day: NDArray[np.bool_]
    residual_top: Array
    parts: tuple[Part, ...]
    stopped: str
    ground: Ground
    soil_start: GroundStart | None
    anchor: Anchor
    free: FreeAir
    surface_pressure: float


def closure_of(scenario: Scenario) -> Closure:
    """The closure of a scenario's [run], with the user's own factors where given."""
    run = scenario.run
    closure = CLOSURES[run.entrainment]
    if run.entrainment != "encroachment":
        closure = closure._replace(flux_ratio=run.flux_ratio)
    if run.shear_factor is not None:
        closure = closure._replace(shear_factor=run.shear_factor)
    if run.spin_up_factor is not None:
        closure = closure._replace(spin_up_factor=run.spin_up_factor)
    return closure


class Known(NamedTuple):
    """What a run of the same profile has already found: it need not be found again."""

    anchor: Anchor
    free: FreeAir
    soil: GroundStart | None


class _Stage:
    """What stays the same through a run, and the record that is being written."""

    def __init__(self, scenario: Scenario, control: Control, heights: tuple[float, ...], known: Known | None) -> None:
        profile = scenario.profile
        self.scenario, self.control, self.heights = scenario, control, heights
        self.ground = ground_of(scenario.cover, scenario.soil_moisture)
        time = knot_times(profile.valid.timestamp(), scenario.run.hours, control.knot)
        if known is None:
            known = Known(anchored(profile, yesterday(scenario)[1]), free_air(profile), None)
        self.anchor, self.free = known.anchor, known.free
        self.knots: Knots = tabulate(scenario, time, self.free)
        if scenario.later is not None and np.any(self.knots.table[:, DIVERGENCE] != 0.0):
            raise ScenarioError(
                "both a later profile and a divergence are given",
                place=scenario.source,
                remedy="the later profile already holds the day's sinking: drop one of them",
            )
        self.place = Place(
            pressure=profile.surface_pressure,
            coriolis=coriolis(scenario.site.latitude),
            fluxes_given=float(self.knots.fluxes_given),
            friction_given=float(self.knots.friction_given),
            wind_given=float(self.knots.wind_given),
            net_radiation_given=float(self.knots.net_radiation_given),
            has_later=float(scenario.later is not None),
            cumulus=1.0,
            kinematic=0.0,
        )
        self.closure = closure_of(scenario)
        self.rows = [as_numbers(row) for row in self.knots.table]
        self.record = [as_numbers(np.full(FIELDS + len(heights), math.nan)) for _ in time]
        self.times = as_numbers(time)

    def column_now(self, air: Aloft) -> tuple[Array, Array, Array]:
        """Pressure [Pa], temperature [K], humidity of a table, and of the profile above it."""
        profile = self.scenario.profile
        pressure = profile.surface_pressure - GRAVITY * np.asarray(air.mass)
        theta, humidity = np.asarray(air.theta), np.asarray(air.humidity)
        above = profile.pressure < pressure[-1] - 1.0
        p = np.concatenate((pressure, profile.pressure[above]))
        t = np.concatenate((theta, profile.theta[above])) * (p / P_REFERENCE) ** KAPPA
        return p, t, np.concatenate((humidity, profile.humidity[above]))

    def later_on(self, air: Aloft, first: int) -> tuple[Aloft | None, Array]:
        """The later profile on a table's levels, and its weight counted from knot ``first``."""
        weight = self.knots.table[:, LATER_WEIGHT]
        if self.scenario.later is None:
            return None, weight
        left = 1.0 - weight[first]
        relative = np.clip((weight - weight[first]) / left, 0.0, 1.0) if left > 1e-9 else np.zeros_like(weight)
        return on_same_levels(air, self.scenario.later), relative


def _by_day(stage: _Stage, first: int, start: Handover, patience: int) -> tuple[Part, int, Handover]:
    """March the slab from knot ``first``; returns the part, why it ended and what it hands over. See `march`."""
    air = start.air
    later, weight = stage.later_on(air, first)
    for row, value in zip(stage.rows, weight, strict=True):
        row[LATER_WEIGHT] = float(value)
    mass = max(sheared_mass(air), mixed_mass(air)) if first == 0 else mixed_mass(air)
    state = as_numbers(np.zeros(MEMBERS))
    state[MASS], state[HEAT], state[VAPOUR] = mass, start.heat, start.vapour
    state[EAST], state[NORTH] = mean_below(air, mass, air.u), mean_below(air, mass, air.v)
    state[SOIL : SOIL + SOIL_LAYERS] = list(start.soil)
    state[SURFACE_HEAT:MEMBERS] = list(start.sums)
    work = scratch()
    work.memory[0] = start.skin
    sky = sky_column(
        *stage.column_now(air), stage.anchor, given=stage.knots.longwave_given,
        shade=not stage.scenario.weather.given("shortwave_down_W_m2"),
    )  # fmt: skip
    last = len(stage.times) - 1
    at = Offsets(0.0, 0.0, 0.0, 0.0, 0.0, 0.0)
    reached, reason, at = march(
        first, last, stage.times, stage.rows, state, at, air, later or air, stage.place, stage.ground,
        as_numbers(np.array(soil_layers(stage.ground))), stage.closure, stage.control, work, sky,
        as_numbers(np.array(stage.heights)), stage.record, patience,
    )  # fmt: skip
    if reason == FAILED:
        raise ModelError(f"the mixed layer could not be stepped at knot {reached}", remedy="check wind and temperature input")
    wind = (state[EAST], state[NORTH])
    column, heat, vapour = column_after_slab(air, later, at, state, wind, RESIDUAL)
    depth = float(np.interp(state[MASS], np.asarray(air.mass), np.asarray(air.height)))
    handover = Handover(
        column, heat, vapour, tuple(float(t) for t in state[SOIL : SOIL + SOIL_LAYERS]), float(work.memory[0]), depth,
        tuple(float(x) for x in state[SURFACE_HEAT:MEMBERS]),
    )  # fmt: skip
    return Part(DAY, first, reached, air, later, None), reason, handover


def _by_night(stage: _Stage, first: int, start: Handover) -> tuple[Part, int, Handover]:
    """Carry the night's column from knot ``first``; returns the part, why it ended and what it hands over."""
    later, weight = stage.later_on(start.air, first)
    table = stage.knots.table.copy()
    table[:, LATER_WEIGHT] = weight
    sky = NightSky(*stage.column_now(start.air), stage.anchor, given=stage.knots.longwave_given)
    course = through_night(
        first, len(stage.times) - 1, stage.knots.time, table, start, stage.ground, stage.place, sky, later,
        free_from(stage.scenario.later) if stage.scenario.later is not None else 0.0, stage.heights, stage.record,
    )  # fmt: skip
    return Part(NIGHT, first, course.reached, start.air, later, course), course.reason, course.handover


def _starts_by_night(stage: _Stage, air: Aloft) -> bool:
    """Whether the run starts with the resolved column.

    It does where the surface takes heat from the air (by the given fluxes, or with a sun too low to feed it), and where
    the lowest air is still stratified: convection has to grow through that first.
    """
    row = stage.knots.table[0]
    if float(np.interp(mixed_mass(air), np.asarray(air.mass), np.asarray(air.height))) < MORNING_DEPTH:
        return True
    if stage.knots.fluxes_given:
        return bool(row[SENSIBLE] + 0.07 * row[LATENT] <= 0.0)
    if stage.knots.net_radiation_given:
        return bool(row[NET_RADIATION] <= 0.0)
    return bool((1.0 - stage.ground.albedo) * row[SHORTWAVE] < 60.0)


def run(scenario: Scenario, *, control: Control = STANDARD, heights: tuple[float, ...] = HEIGHTS,
        known: Known | None = None, by_day: bool = False) -> Run:  # fmt: skip
    """Run a scenario through its hours.

    Parameters
    ----------
    scenario : Scenario
    control : Control
        Accuracy of the day's march.
    heights : tuple of float
        Heights [m above ground] at which temperatures are kept.
    known : Known, optional
        Taken over from another run of the same profile; soil None is found anew.
    by_day : bool
        Start with the slab whatever the surface does then (cheaper, for comparing runs with each other).

    Raises
    ------
    ModelError
        Where the equations cannot be solved.
    ScenarioError
        Where inputs contradict each other.
    """
    stage = _Stage(scenario, control, heights, known)
    soil = known.soil if known is not None else None
    if soil is None and not stage.knots.fluxes_given:
        soil = ground_start(scenario, stage.ground)
    layers = soil.soil if soil is not None else (float(scenario.profile.temperature[0]),) * SOIL_LAYERS
    skin = soil.skin if soil is not None else float(scenario.profile.temperature[0])
    handover = Handover(from_profile(scenario.profile), 0.0, 0.0, layers, skin, math.nan, (0.0,) * SUMS)
    parts: list[Part] = []
    night = not by_day and _starts_by_night(stage, handover.air)
    last = len(stage.times) - 1
    first, reason = 0, EVENING
    while first < last and reason in (EVENING, MORNING):
        if night:
            part, reason, handover = _by_night(stage, first, handover)
        else:
            patience = last + 1 if by_day else (AT_START if first == 0 else AT_DAWN)
            part, reason, handover = _by_day(stage, first, handover, patience)
        parts.append(part)
        first, night = part.last, not night
    return _collect(stage, tuple(parts), STOPS.get(reason, "end of the run"), soil)


def _collect(stage: _Stage, parts: tuple[Part, ...], stopped: str, soil: GroundStart | None) -> Run:
    table = np.array([list(row) for row in stage.record])
    day = np.zeros(len(table), dtype=bool)
    for part in parts:
        day[part.first : part.last + 1] = part.kind == DAY
    return Run(
        scenario=stage.scenario, time=stage.knots.time, fields={n: table[:, INDEX[n]] for n in NAMES},
        heights=stage.heights, temperatures=table[:, FIELDS:], day=day, residual_top=_residual_tops(parts, table),
        parts=parts, stopped=stopped, ground=stage.ground, soil_start=soil, anchor=stage.anchor,
        free=stage.free, surface_pressure=stage.place.pressure,
    )  # fmt: skip


def _residual_tops(parts: tuple[Part, ...], table: Array) -> Array:
    """Top [m] of the layer that the last day left behind, sinking with the air, until the next day's slab reaches it."""
    tops = np.full(len(table), math.nan)
    top = math.nan
    for part in parts:
        if part.kind == NIGHT and part.first > 0:
            top = float(table[part.first - 1, INDEX["depth"]])
        if math.isnan(top):
            continue
        inside = slice(part.first, part.last + 1)
        sunk = table[inside, INDEX["sunk"]].copy()
        if part.course is not None:
            sunk[-1] = part.course.offsets.sunk  # the record at a shared knot is that of the day that begins there
        tops[inside] = [_moved_top(part.air, top, float(s)) for s in sunk]
        top = float(tops[part.last])
        if part.kind == DAY:
            reached = np.flatnonzero(table[inside, INDEX["depth"]] >= tops[inside])
            if reached.size:
                tops[part.first + reached[0] : part.last + 1] = math.nan
                top = math.nan
    return tops


def _moved_top(air: Aloft, top: float, sunk: float) -> float:
    """Height [m] now of the air that was at ``top`` [m] before it sank by ``sunk`` [1]."""
    if not math.isfinite(sunk):
        return math.nan
    height, mass = np.asarray(air.height), np.asarray(air.mass)
    now = origins(air, np.array([np.interp(top, height, mass)]), -sunk)
    return float(np.interp(now[0], mass, height))
