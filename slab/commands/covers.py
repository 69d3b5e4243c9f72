"""`daylayer covers [NAME...]`: the land covers with every property, its range and its source."""

from __future__ import annotations

import click

from slab.commands.options import Command, Outputs, csv_option, json_option, quiet_option


@click.command(
    name="covers",
    cls=Command,
    example="""
daylayer covers
daylayer covers "short grass" "70% short grass + 30% deciduous forest"
daylayer covers --case my.toml --csv covers.csv
""",
    short_help="Land covers with albedo, roughness and the rest, range and source.",
)
@click.argument("names", nargs=-1, metavar="[NAME]...")
@click.option("--case", "case_file", metavar="FILE", help="Also list the covers of a scenario file's [covers] tables.")
@json_option
@csv_option
@quiet_option
def command(
    names: tuple[str, ...], case_file: str | None, json_file: str | None, csv_file: str | None, quiet: bool
) -> None:
    """List land covers.

    Without a NAME all of them in one table; with one or more every property with value, range, unit and source. A mixture
    is written by area: "70% short grass + 30% heath".

    --json writes {schema, kind, covers[{name, parts[], thermal_admittance_J_m2_s05_K, properties{name: {value, low, high,
    unit, meaning, source}}}], notes{}}; --csv one row per cover and property.
    """
    from slab.products.covers import covers_csv, covers_document, covers_text

    own = {}
    if case_file is not None:
        from forcing.own_covers import read_own_covers
        from forcing.scenario import read_settings

        own = read_own_covers(read_settings(case_file), case_file)
    document = covers_document(names, own)
    with Outputs(inputs=[case_file] if case_file else []) as outputs:
        if json_file is not None:
            from slab.export import to_json

            outputs.text(json_file, to_json(document))
        if csv_file is not None:
            outputs.text(csv_file, covers_csv(document))
        if not quiet and not outputs.on_stdout:
            outputs.text("-", covers_text(document, full=bool(names)))
