"""Sun and radiation against published values; the source stands beside each."""

from __future__ import annotations

import csv
import math
from datetime import UTC, date, datetime, time, timedelta, timezone
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from forcing.air import STEFAN_BOLTZMANN
from forcing.emissivity import TABLE, prata_emissivity
from forcing.longwave import flux_profile, fluxes, heating
from forcing.longwave_column import upper_air
from forcing.sky import clear_sky_shortwave, cloud_factor, relative_air_mass
from forcing.sun import julian_day, posix_seconds, refraction, solar_position, sunrise_sunset

HERE = Path(__file__).parent


def rows(name: str) -> list[dict[str, str]]:
    with (HERE / name).open(encoding="utf-8") as stream:
        return list(csv.DictReader(line for line in stream if not line.startswith("#")))


# Reda & Andreas (2004, NREL/TP-560-34302), worked example: 17 October 2003, 12:30:30 at UTC-7
EXAMPLE = [datetime(2003, 10, 17, 12, 30, 30, tzinfo=timezone(timedelta(hours=-7)))]
PLACE = (39.742476, -105.1786)


@pytest.mark.parametrize(
    ("name", "published", "tolerance"),
    [
        ("declination", -9.31434, 0.001),
        ("right_ascension", 202.227408, 0.001),
        ("hour_angle", 11.10590, 0.001),
        ("azimuth", 194.340241, 0.01),
        ("obliquity", 23.440465, 0.0001),
    ],
)
def test_worked_example_of_the_position_in_degrees(name: str, published: float, tolerance: float) -> None:
    angle = getattr(solar_position(EXAMPLE, *PLACE), name)[0]
    assert math.degrees(angle) == pytest.approx(published, abs=tolerance)


def test_worked_example_of_elevation_refraction_time_and_distance() -> None:
    sun = solar_position(EXAMPLE, *PLACE)
    lift = refraction(sun.zenith, pressure=82000.0, temperature=284.15)
    # parallax alone is 0.0019 degrees here
    assert 90.0 - math.degrees(sun.zenith[0]) == pytest.approx(39.872046, abs=0.0008)
    assert math.degrees(lift[0]) == pytest.approx(0.016332, abs=1e-5)
    assert math.degrees(sun.zenith[0] - lift[0]) == pytest.approx(50.11162, abs=0.002)
    assert sun.distance[0] == pytest.approx(0.9965422974, abs=1e-5)
    assert sun.equation_of_time[0] == pytest.approx(14.64, abs=0.01)
    assert julian_day(posix_seconds(EXAMPLE))[0] == pytest.approx(2452930.312847, abs=1e-6)


def clock(moment: datetime | None, hours: float) -> float:
    """Seconds after midnight on a clock that is so many hours ahead of UTC."""
    assert moment is not None
    local = moment + timedelta(hours=hours)
    return local.hour * 3600 + local.minute * 60 + local.second + local.microsecond / 1e6


def of_day(text: str) -> float:
    moment = time.fromisoformat(text)
    return moment.hour * 3600.0 + moment.minute * 60.0 + moment.second


@pytest.mark.parametrize(
    ("latitude", "longitude", "day", "hours", "sunrise", "sunset", "seconds"),
    [
        # NREL web calculator for Golden
        (*PLACE, date(2015, 1, 2), -7, "07:21:55", "16:47:43", 20.0),
        # NREL web calculator, southern hemisphere
        (-35.0, 0.0, date(1996, 7, 5), 0, "07:08:15", "17:01:04", 20.0),
        (-35.0, 0.0, date(2004, 12, 4), 0, "04:38:57", "19:02:03", 20.0),
        # US Naval Observatory, whole minutes
        (*PLACE, date(2015, 1, 2), -7, "07:22:00", "16:48:00", 50.0),
        (39.0, -105.0, date(2015, 4, 2), -7, "05:43:00", "18:24:00", 50.0),
        (39.917, 116.383, date(2015, 8, 2), 8, "05:13:00", "19:28:00", 60.0),
    ],
)
def test_sunrise_and_sunset_of_almanacs(
    latitude: float, longitude: float, day: date, hours: int, sunrise: str, sunset: str, seconds: float
) -> None:
    times = sunrise_sunset(day, latitude, longitude)
    assert clock(times.sunrise, hours) == pytest.approx(of_day(sunrise), abs=seconds)
    assert clock(times.sunset, hours) == pytest.approx(of_day(sunset), abs=seconds)


def test_highest_sun_of_the_web_calculator() -> None:
    # NREL web calculator: Golden, 2 January 2015, 12:04:45 at UTC-7
    assert clock(sunrise_sunset(date(2015, 1, 2), *PLACE).solar_noon, -7) == pytest.approx(of_day("12:04:45"), abs=5.0)


def test_sunset_after_midnight_utc_belongs_to_the_local_date_before() -> None:
    # NREL web calculator, Golden, 2 August 2015 UTC: sunrise of the 2nd, but the sunset at 02:13:58 UTC is of the 1st
    assert clock(sunrise_sunset(date(2015, 8, 2), *PLACE).sunrise, -7) == pytest.approx(of_day("05:00:27"), abs=20.0)
    assert clock(sunrise_sunset(date(2015, 8, 1), *PLACE).sunset, -7) == pytest.approx(of_day("19:13:58"), abs=20.0)


@pytest.mark.parametrize("row", rows("sun_times.csv"), ids=lambda row: f"{row['site']} {row['date']}")
def test_sun_times_noon_height_and_equation_of_time(row: dict[str, str]) -> None:
    day, latitude, longitude = date.fromisoformat(row["date"]), float(row["lat"]), float(row["lon"])
    times = sunrise_sunset(day, latitude, longitude)
    assert clock(times.sunrise, 0) == pytest.approx(of_day(row["sunrise_utc"]), abs=10.0)
    assert clock(times.solar_noon, 0) == pytest.approx(of_day(row["transit_utc"]), abs=5.0)
    fallen = sunrise_sunset(day - timedelta(days=1), latitude, longitude) if row["sunset_utc"] < "06" else times
    assert clock(fallen.sunset, 0) == pytest.approx(of_day(row["sunset_utc"]), abs=10.0)
    noon = solar_position([times.solar_noon], latitude, longitude)
    assert 90.0 - math.degrees(noon.zenith[0]) == pytest.approx(float(row["noon_elev_true_deg"]), abs=0.005)
    assert noon.equation_of_time[0] == pytest.approx(float(row["eqtime_min"]), abs=0.02)


def test_positions_of_an_independent_library() -> None:
    solar, pandas = pytest.importorskip("pvlib.solarposition"), pytest.importorskip("pandas")
    random = np.random.default_rng(20240620)
    for _ in range(20):
        seconds = random.uniform(315532800.0, 2524608000.0, 10)
        latitude, longitude = random.uniform(-89.0, 89.0), random.uniform(-180.0, 180.0)
        moments = pandas.to_datetime(seconds, unit="s", utc=True)
        theirs = solar.spa_python(moments, latitude, longitude, delta_t=None)
        ours = solar_position(seconds, latitude, longitude)
        assert np.degrees(ours.zenith) == pytest.approx(theirs["zenith"].to_numpy(), abs=0.01)
        turn = (np.degrees(ours.azimuth) - theirs["azimuth"].to_numpy() + 180.0) % 360.0 - 180.0
        assert np.all(np.abs(turn) * np.sin(ours.zenith) < 0.01)


@pytest.mark.parametrize(
    # FAO Irrigation and Drainage Paper 56 (Allen et al. 1998): latitude, date, daily extraterrestrial MJ m-2, day length h
    ("latitude", "day", "energy", "hours"),
    [
        (-20.0, date(2015, 9, 3), 32.2, 11.7),  # examples 8 and 9
        (50.8, date(2015, 7, 6), 41.09, 16.1),  # example 18, latitude recalled
    ],
)
def test_daily_energy_above_the_air_and_day_length(latitude: float, day: date, energy: float, hours: float) -> None:
    start = datetime(day.year, day.month, day.day, tzinfo=UTC).timestamp()
    sun = solar_position(start + np.arange(0.0, 86400.0, 60.0), latitude, 0.0)
    # the solar constant of that paper is 0.0820 MJ m-2 min-1; its declination is a one-term series
    total = float(np.sum(0.0820 * sun.irradiance_factor * np.maximum(np.cos(sun.zenith), 0.0)))
    assert total == pytest.approx(energy, rel=0.015)
    # its day ends with the sun's centre on an airless horizon
    assert float(np.sum(np.cos(sun.zenith) > 0.0)) / 60.0 == pytest.approx(hours, abs=0.07)


def test_distance_and_declination_of_a_simple_series() -> None:
    # FAO-56 example 8, equations 23 and 24: day 246, 0.985 and 0.120 rad, from series good to 0.4 degrees
    sun = solar_position([datetime(2015, 9, 3, 12, tzinfo=UTC)], 0.0, 0.0)
    assert sun.irradiance_factor[0] == pytest.approx(0.985, abs=0.003)
    assert sun.declination[0] == pytest.approx(0.120, abs=0.012)


@pytest.mark.parametrize(
    "row", rows("bird_day_1.csv"), ids=lambda row: f"{row['pressure_hPa']} hPa, {row['Zenith Ang'][:4]}"
)
def test_clear_sky_of_the_published_spreadsheet(row: dict[str, str]) -> None:
    zenith = math.radians(float(row["Zenith Ang"]))
    flux = clear_sky_shortwave(
        [zenith],
        pressure=100.0 * float(row["pressure_hPa"]),
        precipitable_water_cm=1.5,
        aerosol_500nm=0.1,
        aerosol_380nm=0.15,
        ozone_cm=0.3,
        albedo=0.2,
        solar_constant=float(row["ETR"]),
    )
    assert flux.total[0] == pytest.approx(float(row["Global Hz"]), rel=0.01)
    assert flux.direct[0] == pytest.approx(float(row["Direct Hz"]), rel=0.01)
    assert flux.diffuse[0] == pytest.approx(float(row["Dif Hz"]), rel=0.01)
    assert relative_air_mass([zenith])[0] == pytest.approx(float(row["Air Mass"]), rel=0.006)


def test_clear_sky_of_an_independent_library() -> None:
    clearsky = pytest.importorskip("pvlib.clearsky")
    zenith = np.linspace(0.0, 85.0, 18)
    for pressure, water, near, far in ((101325.0, 3.0, 0.05, 0.08), (80000.0, 0.5, 0.3, 0.45)):
        mass = relative_air_mass(np.radians(zenith))
        theirs = clearsky.bird(
            zenith, mass, far, near, water, ozone=0.35, pressure=pressure, dni_extra=1361.0, albedo=0.1
        )
        ours = clear_sky_shortwave(
            np.radians(zenith), pressure=pressure, precipitable_water_cm=water, aerosol_500nm=near, aerosol_380nm=far,
            ozone_cm=0.35, albedo=0.1,
        )  # fmt: skip
        assert ours.total == pytest.approx(theirs["ghi"], rel=0.01)
        assert ours.diffuse == pytest.approx(theirs["dhi"], rel=0.01)


@pytest.mark.parametrize(("elevation", "published"), [(10.0, 135.74), (30.0, 487.89), (50.0, 778.77), (90.0, 1035.09)])
def test_clear_sky_near_an_older_formula(elevation: float, published: float) -> None:
    # Haurwitz (1945) as in Reno et al. (2012, SAND2012-2389); clear-sky formulas agree to about a tenth
    zenith = math.radians(90.0 - elevation)
    flux = clear_sky_shortwave([zenith], pressure=101325.0, precipitable_water_cm=1.5, aerosol_500nm=0.1)
    assert flux.total[0] == pytest.approx(published, rel=0.1)


def test_cloud_factor_of_the_paper() -> None:
    # Kasten & Czeplak (1980): 1 - 0.75 N**3.4, values computed from it
    assert cloud_factor([0.0, 0.25, 0.5, 0.75, 1.0]) == pytest.approx([1.0, 0.9933, 0.9290, 0.7180, 0.2500], abs=0.0001)


def test_clear_sky_emissivity_of_the_paper() -> None:
    # Prata (1996): 10 hPa and 288.15 K give 0.7762, 303.4 W m-2 (computed from its equation)
    assert prata_emissivity(1000.0, 288.15) == pytest.approx(0.7762, abs=0.0001)
    assert prata_emissivity(1000.0, 288.15) * STEFAN_BOLTZMANN * 288.15**4 == pytest.approx(303.4, abs=0.1)


@pytest.mark.parametrize(
    # Boundary-layer meteorology course MAQ-32306, exercises 7.5a and 7.3c: one layer of emissivity 0.78 between black
    # ones; temperatures below, in and above it [K], depth [m], heat gained [W m-3]
    ("below", "inside", "above", "depth", "gained"),
    [
        (290.0, 296.0, 298.0, 25.0, -0.697),
        (292.0, 292.0 + 0.195 / 0.4 * math.log(50.0), 292.0 + 0.195 / 0.4 * math.log(100.0), 4.95, -1.143e-3 * 1231.0),
    ],
)
def test_one_grey_layer_between_black_ones(
    below: float, inside: float, above: float, depth: float, gained: float
) -> None:
    emission = [STEFAN_BOLTZMANN * inside**4] * 2
    down, up = [0.0, 0.0], [0.0, 0.0]
    passed = 1.0 - 0.78
    fluxes([passed, passed, 0.0, 1.0], emission, STEFAN_BOLTZMANN * above**4, below, 1.0, 0.0, 1, 0.0, down, up)
    absorbed = (down[1] - up[1]) - (down[0] - up[0])
    assert absorbed / depth == pytest.approx(gained, rel=0.01)
    if depth == 25.0:
        # exercise 7.5b: density 1.292, heat capacity 1004: -1.94 K/h
        assert absorbed / depth / (1.292 * 1004.0) * 3600.0 == pytest.approx(-1.94, rel=0.005)


# Invented columns, temperature falling 6.5 K/km to 11 km less an inversion that fades over 100 m, humidity over 2200 m:
# temperature without the inversion [K], its strength [K], humidity at the ground [kg/kg], pressure there [Pa]
COLUMNS = {
    "temperate": (288.15, 0.0, 0.0075, 101325.0),
    "inverted evening": (294.0, 6.0, 0.0080, 97000.0),
    "humid": (300.0, 0.0, 0.0150, 100000.0),
    "cold snow": (268.0, 10.0, 0.0012, 95000.0),
    "desert dawn": (298.0, 8.0, 0.0040, 85000.0),
}
CELLS = 48


def column(name: str) -> dict[str, Any]:
    """Fine cells to 2 km (first 2 m, stretched) below twelve interfaces of fixed air."""
    warm, inversion, wet, ground = COLUMNS[name]
    height = np.r_[np.arange(0.0, 2000.0), np.arange(2000.0, 17000.0, 10.0)]
    temperature = warm - 0.0065 * np.minimum(height, 11000.0) - inversion * np.exp(-height / 100.0)
    humidity = np.maximum(wet * np.exp(-height / 2200.0), 3e-6)
    slope = 9.80665 / (287.05 * temperature * (1.0 + 0.608 * humidity))
    log_p = np.log(ground) - np.r_[0.0, np.cumsum(0.5 * (slope[1:] + slope[:-1]) * np.diff(height))]
    ratio = 1.101191360507  # 2 m times the sum of its powers is 2 km in 48 cells
    edges = np.r_[0.0, np.cumsum(2.0 * ratio ** np.arange(CELLS))]
    middle = 0.5 * (edges[1:] + edges[:-1])
    pressure = np.exp(np.interp(edges, height, log_p))
    return {
        "pressure": [float(x) for x in pressure],
        "temperature": [float(x) for x in np.interp(middle, height, temperature)],
        "humidity": [float(x) for x in np.interp(middle, height, humidity)],
        "upper": upper_air(np.exp(log_p), temperature, humidity, column_top=float(pressure[-1])),
        "ground": float(temperature[0]),
        "middle": middle,
    }


@pytest.mark.parametrize(
    "row", rows("longwave_columns.csv"), ids=lambda row: f"{row['case']} {row['skin_minus_air_K']}"
)
def test_long_wave_of_a_spectral_code(row: dict[str, str]) -> None:
    air = column(row["case"])
    count = CELLS + 1 + len(air["upper"].emission)
    down, up, rate = [0.0] * (CELLS + 1), [0.0] * (CELLS + 1), [0.0] * CELLS
    work = [0.0] * count, [0.0] * count, [0.0] * count, [0.0] * (count * (CELLS + 1))
    skin = air["ground"] + float(row["skin_minus_air_K"])
    flux_profile(
        air["pressure"],
        air["temperature"],
        air["humidity"],
        *air["upper"],
        skin,
        1.0,
        0.0,
        count,
        0.0,
        TABLE,
        *work,
        down,
        up,
    )
    heating(air["pressure"], down, up, rate)
    assert down[0] == pytest.approx(float(row["downward_ground_W_m2"]), abs=3.5)
    assert down[-1] == pytest.approx(float(row["downward_2km_W_m2"]), abs=4.0)
    hourly = 3600.0 * np.array(rate)
    for index, name in zip((0, 3, 7, 14, 24, 34), ("1m", "7m", "19m", "57m", "186m", "620m"), strict=True):
        # a tenth and 0.02 K/h; the first cell, where terms of 5 K/h cancel, twice that
        share = 2.0 if index == 0 else 1.0
        published = float(row[f"heating_K_h_{name}"])
        assert hourly[index] == pytest.approx(published, abs=share * (0.1 * abs(published) + 0.02))
    mean = float(np.sum(hourly * -np.diff(air["pressure"])) / (air["pressure"][0] - air["pressure"][-1]))
    assert mean == pytest.approx(float(row["heating_K_h_mean_0_2km"]), rel=0.08)
