"""Moist air: round trips, order, missing values, the exactness of the inverses, and the compiled twin."""

from __future__ import annotations

import importlib.util
import inspect
import math
from collections.abc import Callable
from types import ModuleType

import numba
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.special import lambertw

from forcing import air, speed

celsius = st.floats(-40.0, 50.0)
kelvin = celsius.map(lambda value: value + air.ZERO_CELSIUS)
pressure = st.floats(5.0e4, 1.06e5)
relative = st.floats(0.02, 1.0)
NAN = math.nan


def humidity(temperature: float, part: float, p: float) -> float:
    return air.humidity_from_vapour_pressure(part * air.saturation_vapour_pressure(temperature), p)


@given(kelvin, st.floats(0.01, 5.0))
def test_saturation_rises_with_temperature(temperature: float, step: float) -> None:
    assert air.saturation_vapour_pressure(temperature + step) > air.saturation_vapour_pressure(temperature)
    assert air.saturation_vapour_pressure_ice(temperature + step) > air.saturation_vapour_pressure_ice(temperature)


@given(st.floats(200.0, 330.0))
def test_slope_is_the_derivative(temperature: float) -> None:
    step = 0.01
    rise = air.saturation_vapour_pressure(temperature + step) - air.saturation_vapour_pressure(temperature - step)
    assert air.saturation_slope(temperature) == pytest.approx(rise / (2.0 * step), rel=1e-6)


@given(st.floats(200.0, 273.0))
def test_ice_holds_less_vapour_than_supercooled_water(temperature: float) -> None:
    assert air.saturation_vapour_pressure_ice(temperature) < air.saturation_vapour_pressure(temperature)


def test_water_and_ice_meet_at_the_triple_point() -> None:
    assert air.saturation_vapour_pressure(273.16) == pytest.approx(611.657, rel=1e-5)  # IAPWS: 611.657 Pa
    assert air.saturation_vapour_pressure_ice(273.16) == pytest.approx(611.657, rel=1e-5)


@given(st.floats(180.0, 340.0))
def test_dew_point_inverts_saturation(temperature: float) -> None:
    assert air.dew_point(air.saturation_vapour_pressure(temperature)) == pytest.approx(temperature, abs=1e-8)


@given(st.floats(1.0e-4, 2.0e4), pressure)
def test_humidity_measures_invert_each_other(e: float, p: float) -> None:
    q = air.humidity_from_vapour_pressure(e, p)
    assert air.vapour_pressure(q, p) == pytest.approx(e, rel=1e-12)
    assert air.humidity_from_mixing_ratio(air.mixing_ratio_from_humidity(q)) == pytest.approx(q, rel=1e-12)
    assert air.mixing_ratio_from_humidity(q) == pytest.approx(air.EPSILON * e / (p - e), rel=1e-12)


@given(kelvin, pressure)
def test_saturated_air_is_saturated(temperature: float, p: float) -> None:
    q = air.saturation_humidity(temperature, p)
    assert air.relative_humidity(temperature, q, p) == pytest.approx(1.0, rel=1e-12)
    assert air.condensation_level(temperature, q, p) == pytest.approx(0.0, abs=1e-6)
    assert air.condensation_temperature(temperature, q, p) == pytest.approx(temperature, abs=1e-8)
    assert air.wet_bulb(temperature, q, p) == pytest.approx(temperature, abs=1e-6)


@given(kelvin, pressure)
def test_potential_temperature_inverts(temperature: float, p: float) -> None:
    theta = air.potential_temperature(temperature, p)
    assert air.temperature(theta, p) == pytest.approx(temperature, rel=1e-14)
    assert (theta >= temperature) == (p <= air.P_REFERENCE)


@given(kelvin, relative, pressure)
def test_wet_bulb_and_condensation_lie_between_dew_point_and_temperature(
    temperature: float, part: float, p: float
) -> None:
    q = humidity(temperature, part, p)
    dew = air.dew_point(air.vapour_pressure(q, p))
    wet = air.wet_bulb(temperature, q, p)
    lifted = air.condensation_temperature(temperature, q, p)
    assert dew - 1e-6 <= wet <= temperature
    assert lifted <= dew + 0.02  # the dew point itself falls on the way up; 0.02 K for the two saturation formulas
    assert lifted <= temperature
    height = air.condensation_level(temperature, q, p)
    assert height >= 0.0
    # the lapse on the way up is g over the heat capacity of the moist parcel: 8.4 K per km where a sixth is vapour
    assert 8.4e-3 * height <= temperature - lifted + 1e-9
    assert temperature - lifted <= 9.8e-3 * height + 1e-9


@given(kelvin, relative, relative, pressure)
def test_moister_air_has_the_higher_wet_bulb_and_the_lower_cloud(
    temperature: float, one: float, two: float, p: float
) -> None:
    dry, moist = (humidity(temperature, part, p) for part in sorted((one, two)))
    assert air.wet_bulb(temperature, dry, p) <= air.wet_bulb(temperature, moist, p) + 1e-7
    assert air.condensation_level(temperature, dry, p) >= air.condensation_level(temperature, moist, p) - 1e-6


@given(st.floats(0.5, 50.0), relative, pressure)
def test_wet_bulb_satisfies_its_equation(warm: float, part: float, p: float) -> None:
    """Enthalpy balance of ASHRAE 2017, chapter 1, with the water or ice of the bulb; kJ per kg of dry air."""
    temperature = warm + air.ZERO_CELSIUS
    q = humidity(temperature, part, p)
    wet = air.wet_bulb(temperature, q, p) - air.ZERO_CELSIUS
    ratio = air.mixing_ratio_from_humidity(q)
    over = air.saturation_vapour_pressure if wet >= 0.0 else air.saturation_vapour_pressure_ice
    full = air.mixing_ratio_from_humidity(air.humidity_from_vapour_pressure(over(wet + air.ZERO_CELSIUS), p))
    liquid = 4.186 * wet if wet >= 0.0 else -333.4 + 2.1 * wet  # ASHRAE Eqs. 33, 35: 2830 - 2501 and rounding
    before = 1.006 * warm + ratio * (2501.0 + 1.86 * warm)
    after = 1.006 * wet + full * (2501.0 + 1.86 * wet)
    assert before + (full - ratio) * liquid == pytest.approx(after, abs=0.03)


def test_no_vapour_is_missing_not_a_number_made_up() -> None:
    assert math.isnan(air.dew_point(0.0))
    assert math.isnan(air.condensation_level(300.0, 0.0, 1e5))
    assert math.isnan(air.condensation_temperature(300.0, 0.0, 1e5))
    assert air.wet_bulb(300.0, 0.0, 1e5) < 285.0  # bone-dry air still cools a wet bulb
    assert math.isnan(air.wet_bulb(380.0, 0.01, 1e5))  # water boils


@pytest.mark.parametrize(
    "call",
    [
        lambda: air.saturation_vapour_pressure(NAN),
        lambda: air.saturation_vapour_pressure_ice(NAN),
        lambda: air.saturation_slope(NAN),
        lambda: air.dew_point(NAN),
        lambda: air.relative_humidity(290.0, NAN, 1e5),
        lambda: air.condensation_level(NAN, 0.01, 1e5),
        lambda: air.condensation_level(290.0, NAN, 1e5),
        lambda: air.condensation_level(290.0, 0.005, NAN),
        lambda: air.wet_bulb(NAN, 0.005, 1e5),
        lambda: air.wet_bulb(290.0, NAN, 1e5),
        lambda: air.wet_bulb(290.0, 0.005, NAN),
        lambda: air.wet_bulb(260.0, NAN, 1e5),
        lambda: air.standard_height(NAN),
        lambda: air.standard_pressure(NAN),
        lambda: air.lambert_lower(NAN),
    ],
)
def test_missing_stays_missing(call: Callable[[], float]) -> None:
    assert math.isnan(call())


@given(st.floats(-690.0, -1.0 - 1e-9))
def test_lambert_is_the_inverse(logarithm: float) -> None:
    w = air.lambert_lower(-math.exp(logarithm))
    assert w + math.log(-w) == pytest.approx(logarithm, rel=1e-12)


@given(st.floats(-690.0, -1.001))
def test_lambert_is_that_of_a_library(logarithm: float) -> None:
    z = -math.exp(logarithm)  # the library is off by 4e-5 closer to the branch point
    assert air.lambert_lower(z) == pytest.approx(lambertw(z, -1).real, rel=1e-9)


def test_lambert_outside_its_branch() -> None:
    assert air.lambert_lower(-1.0 / math.e) == pytest.approx(-1.0, abs=1e-7)
    for z in (-0.37, -1.0, 0.0, 0.5):
        assert math.isnan(air.lambert_lower(z))


@given(st.floats(-500.0, 30000.0))
def test_standard_atmosphere_inverts(height: float) -> None:
    assert air.standard_height(air.standard_pressure(height)) == pytest.approx(height, abs=1e-6)


def test_coriolis_has_a_sign() -> None:
    assert air.coriolis(-45.0) == -air.coriolis(45.0) < 0.0
    assert air.coriolis(0.0) == 0.0


def test_each_broadcasts_and_keeps_missing() -> None:
    temperatures = np.array([[280.0], [NAN]])
    result = air.each(air.potential_temperature, temperatures, [1e5, 9e4, 8e4])
    assert result.shape == (2, 3)
    assert result.dtype == np.float64
    assert result[0, 1] == air.potential_temperature(280.0, 9e4)
    assert np.isnan(result[1]).all()
    assert air.each(air.exner, 1e5) == 1.0
    assert air.each(air.exner, []).shape == (0,)


@pytest.fixture(scope="module")
def twin() -> ModuleType:
    """The same source with every kernel compiled."""
    spec = importlib.util.spec_from_file_location("air_twin", air.__file__)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(speed, "kernel", numba.njit(error_model="numpy"))
        spec.loader.exec_module(module)
    return module


ARGUMENTS = {
    "temperature": (233.15, 263.0, 281.0, 305.0, 318.0),
    "value": (263.0, 290.0, 310.0),
    "theta": (263.0, 290.0, 310.0),
    "pressure": (1.013e5, 8.4e4, 2.0e4),
    "height": (-200.0, 1500.0, 15000.0),
    "q": (0.0, 1e-4, 0.004, 0.03),
    "ratio": (0.0, 0.02),
    "e": (0.0, 1e-3, 120.0, 3000.0),
    "z": (-1.0, -0.3678, -0.2, -1e-9, 0.1),
    "humidity_ratio": (0.0, 0.1, 0.8, 1.2),
    "latitude": (-33.0, 71.0),
    # of the wet-bulb solver
    "start": (40.0,),
    "celsius": (40.0,),
    "latent": (2501.0,),
    "steep": (2.326,),
    "cond": (4.186,),
    "ice": (True, False),
}


def kernels() -> list[str]:
    """Names of all functions of the module but the array helper."""
    return [
        name
        for name, value in vars(air).items()
        if callable(value) and getattr(value, "__module__", "") == air.__name__ and name != "each"
    ]


@pytest.mark.parametrize("name", kernels())
def test_compiled_twin_gives_the_same(name: str, twin: ModuleType) -> None:
    plain, compiled = getattr(air, name), getattr(twin, name)
    assert isinstance(compiled, numba.core.registry.CPUDispatcher)
    mesh = np.meshgrid(*(np.array(ARGUMENTS[key]) for key in inspect.signature(plain).parameters), indexing="ij")
    for row in zip(*(axis.ravel().tolist() for axis in mesh), strict=True):
        assert compiled(*row) == pytest.approx(plain(*row), rel=1e-12, abs=1e-12, nan_ok=True)
