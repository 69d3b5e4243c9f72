"""The base case of a comparison against readings of a screen or tower."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np

from forcing.air import dew_point, vapour_pressure
from forcing.errors import WeatherError
from forcing.weather import ObservedTable
from slab.cycle import Run
from slab.products.compare_answers import Array, sun_up

QUANTITIES = (("temperature_2m_C", "temperature", 2.0, "K"), ("dewpoint_2m_C", "dewpoint", 2.0, "K"),
              ("wind_10m_m_s", "wind", 10.0, "m s-1"))  # fmt: skip


def score(runs: Sequence[Run], observed: ObservedTable) -> dict[str, Any]:
    """Bias (model minus reading), mean absolute and root-mean-square error by quantity, by day and night.

    Raises
    ------
    WeatherError
        Where no reading falls into any run.
    """
    gaps: dict[str, dict[str, list[float]]] = {name: {"day": [], "night": []} for name, *_ in QUANTITIES}
    for run in runs:
        sun = sun_up(run)
        for name, kind, height, _ in QUANTITIES:
            gap = _model(run, name) - observed.sample(kind, height, run.time)
            for word, mask in (("day", sun), ("night", ~sun)):
                gaps[name][word] += [float(x) for x in gap[mask] if math.isfinite(x)]
    if not any(values for one in gaps.values() for values in one.values()):
        raise WeatherError(
            "no reading falls into the days that were run", place=observed.file, remedy="give readings of those days"
        )
    found: dict[str, Any] = {"file": observed.file, "of": "base case, every model time within the readings"}
    for name, _, _, unit in QUANTITIES:
        found[name] = {"unit": unit} | {word: _scores(values) for word, values in gaps[name].items()}
    return found


def _model(run: Run, name: str) -> Array:
    f = run.fields
    if name == "temperature_2m_C":
        return f["temperature_2m"]
    if name == "wind_10m_m_s":
        return f["wind_10m"]
    humid = [vapour_pressure(float(q), run.surface_pressure) for q in f["humidity_2m"]]
    return np.array([dew_point(e) if e > 0.0 else math.nan for e in humid])


def _scores(values: Sequence[float]) -> dict[str, Any]:
    gap = np.array(values)
    if gap.size == 0:
        return {"n": 0, "bias": None, "mean_absolute": None, "root_mean_square": None}
    return {
        "n": int(gap.size),
        "bias": round(float(gap.mean()), 2),
        "mean_absolute": round(float(np.abs(gap).mean()), 2),
        "root_mean_square": round(float(np.sqrt((gap**2).mean())), 2),
    }
