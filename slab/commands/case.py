"""The case a command runs: a scenario file, a bundled scenario, or one profile and a few flags."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime
from typing import TYPE_CHECKING, TypedDict

import click

from forcing.errors import DaylayerError
from slab.commands.options import (
    cover_option,
    elevation_option,
    hours_option,
    latitude_option,
    longitude_option,
    profile_option,
    stacked,
    valid_option,
    zone_option,
)

if TYPE_CHECKING:
    from forcing.scenario_types import Scenario


class CaseFlags(TypedDict):
    """Values of the first-use flags; None where not given."""

    profile_file: str | None
    latitude: float | None
    longitude: float | None
    elevation: float | None
    zone: str | None
    cover: str | None
    soil_moisture: float | None
    cloud: float | None
    wind: float | None
    wind_from: float | None
    valid: datetime | None
    rebase: str | None
    hours: int | None


case_argument = click.argument("case", required=False)
case_options = stacked(
    profile_option,
    latitude_option,
    longitude_option,
    elevation_option,
    zone_option,
    cover_option,
    click.option("--soil-moisture", type=click.FloatRange(0.0, 1.0), help="0 wilting point to 1 field capacity."),
    click.option("--cloud", type=click.FloatRange(0.0, 1.0), help="Cloud fraction."),
    click.option("--wind", type=click.FloatRange(0.0, 100.0), help="Pressure-gradient wind, m/s."),
    click.option("--wind-from", type=click.FloatRange(0.0, 360.0), help="Direction it blows from, degrees."),
    valid_option,
    click.option(
        "--rebase",
        type=click.Choice(["sea-level", "ground"]),
        help="How a profile is brought to a site of another elevation.",
    ),
    hours_option,
)


def scenario_of(case: str | None, flags: CaseFlags) -> Scenario:
    """The scenario that CASE and the flags name; without either a bundled one.

    Raises
    ------
    click.UsageError
        If CASE and first-use flags are mixed, or a flag is wrong or missing.
    DaylayerError
        If a file is wrong.
    """
    from forcing.bundled import case_file
    from forcing.scenario import from_flags, load, with_run

    first_use = {name: value for name, value in flags.items() if value is not None and name != "hours"}
    hours = flags["hours"]
    if flags["profile_file"] is not None:
        if case is not None:
            raise click.UsageError("CASE and --profile exclude each other: the scenario file names its own profile.")
        try:
            return from_flags(
                profile=flags["profile_file"], latitude=flags["latitude"], longitude=flags["longitude"],
                elevation=flags["elevation"], zone=flags["zone"], cover=flags["cover"],
                soil_moisture=flags["soil_moisture"], cloud=flags["cloud"], wind=flags["wind"],
                wind_from=flags["wind_from"], valid=flags["valid"], rebase=flags["rebase"], hours=hours,
            )  # fmt: skip
        except DaylayerError as error:
            if error.place.startswith("--"):  # a flag is wrong or missing, not a file
                raise click.UsageError(str(error)) from None
            raise
    if first_use:
        named = ", ".join("--" + name.replace("_", "-").removesuffix("-file") for name in first_use)
        raise click.UsageError(f"{named} needs --profile FILE; with a scenario file, change the value there.")
    scenario = load(case_file(case))
    return scenario if hours is None else with_run(scenario, hours=float(hours))


def inputs_of(scenario: Scenario) -> list[str]:
    """Files a scenario was read from, so that no output overwrites them."""
    from forcing.section import FLAGS_SOURCE

    names: list[object] = [] if scenario.source == FLAGS_SOURCE else [scenario.source]
    # the settings hold names taken from the scenario's own folder; those in messages are shorter
    for section, key in (("profile", "file"), ("profile", "later"), ("weather", "file"), ("surface", "fluxes")):
        values = scenario.settings.get(section)
        names.append(values.get(key) if isinstance(values, Mapping) else None)
    return [name for name in names if isinstance(name, str) and name]
