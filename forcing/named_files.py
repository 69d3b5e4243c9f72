"""Names of a scenario's files as they are shown: bundled, or as given; never where they lie on this machine."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import PurePath
from typing import TYPE_CHECKING

from forcing.bundled import PREFIX, bundled_as

if TYPE_CHECKING:
    from forcing.scenario_types import Scenario, Settings

#: Section and key of every file that a scenario may name.
FILE_KEYS = (("profile", "file"), ("profile", "later"), ("surface", "fluxes"), ("weather", "file"))


def _files(settings: Settings) -> dict[str, str]:
    """Dotted key to file name, of the keys that have one."""
    found = {}
    for section, key in FILE_KEYS:
        values = settings.get(section)
        name = values.get(key) if isinstance(values, Mapping) else None
        if isinstance(name, str) and name.strip():
            found[f"{section}.{key}"] = name.strip()
    return found


def given_names(settings: Settings) -> dict[str, str]:
    """Dotted key of every file to its name as given."""
    return _files(settings)


def kept_names(scenario: Scenario, before: Scenario) -> dict[str, str]:
    """Names as given of a scenario that was built again: those of ``before``, but for files that were changed."""
    old, new = _files(before.settings), _files(scenario.settings)
    names = {**scenario.file_names, **before.file_names}
    return {
        key: names[key] if old.get(key) == path else scenario.file_names.get(key, path) for key, path in new.items()
    }


def shown_source(scenario: Scenario) -> str:
    """What a scenario was read from: ``bundled: NAME``, or its file as given."""
    name = bundled_as(scenario.source) if scenario.text else None
    return scenario.source if name is None else f"{PREFIX} {PurePath(name).stem}"


def shown_files(scenario: Scenario) -> dict[str, str]:
    """Dotted key of every file to ``bundled: NAME``, or to its name as given."""
    found = {}
    for key, path in _files(scenario.settings).items():
        name = bundled_as(path)
        found[key] = scenario.file_names.get(key, path) if name is None else f"{PREFIX} {name}"
    return found


def shown_settings(scenario: Scenario) -> dict[str, object]:
    """Plain values of a scenario with its files as `shown_files` names them."""
    settings = dict(scenario.settings)
    for dotted, name in shown_files(scenario).items():
        section, _, key = dotted.partition(".")
        values = settings[section]
        assert isinstance(values, Mapping)
        settings[section] = {**values, key: name}
    return settings
