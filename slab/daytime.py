"""The day's march: surface exchange, entrainment and soil stepped together by an adaptive Heun 2(1) pair.

Kernels only. The driver hands over a forcing table with one row per knot (a few minutes apart, linear between);
steps never cross a knot, so the forcing is smooth inside a step.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from forcing.air import (
    CP_DRY,
    GRAVITY,
    KAPPA,
    P_REFERENCE,
    R_DRY,
    VIRTUAL,
)
from forcing.soil import soil_rates_from
from forcing.speed import kernel
from forcing.surface import Exchange, Ground, energy_balance, energy_balance_net, imposed_fluxes
from forcing.table import (
    ANTHROPOGENIC,
    COLUMNS,
    DIVERGENCE,
    FRICTION,
    GEOSTROPHIC_U,
    GEOSTROPHIC_V,
    HEATING,
    LATENT,
    LATER_WEIGHT,
    LONGWAVE,
    MOISTENING,
    NET_RADIATION,
    RADIATIVE,
    SENSIBLE,
    SHORTWAVE,
    WIND_10M,
)
from slab.column import Aloft, Sample, as_numbers, blended, height_of, sample
from slab.growth import (
    Closure,
    Slab,
    cumulus_fraction,
    encroached_mass,
    entrainment,
    humidity_spread,
    slab_at,
    velocity_scale,
)

# members of the state vector
MASS, HEAT, VAPOUR, EAST, NORTH, SOIL = 0, 1, 2, 3, 4, 5
SOIL_LAYERS = 6
SURFACE_HEAT = SOIL + SOIL_LAYERS  # running sums of what went into the deficits: their closure is the budget
SURFACE_VAPOUR = SURFACE_HEAT + 1
ALOFT_HEAT = SURFACE_HEAT + 2
ALOFT_VAPOUR = SURFACE_HEAT + 3
SENSIBLE_ENERGY = SURFACE_HEAT + 4
GROUND_ENERGY = SURFACE_HEAT + 5
MEMBERS = SURFACE_HEAT + 6

SURFACE_LAYER = 0.1  # share of the mixed layer that is surface layer (AMS Glossary)
STABLE_REFERENCE = 10.0  # [m] that top where the surface takes heat from a slab that has just stopped being fed (our choice)
ENCROACHING = 0.02  # growth over w* where depth follows from heat alone; only spreads humidity under cumulus (our choice)
LEAST_REFERENCE = 2.0  # [m] lowest height at which slab values stand for the surface layer's top
THETA_TOLERANCE = 0.005  # [K] local error of slab temperature

Numbers = Sequence[float]


class Place(NamedTuple):
    """What does not change during a run: surface pressure [Pa], Coriolis parameter [s-1], and switches (0 or 1)."""

    pressure: float
    coriolis: float
    fluxes_given: float
    friction_given: float
    wind_given: float
    net_radiation_given: float
    has_later: float
    cumulus: float
    kinematic: float


class Offsets(NamedTuple):
    """What has happened to the air aloft since the start of the run, at one instant.

    ``sunk`` integral of divergence [1], ``warmed`` [K], ``moistened`` [kg kg-1], ``later`` weight of a later profile
    and ``later_rate`` its change [s-1], ``divergence`` [s-1].
    """

    sunk: float
    warmed: float
    moistened: float
    later: float
    later_rate: float
    divergence: float


class Flow(NamedTuple):
    """Everything at one instant that the output needs; fluxes [W m-2], speeds [m s-1]."""

    depth: float
    theta: float
    humidity: float
    jump_theta: float
    jump_humidity: float
    jump_virtual: float
    entrainment: float
    convective_velocity: float
    buoyancy_flux: float
    cumulus: float
    shortwave: float
    longwave: float
    wind_speed: float
    wind_height: float
    reference_height: float
    exchange: Exchange


@kernel
def offsets_at(start: Offsets, row: Numbers, following: Numbers, span: float, tau: float) -> Offsets:
    """Offsets ``tau`` [s] after a knot, for rates linear over the ``span`` [s] to the next."""
    f = tau / span
    mean = 1.0 - 0.5 * f
    half = 0.5 * f
    return Offsets(
        start.sunk + tau * (mean * row[DIVERGENCE] + half * following[DIVERGENCE]),
        start.warmed
        + tau * (mean * (row[HEATING] + row[RADIATIVE]) + half * (following[HEATING] + following[RADIATIVE])),
        start.moistened + tau * (mean * row[MOISTENING] + half * following[MOISTENING]),
        row[LATER_WEIGHT] + f * (following[LATER_WEIGHT] - row[LATER_WEIGHT]),
        (following[LATER_WEIGHT] - row[LATER_WEIGHT]) / span,
        row[DIVERGENCE] + f * (following[DIVERGENCE] - row[DIVERGENCE]),
    )


@kernel
def air_at(air: Aloft, later: Aloft, level: float, at: Offsets) -> Sample:
    """The air aloft at mass ``level`` without its uniform warming and moistening."""
    return blended(air, later, level, at.sunk, at.later)


@kernel
def surface_exchange(y: Numbers, place: Place, ground: Ground, thickness: Numbers, values: Numbers, depth: float,
                     theta: float, humidity: float, shade: float, memory: list[float]) -> tuple[Exchange, float, float]:  # fmt: skip
    """Fluxes between ground and slab: from the energy balance, or as given. ``values`` is the forcing now.

    Also the wind [m s-1] and the height [m] that stand for the top of the surface layer. In an evening's first stable
    minutes that top is `STABLE_REFERENCE`, with the slab's wind brought down by the neutral logarithmic law: stable
    similarity over a tenth of a deep slab would cool the skin by ten kelvins. At neutral both heights agree.
    """
    least = max(LEAST_REFERENCE, 10.0 * ground.roughness_momentum)
    reference = max(SURFACE_LAYER * depth, least)
    wind = math.sqrt(y[EAST] * y[EAST] + y[NORTH] * y[NORTH])
    if place.kinematic > 0.0:
        unknown = math.nan
        exchange = Exchange(
            unknown, unknown, unknown, unknown, unknown, values[FRICTION], unknown, unknown, unknown, unknown, 0.0,
            unknown, unknown,
        )  # fmt: skip
        return exchange, wind, reference
    slab_wind_speed = wind
    if place.wind_given > 0.0:
        wind = values[WIND_10M]
    exchange = _exchange_below(y, place, ground, thickness, values, depth, theta, humidity, shade, memory, wind, reference)
    low = max(STABLE_REFERENCE, least)
    if exchange.inverse_obukhov > 0.0 and reference > low:
        if place.wind_given == 0.0:
            rough = ground.roughness_momentum
            wind = slab_wind_speed * math.log((low + rough) / rough) / math.log((reference + rough) / rough)
        reference = low
        exchange = _exchange_below(
            y, place, ground, thickness, values, depth, theta, humidity, shade, memory, wind, reference
        )
    memory[0] = exchange.skin_temperature
    memory[1] = exchange.inverse_obukhov
    return exchange, wind, reference


@kernel
def _exchange_below(y: Numbers, place: Place, ground: Ground, thickness: Numbers, values: Numbers, depth: float,
                    theta: float, humidity: float, shade: float, memory: list[float], wind: float,
                    reference: float) -> Exchange:  # fmt: skip
    """Fluxes through a surface layer whose top, at ``reference`` [m], has the slab's temperature and humidity."""
    wind_height = 10.0 if place.wind_given > 0.0 else reference
    warm = theta * (place.pressure / P_REFERENCE) ** KAPPA
    if place.fluxes_given > 0.0:
        friction = values[FRICTION] if place.friction_given > 0.0 else math.nan
        return imposed_fluxes(
            ground, values[SENSIBLE], values[LATENT], warm, humidity, reference, wind, wind_height, depth,
            place.pressure, friction, memory[1],
        )  # fmt: skip
    half = 2.0 * ground.soil_conductivity / thickness[0]
    shortwave = values[SHORTWAVE] * shade
    if place.net_radiation_given > 0.0:
        return energy_balance_net(
            ground, shortwave, values[NET_RADIATION], warm, humidity, reference, wind, wind_height, depth,
            place.pressure, y[SOIL], half, values[ANTHROPOGENIC], memory[0], memory[1],
        )  # fmt: skip
    return energy_balance(
        ground, shortwave, values[LONGWAVE], warm, humidity, reference, wind, wind_height, depth,
        place.pressure, y[SOIL], half, values[ANTHROPOGENIC], memory[0], memory[1],
    )  # fmt: skip


@kernel
def tendencies(y: Numbers, dy: list[float], tau: float, span: float, row: Numbers, following: Numbers,
               values: list[float], start: Offsets, air: Aloft, later: Aloft, place: Place, ground: Ground,
               thickness: Numbers, closure: Closure, memory: list[float]) -> Flow:  # fmt: skip
    """Rates of change of the state ``y`` into ``dy``, ``tau`` [s] after a knot; returns the flow of that instant."""
    f = tau / span
    for j in range(COLUMNS):
        values[j] = row[j] + f * (following[j] - row[j])
    at = offsets_at(start, row, following, span, tau)
    mass = y[MASS]
    if closure.encroachment > 0.0:
        mass = encroached_mass(air, later, at.later, y[HEAT], y[VAPOUR], at.sunk, mass)
    aloft = air_at(air, later, mass, at)
    slab = slab_at(mass, y[HEAT], y[VAPOUR], aloft)
    depth = height_of(air, mass)
    theta = slab.theta + at.warmed
    humidity = max(slab.humidity + at.moistened, 1e-7)
    density = place.pressure / (R_DRY * theta * (place.pressure / P_REFERENCE) ** KAPPA * (1.0 + VIRTUAL * humidity))
    if place.kinematic > 0.0:
        density = 1.0
    exchange, wind, reference = surface_exchange(
        y, place, ground, thickness, values, depth, theta, humidity, 1.0 - memory[2], memory
    )
    exner = (place.pressure / P_REFERENCE) ** KAPPA
    heat_flux = exchange.sensible / (CP_DRY * exner)
    vapour_flux = exchange.evaporation
    if place.kinematic > 0.0:
        heat_flux = values[SENSIBLE]
        vapour_flux = values[LATENT]
    virtual_flux = (heat_flux * (1.0 + VIRTUAL * humidity) + VIRTUAL * theta * vapour_flux) / density
    convective = velocity_scale(depth, virtual_flux, theta)
    speed = 0.0
    if closure.encroachment == 0.0:
        speed = entrainment(closure, virtual_flux, exchange.friction_velocity, depth, theta, slab.jump_virtual)
    cloud = 0.0
    vented = 0.0
    carried = 0.0
    if place.cumulus > 0.0 and convective > 0.0:
        pressure = place.pressure - GRAVITY * mass
        warm = theta * (pressure / P_REFERENCE) ** KAPPA
        growing = speed if closure.encroachment == 0.0 else ENCROACHING * convective
        cloud = cumulus_fraction(humidity, warm, pressure, depth, slab.jump_humidity, growing, convective)
        vented = density * cloud * convective
        carried = vented * humidity_spread(slab.jump_humidity, growing, convective)
    slab_budgets(
        y, dy, mass, density * speed, vented, carried, heat_flux, vapour_flux, slab, at, air, later, place, exchange
    )
    if place.fluxes_given > 0.0 or place.kinematic > 0.0:
        for i in range(SOIL_LAYERS):
            dy[SOIL + i] = 0.0
    else:
        soil_rates_from(
            y, SOIL, thickness, ground.soil_conductivity, ground.soil_heat_capacity, exchange.ground, dy
        )
    slab_wind(y, dy, values, mass, density * speed, wind, exchange.friction_velocity, density, aloft, place)
    return Flow(
        depth, theta, humidity, slab.jump_theta, slab.jump_humidity, slab.jump_virtual, speed, convective,
        virtual_flux, cloud, values[SHORTWAVE] * (1.0 - memory[2]), values[LONGWAVE], wind,
        10.0 if place.wind_given > 0.0 else reference, reference, exchange,
    )  # fmt: skip


@kernel
def slab_budgets(y: Numbers, dy: list[float], mass: float, entrained: float, vented: float, carried: float,
                 heat_flux: float, vapour_flux: float, slab: Slab, at: Offsets, air: Aloft, later: Aloft, place: Place,
                 exchange: Exchange) -> None:  # fmt: skip
    """Mass and deficit rates. Sinking carries deficit away sideways below the cap; cumulus take slab air out and
    profile air comes down in its stead, and the moistest air goes first: ``carried`` [kg m-2 s-1] is the vapour flux of
    that excess, mass flux times the spread of humidity (Neggers, Stevens and Neelin 2006; recalled). A profile that moves
    to a later one changes the deficit it is read against."""
    aloft = slab.air
    lid = min(mass, air.cap)
    drain_heat = at.divergence * (lid * slab.theta - aloft.sum_theta_below_cap)
    drain_vapour = at.divergence * (lid * slab.humidity - aloft.sum_humidity_below_cap)
    aloft_heat = -drain_heat + vented * slab.jump_theta
    aloft_vapour = -drain_vapour + vented * slab.jump_humidity - carried
    if place.has_later > 0.0 and at.later_rate != 0.0:
        then = sample(later, mass, 0.0)
        now = sample(air, mass, at.sunk)
        aloft_heat -= at.later_rate * (then.sum_theta - now.sum_theta)
        aloft_vapour -= at.later_rate * (then.sum_humidity - now.sum_humidity)
    dy[MASS] = entrained - vented - at.divergence * lid
    dy[HEAT] = heat_flux + aloft_heat
    dy[VAPOUR] = vapour_flux + aloft_vapour
    dy[SURFACE_HEAT] = heat_flux
    dy[SURFACE_VAPOUR] = vapour_flux
    dy[ALOFT_HEAT] = aloft_heat
    dy[ALOFT_VAPOUR] = aloft_vapour
    dy[SENSIBLE_ENERGY] = exchange.sensible
    dy[GROUND_ENERGY] = exchange.ground


@kernel
def slab_wind(y: Numbers, dy: list[float], values: Numbers, mass: float, entrained: float, wind: float,
              friction: float, density: float, aloft: Sample, place: Place) -> None:  # fmt: skip
    """Slab momentum: pressure gradient, rotation, surface stress and entrained momentum (Tennekes and Driedonks 1981)."""
    speed = max(math.sqrt(y[EAST] * y[EAST] + y[NORTH] * y[NORTH]), 0.1)
    drag = density * friction * friction / (speed * mass)
    if wind <= 0.0:
        drag = 0.0
    dy[EAST] = (
        place.coriolis * (y[NORTH] - values[GEOSTROPHIC_V]) - drag * y[EAST] + entrained * (aloft.u - y[EAST]) / mass
    )
    dy[NORTH] = (
        -place.coriolis * (y[EAST] - values[GEOSTROPHIC_U]) - drag * y[NORTH] + entrained * (aloft.v - y[NORTH]) / mass
    )


def no_ground() -> tuple[Ground, Numbers]:
    """Stand-ins for ground and soil layers where kinematic fluxes are imposed."""
    ground = Ground(*([1.0] * len(Ground._fields)))
    return ground, as_numbers(np.ones(SOIL_LAYERS))
