"""Clear-sky short-wave, cloud and the vapour column: limits, monotony and refusals."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from forcing.errors import DaylayerError
from forcing.sky import (
    SOLAR_CONSTANT,
    ShortWave,
    aerosol_at_380nm,
    clear_sky_shortwave,
    cloud_factor,
    precipitable_water,
)


def sky(
    zenith: float, water: float = 1.5, aerosol: float = 0.1, pressure: float = 1e5, albedo: float = 0.2
) -> ShortWave:
    return clear_sky_shortwave(
        [np.radians(zenith)], pressure=pressure, precipitable_water_cm=water, aerosol_500nm=aerosol, albedo=albedo
    )


@given(st.floats(0.0, 180.0), st.floats(0.05, 6.0), st.floats(0.0, 1.0), st.floats(60000.0, 105000.0))
def test_light_is_neither_made_nor_negative(zenith: float, water: float, aerosol: float, pressure: float) -> None:
    flux = sky(zenith, water, aerosol, pressure)
    assert flux.total[0] == pytest.approx(flux.direct[0] + flux.diffuse[0], rel=1e-12)
    assert flux.direct[0] >= 0.0
    assert flux.diffuse[0] >= 0.0
    assert flux.total[0] <= SOLAR_CONSTANT * max(np.cos(np.radians(zenith)), 0.0) + 1e-9


@given(st.floats(0.0, 80.0), st.floats(0.2, 4.0), st.floats(0.02, 0.4))
def test_more_vapour_and_more_haze_take_light_away(zenith: float, water: float, aerosol: float) -> None:
    assert sky(zenith, water + 0.5, aerosol).total[0] < sky(zenith, water, aerosol).total[0]
    assert sky(zenith, water, aerosol + 0.05).direct[0] < sky(zenith, water, aerosol).direct[0]


def test_dark_below_the_horizon_and_brighter_over_bright_ground() -> None:
    assert sky(90.5) == ShortWave(*(np.zeros(1),) * 3)
    assert sky(40.0, albedo=0.8).diffuse[0] > sky(40.0, albedo=0.1).diffuse[0]


def test_distance_of_the_sun_scales_everything() -> None:
    near = clear_sky_shortwave(
        [0.5], pressure=1e5, precipitable_water_cm=1.0, aerosol_500nm=0.1, irradiance_factor=1.034
    )
    far = clear_sky_shortwave([0.5], pressure=1e5, precipitable_water_cm=1.0, aerosol_500nm=0.1)
    assert near.total[0] == pytest.approx(1.034 * far.total[0], rel=1e-12)


def test_one_aerosol_depth_gives_the_other_by_a_power_law() -> None:
    assert aerosol_at_380nm(0.1, exponent=1.0) == pytest.approx(0.1 * 500.0 / 380.0)
    assert sky(30.0, aerosol=0.0).total[0] > sky(30.0, aerosol=0.01).total[0]


@pytest.mark.parametrize(
    "change", [{"pressure": 900.0}, {"precipitable_water_cm": -1.0}, {"aerosol_500nm": -0.1}, {"albedo": 1.2}]
)
def test_impossible_air_is_refused(change: dict[str, float]) -> None:
    values = {"pressure": 1e5, "precipitable_water_cm": 1.0, "aerosol_500nm": 0.1, "albedo": 0.2} | change
    with pytest.raises(DaylayerError):
        clear_sky_shortwave([0.5], **values)


def test_cloud_fraction_outside_its_range_is_refused() -> None:
    with pytest.raises(DaylayerError, match=r"1\.2"):
        cloud_factor([0.5, 1.2])


def test_vapour_column_of_uniform_air_is_humidity_times_mass() -> None:
    # q (p0 - p1) / g inside, and q p1 / (4 g) above for a fall with the third power of pressure
    column = precipitable_water([1e5, 8e4, 5e4], [0.01, 0.01, 0.01])
    assert column == pytest.approx(0.01 * (5e4 + 5e4 / 4.0) / 9.80665, rel=1e-12)
    with pytest.raises(DaylayerError, match="fall upward"):
        precipitable_water([8e4, 1e5], [0.01, 0.01])
    with pytest.raises(DaylayerError, match="every level"):
        precipitable_water([1e5, np.nan], [0.01, 0.01])


@given(st.lists(st.floats(0.0, 0.02), min_size=3, max_size=12))
def test_splitting_a_level_keeps_the_vapour_column(humidity: list[float]) -> None:
    pressure = np.linspace(1e5, 3e4, len(humidity))
    middle = 0.5 * (pressure[0] + pressure[1])
    split = precipitable_water(
        np.insert(pressure, 1, middle), np.insert(humidity, 1, 0.5 * (humidity[0] + humidity[1]))
    )
    assert split == pytest.approx(precipitable_water(pressure, humidity), rel=1e-9, abs=1e-12)
