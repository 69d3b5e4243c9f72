"""The hourly table of a run, in the names and units of the result document."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from datetime import UTC, datetime
from typing import Any

import numpy as np
from numpy.typing import NDArray

from forcing.air import (
    KAPPA,
    P_REFERENCE,
    ZERO_CELSIUS,
    condensation_level,
    dew_point,
    mixing_ratio_from_humidity,
    relative_humidity,
    saturation_vapour_pressure,
    vapour_pressure,
)
from forcing.profile import Profile
from slab.cycle import Run
from slab.inversions import rising_inversion
from slab.night_answers import REGIMES
from slab.nightfall import SETTLES
from slab.rendered import part_at, profile_at

Array = NDArray[np.float64]

SLAB_TOP = "slab top"
STRESS = "stress at 5 % of the surface value"
RICHARDSON = "bulk richardson 0.25"
MIXED, DECAYING = "mixed", "decaying"


def iso(seconds: float) -> str:
    """UTC time in ISO 8601 of seconds since 1970."""
    return datetime.fromtimestamp(round(seconds), UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


def output_knots(run: Run) -> list[int]:
    """Knots of the table: the start, every whole multiple of the output interval, and the last one computed."""
    step = 60.0 * run.scenario.run.output_minutes
    known = np.flatnonzero(np.isfinite(run.fields["temperature_2m"]))
    if known.size == 0:
        return []
    whole = [int(k) for k in known if abs(run.time[k] / step - round(run.time[k] / step)) < 1e-6]
    return sorted({int(known[0]), *whole, int(known[-1])})


def transport_wind(profile: Profile, depth: float) -> tuple[float, float]:
    """Speed [m s-1] and direction [degrees it blows from] of the vector mean wind from the ground to ``depth`` [m]
    (Miller 1967), weighted by mass."""
    inside = profile.height < depth
    z = np.concatenate((profile.height[inside], [depth]))
    p = np.interp(z, profile.height, profile.pressure)
    weight = np.abs(np.diff(p))
    u, v = (
        float(np.sum(weight * 0.5 * (x[1:] + x[:-1])) / np.sum(weight))
        for x in (np.interp(z, profile.height, profile.u), np.interp(z, profile.height, profile.v))
    )
    return math.hypot(u, v), math.degrees(math.atan2(-u, -v)) % 360.0


def regime_word(run: Run, knot: int) -> str:
    """What the lowest air is doing: by day "mixed" or "decaying" by the sign of the virtual flux, else the night's regime."""
    if run.day[knot]:
        return MIXED if run.fields["buoyancy_flux"][knot] > 0.0 else DECAYING
    course = part_at(run, knot).course
    assert course is not None
    return REGIMES[course.notes[knot].regime]


def settling(run: Run, knot: int) -> bool:
    """Whether a knot lies in the first hour of a run that starts with the night's column."""
    return run.parts[0].course is not None and run.time[knot] - run.time[0] < SETTLES


def screen_profile(run: Run, knot: int, profile: Profile) -> tuple[Array, Array]:
    """Heights [m] and temperatures [K] from the lowest kept height up: the heights of the run, then the column."""
    heights = np.asarray(run.heights)
    order = np.argsort(heights)
    above = profile.height > max(run.heights) + 1.0
    z = np.concatenate((heights[order], profile.height[above]))
    return z, np.concatenate((run.temperatures[knot][order], profile.temperature[above]))


def _rounded(value: float, digits: int) -> float | None:
    return round(float(value), digits) if math.isfinite(value) else None


def _row(run: Run, knot: int) -> dict[str, Any]:
    f = {name: float(values[knot]) for name, values in run.fields.items()}
    profile = profile_at(run, knot)
    pressure = run.surface_pressure
    vapour = min(vapour_pressure(f["humidity_2m"], pressure), saturation_vapour_pressure(f["temperature_2m"]))
    base = condensation_level(f["theta"] * (pressure / P_REFERENCE) ** KAPPA, f["humidity"], pressure)
    wind, from_deg = transport_wind(profile, max(f["depth"], 10.0))
    known = run.scenario.profile.wind_known or run.scenario.weather.given("pressure_gradient_wind_m_s")
    inversion = rising_inversion(*screen_profile(run, knot, profile))
    ratio = 1000.0 * mixing_ratio_from_humidity(f["humidity"])
    row: dict[str, Any] = {
        "time": iso(run.time[knot]),
        "regime": regime_word(run, knot),
        "mixing_depth_m": _rounded(f["depth"], 1),
        "depth_method": SLAB_TOP if run.day[knot] else RICHARDSON if settling(run, knot) else STRESS,
        "residual_top_m": _rounded(float(run.residual_top[knot]), 1),
        "theta_K": _rounded(f["theta"], 3),
        "mixing_ratio_g_kg": _rounded(ratio, 4),
        "temperature_2m_C": _rounded(f["temperature_2m"] - ZERO_CELSIUS, 3),
        "dewpoint_2m_C": _rounded(dew_point(vapour) - ZERO_CELSIUS if vapour > 0.0 else math.nan, 3),
        "relative_humidity_2m_pct": _rounded(
            100.0 * min(1.0, relative_humidity(f["temperature_2m"], f["humidity_2m"], pressure)), 2
        ),
        "wind_10m_m_s": _rounded(f["wind_10m"], 3),
        "transport_wind_m_s": _rounded(wind, 3) if known else None,
        "transport_wind_from_deg": _rounded(from_deg, 1) if known else None,
        "ventilation_m2_s": _rounded(f["depth"] * wind, 1) if known else None,
        "shortwave_down_W_m2": _rounded(f["shortwave_down"], 2),
        "longwave_down_W_m2": _rounded(f["longwave_down"], 2),
        "net_radiation_W_m2": _rounded(f["net_radiation"], 2),
        "sensible_flux_W_m2": _rounded(f["sensible"], 2),
        "latent_flux_W_m2": _rounded(f["latent"], 2),
        "ground_flux_W_m2": _rounded(f["ground"], 2),
        "condensation_level_m": _rounded(base, 1),
        "cumulus_fraction": _rounded(f["cumulus_fraction"], 4),
        "inversion_depth_m": _rounded(inversion.top, 1) if inversion.present else None,
        "inversion_strength_K": _rounded(inversion.strength, 2) if inversion.present else None,
    }
    for height, value in zip(run.heights, run.temperatures[knot], strict=True):
        if height != 2.0:
            row[f"temperature_{height:g}m_C".replace(".", "_")] = _rounded(float(value) - ZERO_CELSIUS, 3)
    return row


def series(run: Run, knots: Sequence[int]) -> dict[str, list[Any]]:
    """Columns of the table, equally long lists; missing is None."""
    rows = [_row(run, knot) for knot in knots]
    return {name: [row[name] for row in rows] for name in rows[0]} if rows else {}


def crossing(time: Array, values: Array, *, upward: bool, after: float = -math.inf, holds: float = 0.0) -> float:
    """First time a series passes zero in the asked direction and stays there for ``holds`` [s], or until the series ends.

    Linear between knots; NaN if it never does.
    """
    passed: Callable[[float, float], bool] = (
        (lambda a, b: a <= 0.0 < b) if upward else (lambda a, b: a >= 0.0 > b)
    )
    for k in range(len(time) - 1):
        a, b = float(values[k]), float(values[k + 1])
        if time[k + 1] > after and math.isfinite(a) and math.isfinite(b) and passed(a, b):
            stays = values[k + 1 :][time[k + 1 :] <= time[k + 1] + holds]
            if np.any((stays < 0.0) if upward else (stays > 0.0)):
                continue
            return float(time[k] + (time[k + 1] - time[k]) * a / (a - b))
    return math.nan
