"""The scenario file (TOML) or a few first-use flags made into typed, checked objects.

Everything the user did not give is filled in here and listed as an assumption with a plausible step in it.
"""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import replace
from datetime import date, datetime
from pathlib import Path
from typing import Any

from forcing.assumptions import list_assumptions
from forcing.bundled import bundled, bundled_names, located
from forcing.errors import ScenarioError
from forcing.named_files import FILE_KEYS, given_names, kept_names
from forcing.scenario_parts import (
    Parts,
    read_cover,
    read_fluxes_of,
    read_limits,
    read_profiles,
    read_run,
    read_weather_of,
    tells_elevation,
)
from forcing.scenario_types import (
    ENTRAINMENTS,
    REBASE_RULES,
    Assumption,
    Limits,
    RunOptions,
    Scenario,
    Settings,
    Site,
    VentilationClass,
)
from forcing.scenario_write import write_toml
from forcing.section import FLAGS_SOURCE, FREE_TABLES, Section, check_layout
from forcing.series import read_text

__all__ = [
    "ENTRAINMENTS",
    "REBASE_RULES",
    "Assumption",
    "Limits",
    "RunOptions",
    "Scenario",
    "Settings",
    "Site",
    "VentilationClass",
    "build",
    "bundled",
    "bundled_names",
    "from_flags",
    "load",
    "read_settings",
    "with_run",
    "with_setting",
    "with_step",
    "write_toml",
]


def load(path: str | Path) -> Scenario:
    """Read a scenario file.

    Raises
    ------
    DaylayerError
        A subclass that names the file, the section and the key (or the line of a table), the value and a remedy.
    """
    file = Path(path)
    text = read_text(file, error=ScenarioError)
    return build(_parsed(text, file), folder=file.parent, source=str(file), text=text)


def read_settings(path: str | Path) -> dict[str, Any]:
    """Plain values of a scenario file with its layout checked, but no table read and nothing built.

    Raises
    ------
    ScenarioError
        No such file, no TOML, or an unknown section or key.
    """
    file = Path(path)
    settings = _parsed(read_text(file, error=ScenarioError), file)
    check_layout(settings, str(file))
    return settings


def _parsed(text: str, file: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as problem:
        if _is_profile(text):
            raise ScenarioError(
                "this looks like a profile, not a scenario", place=str(file), remedy=f"use --profile {file}"
            ) from None
        raise ScenarioError(
            f"is not valid TOML: {problem}", place=str(file), remedy="texts need quotes, sections need [brackets]"
        ) from None


def _is_profile(text: str) -> bool:
    """Whether text that is no TOML is a sounding; a first line with = or [ was meant as TOML."""
    from forcing.readers import looks_like_sounding

    lines = (line.strip() for line in text.splitlines())
    first = next((line for line in lines if line and (not line.startswith("#") or line[1:2].isalnum())), "")
    return "=" not in first and not first.startswith("[") and looks_like_sounding(text)


def build(settings: Settings, *, folder: Path, source: str, text: str = "", parts: Parts | None = None) -> Scenario:
    """Make a scenario of plain values.

    Parameters
    ----------
    settings : mapping
        ``title`` and one mapping per section.
    folder : Path
        Where file names are taken from.
    source : str
        What messages call the place.
    parts : Parts or None
        Tables that were read before, so that a changed scenario need not read them again.
    """
    sections = check_layout(settings, source)
    title = str(settings.get("title") or "the site")
    profiles = read_profiles(sections, folder, title, parts)
    run = read_run(sections["run"])
    cover, soil_moisture = read_cover(sections["surface"], settings)
    fluxes = read_fluxes_of(sections["surface"], folder, parts)
    weather = read_weather_of(sections["weather"], folder, parts, wind_known=profiles.morning.wind_known)
    scenario = Scenario(
        title=title,
        site=profiles.site,
        profile=profiles.morning,
        later=profiles.later,
        cover=cover,
        soil_moisture=soil_moisture,
        fluxes=fluxes,
        weather=weather,
        run=run,
        limits=read_limits(sections["limits"]),
        assumptions=(),
        source=source,
        text=text,
        original=profiles.original,
        later_original=profiles.later_original,
        rebase=profiles.rebase,
        settings=_absolute(settings, sections, folder),
        file_names=given_names(settings),
    )
    _check_span(scenario)
    return replace(scenario, assumptions=list_assumptions(scenario))


def _absolute(settings: Settings, sections: Mapping[str, Section], folder: Path) -> Settings:
    out: dict[str, object] = {"title": settings["title"]} if settings.get("title") else {}
    for name, section in sections.items():
        values = {
            key: value.isoformat() if isinstance(value, date) else value  # a datetime is a date too
            for key, value in section.values.items()
        }
        for key in (key for part, key in FILE_KEYS if part == name):
            value = values.get(key)
            if isinstance(value, str):
                values[key] = str(located(value.strip(), folder).resolve())
        if values:
            out[name] = values
    out |= {name: settings[name] for name in FREE_TABLES if settings.get(name)}
    return out


def _check_span(scenario: Scenario) -> None:
    scenario.weather.covers(scenario.start, scenario.end)
    if scenario.fluxes is not None:
        scenario.fluxes.covers(scenario.start, scenario.end)


def with_run(scenario: Scenario, **changes: Any) -> Scenario:
    """Scenario with other run options (fields of `RunOptions`); tables must cover the longer run."""
    settings = dict(scenario.settings)
    for key, value in changes.items():
        settings = with_value(settings, "run", key, value)
    return _rebuilt(scenario, settings)


def with_setting(scenario: Scenario, key: str, value: object) -> Scenario:
    """Scenario with one dotted key (``surface.soil_moisture``) at another value; None removes it."""
    section, _, name = key.partition(".")
    return _rebuilt(scenario, with_value(scenario.settings, section, name, value))


def with_step(scenario: Scenario, assumption: Assumption) -> Scenario:
    """Scenario with the plausible step of one of its assumptions taken.

    Raises
    ------
    ScenarioError
        If the assumption has no step.
    """
    if assumption.stepped is None:
        raise ScenarioError(f"no step is known for '{assumption.name}'", remedy="take an assumption with a step")
    return with_setting(scenario, assumption.key, assumption.stepped)


def with_value(settings: Settings, section: str, key: str, value: object) -> dict[str, object]:
    """Copy of plain settings with one value changed; None removes it."""
    old = settings.get(section)
    values = dict(old) if isinstance(old, Mapping) else {}
    if value is None:
        values.pop(key, None)
    else:
        values[key] = value
    return {**settings, section: values}


def _rebuilt(scenario: Scenario, settings: Settings) -> Scenario:
    parts = Parts.of(scenario)
    again = build(settings, folder=Path(), source=scenario.source, text=scenario.text, parts=parts)
    return replace(again, file_names=kept_names(again, scenario))


_NEEDED_FLAGS = {
    "latitude": "--latitude (degrees north)",
    "longitude": "--longitude (degrees east)",
    "elevation": "--elevation (m above sea level)",
    "time_zone": "--zone (IANA name such as America/Chicago)",
    "valid": "--valid (time of the profile, such as 2026-07-01T12:00Z)",
}


def _settings_of_flags(sections: Mapping[str, Mapping[str, object]]) -> dict[str, object]:
    return {
        name: {key: value for key, value in values.items() if value is not None} for name, values in sections.items()
    }


def from_flags(
    *,
    profile: str | Path,
    latitude: float | None = None,
    longitude: float | None = None,
    elevation: float | None = None,
    zone: str | None = None,
    cover: str | Mapping[str, float] | None = None,
    soil_moisture: float | None = None,
    cloud: float | None = None,
    wind: float | None = None,
    wind_from: float | None = None,
    hours: float | None = None,
    valid: str | datetime | None = None,
    rebase: str | None = None,
    title: str | None = None,
) -> Scenario:
    """Make a scenario of one profile file and a few values; what the file already says need not be given.

    Parameters
    ----------
    latitude, longitude, elevation : float
        Degrees north, degrees east, m above sea level of the site; the release site's where not given.
    zone : str
        IANA zone name of the site.
    cover : str or mapping
        Name of a land cover, or area fractions by name.
    cloud : float
        Cloud fraction, 0 to 1.
    wind, wind_from : float
        Wind that the pressure gradient keeps up [m/s] and the direction it blows from [degrees].
    valid : str or datetime
        Time of the profile, ISO 8601 with offset.

    Raises
    ------
    ScenarioError
        If something is missing; it lists precisely the flags that are needed.
    """
    from forcing.readers import read_sounding

    settings = _settings_of_flags(
        {
            "profile": {"file": str(profile), "valid": valid, "rebase": rebase},
            "surface": {"cover": cover, "soil_moisture": soil_moisture},
            "weather": {
                "cloud_fraction": cloud,
                "pressure_gradient_wind_m_s": wind,
                "pressure_gradient_wind_from_deg": wind_from,
            },
            "run": {"hours": hours},
        }
    )
    when = check_layout({**settings, "site": {}}, FLAGS_SOURCE)["profile"].time("valid")
    file = located(str(profile), Path())
    sounding = read_sounding(file, valid=when)
    told = {
        "latitude": sounding.latitude if latitude is None else latitude,
        "longitude": sounding.longitude if longitude is None else longitude,
        "elevation": tells_elevation(sounding) or None if elevation is None else elevation,
        "time_zone": zone,
        "valid": sounding.valid if when is None else when,
    }
    lacking = [text for key, text in _NEEDED_FLAGS.items() if told[key] is None]
    if lacking:
        raise ScenarioError(
            "the file does not say everything the forecast needs",
            place=f"--profile {profile}",
            remedy="add " + ", ".join(lacking),
        )
    place = {"latitude": latitude, "longitude": longitude, "elevation": elevation, "time_zone": zone}
    settings |= _settings_of_flags({"site": {"name": sounding.station or file.stem, **place}})
    settings["title"] = title or f"From {file.name}"
    return build(settings, folder=Path(), source=FLAGS_SOURCE)
