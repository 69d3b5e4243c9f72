"""Other ways to step the night column, for comparison: frozen diffusivities, and an explicit stabilised method."""

from __future__ import annotations

import math

from forcing.air import CP_DRY
from forcing.speed import kernel
from slab.night_grid import Column, Grid, Numbers
from slab.night_step import advance, copy_state
from slab.night_surface import Drive, Footing, link
from slab.night_terms import Method, Outside, Soil, Work, _air_rates, _ground_rates, _mixing, right_side


@kernel
def rosenbrock_night(
    method: Method, grid: Grid, foot: Footing, soil: Soil, drive: Drive, outside: Outside, state: Column, work: Work,
    totals: Numbers, duration: float, chunk: float, step: float,
) -> float:  # fmt: skip
    """The product's own stepping, chunk by chunk as the driver calls it."""
    for _ in range(round(duration / chunk)):
        step = advance(method, grid, foot, soil, drive, outside, state, work, totals, chunk, step)
    return step


@kernel
def _row(mass: Numbers, pivot: Numbers, h: float, exchange: Numbers, rates: Numbers, part: Numbers) -> float:
    carried = 0.0
    for i in range(len(mass) - 1, 0, -1):
        part[i] = (mass[i] * rates[i] + carried) / pivot[i]
        carried = h * exchange[i - 1] * part[i]
    return mass[0] * rates[0] + carried


@kernel
def _back(pivot: Numbers, h: float, exchange: Numbers, part: Numbers, values: Numbers, lowest: float) -> None:
    x = lowest
    values[0] += h * x
    for i in range(1, len(values)):
        x = part[i] + h * exchange[i - 1] / pivot[i] * x
        values[i] += h * x


@kernel
def frozen_night(
    method: Method, grid: Grid, foot: Footing, soil: Soil, drive: Drive, outside: Outside, state: Column, work: Work,
    duration: float, h: float,
) -> None:  # fmt: skip
    """Implicit Euler with K and transfer coefficients held in each step: scalar tridiagonals, rotation explicit."""
    mass, exchange, pivot = grid.mass, work.exchange, work.vapour[0]
    part_t, part_u, part_v, part_q = work.partial
    rates = work.rates
    layers = len(soil.capacity)
    for _ in range(round(duration / h)):
        _mixing(method, grid, state, exchange)
        ground = link(
            method.closure, method.boundary, foot, drive, state.skin[0], state.soil[0], state.theta[0], state.humidity[0],
            state.u[0], state.v[0],
        )  # fmt: skip
        _air_rates(grid, outside, state, exchange, ground, rates)
        _ground_rates(method.boundary, foot, drive, soil, state, ground, rates)
        above = 0.0
        for i in range(len(mass) - 1, 0, -1):
            e = h * exchange[i - 1]
            pivot[i] = mass[i] + above + e
            above = e * (1.0 - e / pivot[i])
        below = 0.0
        soil_part = 0.0
        for j in range(layers - 1, -1, -1):
            g = soil.conductance[j - 1] if j > 0 else foot.skin_conductance
            p = soil.capacity[j] + h * g + below
            soil_part = (soil.capacity[j] * rates.soil[j] + h * soil.conductance[min(j, layers - 2)] * soil_part) / p \
                if j < layers - 1 else soil.capacity[j] * rates.soil[j] / p  # fmt: skip
            work.soil_partial[j] = soil_part
            work.soil_transfer[j] = h * g / p
            below = h * g * (1.0 - h * g / p)
        # transfer velocity held: d(heat)/d(theta) = -d(heat)/d(skin theta)
        delta = state.theta[0] - state.skin[0] / foot.exner
        hold = -ground.heat / delta if abs(delta) > 1e-9 else -ground.heat_t
        rt = _row(mass, pivot, h, exchange, rates.theta, part_t)
        rq = _row(mass, pivot, h, exchange, rates.humidity, part_q)
        ru = _row(mass, pivot, h, exchange, rates.u, part_u)
        rv = _row(mass, pivot, h, exchange, rates.v, part_v)
        heat = CP_DRY * foot.exner
        air = mass[0] + above + h * hold
        wet = mass[0] + above - h * ground.vapour_q
        evaporation = ground.latent_heat * ground.vapour_s
        conduction = foot.skin_conductance * (1.0 - work.soil_transfer[0])
        own = foot.skin_capacity + h * (ground.lost + heat * hold / foot.exner + evaporation + conduction)
        side = foot.skin_capacity * rates.skin[0] + h * foot.skin_conductance * work.soil_partial[0]
        link_up = h * heat * hold
        link_down = h * hold / foot.exner
        skin = (side + link_up * rt / air) / (own - link_up * link_down / air)
        _back(pivot, h, exchange, part_t, state.theta, (rt + link_down * skin) / air)
        _back(pivot, h, exchange, part_q, state.humidity, (rq + h * ground.vapour_s * skin) / wet)
        drag = mass[0] + above + h * ground.drag
        _back(pivot, h, exchange, part_u, state.u, ru / drag)
        _back(pivot, h, exchange, part_v, state.v, rv / drag)
        state.skin[0] += h * skin
        x = skin
        for j in range(layers):
            x = work.soil_partial[j] + work.soil_transfer[j] * x
            state.soil[j] += h * x


@kernel
def _spectral_bound(grid: Grid, work: Work, skin: float) -> float:
    """Gershgorin-like bound on the fastest rate [s-1], with the coupled derivative of flux by gradients."""
    worst = skin
    for i in range(len(grid.mass) - 1):
        own = work.exchange[i]
        for k in range(3):
            own += 2.0 * abs(work.gradient[k][i] * work.gain[k][i])
        worst = max(worst, 2.0 * own * (1.0 / grid.mass[i] + 1.0 / grid.mass[i + 1]))
    return worst


@kernel
def _combine(out: Column, a: Column, fa: float, b: Column, fb: float, c: Column, fc: float, d: Column, fd: float,
             e: Column, fe: float) -> None:  # fmt: skip
    """out = fa a + fb b + fc c + fd d + fe e."""
    for i in range(len(out.theta)):
        out.theta[i] = fa * a.theta[i] + fb * b.theta[i] + fc * c.theta[i] + fd * d.theta[i] + fe * e.theta[i]
        out.humidity[i] = (
            fa * a.humidity[i] + fb * b.humidity[i] + fc * c.humidity[i] + fd * d.humidity[i] + fe * e.humidity[i]
        )
        out.u[i] = fa * a.u[i] + fb * b.u[i] + fc * c.u[i] + fd * d.u[i] + fe * e.u[i]
        out.v[i] = fa * a.v[i] + fb * b.v[i] + fc * c.v[i] + fd * d.v[i] + fe * e.v[i]
    for j in range(len(out.soil)):
        out.soil[j] = fa * a.soil[j] + fb * b.soil[j] + fc * c.soil[j] + fd * d.soil[j] + fe * e.soil[j]
    out.skin[0] = fa * a.skin[0] + fb * b.skin[0] + fc * c.skin[0] + fd * d.skin[0] + fe * e.skin[0]


@kernel
def chebyshev_night(
    method: Method, grid: Grid, foot: Footing, soil: Soil, drive: Drive, outside: Outside, state: Column, work: Work,
    start_rate: Column, before: Column, duration: float, h: float,
) -> None:  # fmt: skip
    """Explicit second-order Runge-Kutta-Chebyshev (Sommeijer, Shampine and Verwer 1998): no Jacobian at all."""
    now, last, rate = work.first, work.second, work.rates
    for _ in range(round(duration / h)):
        ground = right_side(method, grid, foot, soil, drive, outside, state, start_rate, work, True)
        heat = CP_DRY * foot.exner * ground.heat_s + ground.latent_heat * ground.vapour_s
        bound = _spectral_bound(grid, work, 2.0 * (ground.lost + heat + foot.skin_conductance) / foot.skin_capacity)
        s = max(2, math.ceil(math.sqrt(1.0 + 1.54 * 1.3 * h * bound)) + 1)
        w0 = 1.0 + 2.0 / 13.0 / (s * s)
        root = math.sqrt(w0 * w0 - 1.0)
        arg = s * math.log(w0 + root)
        w1 = math.sinh(arg) * (w0 * w0 - 1.0) / (math.cosh(arg) * s * root - w0 * math.sinh(arg))
        t1, t2, d1, d2, dd1, dd2 = w0, 1.0, 1.0, 0.0, 0.0, 0.0
        b1 = b2 = 1.0 / (4.0 * w0 * w0)
        copy_state(state, before)
        mu1 = w1 * b1
        _combine(last, state, 1.0, start_rate, h * mu1, state, 0.0, state, 0.0, state, 0.0)
        for _stage in range(2, s + 1):
            t = 2.0 * w0 * t1 - t2
            d = 2.0 * w0 * d1 - d2 + 2.0 * t1
            dd = 2.0 * w0 * dd1 - dd2 + 4.0 * d1
            b = dd / (d * d)
            gamma_part = 1.0 - t1 * b1
            mu = 2.0 * w0 * b / b1
            nu = -b / b2
            mu_rate = mu * w1 / w0
            right_side(method, grid, foot, soil, drive, outside, last, rate, work, False)
            _combine(now, last, mu, before, nu, state, 1.0 - mu - nu, rate, h * mu_rate, start_rate,
                     -h * mu_rate * gamma_part)  # fmt: skip
            copy_state(last, before)
            copy_state(now, last)
            t2, t1, d2, d1, dd2, dd1 = t1, t, d1, d, dd1, dd
            b2, b1 = b1, b
        copy_state(last, state)
