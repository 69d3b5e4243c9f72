"""The air aloft: a measured profile tabulated for exact integrals, sinking, warming and moving to a later profile.

The vertical coordinate of the mixed layer is the mass of air below a level, m = (p_surface - p) / g [kg m-2]:
hydrostatic density is then exact and both budgets close to round-off. Potential temperature and specific humidity
are linear between the levels of a fine table that contains every measured level; virtual potential temperature is
computed from them.

Sinking follows mass flux W = -D m up to the mass ``cap`` (2 km) and is constant above, so that the position of
every parcel depends on S = integral of D dt alone and all integrals have closed forms (below: derived from
dm/dS = -min(m, cap)).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from forcing.air import GRAVITY
from forcing.free_air import without_own_layer
from forcing.ground import pressure_by_theta
from forcing.profile import Profile
from forcing.speed import COMPILED, kernel

FINE_STEP = 25.0  # [m] table step in the lowest kilometres; linear in height and in mass then differ by under 1e-4 K
COARSE_STEP, COARSE_FROM = 100.0, 4000.0  # [m] the step higher up
TABLE_TOP = 12000.0  # [m] above ground; leaves room for air that sinks for days
SINKING_CAP_HEIGHT = 2000.0  # [m] sinking grows linearly up to here, then is constant

Numbers = Sequence[float]


class Aloft(NamedTuple):
    """Tabulated air aloft; every member is a sequence of n floats but the last.

    ``height`` [m above ground], ``mass`` [kg m-2 of air below], ``theta`` [K], ``humidity`` [kg kg-1], ``u``, ``v``
    [m s-1]; ``sum_*`` running integrals over mass from the ground; ``exp_*`` and ``log_*`` the weighted integrals
    that sinking and rising through the cap need; ``cap`` [kg m-2].
    """

    height: Numbers
    mass: Numbers
    theta: Numbers
    humidity: Numbers
    u: Numbers
    v: Numbers
    sum_theta: Numbers
    sum_humidity: Numbers
    exp_theta: Numbers
    exp_humidity: Numbers
    log_theta: Numbers
    log_humidity: Numbers
    cap: float


class Sample(NamedTuple):
    """The air at one mass level, and integrals of it from the ground."""

    theta: float
    humidity: float
    u: float
    v: float
    sum_theta: float
    sum_humidity: float
    sum_theta_below_cap: float
    sum_humidity_below_cap: float


@kernel
def locate(levels: Numbers, x: float) -> int:
    """Index i with levels[i] <= x < levels[i + 1], kept inside the table."""
    low = 0
    high = len(levels) - 1
    while high - low > 1:
        middle = (low + high) // 2
        if levels[middle] <= x:
            low = middle
        else:
            high = middle
    return low


@kernel
def _running(mass: Numbers, values: Numbers, running: Numbers, x: float, i: int) -> float:
    slope = (values[i + 1] - values[i]) / (mass[i + 1] - mass[i])
    d = x - mass[i]
    return running[i] + d * (values[i] + 0.5 * slope * d)


@kernel
def _running_exp(mass: Numbers, values: Numbers, running: Numbers, cap: float, x: float, i: int) -> float:
    slope = (values[i + 1] - values[i]) / (mass[i + 1] - mass[i])
    low = math.exp((mass[i] - cap) / cap)
    high = math.exp((x - cap) / cap)
    here = values[i] + slope * (x - mass[i])
    return running[i] + cap * (high * here - low * values[i]) - cap * cap * slope * (high - low)


@kernel
def _running_log(mass: Numbers, values: Numbers, running: Numbers, cap: float, x: float, i: int) -> float:
    """Integral of values * cap / mass from the first level above the ground on."""
    if i == 0 or x <= mass[i]:
        return running[i]
    slope = (values[i + 1] - values[i]) / (mass[i + 1] - mass[i])
    base = values[i] - slope * mass[i]
    return running[i] + cap * (base * math.log(x / mass[i]) + slope * (x - mass[i]))


@kernel
def height_of(air: Aloft, mass: float) -> float:
    """Height above ground [m] of a mass level [kg m-2]."""
    i = locate(air.mass, mass)
    f = (mass - air.mass[i]) / (air.mass[i + 1] - air.mass[i])
    return air.height[i] + f * (air.height[i + 1] - air.height[i])


@kernel
def mass_of(air: Aloft, height: float) -> float:
    """Mass below [kg m-2] of a height above ground [m]."""
    i = locate(air.height, height)
    f = (height - air.height[i]) / (air.height[i + 1] - air.height[i])
    return air.mass[i] + f * (air.mass[i + 1] - air.mass[i])


@kernel
def pressure_at(air: Aloft, surface_pressure: float, height: float) -> float:
    """Pressure [Pa] at a height above ground [m]; over the table it goes on falling by the table's last scale height."""
    last = len(air.height) - 1
    if height <= air.height[last]:
        return surface_pressure - GRAVITY * mass_of(air, height)
    top = surface_pressure - GRAVITY * air.mass[last]
    under = surface_pressure - GRAVITY * air.mass[last - 1]
    scale = (air.height[last] - air.height[last - 1]) / math.log(under / top)
    return top * math.exp(-(height - air.height[last]) / scale)


@kernel
def _origin(cap: float, mass: float, sunk: float) -> float:
    """Mass level where the air that is at ``mass`` after sinking ``sunk`` came from."""
    if mass > cap:
        start = mass + cap * sunk
        if start < cap:
            start = cap * math.exp(mass / cap - 1.0 + sunk)
        return start
    start = mass * math.exp(sunk)
    if start > cap:
        start = cap * (1.0 + sunk - math.log(cap / mass))
    return start


@kernel
def _integral(mass: Numbers, values: Numbers, total: Numbers, exps: Numbers, logs: Numbers, cap: float, sunk: float,
              level: float, start: float) -> float:  # fmt: skip
    """Integral of a sunken profile from the ground to ``level`` (whose air came from ``start``)."""
    i = locate(mass, start)
    if sunk == 0.0:
        return _running(mass, values, total, start, i)
    shrink = math.exp(-sunk)
    if level <= cap:
        if start <= cap:
            return shrink * _running(mass, values, total, start, i)
        c = locate(mass, cap)
        below = _running(mass, values, total, cap, c)
        return shrink * (below + _running_exp(mass, values, exps, cap, start, i))
    c = locate(mass, cap)
    to_cap = _running(mass, values, total, cap, c)
    if sunk > 0.0:
        edge = cap * (1.0 + sunk)
        e = locate(mass, edge)
        inside = shrink * (to_cap + _running_exp(mass, values, exps, cap, edge, e))
        return inside + _running(mass, values, total, start, i) - _running(mass, values, total, edge, e)
    edge = cap * math.exp(sunk)
    e = locate(mass, edge)
    inside = shrink * _running(mass, values, total, edge, e)
    risen_from = _running_log(mass, values, logs, cap, edge, e)
    if start < cap:
        return inside + _running_log(mass, values, logs, cap, start, i) - risen_from
    risen = _running_log(mass, values, logs, cap, cap, c) - risen_from
    return inside + risen + _running(mass, values, total, start, i) - to_cap


@kernel
def sample(air: Aloft, level: float, sunk: float) -> Sample:
    """The air at mass ``level`` [kg m-2] after sinking ``sunk`` = integral of divergence [1], and its integrals."""
    mass = air.mass
    cap = air.cap
    start = level if sunk == 0.0 else _origin(cap, level, sunk)
    i = locate(mass, start)
    f = (start - mass[i]) / (mass[i + 1] - mass[i])
    theta = air.theta[i] + f * (air.theta[i + 1] - air.theta[i])
    humidity = air.humidity[i] + f * (air.humidity[i + 1] - air.humidity[i])
    u = air.u[i] + f * (air.u[i + 1] - air.u[i])
    v = air.v[i] + f * (air.v[i + 1] - air.v[i])
    st = _integral(mass, air.theta, air.sum_theta, air.exp_theta, air.log_theta, cap, sunk, level, start)
    sq = _integral(mass, air.humidity, air.sum_humidity, air.exp_humidity, air.log_humidity, cap, sunk, level, start)
    ct = st
    cq = sq
    if level > cap:
        start = _origin(cap, cap, sunk)
        ct = _integral(mass, air.theta, air.sum_theta, air.exp_theta, air.log_theta, cap, sunk, cap, start)
        cq = _integral(mass, air.humidity, air.sum_humidity, air.exp_humidity, air.log_humidity, cap, sunk, cap, start)
    return Sample(theta, humidity, u, v, st, sq, ct, cq)


@kernel
def blended(air: Aloft, later: Aloft, level: float, sunk: float, weight: float) -> Sample:
    """The air at a mass level on its way from one table to a later one: ``weight`` 0 is the first, 1 the later."""
    now = sample(air, level, sunk)
    if weight == 0.0:
        return now
    then = sample(later, level, 0.0)
    w = weight
    k = 1.0 - w
    return Sample(
        k * now.theta + w * then.theta,
        k * now.humidity + w * then.humidity,
        k * now.u + w * then.u,
        k * now.v + w * then.v,
        k * now.sum_theta + w * then.sum_theta,
        k * now.sum_humidity + w * then.sum_humidity,
        k * now.sum_theta_below_cap + w * then.sum_theta_below_cap,
        k * now.sum_humidity_below_cap + w * then.sum_humidity_below_cap,
    )


def origins(air: Aloft, mass: NDArray[np.float64], sunk: float) -> NDArray[np.float64]:
    """Mass levels where the air that is now at ``mass`` (n,) came from; `_origin` for arrays."""
    cap = air.cap
    safe = np.maximum(mass, 1e-9)
    above = mass + cap * sunk
    above = np.where(above < cap, cap * np.exp(np.minimum(mass / cap - 1.0 + sunk, 50.0)), above)
    below = mass * math.exp(sunk)
    below = np.where(below > cap, cap * (1.0 + sunk - np.log(cap / safe)), below)
    return np.where(mass > cap, above, below)


def _weighted(mass: NDArray[np.float64], values: NDArray[np.float64], cap: float) -> tuple[Numbers, Numbers, Numbers]:
    """Running plain, exponential and logarithmic integrals at the levels."""
    d = np.diff(mass)
    slope = np.diff(values) / d
    total = np.concatenate(([0.0], np.cumsum(d * 0.5 * (values[1:] + values[:-1]))))
    over = mass >= cap * (1.0 - 1e-9)  # a level that stands for the cap may miss it by rounding
    weight = np.where(over, np.exp(np.minimum((mass - cap) / cap, 50.0)), 0.0)
    piece = cap * (weight[1:] * values[1:] - weight[:-1] * values[:-1]) - cap * cap * slope * np.diff(weight)
    exps = np.concatenate(([0.0], np.cumsum(np.where(over[:-1], piece, 0.0))))
    inner = np.zeros_like(d)
    base = values[1:-1] - slope[1:] * mass[1:-1]
    inner[1:] = cap * (base * np.log(mass[2:] / mass[1:-1]) + slope[1:] * d[1:])
    logs = np.concatenate(([0.0], np.cumsum(inner)))
    return as_numbers(total), as_numbers(exps), as_numbers(logs)


def as_numbers(values: NDArray[np.float64]) -> list[float]:
    """Hand an array to kernels: plain Python is several times faster on lists than on arrays."""
    if COMPILED:
        return np.ascontiguousarray(values, dtype=np.float64)  # type: ignore[return-value]
    plain: list[float] = values.tolist()
    return plain


def tabulate(mass: NDArray[np.float64], height: NDArray[np.float64], values: Sequence[NDArray[np.float64]],
             cap: float) -> Aloft:  # fmt: skip
    """Build the table from arrays (n,) of increasing mass [kg m-2] and height [m above ground].

    ``values`` holds theta [K], humidity [kg kg-1], u and v [m s-1], each (n,).
    """
    theta, humidity, u, v = values
    st, et, lt = _weighted(mass, theta, cap)
    sq, eq, lq = _weighted(mass, humidity, cap)
    return Aloft(
        as_numbers(height), as_numbers(mass), as_numbers(theta), as_numbers(humidity), as_numbers(u), as_numbers(v),
        st, sq, et, eq, lt, lq, cap,
    )  # fmt: skip


def mean_below(air: Aloft, mass: float, values: Numbers) -> float:
    """Mean over mass of one of the table's columns below a level."""
    levels = np.asarray(air.mass)
    m = np.append(levels[levels < mass], mass)
    v = np.interp(m, levels, np.asarray(values))
    return float(np.sum(np.diff(m) * 0.5 * (v[1:] + v[:-1])) / mass)


def distinct(levels: NDArray[np.float64]) -> NDArray[np.float64]:
    """Levels in order, without those that repeat the one below to within a thousandth (m or kg m-2).

    numpy's own `unique` would load masked arrays, which costs a third of a start.
    """
    ordered = np.sort(levels)
    return np.asarray(ordered[np.concatenate(([True], np.diff(ordered) > 1e-3))])


def from_profile(profile: Profile) -> Aloft:
    """Tabulate a measured profile up to 12 km or its own top."""
    top = min(float(profile.height[-1]), TABLE_TOP)
    even = np.concatenate((np.arange(0.0, min(top, COARSE_FROM), FINE_STEP), np.arange(COARSE_FROM, top, COARSE_STEP)))
    levels = np.concatenate((even, profile.height[profile.height <= top], [top]))
    if top > SINKING_CAP_HEIGHT:
        levels = np.append(levels, SINKING_CAP_HEIGHT)
    levels = distinct(levels)
    theta, humidity, u, v = (
        np.interp(levels, profile.height, x) for x in (profile.theta, profile.humidity, profile.u, profile.v)
    )
    pressure = pressure_by_theta(levels, theta, humidity, profile.surface_pressure)
    mass = (pressure[0] - pressure) / GRAVITY
    cap = float(np.interp(SINKING_CAP_HEIGHT, levels, mass)) if top > SINKING_CAP_HEIGHT else 10.0 * float(mass[-1])
    return tabulate(mass, levels, (theta, humidity, u, v), cap)


def on_same_levels(air: Aloft, other: Profile) -> Aloft:
    """A later profile on the mass levels of ``air``, without the layer that its own ground has made; above its own top
    its last value is held."""
    later = from_profile(without_own_layer(other))
    mass = np.asarray(air.mass)
    theta, humidity, u, v = (
        np.interp(mass, np.asarray(later.mass), np.asarray(x)) for x in (later.theta, later.humidity, later.u, later.v)
    )
    return tabulate(mass, np.asarray(air.height), (theta, humidity, u, v), air.cap)


def linear(*, theta_ground: float, gradient: float, top: float = 20000.0, humidity_ground: float = 0.0,
           humidity_gradient: float = 0.0) -> Aloft:  # fmt: skip
    """Constant-density air (mass = height) with linear gradients [K m-1, kg kg-1 m-1], for closed solutions."""
    levels = np.array([0.0, 1e-3 * top, 0.5 * top, top])
    zero = np.zeros_like(levels)
    theta = theta_ground + gradient * levels
    humidity = humidity_ground + humidity_gradient * levels
    return tabulate(levels, levels, (theta, humidity, zero, zero), 10.0 * top)
