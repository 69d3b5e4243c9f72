"""Long-wave during a run: one column scheme by day and by night, anchored once at the start."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from forcing.air import EPSILON, GRAVITY, KAPPA, P_REFERENCE, vapour_pressure
from forcing.emissivity import TABLE
from forcing.longwave import (
    column_emission,
    column_paths,
    downwelling,
    fluxes,
    formula_downwelling,
    heating,
    transmissivities,
)
from forcing.longwave_column import Anchor, anchor, radiation_levels, upper_air
from forcing.profile import Profile
from forcing.speed import kernel
from slab.column import as_numbers
from slab.night_grid import Column, Grid, Numbers, numbers
from slab.night_surface import Footing

Array = NDArray[np.float64]

LEVELS = 20  # by day only the flux at the ground is needed; 30 levels change it by less than 1 W m-2
MIXED_HEIGHT = 1000.0  # [m] below this the anchor is taken on yesterday's afternoon, not on the night's inversion
MATRIX_LASTS = 7200.0  # [s] transmissivities follow humidity, which changes slowly at night


class SkyColumn(NamedTuple):
    """Levels for the flux at the ground under a slab, upward from it.

    ``mass`` [kg m-2], ``pressure`` [Pa], ``exner``, and the start's ``temperature`` [K] and ``humidity``; ``warm`` and
    ``wet`` are work space; ``offset`` [W m-2]; switches ``formula`` (profile too low for its own emission),
    ``given`` (long-wave is measured) and ``shade`` (cumulus dim the computed short-wave).
    """

    mass: Sequence[float]
    pressure: Sequence[float]
    exner: Sequence[float]
    temperature: Sequence[float]
    humidity: Sequence[float]
    warm: list[float]
    wet: list[float]
    table: Sequence[float]
    offset: float
    formula: float
    given: float
    shade: float


@kernel
def longwave_under_slab(sky: SkyColumn, mass: float, theta: float, humidity: float, warmed: float, moistened: float,
                        cloud: float, cloud_pressure: float) -> float:  # fmt: skip
    """Downward long-wave at the ground [W m-2] under a slab of ``mass`` [kg m-2], ``theta`` [K] and ``humidity``."""
    surface = theta * sky.exner[0]
    if sky.formula > 0.0:
        at_base = theta * (cloud_pressure / P_REFERENCE) ** KAPPA
        return formula_downwelling(vapour_pressure(humidity, sky.pressure[0]), surface, cloud, at_base, sky.offset)
    for i in range(len(sky.mass)):
        if sky.mass[i] <= mass:
            sky.warm[i] = theta * sky.exner[i]
            sky.wet[i] = humidity
        else:
            sky.warm[i] = sky.temperature[i] + warmed * sky.exner[i]
            sky.wet[i] = max(sky.humidity[i] + moistened, 1e-7)
    return downwelling(sky.pressure, sky.warm, sky.wet, cloud, cloud_pressure, 0.0, sky.offset, sky.table)


def anchored(profile: Profile, warmest: float) -> Anchor:
    """Anchor of the clear-sky long-wave, on the column with its lowest kilometre as it was yesterday afternoon.

    The formula is known by day, not under a night's inversion, so the lowest kilometre is put on the dry adiabat from
    the ``warmest`` ground air [K] with its mean humidity first; the offset found there is kept.
    """
    low = profile.height <= MIXED_HEIGHT
    exner = (profile.pressure / P_REFERENCE) ** KAPPA
    theta = np.where(low, warmest / exner[0], profile.theta)
    mean = float(np.mean(profile.humidity[low]))
    humidity = np.where(low, mean, profile.humidity)
    levels = radiation_levels(profile.pressure, theta * exner, humidity)
    vapour = mean * profile.surface_pressure / EPSILON
    return anchor(levels, profile_depth=float(profile.height[-1]), vapour_pressure=vapour, temperature=warmest)


def sky_column(pressure: Array, temperature: Array, humidity: Array, held: Anchor, *, given: bool,
               shade: bool) -> SkyColumn:  # fmt: skip
    """Levels for the day from a column (n,) [Pa, K, kg/kg]."""
    levels = radiation_levels(pressure, temperature, humidity, count=LEVELS)
    p = np.asarray(levels.pressure)
    return SkyColumn(
        as_numbers((p[0] - p) / GRAVITY), levels.pressure, as_numbers((p / P_REFERENCE) ** KAPPA), levels.temperature,
        levels.humidity, numbers(np.zeros(LEVELS)), numbers(np.zeros(LEVELS)), TABLE, held.offset,  # type: ignore[arg-type]
        0.0 if held.uses_column else 1.0, 1.0 if given else 0.0, 1.0 if shade else 0.0,
    )  # fmt: skip


class NightSky:
    """Long-wave of a night's column: fluxes and heating of its cells below fixed air.

    Transmissivities are kept for two hours; temperatures, and with them fluxes and heating, are always present ones.
    """

    def __init__(self, pressure: Array, temperature: Array, humidity: Array, held: Anchor, *, given: bool) -> None:
        self._column = (pressure, temperature, humidity)
        self._held = held
        self.given = given
        self._age = MATRIX_LASTS
        self._ready = False

    def _prepare(self, grid: Grid) -> None:
        cells = len(grid.mass)
        edge = [self._column[0][0]]
        for mass in grid.mass:
            edge.append(edge[-1] - GRAVITY * mass)
        self._pressure = numbers(np.array(edge))
        self._exner = numbers((np.asarray(grid.pressure) / P_REFERENCE) ** KAPPA)
        self._upper = upper_air(*self._column, column_top=float(edge[-1]))
        above = radiation_levels(*self._column, count=len(self._upper.water) + 1, bottom=float(edge[-1])).pressure
        self._interfaces = np.concatenate((edge, above[1:]))
        count = cells + 1 + len(self._upper.water)
        self._water, self._carbon, self._emission = (numbers(np.zeros(count)) for _ in range(3))
        self._matrix = numbers(np.zeros((cells + 1) * count))
        self._down, self._up = numbers(np.zeros(cells + 1)), numbers(np.zeros(cells + 1))
        self._rate, self._temperature = numbers(np.zeros(cells)), numbers(np.zeros(cells))
        self._ready = True

    def fluxes(self, grid: Grid, state: Column, foot: Footing, cloud: float, cloud_pressure: float,
               elapsed: float) -> tuple[float, Numbers]:  # fmt: skip
        """Downward flux at the ground [W m-2] and heating of the cells' theta [K s-1], ``elapsed`` [s] after the last call."""
        if not self._ready:
            self._prepare(grid)
        cells = len(grid.mass)
        for i in range(cells):
            self._temperature[i] = state.theta[i] * self._exner[i]
        self._age += elapsed
        if self._age >= MATRIX_LASTS:
            column_paths(self._pressure, self._temperature, state.humidity, self._upper.water, self._upper.carbon,
                         self._water, self._carbon)  # fmt: skip
            transmissivities(self._water, self._carbon, cells + 1, TABLE, self._matrix)
            self._age = 0.0
        column_emission(self._pressure, self._temperature, self._upper.emission, self._emission)
        level = int(np.searchsorted(-self._interfaces, -cloud_pressure))
        fluxes(self._matrix, self._emission, 0.0, state.skin[0], foot.emissivity, cloud, level, self._held.offset,
               self._down, self._up)  # fmt: skip
        heating(self._pressure, self._down, self._up, self._rate)
        for i in range(cells):
            self._rate[i] /= self._exner[i]
        down = self._down[0]
        if not self._held.uses_column:
            vapour = vapour_pressure(state.humidity[0], foot.pressure)
            base = state.theta[min(level, cells - 1)] * self._exner[min(level, cells - 1)]
            down = formula_downwelling(vapour, state.theta[0] * foot.exner, cloud, base, self._held.offset)
        return down, self._rate
