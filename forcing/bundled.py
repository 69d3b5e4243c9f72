"""Where the scenarios that ship with the package are: in an installed wheel or in a source checkout."""

from __future__ import annotations

import importlib.util
from pathlib import Path

from forcing.errors import ScenarioError
from forcing.series import suggestion

#: What a bare command runs.
DEFAULT = "summer_plain"
#: What the name of a file that ships with the package starts with where a scenario names it.
PREFIX = "bundled:"


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


def located(name: str, beside: Path) -> Path:
    """Path of a file that a scenario names: ``bundled:NAME`` ships with the package, others are taken from ``beside``.

    Raises
    ------
    ScenarioError
        If no file of that name is bundled.
    """
    if not name.startswith(PREFIX):
        return beside / Path(name).expanduser()
    wanted = name.removeprefix(PREFIX).strip()
    known = sorted(path.name for path in folder().iterdir() if path.suffix in (".csv", ".txt"))
    if wanted not in known:
        raise ScenarioError(f"no bundled file '{wanted}'", remedy=suggestion(wanted, known))
    return folder() / wanted


def bundled_as(path: str | Path) -> str | None:
    """Name of a file among the bundled ones, None where it is not one of them."""
    file = Path(path)
    return file.name if file.is_file() and file.resolve().parent == folder().resolve() else None


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


def case_file(case: str | None) -> Path:
    """Scenario file that a command's CASE names: a path, ``bundled:NAME``, or None for the default.

    Raises
    ------
    ScenarioError
        If no scenario of that name is bundled.
    """
    if case is None:
        return bundled()
    return bundled(case.removeprefix(PREFIX).strip()) if case.startswith(PREFIX) else Path(case)
