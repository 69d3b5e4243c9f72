"""A scenario written as commented TOML that loads to the same scenario again.

What is given is written as it is; what is assumed stands beside it as a comment, with its value and the reason, so
that it stays an assumption until the user says otherwise.
"""

from __future__ import annotations

import json
import os
from collections.abc import Iterator, Mapping
from pathlib import Path

from forcing.bundled import PREFIX, bundled_as
from forcing.keys import KEYS
from forcing.scenario_parts import DEFAULT_COVER, DEFAULT_REBASE, DEFAULT_SOIL_MOISTURE, PLACE_KEYS
from forcing.scenario_types import Assumption, RunOptions, Scenario
from forcing.weather import DEFAULTS

_PATHS = ("file", "later", "fluxes")
_EXAMPLES: Mapping[str, str] = {
    "profile.format": '"csv"',
    "profile.valid": '"2026-07-01T12:00Z"',
    "profile.rebase": f'"{DEFAULT_REBASE}"',
    "profile.later": '"afternoon.csv"',
    "profile.later_valid": '"2026-07-01T21:00Z"',
    "surface.cover": f'"{DEFAULT_COVER}"',
    "surface.soil_moisture": f"{DEFAULT_SOIL_MOISTURE}",
    "surface.fluxes": '"fluxes.csv"',
    "weather.file": '"weather.csv"',
    "limits.authority": '"who set these limits"',
    "limits.dated": '"2026-05-01"',
    "limits.ventilation": '[{ name = "first", from_m2_s = 0 }, { name = "second", from_m2_s = 2000 }]',
}


def write_toml(scenario: Scenario, *, beside: str | Path | None = None) -> str:
    """Commented TOML of a scenario.

    Parameters
    ----------
    beside : path, optional
        File that the text will be written to; file names in it are relative to its folder. Absolute when left out. A file
        that ships with the package is named as such, unless it lies in that folder or below.

    Returns
    -------
    str
        Text that `load` turns into the same scenario.
    """
    folder = None if beside is None else Path(beside).resolve().parent
    lines = [f"title = {_value(scenario.title)}"]
    assumed = {one.key: one for one in scenario.assumptions if one.source == "assumed"}
    for section, keys in KEYS.items():
        values = dict(_mapping(scenario.settings.get(section)))
        header = f"[{section}]"
        lines += ["", header if values or section != "limits" else "# no limits are set; to set your own:\n# [limits]"]
        for key, meaning in keys.items():
            if key in values:
                lines += _line(key, _written(key, values.pop(key), folder), meaning)
                continue
            why = _why(scenario, section, key, assumed)
            by_hour = section == "weather" and key in scenario.weather.series
            shown = "" if by_hour else _example(scenario, section, key)
            told = meaning if why in meaning else f"{meaning}; {why}"
            lines.append(f"# {key} = {shown}  # {told}" if shown else f"# {key} =  # {told}")
        for key, value in values.items():
            lines += _line(key, _value(value), "in place of the property of the cover")
    for name, own in _mapping(scenario.settings.get("covers")).items():
        lines += ["", f"[covers.{_value(name)}]", *(f"{key} = {_value(value)}" for key, value in _mapping(own).items())]
    changes = scenario.settings.get("change")
    for change in changes if isinstance(changes, list | tuple) else ():
        lines += ["", "[[change]]", *(f"{key} = {_value(value)}" for key, value in _mapping(change).items())]
    return "\n".join(lines) + "\n"


def _why(scenario: Scenario, section: str, key: str, assumed: Mapping[str, Assumption]) -> str:
    """Why a key is left out."""
    if section == "weather" and key in scenario.weather.series:
        return "by hour from the file"
    if section == "site" and key in PLACE_KEYS:
        return "assumed: taken from the release site"
    note = assumed.get(f"{section}.{key}")
    return f"assumed: {note.value_text} ({note.why})" if note is not None else "not given"


def _mapping(value: object) -> Mapping[str, object]:
    return value if isinstance(value, Mapping) else {}


def _line(key: str, value: str, meaning: str) -> Iterator[str]:
    yield f"{key} = {value}  # {meaning}"


def _written(key: str, value: object, folder: Path | None) -> str:
    if key not in _PATHS or not isinstance(value, str):
        return _value(value)
    ships = bundled_as(value)
    if ships is not None and (folder is None or not Path(value).is_relative_to(folder)):
        return _value(f"{PREFIX}{ships}")
    if folder is not None:
        try:
            return _value(Path(os.path.relpath(value, folder)).as_posix())
        except ValueError:  # another drive
            return _value(value)
    return _value(value)


def _example(scenario: Scenario, section: str, key: str) -> str:
    run = RunOptions()
    if section == "site":
        value = getattr(scenario.site, key)
        return _value(round(value, 1 if key == "elevation" else 4) if key in PLACE_KEYS else value)
    if section == "run":
        usual = getattr(run, key)
        return "" if usual is None else _value(usual)
    if section == "weather" and key in DEFAULTS:
        return _value(DEFAULTS[key])
    return _EXAMPLES.get(f"{section}.{key}", "")


def _value(value: object) -> str:
    """A value as TOML writes it."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int | float):
        return repr(value)
    if isinstance(value, str):
        # a TOML basic string is a JSON string but for DEL and the escapes of surrogates
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, Mapping):
        return (
            "{ "
            + ", ".join(f"{_value(key) if ' ' in key else key} = {_value(one)}" for key, one in value.items())
            + " }"
        )
    if isinstance(value, list | tuple):
        return "[" + ", ".join(_value(one) for one in value) + "]"
    raise TypeError(f"{type(value).__name__} has no place in a scenario")
