"""Turbulence closures of the stable column, with the derivatives the implicit solver needs.

K = l^2 S f(Ri) with S the wind shear and Ri the gradient Richardson number. Two stable forms, by name:

``short``  f = (1 - 5 Ri)^2, nothing beyond Ri = 0.2: the local form of phi_m = phi_h = 1 + 5 z/L (Dyer 1974 quotes 5;
           Businger et al. 1971 give 4.7). Fits large-eddy simulations; over land its inversions are about 3 K too strong.
``blend``  1 / (1 + 10 Ri) at the ground going linearly over 200 m to the sharp form, (1 - 5 Ri)^2 up to Ri = 0.1 and
           (1 / (20 Ri))^2 beyond (King et al. 2001 discuss both tails; forms and heights recalled). Fits land nights,
           where one column stands for uneven ground; on GABLS1 it is about 60 m too deep.

The unstable side is f = (1 - 16 Ri)^(1/2), the local form of Dyer's (1974) phi_m with the same mixing length, so that K
does not jump at Ri = 0.
"""

from __future__ import annotations

import math

from forcing.speed import kernel

SHORT = 0
BLEND = 1
CLOSURES = {"short": SHORT, "blend": BLEND}
LEAST_SHEAR_SQUARED = 1e-10  # [s-2] only keeps Ri finite where there is no shear at all


@kernel
def stable_function(closure: int, tail: float, richardson: float) -> tuple[float, float]:
    """f(Ri) and df/dRi for Ri >= 0; ``tail`` is the share of the long tail in `blend`."""
    x = 1.0 - 5.0 * richardson
    if closure == SHORT:
        if x <= 0.0:
            return 0.0, 0.0
        return x * x, -10.0 * x
    if richardson < 0.1:
        sharp = x * x
        slope = -10.0 * x
    else:
        sharp = 0.0025 / (richardson * richardson)
        slope = -2.0 * sharp / richardson
    if tail <= 0.0:
        return sharp, slope
    long_tail = 1.0 / (1.0 + 10.0 * richardson)
    return (
        tail * long_tail + (1.0 - tail) * sharp,
        -10.0 * tail * long_tail * long_tail + (1.0 - tail) * slope,
    )


@kernel
def diffusivity(
    closure: int, tail: float, length_squared: float, stability: float, shear_squared: float
) -> tuple[float, float, float]:
    """K [m2 s-1], dK/dN^2 and dK/dS^2 [m2 s] from N^2 and S^2 [s-2]."""
    if stability < 0.0:
        root = math.sqrt(shear_squared - 16.0 * stability)
        half = 0.5 * length_squared / root
        return length_squared * root, -16.0 * half, half
    shear = math.sqrt(shear_squared)
    richardson = stability / shear_squared
    f, slope = stable_function(closure, tail, richardson)
    return (
        length_squared * shear * f,
        length_squared * slope / shear,
        length_squared * (0.5 * f - richardson * slope) / shear,
    )
