"""Closed-solution entry: constant density, linear gradients, imposed kinematic fluxes.

A jump at the start depth is not a valid profile file, so the published closed solutions are met through this entry;
everything but the surface is the code that the forecast runs.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from forcing.table import COLUMNS, DIVERGENCE, FRICTION, LATENT, SENSIBLE
from slab.column import as_numbers, linear, sample
from slab.daytime import HEAT, MASS, MEMBERS, VAPOUR, Offsets, Place, no_ground, offsets_at
from slab.growth import Closure, slab_at
from slab.march import STANDARD, Control, advance, scratch

KNOT = 120.0  # [s] the imposed flux is taken as linear over this time
SMALLEST_DEPTH = 0.01  # [m] stands for a start at the ground
FINE = STANDARD._replace(least_step=1e-7)  # a start without a jump grows without bound for an instant


class LinearResult(NamedTuple):
    """State by knot, arrays (n,): time [s], depth [m], theta [K], humidity [kg kg-1], jumps [K, kg kg-1]."""

    time: NDArray[np.float64]
    depth: NDArray[np.float64]
    theta: NDArray[np.float64]
    humidity: NDArray[np.float64]
    jump: NDArray[np.float64]
    jump_humidity: NDArray[np.float64]


def grow(*, depth: float, jump: float, gradient: float, heat_flux: Callable[[float], float], hours: float,
         closure: Closure, theta_ground: float = 290.0, vapour_flux: float = 0.0, humidity: float = 0.0,
         humidity_aloft: float = 0.0, humidity_gradient: float = 0.0, divergence: float = 0.0,
         friction_velocity: float = 0.0, control: Control = FINE) -> LinearResult:  # fmt: skip
    """Grow a mixed layer into linear air at constant density.

    Parameters
    ----------
    depth, jump : float
        Start depth [m] and potential-temperature jump [K] (sets the start temperature of the slab).
    gradient : float
        Potential-temperature gradient aloft [K m-1].
    heat_flux : callable
        Kinematic surface heat flux [K m s-1, positive upward] of time since the start [s].
    hours : float
        Length of the run [h].
    closure : Closure
        Entrainment closure; the growth cap applies as it stands there.
    theta_ground : float
        Profile aloft extrapolated to the ground [K].
    vapour_flux : float
        Kinematic vapour flux [kg kg-1 m s-1, positive upward].
    humidity, humidity_aloft, humidity_gradient : float
        Slab's humidity, profile's at the ground [kg kg-1] and its gradient [kg kg-1 m-1].
    divergence : float
        Positive sinks the air aloft and the slab's top [s-1].
    friction_velocity : float
        [m s-1].
    """
    air = linear(theta_ground=theta_ground, gradient=gradient, humidity_ground=humidity_aloft,
                 humidity_gradient=humidity_gradient)  # fmt: skip
    times = np.append(np.arange(0.0, hours * 3600.0 - 1e-6, KNOT), hours * 3600.0)
    table = np.zeros((len(times), COLUMNS))
    table[:, SENSIBLE] = [heat_flux(t) for t in times]
    table[:, LATENT] = vapour_flux
    table[:, DIVERGENCE] = divergence
    table[:, FRICTION] = friction_velocity
    rows = [as_numbers(row) for row in table]
    place = Place(1e5, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 1.0)
    start = max(depth, SMALLEST_DEPTH)
    here = sample(air, start, 0.0)
    y = as_numbers(np.zeros(MEMBERS))
    y[MASS] = start
    y[HEAT] = start * (here.theta - jump) - here.sum_theta
    y[VAPOUR] = start * (humidity if depth > 0.0 else here.humidity) - here.sum_humidity
    at = Offsets(0.0, 0.0, 0.0, 0.0, 0.0, divergence)
    work = scratch()
    ground, thickness = no_ground()
    step = 1.0
    found = []
    for k in range(len(times)):
        aloft = sample(air, y[MASS], at.sunk)
        slab = slab_at(y[MASS], y[HEAT], y[VAPOUR], aloft)
        found.append((times[k], y[MASS], slab.theta, slab.humidity, slab.jump_theta, slab.jump_humidity))
        if k + 1 == len(times):
            break
        span = float(times[k + 1] - times[k])
        step, _ = advance(y, step, span, rows[k], rows[k + 1], at, air, air, place, ground, thickness, closure,
                          control, work, False)  # fmt: skip
        at = offsets_at(at, rows[k], rows[k + 1], span, span)
    return LinearResult(*np.array(found).T)
