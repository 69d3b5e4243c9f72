"""What the free air does by itself in fair weather: it cools by long-wave radiation, and sinks as much as that asks for.

Without sinking, cooling of 2 K a day would act on the air aloft unopposed; between soundings half a day apart fair-weather
air aloft changes far less than that (see `tests/bench/observed_pairs.py`). Balance of the two is the textbook state of
undisturbed air; where a scenario gives its own divergence, that is used instead.
"""

from __future__ import annotations

from dataclasses import replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from forcing.air import CP_DRY, GRAVITY, KAPPA, P_REFERENCE
from forcing.emissivity import TABLE
from forcing.longwave import column_emission, column_paths, fluxes, transmissivities
from forcing.longwave_column import radiation_levels
from forcing.sounding import Profile
from forcing.speed import COMPILED

LOW, HIGH = 1000.0, 4000.0  # [m above ground] the air whose cooling stands for the free air
LEVELS = 25
CAP = 2000.0  # [m] sinking grows linearly up to here, then is constant (our choice; said beside the key of the scenario)
STABLE_FROM = 2000.0  # [m] the gradient that sinking acts on is read from here to `HIGH`
LEAST_GRADIENT = 0.002  # [K m-1] below this the balance would ask for sinking that nobody sees
MOST = 1e-5  # [s-1]
MIXED_EXCESS, SHALLOW, GRADIENT_OVER = 0.5, 100.0, 500.0  # [K], [m], [m]: our choice


class FreeAir(NamedTuple):
    """Long-wave heating of potential temperature [K s-1, negative cools] and the divergence [s-1] that balances it."""

    heating: float
    divergence: float


def own_layer_top(profile: Profile) -> float:
    """Top [m above ground] of the layer that a profile's own ground has made: mixed by day, stable by night.

    By day the first height over the minimum of virtual potential temperature below 4 km that exceeds it by 0.5 K; where
    that is under 100 m, the warmest level of the lowest kilometre, which is the top of a surface inversion.
    """
    virtual = profile.virtual_theta
    near = profile.height <= HIGH
    coldest = int(np.argmin(np.where(near, virtual, np.inf)))
    over = np.flatnonzero((virtual > virtual[coldest] + MIXED_EXCESS) & (profile.height > profile.height[coldest]))
    top = float(profile.height[over[0]]) if over.size else float(profile.height[-1])
    if top >= SHALLOW:
        return top
    low = profile.height <= 1000.0
    return max(top, float(profile.height[int(np.argmax(np.where(low, profile.temperature, -np.inf)))]))


def free_from(profile: Profile) -> float:
    """Height [m above ground] from which a profile is free air, clear of its own layer and that layer's top."""
    return 1.15 * own_layer_top(profile) + 50.0


def without_own_layer(profile: Profile) -> Profile:
    """A profile whose own layer is replaced by free air: theta continued downward by the gradient of the 500 m above it,
    humidity held, wind as it is. What a layer has become by its own ground must not act on a computed layer once more."""
    base = free_from(profile)
    if base + GRADIENT_OVER > float(profile.height[-1]):
        return profile
    at, over = (float(np.interp(z, profile.height, profile.theta)) for z in (base, base + GRADIENT_OVER))
    slope = max((over - at) / GRADIENT_OVER, LEAST_GRADIENT)
    below = profile.height < base
    theta = np.where(below, at + slope * (profile.height - base), profile.theta)
    humidity = np.where(below, float(np.interp(base, profile.height, profile.humidity)), profile.humidity)
    return replace(profile, theta=theta, humidity=humidity)


def free_air(profile: Profile) -> FreeAir:
    """Mean long-wave heating from 1 to 4 km above ground, and the sinking that balances it.

    The heating is taken to be the same at all heights, slab included, as the day's budgets ask of any heating that acts on
    the profile aloft.
    """
    heating = _heating(profile)
    top = min(HIGH, float(profile.height[-1]))
    if top < STABLE_FROM + 500.0:
        return FreeAir(heating, 0.0)
    low, high = (float(np.interp(z, profile.height, profile.theta)) for z in (STABLE_FROM, top))
    gradient = max((high - low) / (top - STABLE_FROM), LEAST_GRADIENT)
    return FreeAir(heating, min(MOST, max(0.0, -heating / gradient / CAP)))


def _sequence(values: NDArray[np.float64]) -> list[float]:
    if COMPILED:
        return np.ascontiguousarray(values)  # type: ignore[return-value]
    plain: list[float] = values.tolist()
    return plain


def _heating(profile: Profile) -> float:
    levels = radiation_levels(profile.pressure, profile.temperature, profile.humidity, count=LEVELS)
    p, t, q = (np.asarray(x) for x in levels)
    n = LEVELS - 1
    middle_t, middle_q = _sequence(0.5 * (t[1:] + t[:-1])), _sequence(0.5 * (q[1:] + q[:-1]))
    none = _sequence(np.zeros(0))
    water, carbon, emission = (_sequence(np.zeros(n + 1)) for _ in range(3))
    matrix, down, up = _sequence(np.zeros((n + 1) ** 2)), _sequence(np.zeros(n + 1)), _sequence(np.zeros(n + 1))
    column_paths(levels.pressure, middle_t, middle_q, none, none, water, carbon)
    column_emission(levels.pressure, middle_t, none, emission)
    transmissivities(water, carbon, n + 1, TABLE, matrix)
    fluxes(matrix, emission, 0.0, float(t[0]), 1.0, 0.0, n + 1, 0.0, down, up)
    low, high = (int(np.argmin(np.abs(p - _pressure_at(profile, z)))) for z in (LOW, HIGH))
    gained = (down[high] - up[high]) - (down[low] - up[low])
    rate = gained * GRAVITY / (CP_DRY * (p[low] - p[high]))
    return float(rate / (0.5 * (p[low] + p[high]) / P_REFERENCE) ** KAPPA)


def _pressure_at(profile: Profile, height: float) -> float:
    """Pressure [Pa] at a height [m above ground]; beyond the profile it keeps falling by its last scale height."""
    z, logs = profile.height, np.log(profile.pressure)
    if height <= z[-1]:
        return float(np.exp(np.interp(height, z, logs)))
    scale = (z[-1] - z[0]) / (logs[0] - logs[-1])
    return float(profile.pressure[-1] * np.exp(-(height - z[-1]) / scale))

