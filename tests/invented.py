"""Invented scenarios for tests: any column at any site and hour, with the ground's balance or with fluxes as given."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime
from functools import cache

import numpy as np

from forcing.bundled import bundled
from forcing.cover import cover as cover_of
from forcing.scenario import load
from forcing.scenario_parts import UNKNOWN_WIND_FROM_DEG, UNKNOWN_WIND_M_S
from forcing.scenario_types import RunOptions, Scenario, Site
from forcing.series import Series
from forcing.sounding import Profile
from forcing.weather import DEFAULTS, FluxTable, Weather

DAWN = datetime(2024, 6, 1, 11, tzinfo=UTC)


@cache
def _pattern() -> Scenario:
    return load(bundled())


def scenario(
    profile: Profile,
    *,
    valid: datetime = DAWN,
    latitude: float = 40.0,
    longitude: float = -95.0,
    cover: str = "short grass",
    soil_moisture: float = 0.4,
    weather: dict[str, float] | None = None,
    fluxes: FluxTable | None = None,
    later: Profile | None = None,
    **run: float | str,
) -> Scenario:
    """Scenario of an invented column; the weather is constants by name, the run options as in [run]."""
    defaults = dict(DEFAULTS)
    if not profile.wind_known:
        defaults |= {
            "pressure_gradient_wind_m_s": UNKNOWN_WIND_M_S, "pressure_gradient_wind_from_deg": UNKNOWN_WIND_FROM_DEG
        }
    column = replace(profile, valid=valid, latitude=latitude, longitude=longitude)
    return Scenario(
        title="invented", site=Site("invented", latitude, longitude, profile.elevation, "UTC"), profile=column,
        later=later, cover=cover_of(cover), soil_moisture=soil_moisture, fluxes=fluxes,
        weather=Weather(constants=weather or {}, defaults=defaults), run=RunOptions(**run), limits=None, assumptions=(),  # type: ignore[arg-type]
        source="invented", text="", original=column, settings=_pattern().settings,
    )  # fmt: skip


def fluxes(start: datetime, hours: float, sensible: Callable[[float], float], latent: Callable[[float], float],
           friction: Callable[[float], float] | None = None) -> FluxTable:  # fmt: skip
    """Fluxes [W m-2] and friction velocity [m/s] as functions of hours since ``start``, tabled every 15 minutes."""
    hour = np.arange(0.0, hours + 0.26, 0.25)
    posix = start.timestamp() + 3600.0 * hour
    named = {"sensible_flux_W_m2": sensible, "latent_flux_W_m2": latent}
    if friction is not None:
        named["friction_velocity_m_s"] = friction
    return FluxTable({name: Series(posix, np.array([f(h) for h in hour])) for name, f in named.items()}, "fluxes.csv")
