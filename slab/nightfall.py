"""A night inside a run: the stable column from one hand-over to the next, on the run's own forcing table."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from forcing.air import CP_DRY, STEFAN_BOLTZMANN, VIRTUAL
from forcing.errors import ModelError
from forcing.surface import Ground, surface_resistance
from forcing.table import (
    ANTHROPOGENIC,
    CLOUD,
    CLOUD_BASE,
    DIVERGENCE,
    GEOSTROPHIC_U,
    GEOSTROPHIC_V,
    HEATING,
    LATENT,
    LATER_WEIGHT,
    LONGWAVE,
    MOISTENING,
    NET_RADIATION,
    SENSIBLE,
    SHORTWAVE,
    WIND_10M,
)
from slab.column import Aloft, mass_of, pressure_at, sample
from slab.daytime import SURFACE_LAYER, Offsets, Place, offsets_at
from slab.handover import Handover, column_after_night, moved
from slab.march import EVENING, RAN_TO_END
from slab.night import NightOptions, NightStart, Setup, prepare
from slab.night_answers import (
    CROSSING_HEIGHT,
    flux_needed,
    fog_depth,
    friction_velocity,
    inverse_obukhov,
    largest_flux,
    minimum_wind,
    read_air,
    regime,
    rime,
    sinking_rates,
    stress_depth,
)
from slab.night_grid import Column, Grid, Numbers, numbers
from slab.night_step import advance
from slab.night_surface import ENERGY, Drive, Link
from slab.night_terms import Outside, right_side
from slab.radiation import NightSky
from slab.record import FIELDS, INDEX
from slab.start import turbulent_depth

Array = NDArray[np.float64]

CHUNK = 300.0  # [s] long-wave and forcing are held this long (NIGHT column: half of it changes a night by under 0.02 K)
COLUMN_TOP = 2000.0  # [m]
MAST = 10.0  # [m]
MORNING_DEPTH = 100.0  # [m] convective depth from which the slab takes over (Angevine et al. 2001 end the transition at 200 m)
MORNING_LASTS = 4.0 * 3600.0  # [s]
SETTLES = 3600.0  # [s] after a run has started with the column
FADES = 100.0  # [m] a wind measured at the mast acts up to here. Chosen on two sets (tests/bench/mesonet_night, cases99): with
# 40 m the column keeps 0.65 m/s of error at the mast on one and 10 W m-2 of heat flux on the other, with 100 m 0.33 and 2,
# and 200 m takes the wind from above calm nights
RELAXATION = CHUNK  # [s] the shortest that forcing held through a chunk does not overshoot
MORNING = EVENING + 1


class NightNote(NamedTuple):
    """What the night says at one knot beyond the common record.

    Index of the regime, least and present wind at the crossing height [m s-1], fog depth [m], and 0 dry, 1 dew,
    2 hoar frost; ``theta``, ``humidity``, ``u``, ``v`` of the cells.
    """

    regime: int
    minimum_wind: float
    crossing_wind: float
    fog_depth: float
    deposit: int
    theta: Array
    humidity: Array
    u: Array
    v: Array


@dataclass(frozen=True, slots=True)
class NightCourse:
    """What one night leaves: the knot reached, why it ended, the hand-over, offsets of the air aloft, notes by knot."""

    reached: int
    reason: int
    handover: Handover
    height: Array
    mass: Array
    notes: dict[int, NightNote]
    offsets: Offsets


def begin(start: Handover, ground: Ground, place: Place, closure: str) -> Setup:
    """Cells, ground and work space for a night, holding exactly the heat and vapour that were handed over."""
    air = start.air
    top = min(COLUMN_TOP, 0.98 * float(air.height[-1]))
    options = NightOptions(closure=closure, boundary="flux" if place.fluxes_given > 0.0 else "energy", top=top)
    height, first, wet, u, v = (np.asarray(x) for x in (air.height, air.theta, air.humidity, air.u, air.v))
    evening = NightStart(height, first, wet, u, v, place.pressure, start.skin, start.soil, place.coriolis)
    setup = prepare(evening, ground, options)
    grid, state = setup.grid, setup.state
    mass = np.array([mass_of(air, float(z)) for z in edges_of(setup)])
    held = [sample(air, float(m), 0.0) for m in mass]
    cells = np.diff(mass)
    foot_of_wind = MAST if math.isnan(start.residual_top) else max(SURFACE_LAYER * start.residual_top, MAST)
    theta = np.diff([s.sum_theta for s in held]) / cells + start.heat / mass[-1]
    humidity = np.diff([s.sum_humidity for s in held]) / cells + start.vapour / mass[-1]
    for i in range(len(cells)):
        grid.mass[i] = float(cells[i])
        state.theta[i] = float(theta[i])
        state.humidity[i] = float(humidity[i])
        calm = _below(foot_of_wind, float(grid.height[i]), ground.roughness_momentum)
        state.u[i] *= calm
        state.v[i] *= calm
    return setup


def _below(top: float, height: float, roughness: float) -> float:
    """Share of the wind at ``top`` [m] that cells below it start with, by the neutral logarithmic law.

    A profile's first wind is read at 10 m; a slab's wind holds at the top of its surface layer.
    """
    if height >= top:
        return 1.0
    return math.log((height + roughness) / roughness) / math.log((top + roughness) / roughness)


def mixed_depth(grid: Grid, state: Column) -> float:
    """Depth [m] that convection from the ground has mixed: where virtual theta first passes its mean below."""
    virtual = np.asarray(state.theta) * (1.0 + VIRTUAL * np.asarray(state.humidity))
    mass = np.asarray(grid.mass)
    below = np.cumsum(mass * virtual) / np.cumsum(mass)
    over = np.flatnonzero(virtual[1:] >= below[:-1])
    return float(grid.height[int(over[0]) + 1] if over.size else grid.height[-1])


def edges_of(setup: Setup) -> Array:
    """Heights of the cell edges [m], shape (n + 1,)."""
    grid = setup.grid
    return np.concatenate(([0.0], np.asarray(grid.interface), [grid.height[-1] + 0.5 * grid.thickness[-1]]))


def _toward_measured(setup: Setup, measured: float) -> Array:
    """Rate [s-1] at which the lowest cells' wind is scaled so that it comes to the one ``measured`` at 10 m [m s-1].

    Relaxation toward a measurement (Hoke & Anthes 1976), in full up to the mast and fading above; the direction stays
    the column's own.
    """
    height = np.asarray(setup.grid.height)
    wind = float(np.interp(math.log(MAST), np.log(height), np.hypot(setup.state.u, setup.state.v)))
    share = np.clip((FADES - height) / (FADES - MAST), 0.0, 1.0)
    return share * (min(max(measured / max(wind, 0.2), 0.2), 5.0) - 1.0) / RELAXATION


def _outside(setup: Setup, place: Place, values: Array, heating: Numbers,
             later_change: tuple[Array, ...], later_rate: float, beyond: Sequence[float]) -> Outside:  # fmt: skip
    """What acts on the cells: their own long-wave in place of the free air's, advection, sinking, a
    later profile, the pressure gradient, a measured wind. ``beyond`` is the air one cell above the top."""
    state = setup.state
    n, coriolis = len(state.theta), place.coriolis
    scaling = _toward_measured(setup, float(values[WIND_10M])) if place.wind_given > 0.0 else np.zeros(n)
    rates = [
        np.full(n, values[HEATING]) + np.asarray(heating), np.full(n, values[MOISTENING]),
        -coriolis * values[GEOSTROPHIC_V] + scaling * np.asarray(state.u),
        coriolis * values[GEOSTROPHIC_U] + scaling * np.asarray(state.v),
    ]  # fmt: skip
    if later_rate != 0.0:
        rates = [rate + later_rate * change for rate, change in zip(rates, later_change, strict=True)]
    out = [numbers(rate) for rate in rates]
    if values[DIVERGENCE] != 0.0:
        for held, inflow, rate in zip(state[:4], beyond, out, strict=True):
            sinking_rates(float(values[DIVERGENCE]), setup.grid, held, inflow, rate)
    return Outside(out[0], out[1], out[2], out[3], coriolis)


def _drive(setup: Setup, ground: Ground, place: Place, values: Array, longwave: float) -> Drive:
    """What acts on the ground."""
    foot, state = setup.foot, setup.state
    absorbed = (1.0 - ground.albedo) * float(values[SHORTWAVE]) + float(values[ANTHROPOGENIC])
    if place.net_radiation_given > 0.0:
        emitted = STEFAN_BOLTZMANN * state.skin[0] ** 4
        longwave = emitted + (float(values[NET_RADIATION]) - (absorbed - float(values[ANTHROPOGENIC]))) / foot.emissivity
    resistance = surface_resistance(
        ground, float(values[SHORTWAVE]), state.theta[0] * foot.exner, state.humidity[0], foot.pressure
    )
    return Drive(absorbed, longwave, resistance, 0.0, float(values[SENSIBLE]), float(values[LATENT]))


def _write(record: list[float], setup: Setup, ground: Ground, drive: Drive, values: Array, link: Link, at: Offsets,
           totals: Numbers, gained: list[float], heights: Sequence[float], settling: bool) -> None:  # fmt: skip
    """One row of the run's record from the night column; slab members hold means over the turbulent depth.

    While the column is ``settling`` its stress is still that of a measured profile, so the depth is read from the bulk
    Richardson number instead.
    """
    grid, foot, state = setup.grid, setup.foot, setup.state
    rough = (ground.roughness_momentum, ground.roughness_heat)
    depth = stress_depth(grid, state, setup.work.exchange, link)
    if settling:
        virtual = np.asarray(state.theta) * (1.0 + VIRTUAL * np.asarray(state.humidity))
        depth = turbulent_depth(np.asarray(grid.height), virtual, np.hypot(np.asarray(state.u), np.asarray(state.v)))
    low = read_air(grid, foot, state, link, *rough, 2.0)
    high = read_air(grid, foot, state, link, *rough, 10.0)
    inside = max(1, int(np.searchsorted(np.asarray(grid.height), depth)))
    weight = np.asarray(grid.mass[:inside])
    mean = [float(np.dot(weight, np.asarray(x[:inside])) / weight.sum()) for x in state[:4]]
    sensible = CP_DRY * foot.exner * link.heat
    buoyancy = (link.heat * (1.0 + VIRTUAL * mean[1]) + VIRTUAL * mean[0] * link.vapour) / foot.density
    named = {
        "depth": depth, "mass": math.nan, "theta": mean[0], "humidity": mean[1], "east": mean[2], "north": mean[3],
        "jump_theta": math.nan, "jump_humidity": math.nan, "jump_virtual": math.nan, "entrainment": 0.0,
        "convective_velocity": 0.0, "buoyancy_flux": buoyancy, "cumulus_fraction": 0.0,
        "shortwave_down": float(values[SHORTWAVE]), "longwave_down": drive.longwave_down,
        "net_radiation": link.net_radiation, "sensible": sensible, "latent": link.latent_heat * link.vapour,
        "ground": link.ground, "skin_temperature": state.skin[0],
        "friction_velocity": friction_velocity(foot, state, link), "inverse_obukhov": inverse_obukhov(foot, state, link),
        "temperature_2m": low.temperature, "humidity_2m": low.humidity, "wind_10m": high.wind,
        "sunk": at.sunk, "warmed": at.warmed, "moistened": at.moistened, "later": at.later, "heat": math.nan,
        "vapour": math.nan, "surface_heat": totals[0], "surface_vapour": totals[1], "aloft_heat": gained[0],
        "aloft_vapour": gained[1], "sensible_energy": totals[3], "ground_energy": totals[5],
    }  # fmt: skip
    if setup.method.boundary != ENERGY:
        for name in ("net_radiation", "ground", "skin_temperature"):
            named[name] = math.nan
    for name, value in named.items():
        record[INDEX[name]] = value
    for j, z in enumerate(heights):
        record[FIELDS + j] = read_air(grid, foot, state, link, *rough, z).temperature


def _note(setup: Setup, ground: Ground, drive: Drive, link: Link) -> NightNote:
    grid, foot, state = setup.grid, setup.foot, setup.state
    crossing = read_air(grid, foot, state, link, ground.roughness_momentum, ground.roughness_heat, CROSSING_HEIGHT)
    needed = flux_needed(setup.method.boundary, foot, link)
    possible = largest_flux(crossing.wind, CROSSING_HEIGHT, setup.log_ratio, state.theta[0], foot.density)
    least = minimum_wind(needed, CROSSING_HEIGHT, setup.log_ratio, state.theta[0], foot.density)
    return NightNote(
        regime(needed, possible, link.heat), least, crossing.wind, fog_depth(grid, state), rime(state.skin[0], link.vapour),
        np.array(state.theta), np.array(state.humidity), np.array(state.u), np.array(state.v),
    )  # fmt: skip


def through_night(first: int, last: int, times: Array, table: Array, start: Handover, ground: Ground, place: Place,
                  sky: NightSky, later: Aloft | None, later_from: float, heights: Sequence[float],
                  record: Sequence[list[float]], closure: str = "blend") -> NightCourse:  # fmt: skip
    """Carry the column from knot ``first`` until the surface feeds it from below again, or to knot ``last``.

    It ends where the virtual flux has been upward for two knots and convection has mixed the lowest `MORNING_DEPTH`, so
    that the slab never takes over air that is still stratified; at the latest after `MORNING_LASTS`. Cells below
    ``later_from`` [m], the later profile's own layer, do not move to it.

    Raises
    ------
    ModelError
        Where the column's equations could not be solved.
    """
    setup = begin(start, ground, place, closure)
    state, grid = setup.state, setup.grid
    centre_mass = np.cumsum(np.asarray(grid.mass)) - 0.5 * np.asarray(grid.mass)
    change: tuple[Array, ...] = ()
    if later is not None:
        own = moved(start.air, None, _NOTHING, centre_mass)
        other = moved(later, None, _NOTHING, centre_mass)
        free = np.asarray(grid.height) >= later_from
        change = tuple(np.where(free, b - a, 0.0) for a, b in zip(own, other, strict=True))
    heat, vapour, *aloft, sensible, into = start.sums
    totals, gained = numbers([heat, vapour, 0.0, sensible, 0.0, into, 0.0, 0.0]), list(aloft)
    notes: dict[int, NightNote] = {}
    at, step, upward, k = _NOTHING, 1.0, 0, first
    over_top = np.array([float(np.sum(grid.mass)) + 0.5 * float(grid.mass[-1])])
    while True:
        beyond = [float(x[0]) for x in moved(start.air, later, at, over_top)]
        span = float(times[min(k + 1, last)] - times[k]) or CHUNK
        pieces = max(1, math.ceil(span / CHUNK - 1e-9))
        for piece in range(pieces):
            f = (piece + 0.5) / pieces
            values = table[k] + f * (table[min(k + 1, last)] - table[k])
            base = pressure_at(start.air, place.pressure, float(values[CLOUD_BASE]))
            down, heating = sky.fluxes(grid, state, setup.foot, float(values[CLOUD]), base, span / pieces)
            if sky.given:
                down = float(values[LONGWAVE])
            later_rate = float(table[min(k + 1, last), LATER_WEIGHT] - table[k, LATER_WEIGHT]) / span
            outside = _outside(setup, place, values, heating, change, later_rate, beyond)
            drive = _drive(setup, ground, place, values, down)
            if piece == 0:
                link = right_side(setup.method, grid, setup.foot, setup.soil, drive, outside, state, setup.work.rates,
                                  setup.work, True)  # fmt: skip
                if k == first and math.isfinite(start.residual_top):
                    for name, value in zip(("sunk", "warmed", "moistened", "later"), at[:4], strict=True):
                        record[k][INDEX[name]] = value
                else:
                    settling = math.isnan(start.residual_top) and times[k] - times[first] < SETTLES
                    _write(record[k], setup, ground, drive, table[k], link, at, totals, gained, heights, settling)
                notes[k] = _note(setup, ground, drive, link)
                upward = upward + 1 if record[k][INDEX["buoyancy_flux"]] > 0.0 else 0
                ready = upward >= 2 and mixed_depth(grid, state) >= MORNING_DEPTH
                if k == last or ready or upward * span >= MORNING_LASTS:
                    reason = RAN_TO_END if k == last else MORNING
                    return _finish(k, reason, setup, start, later, at, notes, totals, gained)
            length = span / pieces
            step = advance(setup.method, grid, setup.foot, setup.soil, drive, outside, state, setup.work, totals,
                           length, step)  # fmt: skip
            if step < 0.0:
                raise ModelError("the night column could not be solved", remedy="check wind and temperature input")
            gained[0] += length * float(np.dot(grid.mass, outside.theta_rate))
            gained[1] += length * float(np.dot(grid.mass, outside.humidity_rate))
        at = offsets_at(at, table[k].tolist(), table[k + 1].tolist(), span, span)
        k += 1


_NOTHING = Offsets(0.0, 0.0, 0.0, 0.0, 0.0, 0.0)


def _finish(k: int, reason: int, setup: Setup, start: Handover, later: Aloft | None, at: Offsets,
            notes: dict[int, NightNote], totals: Numbers, gained: list[float]) -> NightCourse:  # fmt: skip
    """Close the night: one table of cells and the air above them, moved by what happened to it meanwhile."""
    grid, state = setup.grid, setup.state
    air, heat, vapour = column_after_night(edges_of(setup), grid, state, start.air, later, at)
    residual = start.residual_top * math.exp(-at.sunk) if math.isfinite(start.residual_top) else math.nan
    handover = Handover(air, heat, vapour, tuple(state.soil), float(state.skin[0]), residual,
                        (totals[0], totals[1], gained[0], gained[1], totals[3], totals[5]))  # fmt: skip
    return NightCourse(k, reason, handover, np.asarray(grid.height), np.cumsum(np.asarray(grid.mass)), notes, at)

