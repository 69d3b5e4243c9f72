"""`daylayer compare [CASE]`: a base case and changes of its ground, over one day or many, by day and night."""

from __future__ import annotations

import os
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any, Unpack

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

if TYPE_CHECKING:
    from slab.products.changes import Change
    from slab.products.days import Day

USUAL = ("albedo +0.10", "canopy +10%")
"""Changes that are shown where none is given."""
MANY_DAYS_HOURS = 30.0
"""Length of each run [h] over many days: past the break-up of the next morning."""
COMPILE_FROM = 30
"""Runs from which compiling pays."""
ASSUMED_DAYS = 30
"""Days counted for a folder whose profiles are not read yet."""


@click.command(
    name="compare",
    cls=Command,
    example="""
daylayer compare --change "albedo +0.10" --change "canopy +10%"
daylayer compare my.toml --change "cool roofs: roof albedo 0.65" --picture roofs.png --csv roofs.csv
daylayer compare --days temperate --cover "open low buildings" --change "30% deciduous forest" --sensitivity
daylayer compare my.toml --profiles soundings/ --months 6-8 --clear-only --change irrigation
""",
    short_help="What a change of ground does to day and night.",
)
@case_argument
@case_options
@click.option(
    "--change", "changes", multiple=True, metavar="WORDS", help="A change of ground; may be repeated. See below."
)
@click.option("--days", metavar="CLIMATE", help="Run over the bundled invented days of a climate, or: all.")
@click.option("--profiles", metavar="PLACE", help="Run over every morning of a folder of profiles or an archive file.")
@click.option("--months", metavar="N-N", help="Of --profiles, these months only: 6-8 or 6,7,8.")
@click.option("--clear-only", is_flag=True, help="Of --profiles, mornings without a humid level (85 %) only.")
@click.option(
    "--threshold", type=click.FloatRange(-40.0, 60.0), help="2 m temperature for hours above, C. [default: 30]"
)
@click.option("--observed", "observed_file", metavar="FILE", help="Readings (CSV) to score the base case with.")
@click.option("--sensitivity", is_flag=True, help="Also rerun one day with every property at the ends of its range.")
@json_option
@csv_option
@netcdf_option
@picture_option
@units_option
@quiet_option
@accept_doubt_option
def command(
    case: str | None,
    changes: tuple[str, ...],
    days: str | None,
    profiles: str | None,
    months: str | None,
    clear_only: bool,
    threshold: float | None,
    observed_file: str | None,
    sensitivity: bool,
    json_file: str | None,
    csv_file: str | None,
    netcdf_file: str | None,
    picture_file: str | None,
    units: str,
    quiet: bool,
    accept_doubt: bool,
    **flags: Unpack[CaseFlags],
) -> None:
    """Compare a base case with changes of its ground.

    The base is CASE (or the first-use flags); every change runs from the same release and weather. With --days or
    --profiles the ground of CASE, or --cover and --soil-moisture, is run over many days.

    A change is one or more steps, parted by commas, after a name and a colon where a name is wanted:

    \b
      cover irrigated crop       the whole area becomes this cover (daylayer covers lists them)
      30% deciduous forest       that part of the area does
      canopy +10%                the same with trees
      irrigation                 the soil is kept wet
      soil moisture 0.8          a value; +0.2 shifts it, +10% scales it
      albedo +0.10               any property of a cover, in the same three ways
      roof albedo 0.65           roofs only
      heat +20                   heat from people, W/m2
      cool roofs: roof albedo 0.65, emissivity 0.92

    In a scenario file the same words stand in [[change]] tables: name = "cool roofs", make = "roof albedo 0.65".
    """
    many = days is not None or profiles is not None
    if days is not None and profiles is not None:
        raise click.UsageError("--days and --profiles exclude each other.")
    if profiles is None and (months is not None or clear_only):
        raise click.UsageError("--months and --clear-only choose among --profiles.")
    chosen = _months(months)
    count = ASSUMED_DAYS if profiles is not None else 10 if days == "all" else 2 if many else 1
    _compile_where_it_pays((1 + max(1, len(changes))) * (count + 40 * sensitivity), quiet)
    inputs: list[str] = []
    if many:
        listed, given = _many(case, flags, days, profiles, chosen, clear_only)
        inputs = [case] if case is not None else []
        if profiles is not None:
            inputs += [str(one) for one in (Path(profiles), *Path(profiles).glob("*"))]
    else:
        from slab.products.changes import changes_of
        from slab.products.days import Day

        scenario = scenario_of(case, flags)
        inputs, given = inputs_of(scenario), changes_of(scenario)
        listed = [Day(f"{scenario.profile.valid:%Y-%m-%d}", scenario)]
    document = _compared(listed, _wanted(changes, given, quiet), threshold, observed_file, sensitivity, quiet)
    with Outputs(inputs=[*inputs, *([observed_file] if observed_file else [])]) as outputs:
        _write(document, outputs, json_file, csv_file, netcdf_file, picture_file, units)
        if not quiet and not outputs.on_stdout:
            from slab.products.compare_text import compare_text
            from slab.wording import units_named

            outputs.text("-", compare_text(document, units_named(units)))
    for warning in document["warnings"]:
        remark(f"warning: {warning}", quiet=quiet)
    finish([one["text"] for one in document["doubts"]], accept=accept_doubt, quiet=quiet)


def _months(text: str | None) -> tuple[int, ...]:
    """Months from ``6-8`` or ``6,7,8``; a range may pass the turn of the year."""
    if text is None:
        return ()
    found: list[int] = []
    for part in text.split(","):
        first, dash, last = part.partition("-")
        try:
            start, end = int(first), int(last if dash else first)
        except ValueError:
            raise click.UsageError(f"--months '{text}' is not understood; write 6-8 or 6,7,8.") from None
        if not (1 <= start <= 12 and 1 <= end <= 12):
            raise click.UsageError(f"--months '{text}': months are 1 to 12.")
        found += [(start + n - 1) % 12 + 1 for n in range((end - start) % 12 + 1)]
    return tuple(found)


def _compile_where_it_pays(runs: int, quiet: bool) -> None:
    """Ask for compiled kernels before they are imported, where there are many runs."""
    if runs >= COMPILE_FROM and "forcing.speed" not in sys.modules and "DAYLAYER_COMPILED" not in os.environ:
        os.environ["DAYLAYER_COMPILED"] = "1"
        remark("many runs: the model is compiled, which takes one to three minutes the first time", quiet=quiet)


def _many(case: str | None, flags: CaseFlags, days: str | None, profiles: str | None, months: tuple[int, ...],
          clear_only: bool) -> tuple[list[Day], tuple[Change, ...]]:  # fmt: skip
    """Days over the ground of the case or of the flags, and the changes that the case names."""
    from slab.products.changes import change_of
    from slab.products.days import profile_days, typical_days

    settings = _settings(case, flags)
    run = dict(settings.get("run", {}))
    if flags["hours"] is not None or "hours" not in run:
        run["hours"] = float(flags["hours"] or MANY_DAYS_HOURS)
    settings["run"] = run
    rows = settings.get("change", [])
    given = tuple(change_of(str(row["make"]), name=str(row.get("name", "")), place=str(case)) for row in rows)
    if days is not None:
        return typical_days(days, settings), given
    assert profiles is not None
    if "time_zone" not in settings.get("site", {}):
        raise click.UsageError("--profiles needs a site: a CASE, or --zone and what the files do not say.")
    return profile_days(Path(profiles), settings, months=months, clear_only=clear_only), given


def _settings(case: str | None, flags: CaseFlags) -> dict[str, Any]:
    """Plain settings of the case without its profile, or of the flags."""
    if flags["profile_file"] is not None:
        raise click.UsageError("--profile is one day; leave it out with --days or --profiles.")
    if case is not None:
        from forcing.scenario import read_settings

        named = [name for name, value in flags.items() if value is not None and name != "hours"]
        if named:
            raise click.UsageError(f"--{named[0].replace('_', '-')} stands in CASE; change the value there.")
        settings = read_settings(case)
        settings.pop("profile", None)
        return settings
    sections: dict[str, dict[str, object]] = {
        "site": {"latitude": flags["latitude"], "longitude": flags["longitude"], "elevation": flags["elevation"],
                 "time_zone": flags["zone"]},
        "surface": {"cover": flags["cover"], "soil_moisture": flags["soil_moisture"]},
        "weather": {"cloud_fraction": flags["cloud"], "pressure_gradient_wind_m_s": flags["wind"],
                    "pressure_gradient_wind_from_deg": flags["wind_from"]},
    }  # fmt: skip
    kept = {name: {key: one for key, one in values.items() if one is not None} for name, values in sections.items()}
    return {"title": "comparison", **kept}


def _wanted(words: tuple[str, ...], given: tuple[Change, ...], quiet: bool) -> list[Change]:
    """Changes of the case, then those of the options; two usual ones where there are none."""
    from slab.products.changes import change_of

    found = [*given, *(change_of(text) for text in words)]
    if not found:
        remark(f"no change was given; shown are: {', '.join(USUAL)}", quiet=quiet)
        found = [change_of(text) for text in USUAL]
    names = [one.name for one in found]
    twice = next((name for name in names if names.count(name) > 1), None)
    if twice is not None:
        raise click.UsageError(f"two changes are named '{twice}'; give each a name before a colon.")
    return found


def _compared(days: list[Day], changes: list[Change], threshold: float | None, observed_file: str | None,
              sensitivity: bool, quiet: bool) -> dict[str, Any]:  # fmt: skip
    from slab.products.compare import THRESHOLD, compare

    observed = None
    if observed_file is not None:
        from forcing.weather import read_observed

        observed = read_observed(Path(observed_file))

    def progress(text: str) -> None:
        if len(days) > 1 or sensitivity:
            remark(text, quiet=quiet)

    limit = THRESHOLD if threshold is None else threshold
    return compare(days, changes, threshold=limit, observed=observed, sensitivity=sensitivity, progress=progress)


def _write(document: dict[str, Any], outputs: Outputs, json_file: str | None, csv_file: str | None,
           netcdf_file: str | None, picture_file: str | None, units: str) -> None:  # fmt: skip
    """Every file that was asked for."""
    from slab.products.compare_files import compare_csv, compare_netcdf

    if json_file is not None:
        from slab.export import to_json

        outputs.text(json_file, to_json(document))
    if csv_file is not None:
        outputs.text(csv_file, compare_csv(document))
    if netcdf_file is not None:
        outputs.path(netcdf_file).write_bytes(compare_netcdf(document))
    if picture_file is not None:
        from slab.pictures import save
        from slab.pictures_compare import page

        save(page(document, units=units), outputs.path(picture_file))
