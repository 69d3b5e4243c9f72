"""Tops by definition, on invented columns whose answers follow by hand."""

from __future__ import annotations

import math

import numpy as np
import pytest
from column import AFTERNOON, BROKEN, column
from hypothesis import given, settings
from hypothesis import strategies as st

from forcing.air import relative_humidity, temperature
from slab.heat import cloud_levels, heat_to_adiabat, heat_to_break, mean_layer
from slab.inversions import rising_inversion, superadiabatic_layer, surface_inversions, tables_inversion
from slab.tops import (
    EXPLANATIONS,
    all_tops,
    forecasters_top,
    gradient_top,
    humidity_gradient_top,
    parcel,
    richardson_numbers,
    richardson_top,
    tables_depth,
)

MOIST = [0.010, 0.010, 0.010, 0.010, 0.003, 0.001, 0.0005]


def test_half_a_kelvin_over_the_minimum_is_sought_above_the_minimum() -> None:
    top = tables_depth(column(AFTERNOON))
    # 3 K in 100 m: 0.5 K is passed at 1516.7 m, the next point of the 10 m grid is 1520 m
    assert top.height == 1520.0
    assert "minimum 300.00 K" in top.detail


def test_without_warmer_air_above_there_is_no_depth() -> None:
    top = tables_depth(column([(0.0, 300.0), (2500.0, 300.2)]))
    assert math.isnan(top.height)
    assert "2500 m" in top.detail


def test_the_parcel_meets_its_own_virtual_temperature() -> None:
    moist = column(AFTERNOON, humidity=MOIST)
    top = parcel(moist)
    reached = np.interp(top.height, moist.height, moist.theta) * (
        1.0 + 0.608 * np.interp(top.height, moist.height, moist.humidity)
    )
    assert reached == pytest.approx(302.0 * (1.0 + 0.608 * 0.010), abs=1e-9)
    # moist surface air is light: its top is higher than that of dry air of the same temperature
    assert top.height > parcel(column(AFTERNOON)).height


def test_the_parcel_stays_on_the_ground_under_an_inversion() -> None:
    assert parcel(column(BROKEN)).height == 0.0
    assert parcel(column(BROKEN), excess=1.0).height == pytest.approx(100.0)
    assert parcel(column(BROKEN), excess=1.0).definition == "parcel + 1 K"


def test_a_parcel_warmer_than_the_profile_has_no_top() -> None:
    assert math.isnan(parcel(column(BROKEN), excess=30.0).height)


def test_gradients_find_the_middle_of_the_cap() -> None:
    moist = column(AFTERNOON, humidity=MOIST)
    assert gradient_top(moist).height == pytest.approx(1550.0, abs=5.0)
    assert humidity_gradient_top(moist).height == pytest.approx(1550.0, abs=5.0)
    assert humidity_gradient_top(moist).detail == "-7.0 g/kg per 100 m"


def test_without_humidity_or_wind_the_answer_is_missing_and_says_so() -> None:
    dry = column(AFTERNOON)
    assert math.isnan(humidity_gradient_top(dry).height)
    assert humidity_gradient_top(dry).detail == "no humidity in the profile"
    assert math.isnan(richardson_top(dry).height)
    assert richardson_top(dry).detail == "no wind in the profile"


def test_bulk_richardson_number_by_hand() -> None:
    steady = column([(0.0, 300.0), (3000.0, 315.0)], wind=[10.0, 10.0])
    # g/theta * gamma * z**2 / U**2 = Ri, so z = U sqrt(Ri theta / (g gamma))
    for critical in (0.24, 0.25, 0.31, 0.39):
        by_hand = 10.0 * math.sqrt(critical * 300.0 / (9.80665 * 0.005))
        assert richardson_top(steady, critical=critical).height == pytest.approx(by_hand, abs=1.0)


def test_friction_velocity_lowers_the_richardson_number() -> None:
    sheared = column([(0.0, 300.0), (3000.0, 315.0)], wind=[2.0, 12.0])
    z, plain = richardson_numbers(sheared, friction_velocity=0.0, reference=40.0)
    _, rubbed = richardson_numbers(sheared, friction_velocity=0.3, reference=40.0)
    assert z[0] == 50.0
    assert np.all(rubbed < plain)
    # Vogelezang & Holtslag 1996: 100 u*^2 joins the squared wind difference
    n = int(np.flatnonzero(z == 400.0)[0])
    difference = 10.0 * (400.0 - 40.0) / 3000.0
    assert plain[n] / rubbed[n] == pytest.approx((difference**2 + 9.0) / difference**2, rel=1e-9)


def test_calm_air_does_not_divide_by_nothing() -> None:
    top = richardson_top(column(BROKEN, wind=0.0))
    assert 0.0 < top.height <= 10.0


def test_the_forecasters_rule_names_both_heights_and_takes_the_lower() -> None:
    moist = column(AFTERNOON, humidity=MOIST)
    layer = superadiabatic_layer(moist)
    assert layer is not None
    top = forecasters_top(moist, start=layer.depth)
    assert top.height == pytest.approx(1515.0, abs=10.0)
    assert top.detail.startswith("lapse rate to ")
    drying = column(AFTERNOON, humidity=[0.010, 0.010, 0.010, 0.006, 0.003, 0.001, 0.0005])
    assert forecasters_top(drying, start=layer.depth).height < top.height


def test_the_forecasters_rule_finds_no_layer_in_stable_air() -> None:
    assert forecasters_top(column(BROKEN)).height == 0.0


def test_every_definition_is_explained_in_order() -> None:
    tops = all_tops(column(AFTERNOON, humidity=MOIST, wind=5.0))
    assert [top.definition for top in tops] == list(EXPLANATIONS)
    assert all(top.height >= 0.0 for top in tops)


def test_superadiabatic_layer_depth_and_excess() -> None:
    layer = superadiabatic_layer(column(AFTERNOON))
    assert layer is not None
    assert layer.depth == pytest.approx(60.0)
    assert layer.excess == pytest.approx(2.0)
    assert superadiabatic_layer(column(BROKEN)) is None
    assert superadiabatic_layer(column([(0.0, 300.2), (50.0, 300.0), (2000.0, 300.0)])) is None


def _rising(*points: tuple[float, float]) -> tuple[float, float, float]:
    found = rising_inversion(np.array([z for z, _ in points]), np.array([t for _, t in points]))
    return found.base, found.top, found.strength


def test_rising_rule_ignores_small_breaks() -> None:
    assert _rising((0, 280.0), (50, 283.0), (200, 285.0), (300, 284.0)) == (0.0, 200.0, 5.0)
    thin = _rising((0, 280.0), (50, 283.0), (70, 282.0), (79, 282.5), (150, 284.0), (300, 280.0))
    assert thin == (0.0, 150.0, 4.0)
    weak = _rising((0, 280.0), (50, 283.0), (120, 282.8), (200, 284.0), (300, 280.0))
    assert weak == (0.0, 200.0, 4.0)
    real = _rising((0, 280.0), (50, 283.0), (120, 282.5), (200, 284.0), (300, 280.0))
    assert real == (0.0, 50.0, 3.0)


def test_rising_rule_wants_a_base_below_100_m() -> None:
    base, top, strength = _rising((0, 285.0), (120, 284.0), (300, 287.0), (500, 286.0))
    assert math.isnan(base)
    assert (top, strength) == (0.0, 0.0)
    assert _rising((0, 285.0), (60, 284.5), (300, 287.0), (500, 286.0)) == (60.0, 300.0, 2.0)


def test_rising_rule_prefers_the_stronger_of_two_starts() -> None:
    assert _rising((0, 285.0), (5, 285.1), (50, 284.6), (300, 287.0), (500, 286.0)) == (50.0, 300.0, 2.0)


def test_tables_rule_does_not_see_a_shallow_inversion() -> None:
    z = np.array([0.0, 40.0, 500.0])
    shallow = tables_inversion(z, np.array([280.0, 280.3, 276.0]))
    assert (shallow.top, shallow.strength, shallow.present) == (0.0, 0.0, False)
    deep = tables_inversion(z, np.array([280.0, 284.0, 276.0]))
    assert (deep.top, deep.strength) == (40.0, 4.0)


def test_both_rules_agree_on_a_plain_inversion() -> None:
    rising, tables = surface_inversions(column([(0.0, 285.0), (240.0, 293.0), (3000.0, 300.0)]))
    assert rising.top == pytest.approx(tables.top)
    assert rising.strength == pytest.approx(tables.strength, abs=1e-9)


def test_heat_is_mass_weighted() -> None:
    dense = column(BROKEN)
    rising, _ = surface_inversions(dense)
    assert rising.top == pytest.approx(200.0)
    heat = heat_to_break(dense, rising)
    # 200 K m below the adiabat, at the density of the lowest 200 m, cp, and an Exner function of 1 at 1000 hPa
    assert heat == pytest.approx(1005.0 * 1.20 * 200.0, rel=0.01)
    thin = column(BROKEN, surface_pressure=7.5e4)
    ratio = heat_to_adiabat(thin, 200.0) / heat
    # pressure 0.75; density p / (R theta Exner) and the factor Exner of the flux cancel
    assert ratio == pytest.approx(0.75, rel=0.01)


def test_heat_above_the_profile_is_unknown() -> None:
    assert math.isnan(heat_to_adiabat(column(BROKEN), 9000.0))


def test_mean_layer_of_constant_air_is_that_air() -> None:
    theta, humidity = mean_layer(column([(0.0, 300.0), (3000.0, 300.0)], humidity=0.008))
    assert theta == pytest.approx(300.0)
    assert humidity == pytest.approx(0.008)


def test_convective_temperature_lies_on_the_adiabat_of_the_level() -> None:
    moist = column([(0.0, 295.0), (300.0, 299.0), (5000.0, 320.0)], humidity=[0.010, 0.009, 0.001])
    cloud = cloud_levels(moist)
    theta = float(np.interp(cloud.convective_level, moist.height, moist.theta))
    assert cloud.convective_temperature == pytest.approx(theta, rel=1e-9)  # surface pressure is 1000 hPa
    assert cloud.convective_heat == pytest.approx(
        heat_to_adiabat(moist, cloud.convective_level, target=theta), rel=1e-12
    )
    # air of that potential temperature and the humidity of the lowest 100 hPa is saturated there
    pressure = math.exp(float(np.interp(cloud.convective_level, moist.height, np.log(moist.pressure))))
    assert relative_humidity(temperature(theta, pressure), cloud.mean_humidity, pressure) == pytest.approx(
        1.0, abs=2e-3
    )


def test_dry_air_has_no_cloud() -> None:
    cloud = cloud_levels(column(BROKEN))
    assert math.isnan(cloud.convective_temperature)
    assert math.isnan(cloud.mean_parcel)


@settings(max_examples=60, deadline=None)
@given(
    depth=st.floats(300.0, 2500.0),
    cap=st.floats(2.0, 6.0),
    lapse=st.floats(2.0, 8.0),
    theta=st.floats(275.0, 310.0),
)
def test_definitions_agree_within_the_cap_of_a_mixed_layer(
    depth: float, cap: float, lapse: float, theta: float
) -> None:
    points = [(0.0, theta), (depth, theta), (depth + 60.0, theta + cap), (6000.0, theta + cap + lapse * 6.0)]
    made = column(points, humidity=[0.006, 0.006, 0.001, 0.0005], wind=4.0)
    for top in (tables_depth(made), parcel(made, excess=0.01), humidity_gradient_top(made), forecasters_top(made)):
        assert depth - 35.0 <= top.height <= depth + 100.0, top
