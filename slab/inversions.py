"""The air next to the ground: the surface inversion by two stated rules, and the superadiabatic surface layer."""

from __future__ import annotations

from dataclasses import dataclass
from math import nan
from typing import Final

import numpy as np
from numpy.typing import NDArray

from forcing.sounding import Profile

Array = NDArray[np.float64]

BASE_LIMIT: Final = 100.0
"""m: an inversion with a higher base is not a surface inversion."""
BREAK_DEPTH: Final = 30.0
"""m: thinner breaks are ignored."""
BREAK_DROP: Final = 0.3
"""K: weaker breaks are ignored."""
TABLE_STEP: Final = 10.0
"""m: grid of the tables' rule."""
TABLE_REACH: Final = 100.0
"""m: how far ahead the tables' rule looks."""
EQUAL: Final = 3e-3
"""K: closer temperatures are equal, half the last digit of a reading; a level put into an isothermal stretch along
potential temperature lies up to that much off."""
SUPERADIABATIC_SLOPE: Final = 1.0
"""K/km of potential temperature: a weaker fall counts as dry adiabatic (readings come in steps of 0.1 K)."""
SUPERADIABATIC_EXCESS: Final = 0.3
"""K: a weaker excess is within the noise of a release (our choice)."""
SUPERADIABATIC_LIMIT: Final = 300.0
"""m: the layer next to the ground is thinner than this; tens of metres is usual (Santoso & Stull 2001, J. Atmos.
Sci. 58, 1446)."""


@dataclass(frozen=True, slots=True)
class Inversion:
    """A surface inversion under a named rule.

    Attributes
    ----------
    definition : str
        The rule.
    base, top : float
        m above ground. Without an inversion the base is NaN and the top 0.
    strength : float
        K, top minus lowest level; 0 without an inversion.
    """

    definition: str
    base: float
    top: float
    strength: float

    @property
    def present(self) -> bool:
        """Whether the rule finds an inversion."""
        return self.top > 0.0


@dataclass(frozen=True, slots=True)
class SurfaceLayer:
    """A superadiabatic layer on the ground: depth [m] and excess of potential temperature over its top [K]."""

    depth: float
    excess: float


RULES: Final[dict[str, str]] = {
    "rising": "lowest level where temperature stops rising, breaks under 30 m or 0.3 K ignored, base below 100 m",
    "tables": "10 m grid, climb while it is warmer 100 m higher, then the warmest point passed or 100 m ahead",
}


def _climb(height: Array, temperature: Array, start: int) -> int:
    """Index of the level where temperature, rising from `start`, stops rising."""
    top = start
    for j in range(start + 1, height.size):
        if temperature[j] > temperature[top] + EQUAL:
            top = j
        elif height[j] - height[top] >= BREAK_DEPTH and temperature[top] - temperature[j] >= BREAK_DROP:
            break
    return top


def rising_inversion(height: Array, temperature: Array) -> Inversion:
    """Surface inversion on levels: base below 100 m, top where temperature stops rising.

    A break is a stretch in which temperature does not pass its value below; it ends the inversion only when it is
    at least 30 m thick and 0.3 K deep. Where two stretches start below 100 m the stronger one counts.

    Parameters
    ----------
    height, temperature : ndarray, shape (n,)
        m above ground (increasing from the lowest level), K.
    """
    best, base = 0, -1
    gain = 0.0
    i = 0
    while i < height.size - 1 and height[i] < BASE_LIMIT:
        top = _climb(height, temperature, i) if temperature[i + 1] > temperature[i] + EQUAL else i
        if top > i and temperature[top] - temperature[i] > gain:
            best, base, gain = top, i, float(temperature[top] - temperature[i])
        i = max(top, i + 1)
    if base < 0:
        return Inversion("rising", nan, 0.0, 0.0)
    return Inversion("rising", float(height[base]), float(height[best]), float(temperature[best] - temperature[0]))


def tables_inversion(height: Array, temperature: Array) -> Inversion:
    """Surface inversion by the rule of the observed tables, on a 10 m grid from the lowest level.

    Climb while the temperature 100 m higher exceeds the one here; the top is the warmest point of all that was
    passed and of the 100 m ahead. It does not see inversions shallower than about 100 m over falling temperature,
    and bridges breaks thinner than 100 m.
    """
    z = np.arange(0.0, float(height[-1]) + 1e-6, TABLE_STEP)
    t = np.interp(z, height, temperature)
    ahead = round(TABLE_REACH / TABLE_STEP)
    stop = np.flatnonzero(t[ahead:] <= t[:-ahead] + EQUAL) if z.size > ahead else np.zeros(1, dtype=np.intp)
    end = int(stop[0]) if stop.size else z.size - 1 - ahead
    if end == 0:
        return Inversion("tables", nan, 0.0, 0.0)
    passed = t[: end + ahead + 1]
    top = int(np.flatnonzero(passed >= passed.max() - EQUAL)[0])
    return Inversion("tables", 0.0, float(z[top]), float(t[top] - t[0]))


def surface_inversions(profile: Profile) -> tuple[Inversion, Inversion]:
    """Both rules on one profile: `rising` first, then `tables`."""
    temperature = profile.temperature
    return rising_inversion(profile.height, temperature), tables_inversion(profile.height, temperature)


def superadiabatic_layer(profile: Profile) -> SurfaceLayer | None:
    """The layer from the lowest level up in which temperature falls faster than dry adiabatically, or None.

    Climbs while potential temperature falls by more than 1 K/km, at most to 300 m; an excess under 0.3 K is read
    as noise. With coarse levels the depth is the height of the next level, so an upper bound.
    """
    height, theta = profile.height, profile.theta
    top = 0
    while (
        top + 1 < height.size
        and height[top + 1] <= SUPERADIABATIC_LIMIT
        and theta[top] - theta[top + 1] > SUPERADIABATIC_SLOPE / 1000.0 * (height[top + 1] - height[top])
    ):
        top += 1
    excess = float(theta[0] - theta[top])
    return SurfaceLayer(float(height[top]), excess) if excess >= SUPERADIABATIC_EXCESS else None
