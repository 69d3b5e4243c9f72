"""What a night column says: depth of turbulence, temperatures near the ground, regime, dew, frost and fog.

Kernels. Heights are above displacement + roughness length.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from forcing.air import CP_DRY, GRAVITY, KAPPA, KARMAN, P_REFERENCE, ZERO_CELSIUS, saturation_humidity
from forcing.similarity import heat_span, momentum_span
from forcing.speed import kernel
from slab.night_grid import Column, Grid, Numbers
from slab.night_surface import ENERGY, Footing, Link

STRESS_SHARE = (
    0.05  # depth: where stress falls to this share of the surface value, divided by 1 - share (Beare et al. 2006)
)
CROSSING_HEIGHT = (
    40.0  # [m] where the wind stays about constant in the evening: "some decametres" (Van de Wiel et al. 2012)
)
STABLE_SLOPE = 5.0  # phi = 1 + 5 z/L in the maximum flux (alpha of Van de Wiel et al. 2012)
STEEPEST = 2.0  # [m-1] bound on |1/L|, only reached when turbulence has died
SIMILARITY_TOP = 30.0  # [m] above it the column is read linearly
TURBULENT, INTERMITTENT, VERY_STABLE, UNSTABLE = 0, 1, 2, 3
REGIMES = ("turbulent", "intermittent", "very stable", "unstable")
DRY_ADIABATIC = GRAVITY / CP_DRY  # [K m-1]
VERY_STABLE_SHARE = 0.5  # flux possible / flux needed below which the night is called very stable (our choice)


class Air(NamedTuple):
    """Temperature [K], specific humidity [kg/kg] and wind speed [m/s] at one height."""

    temperature: float
    humidity: float
    wind: float


@kernel
def friction_velocity(foot: Footing, state: Column, ground: Link) -> float:
    """u* [m s-1] from the drag on the lowest cell."""
    return math.sqrt(ground.drag * math.sqrt(state.u[0] * state.u[0] + state.v[0] * state.v[0]) / foot.density)


@kernel
def inverse_obukhov(foot: Footing, state: Column, ground: Link) -> float:
    """1/L [m-1], positive when stable, bounded by 2 per metre."""
    friction = friction_velocity(foot, state, ground)
    cube = friction * friction * friction
    flux = -KARMAN * GRAVITY * ground.heat / (foot.density * state.theta[0])
    if abs(flux) >= STEEPEST * cube:
        if flux == 0.0:
            return 0.0
        return STEEPEST if flux > 0.0 else -STEEPEST
    return flux / cube


@kernel
def stress_depth(grid: Grid, state: Column, exchange: Numbers, ground: Link) -> float:
    """Height [m] where the stress falls to 5 % of its surface value, divided by 0.95; linear between interfaces."""
    u, v = state.u, state.v
    surface = ground.drag * math.sqrt(u[0] * u[0] + v[0] * v[0])
    target = STRESS_SHARE * surface
    below = surface
    height = 0.0
    for i in range(len(u) - 1):
        du = u[i + 1] - u[i]
        dv = v[i + 1] - v[i]
        here = exchange[i] * math.sqrt(du * du + dv * dv)
        if here <= target:  # equal where there is no stress at all: a depth of nothing
            if below > here:
                height += (below - target) / (below - here) * (grid.interface[i] - height)
            return height / (1.0 - STRESS_SHARE)
        below = here
        height = grid.interface[i]
    return grid.interface[len(u) - 2] / (1.0 - STRESS_SHARE)


@kernel
def _cell_below(grid: Grid, height: float) -> int:
    i = 0
    while i < len(grid.height) - 2 and grid.height[i + 1] <= height:
        i += 1
    return i


@kernel
def read_air(
    grid: Grid, foot: Footing, state: Column, ground: Link, roughness_momentum: float, roughness_heat: float, height: float
) -> Air:  # fmt: skip
    """Air at ``height`` [m]: by similarity between skin and lowest cell and between the cells up to 30 m, linear above.

    The similarity profile only spreads the difference between two levels of the column, so it never contradicts them.
    Humidity below the lowest cell is held at the cell's value less the vapour flux over the same transfer.
    """
    stable = inverse_obukhov(foot, state, ground)
    first = grid.height[0]
    if height <= first:
        at = height + roughness_momentum
        top = first + roughness_momentum
        whole = heat_span(top, roughness_heat, stable)
        share = min(1.0, max(0.0, heat_span(at, roughness_heat, stable) / whole))
        skin = state.skin[0] / foot.exner
        theta = skin + share * (state.theta[0] - skin)
        friction = friction_velocity(foot, state, ground)
        per_flux = heat_span(top, at, stable) / (KARMAN * max(friction, 0.01) * foot.density)
        humidity = max(state.humidity[0] + ground.vapour * per_flux, 1e-7)
        wind_share = momentum_span(at, roughness_momentum, stable) / momentum_span(top, roughness_momentum, stable)
        u = state.u[0] * max(wind_share, 0.0)
        v = state.v[0] * max(wind_share, 0.0)
    else:
        i = _cell_below(grid, height)
        low = grid.height[i]
        high = grid.height[i + 1]
        share = min(1.0, (height - low) / (high - low))
        wind_share = share
        if high <= SIMILARITY_TOP:
            base = low + roughness_momentum
            share = heat_span(height + roughness_momentum, base, stable) / heat_span(
                high + roughness_momentum, base, stable
            )
            wind_share = momentum_span(height + roughness_momentum, base, stable) / momentum_span(
                high + roughness_momentum, base, stable
            )
        theta = state.theta[i] + share * (state.theta[i + 1] - state.theta[i])
        humidity = state.humidity[i] + share * (state.humidity[i + 1] - state.humidity[i])
        u = state.u[i] + wind_share * (state.u[i + 1] - state.u[i])
        v = state.v[i] + wind_share * (state.v[i + 1] - state.v[i])
    temperature = theta * foot.exner - DRY_ADIABATIC * height
    return Air(temperature, humidity, math.sqrt(u * u + v * v))


@kernel
def largest_flux(wind: float, height: float, log_ratio: float, theta: float, density: float) -> float:
    """Largest downward heat flux [W m-2] that turbulence can carry for this wind at ``height``.

    With phi = 1 + 5 z/L the flux at fixed wind has a maximum over the temperature contrast, (4 / 27) (k / ln)^2 theta U^3 /
    (5 g z) (derived from the similarity profiles; the mechanism of Van de Wiel et al. 2012).
    """
    k = KARMAN / log_ratio
    return density * CP_DRY * 4.0 / 27.0 * k * k * theta * wind * wind * wind / (STABLE_SLOPE * GRAVITY * height)


@kernel
def minimum_wind(needed: float, height: float, log_ratio: float, theta: float, density: float) -> float:
    """Least wind [m s-1] at ``height`` that sustains turbulence against a loss ``needed`` [W m-2]; 0 without a loss.

    Inverse of `largest_flux`; needed is net radiative loss less the heat from the soil (Van de Wiel et al. 2012).
    """
    if needed <= 0.0:
        return 0.0
    return math.pow(needed / largest_flux(1.0, height, log_ratio, theta, density), 1.0 / 3.0)


@kernel
def flux_needed(boundary: int, foot: Footing, ground: Link) -> float:
    """Downward heat flux [W m-2] that the skin asks for: net radiative loss less heat from the soil, at present.

    As Van de Wiel et al. (2012) use it (recalled). A skin kept as warm as the air by mixing would lose more, so that this is
    a lower bound once the skin has gone cold. With other boundaries than the energy balance: the flux there is.
    """
    if boundary != ENERGY:
        return max(0.0, -CP_DRY * foot.exner * ground.heat)
    return max(0.0, ground.ground - ground.net_radiation)


@kernel
def regime(needed: float, possible: float, heat_flux: float) -> int:
    """Index into `REGIMES` from the flux needed and possible [W m-2] and the surface heat flux (positive upward)."""
    if heat_flux > 0.0:
        return UNSTABLE
    if needed <= possible:
        return TURBULENT
    if possible < VERY_STABLE_SHARE * needed:
        return VERY_STABLE
    return INTERMITTENT


@kernel
def fog_depth(grid: Grid, state: Column) -> float:
    """Depth [m] of the saturated cells that reach down to the ground; 0 where the lowest cell is not saturated."""
    depth = 0.0
    for i in range(len(state.theta)):
        pressure = grid.pressure[i]
        temperature = state.theta[i] * (pressure / P_REFERENCE) ** KAPPA
        if state.humidity[i] < saturation_humidity(temperature, pressure):
            return depth
        depth += grid.thickness[i]
    return depth


@kernel
def rime(skin: float, vapour_flux: float) -> int:
    """0 dry, 1 dew, 2 hoar frost: what the vapour flux (positive upward) leaves on a skin of this temperature [K]."""
    if vapour_flux >= 0.0:
        return 0
    return 2 if skin < ZERO_CELSIUS else 1


@kernel
def heat_content(grid: Grid, state: Column) -> float:
    """Sum of mass x potential temperature over the column [K kg m-2]."""
    total = 0.0
    for i in range(len(state.theta)):
        total += grid.mass[i] * state.theta[i]
    return total


@kernel
def sinking_rates(divergence: float, grid: Grid, values: Numbers, beyond: float, out: Numbers) -> None:
    """Add to ``out`` the change [per s] of a quantity by air sinking at w = -D z (rising where D < 0), upwind.

    ``beyond`` is the quantity one cell above the top: what sinks into the column.
    """
    last = len(values) - 1
    for i in range(last + 1):
        if i == last and divergence > 0.0:
            slope = (beyond - values[last]) / grid.thickness[last]
        else:
            j = i if divergence > 0.0 else max(i - 1, 0)
            slope = (values[j + 1] - values[j]) * grid.inverse_spacing[j]
        out[i] += divergence * grid.height[i] * slope
