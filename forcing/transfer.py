"""The two unknowns of the surface, skin temperature and stability, solved together.

At a given resistance the skin temperature follows from the energy balance (all terms fall with it, so there is one
answer). Around it stands the stability: in unstable air Newton's rule on the logarithms of resistance and friction
velocity, with the convective gusts of Beljaars 1995 (Q. J. R. Meteorol. Soc. 121, 255) in the wind; in stable air a
bracketed Newton's rule on the inverse Obukhov length. The derivatives are exact, so that a warm start needs two or three
rounds. Named tuples are unpacked into local names first, which plain Python reads much faster.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from forcing.air import (
    EPSILON,
    GRAVITY,
    KARMAN,
    R_VAPOUR,
    VIRTUAL,
    latent_heat,
    saturation_vapour_pressure,
    saturation_vapour_pressure_ice,
)
from forcing.similarity import stable_spans, unstable_spans
from forcing.speed import kernel

GUSTINESS = 1.2  # share of the convective velocity that acts as wind, Beljaars 1995 (recalled)
CALM_WIND = 0.5  # m s-1: meandering and slope winds keep at least this much shear in calm air (common practice)
ZETA_MAX = 5.0  # stability is held beyond; Beljaars & Holtslag 1991 were fitted to about 10 (recalled)
TOLERANCE = 1e-5  # of the last Newton step; the error left is its square
ROUNDS = 60
STEP_MAX = 40.0  # K in one round
SUBLIMATION = 2.834e6  # J kg-1 (Murphy & Koop 2005 near 0 degrees C); what leaves snow leaves as vapour
SETTLED = 2e-5  # K, last step of the skin temperature within the rounds for stability


class Balance(NamedTuple):
    """Coefficients of the energy balance of the skin; SI, fluxes in W m-2."""

    absorbed: float  # all that does not depend on the skin: sun, sky, anthropogenic
    emission: float  # W m-2 K-4
    soil_conductance: float  # W m-2 K-1
    soil_temperature: float
    air_temperature: float
    humidity: float
    pressure: float
    heat_capacity: float  # rho cp [J m-3 K-1]
    latent_capacity: float  # rho Lv [J m-3]
    resistance: float  # of the surface to vapour [s m-1]
    ceiling: float  # highest skin temperature [K], melting point over snow
    ice: float  # 1: saturation over ice
    latent_heat: float  # J kg-1
    virtual_air: float  # virtual temperature of the air
    wind: float
    depth: float


class Geometry(NamedTuple):
    """Heights above displacement and roughness lengths [m], and the logarithms of their ratios."""

    wind_height: float
    heat_height: float
    roughness_momentum: float
    roughness_heat: float
    log_momentum: float
    log_heat: float


class Transfer(NamedTuple):
    """Solution: skin temperature [K], resistance [s m-1], friction velocity [m s-1], 1/L [m-1], rounds used."""

    skin: float
    resistance: float
    friction: float
    inverse_obukhov: float
    rounds: float


@kernel
def skin_humidity(pressure: float, ice: float, temperature: float) -> tuple[float, float]:
    """Saturation humidity at the skin [kg/kg] and its slope [K-1] (Clausius-Clapeyron for the slope)."""
    if ice > 0.0:
        vapour = saturation_vapour_pressure_ice(temperature)
        heat = SUBLIMATION
    else:
        vapour = saturation_vapour_pressure(temperature)
        heat = latent_heat(temperature)
    rest = pressure - (1.0 - EPSILON) * vapour
    saturated = EPSILON * vapour / rest
    return saturated, saturated * pressure / rest * heat / (R_VAPOUR * temperature * temperature)


@kernel
def skin_at(
    balance: Balance, resistance: float, guess: float, tolerance: float, rounds: int
) -> tuple[float, float, float, float]:
    """Skin temperature by Newton's rule at a given aerodynamic ``resistance`` [s m-1].

    Returns the temperature [K], the size of the last step [K], the virtual temperature difference skin minus air [K] that
    drives the buoyancy, and its change per unit of ln(resistance), in which the skin is free to answer.
    """
    (
        absorbed,
        emission,
        conductance,
        soil,
        air,
        humidity,
        pressure,
        capacity,
        latent,
        closed,
        ceiling,
        ice,
        _,
        _,
        _,
        _,
    ) = balance
    temperature = guess
    heat = capacity / resistance
    for _ in range(rounds):
        saturated, slope = skin_humidity(pressure, ice, temperature)
        excess = saturated - humidity
        total = resistance + closed if excess > 0.0 else resistance  # dew meets no stomata
        vapour = latent / total
        emitted = emission * temperature * temperature * temperature
        falling = 4.0 * emitted + heat + vapour * slope + conductance
        left = (
            absorbed
            - emitted * temperature
            - heat * (temperature - air)
            - vapour * excess
            - conductance * (temperature - soil)
        )
        step = left / falling
        if step > STEP_MAX:
            step = STEP_MAX
        elif step < -STEP_MAX:
            step = -STEP_MAX
        if temperature + step > ceiling:
            step = ceiling - temperature
        temperature += step
        if -tolerance < step < tolerance:
            break
    excess += slope * step
    share = resistance / total
    warm = temperature - air
    moist = VIRTUAL * air
    dry = 1.0 + VIRTUAL * humidity
    # a larger resistance holds back heat and (partly) vapour: the skin answers by warming
    gain = 0.0 if temperature >= ceiling else (heat * warm + vapour * excess * share) / falling
    answer = (dry + moist * slope * share) * gain + moist * excess * share * (1.0 - share)
    return temperature, abs(step), dry * warm + moist * excess * share, answer


@kernel
def solve_unstable(
    balance: Balance, geometry: Geometry, skin: float, ln_resistance: float, ln_friction: float
) -> Transfer:
    """Newton's rule on p = ln(resistance) and v = ln(friction velocity) in convective air."""
    p = ln_resistance
    v = ln_friction
    gravity = GRAVITY / balance.virtual_air
    wind2 = balance.wind * balance.wind
    depth = balance.depth
    zm, zh, z0m, z0h, log_m, log_h = geometry
    ln_karman = math.log(KARMAN)
    x = 0.0
    count = 0.0
    for _ in range(ROUNDS):
        count += 1.0
        resistance = math.exp(p)
        skin, moved, difference, slope = skin_at(balance, resistance, skin, 1e-3, 1)
        if difference < 1e-9:  # a step into stable air: come back towards neutral
            difference = 1e-9
            slope = 0.0
        buoyancy = gravity * difference / resistance
        ln_buoyancy_p = slope / difference - 1.0
        x = -KARMAN * buoyancy * math.exp(-3.0 * v)
        gust2 = GUSTINESS * GUSTINESS * math.exp(math.log(buoyancy * depth) * 2.0 / 3.0)
        speed2 = wind2 + gust2
        fm, fh, phi_m, phi_h = unstable_spans(zm, zh, z0m, z0h, log_m, log_h, x)
        gm = phi_m / fm  # d ln fm / d ln(-x)
        gh = phi_h / fh
        first = v + math.log(fm) - ln_karman - 0.5 * math.log(speed2)
        second = v + p + ln_karman - math.log(fh)
        a11 = 1.0 - 3.0 * gm
        a12 = (gm - gust2 / speed2 / 3.0) * ln_buoyancy_p
        a21 = 1.0 + 3.0 * gh
        a22 = 1.0 - gh * ln_buoyancy_p
        determinant = a11 * a22 - a12 * a21
        if abs(determinant) < 1e-6:
            determinant = 1e-6
        dv = (a12 * second - a22 * first) / determinant
        dp = (a21 * first - a11 * second) / determinant
        far = max(abs(dv), abs(dp))
        if far > 1.0:
            dv /= far
            dp /= far
        v += dv
        p += dp
        x *= 1.0 + ln_buoyancy_p * dp - 3.0 * dv
        if far < TOLERANCE and moved < SETTLED and difference > 1e-9:
            break
    return Transfer(skin, math.exp(p), math.exp(v), x, count)


@kernel
def friction_for(geometry: Geometry, speed: float, buoyancy: float) -> float:
    """Friction velocity [m s-1] at a wind ``speed`` and a buoyancy flux [m2 s-3]: the largest that fits.

    Where a stable flux is more than this wind can bring down, the stability is held at `ZETA_MAX`.
    """
    zm, zh, z0m, z0h, log_m, log_h = geometry
    v = math.log(KARMAN * speed / log_m)
    if buoyancy == 0.0:
        return math.exp(v)
    highest = ZETA_MAX / max(zm, zh)
    for _ in range(ROUNDS):
        x = -KARMAN * buoyancy * math.exp(-3.0 * v)
        if x > highest:
            break
        if x < 0.0:
            fm, _, phi_m, _ = unstable_spans(zm, zh, z0m, z0h, log_m, log_h, x)
        else:
            fm, _, phi_m, _ = stable_spans(zm, zh, z0m, z0h, log_m, log_h, x)
        slope = 1.0 - 3.0 * phi_m / fm
        if slope <= 0.05:
            break
        step = -(v + math.log(fm / (KARMAN * speed))) / slope
        v += min(1.0, max(-1.0, step))
        if abs(step) < 1e-10:
            return math.exp(v)
    return KARMAN * speed / stable_spans(zm, zh, z0m, z0h, log_m, log_h, highest)[0]


@kernel
def bracket_unstable(balance: Balance, geometry: Geometry, skin: float, ln_neutral: float) -> Transfer:
    """Bisection on ln(resistance) below the neutral one, for the rare balance that Newton's rule circles round.

    That happens where moisture and heat pull the buoyancy in opposite ways.
    """
    zm, zh, z0m, z0h, log_m, log_h = geometry
    gravity = GRAVITY / balance.virtual_air
    low = ln_neutral - 12.0
    high = ln_neutral
    friction = 0.0
    x = 0.0
    count = 0.0
    for _ in range(ROUNDS):
        count += 1.0
        p = 0.5 * (low + high)
        resistance = math.exp(p)
        skin, _, difference, _ = skin_at(balance, resistance, skin, 1e-9, 40)
        buoyancy = max(gravity * difference / resistance, 1e-15)
        gust = GUSTINESS * math.exp(math.log(buoyancy * balance.depth) / 3.0)
        friction = friction_for(geometry, math.sqrt(balance.wind * balance.wind + gust * gust), buoyancy)
        x = -KARMAN * buoyancy / (friction * friction * friction)
        fh = unstable_spans(zm, zh, z0m, z0h, log_m, log_h, x)[1]
        if fh > KARMAN * friction * resistance:
            low = p
        else:
            high = p
    return Transfer(skin, math.exp(0.5 * (low + high)), friction, x, count)


@kernel
def solve_stable(
    balance: Balance, geometry: Geometry, skin: float, guess: float, neutral_resistance: float
) -> Transfer:
    """Find x = 1/L in stable air: a bracketed Newton's rule, from the neutral side where two states are possible.

    Weak exchange cools the skin, which weakens the exchange: over rough ground with a poorly conducting skin two states
    may exist. The better coupled one is taken, whatever the guess. Beyond `ZETA_MAX` the stability is held, so that the
    skin never decouples without bound.
    """
    zm, zh, z0m, z0h, log_m, log_h = geometry
    wind = balance.wind
    highest = ZETA_MAX / max(zm, zh)
    buoyancy = GRAVITY / (balance.virtual_air * wind * wind)
    held = 4.0 * balance.emission * balance.air_temperature**3 + balance.soil_conductance
    # the heat flux falls with the temperature difference by at most a third of its neutral slope (phi = 1 + 5 zeta)
    single = balance.heat_capacity / neutral_resistance < 3.0 * held
    x = min(guess, highest) if single and guess > 0.0 else 1e-6 * highest
    low = 0.0
    high = highest
    capped = False
    friction = 0.0
    resistance = neutral_resistance
    count = 0.0
    for _ in range(ROUNDS):
        count += 1.0
        fm, fh, phi_m, phi_h = stable_spans(zm, zh, z0m, z0h, log_m, log_h, x)
        gm = phi_m / fm  # d ln fm / d ln x
        gh = phi_h / fh
        friction = KARMAN * wind / fm
        resistance = fh / (KARMAN * friction)
        skin, moved, difference, slope = skin_at(balance, resistance, skin, 1e-4, 4)
        ratio = fh / (fm * fm)
        left = x * ratio + buoyancy * difference
        if left < 0.0:
            low = x
            if x >= highest:
                break
        else:
            high = x
        rising = ratio * (1.0 + gh - 2.0 * gm) + buoyancy * slope * (gm + gh) / x
        new = x - left / rising if rising > 0.0 else highest
        if new > high and high == highest and not capped:
            capped = True  # first see whether the answer lies below the bound at all
            new = highest
        elif new <= low or new > high:
            new = 0.5 * (low + high)
        step = (new - x) / x
        friction *= 1.0 - gm * step
        resistance *= 1.0 + (gm + gh) * step
        x = new
        if abs(step) < TOLERANCE and moved < SETTLED:
            break
    return Transfer(skin, resistance, friction, x, count)
