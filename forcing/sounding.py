"""The measured column, as read (`Sounding`) and as used (`Profile`): frozen data with no rules in it."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import datetime

import numpy as np
from numpy.typing import NDArray

from forcing.air import dew_point, each, temperature, vapour_pressure, virtual

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Sounding:
    """One release as its file tells it: SI units, missing values are NaN, nothing repaired.

    Attributes
    ----------
    pressure, height_msl, temperature, dewpoint, wind_speed, wind_from : ndarray, shape (n,)
        Pa, m above sea level, K, K, m s-1, degrees from true north the wind blows from.
    lines : tuple of int
        Line in the file (first is 1) of every level.
    valid : datetime or None
        Release time where the file has it, else the nominal hour (aware, UTC).
    nominal : datetime or None
        Nominal observation hour (aware, UTC).
    latitude, longitude, elevation : float or None
        Degrees north, degrees east, m above sea level of the release.
    surface : int or None
        Index of the level that the format marks as the ground.
    heights_above_ground : bool
        True where `height_msl` holds heights above ground because the file gives only those.
    repairs : tuple of Repair
        What the reader itself had to mend.
    """

    pressure: Array
    height_msl: Array
    temperature: Array
    dewpoint: Array
    wind_speed: Array
    wind_from: Array
    lines: tuple[int, ...]
    valid: datetime | None = None
    nominal: datetime | None = None
    latitude: float | None = None
    longitude: float | None = None
    elevation: float | None = None
    station: str = ""
    file: str = ""
    format: str = ""
    notes: tuple[str, ...] = ()
    surface: int | None = None
    heights_above_ground: bool = False
    repairs: tuple[Repair, ...] = ()


@dataclass(frozen=True, slots=True)
class Repair:
    """A named change made to the levels, how many it touched, and the rule in words."""

    name: str
    count: int
    detail: str


@dataclass(frozen=True, slots=True)
class Flag:
    """A named doubt about one level of a profile, which is kept as it is."""

    name: str
    level_index: int
    height_m: float
    detail: str


@dataclass(frozen=True, slots=True)
class Profile:
    """A column ready for use: levels upward from the ground, no missing number.

    Attributes
    ----------
    height : ndarray, shape (n,)
        m above ground, strictly increasing, first is 0.
    pressure, theta, humidity : ndarray, shape (n,)
        Pa; potential temperature (1000 hPa) in K; specific humidity in kg/kg (0 where none was measured).
    u, v : ndarray, shape (n,)
        Wind toward east and north, m s-1 (0 where `wind_known` is False).
    valid : datetime
        Aware, UTC.
    latitude, longitude : float
        Degrees north, degrees east; NaN where nobody said.
    elevation : float
        m above sea level of height 0.
    """

    height: Array
    pressure: Array
    theta: Array
    humidity: Array
    u: Array
    v: Array
    wind_known: bool
    humidity_known: bool
    valid: datetime
    latitude: float
    longitude: float
    elevation: float
    station: str = ""
    file: str = ""
    format: str = ""
    repairs: tuple[Repair, ...] = ()
    flags: tuple[Flag, ...] = field(default=())

    @property
    def temperature(self) -> Array:
        """Temperature, K, shape (n,)."""
        return each(temperature, self.theta, self.pressure)

    @property
    def dewpoint(self) -> Array:
        """Dew point over water, K, shape (n,); NaN where the air is given as perfectly dry."""
        vapour = each(vapour_pressure, self.humidity, self.pressure)
        known = vapour > 0.0
        result = np.full_like(vapour, np.nan)
        if known.any():
            result[known] = each(dew_point, vapour[known])
        return result

    @property
    def virtual_theta(self) -> Array:
        """Virtual potential temperature, K, shape (n,)."""
        return each(virtual, self.theta, self.humidity)

    @property
    def surface_pressure(self) -> float:
        """Pressure at height 0, Pa."""
        return float(self.pressure[0])
