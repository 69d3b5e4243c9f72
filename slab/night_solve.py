"""Direct solution of (I - g h J) x = r for the night column.

J has 3 x 3 blocks for (theta, u, v) on three diagonals, a scalar tridiagonal for humidity and one for the soil. Freezing
the diffusivities instead would be first order only and 1 K wrong at 60 s: the diffusivity of a perturbation is the
derivative of the flux by the coupled gradients. Soil and humidity are eliminated toward the surface, the skin into the
lowest block, the blocks from the top down; fluxes appear in both neighbours' rows alike, so that heat, water and
momentum are conserved to round-off. Left out of J: dK/d(humidity) and dK by humidity; the stepping keeps its order with
an inexact Jacobian.
"""

from __future__ import annotations

from forcing.air import CP_DRY
from forcing.speed import kernel
from slab.night_grid import Column, Grid, Numbers
from slab.night_surface import ENERGY, FLUX, TEMPERATURE, Footing, Link
from slab.night_terms import Method, Soil, Work


@kernel
def _factor_soil(boundary: int, gh: float, foot: Footing, soil: Soil, work: Work) -> None:
    pivot, transfer = work.soil_pivot, work.soil_transfer
    capacity, conductance = soil.capacity, soil.conductance
    below = 0.0
    for j in range(len(capacity) - 1, -1, -1):
        above = conductance[j - 1] if j > 0 else (0.0 if boundary == FLUX else foot.skin_conductance)
        pivot[j] = capacity[j] + gh * above + below
        transfer[j] = gh * above / pivot[j]
        below = gh * above * (1.0 - transfer[j])


@kernel
def _factor_vapour(gh: float, mass: Numbers, ground: Link, work: Work) -> None:
    pivot, transfer, exchange = work.vapour_pivot, work.vapour_transfer, work.exchange
    above = 0.0
    for i in range(len(mass) - 1, 0, -1):
        e = gh * exchange[i - 1]
        pivot[i] = mass[i] + above + e
        transfer[i] = e / pivot[i]
        above = e * (1.0 - transfer[i])
    pivot[0] = mass[0] + above - gh * ground.vapour_q


@kernel
def _close_skin(method: Method, gh: float, foot: Footing, ground: Link, work: Work) -> None:
    """How the skin follows the lowest cell: x_skin = p + closing[1..3] . (theta, u, v), with pivot closing[0]."""
    closing = work.closing
    for k in range(8):
        closing[k] = 0.0
    if method.boundary == TEMPERATURE:
        closing[0] = 1.0
    elif method.boundary == FLUX:
        closing[0] = 1.0 + gh * ground.lost / foot.skin_capacity
    else:
        heat = CP_DRY * foot.exner
        vapour = ground.latent_heat * (1.0 + gh * ground.vapour_q / work.vapour_pivot[0])
        conduction = foot.skin_conductance * (1.0 - work.soil_transfer[0])
        pivot = foot.skin_capacity + gh * (ground.lost + heat * ground.heat_s + vapour * ground.vapour_s + conduction)
        closing[0] = pivot
        closing[1] = -gh * (heat * ground.heat_t + vapour * ground.vapour_t) / pivot
        closing[2] = -gh * (heat * ground.heat_u + vapour * ground.vapour_u) / pivot
        closing[3] = -gh * (heat * ground.heat_v + vapour * ground.vapour_v) / pivot


@kernel
def _factor_air(gh: float, coriolis: float, grid: Grid, work: Work) -> tuple[float, ...]:
    """Eliminate the blocks from the top to cell 1; returns what cell 0 receives from above (nine numbers)."""
    mass, exchange = grid.mass, work.exchange
    ga, gb, gc = work.gradient
    ka, kb, kc = work.gain
    p0, p1, p2, p3, p4, p5, p6, p7, p8 = work.inverse
    t0, t1, t2, t3, t4, t5, t6, t7, t8 = work.transfer
    turn = gh * coriolis
    d0 = d1 = d2 = d3 = d4 = d5 = d6 = d7 = d8 = 0.0
    for i in range(len(mass) - 1, 0, -1):
        j = i - 1
        m = mass[i]
        e = gh * exchange[j]
        a = gh * ga[j]
        b = gh * gb[j]
        c = gh * gc[j]
        x = ka[j]
        y = kb[j]
        z = kc[j]
        e0 = e + a * x
        e1 = a * y
        e2 = a * z
        e3 = b * x
        e4 = e + b * y
        e5 = b * z
        e6 = c * x
        e7 = c * y
        e8 = e + c * z
        b0 = m + d0 + e0
        b1 = d1 + e1
        b2 = d2 + e2
        b3 = d3 + e3
        b4 = m + d4 + e4
        b5 = d5 + e5 - turn * m
        b6 = d6 + e6
        b7 = d7 + e7 + turn * m
        b8 = m + d8 + e8
        c0 = b4 * b8 - b5 * b7
        c1 = b5 * b6 - b3 * b8
        c2 = b3 * b7 - b4 * b6
        r = 1.0 / (b0 * c0 + b1 * c1 + b2 * c2)
        i0 = c0 * r
        i1 = (b2 * b7 - b1 * b8) * r
        i2 = (b1 * b5 - b2 * b4) * r
        i3 = c1 * r
        i4 = (b0 * b8 - b2 * b6) * r
        i5 = (b2 * b3 - b0 * b5) * r
        i6 = c2 * r
        i7 = (b1 * b6 - b0 * b7) * r
        i8 = (b0 * b4 - b1 * b3) * r
        p0[i] = i0
        p1[i] = i1
        p2[i] = i2
        p3[i] = i3
        p4[i] = i4
        p5[i] = i5
        p6[i] = i6
        p7[i] = i7
        p8[i] = i8
        # inverse times block: the block is e I + (a, b, c) (x, y, z)^T
        f0 = i0 * a + i1 * b + i2 * c
        f1 = i3 * a + i4 * b + i5 * c
        f2 = i6 * a + i7 * b + i8 * c
        w0 = e * i0 + f0 * x
        w1 = e * i1 + f0 * y
        w2 = e * i2 + f0 * z
        w3 = e * i3 + f1 * x
        w4 = e * i4 + f1 * y
        w5 = e * i5 + f1 * z
        w6 = e * i6 + f2 * x
        w7 = e * i7 + f2 * y
        w8 = e * i8 + f2 * z
        t0[i] = w0
        t1[i] = w1
        t2[i] = w2
        t3[i] = w3
        t4[i] = w4
        t5[i] = w5
        t6[i] = w6
        t7[i] = w7
        t8[i] = w8
        # block times (I - transfer)
        h0 = x - (x * w0 + y * w3 + z * w6)
        h1 = y - (x * w1 + y * w4 + z * w7)
        h2 = z - (x * w2 + y * w5 + z * w8)
        d0 = e * (1.0 - w0) + a * h0
        d1 = a * h1 - e * w1
        d2 = a * h2 - e * w2
        d3 = b * h0 - e * w3
        d4 = e * (1.0 - w4) + b * h1
        d5 = b * h2 - e * w5
        d6 = c * h0 - e * w6
        d7 = c * h1 - e * w7
        d8 = e * (1.0 - w8) + c * h2
    return d0, d1, d2, d3, d4, d5, d6, d7, d8


@kernel
def _factor_lowest(
    gh: float, coriolis: float, mass: float, ground: Link, u: float, v: float, above: tuple[float, ...], work: Work
) -> None:
    """Invert the lowest block, the skin having been eliminated into it."""
    _, pt, pu, pv = work.closing[0], work.closing[1], work.closing[2], work.closing[3]
    b0, b1, b2, b3, b4, b5, b6, b7, b8 = above
    turn = gh * coriolis * mass
    b0 += mass - gh * (ground.heat_t + ground.heat_s * pt)
    b1 -= gh * (ground.heat_u + ground.heat_s * pu)
    b2 -= gh * (ground.heat_v + ground.heat_s * pv)
    drag_t = gh * (ground.drag_t + ground.drag_s * pt)
    drag_u = gh * (ground.drag_u + ground.drag_s * pu)
    drag_v = gh * (ground.drag_v + ground.drag_s * pv)
    b3 += u * drag_t
    b4 += mass + gh * ground.drag + u * drag_u
    b5 += u * drag_v - turn
    b6 += v * drag_t
    b7 += v * drag_u + turn
    b8 += mass + gh * ground.drag + v * drag_v
    c0 = b4 * b8 - b5 * b7
    c1 = b5 * b6 - b3 * b8
    c2 = b3 * b7 - b4 * b6
    r = 1.0 / (b0 * c0 + b1 * c1 + b2 * c2)
    p = work.inverse
    p[0][0] = c0 * r
    p[1][0] = (b2 * b7 - b1 * b8) * r
    p[2][0] = (b1 * b5 - b2 * b4) * r
    p[3][0] = c1 * r
    p[4][0] = (b0 * b8 - b2 * b6) * r
    p[5][0] = (b2 * b3 - b0 * b5) * r
    p[6][0] = c2 * r
    p[7][0] = (b1 * b6 - b0 * b7) * r
    p[8][0] = (b0 * b4 - b1 * b3) * r


@kernel
def factor(
    method: Method, gh: float, coriolis: float, grid: Grid, foot: Footing, soil: Soil, ground: Link, state: Column,
    work: Work,
) -> None:  # fmt: skip
    """Factor I - g h J at ``state``, whose slopes `right_side` left in ``work``."""
    _factor_soil(method.boundary, gh, foot, soil, work)
    _factor_vapour(gh, grid.mass, ground, work)
    _close_skin(method, gh, foot, ground, work)
    above = _factor_air(gh, coriolis, grid, work)
    _factor_lowest(gh, coriolis, grid.mass[0], ground, state.u[0], state.v[0], above, work)


@kernel
def _down(gh: float, grid: Grid, rates: Column, work: Work) -> tuple[float, float, float, float]:
    """Forward elimination of a right side from the top to cell 1; returns what cell 0 receives (theta, u, v, q)."""
    mass, exchange = grid.mass, work.exchange
    ga, gb, gc = work.gradient
    ka, kb, kc = work.gain
    p0, p1, p2, p3, p4, p5, p6, p7, p8 = work.inverse
    st, su, sv = work.partial
    sq, pivot = work.vapour_partial, work.vapour_pivot
    rt, ru, rv, rq = rates.theta, rates.u, rates.v, rates.humidity
    yt = yu = yv = yq = 0.0
    for i in range(len(mass) - 1, 0, -1):
        m = mass[i]
        yt += m * rt[i]
        yu += m * ru[i]
        yv += m * rv[i]
        a = p0[i] * yt + p1[i] * yu + p2[i] * yv
        b = p3[i] * yt + p4[i] * yu + p5[i] * yv
        c = p6[i] * yt + p7[i] * yu + p8[i] * yv
        q = (m * rq[i] + yq) / pivot[i]
        st[i] = a
        su[i] = b
        sv[i] = c
        sq[i] = q
        j = i - 1
        e = gh * exchange[j]
        s = gh * (ka[j] * a + kb[j] * b + kc[j] * c)
        yt = e * a + ga[j] * s
        yu = e * b + gb[j] * s
        yv = e * c + gc[j] * s
        yq = e * q
    return yt, yu, yv, yq


@kernel
def _up(work: Work, out: Column) -> None:
    """Back substitution from cell 0 upward, and from the skin into the soil."""
    t0, t1, t2, t3, t4, t5, t6, t7, t8 = work.transfer
    st, su, sv = work.partial
    sq, tq = work.vapour_partial, work.vapour_transfer
    xt, xu, xv, xq = out.theta, out.u, out.v, out.humidity
    a = xt[0]
    b = xu[0]
    c = xv[0]
    q = xq[0]
    for i in range(1, len(xt)):
        at = st[i] + t0[i] * a + t1[i] * b + t2[i] * c
        bt = su[i] + t3[i] * a + t4[i] * b + t5[i] * c
        c = sv[i] + t6[i] * a + t7[i] * b + t8[i] * c
        a = at
        b = bt
        q = sq[i] + tq[i] * q
        xt[i] = a
        xu[i] = b
        xv[i] = c
        xq[i] = q
    x = out.skin[0]
    for j in range(len(out.soil)):
        x = work.soil_partial[j] + work.soil_transfer[j] * x
        out.soil[j] = x


@kernel
def _soil_down(gh: float, soil: Soil, rates: Column, work: Work) -> float:
    """Forward elimination of the soil from the bottom up; returns the partial result of the first layer."""
    carried = 0.0
    for j in range(len(soil.capacity) - 1, -1, -1):
        s = (soil.capacity[j] * rates.soil[j] + carried) / work.soil_pivot[j]
        work.soil_partial[j] = s
        if j > 0:
            carried = gh * soil.conductance[j - 1] * s
    return work.soil_partial[0]


@kernel
def solve(
    method: Method, gh: float, grid: Grid, foot: Footing, soil: Soil, ground: Link, state: Column, rates: Column,
    work: Work, out: Column,
) -> None:  # fmt: skip
    """x in (I - g h J) x = ``rates``, into ``out``."""
    top_soil = _soil_down(gh, soil, rates, work)
    yt, yu, yv, yq = _down(gh, grid, rates, work)
    m = grid.mass[0]
    sq = (m * rates.humidity[0] + yq) / work.vapour_pivot[0]
    closing = work.closing
    skin = rates.skin[0] / closing[0]
    if method.boundary == ENERGY:
        skin = foot.skin_capacity * rates.skin[0] + gh * (
            foot.skin_conductance * top_soil - ground.latent_heat * ground.vapour_q * sq
        )
        skin /= closing[0]
    yt += m * rates.theta[0] + gh * ground.heat_s * skin
    push = gh * ground.drag_s * skin
    yu += m * rates.u[0] - push * state.u[0]
    yv += m * rates.v[0] - push * state.v[0]
    p = work.inverse
    a = p[0][0] * yt + p[1][0] * yu + p[2][0] * yv
    b = p[3][0] * yt + p[4][0] * yu + p[5][0] * yv
    c = p[6][0] * yt + p[7][0] * yu + p[8][0] * yv
    skin += closing[1] * a + closing[2] * b + closing[3] * c
    moved = ground.vapour_s * skin + ground.vapour_t * a + ground.vapour_u * b + ground.vapour_v * c
    out.theta[0] = a
    out.u[0] = b
    out.v[0] = c
    out.humidity[0] = sq + gh * moved / work.vapour_pivot[0]
    out.skin[0] = skin
    _up(work, out)
