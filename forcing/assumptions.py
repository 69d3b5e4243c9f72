"""The list of what a run takes for granted: every input with its source, and a plausible step in what is assumed.

Steps are what a careful forecaster might be wrong by (common practice), not a statistical spread.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from forcing.free_air import free_air, free_from
from forcing.scenario_parts import (
    DEFAULT_COVER,
    DEFAULT_REBASE,
    DEFAULT_SOIL_MOISTURE,
    PLACE_KEYS,
    REBASE_FROM_M,
    SURFACE_KEYS,
)
from forcing.scenario_types import Assumption, Scenario

if TYPE_CHECKING:
    from forcing.sounding import Profile

GIVEN, ASSUMED = "given", "assumed"
#: Heights [m above ground] between which the pressure-gradient wind is read where none is given: where
#: friction with the ground is small.
WIND_ALOFT = (1000.0, 2000.0)
STEP_COVER = "green crop"
STEP_SOIL_MOISTURE = 0.25


class _Default(NamedTuple):
    """A weather input with a default: value, reason and step in words, and the value to rerun with."""

    key: str
    name: str
    value: str
    why: str
    step: str
    stepped: float | None


_SKY = (
    _Default(
        "cloud_fraction",
        "cloud cover",
        "none, a clear sky",
        "no cloud was given",
        "a quarter of the sky covered",
        0.25,
    ),
    _Default(
        "cloud_base_m",
        "cloud base",
        "2000 m above ground",
        "cloud without a base was given",
        "base at 1000 m above ground",
        1000.0,
    ),
    _Default(
        "aerosol_optical_depth",
        "aerosol optical depth",
        "0.1, clean country air",
        "no aerosol was given",
        "0.25, haze",
        0.25,
    ),
    _Default(
        "ozone_cm",
        "ozone column",
        "0.3 cm",
        "no ozone was given; mid-latitude mean; 0.1 cm more changes a day by under 10 m and 0.05 K",
        "",
        None,
    ),
)
_MOTION = (
    _Default(
        "divergence_per_s",
        "sinking of the air",
        "none (divergence 0 per s)",
        "no divergence was given",
        "stronger sinking, divergence 1e-5 per s",
        1e-5,
    ),
    _Default(
        "heat_advection_K_h",
        "advection of heat",
        "none (0 K per h)",
        "no advection was given",
        "0.2 K per h of warming",
        0.2,
    ),
    _Default(
        "moisture_advection_g_kg_h",
        "advection of moisture",
        "none (0 g/kg per h)",
        "no advection was given",
        "0.1 g/kg per h of moistening",
        0.1,
    ),
)
#: A later profile holds what sinking and advection did until then, so there is no step to take beside it.
_MOTION_IN_LATER = tuple(
    one._replace(why="the later profile holds what it did until then", step="", stepped=None) for one in _MOTION
)


def list_assumptions(scenario: Scenario) -> tuple[Assumption, ...]:
    """Every input of a scenario with its source; steps only where it is assumed."""
    return (
        *_site(scenario),
        *_surface(scenario),
        *_weather(scenario, _SKY),
        *_winds(scenario),
        *_weather(scenario, _motion(scenario)),
        *_air_aloft(scenario),
        *_run(scenario),
    )


def _given(scenario: Scenario, section: str, key: str) -> bool:
    values = scenario.settings.get(section)
    return isinstance(values, dict) and key in values


def _site(scenario: Scenario) -> Iterator[Assumption]:
    keys = [key for key in PLACE_KEYS if not _given(scenario, "site", key)]
    if keys:
        yield Assumption(
            "site",
            ", ".join(f"{key} {round(getattr(scenario.site, key), 1 if key == 'elevation' else 4):g}" for key in keys),
            ASSUMED,
            "not given: taken from the release site",
            key="site." + keys[0],
        )
    if math.isnan(scenario.original.latitude + scenario.original.longitude):
        yield Assumption(
            "position of the release",
            "the site's",
            ASSUMED,
            "neither the file nor the user says where the balloon was released",
            key="profile.latitude",
        )
    if not scenario.rebase:
        return
    shift = scenario.site.elevation - scenario.original.elevation
    given = _given(scenario, "profile", "rebase")
    other = "ground" if scenario.rebase == DEFAULT_REBASE else DEFAULT_REBASE
    yield Assumption(
        "profile brought to the site",
        f"rule {scenario.rebase}, the site lies {abs(shift):.0f} m {'above' if shift > 0 else 'below'} the release",
        GIVEN if given else ASSUMED,
        "chosen by the user" if given else f"usual rule where the elevations differ by over {REBASE_FROM_M:.0f} m",
        "" if given else f"rule {other}",
        "profile.rebase",
        None if given else other,
    )


def _surface(scenario: Scenario) -> Iterator[Assumption]:
    if scenario.fluxes is not None:
        name = Path(scenario.fluxes.file).name
        yield Assumption(
            "surface fluxes", f"from {name}", GIVEN, "they replace the energy balance", key="surface.fluxes"
        )
    if _given(scenario, "surface", "cover"):
        yield Assumption("land cover", _cover_name(scenario), GIVEN, "given by the user", key="surface.cover")
    else:
        yield Assumption(
            "land cover",
            DEFAULT_COVER,
            ASSUMED,
            "no cover was given",
            STEP_COVER,
            "surface.cover",
            STEP_COVER,
        )
    if _given(scenario, "surface", "soil_moisture"):
        yield Assumption(
            "soil moisture",
            f"{scenario.soil_moisture:g} of the way from wilting point to field capacity",
            GIVEN,
            "given by the user",
            key="surface.soil_moisture",
        )
    elif scenario.fluxes is None:
        yield Assumption(
            "soil moisture",
            f"{DEFAULT_SOIL_MOISTURE:g} of the way from wilting point to field capacity",
            ASSUMED,
            "no soil moisture was given",
            f"{STEP_SOIL_MOISTURE:g}, a drier soil",
            "surface.soil_moisture",
            STEP_SOIL_MOISTURE,
        )


def _cover_name(scenario: Scenario) -> str:
    values = scenario.settings.get("surface")
    name = str(scenario.cover.name)
    if not isinstance(values, dict):
        return name
    overrides = [f"{key} {value}" for key, value in values.items() if key not in SURFACE_KEYS]
    return f"{name} with {', '.join(overrides)}" if overrides else name


def _motion(scenario: Scenario) -> tuple[_Default, ...]:
    """Sinking and advection; sinking that is not given balances the long-wave cooling of the free air."""
    if scenario.later is not None:
        return _MOTION_IN_LATER
    sinking, *rest = _MOTION
    if scenario.weather.given(sinking.key):
        return _MOTION
    own = free_air(scenario.profile)
    return (
        sinking._replace(
            value=f"divergence {own.divergence:.1e} per s",
            why=f"no divergence was given; this much balances the long-wave cooling of the free air, "
            f"{-86400.0 * own.heating:.1f} K a day",
        ),
        *rest,
    )


def _weather(scenario: Scenario, defaults: tuple[_Default, ...]) -> Iterator[Assumption]:
    weather = scenario.weather
    clear = not weather.given("cloud_fraction") or weather.constants.get("cloud_fraction") == 0.0
    for one in defaults:
        key = f"weather.{one.key}"
        if one.key == "cloud_base_m" and clear:
            continue
        if one.key in weather.constants:
            yield Assumption(
                one.name, f"{one.key} = {weather.constants[one.key]:g}", GIVEN, "given by the user", key=key
            )
        elif one.key in weather.series:
            yield Assumption(one.name, f"by hour from {Path(weather.file).name}", GIVEN, "given by the user", key=key)
        else:
            yield Assumption(one.name, one.value, ASSUMED, one.why, one.step, key, one.stepped)


def wind_near(profile: Profile, low: float = WIND_ALOFT[0], high: float = WIND_ALOFT[1]) -> tuple[float, float]:
    """Speed [m/s] and direction it blows from [degrees] of the mean wind vector between two heights above ground [m].

    Both are raised until they lie above a mixed layer that the profile itself holds: inside one, friction slows the wind.
    """
    lift = max(0.0, free_from(profile) - low)
    low, high = low + lift, high + lift
    top = float(profile.height[-1])
    heights = np.linspace(min(low, top), min(high, top), 21)
    u = float(np.mean(np.interp(heights, profile.height, profile.u)))
    v = float(np.mean(np.interp(heights, profile.height, profile.v)))
    return math.hypot(u, v), math.degrees(math.atan2(-u, -v)) % 360.0


def _winds(scenario: Scenario) -> Iterator[Assumption]:
    weather, key = scenario.weather, "pressure_gradient_wind_m_s"
    name = "pressure-gradient wind"
    if weather.given(key):
        value = (
            f"{weather.constants[key]:g} m/s" if key in weather.constants else f"by hour from {Path(weather.file).name}"
        )
        yield Assumption(name, value, GIVEN, "given by the user", key=f"weather.{key}")
        if not weather.given("pressure_gradient_wind_from_deg"):
            yield Assumption(
                "direction of the pressure-gradient wind",
                "as the profile's wind aloft" if scenario.profile.wind_known else "from 270 degrees",
                ASSUMED,
                "a speed without a direction was given",
                key="weather.pressure_gradient_wind_from_deg",
            )
    elif scenario.profile.wind_known:
        speed, from_deg = wind_near(scenario.profile)
        yield Assumption(
            name,
            f"the profile's own wind, on average {speed:.1f} m/s from {from_deg:.0f} degrees at "
            f"{WIND_ALOFT[0]:.0f} to {WIND_ALOFT[1]:.0f} m above ground",
            ASSUMED,
            "derived: no wind was given, so the wind above the layer is taken to stay",
            f"a constant {speed + 2.0:.1f} m/s, 2 m/s more",
            f"weather.{key}",
            round(speed + 2.0, 1),
        )
    else:
        speed = weather.defaults.get(key, math.nan)
        yield Assumption(
            name,
            f"{speed:g} m/s from {weather.defaults.get('pressure_gradient_wind_from_deg', math.nan):g} degrees",
            ASSUMED,
            "neither the profile nor the user has a wind",
            f"{speed + 3.0:g} m/s",
            f"weather.{key}",
            speed + 3.0,
        )
    if not weather.given("wind_10m_m_s"):
        yield Assumption(
            "wind at 10 m",
            "computed from the wind of the layer",
            ASSUMED,
            "derived: no wind at 10 m was given; it follows the pressure-gradient wind",
            key="weather.wind_10m_m_s",
        )
    else:
        source = "a constant" if "wind_10m_m_s" in weather.constants else f"by hour from {Path(weather.file).name}"
        yield Assumption("wind at 10 m", source, GIVEN, "given by the user", key="weather.wind_10m_m_s")


def _air_aloft(scenario: Scenario) -> Iterator[Assumption]:
    if scenario.later is not None:
        yield Assumption(
            "air above the layer",
            f"moves linearly in time to the profile of {scenario.later.valid:%Y-%m-%dT%H:%MZ}",
            GIVEN,
            "a later profile was given",
            key="profile.later",
        )
    else:
        yield Assumption(
            "air above the layer",
            "held as in the profile, but for sinking, advection and radiation",
            ASSUMED,
            "no later profile was given",
            key="profile.later",
        )


def _run(scenario: Scenario) -> Iterator[Assumption]:
    run = scenario.run
    given = _given(scenario, "run", "entrainment")
    other = "buoyant" if run.entrainment == "sheared" else "sheared"
    yield Assumption(
        "entrainment",
        run.entrainment,
        GIVEN if given else ASSUMED,
        "chosen by the user" if given else "usual closure",
        "" if given else other,
        "run.entrainment",
        None if given else other,
    )
    if run.entrainment != "encroachment":
        given = _given(scenario, "run", "flux_ratio")
        yield Assumption(
            "entrainment flux ratio",
            f"{run.flux_ratio:g}",
            GIVEN if given else ASSUMED,
            "chosen by the user" if given else "usual value",
            "" if given else "0.3",
            "run.flux_ratio",
            None if given else 0.3,
        )
