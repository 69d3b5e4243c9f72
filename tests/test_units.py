"""Units at the edge: published and hand values, and that text and SI undo each other."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from forcing.errors import DaylayerError
from forcing.units import (
    FIRE_WIND_HEIGHT_M,
    METRIC,
    SQUARE_METRES_PER_S_PER_KNOT_FOOT,
    SUFFIXES,
    US,
    log_wind_factor,
    round_figures,
    round_to,
)


def test_one_knot_foot() -> None:
    # 0.514444 m/s x 0.3048 m = 0.156803 m2/s (computed from NIST SP 811 factors)
    assert pytest.approx(0.156803, abs=1e-5) == SQUARE_METRES_PER_S_PER_KNOT_FOOT


def test_ventilation_example() -> None:
    # 1500 m x 6 m/s = 9000 m2/s = 57,397 kt ft (product of depth and transport wind: Oklahoma State Univ. E-1010)
    assert SUFFIXES["kt_ft"].from_si(1500.0 * 6.0) == pytest.approx(57397.0, rel=1e-3)
    assert METRIC.ventilation_rate(9000.0) == "9000 m2/s"
    assert US.ventilation_rate(9000.0) == "57000 kt ft"


@pytest.mark.parametrize(
    ("knot_feet", "square_metres_per_s"), [(33500, 5253), (45000, 7056), (60000, 9408), (112000, 17562)]
)
def test_burning_category_thresholds(knot_feet: float, square_metres_per_s: float) -> None:
    # thresholds of a state forest service's ventilation index table, unit recalled; the conversion is computed
    assert SUFFIXES["kt_ft"].to_si(knot_feet) == pytest.approx(square_metres_per_s, rel=1e-3)


@pytest.mark.parametrize(
    ("value", "suffix", "si_unit", "expected"),
    [
        (12.0, "kt", "m s-1", 6.173333333),  # 1 kt = 1852 m / 3600 s
        (10.0, "mph", "m s-1", 4.4704),  # exact, NIST SP 811
        (36.0, "km_h", "m s-1", 10.0),
        (5.0, "m_s", "m s-1", 5.0),
        (3000.0, "ft", "m", 914.4),
        (32.0, "F", "K", 273.15),
        (212.0, "F", "K", 373.15),
        (-40.0, "F", "K", 233.15),
        (-40.0, "C", "K", 233.15),
        (850.0, "hPa", "Pa", 85000.0),
        (65.0, "pct", "1", 0.65),
        (8.0, "g_kg", "kg kg-1", 0.008),
        (1000.0, "kt_ft", "m2 s-1", 156.80267),
    ],
)
def test_units_to_si(value: float, suffix: str, si_unit: str, expected: float) -> None:
    unit = SUFFIXES[suffix]
    assert unit.si_unit == si_unit
    assert unit.to_si(value) == pytest.approx(expected, rel=1e-6)


@given(st.sampled_from(sorted(SUFFIXES)), st.floats(-1e4, 1e4))
def test_every_unit_undoes_itself(suffix: str, value: float) -> None:
    unit = SUFFIXES[suffix]
    assert unit.from_si(unit.to_si(value)) == pytest.approx(value, rel=1e-9, abs=1e-7)


def test_fire_wind_factor() -> None:
    # ln(6.096/0.03) / ln(10/0.03) = 5.3142 / 5.8091 by hand
    assert pytest.approx(6.096) == FIRE_WIND_HEIGHT_M
    assert log_wind_factor(FIRE_WIND_HEIGHT_M, 10.0, 0.03) == pytest.approx(5.3142 / 5.8091, rel=1e-4)
    assert log_wind_factor(10.0, 10.0, 0.1) == 1.0
    with pytest.raises(DaylayerError, match="roughness"):
        log_wind_factor(6.0, 10.0, 8.0)


@pytest.mark.parametrize(
    ("metres", "metric", "us"),
    [
        (1234.0, "1250 m", "4000 ft"),  # 4048.6 ft
        (1224.0, "1200 m", "4000 ft"),
        (0.0, "0 m", "0 ft"),
        (None, "-", "-"),
        (math.nan, "-", "-"),
    ],
)
def test_depth(metres: float | None, metric: str, us: str) -> None:
    assert METRIC.depth(metres) == metric
    assert US.depth(metres) == us


def test_depth_above_ground_and_sea_level() -> None:
    # 1828.8 m = 6000 ft above ground; 3048 m = 10000 ft above sea level over ground at 1219.2 m = 4000 ft
    assert US.depth_and_altitude(1828.8, 1219.2) == "6000 ft above ground, 10000 ft above sea level"
    assert US.depth_and_altitude(None, 1219.2) == "-"


def test_wind_and_temperature_text() -> None:
    assert METRIC.wind(5.14444) == "5.1 m/s"
    assert US.wind(5.14444) == "10 kt"
    assert US.surface_wind(4.4704) == "10 mph"
    assert METRIC.degrees(303.15) == "30.0 °C"
    assert US.degrees(303.15) == "86 °F"
    assert US.difference(5.0) == "9.0 °F"
    assert METRIC.difference(5.0) == "5.0 K"
    assert METRIC.degrees(273.13) == "0.0 °C"
    assert METRIC.height(123.4, unit=False) == "123"
    assert US.height(123.4) == "400 ft"


def test_rounding() -> None:
    assert round_to(75.0, 50.0) == 100.0
    assert round_to(74.9, 50.0) == 50.0
    assert round_figures(57397.0) == 57000.0
    assert round_figures(0.0) == 0.0
    assert round_figures(-123.4, 2) == -120.0
