"""Each part of a scenario from its section: profiles, site, cover, fluxes, weather, run, limits."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import TYPE_CHECKING

from forcing.errors import ScenarioError, WeatherError
from forcing.scenario_types import (
    ENTRAINMENTS,
    REBASE_RULES,
    Limits,
    RunOptions,
    Scenario,
    Settings,
    Site,
    VentilationClass,
)
from forcing.section import Section
from forcing.units import SQUARE_METRES_PER_S_PER_KNOT_FOOT
from forcing.weather import COLUMNS, DEFAULTS, FluxTable, Weather, check_constant, read_fluxes, read_weather
from forcing.zones import check_zone

if TYPE_CHECKING:
    from forcing.cover import Cover
    from forcing.sounding import Profile, Sounding

#: Difference of elevation [m] from which a profile is re-based without being asked (our choice).
REBASE_FROM_M = 100.0
DEFAULT_REBASE = "sea-level"
DEFAULT_COVER = "short grass"
DEFAULT_SOIL_MOISTURE = 0.5
#: Pressure-gradient wind [m/s] where neither profile nor user has any: a moderate breeze aloft (common practice).
UNKNOWN_WIND_M_S = 5.0
UNKNOWN_WIND_FROM_DEG = 270.0

SURFACE_KEYS = ("cover", "soil_moisture", "fluxes")
PLACE_KEYS = ("latitude", "longitude", "elevation")
_PROFILE_KEYS = ("file", "format", "valid", "latitude", "longitude", "elevation", "later", "later_valid")


@dataclass(frozen=True, slots=True)
class Profiles:
    """The site and the profiles on its ground, with the profiles as released."""

    site: Site
    morning: Profile
    later: Profile | None
    original: Profile
    later_original: Profile | None
    rebase: str


@dataclass(frozen=True, slots=True)
class Parts:
    """Tables of a scenario that was built before, to build a changed one without reading them again."""

    settings: Settings
    original: Profile
    later_original: Profile | None
    fluxes: FluxTable | None
    weather: Weather

    @classmethod
    def of(cls, scenario: Scenario) -> Parts:
        """Parts of a scenario."""
        return cls(scenario.settings, scenario.original, scenario.later_original, scenario.fluxes, scenario.weather)

    def same(self, section: Section, keys: tuple[str, ...]) -> bool:
        """Whether the section has the same values under these keys as when the tables were read."""
        old = self.settings.get(section.name)
        values = old if isinstance(old, Mapping) else {}
        return all(values.get(key) == section.values.get(key) for key in keys)


def _zone(section: Section) -> str:
    name = section.text("time_zone", needed=True, example="Etc/GMT+6") or ""
    return check_zone(name, place=section.place("time_zone"))


def read_cover(section: Section, settings: Settings) -> tuple[Cover, float]:
    """Land cover with the overrides of the section, and the soil moisture (0 wilting point to 1 field capacity).

    ``settings`` is the whole scenario, for the user's own covers in it.
    """
    from forcing.cover import LIMITS, adapt
    from forcing.errors import CoverError
    from forcing.own_covers import read_own_covers, resolve

    wanted: str | dict[str, float]
    mixed = section.values.get("cover")
    if isinstance(mixed, Mapping):
        shares = Section(section.file, "surface.cover", mixed)
        wanted = {name: shares.number(name, 0.0, 1.0) or 0.0 for name in mixed}
    else:
        wanted = section.text("cover") or DEFAULT_COVER
    section.only([*SURFACE_KEYS, *LIMITS])
    changes = {key: section.number(key, *bounds) for key, bounds in LIMITS.items() if key in section.values}
    found = resolve(wanted, read_own_covers(settings, section.file), place=section.place("cover"))
    try:
        found = adapt(found, changes) if changes else found
    except CoverError as problem:
        raise CoverError(problem.problem, place=section.place(next(iter(changes))), remedy=problem.remedy) from None
    moisture = section.number("soil_moisture", 0.0, 1.0)
    return found, DEFAULT_SOIL_MOISTURE if moisture is None else moisture


_BOUNDS = {
    "latitude": (-90.0, 90.0, "degrees north"),
    "longitude": (-180.0, 180.0, "degrees east"),
    "elevation": (-450.0, 6500.0, "m above sea level"),
}


def _position(section: Section, key: str, *, needed: bool = False) -> float | None:
    low, high, unit = _BOUNDS[key]
    return section.number(key, low, high, needed=needed, unit=unit)


def read_site(section: Section, release: Profile, title: str) -> Site:
    """Site of the forecast; what the section does not say is taken from the release."""
    zone = _zone(section)

    def here(key: str) -> float:
        released = float(getattr(release, key))
        value = _position(section, key, needed=math.isnan(released))
        return released if value is None else value

    name = section.text("name") or title
    return Site(name, here("latitude"), here("longitude"), here("elevation"), zone)


def _sounding(section: Section, folder: Path, file_key: str, valid_key: str) -> tuple[Sounding, datetime | None]:
    from forcing.readers import read_sounding

    path = section.path(file_key, folder)
    if path is None:
        raise ScenarioError("missing", place=section.place(file_key), remedy=f'write {file_key} = "morning.csv"')
    valid = section.time(valid_key)
    form = section.text("format") if file_key == "file" else None
    sounding = read_sounding(path, format=form, valid=valid)
    if sounding.valid is None and valid is None:
        raise ScenarioError(
            f"{path} does not say when the profile was taken",
            place=section.place(valid_key),
            remedy=f'write {valid_key} = "2026-07-01T12:00Z" (ISO 8601 with offset)',
        )
    return sounding, valid


def _prepared(sounding: Sounding, valid: datetime | None, site: Section, section: Section) -> Profile:
    """The profile on the ground of its release; a position that nobody gives stays NaN."""
    from forcing.profile import prepare

    elevation = _position(section, "elevation")
    if elevation is None and not tells_elevation(sounding):
        elevation = _position(site, "elevation", needed=True)
    return prepare(
        sounding,
        valid=valid if sounding.valid is None else None,
        latitude=_position(section, "latitude"),
        longitude=_position(section, "longitude"),
        elevation=elevation,
    )


def tells_elevation(sounding: Sounding) -> bool:
    """Whether the file says the release's elevation, or heights above sea level that it follows from."""
    if sounding.elevation is not None:
        return True
    return not sounding.heights_above_ground and any(math.isfinite(height) for height in sounding.height_msl)


def read_profiles(sections: Mapping[str, Section], folder: Path, title: str, parts: Parts | None) -> Profiles:
    """Profiles as released and on the ground of the site, by the named re-basing rule."""
    section = sections["profile"]
    here = sections["site"]
    if parts is not None and parts.same(section, _PROFILE_KEYS) and parts.same(here, PLACE_KEYS):
        original, later = parts.original, parts.later_original
    else:
        original = _prepared(*_sounding(section, folder, "file", "valid"), here, section)
        later = None
        if "later" in section.values:
            later = _prepared(*_sounding(section, folder, "later", "later_valid"), here, section)
    site = read_site(here, original, title)
    if later is not None and later.valid <= original.valid:
        raise ScenarioError(
            f"the later profile is of {later.valid.isoformat()}, not after {original.valid.isoformat()}",
            place=section.place("later"),
            remedy="name a profile of a later hour, or give later_valid",
        )
    rule = section.choice("rebase", REBASE_RULES)
    far = abs(original.elevation - site.elevation) > REBASE_FROM_M
    used = (rule or DEFAULT_REBASE) if far else (rule or "")
    if original.elevation == site.elevation:
        used = ""
    return Profiles(
        site=site,
        morning=_rebased(original, site, used),
        later=None if later is None else _rebased(later, site, used),
        original=original,
        later_original=later,
        rebase=used,
    )


def _rebased(profile: Profile, site: Site, rule: str) -> Profile:
    from forcing.profile import rebase

    return rebase(profile, site.elevation, "ground" if rule == "ground" else "sea-level") if rule else profile


def read_run(section: Section) -> RunOptions:
    """Run options with their defaults."""
    usual = RunOptions()
    hours = section.number("hours", 0.5, 96.0, unit="h")
    minutes = section.number("output_minutes", 1.0, 180.0, unit="minutes")
    ratio = section.number("flux_ratio", 0.0, 1.0)
    return RunOptions(
        hours=usual.hours if hours is None else hours,
        output_minutes=usual.output_minutes if minutes is None else minutes,
        entrainment=section.choice("entrainment", ENTRAINMENTS) or usual.entrainment,
        flux_ratio=usual.flux_ratio if ratio is None else ratio,
        shear_factor=section.number("shear_factor", 0.0, 50.0),
        spin_up_factor=section.number("spin_up_factor", 0.0, 50.0),
    )


def read_fluxes_of(section: Section, folder: Path, parts: Parts | None) -> FluxTable | None:
    """Flux table of the surface section, None where the energy balance is asked for."""
    if parts is not None and parts.same(section, ("fluxes",)):
        return parts.fluxes
    path = section.path("fluxes", folder)
    return None if path is None else read_fluxes(path)


def read_weather_of(section: Section, folder: Path, parts: Parts | None, *, wind_known: bool) -> Weather:
    """Weather with the defaults for what is not given; a wind aloft is assumed only where the profile has none."""
    constants: dict[str, float] = {}
    for name in COLUMNS:
        value = section.number(name)
        if value is not None:
            check_constant(name, value, place=section.place(name))
            constants[name] = value
    defaults = dict(DEFAULTS)
    if not wind_known:
        defaults["pressure_gradient_wind_m_s"] = UNKNOWN_WIND_M_S
        defaults["pressure_gradient_wind_from_deg"] = UNKNOWN_WIND_FROM_DEG
    for wind in ("wind_10m", "pressure_gradient_wind"):
        if f"{wind}_from_deg" in constants and f"{wind}_m_s" not in constants and "file" not in section.values:
            raise ScenarioError(
                "a direction without a speed", place=section.place(f"{wind}_from_deg"), remedy=f"add {wind}_m_s"
            )
    if parts is not None and parts.same(section, ("file",)):
        table = parts.weather
    else:
        path = section.path("file", folder)
        table = Weather() if path is None else read_weather(path)
    for name in constants:
        if name in table.series:
            raise WeatherError(
                f"column '{name}' is also given as a constant", place=table.file, remedy="keep one of the two"
            )
    return Weather(constants, table.series, table.file, defaults)


def read_limits(section: Section) -> Limits | None:
    """The user's own limits, None where there are none."""
    if not section.values:
        return None
    limits = Limits(
        authority=section.text("authority", needed=True, example="who set these limits") or "",
        dated=section.day("dated"),
        wind_height_m=section.number("wind_height_m", 0.1, 200.0, unit="m"),
        wind_min_m_s=section.number("wind_min_m_s", 0.0, 60.0, unit="m/s"),
        wind_max_m_s=section.number("wind_max_m_s", 0.0, 60.0, unit="m/s"),
        delta_t_min_K=section.number("delta_t_min_K", 0.0, 30.0, unit="K"),
        delta_t_max_K=section.number("delta_t_max_K", 0.0, 30.0, unit="K"),
        hours_after_sunrise=section.number("hours_after_sunrise", -6.0, 12.0, unit="h"),
        hours_before_sunset=section.number("hours_before_sunset", -6.0, 12.0, unit="h"),
        temperature_max_C=section.number("temperature_max_C", -50.0, 60.0, unit="degrees C"),
        humidity_min_pct=section.number("humidity_min_pct", 0.0, 100.0, unit="percent"),
        rain_free_hours=section.number("rain_free_hours", 0.0, 72.0, unit="h"),
        ventilation=_ventilation(section),
    )
    for low, high in (("wind_min_m_s", "wind_max_m_s"), ("delta_t_min_K", "delta_t_max_K")):
        least, most = getattr(limits, low), getattr(limits, high)
        if least is not None and most is not None and least >= most:
            raise ScenarioError(
                f"{least:g} is not below {high} = {most:g}", place=section.place(low), remedy="exchange the two"
            )
    if (limits.wind_min_m_s is not None or limits.wind_max_m_s is not None) and limits.wind_height_m is None:
        raise ScenarioError(
            "missing", place=section.place("wind_height_m"), remedy="say at which height [m] the wind limits hold"
        )
    return limits


def _ventilation(section: Section) -> tuple[VentilationClass, ...]:
    rows = section.values.get("ventilation", [])
    if not isinstance(rows, list) or not all(isinstance(row, dict) for row in rows):
        raise ScenarioError(
            "is not a list of classes",
            place=section.place("ventilation"),
            remedy='write ventilation = [{ name = "first", from_m2_s = 0 }, ...]',
        )
    classes: list[VentilationClass] = []
    for number, row in enumerate(rows, start=1):
        part = Section(section.file, f"limits.ventilation {number}", row)
        part.only(("name", "from_m2_s", "from_kt_ft"))
        name = part.text("name", needed=True, example="first") or ""
        metric = part.number("from_m2_s", 0.0, 1e6, unit="m2/s")
        knots = part.number("from_kt_ft", 0.0, 6e6, unit="kt ft")
        if (metric is None) == (knots is None):
            raise ScenarioError(
                "needs one of from_m2_s and from_kt_ft", place=part.place("name"), remedy="give exactly one of them"
            )
        start = metric if metric is not None else (knots or 0.0) * SQUARE_METRES_PER_S_PER_KNOT_FOOT
        if classes and start <= classes[-1].from_m2_s:
            raise ScenarioError(
                f"class '{name}' does not start above the one before",
                place=section.place("ventilation"),
                remedy="list the classes lowest first",
            )
        classes.append(VentilationClass(name, start))
    return tuple(classes)
