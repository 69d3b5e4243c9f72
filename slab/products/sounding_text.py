"""The description of a profile as text: a sentence first, then aligned lower-case tables with units."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from datetime import datetime, timedelta
from textwrap import wrap
from typing import Any

from forcing.units import STYLES, UNIT_TEXT, ZERO_CELSIUS_K, Style
from slab.products.sounding import cautions, restyle, sentence

Document = dict[str, Any]
MISSING = "-"
WIDTH = 100


def table(header: Sequence[str], units: Sequence[str], rows: Sequence[Sequence[str]], *, words: int = 0) -> list[str]:
    """Align columns: numbers to the right, the last `words` columns and the first one where it is text to the left."""
    lines = [list(header), list(units), *[list(row) for row in rows]]
    widths = [max(len(line[i]) for line in lines) for i in range(len(header))]
    left = {i for i in range(len(header)) if i >= len(header) - words}
    return [
        "  "
        + "  ".join(
            cell.ljust(width) if i in left else cell.rjust(width)
            for i, (cell, width) in enumerate(zip(line, widths, strict=True))
        ).rstrip()
        for line in lines
    ]


def _left_first(header: Sequence[str], units: Sequence[str], rows: Sequence[Sequence[str]], *, words: int) -> list[str]:
    """The same with the first column to the left, by padding it before alignment."""
    width = max([len(header[0]), len(units[0]), *[len(row[0]) for row in rows]])

    def pad(row: Sequence[str]) -> list[str]:
        return [row[0].ljust(width), *row[1:]]

    return table(pad(header), pad(units), [pad(row) for row in rows], words=words)


def _kelvin(celsius: float | None) -> float | None:
    return None if celsius is None else celsius + ZERO_CELSIUS_K


def _plain(value: float | None, decimals: int) -> str:
    return MISSING if value is None else f"{value:.{decimals}f}"


def _released(about: dict[str, Any]) -> str:
    """Time in UTC and, where the longitude is known, local mean solar time (UTC plus longitude / 15 per hour)."""
    valid = datetime.fromisoformat(about["valid"])
    told = f"{valid:%Y-%m-%d %H:%M} UTC"
    if about["longitude"] is None:
        return told
    east = (about["longitude"] + 180.0) % 360.0 - 180.0
    return f"{told}, {valid + timedelta(hours=east / 15.0):%H:%M} local mean solar time"


def _head(document: Document, style: Style) -> list[str]:
    about = document["profile"]
    latitude, longitude = about["latitude"], about["longitude"]
    if latitude is None or longitude is None:
        position = "position not given"
    else:
        position = (
            f"{abs(latitude):.2f} {'N' if latitude >= 0 else 'S'} {abs(longitude):.2f} {'E' if longitude >= 0 else 'W'}"
        )
    name, ground = about["station"] or "station not named", style.height(about["elevation_m"])
    source = f"{about['file'] or 'no file'} ({about['format'] or 'computed'})"
    reach, pressure = style.height(about["top_m"]), _plain(about["surface_pressure_hPa"], 1)
    lines = [
        f"  release   {name}, {position}, {ground} above sea level",
        f"  released  {_released(about)}",
        f"  file      {source}",
        f"  levels    {about['levels']}, up to {reach} above ground; surface pressure {pressure} hPa",
    ]
    unknown = [word for word, key in (("wind", "wind_known"), ("humidity", "humidity_known")) if not about[key]]
    if unknown:
        lines.append(f"  unknown   no {' and no '.join(unknown)} in the profile")
    return lines


def _repairs(document: Document, style: Style) -> list[str]:
    lines = ["repairs" if document["repairs"] else "repairs: none"]
    if document["repairs"]:
        rows = [(one["name"], str(one["count"]), restyle(one["detail"], style)) for one in document["repairs"]]
        made = _left_first(("name", "count", "rule"), ("", "", ""), rows, words=1)
        lines += [made[0], *made[2:]]  # these columns have no units
    lines += ["", "suspect levels, kept (heights above ground)" if document["flags"] else "suspect levels: none"]
    if document["flags"]:
        header, units = ("test", "height", "what was found"), ("", style.length, "")
        rows = [
            (f["name"], style.height(f["height_m"], unit=False), restyle(f["detail"], style)) for f in document["flags"]
        ]
        lines += _left_first(header, units, rows, words=1)
    return lines


def _tops(document: Document, style: Style) -> list[str]:
    rows = []
    for top in document["tops"]:
        meaning = restyle(document["definitions"].get(top["definition"], ""), style)
        rows.append((top["definition"], style.height(top["height_m"], unit=False), meaning))
        rows.append(("", "", f"({restyle(top['detail'], style)})"))
    span = document["tops_range"]
    lines = ["where the top is, by definition (heights above ground)"]
    lines += _left_first(("definition", "height", "meaning"), ("", style.length, ""), rows, words=1)
    if span["low_m"] is not None:
        lines.append(f"  range over the definitions: {style.height(span['low_m'])} to {style.height(span['high_m'])}")
    return lines


def _inversion(document: Document, style: Style) -> list[str]:
    lines = ["at the ground (heights above it)"]
    for key, rule in (("inversion", "rising"), ("inversion_tables", "tables")):
        found = document[key]
        meaning = restyle(document["definitions"][f"inversion ({rule})"], style)
        if found is None:
            text = "none"
        else:
            text = (
                f"{style.height(found['base_m'])} to {style.height(found['top_m'])}, "
                f"{style.difference(found['strength_K'])} warmer at its top than at the lowest level"
            )
        lines.append(f"  surface inversion      {text}")
        lines += [f"{'':25}{line}" for line in wrap(f"({rule}: {meaning})", WIDTH - 25)]
    layer = document["superadiabatic"]
    text = "none"
    if layer is not None:
        text = f"up to {style.height(layer['depth_m'])}, excess {style.difference(layer['excess_K'])}"
    return [*lines, f"  superadiabatic layer   {text}"]


def _heat(document: Document, style: Style) -> list[str]:
    cloud, heat = document["cloud"], document["heat"]
    broken = "nothing to break" if document["inversion"] is None else f"{_plain(heat['inversion_MJ_m2'], 2)} MJ m-2"
    rows = (
        (
            "condensation level",
            f"{style.height(cloud['condensation_level_mean_m'])} (air of the lowest 100 hPa, mixed)",
        ),
        ("", f"{style.height(cloud['condensation_level_surface_m'])} (air of the lowest level)"),
        ("convective temperature", f"{style.degrees(_kelvin(cloud['convective_temperature_C']))} at the ground"),
        ("cumulus base then", style.height(cloud["convective_level_m"])),
        ("heat to reach it", f"{_plain(heat['convective_MJ_m2'], 2)} MJ m-2"),
        ("heat to break inversion", f"{broken} (all air below its top to one dry adiabat)"),
        ("precipitable water", f"{_plain(document['precipitable_water_mm'], 1)} mm"),
    )
    return ["heat and cloud (heights above ground)", *[f"  {name:25}{text}" for name, text in rows]]


def _levels(document: Document, style: Style) -> list[str]:
    data = document["levels"]
    rows = [
        (
            style.height(data["height_m"][i], unit=False),
            style.height(data["height_msl_m"][i], unit=False),
            _plain(data["pressure_hPa"][i], 1),
            style.degrees(_kelvin(data["temperature_C"][i]), unit=False),
            style.degrees(_kelvin(data["dewpoint_C"][i]), unit=False),
            _plain(data["theta_K"][i], 1),
            _plain(data["mixing_ratio_g_kg"][i], 2),
            style.wind(data["wind_m_s"][i], unit=False),
            _plain(data["wind_from_deg"][i], 0),
        )
        for i in range(len(data["height_m"]))
    ]
    header = ("above", "above", "pressure", "air", "dew", "potential", "mixing", "wind", "from")
    second = ("ground", "sea", "", "", "point", "temperature", "ratio", "", "")
    speed, warmth = UNIT_TEXT[style.speed], UNIT_TEXT[style.temperature]
    units = (style.length, style.length, "hPa", warmth, warmth, "K", "g/kg", speed, "deg")
    return ["levels", *table(header, second, [units, *rows])]


def text(document: Document, *, units: str = "metric", levels: bool = True) -> str:
    """Format a description for reading: the sentence, the tops, the ground, heat and cloud, repairs, levels, cautions.

    `document` is what `slab.products.sounding.describe` gives; `units` is metric or us.
    """
    style = STYLES[units]
    blocks = [
        wrap(sentence(document, style), WIDTH),
        _head(document, style),
        _tops(document, style),
        _inversion(document, style),
    ]
    blocks += [_heat(document, style), _repairs(document, style)]
    if levels:
        blocks.append(_levels(document, style))
    notes = [f"caution {one['code']}: {one['text']}" for one in cautions(document, style)]
    blocks.append([line for note in notes for line in wrap(note, WIDTH, subsequent_indent="  ")])
    return "\n".join("\n".join(block) + "\n" for block in blocks)


COLUMNS = {
    "pressure_hPa": "pressure_hPa",
    "height_m": "height_msl_m",
    "temperature_C": "temperature_C",
    "dewpoint_C": "dewpoint_C",
    "wind_dir_deg": "wind_from_deg",
    "wind_speed_m_s": "wind_m_s",
}
"""Columns of a profile table, and the list of the document each is taken from; heights above sea level."""


def levels_csv(document: Document) -> str:
    """The prepared levels as a profile table that every command can read again; blank is missing."""
    data = document["levels"]
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(COLUMNS)
    for i in range(len(data["height_m"])):
        writer.writerow("" if data[key][i] is None else data[key][i] for key in COLUMNS.values())
    return out.getvalue()
