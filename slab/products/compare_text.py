"""A comparison in words: what was compared on which days, what each change does, how far to trust it."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from slab.wording import METRIC, Units, number

Document = Mapping[str, Any]
WIDTH = 112
SHOWN = 8  # rows of the sensitivity that are printed

#: Answers that are printed, with the words and the kind of number.
ROWS = (
    ("temperature_2m_max_C", "highest 2 m temperature", "difference"),
    ("temperature_2m_max_hour", "its hour", "hour"),
    ("temperature_2m_min_C", "lowest 2 m temperature", "difference"),
    ("temperature_2m_min_hour", "its hour", "hour"),
    ("temperature_2m_day_C", "mean by day", "difference"),
    ("temperature_2m_night_C", "mean by night", "difference"),
    ("theta_max_K", "warmest mixed layer (potential)", "difference"),
    ("skin_temperature_max_C", "warmest skin", "difference"),
    ("skin_temperature_min_C", "coldest skin", "difference"),
    ("hours_above_threshold", "hours above the threshold", "hour"),
    ("degree_hours", "degree-hours above it", "degree hours"),
    ("mixing_depth_max_m", "greatest mixing depth", "height"),
    ("ventilation_max_m2_s", "greatest ventilation", "ventilation"),
    ("mixing_ratio_day_g_kg", "water vapour by day", "g/kg"),
    ("relative_humidity_min_pct", "lowest relative humidity", "%"),
    ("inversion_strength_max_K", "strongest inversion", "difference"),
    ("flux_start_hour", "sensible heat upward from", "hour"),
    ("flux_end_hour", "sensible heat downward from", "hour"),
    ("bowen_ratio_midday", "Bowen ratio at midday", "ratio"),
)
TERMS = (
    ("net_radiation", "net radiation (down)"), ("anthropogenic", "heat from people"), ("sensible", "sensible heat (up)"),
    ("latent", "latent heat (up)"), ("ground", "into ground and walls"),
)  # fmt: skip


def compare_text(document: Document, units: Units = METRIC) -> str:
    """The whole comparison as text."""
    lines = [*_head(document, units), ""]
    for change in document["changes"]:
        lines += [*_change(document, change, units), ""]
    lines += [*_sensitivity(document, units), *_observed(document), *_foot(document, units)]
    return "\n".join(lines) + "\n"


def sentence(document: Document, change: Document, units: Units) -> str:
    """What one change does, in a sentence."""
    answers = change["answers"]
    warm, cold, depth = (
        answers[name]["difference"] for name in ("temperature_2m_max_C", "temperature_2m_min_C", "mixing_depth_max_m")
    )
    if warm["median"] is None:
        return f"{change['name']}: no answer"
    parts = [f"highest 2 m temperature {_spread(warm, 'difference', units, document)}"]
    if cold["median"] is not None:
        parts.append(f"lowest {_spread(cold, 'difference', units, document)}")
    if depth["median"] is not None:
        parts.append(f"greatest mixing depth {_spread(depth, 'height', units, document)}")
    return f"{change['name']}: {', '.join(parts)}"


def _said(value: float | None, kind: str, units: Units, *, signed: bool = True) -> str:
    if value is None:
        return "not known"
    metric = units.name == "metric"
    scale, step, unit = {
        "difference": (1.0 if metric else 1.8, 0.01 if metric else 0.1, "K" if metric else "°F"),
        "degree hours": (1.0 if metric else 1.8, 0.1, "K h" if metric else "°F h"),
        "hour": (1.0, 0.1, "h"),
        "height": (units.height_value(1.0), 5.0 if metric else 20.0, units.height_unit),
        "ventilation": (units.ventilation_value(1.0), 100.0 if metric else 1000.0, units.ventilation_unit),
        "g/kg": (1.0, 0.01, "g/kg"),
        "%": (1.0, 0.1, "%"),
        "ratio": (1.0, 0.01, ""),
        "flux": (1.0, 1.0, "W/m²"),
    }[kind]
    text = number(value * scale, step)
    sign = "+" if signed and not text.startswith("-") and float(text) != 0.0 else ""
    return f"{sign}{text} {unit}".rstrip()


def _spread(row: Document, kind: str, units: Units, document: Document) -> str:
    text = _said(row["median"], kind, units)
    if document["days"]["used"] > 1 and row["median"] is not None:
        low, high = (_said(row[key], kind, units) for key in ("low", "high"))
        text += f" ({low.removesuffix(' ' + high.partition(' ')[2])} to {high})"
    return text


def _wrapped(text: str, indent: str = "") -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=indent + "  ")


def _head(document: Document, units: Units) -> list[str]:
    base, days = document["base"], document["days"]
    lines = [one for change in document["changes"] for one in _wrapped(sentence(document, change, units))]
    where = document["site"]["name"]
    lines += ["", *_wrapped(f"base case: {base['cover']}, soil moisture {base['soil_moisture']:g}, at {where}")]
    shown = (
        "albedo",
        "emissivity",
        "roughness_momentum",
        "vegetation_fraction",
        "impervious_fraction",
        "anthropogenic_heat",
    )
    lines += _wrapped(", ".join(f"{key} {base['properties'][key]:.3g}" for key in shown), "  ")
    lines += _wrapped(coverage(document))
    for one in days["left_out"]:
        lines += _wrapped(f"left out {one['count']}: {one['reason']} (first {one['first']})", "  ")
    lines += _wrapped(
        f"differences are changed minus base, {document['spread']}; threshold {units.temperature(document['threshold_C'])}"
    )
    return lines


def coverage(document: Document) -> str:
    """Which days were used."""
    days = document["days"]
    names = [run["day"] for run in days["runs"]]
    listed = ", ".join(names) if len(names) <= 12 else f"{names[0]} to {names[-1]}"
    return f"days: {days['used']} of {days['given']} used ({listed}), {document['run']['hours']:g} h from each release"


def _change(document: Document, change: Document, units: Units) -> Iterator[str]:
    yield change["name"]
    for step in change["steps"]:
        yield from _wrapped(step, "  ")
    wide = max(len(words) for _, words, _ in ROWS)
    yield f"  {'':<{wide}}  {'base':>16}  {'changed':>16}  difference"
    for name, words, kind in ROWS:
        row = change["answers"][name]
        if row["base"]["median"] is None and row["changed"]["median"] is None:
            continue
        base, after = (_absolute(name, row[key]["median"], kind, units) for key in ("base", "changed"))
        yield f"  {words:<{wide}}  {base:>16}  {after:>16}  {_spread(row['difference'], kind, units, document)}"
    yield f"  {'surface balance, W/m²':<{wide}}  {'day base':>16}  {'day changed':>16}  {'night base':>12}  {'night changed':>14}"
    for term, words in TERMS:
        cells = [
            _said(change["answers"][f"{term}_{when}_W_m2"][side]["median"], "flux", units, signed=False).removesuffix(
                " W/m²"
            )
            for when in ("day", "night")
            for side in ("base", "changed")
        ]
        yield f"  {words:<{wide}}  {cells[0]:>16}  {cells[1]:>16}  {cells[2]:>12}  {cells[3]:>14}"
    if change["tiles"] is not None:
        gap = change["tiles"]["side_by_side_minus_blend"]
        yield from _wrapped(
            f"its parts side by side under the same air, against the blend, by day: sensible heat {gap['sensible_W_m2']:+.0f}, "
            f"latent heat {gap['latent_W_m2']:+.0f}, net radiation {gap['net_radiation_W_m2']:+.0f} W/m²",
            "  ",
        )
    for one in change["effectiveness"]:
        yield from _wrapped(_effect(one, units, document), "  ")


def _effect(one: Document, units: Units, document: Document) -> str:
    warm, cold, depth = (one[key] for key in ("temperature_2m_max_C", "temperature_2m_min_C", "mixing_depth_max_m"))
    return (
        f"per +0.10 {one['of']}: highest 2 m temperature {_spread(warm, 'difference', units, document)}, "
        f"lowest {_spread(cold, 'difference', units, document)}, greatest mixing depth {_spread(depth, 'height', units, document)}"
    )


def _absolute(name: str, value: float | None, kind: str, units: Units) -> str:
    if value is None:
        return "not known"
    if name.endswith("_C") and name.startswith(("temperature", "skin")):
        return units.temperature(value)
    if name.endswith("_hour"):
        minutes = round(value * 60.0)
        return f"{minutes // 60 % 24:02d}:{minutes % 60:02d}" + (" next day" if minutes >= 1440 else "")
    if name == "theta_max_K":
        return f"{number(value, 0.1)} K"
    return _said(value, kind, units, signed=False)


def _sensitivity(document: Document, units: Units) -> list[str]:
    found = document["sensitivity"]
    if found is None:
        return []
    lines = _wrapped(f"what the highest 2 m temperature depends on, {found['day']}: {found['text']}")
    for row in found["rows"][:SHOWN]:
        ends = [
            f"{end['value']:.3g}: {_said(end['base']['temperature_2m_max_C'], 'difference', units)}"
            for end in row["ends"]
        ]
        lines.append(f"  {row['property']:<26} {'; '.join(ends)}")
        for change in document["changes"]:
            then = [
                _said(end["changes"][change["name"]]["temperature_2m_max_C"], "difference", units)
                for end in row["ends"]
                if end["changes"].get(change["name"])
            ]
            if then:
                lines.append(f"  {'':<26}   {change['name']} then {' or '.join(then)}")
    return [*lines, ""]


def _observed(document: Document) -> list[str]:
    found = document["observed"]
    if found is None:
        return []
    lines = [f"base case against {found['file']} (model minus reading)"]
    for name, words in (
        ("temperature_2m_C", "2 m temperature"),
        ("dewpoint_2m_C", "2 m dew point"),
        ("wind_10m_m_s", "10 m wind"),
    ):
        for when in ("day", "night"):
            one, unit = found[name][when], found[name]["unit"].replace("m s-1", "m/s")
            if one["n"]:
                lines.append(
                    f"  {words:<16} {when:<6} bias {one['bias']:+.1f}, mean absolute {one['mean_absolute']:.1f}, "
                    f"root mean square {one['root_mean_square']:.1f} {unit} (n {one['n']})"
                )
    return [*lines, ""]


def patch_words(document: Document, units: Units) -> str:
    """The smallest area that a one-column answer means anything for."""
    patch = document["patch"]
    if patch["length_m"]["median"] is None:
        return "smallest area: not known, the layer was not convective at midday"
    far = [patch["length_m"][key] for key in ("median", "low", "high")]
    unit, scale = ("km", 1000.0) if units.name == "metric" else ("miles", 1609.344)
    shown = [number(value / scale, 0.1) for value in far]
    over_days = f" ({shown[1]} to {shown[2]} over the days)" if document["days"]["used"] > 1 else ""
    several = [number(value * far[0] / scale, 1.0) for value in patch["several"]]
    whole = patch["heating_length_m"]["median"]
    far_back = "" if whole is None else f"; the whole difference needs {number(whole / scale, 10.0)} {unit}"
    return (
        f"smallest area: the changed ground must be wider than {shown[0]} {unit}{over_days}, better {several[0]} to {several[1]} "
        f"{unit}{far_back} ({patch['text']})"
    )


def _foot(document: Document, units: Units) -> list[str]:
    lines = [*_wrapped(patch_words(document, units)), "", "not modelled"]
    lines += [line for text in document["not_modelled"] for line in _wrapped(text, "  ")]
    assumed = [item for item in document["base"]["assumed"] if item["source"] == "assumed"]
    if assumed:
        lines += ["assumed in the base case", *_wrapped("; ".join(f"{a['name']}: {a['value']}" for a in assumed), "  ")]
    lines += _section("warnings", document["warnings"])
    lines += _section("doubts", [one["text"] for one in document["doubts"]])
    lines += _section("cautions", [f"{one['code']}  {one['text']}" for one in document["cautions"]])
    return lines


def _section(title: str, items: Sequence[str]) -> list[str]:
    return ["", title, *(line for text in items for line in _wrapped(text, "  "))] if items else []
