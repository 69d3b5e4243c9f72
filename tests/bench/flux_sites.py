"""Surface balance against measured fluxes: ``python tests/bench/flux_sites.py``.

Cover and soil moisture of every site stand in ``flux_sites.csv`` beside this file, chosen by the description of the site. The
model gets measured radiation, air temperature, humidity, wind and pressure and runs its own soil; nothing is fitted to the fluxes.
"""

from __future__ import annotations

import argparse
import csv
import math
import os
import sys
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parents[1]))

from forcing.air import (
    CP_DRY,
    GRAVITY,
    STEFAN_BOLTZMANN,
    ZERO_CELSIUS,
    humidity_from_vapour_pressure,
    saturation_vapour_pressure,
)
from forcing.cover import cover, ground
from forcing.soil import implicit_soil
from forcing.surface import Exchange, Ground, energy_balance, energy_balance_net, soil_layers

DAYLIGHT = 20.0  # W m-2 of net radiation from which an hour counts as day
DEPTH = 1000.0  # m, mixed layer assumed for the gusts
SPIN_UP_DAYS = 4


@dataclass(frozen=True, slots=True)
class Site:
    """One row of the table of sites, with the ground that follows from it."""

    file: str
    name: str
    cover: str
    soil_moisture: float
    height: float
    start: str
    end: str
    ground: Ground


@dataclass(frozen=True, slots=True)
class Row:
    """Measured values of one half hour or hour; NaN missing. Signs as in the model."""

    time: datetime
    temperature: float
    humidity: float
    pressure: float
    wind: float
    shortwave: float
    longwave: float
    net: float
    sensible: float
    latent: float
    into: float
    measured: bool


def observed_folder() -> Path:
    """Folder of observed days: DAYLAYER_OBSERVED, or ../shared/observed beside the checkout."""
    told = os.environ.get("DAYLAYER_OBSERVED")
    return Path(told) if told else HERE.parents[2] / "shared" / "observed"


def read_sites() -> list[Site]:
    """Sites as fixed beforehand."""
    with (HERE / "flux_sites.csv").open(newline="", encoding="utf-8") as lines:
        return [
            Site(
                row["file"],
                row["site"],
                row["cover"],
                float(row["soil_moisture"]),
                float(row["height_above_displacement_m"]),
                row["from"],
                row["to"],
                ground(cover(row["cover"]), float(row["soil_moisture"])),
            )
            for row in csv.DictReader(lines)
        ]


def read_rows(path: Path) -> list[Row]:
    """Read a flux file; a sun that was not measured is NaN."""
    found = []
    with path.open(newline="", encoding="utf-8") as lines:
        for row in csv.DictReader(lines):

            def value(key: str, row: dict[str, str] = row) -> float:
                return float(row[key]) if row[key] else math.nan

            warm = value("air_temperature_C") + ZERO_CELSIUS
            pressure = value("pressure_hPa") * 100.0
            share = min(1.0, max(0.02, value("relative_humidity_pct") / 100.0))
            found.append(
                Row(
                    datetime.fromisoformat(row["time"]),
                    warm,
                    humidity_from_vapour_pressure(share * saturation_vapour_pressure(warm), pressure),
                    pressure,
                    value("wind_speed_ms"),
                    max(0.0, value("sw_down_Wm2")) if row["sw_down_Wm2"] else math.nan,
                    value("lw_down_Wm2"),
                    value("net_radiation_Wm2"),
                    value("sensible_heat_Wm2"),
                    value("latent_heat_Wm2"),
                    value("ground_heat_Wm2"),
                    row["h_quality"] in ("", "0") and row["le_quality"] in ("", "0"),
                )
            )
    return found


def sun_of(site: Site, row: Row) -> float:
    """Measured sun, or the one that fits the net radiation where it was not measured."""
    if math.isfinite(row.shortwave):
        return row.shortwave
    sky = row.longwave if math.isfinite(row.longwave) else 0.8 * STEFAN_BOLTZMANN * row.temperature**4
    net_long = site.ground.emissivity * (sky - STEFAN_BOLTZMANN * row.temperature**4)
    return max(0.0, (row.net - net_long) / (1.0 - site.ground.albedo))


def run(site: Site, rows: Sequence[Row], balance: Callable[..., Exchange], radiation: str) -> list[Exchange | None]:
    """March through the rows with a soil of its own; None where an input is missing."""
    layers = soil_layers(site.ground)
    step = (rows[1].time - rows[0].time).total_seconds()
    day = round(86400.0 / step)
    first = [row.temperature for row in rows[: 5 * day] if math.isfinite(row.temperature)]
    soil = [sum(first) / len(first)] * len(layers)
    base, answer = [0.0] * len(layers), [0.0] * len(layers)
    half = 2.0 * site.ground.soil_conductivity / layers[0]
    skin, x = first[0], 0.0
    found: list[Exchange | None] = []
    for number, row in enumerate([*(rows[:day] * SPIN_UP_DAYS), *rows]):
        given = getattr(row, radiation)
        exchange = None
        inputs = (row.temperature, row.humidity, row.wind, row.pressure, given)
        if all(math.isfinite(one) for one in inputs):
            implicit_soil(
                soil, layers, site.ground.soil_conductivity, site.ground.soil_heat_capacity, step, 0.0, base, answer
            )
            exchange = balance(
                site.ground, sun_of(site, row), given, row.temperature + GRAVITY / CP_DRY * site.height, row.humidity,
                site.height, row.wind, site.height, DEPTH, row.pressure, base[0], half / (1.0 + half * answer[0]), 0.0,
                skin, x,
            )  # fmt: skip
            skin, x = exchange.skin_temperature, exchange.inverse_obukhov
            soil = [b + a * exchange.ground for b, a in zip(base, answer, strict=True)]
        if number >= day * SPIN_UP_DAYS:
            found.append(exchange)
    return found


def rmse(pairs: Iterable[tuple[float, float]]) -> float:
    """Root mean square of model minus measured."""
    gaps = [(a - b) ** 2 for a, b in pairs]
    return math.sqrt(sum(gaps) / len(gaps)) if gaps else math.nan


def mean(values: Iterable[float]) -> float:
    """Mean, NaN of nothing."""
    known = list(values)
    return sum(known) / len(known) if known else math.nan


def is_odd(site: Site, row: Row, single_day: bool) -> bool:
    """Whether the row is scored: odd days, or odd hours where there is one day only."""
    return (row.time.hour if single_day else (row.time - timedelta(minutes=1)).timetuple().tm_yday) % 2 == 1


def closed(row: Row) -> tuple[float, float]:
    """Measured H and LE scaled to the measured available energy, keeping their ratio (Twine et al. 2000)."""
    into = row.into if math.isfinite(row.into) else 0.1 * row.net  # 0.1 of net radiation: ASCE 2005, short grass by day
    factor = (row.net - into) / (row.sensible + row.latent)
    return row.sensible * factor, row.latent * factor


def radiation_table(sites: Sequence[Site], folder: Path) -> list[str]:
    """Net radiation with measured sun and sky in."""
    lines = ["net radiation, measured short-wave and long-wave in (W m-2)"]
    lines.append(f"{'site':<12}{'cover':<20}{'hours':>6}{'measured':>10}{'model':>8}{'rmse':>7}{'rmse by day':>13}")
    for site in sites:
        rows = read_rows(folder / site.file)
        if not any(math.isfinite(row.shortwave) for row in rows):
            continue
        pairs = [
            (one.net_radiation, row.net)
            for one, row in zip(run(site, rows, energy_balance, "longwave"), rows, strict=True)
            if one is not None and math.isfinite(row.net) and math.isfinite(row.shortwave)
        ]
        lines.append(
            f"{site.name:<12}{site.cover:<20}{len(pairs):>6}{mean(b for _, b in pairs):>10.1f}{mean(a for a, _ in pairs):>8.1f}"
            f"{rmse(pairs):>7.1f}{rmse(p for p in pairs if p[1] > DAYLIGHT):>13.1f}"
        )
    return lines


def partition_table(sites: Sequence[Site], folder: Path) -> list[str]:
    """Sensible and latent heat by day with measured net radiation in, odd days, beside a constant Bowen ratio."""
    lines = [
        "",
        "partition by day, measured net radiation in; odd days (odd hours at a site with one day); W m-2",
        "'fixed': measured net radiation minus measured ground heat (0.1 of it where none), split by the Bowen ratio of the even days",
        "'closed': measured H and LE scaled to net radiation minus ground heat with their ratio kept",
        (
            f"{'site':<12}{'n':>5}{'closure':>9} | {'H':>6}{'model':>7}{'rmse':>7}{'fixed':>7}"
            f" | {'LE':>6}{'model':>7}{'rmse':>7}{'fixed':>7} | {'H closed':>9}{'rmse':>7}{'fixed':>7}"
            f" | {'LE closed':>10}{'rmse':>7}{'fixed':>7}"
        ),
    ]
    for site in sites:
        rows = [row for row in read_rows(folder / site.file) if site.start <= row.time.date().isoformat() <= site.end]
        single = len({row.time.date() for row in rows}) == 1
        used = [
            (one, row)
            for one, row in zip(run(site, rows, energy_balance_net, "net"), rows, strict=True)
            if one is not None
            and row.measured
            and row.net > DAYLIGHT
            and math.isfinite(row.sensible + row.latent)
            and row.sensible + row.latent > DAYLIGHT
        ]
        even = [row for _, row in used if not is_odd(site, row, single)]
        odd = [(one, row) for one, row in used if is_odd(site, row, single)]
        bowen = sum(row.sensible for row in even) / sum(row.latent for row in even)

        def fixed(row: Row, share: float) -> float:
            return share * (row.net - (row.into if math.isfinite(row.into) else 0.1 * row.net))

        h, le = bowen / (1.0 + bowen), 1.0 / (1.0 + bowen)
        available = sum(sum(closed(row)) for _, row in odd)
        lines.append(
            f"{site.name:<12}{len(odd):>5}{sum(r.sensible + r.latent for _, r in odd) / available:>9.2f}"
            f" | {mean(r.sensible for _, r in odd):>6.0f}{mean(m.sensible for m, _ in odd):>7.0f}"
            f"{rmse((m.sensible, r.sensible) for m, r in odd):>7.1f}{rmse((fixed(r, h), r.sensible) for _, r in odd):>7.1f}"
            f" | {mean(r.latent for _, r in odd):>6.0f}{mean(m.latent for m, _ in odd):>7.0f}"
            f"{rmse((m.latent, r.latent) for m, r in odd):>7.1f}{rmse((fixed(r, le), r.latent) for _, r in odd):>7.1f}"
            f" | {mean(closed(r)[0] for _, r in odd):>9.0f}{rmse((m.sensible, closed(r)[0]) for m, r in odd):>7.1f}"
            f"{rmse((fixed(r, h), closed(r)[0]) for _, r in odd):>7.1f}"
            f" | {mean(closed(r)[1] for _, r in odd):>10.0f}{rmse((m.latent, closed(r)[1]) for m, r in odd):>7.1f}"
            f"{rmse((fixed(r, le), closed(r)[1]) for _, r in odd):>7.1f}"
        )
    return lines


def main() -> int:
    """Print the two tables."""
    argparse.ArgumentParser(description=__doc__).parse_args()
    folder = observed_folder() / "fluxes"
    if not folder.is_dir():
        print(f"observed fluxes are not at {folder}; set DAYLAYER_OBSERVED", file=sys.stderr)
        return 1
    sites = [site for site in read_sites() if (folder / site.file).is_file()]
    print("\n".join(radiation_table(sites, folder) + partition_table(sites, folder)))
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
