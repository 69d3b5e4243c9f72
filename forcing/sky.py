"""Short-wave radiation from the sky, and the water vapour it passes through.

Clear sky: Bird & Hulstrom (1981, SERI/TR-642-761). Cloud: Kasten & Czeplak (1980, Solar Energy 24, 177-189).
All fluxes are downward on a horizontal plane, W m-2.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from forcing.air import GRAVITY
from forcing.errors import DaylayerError

Array = NDArray[np.float64]

#: Total solar irradiance at the mean distance of the sun [W m-2] (Kopp & Lean 2011).
SOLAR_CONSTANT = 1361.0

#: Vertical ozone column used where none is given [cm at 0 degrees Celsius and 1013.25 hPa]: the 0.3 cm of the published
#: spreadsheet of the Bird model.
OZONE_CM = 0.3

#: How aerosol depth falls with wavelength where only one wavelength is given: mean value of Angstrom (recalled); assumed.
ANGSTROM_EXPONENT = 1.3


class ShortWave(NamedTuple):
    """Downward short-wave on a horizontal plane [W m-2]: `total` is `direct` plus `diffuse`."""

    total: Array
    direct: Array
    diffuse: Array


def clear_sky_shortwave(
    zenith: ArrayLike,
    *,
    pressure: float,
    precipitable_water_cm: ArrayLike,
    aerosol_500nm: float,
    aerosol_380nm: float | None = None,
    ozone_cm: float = OZONE_CM,
    albedo: float = 0.2,
    irradiance_factor: ArrayLike = 1.0,
    solar_constant: float = SOLAR_CONSTANT,
    asymmetry: float = 0.85,
) -> ShortWave:
    """Short-wave reaching the ground from a cloudless sky (Bird & Hulstrom 1981); zero with the sun below the horizon.

    Parameters
    ----------
    zenith : array
        Zenith distance of the sun [radians].
    pressure : float
        At the ground [Pa].
    precipitable_water_cm : float or array of the shape of `zenith`
        Vertical column of water vapour [cm of liquid].
    aerosol_500nm, aerosol_380nm : float
        Vertical aerosol optical depths [1]; the second is derived from the first where it is not given.
    albedo : float
        Of the ground around [1]: light goes back and forth between ground and sky.
    irradiance_factor : float or array
        Inverse square of the sun's distance in astronomical units.
    asymmetry : float
        Forward share of the light that aerosol scatters [1].
    """
    _check_air(pressure, precipitable_water_cm, aerosol_500nm, ozone_cm, albedo)
    haze_380nm = aerosol_at_380nm(aerosol_500nm) if aerosol_380nm is None else aerosol_380nm
    cosine = np.cos(np.asarray(zenith, dtype=np.float64))
    mass = relative_air_mass(np.where(cosine > 0.0, zenith, 0.0))
    pressed = mass * pressure / 101325.0
    ozone = ozone_cm * mass
    water = np.asarray(precipitable_water_cm, dtype=np.float64) * mass
    rayleigh = np.exp(-0.0903 * pressed**0.84 * (1.0 + pressed - pressed**1.01))
    through_ozone = (
        1.0
        - 0.1611 * ozone * (1.0 + 139.48 * ozone) ** -0.3034
        - 0.002715 * ozone / (1.0 + 0.044 * ozone + 0.0003 * ozone**2)
    )
    through_gas = np.exp(-0.0127 * pressed**0.26)
    through_water = 1.0 - 2.4959 * water / ((1.0 + 79.034 * water) ** 0.6828 + 6.385 * water)
    depth = 0.2758 * haze_380nm + 0.35 * aerosol_500nm
    aerosol = np.exp(-(depth**0.873) * (1.0 + depth - depth**0.7088) * mass**0.9108)
    absorbed = 1.0 - 0.1 * (1.0 - mass + mass**1.06) * (1.0 - aerosol)
    sky_albedo = 0.0685 + (1.0 - asymmetry) * (1.0 - aerosol / absorbed)
    above = solar_constant * np.asarray(irradiance_factor, dtype=np.float64) * np.maximum(cosine, 0.0)
    gases = through_ozone * through_gas * through_water
    direct = 0.9662 * above * aerosol * gases * rayleigh
    scattered = 0.5 * (1.0 - rayleigh) + asymmetry * (1.0 - aerosol / absorbed)
    diffuse = 0.79 * above * gases * absorbed * scattered / (1.0 - mass + mass**1.02)
    total = (direct + diffuse) / (1.0 - albedo * sky_albedo)
    return ShortWave(np.asarray(total), np.asarray(direct), np.asarray(total - direct))


def relative_air_mass(zenith: ArrayLike) -> Array:
    """Air mass relative to the vertical (Kasten 1966), for a zenith distance [radians] up to a right angle."""
    degrees = np.degrees(np.asarray(zenith, dtype=np.float64))
    return np.asarray(1.0 / (np.cos(np.radians(degrees)) + 0.15 * (93.885 - degrees) ** -1.253))


def aerosol_at_380nm(aerosol_500nm: float, *, exponent: float = ANGSTROM_EXPONENT) -> float:
    """Aerosol optical depth at 380 nm from that at 500 nm by Angstrom's power law [1]."""
    return float(aerosol_500nm * (500.0 / 380.0) ** exponent)


def cloud_factor(cloud_fraction: ArrayLike) -> Array:
    """Short-wave under cloud over clear-sky short-wave [1], by cloud fraction 0 to 1 (Kasten & Czeplak 1980)."""
    fraction = np.asarray(cloud_fraction, dtype=np.float64)
    if np.any((fraction < 0.0) | (fraction > 1.0)):
        raise DaylayerError(f"cloud fraction {fraction[(fraction < 0) | (fraction > 1)][0]} is outside 0 to 1")
    return np.asarray(1.0 - 0.75 * fraction**3.4)


def precipitable_water(pressure: ArrayLike, humidity: ArrayLike, *, exponent_above: float = 3.0) -> float:
    """Column of water vapour [kg m-2, the same number in mm; a tenth of it in cm].

    Parameters
    ----------
    pressure, humidity : array, shape (n,)
        Pa and specific humidity kg/kg, upward from the ground.
    exponent_above : float
        Above the last level the humidity falls with this power of pressure (form of Smith 1966; 3 is recalled); it
        matters only for a profile that ends low.

    Raises
    ------
    DaylayerError
        Where pressure does not fall upward or a value is missing.
    """
    levels = np.asarray(pressure, dtype=np.float64)
    water = np.asarray(humidity, dtype=np.float64)
    if levels.size == 0 or not np.all(np.isfinite(levels)) or not np.all(np.isfinite(water)):
        raise DaylayerError("the column of water vapour needs a pressure and a humidity at every level")
    if np.any(np.diff(levels) >= 0.0):
        raise DaylayerError("pressure does not fall upward", remedy="prepare the profile first")
    inside = float(np.sum(0.5 * (water[1:] + water[:-1]) * (levels[:-1] - levels[1:])))
    above = float(water[-1] * levels[-1] / (exponent_above + 1.0))
    return (inside + above) / GRAVITY


def _check_air(pressure: float, water_cm: ArrayLike, aerosol: float, ozone_cm: float, albedo: float) -> None:
    if not 30000.0 <= pressure <= 110000.0:
        raise DaylayerError(f"surface pressure {pressure} Pa is outside 30000 to 110000 Pa")
    if np.any(np.asarray(water_cm) < 0.0) or aerosol < 0.0 or ozone_cm < 0.0:
        raise DaylayerError("water vapour, aerosol and ozone columns cannot be negative")
    if not 0.0 <= albedo <= 1.0:
        raise DaylayerError(f"albedo {albedo} is outside 0 to 1")
