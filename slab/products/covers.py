"""The table of land covers as a document, text and CSV: every property with value, range, unit and source."""

from __future__ import annotations

import csv
import io
import math
import textwrap
from collections.abc import Mapping, Sequence
from typing import Any

from forcing.cover import LIMITS, Cover, Property, anthropogenic_course, soil_resistance, table
from forcing.own_covers import resolve, spelled
from slab.products.changes import BLENDING

SCHEMA = "daylayer/1"
WIDTH = 112
UNCHECKED = "not checked against the source"
SOURCES_NOTE = (
    f"where it says ({UNCHECKED}), the number was noted from memory of that source, which was not opened again; lean on the "
    "range more than on the value"
)
BUILT_NOTE = "the built classes follow a published classification (local climate zones, Stewart & Oke 2012)"
MEANINGS: Mapping[str, str] = {
    "albedo": "reflected part of sunlight",
    "emissivity": "emitted part of black-body radiation",
    "roughness_momentum": "roughness length of wind",
    "roughness_log_ratio": "logarithm of the roughness length of wind over that of heat",
    "displacement": "height that the wind profile starts from",
    "skin_conductance": "heat conductance between skin and soil top",
    "vegetation_fraction": "part of the area under plants",
    "impervious_fraction": "part of the area that is sealed and dry",
    "leaf_area": "leaf area over ground area, of the part under plants",
    "stomatal_resistance_min": "least resistance of a leaf's stomata",
    "stomatal_radiation": "sunlight at which stomata are half open",
    "stomatal_slope": "opening of stomata with humidity",
    "soil_conductivity_dry": "heat conductivity of soil or walls, dry",
    "soil_conductivity_wet": "heat conductivity of soil or walls, wet",
    "soil_heat_capacity_dry": "heat capacity of soil or walls, dry",
    "soil_heat_capacity_wet": "heat capacity of soil or walls, wet",
    "soil_moisture_least": "the soil is never drier (0 wilting point to 1 field capacity)",
    "soil_moisture_most": "the soil is never wetter",
    "built_fraction": "plan area of roofs",
    "sky_view": "part of the sky seen from open ground between",
    "anthropogenic_heat": "heat released by people, mean of the day",
    "snow": "1 where snow lies",
}


def admittance(cover: Cover, moisture: float = 0.5) -> float:
    """Thermal admittance [J m-2 s-1/2 K-1] of the ground at a soil moisture: root of conductivity times heat capacity."""
    wet = max(cover.soil_moisture_least, min(cover.soil_moisture_most, moisture))
    conductivity = cover.soil_conductivity_dry + wet * (cover.soil_conductivity_wet - cover.soil_conductivity_dry)
    capacity = cover.soil_heat_capacity_dry + wet * (cover.soil_heat_capacity_wet - cover.soil_heat_capacity_dry)
    return math.sqrt(conductivity * capacity)


def cover_record(cover: Cover) -> dict[str, Any]:
    """A cover as plain values: name, properties and, of a mixture, its parts."""
    return {
        "cover": cover.name,
        "properties": {key: float(f"{getattr(cover, key):.9g}") for key in LIMITS},
        "parts": [{"cover": part.name, "area_fraction": round(share, 9)} for share, part in cover.parts],
    }


def ranges(cover: Cover) -> dict[str, Property]:
    """Value and published range of every property: of the built-in table, shifted to a cover's own values.

    A mixture has the area means of its parts' ranges; a cover that is not in the table has no range of its own.
    """
    known = table()
    if cover.parts:
        found = {}
        parts = [(share, ranges(part)) for share, part in cover.parts]
        for key in LIMITS:
            value = getattr(cover, key)
            mean = sum(share * own[key].value for share, own in parts)
            low, high = (sum(share * getattr(own[key], end) for share, own in parts) for end in ("low", "high"))
            if key == "roughness_momentum" and mean > 0.0:  # blended by drag, so its range is scaled, not shifted
                low, high = value * low / mean, value * high / mean
            else:
                low, high = value + low - mean, value + high - mean
            found[key] = Property(value, low, high, parts[0][1][key].unit, "area mean of the ranges of the parts")
        return found
    rows = known.get(spelled(cover.name))
    if rows is None:
        like = next(iter(known.values()))
        return {
            key: Property(value := getattr(cover, key), value, value, like[key].unit, "given by the user")
            for key in LIMITS
        }
    return {
        key: one if one.value == getattr(cover, key) else Property(
            value := getattr(cover, key), min(one.low, value), max(one.high, value), one.unit, f"given by the user; {one.source}"
        )
        for key, one in rows.items()
    }  # fmt: skip


def covers_document(wanted: Sequence[str] = (), own: Mapping[str, Cover] | None = None) -> dict[str, Any]:
    """The covers as plain values.

    Parameters
    ----------
    wanted : sequence of str
        Names, or mixtures as ``"70% short grass + 30% deciduous forest"``; all covers where empty.
    own : mapping
        The user's own covers by name.

    Raises
    ------
    CoverError
        Unknown name, or area fractions that do not sum to 1.
    """
    mine = dict(own or {})
    names = list(wanted) or [*table(), *mine]
    return {
        "schema": SCHEMA,
        "kind": "covers",
        "covers": [_entry(resolve(name, mine)) for name in names],
        "notes": {
            "blending": BLENDING,
            "sources": SOURCES_NOTE,
            "built_classes": BUILT_NOTE,
            "soil_moisture": "conductivity and heat capacity are linear between dry (wilting point) and wet (field capacity)",
            "bare_soil_resistance_s_m": {str(m): round(soil_resistance(m), 1) for m in (0.0, 0.25, 0.5, 0.75, 1.0)},
            "anthropogenic_course": {str(h): round(anthropogenic_course(float(h)), 3) for h in range(24)},
        },
    }


def _entry(cover: Cover) -> dict[str, Any]:
    return {
        "name": cover.name,
        "parts": [{"name": part.name, "area_fraction": round(share, 9)} for share, part in cover.parts],
        "thermal_admittance_J_m2_s05_K": round(admittance(cover), 0),
        "properties": {
            key: {
                "value": one.value, "low": one.low, "high": one.high, "unit": one.unit, "meaning": MEANINGS[key],
                "source": one.source,
            }
            for key, one in ranges(cover).items()
        },
    }  # fmt: skip


def covers_csv(document: Mapping[str, Any]) -> str:
    """One row per cover and property, in the layout of the built-in table with the meaning added."""
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(["cover", "property", "value", "low", "high", "unit", "meaning", "source"])
    for cover in document["covers"]:
        for key, one in cover["properties"].items():
            numbers = [f"{one[end]:.9g}" for end in ("value", "low", "high")]
            writer.writerow([cover["name"], key, *numbers, one["unit"], one["meaning"], one["source"]])
    return buffer.getvalue()


_COLUMNS = (
    ("albedo", "albedo", "{:.2f}"), ("emiss", "emissivity", "{:.2f}"), ("z0 m", "roughness_momentum", "{:.2g}"),
    ("plants", "vegetation_fraction", "{:.2f}"), ("sealed", "impervious_fraction", "{:.2f}"), ("leaves", "leaf_area", "{:.1f}"),
    ("stomata", "stomatal_resistance_min", "{:.0f}"), ("roofs", "built_fraction", "{:.2f}"), ("sky", "sky_view", "{:.2f}"),
    ("people", "anthropogenic_heat", "{:.0f}"),
)  # fmt: skip


def covers_text(document: Mapping[str, Any], *, full: bool) -> str:
    """Aligned table of all covers, or with ``full`` every property of each with range and source."""
    covers = document["covers"]
    lines = [f"{len(covers)} land cover{'s' if len(covers) != 1 else ''}", ""]
    if full:
        for one in covers:
            lines += [*_one(one), ""]
    else:
        lines += [*_overview(covers), ""]
    notes = document["notes"]
    course = notes["anthropogenic_course"]
    lines += [
        notes["built_classes"],
        *(textwrap.wrap(f"sources: {notes['sources']}", WIDTH, subsequent_indent="  ") if full else ()),
        *textwrap.wrap(f"mixtures: {notes['blending']}", WIDTH, subsequent_indent="  "),
        "heat from people over its daily mean, by local hour: "
        + ", ".join(f"{hour} h {course[str(hour)]:.2f}" for hour in (3, 8, 13, 18, 23)),
        "a cover of your own: [covers.\"my meadow\"] with like = \"tall grass\" and any property, in a scenario file",
    ]  # fmt: skip
    return "\n".join(lines) + "\n"


def _overview(covers: Sequence[Mapping[str, Any]]) -> list[str]:
    wide = max(len(one["name"]) for one in covers)
    grid = [
        ["", *(title for title, _, _ in _COLUMNS), "admit"],
        ["", *([""] * 2), "", "", "", "", "s/m", "", "", "W/m2", "J"],
    ]
    for one in covers:
        cells = [form.format(one["properties"][key]["value"]) for _, key, form in _COLUMNS]
        grid.append([one["name"], *cells, f"{one['thermal_admittance_J_m2_s05_K']:.0f}"])
    widths = [max(len(row[n]) for row in grid) for n in range(len(grid[0]))]
    lines = [
        f"{row[0]:<{wide}}  " + "  ".join(cell.rjust(w) for cell, w in zip(row[1:], widths[1:], strict=True))
        for row in grid
    ]
    return [
        *(line.rstrip() for line in lines),
        "",
        "z0 roughness length; plants, sealed, roofs: parts of the area; stomata: least resistance; sky: part of the sky seen;",
        "people: heat they release, mean of the day; admit: thermal admittance at half soil moisture, J m-2 s-1/2 K-1",
        "every property of one cover with range and source: daylayer covers \"short grass\"",
    ]  # fmt: skip


def _one(cover: Mapping[str, Any]) -> list[str]:
    lines = [
        f"{cover['name']} (thermal admittance {cover['thermal_admittance_J_m2_s05_K']:.0f} J m-2 s-1/2 K-1 at half soil moisture)"
    ]
    wide = max(len(key) for key in cover["properties"])
    for key, one in cover["properties"].items():
        span = "" if one["low"] == one["high"] == one["value"] else f" ({one['low']:.4g} to {one['high']:.4g})"
        unit = "" if one["unit"] == "1" else f" {one['unit']}"
        lines.append(f"  {key:<{wide}}  {one['value']:.4g}{unit}{span}: {one['meaning']}")
        lines += textwrap.wrap(
            one["source"], WIDTH, initial_indent=" " * (wide + 4), subsequent_indent=" " * (wide + 4)
        )
    return lines
