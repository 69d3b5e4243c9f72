"""Similarity of the surface layer: how wind, temperature and humidity change with height over the ground.

Unstable: Paulson 1970 (J. Appl. Meteorol. 9, 857) with the constant 16 of Dyer 1974 (Bound.-Layer Meteorol. 7, 363).
Stable: Beljaars & Holtslag 1991 (J. Appl. Meteorol. 30, 327) with a = 1, b = 2/3, c = 5, d = 0.35.

``zeta`` is height over the Obukhov length (positive: stable), without dimension, everywhere below.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from forcing.speed import kernel

DYER = 16.0  # Dyer 1974
BH_A, BH_B, BH_C, BH_D = 1.0, 2.0 / 3.0, 5.0, 0.35  # Beljaars & Holtslag 1991
BH_REST = BH_B * BH_C / BH_D
HALF_PI = 0.5 * math.pi


class Similarity(NamedTuple):
    """Integrated functions ``psi`` and gradients ``phi`` for momentum and heat at one zeta."""

    psi_momentum: float
    psi_heat: float
    phi_momentum: float
    phi_heat: float


@kernel
def unstable(zeta: float) -> Similarity:
    """Functions for ``zeta`` <= 0 (Paulson 1970, Dyer 1974)."""
    y = math.sqrt(1.0 - DYER * zeta)
    x = math.sqrt(y)
    log_heat = math.log(0.5 * (1.0 + y))
    psi_momentum = 2.0 * math.log(0.5 * (1.0 + x)) + log_heat - 2.0 * math.atan(x) + HALF_PI
    return Similarity(psi_momentum, 2.0 * log_heat, 1.0 / x, 1.0 / y)


@kernel
def stable(zeta: float) -> Similarity:
    """Functions for ``zeta`` >= 0 (Beljaars & Holtslag 1991)."""
    decay = math.exp(-BH_D * zeta)
    shared = BH_B * (zeta - BH_C / BH_D) * decay + BH_REST
    root = math.sqrt(1.0 + 2.0 / 3.0 * BH_A * zeta)
    slope = BH_B * decay * (1.0 + BH_C - BH_D * zeta)
    return Similarity(
        -(BH_A * zeta + shared),
        -(root * root * root - 1.0 + shared),
        1.0 + zeta * (BH_A + slope),
        1.0 + zeta * (BH_A * root + slope),
    )


@kernel
def similarity(zeta: float) -> Similarity:
    """Functions for any ``zeta``."""
    if zeta < 0.0:
        return unstable(zeta)
    return stable(zeta)


@kernel
def psi_momentum(zeta: float) -> float:
    """Integrated stability function of momentum."""
    return similarity(zeta).psi_momentum


@kernel
def psi_heat(zeta: float) -> float:
    """Integrated stability function of heat and humidity."""
    return similarity(zeta).psi_heat


@kernel
def phi_momentum(zeta: float) -> float:
    """Gradient function of momentum: (k z / u*) du/dz."""
    return similarity(zeta).phi_momentum


@kernel
def phi_heat(zeta: float) -> float:
    """Gradient function of heat and humidity: (k z / theta*) dtheta/dz."""
    return similarity(zeta).phi_heat


@kernel
def momentum_span(height: float, roughness: float, inverse_obukhov: float) -> float:
    """Integrated wind profile k u / u* from ``roughness`` to ``height`` [m]."""
    return (
        math.log(height / roughness)
        - psi_momentum(height * inverse_obukhov)
        + psi_momentum(roughness * inverse_obukhov)
    )


@kernel
def heat_span(height: float, roughness: float, inverse_obukhov: float) -> float:
    """Integrated profile k (theta - theta_0) / theta* from ``roughness`` to ``height`` [m]."""
    return math.log(height / roughness) - psi_heat(height * inverse_obukhov) + psi_heat(roughness * inverse_obukhov)


@kernel
def unstable_spans(
    wind_height: float, heat_height: float, z0m: float, z0h: float, log_m: float, log_h: float, x: float
) -> tuple[float, float, float, float]:
    """Spans of momentum and heat, and the phi differences that are x d(span)/dx, for 1/L = ``x`` < 0.

    The same as `momentum_span` and `heat_span`, written in one piece because it is what a run spends its time on.
    """
    k = -DYER * x
    top2 = math.sqrt(1.0 + k * wind_height)
    top = math.sqrt(top2)
    low2 = math.sqrt(1.0 + k * z0m)
    low = math.sqrt(low2)
    one = (1.0 + top) / (1.0 + low)
    momentum = log_m - math.log(one * one * (1.0 + top2) / (1.0 + low2)) + 2.0 * (math.atan(top) - math.atan(low))
    up = math.sqrt(1.0 + k * heat_height)
    down = math.sqrt(1.0 + k * z0h)
    heat = log_h - 2.0 * math.log((1.0 + up) / (1.0 + down))
    return momentum, heat, 1.0 / top - 1.0 / low, 1.0 / up - 1.0 / down


@kernel
def stable_spans(
    wind_height: float, heat_height: float, z0m: float, z0h: float, log_m: float, log_h: float, x: float
) -> tuple[float, float, float, float]:
    """As `unstable_spans` for 1/L = ``x`` >= 0."""
    zeta = wind_height * x
    decay = BH_B * math.exp(-BH_D * zeta)
    zeta0 = z0m * x
    decay0 = BH_B * math.exp(-BH_D * zeta0)
    momentum = log_m + BH_A * (zeta - zeta0) + (zeta - BH_C / BH_D) * decay - (zeta0 - BH_C / BH_D) * decay0
    slope = zeta * (BH_A + decay * (1.0 + BH_C - BH_D * zeta)) - zeta0 * (BH_A + decay0 * (1.0 + BH_C - BH_D * zeta0))
    if heat_height != wind_height:
        zeta = heat_height * x
        decay = BH_B * math.exp(-BH_D * zeta)
    zeta0 = z0h * x
    decay0 = BH_B * math.exp(-BH_D * zeta0)
    root = math.sqrt(1.0 + 2.0 / 3.0 * BH_A * zeta)
    root0 = math.sqrt(1.0 + 2.0 / 3.0 * BH_A * zeta0)
    heat = log_h + root**3 - root0**3 + (zeta - BH_C / BH_D) * decay - (zeta0 - BH_C / BH_D) * decay0
    slope_h = zeta * (BH_A * root + decay * (1.0 + BH_C - BH_D * zeta)) - zeta0 * (
        BH_A * root0 + decay0 * (1.0 + BH_C - BH_D * zeta0)
    )
    return momentum, heat, slope, slope_h
