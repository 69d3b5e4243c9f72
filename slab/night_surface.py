"""The ground under the night column: transfer through the lowest half cell, skin heat balance, and their derivatives.

The transfer coefficients follow from the closure's own similarity profiles (`slab.night_bulk`), with the derivatives the
implicit solver needs.
Heat and vapour fluxes are positive upward, the ground flux positive into the soil.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from forcing.air import (
    CP_DRY,
    EPSILON,
    GRAVITY,
    KARMAN,
    R_DRY,
    R_VAPOUR,
    STEFAN_BOLTZMANN,
    ZERO_CELSIUS,
    latent_heat,
    saturation_vapour_pressure,
    saturation_vapour_pressure_ice,
)
from forcing.speed import kernel
from slab.night_bulk import bulk

ENERGY = 0
TEMPERATURE = 1
FLUX = 2
BOUNDARIES = {"energy": ENERGY, "temperature": TEMPERATURE, "flux": FLUX}

LEAST_WIND = 0.1  # [m s-1] added in quadrature to the lowest wind, so that calm air keeps a defined transfer
COLDEST, HOTTEST = 180.0, 360.0  # [K] range over which saturation is evaluated; only failing trial steps leave it
MELT_CONDUCTANCE = (
    500.0  # [W m-2 K-1] spent on melting per kelvin a snow skin is over the melting point: holds it there
)
SUBLIMATION = 2.834e6  # [J kg-1] as in forcing.transfer
VAPORISATION = 2.5e6  # [J kg-1] only in the slope of saturation, as in forcing.transfer
FLUX_RELAXATION = (
    1.0  # [W m-2 K-1] ties the skin to the air where fluxes are prescribed: no runaway beyond the possible flux
)


class Footing(NamedTuple):
    """What stays the same through a night (floats).

    Attributes
    ----------
    height : centre of the lowest cell above displacement + roughness length, m.
    log_momentum, log_heat : ln(z / z0) of that half cell (1).
    momentum, heat : its neutral transfer coefficients, k^2 / ln^2 (1).
    unstable_factor : c of the unstable bulk function (1).
    emissivity : long-wave emissivity of the skin, times its view of the sky (1).
    skin_capacity : J m-2 K-1.
    skin_conductance : from the skin to the middle of the first soil layer, W m-2 K-1.
    soil_conductivity, soil_capacity : W m-1 K-1 and J m-3 K-1.
    pressure, exner : at the ground, Pa and 1.
    density : of the lowest air, kg m-3.
    snow : 1 for a snow skin: saturation over ice, melt at the melting point.
    """

    height: float
    log_momentum: float
    log_heat: float
    momentum: float
    heat: float
    unstable_factor: float
    emissivity: float
    skin_capacity: float
    skin_conductance: float
    soil_conductivity: float
    soil_capacity: float
    pressure: float
    exner: float
    density: float
    snow: float


class Drive(NamedTuple):
    """What the outside does to the ground during one call of `advance` (floats, constant through it).

    ``absorbed`` short-wave taken up by the skin and heat released at it [W m-2]; ``longwave_down`` [W m-2];
    ``surface_resistance`` to evaporation [s m-1] (none to dew); ``temperature_rate`` [K s-1] of the skin with boundary
    `temperature`; ``sensible``, ``latent`` [W m-2, positive upward] with boundary `flux`.
    """

    absorbed: float = 0.0
    longwave_down: float = 0.0
    surface_resistance: float = 1e9
    temperature_rate: float = 0.0
    sensible: float = 0.0
    latent: float = 0.0


class Link(NamedTuple):
    """Fluxes through the lowest half cell and their derivatives.

    ``heat`` [K kg m-2 s-1] of potential temperature, ``vapour`` [kg m-2 s-1], ``drag`` [kg m-2 s-1]: stress = -drag x
    wind. Suffix: derivative with respect to skin temperature (s), and theta (t), u, v, humidity (q) of the lowest cell.
    ``net_radiation`` (positive downward, less what melts snow), ``ground`` [W m-2], ``lost`` [W m-2 K-1] the first one's derivative,
    negated; ``latent_heat`` [J/kg].
    """

    heat: float
    heat_s: float
    heat_t: float
    heat_u: float
    heat_v: float
    vapour: float
    vapour_s: float
    vapour_t: float
    vapour_u: float
    vapour_v: float
    vapour_q: float
    drag: float
    drag_s: float
    drag_t: float
    drag_u: float
    drag_v: float
    net_radiation: float
    ground: float
    lost: float
    latent_heat: float


@kernel
def neutral_logs(height: float, roughness_momentum: float, roughness_heat: float) -> tuple[float, float]:
    """ln(z / z0) for momentum and heat, z counted from the displacement height (height + roughness)."""
    above = height + roughness_momentum
    return math.log(above / roughness_momentum), math.log(above / roughness_heat)


class Transfer(NamedTuple):
    """X = U f [m s-1] of momentum and heat, and derivatives by theta_air - theta_skin and by U^2."""

    momentum: float
    momentum_delta: float
    momentum_squared: float
    heat: float
    heat_delta: float
    heat_squared: float


@kernel
def transfer(closure: int, foot: Footing, delta: float, theta: float, wind_squared: float) -> Transfer:
    """Transfer velocities through the lowest half cell for ``delta`` = theta of the air less that of the skin [K]."""
    wind = math.sqrt(wind_squared)
    per_kelvin = GRAVITY * foot.height / (theta * wind_squared)
    richardson = per_kelvin * delta
    f = bulk(closure, richardson, foot.log_momentum, foot.log_heat, foot.unstable_factor)
    return Transfer(
        wind * f.momentum,
        wind * f.momentum_slope * per_kelvin,
        (0.5 * f.momentum - f.momentum_slope * richardson) / wind,
        wind * f.heat,
        wind * f.heat_slope * per_kelvin,
        (0.5 * f.heat - f.heat_slope * richardson) / wind,
    )


@kernel
def saturation(foot: Footing, skin: float) -> tuple[float, float]:
    """Saturation humidity at the skin [kg/kg] and its slope [K-1], as in forcing.transfer."""
    if foot.snow > 0.0 and skin < ZERO_CELSIUS:
        vapour = saturation_vapour_pressure_ice(skin)
        heat = SUBLIMATION
    else:
        vapour = saturation_vapour_pressure(skin)
        heat = VAPORISATION
    rest = foot.pressure - (1.0 - EPSILON) * vapour
    saturated = EPSILON * vapour / rest
    return saturated, saturated * foot.pressure / rest * heat / (R_VAPOUR * skin * skin)


@kernel
def _vapour(foot: Footing, drive: Drive, skin: float, humidity: float, x: float) -> tuple[float, float, float, float]:
    """Vapour flux [kg m-2 s-1], and its derivatives by skin temperature, X and humidity of the air."""
    saturated, slope = saturation(foot, min(max(skin, COLDEST), HOTTEST))
    conductance = foot.heat * x
    lack = saturated - humidity
    share = 1.0 / (1.0 + drive.surface_resistance * conductance) if lack > 0.0 else 1.0
    rate = foot.density * conductance * share
    return rate * lack, rate * slope, foot.density * foot.heat * share * share * lack, -rate


@kernel
def link(
    closure: int, boundary: int, foot: Footing, drive: Drive, skin: float, soil: float, theta: float, humidity: float,
    u: float, v: float,
) -> Link:  # fmt: skip
    """Fluxes between skin, lowest cell and first soil layer, with all derivatives."""
    delta = theta - skin / foot.exner
    squared = u * u + v * v + LEAST_WIND * LEAST_WIND
    y, y_delta, y_squared, x, x_delta, x_squared = transfer(closure, foot, delta, theta, squared)
    x_u = 2.0 * u * x_squared
    x_v = 2.0 * v * x_squared
    x_s = -x_delta / foot.exner
    y_u = 2.0 * u * y_squared
    y_v = 2.0 * v * y_squared
    y_s = -y_delta / foot.exner
    drag = foot.density * foot.momentum
    heat = foot.density * foot.heat
    emitted = foot.emissivity * STEFAN_BOLTZMANN * skin * skin * skin
    net = drive.absorbed + foot.emissivity * drive.longwave_down - emitted * skin
    lost = 4.0 * emitted
    if foot.snow > 0.0 and skin > ZERO_CELSIUS:
        net -= MELT_CONDUCTANCE * (skin - ZERO_CELSIUS)
        lost += MELT_CONDUCTANCE
    ground = foot.skin_conductance * (skin - soil)
    lv = SUBLIMATION if foot.snow > 0.0 else latent_heat(min(max(skin, COLDEST), HOTTEST))
    if boundary == FLUX:
        return Link(
            drive.sensible / (CP_DRY * foot.exner), 0.0, 0.0, 0.0, 0.0, drive.latent / lv, 0.0, 0.0, 0.0, 0.0, 0.0,
            drag * y, drag * y_s, drag * y_delta, drag * y_u, drag * y_v,
            CP_DRY * foot.exner * heat * x * delta, FLUX_RELAXATION * (skin - theta * foot.exner),
            heat * CP_DRY * x + FLUX_RELAXATION, lv,
        )  # fmt: skip
    vapour, vapour_s, vapour_x, vapour_q = _vapour(foot, drive, skin, humidity, x)
    return Link(
        -heat * x * delta,
        heat * (x / foot.exner - x_s * delta),
        -heat * (x + x_delta * delta),
        -heat * x_u * delta,
        -heat * x_v * delta,
        vapour,
        vapour_s + vapour_x * x_s,
        vapour_x * x_delta,
        vapour_x * x_u,
        vapour_x * x_v,
        vapour_q,
        drag * y,
        drag * y_s,
        drag * y_delta,
        drag * y_u,
        drag * y_v,
        net,
        ground,
        lost,
        lv,
    )  # fmt: skip


def footing(
    *, height: float, roughness_momentum: float, roughness_heat: float, emissivity: float, skin_capacity: float,
    skin_conductance: float, soil_conductivity: float, soil_capacity: float, pressure: float, exner: float,
    temperature: float, snow: float = 0.0,
) -> Footing:  # fmt: skip
    """Work out the constants of the lowest half cell; SI units, `skin_conductance` down to the first layer's middle."""
    log_m, log_h = neutral_logs(height, roughness_momentum, roughness_heat)
    heat = KARMAN**2 / (log_m * log_h)
    # Louis (1979), coefficient 5.3 of heat, used for momentum too
    factor = 5.3 * heat * 10.0 * math.sqrt((height + roughness_momentum) / roughness_momentum)
    return Footing(
        height, log_m, log_h, (KARMAN / log_m) ** 2, heat, factor, emissivity, skin_capacity, skin_conductance, soil_conductivity,
        soil_capacity, pressure, exner, pressure / (R_DRY * temperature), snow,
    )  # fmt: skip
