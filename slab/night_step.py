"""Adaptive stepping of the night column: a two-stage Rosenbrock method with the block Jacobian.

ROS2 (Verwer, Spee, Blom and Hundsdorfer 1999): gamma = 1 + 1/sqrt(2); (I - g h J) k1 = F(y), (I - g h J) k2 = F(y + h k1)
- 2 k1, y += h (1.5 k1 + 0.5 k2): L-stable, of second order with any J. The error estimate is h (k1 + k2) / 2, the
difference to the first-order result y + h k1. Surface fluxes are summed with the same stages, so that every budget
closes to round-off.
"""

from __future__ import annotations

import math

from forcing.air import CP_DRY
from forcing.speed import kernel
from slab.night_grid import Column, Grid, Numbers
from slab.night_solve import factor, solve
from slab.night_surface import FLUX, Drive, Footing, Link
from slab.night_terms import Method, Outside, Soil, Work, right_side

GAMMA = 1.0 + 1.0 / math.sqrt(2.0)
TOTALS = ("heat", "vapour", "net_radiation", "sensible", "latent", "ground", "steps", "rejected")
NET_RADIATION, GROUND = 2, 5  # members of the totals that stay unknown where fluxes are prescribed


@kernel
def copy_state(source: Column, target: Column) -> None:
    """Copy every number of one state to another."""
    for i in range(len(source.theta)):
        target.theta[i] = source.theta[i]
        target.humidity[i] = source.humidity[i]
        target.u[i] = source.u[i]
        target.v[i] = source.v[i]
    for j in range(len(source.soil)):
        target.soil[j] = source.soil[j]
    target.skin[0] = source.skin[0]


@kernel
def _trial(state: Column, h: float, stage: Column, out: Column) -> None:
    """out = state + h stage."""
    t, q, u, v = state.theta, state.humidity, state.u, state.v
    kt, kq, ku, kv = stage.theta, stage.humidity, stage.u, stage.v
    ot, oq, ou, ov = out.theta, out.humidity, out.u, out.v
    for i in range(len(t)):
        ot[i] = t[i] + h * kt[i]
        oq[i] = q[i] + h * kq[i]
        ou[i] = u[i] + h * ku[i]
        ov[i] = v[i] + h * kv[i]
    for j in range(len(state.soil)):
        out.soil[j] = state.soil[j] + h * stage.soil[j]
    out.skin[0] = state.skin[0] + h * stage.skin[0]


@kernel
def _less_twice(rates: Column, stage: Column) -> None:
    """rates -= 2 stage."""
    rt, rq, ru, rv = rates.theta, rates.humidity, rates.u, rates.v
    kt, kq, ku, kv = stage.theta, stage.humidity, stage.u, stage.v
    for i in range(len(rt)):
        rt[i] -= 2.0 * kt[i]
        rq[i] -= 2.0 * kq[i]
        ru[i] -= 2.0 * ku[i]
        rv[i] -= 2.0 * kv[i]
    for j in range(len(rates.soil)):
        rates.soil[j] -= 2.0 * stage.soil[j]
    rates.skin[0] -= 2.0 * stage.skin[0]


@kernel
def _error(method: Method, h: float, first: Column, second: Column) -> float:
    """Largest |h (k1 + k2) / 2| over the tolerances; not a number if any part of the state is (a maximum would hide it)."""
    at, au, av, aq = first.theta, first.u, first.v, first.humidity
    bt, bu, bv, bq = second.theta, second.u, second.v, second.humidity
    worst_theta = 0.0
    worst_wind = 0.0
    total = 0.0
    for i in range(len(at)):
        t = abs(at[i] + bt[i])
        u = abs(au[i] + bu[i])
        v = abs(av[i] + bv[i])
        total += t + u + v + aq[i] + bq[i]
        worst_theta = max(worst_theta, t)
        worst_wind = max(worst_wind, u, v)
    skin = abs(first.skin[0] + second.skin[0])
    total += skin
    if total - total != 0.0:
        return math.nan
    worst = max(worst_theta / method.tolerance_theta, worst_wind / method.tolerance_wind, skin / method.tolerance_skin)
    return 0.5 * h * worst


@kernel
def _accept(state: Column, h: float, first: Column, second: Column) -> None:
    """state += h (1.5 k1 + 0.5 k2)."""
    a = 1.5 * h
    b = 0.5 * h
    t, q, u, v = state.theta, state.humidity, state.u, state.v
    at, aq, au, av = first.theta, first.humidity, first.u, first.v
    bt, bq, bu, bv = second.theta, second.humidity, second.u, second.v
    for i in range(len(t)):
        t[i] += a * at[i] + b * bt[i]
        q[i] += a * aq[i] + b * bq[i]
        u[i] += a * au[i] + b * bu[i]
        v[i] += a * av[i] + b * bv[i]
    for j in range(len(state.soil)):
        state.soil[j] += a * first.soil[j] + b * second.soil[j]
    state.skin[0] += a * first.skin[0] + b * second.skin[0]


@kernel
def _flux_stage(
    gh: float, foot: Footing, here: Link, at: Link, stage: Column
) -> tuple[float, float, float, float, float, float]:
    """Surface fluxes of one stage: those of ``at`` plus g h times their change along ``stage`` (derivatives ``here``)."""
    s, t, q = stage.skin[0], stage.theta[0], stage.humidity[0]
    u, v = stage.u[0], stage.v[0]
    heat_turn = gh * (here.heat_s * s + here.heat_t * t + here.heat_u * u + here.heat_v * v)
    vapour_turn = gh * (
        here.vapour_s * s + here.vapour_t * t + here.vapour_u * u + here.vapour_v * v + here.vapour_q * q
    )
    heat = at.heat + heat_turn
    return (
        heat,
        at.vapour + vapour_turn,
        at.net_radiation - gh * here.lost * s,
        CP_DRY * foot.exner * heat,
        at.latent_heat * at.vapour + here.latent_heat * vapour_turn,
        at.ground + gh * foot.skin_conductance * (s - stage.soil[0]),
    )


@kernel
def _add_fluxes(
    boundary: int, h: float, gh: float, foot: Footing, here: Link, there: Link, work: Work, totals: Numbers
) -> None:
    """Add the time integrals of the surface fluxes over a step, in the same combination as the state."""
    one = _flux_stage(gh, foot, here, here, work.first)
    two = _flux_stage(gh, foot, here, there, work.second)
    for k in range(6):
        if boundary != FLUX or (k != NET_RADIATION and k != GROUND):
            totals[k] += h * (0.5 * one[k] + 0.5 * two[k])


@kernel
def advance(
    method: Method, grid: Grid, foot: Footing, soil: Soil, drive: Drive, outside: Outside, state: Column, work: Work,
    totals: Numbers, duration: float, step: float,
) -> float:  # fmt: skip
    """Carry ``state`` (changed in place) over ``duration`` [s] with everything from outside held constant.

    Parameters
    ----------
    totals : sequence of 8 floats
        Added to: heat [K kg m-2] and vapour [kg m-2] that entered the air from below; net radiation (positive
        downward), sensible, latent (positive upward) and ground heat (positive into the soil) [J m-2]; steps taken;
        steps rejected.
    step : float
        First step to try [s].

    Returns
    -------
    float
        Step to try next [s]; negative if the equations could not be solved even with the smallest step.
    """
    done = 0.0
    while duration - done > 1e-9 * duration:
        left = duration - done
        step = min(step, method.largest_step)
        h = left / math.ceil(left / step - 1e-9)
        ground = right_side(method, grid, foot, soil, drive, outside, state, work.rates, work, True)
        while True:
            gh = GAMMA * h
            factor(method, gh, outside.coriolis, grid, foot, soil, ground, state, work)
            solve(method, gh, grid, foot, soil, work.rates, work, work.first)
            _trial(state, h, work.first, work.trial)
            there = right_side(method, grid, foot, soil, drive, outside, work.trial, work.second, work, False)
            _less_twice(work.second, work.first)
            solve(method, gh, grid, foot, soil, work.second, work, work.second)
            error = _error(method, h, work.first, work.second)
            if error <= 1.0 or (error > 1.0 and h <= method.least_step):
                break
            totals[7] += 1.0
            if h <= method.least_step:
                return -1.0
            factor_down = 0.2 if math.isnan(error) else max(0.2, 0.9 / math.sqrt(error))
            h = max(method.least_step, h * factor_down)
        _accept(state, h, work.first, work.second)
        _add_fluxes(method.boundary, h, gh, foot, ground, there, work, totals)
        totals[6] += 1.0
        done += h
        grown = h * min(3.0, max(0.2, 0.9 / math.sqrt(max(error, 1e-6))))
        step = max(step, grown) if h < 0.5 * step and error <= 1.0 and grown >= 0.5 * h else grown
    return step
