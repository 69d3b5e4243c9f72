"""The night on its own: a stable column from a profile in the evening to the next morning.

`run` marches the column with forcing tables and records what it says; the day-and-night driver calls the same kernels
(`slab.night_step.advance`, `slab.night_answers`). Fluxes: sensible and latent positive upward, ground flux positive into
the soil, net radiation positive downward.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from forcing.air import CP_DRY, KAPPA, P_REFERENCE
from forcing.errors import ModelError
from forcing.soil import layer_thicknesses
from forcing.surface import Ground, surface_resistance
from slab.night_answers import (
    CROSSING_HEIGHT,
    REGIMES,
    flux_needed,
    fog_depth,
    friction_velocity,
    heat_content,
    largest_flux,
    minimum_wind,
    read_air,
    regime,
    rime,
    sinking_rates,
    stress_depth,
)
from slab.night_closure import CLOSURES
from slab.night_grid import FIRST_CELL, LEVELS, TOP, Column, Grid, Numbers, build_grid, cell_edges, cell_means, numbers
from slab.night_step import advance
from slab.night_surface import BOUNDARIES, ENERGY, TEMPERATURE, Drive, Footing, footing, neutral_logs
from slab.night_terms import Method, Outside, Soil, Work, make_work, right_side

Array = NDArray[np.float64]
SKIN_CAPACITY = (
    2000.0  # [J m-2 K-1] about half a millimetre of water: follows the balance within two minutes (own choice)
)
CHUNK = 300.0  # [s] forcing and long-wave are held this long; against 75 s this costs up to 0.04 K (600 s: 0.1 K; own measurement)
HEIGHTS = (1.5, 2.0, 9.0, 10.0)
# a cut-off decouples layers at instants that small errors move, so `short` steps more finely (own measurement)
TIGHTER = {"blend": 1.0, "short": 0.3}


@dataclass(frozen=True, slots=True)
class NightStart:
    """The column at the start.

    `height` (k,) m above ground, `theta` K, `humidity` kg/kg, `u`, `v` m s-1, all (k,); `surface_pressure` Pa; `skin` K;
    `soil` (m,) K of the soil layers from the top; `coriolis` s-1.
    """

    height: Array
    theta: Array
    humidity: Array
    u: Array
    v: Array
    surface_pressure: float
    skin: float
    soil: tuple[float, ...]
    coriolis: float


@dataclass(frozen=True, slots=True)
class NightForcing:
    """Tables over `seconds` (k,) from the start, linear between; a single value is held.

    `shortwave_down`, `anthropogenic`, `longwave_down` W m-2 (the last replaced where a long-wave function is given);
    `geostrophic_u`, `geostrophic_v` m s-1; `surface_resistance` s m-1 (NaN: from the ground); `theta_rate` K s-1 and `humidity_rate` s-1 by
    advection, the same at all levels; `divergence` s-1 (positive = sinking); `skin_temperature` K for the boundary
    `temperature`; `sensible`, `latent` W m-2 for `flux`.
    """

    seconds: Array
    geostrophic_u: Array
    geostrophic_v: Array
    shortwave_down: Array = field(default_factory=lambda: np.zeros(1))
    anthropogenic: Array = field(default_factory=lambda: np.zeros(1))
    longwave_down: Array = field(default_factory=lambda: np.zeros(1))
    surface_resistance: Array = field(default_factory=lambda: np.full(1, np.nan))
    theta_rate: Array = field(default_factory=lambda: np.zeros(1))
    humidity_rate: Array = field(default_factory=lambda: np.zeros(1))
    divergence: Array = field(default_factory=lambda: np.zeros(1))
    skin_temperature: Array = field(default_factory=lambda: np.zeros(1))
    sensible: Array = field(default_factory=lambda: np.zeros(1))
    latent: Array = field(default_factory=lambda: np.zeros(1))

    def at(self, name: str, seconds: float) -> float:
        """Value of one table at a time."""
        values = getattr(self, name)
        if values.size == 1:
            return float(values[0])
        return float(np.interp(seconds, self.seconds, values))


@dataclass(frozen=True, slots=True)
class NightOptions:
    """Closure `blend` or `short`; boundary `energy`, `temperature` or `flux`; levels; factor on the tolerances."""

    closure: str = "blend"
    boundary: str = "energy"
    levels: int = LEVELS
    first_cell: float = FIRST_CELL
    top: float = TOP
    tolerance: float = 1.0
    chunk: float = CHUNK
    output: float = 1800.0
    heights: tuple[float, ...] = HEIGHTS
    skin_capacity: float = SKIN_CAPACITY
    soil_thickness: tuple[float, ...] = ()
    constant_density: float | None = None


@dataclass(frozen=True, slots=True)
class Budget:
    """Changes [J m-2] and integrated fluxes [J m-2] of a night; `air_*` in cp x exner x theta, `water_*` in kg m-2."""

    air_change: float
    air_input: float
    ground_change: float
    ground_input: float
    water_change: float
    water_input: float
    turnover: float

    @property
    def relative_error(self) -> float:
        """Largest misclosure of heat over the heat that changed hands."""
        worst = max(abs(self.air_change - self.air_input), abs(self.ground_change - self.ground_input))
        return worst / max(self.turnover, 1.0)


@dataclass(frozen=True, slots=True)
class NightResult:
    """Tables over `seconds` (t,); `temperature` (t, heights) K; profiles (t, n) on `height`.

    `regime` words; `minimum_wind` [m s-1] at `crossing_height`; `depth` [m] by stress; `deposit` 0 dry, 1 dew, 2 hoar frost.
    """

    seconds: Array
    height: Array
    pressure: Array
    theta: Array
    humidity: Array
    u: Array
    v: Array
    heights: tuple[float, ...]
    temperature: Array
    skin: Array
    soil: Array
    depth: Array
    friction_velocity: Array
    sensible: Array
    latent: Array
    ground: Array
    net_radiation: Array
    longwave_down: Array
    minimum_wind: Array
    crossing_wind: Array
    crossing_height: float
    regime: tuple[str, ...]
    fog_depth: Array
    deposit: Array
    budget: Budget
    steps: int
    rejected: int


@dataclass(frozen=True, slots=True)
class Setup:
    """Everything the kernels need, built once."""

    method: Method
    grid: Grid
    foot: Footing
    soil: Soil
    state: Column
    work: Work
    log_ratio: float


LongWave = Callable[[Setup, float], tuple[float, Numbers]]
"""(setup, seconds since the last call) -> down at the ground [W m-2], heating of every cell's theta [K s-1]."""


def layered_soil(thickness: tuple[float, ...], conductivity: float, heat_capacity: float) -> Soil:
    """Capacities and conductances of soil layers of `thickness` [m]."""
    dz = np.asarray(thickness)
    return Soil(numbers(heat_capacity * dz), numbers(conductivity / (0.5 * (dz[1:] + dz[:-1]))))


def foot_of(ground: Ground, grid: Grid, state: Column, *, pressure: float, first_layer: float,
            skin_capacity: float) -> Footing:  # fmt: skip
    """The kernels' view of the ground; skin conductance in series with half the first soil layer [m]."""
    exner = (pressure / P_REFERENCE) ** KAPPA
    series = 1.0 / (1.0 / ground.skin_conductance + 0.5 * first_layer / ground.soil_conductivity)
    return footing(
        height=grid.height[0], roughness_momentum=ground.roughness_momentum, roughness_heat=ground.roughness_heat,
        emissivity=ground.emissivity * ground.sky_view, skin_capacity=skin_capacity, skin_conductance=series,
        soil_conductivity=ground.soil_conductivity, soil_capacity=ground.soil_heat_capacity, pressure=pressure, exner=exner,
        temperature=state.theta[0] * exner, snow=ground.snow,
    )  # fmt: skip


def prepare(start: NightStart, ground: Ground, options: NightOptions) -> Setup:
    """Build grid, state and work space.

    Raises
    ------
    ModelError
        If closure, boundary or the number of soil temperatures are not usable.
    """
    for name, known in ((options.closure, CLOSURES), (options.boundary, BOUNDARIES)):
        if name not in known:
            raise ModelError(f"unknown name {name!r}", remedy=f"use one of {', '.join(known)}")
    thickness = options.soil_thickness or layer_thicknesses(ground.soil_conductivity, ground.soil_heat_capacity)
    if len(thickness) != len(start.soil):
        raise ModelError(
            f"{len(start.soil)} soil temperatures for {len(thickness)} layers", remedy="give one temperature a layer"
        )
    edges = cell_edges(options.levels, options.first_cell, options.top)
    theta, humidity, u, v = (
        cell_means(edges, start.height, x) for x in (start.theta, start.humidity, start.u, start.v)
    )
    grid = build_grid(
        edges, theta, humidity, surface_pressure=start.surface_pressure, roughness=ground.roughness_momentum,
        constant_density=options.constant_density,
    )  # fmt: skip
    state = Column(
        numbers(theta), numbers(humidity), numbers(u), numbers(v), numbers(start.soil), numbers([start.skin])
    )
    foot = foot_of(ground, grid, state, pressure=start.surface_pressure, first_layer=thickness[0],
                   skin_capacity=options.skin_capacity)  # fmt: skip
    if options.constant_density is not None:
        foot = foot._replace(density=options.constant_density)
    scale = options.tolerance * TIGHTER[options.closure]
    method = Method(CLOSURES[options.closure], BOUNDARIES[options.boundary], 0.05 * scale, 0.1 * scale, 0.2 * scale)
    soil = layered_soil(thickness, ground.soil_conductivity, ground.soil_heat_capacity)
    log_ratio = neutral_logs(CROSSING_HEIGHT, ground.roughness_momentum, ground.roughness_heat)[0]
    return Setup(method, grid, foot, soil, state, make_work(options.levels, len(thickness)), log_ratio)


def outside_air(
    forcing: NightForcing, setup: Setup, seconds: float, coriolis: float, heating: Numbers | None
) -> Outside:
    """What acts on the air around `seconds`: advection, sinking, long-wave heating, pressure gradient."""
    n = len(setup.state.theta)
    theta_rate = numbers(np.full(n, forcing.at("theta_rate", seconds)))
    humidity_rate = numbers(np.full(n, forcing.at("humidity_rate", seconds)))
    u_force = numbers(np.full(n, -coriolis * forcing.at("geostrophic_v", seconds)))
    v_force = numbers(np.full(n, coriolis * forcing.at("geostrophic_u", seconds)))
    if heating is not None:
        for i in range(n):
            theta_rate[i] += heating[i]
    divergence = forcing.at("divergence", seconds)
    if divergence != 0.0:
        pairs = zip(setup.state[:4], (theta_rate, humidity_rate, u_force, v_force), strict=True)
        for values, out in pairs:
            sinking_rates(divergence, setup.grid, values, values[-1], out)
    return Outside(theta_rate, humidity_rate, u_force, v_force, coriolis)


def drive_ground(setup: Setup, ground: Ground, forcing: NightForcing, seconds: float, length: float,
                 longwave: float) -> Drive:  # fmt: skip
    """What acts on the ground in a chunk of `length` [s] around `seconds`."""
    half = 0.5 * length
    rate = 0.0
    if setup.method.boundary == TEMPERATURE:
        change = forcing.at("skin_temperature", seconds + half) - forcing.at("skin_temperature", seconds - half)
        rate = change / length
    shortwave = forcing.at("shortwave_down", seconds)
    resistance = forcing.at("surface_resistance", seconds)
    if np.isnan(resistance):
        state, foot = setup.state, setup.foot
        resistance = surface_resistance(
            ground, shortwave, state.theta[0] * foot.exner, state.humidity[0], foot.pressure
        )
    absorbed = (1.0 - ground.albedo) * shortwave + forcing.at("anthropogenic", seconds)
    return Drive(absorbed, longwave, resistance, rate, forcing.at("sensible", seconds), forcing.at("latent", seconds))


def run(start: NightStart, ground: Ground, forcing: NightForcing, *, duration: float,
        options: NightOptions | None = None, longwave: LongWave | None = None) -> NightResult:  # fmt: skip
    """Carry a column through a night of `duration` [s].

    Parameters
    ----------
    longwave : callable, optional
        Long-wave scheme for column and ground; without it the forcing's `longwave_down` acts on the ground and the
        air has no long-wave divergence.

    Raises
    ------
    ModelError
        If the equations cannot be solved, with the hour at which it happened.
    """
    options = options or NightOptions()
    setup = prepare(start, ground, options)
    state, grid = setup.state, setup.grid
    before = _contents(setup)
    totals = numbers([0.0] * 8)
    gained = [0.0, 0.0]
    records: list[dict[str, object]] = []
    step, now, due = 1.0, 0.0, 0.0
    while True:
        length = min(options.chunk, duration - now) if now < duration - 1e-6 else options.chunk
        middle = now + 0.5 * length
        down, heating = forcing.at("longwave_down", middle), None
        if longwave is not None:
            down, heating = longwave(setup, options.chunk if now > 0.0 else 0.0)
        outside = outside_air(forcing, setup, middle, start.coriolis, heating)
        drive = drive_ground(setup, ground, forcing, middle, length, down)
        if now >= due - 1e-6:
            records.append(observe(setup, ground, options, drive, outside, now))
            due += options.output
        if now >= duration - 1e-6:
            break
        step = advance(
            setup.method, grid, setup.foot, setup.soil, drive, outside, state, setup.work, totals, length, step
        )
        if step < 0.0:
            raise ModelError(
                f"the night column could not be solved at {now / 3600.0:.2f} h",
                remedy="check wind and temperature input",
            )
        for i in range(len(state.theta)):
            gained[0] += grid.mass[i] * outside.theta_rate[i] * length
            gained[1] += grid.mass[i] * outside.humidity_rate[i] * length
        now += length
    budget = _budget(setup, before, totals, gained, boundary=setup.method.boundary)
    return _collect(records, setup, options, budget, totals)


def _contents(setup: Setup) -> tuple[float, float, float]:
    """Heat of the air [K kg m-2], of skin and soil [J m-2], water in the air [kg m-2]."""
    state = setup.state
    soil = sum(c * t for c, t in zip(setup.soil.capacity, state.soil, strict=True))
    water = sum(m * q for m, q in zip(setup.grid.mass, state.humidity, strict=True))
    return heat_content(setup.grid, state), soil + setup.foot.skin_capacity * state.skin[0], water


def _budget(setup: Setup, before: tuple[float, float, float], totals: Numbers, gained: list[float], *,
            boundary: int) -> Budget:  # fmt: skip
    after = _contents(setup)
    joule = CP_DRY * setup.foot.exner
    ground_change = after[1] - before[1]
    ground_input = totals[2] - totals[3] - totals[4] if boundary == ENERGY else ground_change
    return Budget(
        joule * (after[0] - before[0]), joule * (totals[0] + gained[0]), ground_change, ground_input,
        after[2] - before[2], totals[1] + gained[1],
        abs(totals[2]) + abs(totals[3]) + abs(totals[4]) + joule * abs(gained[0]),
    )  # fmt: skip


def observe(setup: Setup, ground: Ground, options: NightOptions, drive: Drive, outside: Outside,
            now: float) -> dict[str, object]:  # fmt: skip
    """Everything one record holds."""
    state, grid, foot = setup.state, setup.grid, setup.foot
    work = setup.work
    link = right_side(setup.method, grid, foot, setup.soil, drive, outside, state, work.rates, work, True)
    rough = (ground.roughness_momentum, ground.roughness_heat)
    crossing = read_air(grid, foot, state, link, *rough, CROSSING_HEIGHT)
    needed = flux_needed(setup.method.boundary, foot, link)
    possible = largest_flux(crossing.wind, CROSSING_HEIGHT, setup.log_ratio, state.theta[0], foot.density)
    return {
        "seconds": now,
        "theta": list(state.theta), "humidity": list(state.humidity), "u": list(state.u), "v": list(state.v),
        "temperature": [read_air(grid, foot, state, link, *rough, z).temperature for z in options.heights],
        "skin": state.skin[0], "soil": list(state.soil),
        "depth": stress_depth(grid, state, work.exchange, link),
        "friction_velocity": friction_velocity(foot, state, link),
        "sensible": CP_DRY * foot.exner * link.heat, "latent": link.latent_heat * link.vapour,
        "ground": link.ground, "net_radiation": link.net_radiation, "longwave_down": drive.longwave_down,
        "minimum_wind": minimum_wind(needed, CROSSING_HEIGHT, setup.log_ratio, state.theta[0], foot.density),
        "crossing_wind": crossing.wind,
        "regime": REGIMES[regime(needed, possible, link.heat)],
        "fog_depth": fog_depth(grid, state), "deposit": float(rime(state.skin[0], link.vapour)),
    }  # fmt: skip


def _collect(records: list[dict[str, object]], setup: Setup, options: NightOptions, budget: Budget,
             totals: Numbers) -> NightResult:  # fmt: skip
    words = tuple(str(r["regime"]) for r in records)
    tables = {k: np.array([r[k] for r in records], dtype=np.float64) for k in records[0] if k != "regime"}
    return NightResult(
        **tables, regime=words, height=np.array(setup.grid.height), pressure=np.array(setup.grid.pressure),
        heights=options.heights, crossing_height=CROSSING_HEIGHT, budget=budget, steps=int(totals[6]),
        rejected=int(totals[7]),
    )  # fmt: skip
