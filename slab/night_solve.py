"""Direct solution of (I - g h J) x = r for the night column.

J couples buoyancy b = theta + moist x humidity, u and v by 3 x 3 blocks on three diagonals (K depends on their gradients);
humidity is carried along: K moves it, but it acts on K through b only. Freezing the diffusivities instead would be first
order and 1 K wrong at 60 s: the diffusivity of a perturbation is the derivative of the flux by the coupled gradients. Leaving
out humidity's part in K costs hundreds of rejected steps in near-neutral residual layers.

Blocks are eliminated from the top down, soil from the bottom up; skin, humidity, buoyancy and wind of the lowest cell remain
as five equations. Fluxes appear alike in both neighbours' rows, so heat, water and momentum are conserved to round-off. Left
out: the change of theta in g / theta, and of the latent heat with temperature.
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
def _inverse(
    b0: float, b1: float, b2: float, b3: float, b4: float, b5: float, b6: float, b7: float, b8: float
) -> tuple[float, float, float, float, float, float, float, float, float]:
    """Inverse of a 3 x 3 matrix given by rows."""
    c0 = b4 * b8 - b5 * b7
    c1 = b5 * b6 - b3 * b8
    c2 = b3 * b7 - b4 * b6
    r = 1.0 / (b0 * c0 + b1 * c1 + b2 * c2)
    return (
        c0 * r, (b2 * b7 - b1 * b8) * r, (b1 * b5 - b2 * b4) * r,
        c1 * r, (b0 * b8 - b2 * b6) * r, (b2 * b3 - b0 * b5) * r,
        c2 * r, (b1 * b6 - b0 * b7) * r, (b0 * b4 - b1 * b3) * r,
    )  # fmt: skip


@kernel
def _factor_air(gh: float, coriolis: float, grid: Grid, work: Work) -> tuple[float, ...]:
    """Eliminate the blocks from the top to cell 1.

    Returns what cell 0 receives from above: nine numbers of the block, humidity's pivot, its row against the block.
    """
    mass, exchange = grid.mass, work.exchange
    ga, gb, gc, gq = work.gradient
    ka, kb, kc = work.gain
    p0, p1, p2, p3, p4, p5, p6, p7, p8 = work.inverse
    t0, t1, t2, t3, t4, t5, t6, t7, t8 = work.transfer
    pivot, carried, n0, n1, n2, row0, row1, row2 = work.vapour
    above = r0 = r1 = r2 = 0.0
    d0 = d1 = d2 = d3 = d4 = d5 = d6 = d7 = d8 = 0.0
    for i in range(len(mass) - 1, 0, -1):
        j, m = i - 1, mass[i]
        turn = gh * coriolis * m
        # the interface below: e I + (a, b, c) (x, y, z)^T for the block, q for humidity
        e, a, b, c, q = gh * exchange[j], gh * ga[j], gh * gb[j], gh * gc[j], gh * gq[j]
        x, y, z = ka[j], kb[j], kc[j]
        i0, i1, i2, i3, i4, i5, i6, i7, i8 = _inverse(
            m + d0 + e + a * x, d1 + a * y, d2 + a * z,
            d3 + b * x, m + d4 + e + b * y, d5 + b * z - turn,
            d6 + c * x, d7 + c * y + turn, m + d8 + e + c * z,
        )  # fmt: skip
        p0[i], p1[i], p2[i] = i0, i1, i2
        p3[i], p4[i], p5[i] = i3, i4, i5
        p6[i], p7[i], p8[i] = i6, i7, i8
        r0, r1, r2 = r0 + q * x, r1 + q * y, r2 + q * z
        row0[i], row1[i], row2[i] = r0, r1, r2
        wet = m + above + e
        pivot[i] = wet
        # transfer: inverse times block
        f0 = i0 * a + i1 * b + i2 * c
        f1 = i3 * a + i4 * b + i5 * c
        f2 = i6 * a + i7 * b + i8 * c
        w0, w1, w2 = e * i0 + f0 * x, e * i1 + f0 * y, e * i2 + f0 * z
        w3, w4, w5 = e * i3 + f1 * x, e * i4 + f1 * y, e * i5 + f1 * z
        w6, w7, w8 = e * i6 + f2 * x, e * i7 + f2 * y, e * i8 + f2 * z
        t0[i], t1[i], t2[i] = w0, w1, w2
        t3[i], t4[i], t5[i] = w3, w4, w5
        t6[i], t7[i], t8[i] = w6, w7, w8
        # humidity of this cell by the block and the humidity of the cell below
        l0 = (q * x - r0 * w0 - r1 * w3 - r2 * w6) / wet
        l1 = (q * y - r0 * w1 - r1 * w4 - r2 * w7) / wet
        l2 = (q * z - r0 * w2 - r1 * w5 - r2 * w8) / wet
        n0[i], n1[i], n2[i] = l0, l1, l2
        carried[i] = e / wet
        above = e * (1.0 - e / wet)
        # what the cell below receives: block times (I - transfer)
        h0 = x - (x * w0 + y * w3 + z * w6)
        h1 = y - (x * w1 + y * w4 + z * w7)
        h2 = z - (x * w2 + y * w5 + z * w8)
        d0, d1, d2 = e * (1.0 - w0) + a * h0, a * h1 - e * w1, a * h2 - e * w2
        d3, d4, d5 = b * h0 - e * w3, e * (1.0 - w4) + b * h1, b * h2 - e * w5
        d6, d7, d8 = c * h0 - e * w6, c * h1 - e * w7, e * (1.0 - w8) + c * h2
        r0, r1, r2 = q * h0 - e * l0, q * h1 - e * l1, q * h2 - e * l2
    return d0, d1, d2, d3, d4, d5, d6, d7, d8, above, r0, r1, r2


@kernel
def _fill_corner(
    method: Method, gh: float, coriolis: float, grid: Grid, foot: Footing, ground: Link, state: Column,
    above: tuple[float, ...], work: Work,
) -> None:  # fmt: skip
    """Matrix of the lowest cell for (skin, humidity, buoyancy, u, v), row by row."""
    w = work.corner
    u = state.u[0]
    v = state.v[0]
    mass = grid.mass[0]
    moist = grid.moist
    turn = gh * coriolis * mass
    for k in range(25):
        w[k] = 0.0
    if method.boundary == ENERGY:
        heat = CP_DRY * foot.exner
        latent = ground.latent_heat
        conduction = foot.skin_conductance * (1.0 - work.soil_transfer[0])
        by_theta = heat * ground.heat_t + latent * ground.vapour_t
        w[0] = foot.skin_capacity + gh * (ground.lost + heat * ground.heat_s + latent * ground.vapour_s + conduction)
        w[1] = gh * (latent * ground.vapour_q - moist * by_theta)
        w[2] = gh * by_theta
        w[3] = gh * (heat * ground.heat_u + latent * ground.vapour_u)
        w[4] = gh * (heat * ground.heat_v + latent * ground.vapour_v)
    elif method.boundary == TEMPERATURE:
        w[0] = 1.0
    else:
        w[0] = 1.0 + gh * ground.lost / foot.skin_capacity
    d0, d1, d2, d3, d4, d5, d6, d7, d8, wet, r0, r1, r2 = above
    w[5] = -gh * ground.vapour_s
    w[6] = mass + wet - gh * (ground.vapour_q - moist * ground.vapour_t)
    w[7] = r0 - gh * ground.vapour_t
    w[8] = r1 - gh * ground.vapour_u
    w[9] = r2 - gh * ground.vapour_v
    by_theta = ground.heat_t + moist * ground.vapour_t
    w[10] = -gh * (ground.heat_s + moist * ground.vapour_s)
    w[11] = -gh * moist * (ground.vapour_q - by_theta)
    w[12] = mass + d0 - gh * by_theta
    w[13] = d1 - gh * (ground.heat_u + moist * ground.vapour_u)
    w[14] = d2 - gh * (ground.heat_v + moist * ground.vapour_v)
    w[15] = gh * u * ground.drag_s
    w[16] = -gh * u * ground.drag_t * moist
    w[17] = d3 + gh * u * ground.drag_t
    w[18] = mass + d4 + gh * (ground.drag + u * ground.drag_u)
    w[19] = d5 + gh * u * ground.drag_v - turn
    w[20] = gh * v * ground.drag_s
    w[21] = -gh * v * ground.drag_t * moist
    w[22] = d6 + gh * v * ground.drag_t
    w[23] = d7 + gh * v * ground.drag_u + turn
    w[24] = mass + d8 + gh * (ground.drag + v * ground.drag_v)


@kernel
def _factor_corner(w: Numbers) -> None:
    """Triangular factors in place."""
    for k in range(4):
        for i in range(k + 1, 5):
            share = w[5 * i + k] / w[6 * k]
            w[5 * i + k] = share
            for j in range(k + 1, 5):
                w[5 * i + j] -= share * w[5 * k + j]


@kernel
def _solve_corner(w: Numbers, side: Numbers) -> None:
    """Solve the five equations in place."""
    for i in range(1, 5):
        for k in range(i):
            side[i] -= w[5 * i + k] * side[k]
    for i in range(4, -1, -1):
        for k in range(i + 1, 5):
            side[i] -= w[5 * i + k] * side[k]
        side[i] /= w[6 * i]


@kernel
def factor(
    method: Method, gh: float, coriolis: float, grid: Grid, foot: Footing, soil: Soil, ground: Link, state: Column,
    work: Work,
) -> None:  # fmt: skip
    """Factor I - g h J at ``state``, whose slopes `right_side` left in ``work``."""
    _factor_soil(method.boundary, gh, foot, soil, work)
    above = _factor_air(gh, coriolis, grid, work)
    _fill_corner(method, gh, coriolis, grid, foot, ground, state, above, work)
    _factor_corner(work.corner)


@kernel
def _down(gh: float, grid: Grid, rates: Column, work: Work) -> None:
    """Forward elimination of a right side from the top to cell 1; what cell 0 receives goes to the corner's side."""
    mass, exchange = grid.mass, work.exchange
    ga, gb, gc, gq = work.gradient
    ka, kb, kc = work.gain
    p0, p1, p2, p3, p4, p5, p6, p7, p8 = work.inverse
    sb, su, sv, sq = work.partial
    pivot, _, _, _, _, row0, row1, row2 = work.vapour
    rt, ru, rv, rq = rates.theta, rates.u, rates.v, rates.humidity
    moist = grid.moist
    yb = yu = yv = yq = 0.0
    for i in range(len(mass) - 1, 0, -1):
        m = mass[i]
        q = rq[i]
        yb += m * (rt[i] + moist * q)
        yu += m * ru[i]
        yv += m * rv[i]
        a = p0[i] * yb + p1[i] * yu + p2[i] * yv
        b = p3[i] * yb + p4[i] * yu + p5[i] * yv
        c = p6[i] * yb + p7[i] * yu + p8[i] * yv
        q = (m * q + yq - row0[i] * a - row1[i] * b - row2[i] * c) / pivot[i]
        sb[i] = a
        su[i] = b
        sv[i] = c
        sq[i] = q
        j = i - 1
        e = gh * exchange[j]
        s = gh * (ka[j] * a + kb[j] * b + kc[j] * c)
        yb = e * a + ga[j] * s
        yu = e * b + gb[j] * s
        yv = e * c + gc[j] * s
        yq = e * q + gq[j] * s
    m = mass[0]
    side = work.corner_side
    side[1] = m * rq[0] + yq
    side[2] = m * (rt[0] + moist * rq[0]) + yb
    side[3] = m * ru[0] + yu
    side[4] = m * rv[0] + yv


@kernel
def _up(grid: Grid, work: Work, out: Column) -> None:
    """Back substitution from cell 0 upward, and from the skin into the soil."""
    t0, t1, t2, t3, t4, t5, t6, t7, t8 = work.transfer
    sb, su, sv, sq = work.partial
    _, carried, n0, n1, n2, _, _, _ = work.vapour
    xt, xu, xv, xq = out.theta, out.u, out.v, out.humidity
    moist = grid.moist
    x, q, a, b, c = work.corner_side
    out.skin[0] = x
    xt[0] = a - moist * q
    xu[0] = b
    xv[0] = c
    xq[0] = q
    for i in range(1, len(xt)):
        q = sq[i] + carried[i] * q + n0[i] * a + n1[i] * b + n2[i] * c
        at = sb[i] + t0[i] * a + t1[i] * b + t2[i] * c
        bt = su[i] + t3[i] * a + t4[i] * b + t5[i] * c
        c = sv[i] + t6[i] * a + t7[i] * b + t8[i] * c
        a = at
        b = bt
        xt[i] = a - moist * q
        xu[i] = b
        xv[i] = c
        xq[i] = q
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
    method: Method, gh: float, grid: Grid, foot: Footing, soil: Soil, rates: Column, work: Work, out: Column
) -> None:
    """x in (I - g h J) x = ``rates``, into ``out`` (which may be ``rates``)."""
    top_soil = _soil_down(gh, soil, rates, work)
    _down(gh, grid, rates, work)
    skin = rates.skin[0]
    if method.boundary == ENERGY:
        skin = foot.skin_capacity * skin + gh * foot.skin_conductance * top_soil
    work.corner_side[0] = skin
    _solve_corner(work.corner, work.corner_side)
    _up(grid, work, out)
