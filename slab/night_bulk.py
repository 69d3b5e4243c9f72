"""Transfer through the lowest half cell: the closure's own similarity profiles, integrated, by bulk Richardson number.

In a layer of constant flux K = (k z)^2 S f(Ri) with equal K for heat and momentum means phi = f^(-1/2) and zeta = z/L = Ri phi. The
profile integrals P = integral of phi d(ln z) from a roughness length to the cell's centre are closed for both stable forms:

``short``  f = (1 - 5 Ri)^2: phi = 1 + 5 zeta, P = ln(z / z0) + 5 zeta, and Ri_b gives f_m = f_h = (1 - 5 Ri_b)^2 exactly for equal
           roughness lengths; with unequal ones the relation folds back, so the same form is kept;
``blend``  at the ground f = 1 / (1 + 10 Ri): with r = (1 + 10 Ri)^(1/2) - 1, zeta = r (r + 1) (r + 2) / 10 and
           P = [3 r + ln(r / (r + 2))] between the two ends.

Then Ri_b = zeta P_h / P_m^2, and fluxes are the neutral ones times f_m = (ln_m / P_m)^2 and f_h = ln_m ln_h / (P_m P_h). Using the
local f(Ri_b) instead would pass twice the heat in very stable air and make the result depend on the first cell.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from forcing.speed import kernel
from slab.night_closure import SHORT, stable_function

NEAR_NEUTRAL = 1e-6


class Bulk(NamedTuple):
    """Stability factors of momentum and heat and their derivatives with respect to Ri_b."""

    momentum: float
    momentum_slope: float
    heat: float
    heat_slope: float


@kernel
def _root(zeta: float) -> float:
    """r with r (r + 1) (r + 2) / 10 = zeta, from above by Newton's rule."""
    r = min(5.0 * zeta, math.pow(10.0 * zeta, 1.0 / 3.0))
    for _ in range(40):
        step = (r * (r + 1.0) * (r + 2.0) - 10.0 * zeta) / (3.0 * r * r + 6.0 * r + 2.0)
        r -= step
        if step < 1e-8 * r:  # the error left is its square
            break
    return r


@kernel
def _long_span(r: float, zeta: float, share: float) -> tuple[float, float]:
    """P from a roughness length at ``share`` of the height up to it, and r dP/dr."""
    low = _root(zeta * share)
    span = 3.0 * (r - low) + math.log(r * (low + 2.0) / (low * (r + 2.0)))
    # d ln zeta / d ln r of both ends, whose zeta keep their ratio
    top = 1.0 + r / (r + 1.0) + r / (r + 2.0)
    bottom = 1.0 + low / (low + 1.0) + low / (low + 2.0)
    return span, 3.0 * r + 2.0 / (r + 2.0) - top / bottom * (3.0 * low + 2.0 / (low + 2.0))


@kernel
def _long(richardson: float, log_m: float, log_h: float) -> Bulk:
    share_m = math.exp(-log_m)
    share_h = math.exp(-log_h)
    wanted = math.log(richardson)
    x = math.log(min(5.0 * richardson * log_m * log_m / log_h, math.sqrt(30.0 * richardson)))
    p_m = p_h = log_m
    d_m = d_h = slope = 0.0
    for _ in range(30):
        r = math.exp(x)
        zeta = 0.1 * r * (r + 1.0) * (r + 2.0)
        p_m, d_m = _long_span(r, zeta, share_m)
        p_h, d_h = _long_span(r, zeta, share_h)
        slope = 1.0 + r / (r + 1.0) + r / (r + 2.0) + d_h / p_h - 2.0 * d_m / p_m
        step = (math.log(zeta * p_h / (p_m * p_m)) - wanted) / slope
        x -= step
        if abs(step) < 1e-7:
            break
    f_m = log_m * log_m / (p_m * p_m)
    f_h = log_m * log_h / (p_m * p_h)
    per = 1.0 / (slope * richardson)
    return Bulk(f_m, -2.0 * f_m * d_m / p_m * per, f_h, -f_h * (d_m / p_m + d_h / p_h) * per)


@kernel
def bulk(closure: int, richardson: float, log_m: float, log_h: float, unstable_factor: float) -> Bulk:
    """Stability factors for a bulk Richardson number between skin and cell centre, with ln(z / z0) of both kinds.

    Unstable: 1 - 10 Ri_b / (1 + c |Ri_b|^(1/2)), c = ``unstable_factor`` (Louis 1979, with the slope 10 of the stable side).
    """
    if richardson < 0.0:
        root = math.sqrt(-richardson)
        lower = 1.0 + unstable_factor * root
        f = 1.0 - 10.0 * richardson / lower
        slope = -10.0 / lower + 5.0 * unstable_factor * root / (lower * lower)
        return Bulk(f, slope, f, slope)
    if closure == SHORT:
        f, slope = stable_function(SHORT, 0.0, richardson)
        return Bulk(f, slope, f, slope)
    return _long(max(richardson, NEAR_NEUTRAL), log_m, log_h)
