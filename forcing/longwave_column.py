"""What the long-wave kernels are given: levels up to 100 hPa, the fixed air above a night column, and the anchor.

The fits behind these kernels are in `forcing.emissivity`, the kernels in `forcing.longwave`.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from forcing.air import GRAVITY, R_DRY, STEFAN_BOLTZMANN
from forcing.emissivity import TABLE, carbon_path, prata_emissivity, water_path
from forcing.errors import ProfileError
from forcing.longwave import downwelling
from forcing.speed import COMPILED

Array = NDArray[np.float64]

#: Depth that a profile must have for its own emission to be used [m above ground].
COLUMN_NEEDS = 3000.0

#: Clear-sky downward flux over that of Prata (1996) at a grassland in Oklahoma [W m-2]: measured there in 2010, 70 clear
#: hours from April to June gave -2 with a standard deviation of 6, 16 from January to March -8 with 3.
FORMULA_OFFSET = -5.0

_TOP = 10000.0  # Pa; the air above emits less than 1 W m-2 to the ground
_LAPSE = 0.0065  # K m-1, and the coldest air above a profile: standard atmosphere (ICAO 1993)
_COLDEST = 216.65
_DRIEST = 3.0e-6  # kg/kg, lower stratosphere (common practice)


class Levels(NamedTuple):
    """Levels for `forcing.longwave.downwelling`, upward: Pa, K, kg/kg (lists when plain, arrays when compiled)."""

    pressure: Sequence[float]
    temperature: Sequence[float]
    humidity: Sequence[float]


class UpperAir(NamedTuple):
    """Fixed air above a night column, by interface upward from the first one above the column's top.

    Scaled `water` [kg m-2] and `carbon` [cm] paths from the column's top, and black-body `emission` [W m-2].
    """

    water: Sequence[float]
    carbon: Sequence[float]
    emission: Sequence[float]


class Anchor(NamedTuple):
    """How clear-sky long-wave is set: `offset` [W m-2], whether the column's own emission is used, and that in words."""

    offset: float
    uses_column: bool
    text: str


def radiation_levels(
    pressure: ArrayLike, temperature: ArrayLike, humidity: ArrayLike, *, count: int = 30, bottom: float | None = None
) -> Levels:
    """Levels from the ground to 100 hPa, dense near the ground.

    Parameters
    ----------
    pressure, temperature, humidity : array, shape (n,)
        Pa, K, kg/kg upward from the ground. Above the last level temperature falls by 6.5 K/km down to 216.65 K and
        humidity with the third power of pressure.
    count : int
        Number of levels returned.
    bottom : float, optional
        Pressure to start from [Pa], if not the first level.

    Raises
    ------
    ProfileError
        Where pressure does not fall upward or a value is missing.
    """
    p, t, q = (np.asarray(values, dtype=np.float64) for values in (pressure, temperature, humidity))
    if p.size < 2 or not (np.all(np.isfinite(p)) and np.all(np.isfinite(t)) and np.all(np.isfinite(q))):
        raise ProfileError("long-wave needs pressure, temperature and humidity at two levels or more, none missing")
    if np.any(np.diff(p) >= 0.0):
        raise ProfileError("pressure does not fall upward", remedy="prepare the profile first")
    start = float(p[0]) if bottom is None else bottom
    grid = start - (start - _TOP) * np.linspace(0.0, 1.0, count) ** 2
    inside = grid >= p[-1]
    fall = (grid / p[-1]) ** (R_DRY * _LAPSE / GRAVITY)
    warm = np.where(
        inside, np.interp(-np.log(grid), -np.log(p), t), np.maximum(t[-1] * fall, min(_COLDEST, float(t[-1])))
    )
    wet = np.where(inside, np.interp(-grid, -p, q), np.maximum(q[-1] * np.minimum(grid / p[-1], 1.0) ** 3, _DRIEST))
    return Levels(_sequence(grid), _sequence(warm), _sequence(wet))


def upper_air(
    pressure: ArrayLike, temperature: ArrayLike, humidity: ArrayLike, *, column_top: float, count: int = 12
) -> UpperAir:
    """Fold the profile above a night column, whose top is at the pressure `column_top` [Pa], to `count` interfaces."""
    levels = radiation_levels(pressure, temperature, humidity, count=count + 1, bottom=column_top)
    water = carbon = 0.0
    result: tuple[list[float], list[float], list[float]] = ([], [], [])
    for k in range(count):
        lower, upper = levels.pressure[k], levels.pressure[k + 1]
        mean = 0.5 * (levels.temperature[k] + levels.temperature[k + 1])
        water += water_path(lower, upper, mean, 0.5 * (levels.humidity[k] + levels.humidity[k + 1]))
        carbon += carbon_path(lower, upper)
        result[0].append(water)
        result[1].append(carbon)
        result[2].append(STEFAN_BOLTZMANN * levels.temperature[k + 1] ** 4)
    return UpperAir(*(_sequence(values) for values in result))


def anchor(
    levels: Levels,
    *,
    profile_depth: float,
    vapour_pressure: float,
    temperature: float,
    rule: Literal["formula", "column"] = "formula",
) -> Anchor:
    """Choose where the clear-sky long-wave at the ground comes from.

    Parameters
    ----------
    levels : Levels
        The column at the start.
    profile_depth : float
        Height of the profile's last level [m above ground].
    vapour_pressure, temperature : float
        Screen air at the start [Pa, K].
    rule : str
        "formula": an offset makes the column's flux at the start that of Prata (1996) plus `FORMULA_OFFSET`, and stays.
        "column": the column's own flux, no offset.
    """
    formula = prata_emissivity(vapour_pressure, temperature) * STEFAN_BOLTZMANN * temperature**4 + FORMULA_OFFSET
    if profile_depth < COLUMN_NEEDS:
        return Anchor(
            FORMULA_OFFSET,
            False,
            f"long-wave from screen air (Prata 1996, {FORMULA_OFFSET:+.0f} W m-2): the profile ends {profile_depth:.0f} m "
            f"above ground, below {COLUMN_NEEDS:.0f} m",
        )
    own = downwelling(*levels, 0.0, 0.0, 0.0, 0.0, TABLE)
    if rule == "column":
        return Anchor(0.0, True, f"long-wave from the profile's own emission ({own:.0f} W m-2 at the start, clear sky)")
    return Anchor(
        formula - own,
        True,
        f"long-wave from the profile's own emission, moved by {formula - own:+.0f} W m-2 to agree at the start with Prata "
        f"(1996) {FORMULA_OFFSET:+.0f} W m-2",
    )


def _sequence(values: ArrayLike) -> Sequence[float]:
    array = np.asarray(values, dtype=np.float64)
    if COMPILED:
        result: Sequence[float] = array  # type: ignore[assignment]
        return result
    return [float(value) for value in array]
