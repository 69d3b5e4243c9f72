"""The bars of a comparison's page: balance before and after, ranked sensitivity, and the days one by one."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from matplotlib.axes import Axes

from slab.pictures_style import PLAIN, SMALL
from slab.wording import Units, number

__all__ = ["draw_balance", "draw_days", "draw_ranked"]

Document = Mapping[str, Any]

TERMS = (
    ("net_radiation", "net radiation"), ("anthropogenic", "from people"), ("sensible", "sensible heat"),
    ("latent", "evaporation"), ("ground", "into ground"),
)  # fmt: skip
FILLS = (("#b4c8d2", ""), ("#1b2a4a", ""), ("#c2803a", "////"), ("#6f4f6b", "...."), ("#cdc193", "xxxx"))
RANKED = 9  # properties that are drawn
LOW_END, HIGH_END = ("#b4c8d2", "////"), ("#6f4f6b", "")


def draw_balance(axes: Axes, document: Document) -> None:
    """Mean terms of the surface balance by day and by night, base first, then each change."""
    changes = document["changes"][: len(FILLS) - 1]
    groups = len(TERMS)
    height = 0.8 / (1 + len(changes))
    for n in range(1 + len(changes)):
        colour, hatch = FILLS[n]
        table = document["changes"][max(n - 1, 0)]["answers"]
        side = "base" if n == 0 else "changed"
        day, night = (
            [table[f"{term}_{when}_W_m2"][side]["median"] or 0.0 for term, _ in TERMS] for when in ("day", "night")
        )
        places = [g - 0.4 + height * (n + 0.5) for g in range(groups)]
        label = "base" if n == 0 else changes[n - 1]["name"]
        axes.barh(places, day, height=height, color=colour, hatch=hatch, edgecolor="black", linewidth=0.4, label=label)
        axes.plot(night, places, linestyle="none", marker="D", markersize=3.0, color="white", markeredgecolor="black")
    axes.axvline(0.0, color="black", linewidth=0.8)
    axes.set_yticks(range(groups), [words for _, words in TERMS], fontsize=SMALL)
    axes.set_ylim(groups - 0.45, -0.55)
    axes.tick_params(labelsize=SMALL)
    axes.set_xlabel("W/m²; net radiation down, heat up, into ground down", fontsize=SMALL)
    axes.set_title("surface balance: bars day, diamonds night", fontsize=PLAIN, loc="left", pad=3.0)
    axes.legend(fontsize=SMALL, frameon=False, loc="lower right", handlelength=1.6)


def draw_ranked(axes: Axes, document: Document, units: Units) -> None:
    """Change of the base's highest temperature with each property at the ends of its range, largest first."""
    found = document["sensitivity"]
    factor, unit = (1.0, "K") if units.name == "metric" else (1.8, "°F")
    rows = found["rows"][:RANKED]
    widest = max((row["size_K"] for row in rows), default=0.0) * factor or 1.0
    for n, row in enumerate(rows):
        sides: dict[bool, int] = {}
        for end in row["ends"]:
            size = (end["base"]["temperature_2m_max_C"] or 0.0) * factor
            lower = end["value"] == min(one["value"] for one in row["ends"]) and len(row["ends"]) > 1
            colour, hatch = LOW_END if lower else HIGH_END
            axes.barh(n, size, height=0.62, color=colour, hatch=hatch, edgecolor="black", linewidth=0.4)
            right = size > 0.0
            shift = sides.get(right, 0)
            sides[right] = shift + 1
            axes.annotate(
                f"{end['value']:.3g}", (size, n + 0.28 * shift), xytext=(3 if right else -3, 0), textcoords="offset points",
                fontsize=SMALL, ha="left" if right else "right", va="center",
            )  # fmt: skip
    axes.axvline(0.0, color="black", linewidth=0.8)
    axes.set_xlim(-1.35 * widest, 1.35 * widest)
    axes.set_yticks(range(len(rows)), [row["property"].replace("_", " ") for row in rows], fontsize=SMALL)
    axes.set_ylim(len(rows) - 0.4, -0.6)
    axes.tick_params(labelsize=SMALL)
    axes.set_xlabel(f"{unit}; hatched low, dark high end of range", fontsize=SMALL)
    axes.set_title(f"base's highest 2 m temperature by property, {found['day']}", fontsize=PLAIN, loc="right", pad=3.0)


def draw_days(axes: Axes, document: Document, units: Units) -> None:
    """Difference of the highest 2 m temperature on every day, by change."""
    factor, unit = (1.0, "K") if units.name == "metric" else (1.8, "°F")
    runs = document["days"]["runs"]
    changes = document["changes"][: len(FILLS) - 1]
    height = 0.8 / max(1, len(changes))
    shown = runs[:12]
    for n, change in enumerate(changes):
        colour, hatch = FILLS[n + 1]
        sizes = []
        for base, other in zip(shown, change["runs"][:12], strict=True):
            before, after = (one["answers"]["temperature_2m_max_C"] for one in (base, other))
            sizes.append(0.0 if before is None or after is None else (after - before) * factor)
        places = [g - 0.4 + height * (n + 0.5) for g in range(len(shown))]
        axes.barh(places, sizes, height=height, color=colour, hatch=hatch, edgecolor="black", linewidth=0.4)
        for place, size in zip(places, sizes, strict=True):
            if len(shown) * len(changes) <= 12:
                axes.annotate(
                    number(size, 0.01), (size, place), xytext=(3 if size >= 0.0 else -3, 0), textcoords="offset points",
                    fontsize=SMALL, ha="left" if size >= 0.0 else "right", va="center",
                )  # fmt: skip
    axes.axvline(0.0, color="black", linewidth=0.8)
    axes.margins(x=0.25)
    axes.set_yticks(range(len(shown)), [run["day"] for run in shown], fontsize=SMALL)
    axes.set_ylim(len(shown) - 0.45, -0.55)
    axes.tick_params(labelsize=SMALL)
    axes.set_xlabel(f"{unit}, fills as in the balance", fontsize=SMALL)
    more = f", first 12 of {len(runs)} days" if len(runs) > 12 else ""
    axes.set_title(f"highest 2 m temperature by day{more}", fontsize=PLAIN, loc="left", pad=3.0)
