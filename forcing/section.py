"""A section of a scenario file that is asked for typed, bounded values and answers with errors that name the key."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import UTC, date, datetime
from pathlib import Path

from forcing.bundled import located
from forcing.errors import ScenarioError, WeatherError
from forcing.keys import FLAGS, KEYS
from forcing.series import parse_time, suggestion

#: What messages call the place where values come from first-use flags instead of a file.
FLAGS_SOURCE = "flags"
#: Tables beside the sections: the user's own covers by name, and the changes of ground to compare with.
FREE_TABLES = ("covers", "change")
CHANGE_KEYS = ("name", "make")


@dataclass(frozen=True, slots=True)
class Section:
    """Values of one section, with the file and the section name for messages."""

    file: str
    name: str
    values: Mapping[str, object]

    def place(self, key: str) -> str:
        """File, section and key; the flag where the value came from one."""
        if self.file == FLAGS_SOURCE:
            return FLAGS.get(f"{self.name}.{key}", f"--{key.replace('_', '-')}")
        return f"{self.file}: [{self.name}] {key}"

    def only(self, known: Iterable[str]) -> None:
        """Raise on the first key that is not known."""
        names = list(known)
        for key in self.values:
            if key not in names:
                raise ScenarioError("unknown key", place=self.place(key), remedy=suggestion(key, names))

    def number(
        self, key: str, low: float = -math.inf, high: float = math.inf, *, needed: bool = False, unit: str = ""
    ) -> float | None:
        """Finite number within bounds, None where the key is absent."""
        value = self.values.get(key)
        if value is None:
            if needed:
                raise ScenarioError("missing", place=self.place(key), remedy=f"add {key} = a number{_in(unit)}")
            return None
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise ScenarioError(
                f"{_shown(value)} is not a number", place=self.place(key), remedy=f"write a plain number{_in(unit)}"
            )
        number = float(value)
        if not low <= number <= high:
            raise ScenarioError(
                f"{value} is outside {low:g} to {high:g}{_in(unit)}",
                place=self.place(key),
                remedy="check the value and unit",
            )
        return number

    def text(self, key: str, *, needed: bool = False, example: str = "") -> str | None:
        """Text that is not blank, None where the key is absent."""
        value = self.values.get(key)
        if value is None and not needed:
            return None
        if not isinstance(value, str) or not value.strip():
            problem = "missing" if value is None else f"{_shown(value)} is not text"
            raise ScenarioError(problem, place=self.place(key), remedy=f'write {key} = "{example or "..."}"')
        return value.strip()

    def choice(self, key: str, among: Iterable[str]) -> str | None:
        """One of the given words, None where the key is absent."""
        value = self.text(key)
        names = list(among)
        if value is not None and value not in names:
            raise ScenarioError(f"'{value}' is not known", place=self.place(key), remedy=suggestion(value, names))
        return value

    def time(self, key: str) -> datetime | None:
        """Aware UTC time from text or a TOML time, None where the key is absent; a naive one is refused."""
        value = self.values.get(key)
        if value is None:
            return None
        if isinstance(value, datetime):
            value = value.isoformat()
        if not isinstance(value, str):
            raise ScenarioError(
                f"{_shown(value)} is not a time", place=self.place(key), remedy='write for example "2026-07-01T12:00Z"'
            )
        try:
            return parse_time(value, place=self.place(key)).astimezone(UTC)
        except WeatherError as problem:
            raise ScenarioError(problem.problem, place=self.place(key), remedy=problem.remedy) from None

    def day(self, key: str) -> str:
        """ISO date as text, from text or a TOML date."""
        value = self.values.get(key)
        if isinstance(value, date) and not isinstance(value, datetime):
            return value.isoformat()
        try:
            return date.fromisoformat(self.text(key, needed=True, example="2026-05-01") or "").isoformat()
        except ValueError as problem:
            if isinstance(problem, ScenarioError):
                raise
            raise ScenarioError(
                f"{_shown(value)} is not a date", place=self.place(key), remedy='write for example "2026-05-01"'
            ) from None

    def path(self, key: str, folder: Path) -> Path | None:
        """Path of an existing file, bundled or taken from the folder of the scenario; None where the key is absent."""
        value = self.text(key)
        if value is None:
            return None
        try:
            path = located(value, folder)
        except ScenarioError as problem:
            raise ScenarioError(problem.problem, place=self.place(key), remedy=problem.remedy) from None
        if not path.is_file():
            raise ScenarioError(
                f"no file {path}", place=self.place(key), remedy="file names are taken from the folder of the scenario"
            )
        return path


def _in(unit: str) -> str:
    return f" [{unit}]" if unit else ""


def _shown(value: object) -> str:
    return f"'{value}'" if isinstance(value, str) else str(value)


def check_layout(settings: Mapping[str, object], file: str) -> dict[str, Section]:
    """All sections of a scenario, empty where absent; unknown sections and keys are errors.

    Keys of ``[surface]`` are left to the land cover, whose properties may stand there.
    """
    for name, value in settings.items():
        if name == "title":
            if not isinstance(value, str) or not value.strip():
                raise ScenarioError(
                    f"{_shown(value)} is not text", place=f"{file}: title", remedy='write title = "..."'
                )
        elif name in FREE_TABLES:
            _check_free(name, value, file)
        elif name not in KEYS:
            owner = next((section for section, keys in KEYS.items() if name in keys), None)
            remedy = suggestion(name, ["title", *KEYS, *FREE_TABLES])
            if not isinstance(value, Mapping) and owner is not None:
                remedy = f"put it under [{owner}]"
            raise ScenarioError(f"unknown section or key '{name}'", place=file, remedy=remedy)
        elif not isinstance(value, Mapping):
            raise ScenarioError(f"{_shown(value)} is not a section", place=f"{file}: {name}", remedy=f"write [{name}]")
    sections = {}
    for name, keys in KEYS.items():
        values = settings.get(name, {})
        sections[name] = Section(file, name, values if isinstance(values, Mapping) else {})
        if name != "surface":
            sections[name].only(keys)
    return sections


def _check_free(name: str, value: object, file: str) -> None:
    """Raise where ``[covers.<name>]`` or ``[[change]]`` is not a table of its own, or a change lacks its words."""
    rows = value if name == "change" else list(value.values()) if isinstance(value, Mapping) else None
    if not isinstance(rows, list | tuple) or not all(isinstance(row, Mapping) for row in rows):
        shape = "[[change]]" if name == "change" else '[covers."my meadow"]'
        raise ScenarioError(f"{_shown(value)} is not a table", place=f"{file}: {name}", remedy=f"write {shape}")
    if name == "change":
        for number, row in enumerate(rows, start=1):
            part = Section(file, f"change {number}", row)
            part.only(CHANGE_KEYS)
            part.text("make", needed=True, example="albedo +0.10")
            part.text("name")
