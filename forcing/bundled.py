"""Where the scenarios that ship with the package are: in an installed wheel or in a source checkout."""

from __future__ import annotations

import importlib.util
from pathlib import Path

from forcing.errors import ScenarioError
from forcing.series import suggestion

#: What a bare command runs.
DEFAULT = "summer_plain"


def folder() -> Path:
    """Folder with the bundled scenarios.

    Notes
    -----
    In a wheel it is a part of the package ``slab``, in a checkout it stands beside ``forcing``. The package is found,
    not imported.
    """
    found = importlib.util.find_spec("slab")
    places = [Path(place) / "scenarios" for place in (found.submodule_search_locations or [] if found else [])]
    places.append(Path(__file__).resolve().parent.parent / "scenarios")
    for place in places:
        if any(place.glob("*.toml")):
            return place
    raise ScenarioError("the bundled scenarios are not installed", remedy="install the package again")


def bundled_names() -> tuple[str, ...]:
    """Names of the bundled scenarios, the default first."""
    names = sorted(path.stem for path in folder().glob("*.toml"))
    return tuple(sorted(names, key=lambda name: name != DEFAULT))


def bundled(name: str = DEFAULT) -> Path:
    """Path of a bundled scenario.

    Raises
    ------
    ScenarioError
        If there is none of that name.
    """
    path = folder() / f"{name}.toml"
    if not path.is_file():
        raise ScenarioError(f"no bundled scenario '{name}'", remedy=suggestion(name, bundled_names()))
    return path
