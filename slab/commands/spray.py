"""`daylayer spray [CASE]`: the hours that lie clear of the inversion, and why the others do not."""

from __future__ import annotations

from datetime import datetime
from pathlib import Path
from typing import Any, Unpack

import click

from slab.commands.case import CaseFlags, case_argument, case_options, inputs_of, scenario_of
from slab.commands.options import (
    Command,
    Moment,
    Outputs,
    accept_doubt_option,
    csv_option,
    finish,
    json_option,
    netcdf_option,
    picture_option,
    quiet_option,
    remark,
    stacked,
    units_option,
)

spray_options = stacked(
    click.option("--observed", "observed_file", metavar="FILE",
                 help="Tower readings (CSV: time, temperature_<height>m_C, wind_<height>m_m_s); coming hours follow them."),
    click.option("--between", type=(float, float), metavar="LOW HIGH", help="Heights of the difference, m.  [default: 1.5 9]"),
    click.option("--field-below", "fields_below", type=click.FloatRange(0.0, 300.0, min_open=True), multiple=True,
                 metavar="M", help="A field this many m below the site; may be repeated."),
    click.option("--record", "record_file", metavar="FILE|-", help="Write the record sheet as CSV; - is stdout."),
    click.option("--now", type=Moment(), metavar="TIME", help="Moment from which hours are plans; the present if left out."),
)  # fmt: skip


@click.command(
    name="spray",
    cls=Command,
    example="""
daylayer spray
daylayer spray my.toml --field-below 6 --picture shed.pdf --record tonight.csv
daylayer spray my.toml --observed tower.csv
daylayer spray --profile newest.csv --latitude 39.2 --longitude -98.6 --elevation 330 --zone Etc/GMT+6 --cover "short grass"
""",
    short_help="Inversion, wind and Delta-T by hour beside your own limits.",
)
@case_argument
@case_options
@spray_options
@json_option
@csv_option
@netcdf_option
@picture_option
@units_option
@quiet_option
@accept_doubt_option
def command(
    case: str | None,
    observed_file: str | None,
    between: tuple[float, float] | None,
    fields_below: tuple[float, ...],
    record_file: str | None,
    now: datetime | None,
    json_file: str | None,
    csv_file: str | None,
    netcdf_file: str | None,
    picture_file: str | None,
    units: str,
    quiet: bool,
    accept_doubt: bool,
    **flags: Unpack[CaseFlags],
) -> None:
    """Plan spraying around the surface inversion, hour by hour.

    CASE is a scenario file in TOML, or bundled:NAME; left out, an invented one, bundled:summer_plain, runs. Limits are
    your own, from its [limits] section; without them only conditions are shown. With --profile no scenario is needed.
    Every hour to come is a plan only: measure on the field.
    """
    scenario = scenario_of(case, flags)
    from slab.products.spray import spray

    observed = None
    if observed_file is not None:
        from forcing.weather import read_observed

        observed = read_observed(Path(observed_file))
    document = spray(scenario, now=now, between=between, observed=observed, fields_below=fields_below)
    taken = inputs_of(scenario) + ([observed_file] if observed_file is not None else [])
    with Outputs(inputs=taken) as outputs:
        if record_file is not None:
            from slab.products.spray_record import record_csv

            outputs.text(record_file, record_csv(document, scenario))
        _files(outputs, document, json_file, csv_file, netcdf_file)
        if picture_file is not None:
            from slab.pictures import save
            from slab.pictures_spray import spray_page

            save(spray_page(document, units=units), outputs.path(picture_file))
        if not quiet and not outputs.on_stdout:
            from slab.products.spray_text import spray_text

            outputs.text("-", spray_text(document, units))
    for warning in document["warnings"]:
        remark(f"warning: {warning}", quiet=quiet)
    finish([one["text"] for one in document["doubts"]], accept=accept_doubt, quiet=quiet)


def _files(
    outputs: Outputs, document: dict[str, Any], json_file: str | None, csv_file: str | None, netcdf_file: str | None
) -> None:
    if json_file is not None:
        from slab.export import to_json

        outputs.text(json_file, to_json(document))
    if csv_file is not None:
        from slab.products.spray_record import calendar_csv

        outputs.text(csv_file, calendar_csv(document))
    if netcdf_file is not None:
        from slab.export import netcdf_bytes

        outputs.path(netcdf_file).write_bytes(netcdf_bytes(document))
