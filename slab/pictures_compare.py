"""One page of a comparison of grounds: hours, balance, ranked sensitivity or days, the numbers, and how far to trust them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from slab.pictures_compare_bars import draw_balance, draw_days, draw_ranked
from slab.pictures_style import LARGE, LINE, PAGE, PLAIN, SMALL, Ruler, halo
from slab.wording import Units, number, units_named

__all__ = ["page"]

Document = Mapping[str, Any]
Lines = list[tuple[str, bool]]

#: Colour, dash and mark of each change; colours part by lightness too, more changes start over with thinner lines.
STYLES = (
    ("#1b2a4a", "-", "o"),
    ("#c2803a", "--", "s"),
    ("#3c83b0", "-.", "^"),
    ("#6f4f6b", ":", "D"),
)
LEFT, RIGHT = 0.062, 0.985
WIDE, SIDE = 0.585, 0.675
SHOWN = 3  # changes whose numbers fit beside the curves
NUMBERS = (
    ("temperature_2m_max_C", "highest 2 m temperature"),
    ("temperature_2m_min_C", "lowest 2 m temperature"),
    ("temperature_2m_day_C", "mean 2 m by day"),
    ("temperature_2m_night_C", "mean 2 m by night"),
    ("theta_max_K", "warmest mixed layer"),
    ("skin_temperature_max_C", "warmest skin"),
    ("degree_hours", "degree-hours over the threshold"),
    ("mixing_depth_max_m", "greatest mixing depth"),
    ("ventilation_max_m2_s", "greatest ventilation"),
    ("mixing_ratio_day_g_kg", "water vapour by day"),
    ("inversion_strength_max_K", "strongest inversion"),
)


def page(document: Document, *, units: str = "metric") -> Figure:
    """Draw the page of one comparison.

    Parameters
    ----------
    document : mapping
        The result document of a comparison.
    units : {"metric", "us"}
        Temperatures in K or degrees F, heights in m or ft.

    Returns
    -------
    matplotlib.figure.Figure
        A4 landscape.
    """
    chosen = units_named(units)
    figure = Figure(figsize=PAGE, dpi=150)
    ruler = Ruler(figure)
    top = _header(figure, document, chosen, ruler)
    notes = _notes(document, ruler, RIGHT - LEFT + 0.03)
    below = 0.025 + LINE * len(notes)
    room = top - 0.012 - below
    hours = figure.add_axes((LEFT, below + 0.60 * room, WIDE, 0.365 * room))
    depth = figure.add_axes((LEFT, below + 0.415 * room, WIDE, 0.15 * room), sharex=hours)
    balance = figure.add_axes((LEFT + 0.03, below + 0.075 * room, 0.235, 0.24 * room))
    ranked = figure.add_axes((LEFT + 0.4, below + 0.075 * room, WIDE - 0.4, 0.24 * room))
    draw_hours(hours, document, chosen, "temperature_2m_C", "2 m temperature difference", legend=True)
    draw_hours(depth, document, chosen, "mixing_depth_m", "mixing depth difference", legend=False)
    hours.tick_params(labelbottom=False)
    draw_balance(balance, document)
    if document.get("sensitivity"):
        draw_ranked(ranked, document, chosen)
    else:
        draw_days(ranked, document, chosen)
    _column(figure, _side(document, chosen, ruler), SIDE, top - 0.008)
    _column(figure, notes, 0.015, below - 0.008)
    return figure


def _header(figure: Figure, document: Document, units: Units, ruler: Ruler) -> float:
    y = 0.975
    for line in ruler.wrap(headline(document, units), RIGHT - 0.02, LARGE, bold=True):
        figure.text(0.015, y, line, fontsize=LARGE, fontweight="bold", va="top")
        y -= 1.25 * LARGE / 72.0 / PAGE[1]
    base, days = document["base"], document["days"]
    properties = base["properties"]
    told = (
        f"Base case: {base['cover']}, soil moisture {base['soil_moisture']:g}, albedo {properties['albedo']:.2f}, plants on "
        f"{properties['vegetation_fraction']:.0%}, sealed {properties['impervious_fraction']:.0%} of the area; "
        f"{document['site']['name']}; {days['used']} of {days['given']} days used"
    )
    if days["used"] > 1:
        told += f": {', '.join(run['day'] for run in days['runs'])}" if days["used"] <= 12 else ""
    for line in ruler.wrap(told, RIGHT - 0.02, PLAIN):
        figure.text(0.015, y, line, fontsize=PLAIN, va="top")
        y -= 1.25 * PLAIN / 72.0 / PAGE[1]
    return y


def headline(document: Document, units: Units) -> str:
    """What the first change does, in a sentence."""
    change = document["changes"][0]
    warm, cold = (
        change["answers"][name]["difference"]["median"] for name in ("temperature_2m_max_C", "temperature_2m_min_C")
    )
    if warm is None:
        return f"{change['name']}: no answer"
    text = f"{change['name']}: the afternoon is {_warmer(warm, units)}"
    if cold is not None:
        text += f", the night {_warmer(cold, units)}"
    many = document["days"]["used"]
    return text + (f" (median of {many} days)" if many > 1 else " on this day")


def _warmer(kelvin: float, units: Units) -> str:
    text = units.difference(abs(kelvin))
    return "as warm as before" if float(text.split()[0]) == 0.0 else f"{text} {'warmer' if kelvin > 0.0 else 'cooler'}"


def scale_of(unit: str, units: Units) -> tuple[float, str]:
    """Factor from the document's unit to the display unit of a difference, and that unit."""
    if unit in ("degC", "K"):
        return (1.0, "K") if units.name == "metric" else (1.8, "°F")
    if unit == "K h":
        return (1.0, "K h") if units.name == "metric" else (1.8, "°F h")
    if unit == "m":
        return units.height_value(1.0), units.height_unit
    if unit == "m2 s-1":
        return units.ventilation_value(1.0), units.ventilation_unit
    return 1.0, {"g kg-1": "g/kg", "W m-2": "W/m²", "1": ""}.get(unit, unit)


def draw_hours(axes: Axes, document: Document, units: Units, name: str, title: str, *, legend: bool) -> None:
    """Difference by local hour for every change; a band is the spread over the days."""
    axes.axhline(0.0, color="black", linewidth=0.8)
    hours: Sequence[float] = []
    for n, change in enumerate(document["changes"]):
        row = change["hourly"][name]
        factor, unit = scale_of(row["unit"], units)
        hours = change["hourly"]["hour_local"]
        colour, dash, mark = STYLES[n % len(STYLES)]
        middle, low, high = ([_nan(v, factor) for v in row[key]] for key in ("median", "low", "high"))
        if document["days"]["used"] > 1:
            axes.fill_between(hours, low, high, color=colour, alpha=0.16, linewidth=0.0)
        axes.plot(
            hours, middle, color=colour, linestyle=dash, marker=mark, markersize=3.0, linewidth=1.6 - 0.4 * (n // len(STYLES)),
            label=change["name"],
        )  # fmt: skip
        axes.set_ylabel(unit, fontsize=PLAIN)
    spread = "" if document["days"]["used"] == 1 else f"; band: {document['spread']}"
    axes.set_title(f"{title}, changed minus base{spread}", fontsize=PLAIN, loc="left", pad=3.0)
    _nights(axes, document, hours)
    axes.tick_params(labelsize=SMALL)
    axes.grid(axis="y", color="#dddddd", linewidth=0.6)
    axes.set_axisbelow(True)
    if legend:
        axes.legend(fontsize=SMALL, frameon=False, loc="best", handlelength=3.4, ncols=2)
    else:
        axes.set_xlabel("local hour", fontsize=PLAIN)


def _nan(value: float | None, factor: float) -> float:
    return float("nan") if value is None else value * factor


def _nights(axes: Axes, document: Document, hours: Sequence[float]) -> None:
    """Hours of the clock below the curve, and a grey bar where the first day's net radiation is upward."""
    if not hours:
        return
    axes.set_xlim(min(hours) - 0.5, max(hours) + 0.5)
    marks = [hour for hour in range(int(min(hours)), int(max(hours)) + 1) if hour % 3 == 0]
    axes.set_xticks(marks, [f"{hour % 24:02d}" for hour in marks])
    run = document["days"]["runs"][0]["series"]
    net = [value if value is not None else 0.0 for value in run["net_radiation_W_m2"]]
    dark = [hour for hour, value in zip(run["hour_local"], net, strict=True) if value < 0.0]
    stretches: list[list[int]] = []
    for hour in dark:
        if stretches and hour == stretches[-1][-1] + 1:
            stretches[-1].append(hour)
        else:
            stretches.append([hour])
    for stretch in stretches:
        axes.axvspan(stretch[0] - 0.5, stretch[-1] + 0.5, color="#ececf0", zorder=0, linewidth=0.0)
        if len(stretch) >= 4:
            axes.text(
                0.5 * (stretch[0] + stretch[-1]), 0.985, "night", fontsize=SMALL, ha="center", va="top",
                transform=axes.get_xaxis_transform(), path_effects=halo("#ececf0"),
            )  # fmt: skip


def _side(document: Document, units: Units, ruler: Ruler) -> Lines:
    """Numbers of every change, what they are per unit, and the least area."""
    width = RIGHT - SIDE
    lines: Lines = []
    many = document["days"]["used"] > 1
    for change in document["changes"][:SHOWN]:
        lines += [(line, True) for line in ruler.wrap(change["name"], width, bold=True)]
        for name, words in NUMBERS:
            row = change["answers"][name]["difference"]
            if row["median"] is None:
                continue
            factor, unit = scale_of(change["answers"][name]["unit"], units)
            step = 0.01 if unit in ("K", "g/kg", "") else 0.1 if unit in ("°F", "K h", "°F h") else 10.0
            middle, low, high = (number(row[key] * factor, step) for key in ("median", "low", "high"))
            sign = "+" if not middle.startswith("-") and float(middle) != 0.0 else ""
            lines.append((f"   {words}: {sign}{middle} {unit}" + (f" ({low} to {high})" if many else ""), False))
        for one in change["effectiveness"]:
            row = one["temperature_2m_max_C"]
            factor, unit = scale_of("K", units)
            text = f"per +0.10 {one['of']}: {number(row['median'] * factor, 0.01)} {unit} at the warmest hour"
            lines += [(line, False) for line in ruler.wrap(text, width, indent="   ")]
    if len(document["changes"]) > SHOWN:
        lines.append((f"and {len(document['changes']) - SHOWN} more in the text output", False))
    lines.append(("smallest area", True))
    lines += [(line, False) for line in ruler.wrap(_area(document, units), width, indent="   ")]
    return lines + _scored(document, ruler, width)


def _area(document: Document, units: Units) -> str:
    """The least width of changed ground, and the width that shows the whole difference."""
    far, whole = (document["patch"][key] for key in ("length_m", "heating_length_m"))
    if far["median"] is None:
        return "not known: the layer was not convective at midday"
    unit, scale = ("km", 1000.0) if units.name == "metric" else ("miles", 1609.344)
    said = f"wider than {far['median'] / scale:.1f} {unit}"
    if document["days"]["used"] > 1:
        said += f" ({far['low'] / scale:.1f} to {far['high'] / scale:.1f} {unit} over the days)"
    said += ", better several times that: wind times turnover time of the layer at midday"
    if whole["median"] is not None:
        said += f"; the whole difference needs about {whole['median'] / scale:.0f} {unit}, wind times hours of heating"
    return said


def _scored(document: Document, ruler: Ruler, width: float) -> Lines:
    """The base case against readings, or that there are none."""
    found = document.get("observed")
    if not found:
        return [("base case: not scored, no readings were given", True)]
    lines: Lines = [("base case against readings, 2 m temperature", True)]
    for when in ("day", "night"):
        one = found["temperature_2m_C"][when]
        if one["n"]:
            text = f"{when}: bias {one['bias']:+.1f} K, mean absolute error {one['mean_absolute']:.1f} K"
            lines += [(line, False) for line in ruler.wrap(text, width, indent="   ")]
    return lines


def _notes(document: Document, ruler: Ruler, width: float) -> Lines:
    """Doubts, what is not modelled, and every caution."""
    lines: Lines = []
    doubts = "; ".join(item["text"] for item in document["doubts"])
    texts = [f"Doubts: {doubts}."] if doubts else []
    texts.append(f"Not modelled: {'; '.join(document['not_modelled'])}.")
    texts += [f"{item['code']}  {item['text']}" for item in document["cautions"]]
    for text in texts:
        lines += [(line, False) for line in ruler.wrap(text, width, indent="      ")]
    return lines


def _column(figure: Figure, lines: Lines, x: float, top: float) -> None:
    for n, (text, bold) in enumerate(lines):
        figure.text(x, top - n * LINE, text, fontsize=SMALL, va="top", fontweight="bold" if bold else "normal")
