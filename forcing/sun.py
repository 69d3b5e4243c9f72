"""Where the sun is, and when it rises, stands highest and sets.

Position: the apparent position of low precision of Meeus (1998, Astronomical Algorithms, 2nd ed., chapter 25), with
his sidereal time (chapter 12), refraction (chapter 16, after Saemundsson 1986) and the difference of dynamical and
universal time of Espenak & Meeus (2006). Good to 0.01 degree from 1980 to 2050; the tests hold it to the worked
example of Reda & Andreas (2004, NREL/TP-560-34302).

Everything is vectorised over POSIX seconds (UTC); aware datetimes are turned into them by `posix_seconds`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from forcing.errors import DaylayerError

Array = NDArray[np.float64]

#: Zenith distance of the sun's centre when its upper rim touches a flat horizon: 34' of mean refraction and 16' of
#: radius [degrees] (Meeus 1998, chapter 15).
HORIZON_ZENITH = 90.8333

_POSIX_JULIAN_DAY = 2440587.5  # Julian day of 1970-01-01T00:00 UTC (Meeus 1998, chapter 7)
_DAY = 86400.0
_DEGREES_PER_DAY = 360.98564736629  # turn of the earth, degrees a day (Meeus 1998, eq. 12.4)


class SolarPosition(NamedTuple):
    """The sun seen from one place; every field an array of the shape of the times.

    Angles in radians: `zenith` (topocentric, without refraction), `azimuth` (from true north, eastward),
    `declination`, `right_ascension`, `hour_angle` (geocentric, positive after noon), `obliquity` (true). Then
    `equation_of_time` in minutes (positive: the sun is ahead of the mean sun) and `distance` in astronomical units.
    """

    zenith: Array
    azimuth: Array
    declination: Array
    right_ascension: Array
    hour_angle: Array
    obliquity: Array
    equation_of_time: Array
    distance: Array

    @property
    def irradiance_factor(self) -> Array:
        """Extraterrestrial irradiance over its mean: inverse square of the distance [1]."""
        return np.asarray(self.distance**-2.0)


@dataclass(frozen=True, slots=True)
class SunTimes:
    """Sunrise, highest sun and sunset of one local date (aware, UTC).

    `sunrise` and `sunset` are None where the sun does not cross the horizon between the midnights before and after
    the noon; `polar` then says why: "polar day" or "polar night", and is "" otherwise.
    """

    sunrise: datetime | None
    solar_noon: datetime
    sunset: datetime | None
    polar: Literal["", "polar day", "polar night"]


def posix_seconds(times: Sequence[datetime]) -> Array:
    """Seconds since 1970-01-01T00:00 UTC of aware datetimes, shape (n,).

    Raises
    ------
    DaylayerError
        Where a datetime has no offset.
    """
    for moment in times:
        if moment.tzinfo is None or moment.utcoffset() is None:
            raise DaylayerError(
                f"the time {moment.isoformat()} has no offset", remedy="give it one, for example +00:00 for UTC"
            )
    return np.array([moment.timestamp() for moment in times], dtype=np.float64)


def julian_day(seconds: ArrayLike) -> Array:
    """Julian day [d] of POSIX seconds (Meeus 1998, chapter 7)."""
    return np.asarray(np.asarray(seconds, dtype=np.float64) / _DAY + _POSIX_JULIAN_DAY)


def dynamical_minus_universal(seconds: ArrayLike) -> Array:
    """Dynamical minus universal time [s], from Espenak & Meeus (2006, NASA/TP-2006-214141) between 1961 and 2050."""
    year = 2000.0 + (julian_day(seconds) - 2451545.0) / 365.25
    since_1975 = year - 1975.0
    since_2000 = year - 2000.0
    before = 45.45 + 1.067 * since_1975 - since_1975**2 / 260.0 - since_1975**3 / 718.0
    between = 63.86 + since_2000 * (
        0.3345
        + since_2000 * (-0.060374 + since_2000 * (0.0017275 + since_2000 * (0.000651814 + since_2000 * 2.373599e-5)))
    )
    after = 62.92 + 0.32217 * since_2000 + 0.005589 * since_2000**2
    return np.asarray(np.select([year < 1986.0, year < 2005.0], [before, between], after))


def solar_position(times: Sequence[datetime] | ArrayLike, latitude: float, longitude: float) -> SolarPosition:
    """Position of the sun's centre.

    Parameters
    ----------
    times : sequence of aware datetime, or array of POSIX seconds
    latitude, longitude : float
        Degrees north and degrees east.

    Raises
    ------
    DaylayerError
        Where a place is off the globe or a datetime has no offset.
    """
    _check_place(latitude, longitude)
    seconds = _seconds(times)
    day = julian_day(seconds)
    century = (day + dynamical_minus_universal(seconds) / _DAY - 2451545.0) / 36525.0
    mean_longitude, longitude_apparent, distance, obliquity, nutation = _apparent(century)
    right_ascension = np.arctan2(np.cos(obliquity) * np.sin(longitude_apparent), np.cos(longitude_apparent))
    declination = np.arcsin(np.sin(obliquity) * np.sin(longitude_apparent))
    # mean sidereal time at Greenwich, eq. 12.4, then the equation of the equinoxes
    elapsed = day - 2451545.0
    sidereal = np.radians((280.46061837 + _DEGREES_PER_DAY * elapsed) % 360.0) + nutation * np.cos(obliquity)
    hour_angle = _half_turn(sidereal + np.radians(longitude) - right_ascension)
    # eq. 28.1; 0.0057183 degrees is the constant part of aberration
    equation = _half_turn(mean_longitude - np.radians(0.0057183) - right_ascension + nutation * np.cos(obliquity))
    zenith, azimuth = _horizontal(np.radians(latitude), declination, hour_angle, distance)
    return SolarPosition(
        zenith=zenith,
        azimuth=azimuth,
        declination=declination,
        right_ascension=right_ascension % (2.0 * np.pi),
        hour_angle=hour_angle,
        obliquity=obliquity,
        equation_of_time=np.degrees(equation) * 4.0,
        distance=distance,
    )


def refraction(zenith: ArrayLike, *, pressure: float = 101325.0, temperature: float = 283.15) -> Array:
    """How much refraction lifts the sun [radians], to be taken off a true zenith distance [radians].

    Saemundsson's formula with the pressure [Pa] and temperature [K] factor of Meeus (1998, eq. 16.4); zero once the
    upper rim is below the horizon.
    """
    elevation = 90.0 - np.degrees(np.asarray(zenith, dtype=np.float64))
    above = elevation >= 90.0 - HORIZON_ZENITH
    angle = np.radians(np.where(above, elevation + 10.3 / (np.where(above, elevation, 0.0) + 5.11), 45.0))
    lift = (pressure / 101000.0) * (283.0 / temperature) * 1.02 / (60.0 * np.tan(angle))
    return np.asarray(np.where(above, np.radians(lift), 0.0))


def sunrise_sunset(day: date, latitude: float, longitude: float, *, utc_offset_hours: float | None = None) -> SunTimes:
    """Sunrise, highest sun and sunset on one local date, to a few seconds.

    Parameters
    ----------
    day : date
        The date at the site.
    latitude, longitude : float
        Degrees north and degrees east.
    utc_offset_hours : float, optional
        Offset of the site's clock. Left out, local mean solar time decides which noon belongs to the date.

    Notes
    -----
    The horizon is flat and at sea level; the sun counts as up while its centre is within 90.8333 degrees of the
    zenith, seen from the earth's centre.
    """
    _check_place(latitude, longitude)
    midnight = datetime(day.year, day.month, day.day, tzinfo=UTC).timestamp()
    longitude -= 360.0 if longitude > 180.0 else 0.0
    noon = midnight + 43200.0 - 240.0 * longitude
    if utc_offset_hours is not None:
        noon += _DAY * round((midnight + 43200.0 - 3600.0 * utc_offset_hours - noon) / _DAY)
    for _ in range(2):
        noon -= float(solar_position([noon], latitude, longitude).hour_angle[0]) * 43200.0 / np.pi
    rise, fall = _crossings(noon, latitude, longitude)
    polar: Literal["", "polar day", "polar night"] = ""
    if rise is None and fall is None:
        polar = "polar day" if float(_height(np.array([noon]), latitude, longitude)[0]) > 0.0 else "polar night"
    return SunTimes(_aware(rise), _moment(noon), _aware(fall), polar)


def _seconds(times: Sequence[datetime] | ArrayLike) -> Array:
    if isinstance(times, Sequence) and len(times) > 0 and isinstance(times[0], datetime):
        return posix_seconds([moment for moment in times if isinstance(moment, datetime)])
    return np.asarray(times, dtype=np.float64)


def _check_place(latitude: float, longitude: float) -> None:
    if not -90.0 <= latitude <= 90.0:
        raise DaylayerError(f"latitude {latitude} is outside -90 to 90", remedy="give degrees north")
    if not -180.0 <= longitude <= 360.0:
        raise DaylayerError(f"longitude {longitude} is outside -180 to 360", remedy="give degrees east")


def _half_turn(angle: Array) -> Array:
    return np.asarray((angle + np.pi) % (2.0 * np.pi) - np.pi)


def _apparent(century: Array) -> tuple[Array, Array, Array, Array, Array]:
    """Mean longitude, apparent longitude, distance, true obliquity, nutation in longitude (Meeus chapters 22, 25)."""
    t = century
    mean_longitude = np.radians((280.46646 + t * (36000.76983 + t * 0.0003032)) % 360.0)
    anomaly = np.radians((357.52911 + t * (35999.05029 - t * 0.0001537)) % 360.0)
    eccentricity = 0.016708634 - t * (0.000042037 + t * 0.0000001267)
    centre = np.radians(
        (1.914602 - t * (0.004817 + t * 0.000014)) * np.sin(anomaly)
        + (0.019993 - t * 0.000101) * np.sin(2.0 * anomaly)
        + 0.000289 * np.sin(3.0 * anomaly)
    )
    distance = 1.000001018 * (1.0 - eccentricity**2) / (1.0 + eccentricity * np.cos(anomaly + centre))
    node = np.radians(125.04452 - 1934.136261 * t)
    moon = np.radians((218.3165 + 481267.8813 * t) % 360.0)
    nutation = np.radians(
        (
            -17.20 * np.sin(node)
            - 1.32 * np.sin(2.0 * mean_longitude)
            - 0.23 * np.sin(2.0 * moon)
            + 0.21 * np.sin(2.0 * node)
        )
        / 3600.0
    )
    tilt = np.radians(
        (
            9.20 * np.cos(node)
            + 0.57 * np.cos(2.0 * mean_longitude)
            + 0.10 * np.cos(2.0 * moon)
            - 0.09 * np.cos(2.0 * node)
        )
        / 3600.0
    )
    obliquity = np.radians(23.4392911 - t * (0.0130042 + t * (1.64e-7 - t * 5.036e-7))) + tilt
    # pulls of Venus (two), Jupiter and the moon, and a slow term (Meeus 1988, Astronomical Formulae for Calculators,
    # chapter 18), with centuries from 1900
    u = t + 1.0
    pulls = np.radians(
        0.00134 * np.cos(np.radians(153.23 + 22518.7541 * u))
        + 0.00154 * np.cos(np.radians(216.57 + 45037.5082 * u))
        + 0.00200 * np.cos(np.radians(312.69 + 32964.3577 * u))
        + 0.00179 * np.sin(np.radians(350.74 + 445267.1142 * u))
        + 0.00178 * np.sin(np.radians(231.19 + 20.20 * u))
    )
    aberration = -np.radians(20.4898 / 3600.0) / distance
    return mean_longitude, mean_longitude + centre + pulls + nutation + aberration, distance, obliquity, nutation


def _horizontal(latitude: float, declination: Array, hour_angle: Array, distance: Array) -> tuple[Array, Array]:
    """Topocentric zenith distance and azimuth (Meeus chapter 13; parallax of 8.794" over the distance, chapter 40)."""
    east = -np.cos(declination) * np.sin(hour_angle)
    north = np.sin(declination) * np.cos(latitude) - np.cos(declination) * np.sin(latitude) * np.cos(hour_angle)
    up = np.sin(declination) * np.sin(latitude) + np.cos(declination) * np.cos(latitude) * np.cos(hour_angle)
    geocentric = np.arctan2(np.hypot(east, north), up)
    zenith = geocentric + np.radians(8.794 / 3600.0) / distance * np.sin(geocentric)
    return zenith, np.arctan2(east, north) % (2.0 * np.pi)


def _height(seconds: Array, latitude: float, longitude: float) -> Array:
    """Height of the sun above the rising position [radians]: a smooth curve that is zero at sunrise and sunset."""
    sun = solar_position(seconds, latitude, longitude)
    angle = np.radians(latitude)
    sine = np.sin(angle) * np.sin(sun.declination) + np.cos(angle) * np.cos(sun.declination) * np.cos(sun.hour_angle)
    return np.asarray(np.arcsin(np.clip(sine, -1.0, 1.0)) - np.radians(90.0 - HORIZON_ZENITH))


def _crossings(noon: float, latitude: float, longitude: float) -> tuple[float | None, float | None]:
    """Where the sun crosses the horizon before and after a noon: ten-minute steps, then ten-second ones, then a line."""
    steps = np.linspace(noon - 43200.0, noon + 43200.0, 145)
    up = _height(steps, latitude, longitude) > 0.0
    change = np.flatnonzero(up[:-1] != up[1:])
    starts = [float(steps[index]) for index in (*change[change < 72][:1], *change[change >= 72][-1:])]
    fine = np.linspace(0.0, 600.0, 61)
    rise: float | None = None
    fall: float | None = None
    heights = _height(np.add.outer(starts, fine), latitude, longitude) if starts else np.empty((0, 61))
    for start, height in zip(starts, heights, strict=True):
        first = int(np.flatnonzero((height[:-1] > 0.0) != (height[1:] > 0.0))[0])
        low, high = float(height[first]), float(height[first + 1])
        found = start + 10.0 * (first + low / (low - high))
        if found < noon:
            rise = found
        else:
            fall = found
    return rise, fall


def _moment(seconds: float) -> datetime:
    return datetime(1970, 1, 1, tzinfo=UTC) + timedelta(seconds=round(seconds, 3))


def _aware(seconds: float | None) -> datetime | None:
    return None if seconds is None else _moment(seconds)
