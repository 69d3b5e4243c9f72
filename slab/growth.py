"""Mixed-layer growth: entrainment closures and the budgets of a zero-order jump.

Budgets of heat, moisture and momentum of a slab under a sharp jump: Lilly (1968), Carson (1973), Tennekes (1973),
Tennekes and Driedonks (1981). The slab is carried by its *deficit* against the air aloft, Q = M theta_m - integral
of the profile over the slab's mass M: without sinking dQ/dt is the surface flux alone, so both budgets close to
round-off. All fluxes are mass fluxes: heat [K kg m-2 s-1], vapour [kg m-2 s-1], entrainment [kg m-2 s-1].
"""

from __future__ import annotations

import math
from typing import NamedTuple

from forcing.air import CP_DRY, GRAVITY, KAPPA, VIRTUAL, saturation_humidity
from forcing.speed import kernel
from slab.column import Aloft, Sample, blended, locate

SMALLEST_JUMP = 1e-6  # [K] keeps the growth rate finite where the air aloft is neutral; the growth cap then decides
ENTRAINMENT_ZONE = 0.25  # thickness over depth of the layer, centred on its top (common practice)
SHEAR_IN_CAP = 5.0  # u*^3 beside w*^3 in the velocity scale of the growth cap (our choice, of the order of published ones)


class Closure(NamedTuple):
    """Entrainment closure: flux ratio, shear and spin-up factors of Batchvarova and Gryning (1991).

    ``growth_cap`` limits growth to that share of the mixed-layer velocity scale (0: no cap); ``encroachment`` 1 sets
    the depth by heat alone, without a jump.
    """

    flux_ratio: float
    shear_factor: float
    spin_up_factor: float
    growth_cap: float
    encroachment: float


ENCROACHMENT = Closure(0.0, 0.0, 0.0, 0.0, 1.0)
BUOYANT = Closure(0.2, 0.0, 0.0, 0.5, 0.0)
SHEARED = Closure(0.2, 2.5, 8.0, 0.5, 0.0)
CLOSURES = {"encroachment": ENCROACHMENT, "buoyant": BUOYANT, "sheared": SHEARED}


class Slab(NamedTuple):
    """Mixed-layer state at one instant, derived from mass and deficits."""

    theta: float
    humidity: float
    jump_theta: float
    jump_humidity: float
    jump_virtual: float
    air: Sample


@kernel
def velocity_scale(depth: float, buoyancy_flux: float, theta: float) -> float:
    """Convective velocity w* [m s-1] from the kinematic virtual flux [K m s-1] (Deardorff 1970); 0 where it is down."""
    if buoyancy_flux <= 0.0:
        return 0.0
    return math.exp(math.log(GRAVITY * depth * buoyancy_flux / theta) / 3.0)


@kernel
def entrainment(closure: Closure, virtual_flux: float, friction_velocity: float, depth: float, theta: float,
                jump_virtual: float) -> float:  # fmt: skip
    """Entrainment velocity [m s-1] of air into the slab.

    w_e = [a F_v + b u*^3 theta / (g h)] / [jump_v + c u*^2 theta / (g h)] (Batchvarova and Gryning 1991, 1994), with
    F_v the kinematic virtual surface flux [K m s-1], positive upward; never negative; capped by the share
    ``growth_cap`` of the velocity scale (w*^3 + 5 u*^3)^(1/3), which ends the burst into a neutral residual layer.
    """
    ratio = theta / (GRAVITY * depth)
    supply = closure.flux_ratio * virtual_flux + closure.shear_factor * friction_velocity**3 * ratio
    if supply <= 0.0:
        return 0.0
    resist = jump_virtual + closure.spin_up_factor * friction_velocity**2 * ratio
    speed = supply / max(resist, SMALLEST_JUMP)
    if closure.growth_cap > 0.0:
        scale = velocity_scale(depth, virtual_flux, theta) ** 3 + SHEAR_IN_CAP * friction_velocity**3
        speed = min(speed, closure.growth_cap * scale ** (1.0 / 3.0))
    return speed


@kernel
def slab_at(mass: float, heat: float, vapour: float, air: Sample) -> Slab:
    """State of a slab of mass M [kg m-2] with deficits of heat [K kg m-2] and vapour [kg m-2]."""
    theta = (heat + air.sum_theta) / mass
    humidity = (vapour + air.sum_humidity) / mass
    jump_virtual = air.theta * (1.0 + VIRTUAL * air.humidity) - theta * (1.0 + VIRTUAL * humidity)
    return Slab(theta, humidity, air.theta - theta, air.humidity - humidity, jump_virtual, air)


@kernel
def encroached_mass(air: Aloft, later: Aloft, weight: float, heat: float, vapour: float, sunk: float,
                    least: float) -> float:  # fmt: skip
    """Mass [kg m-2] at which the slab's virtual temperature first meets the profile's, from ``least`` upward.

    Walks the table's levels, then narrows the one where the jump changes sign by false position with halved weights (the
    Illinois rule); the mass of the table's top where it never does.
    """
    mass = air.mass
    top = mass[len(mass) - 1]
    low = least
    below = slab_at(low, heat, vapour, blended(air, later, low, sunk, weight)).jump_virtual
    if below >= 0.0:
        return low
    i = locate(mass, least) + 1
    high = top
    above = -1.0
    while i < len(mass):
        above = slab_at(mass[i], heat, vapour, blended(air, later, mass[i], sunk, weight)).jump_virtual
        if above >= 0.0:
            high = mass[i]
            break
        low = mass[i]
        below = above
        i += 1
    if i >= len(mass):
        return top
    kept = 0
    for _ in range(60):
        if high - low <= 1e-12 * high or above <= 1e-12:
            break
        middle = high - above * (high - low) / (above - below)
        here = slab_at(middle, heat, vapour, blended(air, later, middle, sunk, weight)).jump_virtual
        if here >= 0.0:
            high = middle
            above = here
            below *= 0.5 if kept == 1 else 1.0
            kept = 1
        else:
            low = middle
            below = here
            above *= 0.5 if kept == -1 else 1.0
            kept = -1
    return high


@kernel
def humidity_spread(jump_humidity: float, entrainment_velocity: float, convective_velocity: float) -> float:
    """Standard deviation of humidity [kg kg-1] at the layer's top, made by entrainment of dry air.

    sigma_q^2 = jump_q^2 (w_e / w*) (h / delta) (Neggers, Stevens and Neelin 2006; recalled), with an entrainment zone
    delta of a quarter of h.
    """
    share = max(entrainment_velocity, 1e-4) / convective_velocity
    return max(abs(jump_humidity) * math.sqrt(share / ENTRAINMENT_ZONE), 1e-5)


@kernel
def cumulus_fraction(humidity: float, top_temperature: float, top_pressure: float, depth: float, jump_humidity: float,
                     entrainment_velocity: float, convective_velocity: float) -> float:  # fmt: skip
    """Area fraction [0..0.5] of cumulus rooted in the mixed layer, 0 below a condensation level over the entrainment zone.

    A Gaussian-like humidity distribution at the layer's top, fraction = 0.5 + 0.36 atan(1.55 (q - q_sat) / sigma_q)
    (Cuijpers and Bechtold 1995; recalled), sigma_q as in `humidity_spread`. The tail of
    that distribution never ends, but the slab's air rises no higher than the zone's top: the fraction fades out as the
    condensation level moves from the slab's top to the zone's (our choice).
    """
    if convective_velocity <= 0.0:
        return 0.0
    rise = 0.5 * ENTRAINMENT_ZONE * depth
    zone_temperature = top_temperature - GRAVITY * rise / CP_DRY
    zone_pressure = top_pressure * (zone_temperature / top_temperature) ** (1.0 / KAPPA)
    at_top = saturation_humidity(top_temperature, top_pressure)
    at_zone = saturation_humidity(zone_temperature, zone_pressure)
    reached = (humidity - at_zone) / max(at_top - at_zone, 1e-9)
    if reached <= 0.0:
        return 0.0
    excess = (humidity - at_top) / humidity_spread(jump_humidity, entrainment_velocity, convective_velocity)
    return min(1.0, reached) * min(0.5, max(0.0, 0.5 + 0.36 * math.atan(1.55 * excess)))
