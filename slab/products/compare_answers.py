"""What one run of a comparison answers: extremes with their hours, means, the balance by day and by night, hour by hour."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any, NamedTuple
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from forcing.air import ZERO_CELSIUS, mixing_ratio_from_humidity, relative_humidity
from forcing.sun import solar_position
from forcing.table import anthropogenic_heat
from slab.cycle import Run
from slab.products.events import FIRST_HOURS
from slab.products.series import crossing, output_knots, series

Array = NDArray[np.float64]

MIDDAY = (10.0, 14.0)  # [h] solar time of midday means
MINIMUM_UNTIL = 36.0  # [h] from the start; the same window as the forecast's lowest temperature
NIGHT_AFTER = 6.0  # [h] from the start; a dawn release is not part of the night that the change is read in


class Quantity(NamedTuple):
    """An answer: unit, meaning, and whether it is an hour of the day."""

    unit: str
    meaning: str


BALANCE = ("net_radiation", "anthropogenic", "sensible", "latent", "ground")
_BALANCE_WORDS = {
    "net_radiation": "net radiation, positive downward",
    "anthropogenic": "heat released by people",
    "sensible": "sensible heat, positive upward",
    "latent": "latent heat, positive upward",
    "ground": "heat into ground and walls, positive into them",
}

QUANTITIES: Mapping[str, Quantity] = {
    "temperature_2m_max_C": Quantity("degC", "highest 2 m temperature of the first 24 h"),
    "temperature_2m_max_hour": Quantity("h", "local hour of the highest 2 m temperature"),
    "temperature_2m_min_C": Quantity("degC", "lowest 2 m temperature after the highest"),
    "temperature_2m_min_hour": Quantity(
        "h", "local hour of the lowest 2 m temperature, from midnight of the first day"
    ),
    "temperature_2m_day_C": Quantity("degC", "mean 2 m temperature of the first day, sun up"),
    "temperature_2m_night_C": Quantity("degC", "mean 2 m temperature of the following night, sun down"),
    "theta_max_K": Quantity("K", "highest potential temperature of the mixed layer"),
    "skin_temperature_max_C": Quantity("degC", "highest skin temperature"),
    "skin_temperature_min_C": Quantity("degC", "lowest skin temperature after the highest 2 m temperature"),
    "hours_above_threshold": Quantity("h", "hours of the first 24 h with 2 m temperature above the threshold"),
    "degree_hours": Quantity("K h", "2 m temperature above the threshold summed over the first 24 h"),
    "mixing_depth_max_m": Quantity("m", "greatest mixing depth of the day"),
    "mixing_depth_night_m": Quantity("m", "mean depth of the turbulent layer of the night"),
    "ventilation_max_m2_s": Quantity("m2 s-1", "greatest mixing depth times transport wind"),
    "mixing_ratio_day_g_kg": Quantity("g kg-1", "mean water vapour at 2 m by day"),
    "relative_humidity_min_pct": Quantity("%", "lowest relative humidity at 2 m"),
    "inversion_strength_max_K": Quantity("K", "greatest strength of the surface inversion of the night, 0 without one"),
    "flux_start_hour": Quantity("h", "local hour at which sensible heat turns upward in the morning"),
    "flux_end_hour": Quantity("h", "local hour at which sensible heat turns downward"),
    "bowen_ratio_midday": Quantity("1", "sensible over latent heat, sums of 10 to 14 h solar time"),
    **{f"{term}_day_W_m2": Quantity("W m-2", f"{words}, mean of the day") for term, words in _BALANCE_WORDS.items()},
    **{
        f"{term}_night_W_m2": Quantity("W m-2", f"{words}, mean of the night") for term, words in _BALANCE_WORDS.items()
    },
    "balance_residual_W_m2": Quantity("W m-2", "largest gap between what the surface gains and gives by day"),
}

HOURLY: Mapping[str, Quantity] = {
    "temperature_2m_C": Quantity("degC", "air temperature at 2 m"),
    "skin_temperature_C": Quantity("degC", "temperature of the skin of the ground"),
    "theta_K": Quantity("K", "potential temperature of the mixed layer, reference 1000 hPa"),
    "dewpoint_2m_C": Quantity("degC", "dew point at 2 m"),
    "relative_humidity_2m_pct": Quantity("%", "relative humidity at 2 m"),
    "mixing_ratio_g_kg": Quantity("g kg-1", "water vapour of the mixed layer"),
    "wind_10m_m_s": Quantity("m s-1", "wind at 10 m"),
    "mixing_depth_m": Quantity("m", "mixing depth"),
    "ventilation_m2_s": Quantity("m2 s-1", "mixing depth times transport wind"),
    "inversion_strength_K": Quantity("K", "strength of the surface inversion, 0 without one"),
    "net_radiation_W_m2": Quantity("W m-2", "net radiation, positive downward"),
    "sensible_flux_W_m2": Quantity("W m-2", "sensible heat, positive upward"),
    "latent_flux_W_m2": Quantity("W m-2", "latent heat, positive upward"),
    "ground_flux_W_m2": Quantity("W m-2", "heat into ground and walls, positive into them"),
    "anthropogenic_heat_W_m2": Quantity("W m-2", "heat released by people"),
}


@dataclass(frozen=True, slots=True)
class Answered:
    """One run's answers: numbers by name (NaN missing), hours with their UTC times, series by name, and patch lengths.

    ``hours`` count whole local hours from midnight of the first local day; ``turnover`` is the midday median of mixing
    depth over convective velocity [s], ``patch`` that times the layer's wind [m], and ``heating`` the wind times the hours
    from the first upward sensible heat to the warmest hour [m].
    """

    numbers: dict[str, float]
    hours: list[int]
    times: list[str]
    series: dict[str, list[float]]
    turnover: float
    patch: float
    heating: float
    wind: float
    stopped: str


def midnight(run: Run) -> float:
    """Local midnight of the first local day [s since 1970 UTC]."""
    zone = ZoneInfo(run.scenario.site.time_zone)
    return (
        datetime.fromtimestamp(float(run.time[0]), zone).replace(hour=0, minute=0, second=0, microsecond=0).timestamp()
    )


def answers(run: Run, threshold: float) -> Answered:
    """Answers of a run.

    Parameters
    ----------
    threshold : float
        2 m temperature [degrees C] for hours above it and degree-hours.
    """
    sun = sun_up(run)
    numbers = dict.fromkeys(QUANTITIES, math.nan)
    rows = series(run, output_knots(run))
    numbers |= extremes(run) | _means(run, sun, threshold) | _balance(run, sun) | _from_rows(run, rows)
    hours, times, table = _hourly(run, rows)
    turnover, patch, wind = turnover_of(run)
    return Answered(numbers, hours, times, table, turnover, patch, wind * heated_for(run), wind, run.stopped)


def sun_up(run: Run) -> NDArray[np.bool_]:
    """Whether the sun's centre is above a flat horizon, by knot."""
    site = run.scenario.site
    return np.asarray(solar_position(run.time, site.latitude, site.longitude).zenith < math.pi / 2.0)


def _solar_hour(run: Run) -> Array:
    hour_angle = solar_position(run.time, run.scenario.site.latitude, run.scenario.site.longitude).hour_angle
    return np.asarray(12.0 + hour_angle * 12.0 / math.pi) % 24.0


def _local_hour(run: Run, knot: int) -> float:
    return (float(run.time[knot]) - midnight(run)) / 3600.0


def _best(values: Array, mask: NDArray[np.bool_], sign: float) -> int | None:
    usable = mask & np.isfinite(values)
    return int(np.argmax(np.where(usable, sign * values, -math.inf))) if usable.any() else None


def extremes(run: Run) -> dict[str, float]:
    """Highest and lowest values with their hours, and the hours at which sensible heat turns."""
    f, elapsed = run.fields, (run.time - run.time[0]) / 3600.0
    early = elapsed <= FIRST_HOURS
    out: dict[str, float] = {}
    warm = _best(f["temperature_2m"], early, 1.0)
    if warm is None:
        return out
    after = (elapsed >= elapsed[warm]) & (elapsed <= MINIMUM_UNTIL)
    cold = _best(f["temperature_2m"], after, -1.0)
    out["temperature_2m_max_C"] = float(f["temperature_2m"][warm]) - ZERO_CELSIUS
    out["temperature_2m_max_hour"] = _local_hour(run, warm)
    if cold is not None and elapsed[cold] > NIGHT_AFTER:
        out["temperature_2m_min_C"] = float(f["temperature_2m"][cold]) - ZERO_CELSIUS
        out["temperature_2m_min_hour"] = _local_hour(run, cold)
        out["skin_temperature_min_C"] = float(np.nanmin(f["skin_temperature"][after])) - ZERO_CELSIUS
    out["skin_temperature_max_C"] = float(np.nanmax(f["skin_temperature"][early])) - ZERO_CELSIUS
    day = early & run.day
    for name, field in (("theta_max_K", "theta"), ("mixing_depth_max_m", "depth")):
        k = _best(f[field], day, 1.0)
        out[name] = math.nan if k is None or run.stopped != "end of the run" else float(f[field][k])
    strongest = _best(f["sensible"], early, 1.0)
    if strongest is not None:
        end = crossing(run.time, f["sensible"], upward=False, after=float(run.time[strongest]))
        out["flux_end_hour"] = (end - midnight(run)) / 3600.0
    if (
        cold is not None and elapsed[cold] > NIGHT_AFTER
    ):  # the first morning starts from the same release for every ground
        start = crossing(run.time, f["sensible"], upward=True, after=float(run.time[cold]) - 7200.0)
        out["flux_start_hour"] = (start - midnight(run)) / 3600.0
    return out


def _mean(values: Array, mask: NDArray[np.bool_]) -> float:
    usable = mask & np.isfinite(values)
    return float(np.mean(values[usable])) if usable.any() else math.nan


def day_and_night(run: Run, sun: NDArray[np.bool_]) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Knots of the first day (sun up, first 24 h) and of the night after it (sun down)."""
    elapsed = (run.time - run.time[0]) / 3600.0
    return sun & (elapsed <= FIRST_HOURS - 6.0), ~sun & (elapsed > NIGHT_AFTER) & (elapsed <= MINIMUM_UNTIL - 6.0)


def _means(run: Run, sun: NDArray[np.bool_], threshold: float) -> dict[str, float]:
    f = run.fields
    day, night = day_and_night(run, sun)
    warmth = f["temperature_2m"] - ZERO_CELSIUS
    early = (run.time - run.time[0] <= FIRST_HOURS * 3600.0) & np.isfinite(warmth)
    step = float(run.time[1] - run.time[0]) / 3600.0
    over = np.maximum(warmth[early] - threshold, 0.0)
    ratio = 1000.0 * np.array([mixing_ratio_from_humidity(float(q)) for q in f["humidity_2m"]])
    damp = np.array(
        [
            100.0 * min(1.0, relative_humidity(float(t), float(q), run.surface_pressure))
            for t, q in zip(f["temperature_2m"], f["humidity_2m"], strict=True)
        ]
    )
    whole = bool(early.any()) and float(run.time[early][-1] - run.time[0]) >= FIRST_HOURS * 3600.0 - 1.0
    return {
        "temperature_2m_day_C": _mean(warmth, day),
        "temperature_2m_night_C": _mean(warmth, night),
        "mixing_depth_night_m": _mean(f["depth"], night & ~run.day),
        "mixing_ratio_day_g_kg": _mean(ratio, day),
        "relative_humidity_min_pct": float(np.nanmin(np.where(early, damp, math.nan))),
        "hours_above_threshold": float(np.sum(over > 0.0)) * step if whole else math.nan,
        "degree_hours": float(np.sum(over)) * step if whole else math.nan,
    }


def _balance(run: Run, sun: NDArray[np.bool_]) -> dict[str, float]:
    f = dict(run.fields) | {"anthropogenic": anthropogenic_heat(run.scenario, run.time)}
    day, night = day_and_night(run, sun)
    out = {}
    for term in BALANCE:
        out[f"{term}_day_W_m2"] = _mean(f[term], day)
        out[f"{term}_night_W_m2"] = _mean(f[term], night)
    gap = f["net_radiation"] + f["anthropogenic"] - f["sensible"] - f["latent"] - f["ground"]
    by_day = np.abs(gap[run.day & np.isfinite(gap)])
    out["balance_residual_W_m2"] = float(by_day.max()) if by_day.size and run.ground.snow < 0.5 else math.nan
    solar = _solar_hour(run)
    first = (run.time - run.time[0] <= FIRST_HOURS * 3600.0) & (solar >= MIDDAY[0]) & (solar <= MIDDAY[1])
    latent = _mean(f["latent"], first)
    out["bowen_ratio_midday"] = _mean(f["sensible"], first) / latent if latent > 1.0 else math.nan
    return out


def _from_rows(run: Run, rows: Mapping[str, Sequence[Any]]) -> dict[str, float]:
    """Answers that need the column at an hour: ventilation and the inversion."""
    elapsed = [(datetime.fromisoformat(text).timestamp() - run.time[0]) / 3600.0 for text in rows["time"]]
    air = [v for v, t in zip(rows["ventilation_m2_s"], elapsed, strict=True) if v is not None and t <= FIRST_HOURS]
    night = [
        v or 0.0
        for v, t in zip(rows["inversion_strength_K"], elapsed, strict=True)
        if NIGHT_AFTER < t <= MINIMUM_UNTIL - 6.0
    ]
    return {
        "ventilation_max_m2_s": max(air, default=math.nan),
        "inversion_strength_max_K": max(night, default=math.nan),
    }


def _hourly(run: Run, rows: Mapping[str, Sequence[Any]]) -> tuple[list[int], list[str], dict[str, list[float]]]:
    """Whole hours since local midnight, their times, and the series there."""
    heat = anthropogenic_heat(run.scenario, run.time)
    start, knots = midnight(run), output_knots(run)
    hours: list[int] = []
    times: list[str] = []
    table: dict[str, list[float]] = {name: [] for name in HOURLY}
    for n, knot in enumerate(knots):
        text = rows["time"][n]
        if run.time[knot] % 3600.0 > 1.0:
            continue
        hours.append(math.floor((float(run.time[knot]) - start) / 3600.0 + 0.5))
        times.append(text)
        own = {
            "skin_temperature_C": float(run.fields["skin_temperature"][knot]) - ZERO_CELSIUS,
            "anthropogenic_heat_W_m2": float(heat[knot]),
            "inversion_strength_K": rows["inversion_strength_K"][n] or 0.0,
        }
        for name, values in table.items():
            value = own[name] if name in own else rows[name][n]
            values.append(math.nan if value is None else float(value))
    return hours, times, table


def turnover_of(run: Run) -> tuple[float, float, float]:
    """Turnover time of the mixed layer [s], wind times it [m], and that wind [m s-1]: medians of 10 to 14 h solar time."""
    f, solar = run.fields, _solar_hour(run)
    inside = (
        run.day
        & (run.time - run.time[0] <= FIRST_HOURS * 3600.0)
        & (solar >= MIDDAY[0])
        & (solar <= MIDDAY[1])
        & (f["convective_velocity"] > 0.1)
    )
    if not inside.any():
        return math.nan, math.nan, math.nan
    time = f["depth"][inside] / f["convective_velocity"][inside]
    wind = np.hypot(f["east"][inside], f["north"][inside])
    return float(np.median(time)), float(np.median(time * wind)), float(np.median(wind))


def heated_for(run: Run) -> float:
    """Time [s] from the first upward sensible heat to the highest 2 m temperature of the first 24 h; NaN without them."""
    f = run.fields
    early = run.time - run.time[0] <= FIRST_HOURS * 3600.0
    warm = _best(f["temperature_2m"], early, 1.0)
    fed = np.flatnonzero(early & (f["sensible"] > 0.0))
    return math.nan if warm is None or fed.size == 0 else max(0.0, float(run.time[warm] - run.time[fed[0]]))
