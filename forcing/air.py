"""Moist air: constants with their source and scalar formulas, each written once.

Temperatures are K, pressures Pa, humidities kg/kg, all scalar floats; `each` applies a formula over arrays.
A NaN goes in and a NaN comes out. Temperatures and pressures must be positive.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from forcing.speed import kernel

GRAVITY = 9.80665  # m s-2, standard gravity (CGPM 1901; ISO 80000-3)
CP_DRY = 1005.0  # J kg-1 K-1, dry air at constant pressure near 0 C (Stull 1988 has 1004.67, recalled)
R_DRY = 287.05  # J kg-1 K-1 (ICAO Doc 7488: 287.05287)
R_VAPOUR = 461.5  # J kg-1 K-1 (IAPWS-95: 461.518)
EPSILON = R_DRY / R_VAPOUR
KAPPA = 0.286  # R/cp of dry air, the rounded exponent of WMO practice; R_DRY/CP_DRY is 0.2856
P_REFERENCE = 1.0e5  # Pa, reference pressure of potential temperature (WMO-No. 49)
KARMAN = 0.4  # von Karman constant (Hogstrom 1996: 0.40 +- 0.01, recalled)
STEFAN_BOLTZMANN = 5.670374e-8  # W m-2 K-4 (CODATA 2018)
VIRTUAL = 0.608  # 1/EPSILON - 1, for specific humidity
OMEGA = 7.2921159e-5  # rad s-1, rotation of the Earth (GRS 80)
ZERO_CELSIUS = 273.15  # K

_DRIEST = 1.0e-6  # Pa, below the range of the saturation formula (123 K); no measured air is as dry

# Romps 2017 (J. Atmos. Sci. 74, 3891), constants of the author's published file; J, kg, K, Pa, m
_TRIPLE = 273.16
_ENERGY_VAPOUR = 2.3740e6
_CVV, _CVL = 1418.0, 4119.0
_RA, _RV = 287.04, 461.0
_CPA = 719.0 + _RA
_CPV = _CVV + _RV
_G = 9.81

# ICAO standard atmosphere (Doc 7488, 1993): sea level, lapse to 11 km, isothermal above
_T_SEA, _P_SEA, _LAPSE, _R_ICAO = 288.15, 101325.0, 0.0065, 287.05287
_H_TROPOPAUSE = 11000.0
_T_TROPOPAUSE = _T_SEA - _LAPSE * _H_TROPOPAUSE
_POWER = GRAVITY / (_R_ICAO * _LAPSE)
_P_TROPOPAUSE: float = _P_SEA * (_T_TROPOPAUSE / _T_SEA) ** _POWER
_SCALE = _R_ICAO * _T_TROPOPAUSE / GRAVITY


@kernel
def saturation_vapour_pressure(temperature: float) -> float:
    """Saturation vapour pressure over liquid water [Pa], supercooled below 0 C; Murphy & Koop 2005, Eq. 10.

    Chosen because it stays within 0.01 % of IAPWS-95 from 5 to 50 C and is fitted to measured supercooled water
    (123 to 332 K); formulas with a constant heat capacity are 0.5 to 1 % too high at -40 C.
    """
    log = math.log(temperature)
    return math.exp(
        54.842763
        - 6763.22 / temperature
        - 4.210 * log
        + 0.000367 * temperature
        + math.tanh(0.0415 * (temperature - 218.8))
        * (53.878 - 1331.22 / temperature - 9.44523 * log + 0.014025 * temperature)
    )


@kernel
def saturation_vapour_pressure_ice(temperature: float) -> float:
    """Saturation vapour pressure over ice [Pa], above 110 K; Murphy & Koop 2005, Eq. 7."""
    return math.exp(9.550426 - 5723.265 / temperature + 3.53068 * math.log(temperature) - 0.00728332 * temperature)


@kernel
def saturation_log_slope(temperature: float) -> float:
    """Relative slope d(ln e_s)/dT over water [1/K], the derivative of Murphy & Koop 2005, Eq. 10."""
    log = math.log(temperature)
    inverse = 1.0 / temperature
    rise = math.tanh(0.0415 * (temperature - 218.8))
    bracket = 53.878 - 1331.22 * inverse - 9.44523 * log + 0.014025 * temperature
    return (
        (6763.22 * inverse - 4.210) * inverse
        + 0.000367
        + rise * ((1331.22 * inverse - 9.44523) * inverse + 0.014025)
        + 0.0415 * (1.0 - rise * rise) * bracket
    )


@kernel
def saturation_slope(temperature: float) -> float:
    """Slope de_s/dT of the saturation vapour pressure over water [Pa/K]."""
    return saturation_vapour_pressure(temperature) * saturation_log_slope(temperature)


@kernel
def humidity_from_vapour_pressure(e: float, pressure: float) -> float:
    """Specific humidity [kg/kg] from vapour pressure [Pa]."""
    return EPSILON * e / (pressure - (1.0 - EPSILON) * e)


@kernel
def vapour_pressure(q: float, pressure: float) -> float:
    """Vapour pressure [Pa] from specific humidity [kg/kg]."""
    return q * pressure / (EPSILON + (1.0 - EPSILON) * q)


@kernel
def saturation_humidity(temperature: float, pressure: float) -> float:
    """Specific humidity at saturation over water [kg/kg]."""
    return humidity_from_vapour_pressure(saturation_vapour_pressure(temperature), pressure)


@kernel
def humidity_from_mixing_ratio(ratio: float) -> float:
    """Specific humidity [kg/kg] from mixing ratio [kg per kg of dry air]."""
    return ratio / (1.0 + ratio)


@kernel
def mixing_ratio_from_humidity(q: float) -> float:
    """Mixing ratio [kg per kg of dry air] from specific humidity [kg/kg]."""
    return q / (1.0 - q)


@kernel
def dew_point(e: float) -> float:
    """Dew point over water [K] of vapour pressure `e` [Pa]: the inverse of `saturation_vapour_pressure`.

    NaN for air without vapour (below 1e-6 Pa).
    """
    if not e > _DRIEST:
        return math.nan
    ratio = math.log(e / 611.2)
    # first guess: inverse Magnus form with the constants of WMO-No. 8, annex 4.B
    temperature = ZERO_CELSIUS + 243.12 * ratio / (17.62 - ratio)
    for _ in range(20):
        gap = math.log(e / saturation_vapour_pressure(temperature))
        step = gap / saturation_log_slope(temperature)
        temperature += step
        if not abs(step) > 1.0e-9:
            break
    return temperature


@kernel
def relative_humidity(temperature: float, q: float, pressure: float) -> float:
    """Relative humidity over water, 0..1 (above 1 where supersaturated)."""
    return vapour_pressure(q, pressure) / saturation_vapour_pressure(temperature)


@kernel
def exner(pressure: float) -> float:
    """Exner function, (p / 1000 hPa) ** 0.286."""
    ratio: float = (pressure / P_REFERENCE) ** KAPPA
    return ratio


@kernel
def potential_temperature(temperature: float, pressure: float) -> float:
    """Potential temperature [K], reference 1000 hPa."""
    return temperature / exner(pressure)


@kernel
def temperature(theta: float, pressure: float) -> float:
    """Temperature [K] of air with potential temperature `theta` [K]."""
    return theta * exner(pressure)


@kernel
def virtual(value: float, q: float) -> float:
    """Virtual (potential) temperature [K] from (potential) temperature and specific humidity."""
    return value * (1.0 + VIRTUAL * q)


@kernel
def latent_heat(temperature: float) -> float:
    """Latent heat of vaporisation [J/kg]; FAO-56 annex 3, Eq. 3-1 (Harrison 1963)."""
    return 2.501e6 - 2361.0 * (temperature - ZERO_CELSIUS)


@kernel
def density(pressure: float, temperature: float, q: float) -> float:
    """Density of moist air [kg m-3]."""
    return pressure / (R_DRY * temperature * (1.0 + VIRTUAL * q))


@kernel
def lambert_lower(z: float) -> float:
    """Lambert W, branch -1: the w <= -1 with w exp(w) = z, for z in [-1/e, 0); NaN elsewhere.

    Start by the series at the branch point or the asymptotic form (Corless et al. 1996,
    Adv. Comput. Math. 5, 329), then Halley steps.
    """
    if not (z < 0.0 and 1.0 + math.e * z >= -1.0e-15):
        return math.nan
    root = math.sqrt(2.0 * max(0.0, 1.0 + math.e * z))
    if root < 0.8:
        w = -1.0 - root * (1.0 + root * (1.0 / 3.0 + root * 11.0 / 72.0))
    else:
        log = math.log(-z)
        w = log - math.log(-log) + math.log(-log) / log
    for _ in range(20):
        if w > -1.0 - 1.0e-7:  # on the branch point, where the series is exact to round-off
            break
        grown = math.exp(w)
        miss = w * grown - z
        step = miss / (grown * (w + 1.0) - 0.5 * (w + 2.0) * miss / (w + 1.0))
        w -= step
        if not abs(step) > 1.0e-14 * abs(w):
            break
    return w


@kernel
def condensation_ratio(temperature: float, humidity_ratio: float, q: float) -> float:
    """Temperature at the lifting condensation level over that of the parcel; Romps 2017, Eq. 22.

    `humidity_ratio` is the relative humidity over water, 0..1. Saturated air gives 1, air without vapour NaN.
    """
    if humidity_ratio >= 1.0:
        return 1.0
    if not humidity_ratio > 0.0:
        return math.nan
    heat = (1.0 - q) * _CPA + q * _CPV
    gas = (1.0 - q) * _RA + q * _RV
    a = heat / gas + (_CVL - _CPV) / _RV
    c = -(_ENERGY_VAPOUR - (_CVV - _CVL) * _TRIPLE) / (_RV * temperature * a)
    return c / lambert_lower(humidity_ratio ** (1.0 / a) * c * math.exp(c))


@kernel
def condensation_temperature(temperature: float, q: float, pressure: float) -> float:
    """Temperature [K] that the parcel has where it condenses when lifted (exact form, Romps 2017)."""
    return temperature * condensation_ratio(temperature, relative_humidity(temperature, q, pressure), q)


@kernel
def condensation_level(temperature: float, q: float, pressure: float) -> float:
    """Height [m] above the parcel where it condenses when lifted; 0 if saturated, NaN without vapour.

    Exact form and constants of Romps 2017 (Eq. 22); the relative humidity that enters is the one of this module.
    """
    ratio = condensation_ratio(temperature, relative_humidity(temperature, q, pressure), q)
    return ((1.0 - q) * _CPA + q * _CPV) * temperature * (1.0 - ratio) / _G


@kernel
def _adiabatic_saturation(
    start: float, celsius: float, ratio: float, pressure: float, latent: float, steep: float, cond: float, ice: bool
) -> float:
    """Solve the wet-bulb equation by Newton steps from `start`, at or above the root; degrees C in and out.

    The function is rising and convex in the wet bulb, so that steps from above approach the root from one side.
    """
    wet = start
    for _ in range(50):
        kelvin = wet + ZERO_CELSIUS
        if ice:
            e = saturation_vapour_pressure_ice(kelvin)
            slope = e * (5723.265 / (kelvin * kelvin) + 3.53068 / kelvin - 0.00728332)
        else:
            e = saturation_vapour_pressure(kelvin)
            slope = e * saturation_log_slope(kelvin)
        full = EPSILON * e / (pressure - e)
        full_slope = full * slope * pressure / (e * (pressure - e))
        miss = (latent - steep * wet) * full - 1.006 * (celsius - wet) - ratio * (latent + 1.86 * celsius - cond * wet)
        step = miss / ((latent - steep * wet) * full_slope - steep * full + 1.006 + ratio * cond)
        wet -= step
        if not abs(step) > 1.0e-9:
            break
    return wet


@kernel
def wet_bulb(temperature: float, q: float, pressure: float) -> float:
    """Thermodynamic (adiabatic saturation) wet-bulb temperature [K].

    ASHRAE Handbook Fundamentals 2017, chapter 1, Eqs. 33 (water) and 35 (ice). The bulb is iced where
    water would have to be below 0 C to satisfy the equation, so that the value steps from 0 C to several tenths of a
    kelvin below it; a little above that step an iced bulb satisfies it too, and water is taken, as for a fresh drop.
    Air that is saturated, or supersaturated over an iced bulb, gives its own temperature. NaN where water would boil.
    """
    if not saturation_vapour_pressure(temperature) < pressure:
        return math.nan
    celsius = temperature - ZERO_CELSIUS
    ratio = mixing_ratio_from_humidity(q)
    if celsius > 0.0:
        e = saturation_vapour_pressure(ZERO_CELSIUS)
        surplus = 2501.0 * EPSILON * e / (pressure - e) - 1.006 * celsius - ratio * (2501.0 + 1.86 * celsius)
        if surplus <= 0.0:  # a bulb wet with water is at or above 0 C
            wet = _adiabatic_saturation(celsius, celsius, ratio, pressure, 2501.0, 2.326, 4.186, False)
        else:
            wet = _adiabatic_saturation(0.0, celsius, ratio, pressure, 2830.0, 0.24, 2.1, True)
    else:
        wet = _adiabatic_saturation(celsius, celsius, ratio, pressure, 2830.0, 0.24, 2.1, True)
    if wet > celsius:
        return temperature
    return wet + ZERO_CELSIUS


@kernel
def coriolis(latitude: float) -> float:
    """Coriolis parameter [1/s] at a latitude [degrees north]; negative in the south."""
    return 2.0 * OMEGA * math.sin(math.radians(latitude))


@kernel
def standard_pressure(height: float) -> float:
    """Pressure [Pa] of the ICAO standard atmosphere at a geopotential height [m]; isothermal above 11 km.

    The standard warms again above 20 km, so that the value is low there.
    """
    if height > _H_TROPOPAUSE:
        return _P_TROPOPAUSE * math.exp((_H_TROPOPAUSE - height) / _SCALE)
    pressure: float = _P_SEA * (1.0 - _LAPSE * height / _T_SEA) ** _POWER
    return pressure


@kernel
def standard_height(pressure: float) -> float:
    """Geopotential height [m] of the ICAO standard atmosphere at a pressure [Pa], inverse of `standard_pressure`."""
    if pressure < _P_TROPOPAUSE:
        return _H_TROPOPAUSE - _SCALE * math.log(pressure / _P_TROPOPAUSE)
    height: float = _T_SEA / _LAPSE * (1.0 - (pressure / _P_SEA) ** (1.0 / _POWER))
    return height


def each(function: Callable[..., float], *arrays: ArrayLike) -> NDArray[np.float64]:
    """Apply a scalar formula element by element over arrays that broadcast; float64 of the common shape."""
    columns = np.broadcast_arrays(*(np.asarray(values, dtype=np.float64) for values in arrays))
    rows = zip(*(column.ravel().tolist() for column in columns), strict=True)
    return np.array([function(*row) for row in rows], dtype=np.float64).reshape(columns[0].shape)
