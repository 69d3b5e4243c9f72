"""Published or hand-worked values for tops, areas and condensation levels; the source stands beside each."""

from __future__ import annotations

import math

import numpy as np
import pytest
from column import AFTERNOON, BROKEN, column

from forcing.air import KAPPA, P_REFERENCE, each, humidity_from_vapour_pressure, saturation_vapour_pressure, temperature
from slab.heat import area_below, cloud_levels, heat_to_adiabat
from slab.tops import FITTED_RICHARDSON, adiabat, forecasters_top, humidity_gradient_top


def test_heat_to_mix_a_broken_profile_to_1000_m() -> None:
    # worked by hand, area method: 680 K m below 200 m plus 960 K m above, theta 292.4 K at 1000 m
    height = np.array([z for z, _ in BROKEN])
    theta = np.array([t for _, t in BROKEN])
    assert area_below(height, theta, 1000.0) == pytest.approx(1640.0, rel=1e-3)
    assert area_below(height, theta, 200.0, target=292.4) == pytest.approx(680.0, rel=1e-9)


def test_mass_weighting_lowers_the_need_by_the_air_thinning_upward() -> None:
    # the same area at the surface density of dry air, 1000 hPa and 288 K: 1.2096 kg m-3
    constant = 1005.0 * P_REFERENCE / (287.05 * 288.0) * 1640.0
    share = heat_to_adiabat(column(BROKEN), 1000.0) / constant
    assert 0.94 < share < 0.98


def test_afternoon_rule_of_holzworth() -> None:
    # EPA-454/R-99-005 section 6.5.1: adiabat from the maximum to the morning profile; theta 292.4 K meets it at 1000 m
    morning = column(BROKEN)
    maximum = 292.4 * (morning.surface_pressure / P_REFERENCE) ** KAPPA
    assert adiabat(morning, surface_temperature=maximum).height == pytest.approx(1000.0, abs=1.0)


def test_morning_rule_of_holzworth_adds_five_kelvin_to_the_minimum() -> None:
    # EPA-454/R-99-005 section 6.5.1; 288 + 5 = 293 K is met 1 K above 290 K + 3 K/km * (z - 200 m), that is at 1200 m
    top = adiabat(column(BROKEN), surface_temperature=288.0, excess=5.0)
    assert top.definition == "morning rule"
    assert top.height == pytest.approx(1200.0, abs=1.0)


def test_fitted_critical_numbers() -> None:
    # Zhang et al. 2014, Geosci. Model Dev. 7, 2599
    assert FITTED_RICHARDSON == {"strongly stable": 0.24, "weakly stable": 0.31, "unstable": 0.39}


@pytest.mark.parametrize(
    ("kelvin", "pascal", "dewpoint", "level_pressure", "tolerance"),
    [
        # Romps 2017 exact form as in the test data of MetPy 1.7.1, tests/calc/test_thermo.py
        (303.15, 1.0e5, 293.15, 86421.3, 100.0),
        (273.097, 101716.0, 264.535, 88941.3, 100.0),
    ],
)
def test_condensation_level_of_the_surface_parcel(
    kelvin: float, pascal: float, dewpoint: float, level_pressure: float, tolerance: float
) -> None:
    theta = kelvin / (pascal / P_REFERENCE) ** KAPPA
    moist = humidity_from_vapour_pressure(saturation_vapour_pressure(dewpoint), pascal)
    mixed = column([(0.0, theta), (4000.0, theta)], humidity=moist, surface_pressure=pascal)
    level = cloud_levels(mixed).surface_parcel
    found = math.exp(float(np.interp(level, mixed.height, np.log(mixed.pressure))))
    assert found == pytest.approx(level_pressure, abs=tolerance)


def test_lapse_rate_of_a_mixed_layer_is_dry_adiabatic() -> None:
    # about 9.8 K per km (common practice)
    mixed = column([(0.0, 300.0), (2000.0, 300.0)])
    warm = each(temperature, mixed.theta, mixed.pressure)
    assert (warm[0] - warm[-1]) / 2.0 == pytest.approx(9.8, abs=0.1)


def test_lapse_rate_and_mixing_ratio_leave_the_layer_together() -> None:
    # on a hot, sunny afternoon the mixing ratio, e.g. 14 g/kg, is the same up to the top of the mixed layer, and the
    # top by lapse rate and the top by humidity agree (common practice)
    humid = 0.014 / 1.014
    hot = column(AFTERNOON, humidity=[humid, humid, humid, humid, 0.004, 0.002, 0.001])
    by_lapse = forecasters_top(hot, start=60.0)
    by_moisture = humidity_gradient_top(hot)
    assert abs(by_lapse.height - by_moisture.height) <= 100.0
    assert "all the way" not in by_lapse.detail
