"""The forcing of a run as one table: a row per knot, a column per input, linear between knots."""

from __future__ import annotations

import math
from datetime import datetime
from typing import NamedTuple
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from forcing.assumptions import wind_near
from forcing.cover import anthropogenic_course
from forcing.free_air import FreeAir
from forcing.scenario_types import Scenario
from forcing.sky import clear_sky_shortwave, cloud_factor, precipitable_water
from forcing.sun import solar_position

Array = NDArray[np.float64]

# columns of the forcing table, SI; a measured input that is missing at a knot is NaN
SHORTWAVE, LONGWAVE, NET_RADIATION, WIND_10M, GEOSTROPHIC_U, GEOSTROPHIC_V = 0, 1, 2, 3, 4, 5
DIVERGENCE, HEATING, MOISTENING, ANTHROPOGENIC, SENSIBLE, LATENT, FRICTION = 6, 7, 8, 9, 10, 11, 12
CLOUD, CLOUD_BASE, LATER_WEIGHT, RADIATIVE = 13, 14, 15, 16
COLUMNS = 17



class Knots(NamedTuple):
    """Forcing by knot: ``time`` [s since 1970 UTC] (n,), ``table`` (n, COLUMNS) and what of it was measured or given."""

    time: Array
    table: Array
    wind_given: bool
    longwave_given: bool
    net_radiation_given: bool
    fluxes_given: bool
    friction_given: bool


def knot_times(start: float, hours: float, spacing: float) -> Array:
    """Times of the knots [s since 1970 UTC]: start, every whole multiple of ``spacing`` [s] after it, and the end."""
    end = start + 3600.0 * hours
    first = math.floor(start / spacing) + 1
    inner = np.arange(first * spacing, end - 1e-6, spacing)
    inner = inner[inner > start + 1.0]
    return np.concatenate(([start], inner, [end]))


def shortwave(scenario: Scenario, time: Array) -> Array:
    """Short-wave at the ground [W m-2, positive down]: measured where given, else clear sky dimmed by cloud.

    Clear sky by Bird and Hulstrom (1981) with the profile's own precipitable water, cloud by Kasten and Czeplak (1980).
    """
    site, profile, weather = scenario.site, scenario.profile, scenario.weather
    sun = solar_position(time, site.latitude, site.longitude)
    clear = clear_sky_shortwave(
        sun.zenith,
        pressure=profile.surface_pressure,
        precipitable_water_cm=precipitable_water(profile.pressure, profile.humidity) / 10.0,
        aerosol_500nm=float(np.mean(weather.sample("aerosol_optical_depth", time))),
        ozone_cm=100.0 * float(np.mean(weather.sample("ozone_cm", time))),
        irradiance_factor=sun.irradiance_factor,
        albedo=scenario.cover.albedo,
    ).total
    computed = clear * cloud_factor(weather.sample("cloud_fraction", time))
    measured = weather.sample("shortwave_down_W_m2", time)
    return np.where(np.isnan(measured), computed, np.maximum(measured, 0.0))


def pressure_gradient_wind(scenario: Scenario, time: Array) -> tuple[Array, Array]:
    """Components of the pressure-gradient wind [m s-1, positive east and north], given or the profile's own aloft."""
    weather = scenario.weather
    speed = weather.sample("pressure_gradient_wind_m_s", time)
    from_deg = weather.sample("pressure_gradient_wind_from_deg", time)
    own_speed, own_from = wind_near(scenario.profile)
    if not weather.given("pressure_gradient_wind_m_s") and scenario.profile.wind_known:
        speed = np.full(time.shape, own_speed)
        from_deg = np.full(time.shape, own_from)
    if not weather.given("pressure_gradient_wind_from_deg") and scenario.profile.wind_known:
        from_deg = np.full(time.shape, own_from)
    angle = np.radians(from_deg)
    return -speed * np.sin(angle), -speed * np.cos(angle)


def anthropogenic_heat(scenario: Scenario, time: Array) -> Array:
    """Heat released by people [W m-2] at each time: the cover's daily mean times its course by local clock hour."""
    mean = scenario.cover.anthropogenic_heat
    if mean == 0.0:
        return np.zeros(time.shape)
    zone = ZoneInfo(scenario.site.time_zone)
    local = (datetime.fromtimestamp(t, zone) for t in time)
    return np.array([mean * anthropogenic_course(at.hour + at.minute / 60.0) for at in local])


def later_weight(scenario: Scenario, time: Array) -> Array:
    """Weight [0..1] of the later profile: linear in time from the release to it, held after."""
    if scenario.later is None:
        return np.zeros(time.shape)
    first = scenario.profile.valid.timestamp()
    return np.clip((time - first) / (scenario.later.valid.timestamp() - first), 0.0, 1.0)


def tabulate(scenario: Scenario, time: Array, free: FreeAir) -> Knots:
    """Sample everything that acts on the air at the knots.

    Where no divergence is given the air sinks as its own long-wave cooling asks for. A later profile already holds what
    advection, sinking and radiation did to the air aloft until then, so none of them acts beside it.
    """
    weather, fluxes = scenario.weather, scenario.fluxes
    table = np.zeros((len(time), COLUMNS))
    table[:, SHORTWAVE] = shortwave(scenario, time)
    table[:, LONGWAVE] = weather.sample("longwave_down_W_m2", time)
    table[:, NET_RADIATION] = weather.sample("net_radiation_W_m2", time)
    table[:, WIND_10M] = weather.sample("wind_10m_m_s", time)
    table[:, GEOSTROPHIC_U], table[:, GEOSTROPHIC_V] = pressure_gradient_wind(scenario, time)
    alone = np.ones(time.shape) if scenario.later is None else np.where(time < scenario.later.valid.timestamp(), 0.0, 1.0)
    table[:, DIVERGENCE] = weather.sample("divergence_per_s", time)
    if not weather.given("divergence_per_s"):
        table[:, DIVERGENCE] = 0.0 if scenario.later is not None else free.divergence
    table[:, HEATING] = alone * weather.sample("heat_advection_K_h", time)
    table[:, RADIATIVE] = alone * free.heating
    table[:, MOISTENING] = alone * weather.sample("moisture_advection_g_kg_h", time)
    table[:, ANTHROPOGENIC] = anthropogenic_heat(scenario, time)
    table[:, CLOUD] = weather.sample("cloud_fraction", time)
    table[:, CLOUD_BASE] = weather.sample("cloud_base_m", time)
    table[:, LATER_WEIGHT] = later_weight(scenario, time)
    if fluxes is not None:
        table[:, SENSIBLE] = fluxes.sample("sensible_flux_W_m2", time)
        table[:, LATENT] = fluxes.sample("latent_flux_W_m2", time)
        table[:, FRICTION] = fluxes.sample("friction_velocity_m_s", time)
    return Knots(
        time,
        table,
        weather.given("wind_10m_m_s"),
        bool(np.all(np.isfinite(table[:, LONGWAVE]))),
        bool(np.all(np.isfinite(table[:, NET_RADIATION]))),
        fluxes is not None,
        fluxes is not None and fluxes.given("friction_velocity_m_s"),
    )
