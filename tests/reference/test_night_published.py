"""The night against published values and closed solutions; the source stands beside each number."""

from __future__ import annotations

import math

import numpy as np
import pytest
from night_cases import GRASS, HOUR, gabls1, one

from forcing.air import GRAVITY, KARMAN
from slab.night import NightForcing, NightOptions, NightStart, run
from slab.night_answers import CROSSING_HEIGHT, largest_flux, minimum_wind
from slab.night_closure import SHORT, stable_function


# depth, jet and place: Beare et al. 2006 and Cuxart et al. 2006 as quoted in a public case script (150 to 200 m; jet
# faster than the geostrophic 8 m/s near the top). Friction velocity and heat flux of the ensemble are only recalled
# (0.26 to 0.30 m/s, -0.010 to -0.013 K m/s), so they are not tested.
def test_gabls1_depth_and_jet() -> None:
    depths = []
    for levels in (32, 48, 64):
        night = gabls1(closure="short", levels=levels)
        depth = float(night.depth[-1])
        speed = np.hypot(night.u[-1], night.v[-1])
        jet = float(night.height[int(speed.argmax())])
        assert 150.0 <= depth <= 200.0
        assert speed.max() > 8.5
        assert 0.6 * depth <= jet <= 1.2 * depth
        depths.append(depth)
    assert max(depths) - min(depths) < 10.0


# Cuxart et al. 2006, abstract: schemes with more mixing make a deeper layer than the research models and LES
def test_a_long_tail_mixes_deeper() -> None:
    assert gabls1(closure="blend", levels=32).depth[-1] > 1.2 * gabls1(closure="short", levels=32).depth[-1]


# Brunt 1932; conduction into a half-space under a constant flux (Carslaw & Jaeger 1959):
# dT = 2 R sqrt(t) / (sqrt(pi) mu), R [W m-2] the net loss, mu [J m-2 K-1 s-1/2] the thermal admittance
@pytest.mark.parametrize(
    ("loss", "admittance", "hours", "fall"),
    [
        (80.0, 1000.0, 9.0, 16.25),
        (60.0, 600.0, 3.0, 11.7265),
        (60.0, 1000.0, 12.0, 14.0718),
        (60.0, 2000.0, 9.0, 6.0932),
    ],
)
def test_ground_cools_with_the_square_root_of_time(loss: float, admittance: float, hours: float, fall: float) -> None:
    conductivity = 1.0
    ground = GRASS._replace(
        emissivity=0.0,
        skin_conductance=1e6,
        soil_conductivity=conductivity,
        soil_heat_capacity=admittance**2 / conductivity,
    )
    thickness = tuple(0.004 * 1.12**k for k in range(45))
    z = np.array([0.0, 3000.0])
    # air warmer by 300 K and without wind: nothing passes between air and skin
    start = NightStart(z, np.array([600.0, 900.0]), 0.0 * z, 0.0 * z, 0.0 * z, 1e5, 290.0, (290.0,) * 45, 0.0)
    forcing = NightForcing(one(0.0), one(0.0), one(0.0), anthropogenic=one(-loss), surface_resistance=one(1e12))
    options = NightOptions(
        closure="short", levels=12, skin_capacity=10.0, soil_thickness=thickness, output=900.0, tolerance=0.1
    )
    night = run(start, ground, forcing, duration=hours * HOUR, options=options)
    assert 290.0 - night.skin[-1] == pytest.approx(fall, rel=0.005)
    quarter = int(np.argmin(np.abs(night.seconds - 0.25 * hours * HOUR)))
    assert (290.0 - night.skin[-1]) / (290.0 - night.skin[quarter]) == pytest.approx(2.0, rel=0.005)


# course MAQ-32306 (Wageningen), exercise 7.4c: f 1e-4, geostrophic 10 m/s, start 3 and 3 m/s off: circle of radius 4.243
# about (10, 0); speeds computed from the closed circle
def test_inertial_oscillation_above_a_decoupled_layer() -> None:
    z = np.array([0.0, 3000.0])
    wind = np.full(2, 7.0)
    # 30 K/km: no turbulence above the lowest cells with the sharp cut-off
    start = NightStart(z, np.array([290.0, 380.0]), 0.0 * z, wind, 0.0 * z + 3.0, 1e5, 290.0, (290.0,) * 6, 1e-4)
    seconds = np.array([-HOUR, 20.0 * HOUR])
    forcing = NightForcing(
        seconds, one(10.0), one(0.0), skin_temperature=np.full(2, 290.0), surface_resistance=one(1e12)
    )
    options = NightOptions(closure="short", boundary="temperature", levels=24, chunk=100.0, output=HOUR)
    night = run(start, GRASS, forcing, duration=18.0 * HOUR, options=options)
    i = int(np.searchsorted(night.height, 1000.0))
    for hour, speed in ((0, 7.6158), (3, 11.9431), (7, 14.2027), (10, 12.0521)):
        assert math.hypot(night.u[hour, i], night.v[hour, i]) == pytest.approx(speed, rel=1e-3)
    radius = np.hypot(night.u[:, i] - 10.0, night.v[:, i])
    assert radius == pytest.approx(np.full(radius.size, 4.243), rel=1e-3)
    speed = np.hypot(night.u[:, i], night.v[:, i])
    assert night.seconds[int(speed.argmax())] / HOUR == pytest.approx(6.5, abs=1.0)


# the same course, exercise 5.5b: with phi = 1 + 5 zeta the gradient Richardson number cannot pass 0.2
def test_turbulence_ends_at_the_richardson_limit() -> None:
    assert stable_function(SHORT, 0.0, 0.2)[0] == 0.0
    assert stable_function(SHORT, 0.0, 0.199)[0] > 0.0
    for zeta in (0.1, 1.0, 10.0, 1e4):
        phi = 1.0 + 5.0 * zeta
        assert stable_function(SHORT, 0.0, zeta / phi)[0] == pytest.approx(phi**-2, rel=1e-9)


# the same course, exercise 5.3b: N 0.05 1/s and Ri 0.2 need 3.35 m/s at 30 m
def test_wind_for_a_richardson_number() -> None:
    shear = 0.05 / math.sqrt(0.2)
    assert shear * 30.0 == pytest.approx(3.35, abs=0.01)
    assert stable_function(SHORT, 0.0, 0.05**2 / (3.36 / 30.0) ** 2)[0] > 0.0
    assert stable_function(SHORT, 0.0, 0.05**2 / (3.34 / 30.0) ** 2)[0] == 0.0


# Van de Wiel et al. 2012, abstract: about 5 to 7 m/s at some decametres. The flux needed is the net loss less the heat from
# the soil, 10 to 25 W m-2 over grass (common practice: soil heat is a third to a half of a net loss of 40)
def test_minimum_wind_for_sustained_turbulence() -> None:
    log_ratio = math.log(CROSSING_HEIGHT / 0.03)
    for needed in (10.0, 20.0, 25.0):
        assert 4.9 <= minimum_wind(needed, CROSSING_HEIGHT, log_ratio, 285.0, 1.2) <= 7.1


def test_largest_flux_is_the_maximum_over_the_contrast() -> None:
    """Scan the temperature contrast of phi = 1 + 5 z/L profiles and find the same maximum."""
    wind, height, log_ratio, theta, density = 6.0, 40.0, 7.0, 285.0, 1.2
    contrast = np.linspace(0.01, 30.0, 20000)
    bulk = GRAVITY * height * contrast / (theta * wind**2)
    flux = (KARMAN / log_ratio) ** 2 * wind * contrast * np.maximum(0.0, 1.0 - 5.0 * bulk) ** 2
    assert largest_flux(wind, height, log_ratio, theta, density) == pytest.approx(
        density * 1005.0 * flux.max(), rel=1e-4
    )
