"""One invented field for the spray tests: a clear light-wind day on short grass, 30 h from dawn, with limits of its own."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from datetime import UTC, datetime
from functools import cache
from pathlib import Path

import numpy as np

from forcing.bundled import bundled
from forcing.scenario import load, with_run, with_setting
from forcing.scenario_types import Limits, Scenario
from forcing.series import Series
from forcing.weather import ObservedTable
from slab.products.spray import Plan, document, plan

NOW = datetime(2026, 7, 14, 18, tzinfo=UTC)
LIMITS = Limits(
    authority="Test board (invented)", dated="2026-05-01", wind_height_m=2.0, wind_min_m_s=0.8, wind_max_m_s=6.0,
    delta_t_min_K=2.0, delta_t_max_K=11.0, hours_after_sunrise=1.0, hours_before_sunset=1.5,
)  # fmt: skip


def field(limits: Limits | None = LIMITS, hours: float = 30.0) -> Scenario:
    """The bundled summer plain with these limits."""
    scenario = with_run(with_setting(load(bundled("summer_plain")), "weather.rain_mm_h", 0.0), hours=hours)
    return replace(scenario, limits=limits)


@cache
def plain_plan() -> Plan:
    """The field's plan without a tower."""
    return plan(field(), fields_below=(3.0, 12.0))


@cache
def plain_document() -> Mapping[str, object]:
    """The field's document, as at `NOW`."""
    return document(plain_plan(), now=NOW)


def tower(difference: float, *, last: datetime, hours: float = 3.0, wind: float | None = None) -> ObservedTable:
    """Readings every half hour up to ``last`` with one difference [K] between 1.5 and 9 m."""
    times = last.timestamp() - 1800.0 * np.arange(round(2.0 * hours), -1, -1, dtype=np.float64)

    def series(value: float) -> Series:
        return Series(times, np.full(times.shape, value), False)

    winds = {} if wind is None else {10.0: series(wind)}
    return ObservedTable({1.5: series(300.0), 9.0: series(300.0 + difference)}, {}, winds, "tower.csv")


def written_tower(path: Path, *, heights: tuple[str, str] = ("1.5", "9")) -> Path:
    """A tower file with a difference that grows through zero in the afternoon of the field's day."""
    lines = [f"time,temperature_{heights[0]}m_C,temperature_{heights[1]}m_C,wind_10m_m_s"]
    lines += [f"2026-07-14T{20 + k // 2}:{30 * (k % 2):02d}Z,30.0,{30.0 - 0.5 + 0.2 * k:.1f},3.0" for k in range(6)]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path
