"""Measured contrast of covers: midday means of measured fluxes beside those of the invented days over the same cover.

Cover, soil moisture, climate of the days and months stand in ``cover_sites.csv``, fixed by description. Weather differs between the
measured and the invented days, so that Bowen ratio and the order of the covers can be compared, and net radiation of clear days with
the clearest tenth of the measured ones. `flux_sites.py` has the balance driven by each site's own weather.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Iterator
from datetime import datetime, timedelta
from pathlib import Path
from statistics import median

from flux_sites import observed_folder

from slab.products.changes import change_of
from slab.products.compare import run_pair
from slab.products.days import typical_days

HERE = Path(__file__).resolve().parent
MIDDAY = (10.0, 14.0)  # h, local standard time at the sites
CLEAREST = 0.9  # quantile of the midday means of net radiation that stands for a clear day


def measured(row: dict[str, str]) -> tuple[int, float, float]:
    """Number of days, Bowen ratio of the sums of H and LE at midday, and net radiation of a clear day [W m-2]."""
    months = {int(month) for month in row["months"].split()}
    days: dict[str, list[tuple[float, float, float]]] = {}
    for when, sensible, latent, net in readings(find(row["file"])):
        local = when + timedelta(hours=float(row["utc_offset_h"]) if when.tzinfo is not None else 0.0)
        if local.month in months and MIDDAY[0] <= local.hour + local.minute / 60.0 < MIDDAY[1]:
            days.setdefault(local.date().isoformat(), []).append((sensible, latent, net))
    sums = [(sum(one[0] for one in day), sum(one[1] for one in day)) for day in days.values()]
    nets = sorted(sum(one[2] for one in day) / len(day) for day in days.values())
    known = [net for net in nets if math.isfinite(net)]
    clear = known[int(CLEAREST * (len(known) - 1))] if known else math.nan
    return len(days), sum(one[0] for one in sums) / sum(one[1] for one in sums), clear


def find(name: str) -> Path:
    """A file of measured fluxes."""
    folder = "testdays" if name.startswith("MOSAI") else "fluxes"
    return observed_folder() / folder / name


def readings(path: Path) -> Iterator[tuple[datetime, float, float, float]]:
    """Time, sensible, latent heat and net radiation [W m-2, NaN where the file has none]; rows with a missing flux left out."""
    with path.open(newline="", encoding="utf-8") as lines:
        for row in csv.DictReader(lines):
            time = row.get("time") or row["utc_time"]
            sensible = row.get("sensible_heat_Wm2") or row.get("H") or row.get("Hcorr")
            latent = row.get("latent_heat_Wm2") or row.get("LE") or row.get("LEcorr")
            if sensible and latent:
                net = row.get("net_radiation_Wm2")
                yield datetime.fromisoformat(time), float(sensible), float(latent), float(net) if net else math.nan


def modelled(row: dict[str, str]) -> tuple[float, float, float, float]:
    """Median, lowest and highest midday Bowen ratio of the invented days, and the median net radiation at midday [W m-2]."""
    surface = {"cover": row["cover"], "soil_moisture": float(row["soil_moisture"])}
    ratios, nets = [], []
    for day in typical_days(row["days"], {"surface": surface, "run": {"hours": 12.0}}):
        assert day.scenario is not None
        pair = run_pair(day.name, day.scenario, [change_of("albedo +0")], 30.0)
        ratios.append(pair.answered.numbers["bowen_ratio_midday"])
        series = pair.answered.series["net_radiation_W_m2"]
        inside = [v for h, v in zip(pair.answered.hours, series, strict=True) if MIDDAY[0] <= h < MIDDAY[1]]
        nets.append(sum(inside) / len(inside))
    return median(ratios), min(ratios), max(ratios), median(nets)


def sites_table() -> list[str]:
    """The table, or a line that says where the measured fluxes were looked for."""
    if not (observed_folder() / "fluxes").is_dir():
        return [f"observed fluxes are not at {observed_folder()}; set DAYLAYER_OBSERVED"]
    lines = [
        "midday (10 to 14 h) by cover: Bowen ratio, and net radiation of a clear day (W m-2); other weather than the sites'",
        f"{'site':<20}{'cover':<20}{'moisture':>9}{'days':>6} | {'measured':>9}{'model':>7}{'range':>15} | {'Rn meas':>8}{'model':>7}",
    ]
    pairs = []
    with (HERE / "cover_sites.csv").open(newline="", encoding="utf-8") as text:
        rows = [row for row in csv.DictReader(text) if find(row["file"]).is_file()]
    for row in rows:
        n, ratio, net = measured(row)
        middle, low, high, own = modelled(row)
        pairs.append((ratio, middle))
        shown = f"{net:>8.0f}" if math.isfinite(net) else f"{'-':>8}"
        lines.append(
            f"{row['site']:<20}{row['cover']:<20}{float(row['soil_moisture']):>9.2f}{n:>6} | {ratio:>9.2f}{middle:>7.2f}"
            f"{f'{low:.2f} to {high:.2f}':>15} | {shown}{own:>7.0f}"
        )
    same = sum((a[0] - b[0]) * (a[1] - b[1]) > 0.0 for n, a in enumerate(pairs) for b in pairs[:n])
    lines.append(
        f"order of two covers by Bowen ratio as measured: {same} of {len(pairs) * (len(pairs) - 1) // 2} couples"
    )
    return lines
