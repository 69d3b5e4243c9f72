"""Differences between a change and its base case, and their spread over days."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import numpy as np

from slab.products.compare_answers import HOURLY, QUANTITIES, Answered

MANY = 10  # days from which the spread is the 10 to 90 % range; with fewer it is lowest to highest
SPREAD_WORDS = {True: "10 to 90 % of the days", False: "lowest to highest day"}

#: Decimals kept in files, by unit.
DIGITS = {"degC": 3, "K": 3, "h": 2, "K h": 2, "m": 1, "m2 s-1": 0, "g kg-1": 3, "%": 2, "W m-2": 2, "1": 3, "m s-1": 3}


def kept(value: float, unit: str) -> float | None:
    """A number as files keep it; None where it is missing."""
    return round(float(value), DIGITS.get(unit, 3)) + 0.0 if math.isfinite(value) else None


def spread(values: Iterable[float], unit: str) -> dict[str, Any]:
    """Median, low and high of the days that have a value, and how many those are."""
    known = np.array([value for value in values if math.isfinite(value)])
    if known.size == 0:
        return {"median": None, "low": None, "high": None, "days": 0}
    low, high = np.quantile(known, (0.1, 0.9)) if known.size >= MANY else (known.min(), known.max())
    return {
        "median": kept(float(np.median(known)), unit),
        "low": kept(float(low), unit),
        "high": kept(float(high), unit),
        "days": int(known.size),
    }


def answer_table(base: Sequence[Answered], changed: Sequence[Answered]) -> dict[str, Any]:
    """Every answer: unit, base, changed and difference with their spread over the days."""
    table = {}
    for name, quantity in QUANTITIES.items():
        before = [one.numbers[name] for one in base]
        after = [one.numbers[name] for one in changed]
        table[name] = {
            "unit": quantity.unit,
            "base": spread(before, quantity.unit),
            "changed": spread(after, quantity.unit),
            "difference": spread((b - a for a, b in zip(before, after, strict=True)), quantity.unit),
        }
    return table


def hourly_table(base: Sequence[Answered], changed: Sequence[Answered]) -> dict[str, Any]:
    """Difference by local hour (counted from midnight of the first day) with its spread over the days."""
    hours = sorted({hour for one in base for hour in one.hours})
    out: dict[str, Any] = {"hour_local": hours}
    for name, quantity in HOURLY.items():
        by_hour: dict[int, list[float]] = {hour: [] for hour in hours}
        for before, after in zip(base, changed, strict=True):
            later = dict(zip(after.hours, after.series[name], strict=True))
            for hour, value in zip(before.hours, before.series[name], strict=True):
                by_hour[hour].append(later.get(hour, math.nan) - value)
        rows = [spread(by_hour[hour], quantity.unit) for hour in hours]
        out[name] = {"unit": quantity.unit} | {
            key: [row[key] for row in rows] for key in ("median", "low", "high", "days")
        }
    return out


def day_record(name: str, answered: Answered) -> dict[str, Any]:
    """One run as files keep it."""
    return {
        "day": name,
        "answers": {key: kept(value, QUANTITIES[key].unit) for key, value in answered.numbers.items()},
        "series": {
            "time": answered.times,
            "hour_local": answered.hours,
            **{key: [kept(v, HOURLY[key].unit) for v in values] for key, values in answered.series.items()},
        },
        "stopped": answered.stopped,
    }


def effectiveness(answers: Mapping[str, Any], step: float | None, of: str) -> dict[str, Any] | None:
    """Change per +0.10 of what was changed; None where the change is not that alone."""
    if step is None:
        return None
    found: dict[str, Any] = {"of": of, "step": round(step, 6)}
    for name in ("temperature_2m_max_C", "temperature_2m_min_C", "temperature_2m_day_C", "temperature_2m_night_C",
                 "theta_max_K", "skin_temperature_max_C", "mixing_depth_max_m"):  # fmt: skip
        row = answers[name]
        unit = "K" if row["unit"] == "degC" else row["unit"]
        ends = [row["difference"][key] for key in ("median", "low", "high")]
        scaled = [None if value is None else kept(value * 0.10 / step, unit) for value in ends]
        if step < 0.0:
            scaled[1], scaled[2] = scaled[2], scaled[1]
        found[name] = {"unit": f"{unit} per +0.10"} | dict(zip(("median", "low", "high"), scaled, strict=True))
    return found
