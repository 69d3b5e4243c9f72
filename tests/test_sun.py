"""Properties that hold for the sun whatever the place and time."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta, timezone

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from forcing.errors import DaylayerError
from forcing.sun import HORIZON_ZENITH, posix_seconds, refraction, solar_position, sunrise_sunset

SECONDS = st.floats(315532800.0, 2524608000.0)  # 1980 to 2050
LATITUDE = st.floats(-89.5, 89.5)
LONGITUDE = st.floats(-180.0, 180.0)


def test_datetimes_in_any_zone_are_the_same_moment() -> None:
    moment = datetime(2024, 6, 21, 12, tzinfo=UTC)
    local = moment.astimezone(timezone(timedelta(hours=-7)))
    assert solar_position([moment], 40.0, -105.0).zenith[0] == solar_position([local], 40.0, -105.0).zenith[0]
    assert posix_seconds([local])[0] == moment.timestamp()


def test_naive_datetime_is_refused() -> None:
    with pytest.raises(DaylayerError, match="2024-06-21T12:00:00 has no offset"):
        solar_position([datetime(2024, 6, 21, 12)], 40.0, 0.0)  # noqa: DTZ001


@pytest.mark.parametrize(("latitude", "longitude"), [(90.1, 0.0), (0.0, -181.0), (float("nan"), 0.0)])
def test_place_off_the_globe_is_refused(latitude: float, longitude: float) -> None:
    with pytest.raises(DaylayerError, match="outside"):
        solar_position([0.0], latitude, longitude)


@given(SECONDS, LATITUDE, LONGITUDE)
def test_zenith_and_azimuth_give_back_the_direction(seconds: float, latitude: float, longitude: float) -> None:
    sun = solar_position([seconds], latitude, longitude)
    # the same direction from declination and hour angle; parallax is under 0.0025 degrees
    up = np.sin(np.radians(latitude)) * np.sin(sun.declination) + np.cos(np.radians(latitude)) * np.cos(
        sun.declination
    ) * np.cos(sun.hour_angle)
    assert np.cos(sun.zenith) == pytest.approx(up, abs=5e-5)
    assert np.sin(sun.zenith) * np.sin(sun.azimuth) == pytest.approx(
        -np.cos(sun.declination) * np.sin(sun.hour_angle), abs=5e-5
    )
    assert abs(np.degrees(sun.declination[0])) < 23.45
    assert 0.983 < sun.distance[0] < 1.017
    assert abs(sun.equation_of_time[0]) < 17.0


@given(SECONDS, st.floats(-66.0, 66.0), LONGITUDE)
def test_noon_lies_between_sunrise_and_sunset_and_is_the_highest(
    seconds: float, latitude: float, longitude: float
) -> None:
    day = datetime.fromtimestamp(seconds, UTC).date()
    times = sunrise_sunset(day, latitude, longitude)
    if times.sunrise is None or times.sunset is None:
        assert times.polar
        return
    assert times.polar == ""
    assert times.sunrise < times.solar_noon < times.sunset
    moments = [times.sunrise, times.sunset]
    sun = solar_position(moments, latitude, longitude)
    # on the horizon, within ten seconds of the sun's path and its parallax
    assert np.degrees(sun.zenith) == pytest.approx([HORIZON_ZENITH] * 2, abs=0.045)
    around = [times.solar_noon + timedelta(minutes=m) for m in (-20, 0, 20)]
    heights = solar_position(around, latitude, longitude).zenith
    assert heights[1] <= heights[0] + 2e-4
    assert heights[1] <= heights[2] + 2e-4
    local_noon = times.solar_noon + timedelta(hours=longitude / 15.0)
    assert local_noon.date() == day


def test_polar_day_and_night_are_said() -> None:
    june, december = sunrise_sunset(date(2024, 6, 21), 78.0, 15.0), sunrise_sunset(date(2024, 12, 21), 78.0, 15.0)
    assert (june.sunrise, june.sunset, june.polar) == (None, None, "polar day")
    assert (december.sunrise, december.sunset, december.polar) == (None, None, "polar night")
    south = sunrise_sunset(date(2024, 12, 21), -78.0, 15.0)
    assert south.polar == "polar day"


def test_date_belongs_to_the_clock_of_the_site() -> None:
    # an island that keeps the date of the other side of the date line
    by_sun = sunrise_sunset(date(2024, 3, 20), 1.9, -157.4)
    by_clock = sunrise_sunset(date(2024, 3, 20), 1.9, -157.4, utc_offset_hours=14.0)
    assert (by_sun.solar_noon - by_clock.solar_noon).total_seconds() == pytest.approx(86400.0, abs=60.0)
    assert (by_clock.solar_noon + timedelta(hours=14)).date() == date(2024, 3, 20)


def test_longitude_east_and_west_are_the_same_place() -> None:
    west, east = (sunrise_sunset(date(2024, 3, 20), 40.0, x) for x in (-105.0, 255.0))
    assert abs((west.solar_noon - east.solar_noon).total_seconds()) < 0.01


def test_refraction_lifts_more_near_the_horizon_and_nothing_below() -> None:
    lift = np.degrees(refraction(np.radians([0.0, 45.0, 80.0, 90.0, 95.0])))
    assert np.all(np.diff(lift[:4]) > 0.0)
    # mean refraction at the horizon is about 29' by this formula for a true height of zero (Meeus 1998, chapter 16)
    assert lift[3] == pytest.approx(0.483, abs=0.01)
    assert lift[4] == 0.0
