"""`daylayer forecast [CASE]`: the day that follows one morning profile."""

from __future__ import annotations

from typing import Unpack

import click

from slab.commands.case import CaseFlags, case_argument, case_options, inputs_of, scenario_of
from slab.commands.options import (
    Command,
    Outputs,
    accept_doubt_option,
    csv_option,
    finish,
    json_option,
    netcdf_option,
    picture_option,
    quiet_option,
    remark,
    units_option,
)


@click.command(
    name="forecast",
    cls=Command,
    example="""
daylayer forecast
daylayer forecast my.toml --picture day.png --json day.json
daylayer forecast --profile morning.csv --latitude 39.2 --longitude -98.6 --elevation 330 --zone Etc/GMT+6 --cover "short grass"
""",
    short_help="Depth, temperature, moisture and wind of the day after a profile.",
)
@case_argument
@case_options
@click.option(
    "--height",
    "heights",
    type=click.FloatRange(0.5, 100.0),
    multiple=True,
    help="Temperature at this height too, m above ground (1.5, 2, 9 and 10 are there); may be repeated.",
)
@click.option("--write", "write_file", metavar="FILE", help="Save the commented scenario that was used, to edit.")
@json_option
@csv_option
@netcdf_option
@picture_option
@units_option
@quiet_option
@accept_doubt_option
def command(
    case: str | None,
    heights: tuple[float, ...],
    write_file: str | None,
    json_file: str | None,
    csv_file: str | None,
    netcdf_file: str | None,
    picture_file: str | None,
    units: str,
    quiet: bool,
    accept_doubt: bool,
    **flags: Unpack[CaseFlags],
) -> None:
    """Forecast the day (and night) after one balloon profile.

    CASE is a scenario file in TOML, or bundled:NAME; left out, an invented one, bundled:summer_plain, runs. With
    --profile no scenario is needed: what the file does not say is taken from the flags, and everything assumed is
    listed above the result.
    """
    scenario = scenario_of(case, flags)
    from slab.products.forecast import forecast

    document = forecast(scenario, heights=heights)
    with Outputs(inputs=inputs_of(scenario)) as outputs:
        if write_file is not None:
            from forcing.scenario_write import write_toml

            outputs.text(write_file, write_toml(scenario, beside=write_file))
        if json_file is not None or csv_file is not None or netcdf_file is not None:
            from slab.export import netcdf_bytes, to_csv, to_json

            if json_file is not None:
                outputs.text(json_file, to_json(document))
            if csv_file is not None:
                outputs.text(csv_file, to_csv(document))
            if netcdf_file is not None:
                outputs.path(netcdf_file).write_bytes(netcdf_bytes(document))
        if picture_file is not None:
            from slab.pictures import day, save

            save(day(document, units=units), outputs.path(picture_file))
        if not quiet and not outputs.on_stdout:
            from slab.products.forecast_text import forecast_text

            outputs.text("-", forecast_text(document, units))
    from slab.inputs_words import real_warnings

    for warning in real_warnings(document):
        remark(f"warning: {warning}", quiet=quiet)
    finish([one["text"] for one in document["doubts"]], accept=accept_doubt, quiet=quiet)
