"""`daylayer sounding FILE`: what a profile holds, what was repaired, and where the top is by every definition."""

from __future__ import annotations

from datetime import datetime

import click

from slab.commands.options import (
    Command,
    Outputs,
    accept_doubt_option,
    csv_option,
    elevation_option,
    finish,
    json_option,
    latitude_option,
    longitude_option,
    picture_option,
    quiet_option,
    remark,
    units_option,
    valid_option,
)

FORMATS = ("csv", "temp", "igra")


@click.command(
    name="sounding",
    cls=Command,
    example="daylayer sounding morning.csv --valid 2026-07-14T11:30Z --elevation 330 --picture morning.png",
    short_help="List a profile's levels, repairs, and its top by definition.",
)
@click.argument("file")
@click.option("--format", "file_format", type=click.Choice(FORMATS), help="Format, where it is not to be detected.")
@valid_option
@latitude_option
@longitude_option
@elevation_option
@click.option(
    "--critical", type=click.FloatRange(0.01, 5.0), default=0.25, show_default=True, help="Critical Richardson number."
)
@json_option
@csv_option
@picture_option
@units_option
@click.option("--levels/--no-levels", default=True, show_default=True, help="List every level.")
@quiet_option
@accept_doubt_option
def command(
    file: str,
    file_format: str | None,
    valid: datetime | None,
    latitude: float | None,
    longitude: float | None,
    elevation: float | None,
    critical: float,
    json_file: str | None,
    csv_file: str | None,
    picture_file: str | None,
    units: str,
    levels: bool,
    quiet: bool,
    accept_doubt: bool,
) -> None:
    """Describe one profile FILE.

    Lists levels, repairs by name and count, suspect levels, where the top is by several published definitions, the
    surface inversion, cloud levels and the heat the morning needs. The format (CSV table, WMO TEMP text, IGRA v2) is
    detected. --csv writes the prepared levels as a table that can be read again. Position and time are those of
    the release, where the file does not say.
    """
    import json

    from forcing.profile import prepare
    from forcing.readers import read_sounding
    from forcing.remarks import profile_remarks
    from slab.products.sounding import describe
    from slab.products.sounding_text import levels_csv, text

    sounding = read_sounding(file, format=file_format, valid=valid)
    profile = prepare(sounding, utc_default=valid, latitude=latitude, longitude=longitude, elevation=elevation)
    document = describe(profile, critical=critical)
    with Outputs(inputs=[file]) as outputs:
        if json_file is not None:
            outputs.text(json_file, json.dumps(document, indent=1, allow_nan=False) + "\n")
        if csv_file is not None:
            outputs.text(csv_file, levels_csv(document))
        if picture_file is not None:
            from slab.pictures_sounding import draw

            draw(document, outputs.path(picture_file), units=units)
        if not quiet and not outputs.on_stdout:
            outputs.text("-", text(document, units=units, levels=levels))
    for warning in profile_remarks(profile):
        remark(f"warning: {warning}", quiet=quiet)
    finish([one["text"] for one in document["doubts"]], accept=accept_doubt, quiet=quiet)
