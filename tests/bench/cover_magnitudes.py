"""Signs and sizes of changes of ground against published ones: ``python tests/bench/cover_magnitudes.py [--plain] [--sites]``.

Base, change and published size of every row stand in ``cover_magnitudes.toml`` beside this file, fixed before the first table. One
property table and the same ten invented days for every row. ``--sites`` adds midday means of measured fluxes by cover.
"""

from __future__ import annotations

import argparse
import math
import os
import sys
import textwrap
import tomllib
from pathlib import Path
from statistics import median
from typing import Any

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parents[1]))
if "--plain" not in sys.argv:
    os.environ.setdefault("DAYLAYER_COMPILED", "1")

from slab.products.changes import change_of
from slab.products.compare import Pair, run_pair
from slab.products.days import typical_days

Row = dict[str, Any]
#: The three temperatures that a change can be read in: at 2 m, of the mixed layer, of the skin.
KEPT_APART = (
    "temperature_2m_max_C",
    "theta_max_K",
    "skin_temperature_max_C",
    "temperature_2m_min_C",
    "skin_temperature_min_C",
)


def settings() -> dict[str, Any]:
    """The fixed file."""
    return tomllib.loads((HERE / "cover_magnitudes.toml").read_text(encoding="utf-8"))


def pairs_of(row: Row, days: str, hours: float) -> list[Pair]:
    """Every day of a row, base and change."""
    surface = {"cover": row["base"], "soil_moisture": row["soil_moisture"]}
    listed = typical_days(days, {"surface": surface, "run": {"hours": hours}})
    change = change_of(row["change"], name=row["name"])
    return [run_pair(day.name, day.scenario, [change], 30.0) for day in listed if day.scenario is not None]


def differences(row: Row, pairs: list[Pair], name: str) -> list[float]:
    """Changed minus base by day, as a part of the base's value where the row says relative."""
    found = []
    for pair in pairs:
        before, after = pair.answered.numbers[name], pair.changed[0][1].numbers[name]
        gap = after - before
        if row.get("relative") and name == row["answer"]:
            gap /= before
        if math.isfinite(gap):
            found.append(gap)
    return found


def verdict(row: Row, gaps: list[float]) -> tuple[str, str]:
    """Whether the sign of the median is as published, and whether its size is inside."""
    middle = median(gaps)
    wanted = row.get("sign", 1 if row["high"] + row["low"] > 0 else -1)
    sign = "none asked" if wanted == 0 else "right" if middle * wanted > 0.0 else "WRONG"
    inside = "inside" if row["low"] <= middle <= row["high"] else "outside"
    return sign, inside


def table(rows: list[Row], days: str, hours: float) -> list[str]:
    """The whole table."""
    lines = [
        f"{'row':<52}{'n':>3}{'published':>18}{'median':>9}{'lowest':>9}{'highest':>9}  {'sign':<11}{'size':<8}right on",
    ]
    apart = ["", "the same rows, temperatures kept apart (K, medians)",
             f"{'row':<52}{'2 m max':>9}{'layer':>9}{'skin max':>9}{'2 m min':>9}{'skin min':>9}"]  # fmt: skip
    asked = right = inside = 0
    done: dict[tuple[str, float, str], list[Pair]] = {}
    for row in rows:
        key = (row["base"], row["soil_moisture"], row["change"])
        pairs = done[key] if key in done else done.setdefault(key, pairs_of(row, days, hours))
        gaps = differences(row, pairs, row["answer"])
        sign, size = verdict(row, gaps)
        asked += sign != "none asked"
        right += sign == "right"
        inside += size == "inside"
        form = "{:+.0f}" if row["answer"].endswith("_m") else "{:+.2f}"
        published = f"{form.format(row['low'])} to {form.format(row['high'])}"
        wanted = 1 if row["high"] + row["low"] > 0 else -1
        agree = "" if sign == "none asked" else f"{sum(gap * wanted > 0.0 for gap in gaps)} of {len(gaps)} days"
        numbers = "".join(f"{form.format(value):>9}" for value in (median(gaps), min(gaps), max(gaps)))
        lines.append(f"{row['name']:<52}{len(gaps):>3}{published:>18}{numbers}  {sign:<11}{size:<8}{agree}")
        cells = "".join(f"{median(differences(row | {'relative': False}, pairs, name)):>+9.2f}" for name in KEPT_APART)
        apart.append(f"{row['name']:<52}{cells}")
    lines.append(f"{right} of {asked} signs right, {inside} of {len(rows)} sizes inside")
    return lines + apart


def main() -> int:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--plain", action="store_true", help="without compiling")
    parser.add_argument("--sites", action="store_true", help="measured midday means by cover as well")
    options = parser.parse_args()
    given = settings()
    print("\n".join(table(given["row"], given["days"], given["hours"])))
    print("\nanswers and sources")
    for row in given["row"]:
        text = f"{row['name']}: {row['answer']}, {row['base']} (soil moisture {row['soil_moisture']:g}), {row['change']}; {row['source']}"
        print("\n".join(textwrap.wrap(text, 120, initial_indent="  ", subsequent_indent="    ")))
    if options.sites:
        from cover_sites import sites_table

        print("\n".join(["", *sites_table()]))
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
