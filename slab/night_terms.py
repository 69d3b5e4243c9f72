"""Right side of the night column's equations, and what its Jacobian needs."""

from __future__ import annotations

from typing import NamedTuple

from forcing.air import CP_DRY, GRAVITY
from forcing.speed import kernel
from slab.night_closure import LEAST_SHEAR_SQUARED, diffusivity
from slab.night_grid import Column, Grid, Numbers, numbers
from slab.night_surface import ENERGY, FLUX, TEMPERATURE, Drive, Footing, Link, link


class Method(NamedTuple):
    """Numbers that say how to solve (``closure`` and ``boundary`` are the integers of their modules).

    Attributes
    ----------
    tolerance_theta, tolerance_wind : local error a step may make anywhere, K and m s-1.
    tolerance_skin : the same for the skin temperature, K.
    least_step, largest_step : s.
    """

    closure: int
    boundary: int
    tolerance_theta: float = 0.05
    tolerance_wind: float = 0.1
    tolerance_skin: float = 0.2
    least_step: float = 0.02
    largest_step: float = 300.0


class Outside(NamedTuple):
    """What acts on the air from outside during one call of `advance`, each (n,).

    ``theta_rate`` [K s-1] (long-wave divergence, advection, sinking), ``humidity_rate`` [s-1], ``u_force``, ``v_force``
    [m s-2]: the pressure gradient as -f v_g and f u_g plus anything else; ``coriolis`` f [s-1].
    """

    theta_rate: Numbers
    humidity_rate: Numbers
    u_force: Numbers
    v_force: Numbers
    coriolis: float


class Soil(NamedTuple):
    """Soil layers: ``capacity`` (m,) J m-2 K-1; ``conductance`` (m - 1,) between neighbours, W m-2 K-1."""

    capacity: Numbers
    conductance: Numbers


class Work(NamedTuple):
    """Preallocated sequences of the stepping kernel; nothing in them outlives a step.

    ``rates``, ``first``, ``second`` : right side and the two stages; ``trial`` : the state between the stages.
    ``exchange`` (n - 1,) density K / spacing [kg m-2 s-1] (``trial_exchange``: of the trial state); ``gradient`` (4 x n - 1, of
    buoyancy, u, v, humidity) and ``gain`` (3 x n - 1): the derivative of an interface's flux is exchange I + gradient gain^T, the
    rank-one part being dK. ``inverse``, ``transfer`` (9 x n): blocks of the elimination; ``partial`` (4 x n); ``vapour`` (5 x n):
    humidity's pivot, transfer and row against the block; ``soil_pivot``, ``soil_transfer``, ``soil_partial`` (m,); ``corner`` (25,):
    skin, humidity and block of the lowest cell; ``corner_side`` (5,).
    """

    rates: Column
    first: Column
    second: Column
    trial: Column
    exchange: Numbers
    trial_exchange: Numbers
    gradient: tuple[Numbers, Numbers, Numbers, Numbers]
    gain: tuple[Numbers, Numbers, Numbers]
    inverse: tuple[Numbers, Numbers, Numbers, Numbers, Numbers, Numbers, Numbers, Numbers, Numbers]
    transfer: tuple[Numbers, Numbers, Numbers, Numbers, Numbers, Numbers, Numbers, Numbers, Numbers]
    partial: tuple[Numbers, Numbers, Numbers, Numbers]
    vapour: tuple[Numbers, Numbers, Numbers, Numbers, Numbers, Numbers, Numbers, Numbers]
    soil_pivot: Numbers
    soil_transfer: Numbers
    soil_partial: Numbers
    corner: Numbers
    corner_side: Numbers


def make_work(levels: int, layers: int) -> Work:
    """Allocate the work sequences for n cells and m soil layers."""

    def air() -> Numbers:
        return numbers([0.0] * levels)

    def ground() -> Numbers:
        return numbers([0.0] * layers)

    def state() -> Column:
        return Column(air(), air(), air(), air(), ground(), numbers([0.0]))

    def many(count: int) -> tuple[Numbers, ...]:
        return tuple(air() for _ in range(count))

    return Work(
        state(), state(), state(), state(), air(), air(), many(4), many(3), many(9), many(9), many(4), many(8),  # type: ignore[arg-type]
        ground(), ground(), ground(), numbers([0.0] * 25), numbers([0.0] * 5),
    )  # fmt: skip


@kernel
def _mixing_and_slopes(method: Method, grid: Grid, state: Column, work: Work) -> None:
    """Exchange coefficients at the interfaces and how they answer to the gradients."""
    theta, humidity, u, v = state.theta, state.humidity, state.u, state.v
    exchange = work.exchange
    ga, gb, gc, gq = work.gradient
    ka, kb, kc = work.gain
    closure = method.closure
    moist = grid.moist
    density, inverse, length, tail = grid.density, grid.inverse_spacing, grid.length_squared, grid.tail
    for i in range(len(theta) - 1):
        d = inverse[i]
        t0 = theta[i]
        t1 = theta[i + 1]
        buoyancy = 2.0 * GRAVITY / (t0 + t1)
        a = (t1 - t0) * d
        b = (u[i + 1] - u[i]) * d
        c = (v[i + 1] - v[i]) * d
        w = (humidity[i + 1] - humidity[i]) * d
        a += moist * w
        stability = buoyancy * a
        k, k_n, k_s = diffusivity(closure, tail[i], length[i], stability, b * b + c * c + LEAST_SHEAR_SQUARED)
        carry = density[i] * d
        exchange[i] = carry * k
        ga[i] = carry * a
        gb[i] = carry * b
        gc[i] = carry * c
        gq[i] = carry * w
        ka[i] = k_n * buoyancy
        kb[i] = 2.0 * k_s * b
        kc[i] = 2.0 * k_s * c


@kernel
def _mixing(method: Method, grid: Grid, state: Column, exchange: Numbers) -> None:
    """Exchange coefficients alone."""
    theta, humidity, u, v = state.theta, state.humidity, state.u, state.v
    closure = method.closure
    moist = grid.moist
    density, inverse, length, tail = grid.density, grid.inverse_spacing, grid.length_squared, grid.tail
    for i in range(len(theta) - 1):
        d = inverse[i]
        t0 = theta[i]
        t1 = theta[i + 1]
        b = (u[i + 1] - u[i]) * d
        c = (v[i + 1] - v[i]) * d
        stability = 2.0 * GRAVITY * d * (t1 - t0 + moist * (humidity[i + 1] - humidity[i])) / (t0 + t1)
        k, _, _ = diffusivity(closure, tail[i], length[i], stability, b * b + c * c + LEAST_SHEAR_SQUARED)
        exchange[i] = density[i] * d * k


@kernel
def _air_rates(grid: Grid, outside: Outside, state: Column, exchange: Numbers, ground: Link, out: Column) -> None:
    """d/dt of the cells from the fluxes through their faces (positive upward) and what acts from outside."""
    theta, humidity, u, v = state.theta, state.humidity, state.u, state.v
    out_t, out_q, out_u, out_v = out.theta, out.humidity, out.u, out.v
    mass = grid.mass
    theta_rate, humidity_rate, u_force, v_force = (
        outside.theta_rate, outside.humidity_rate, outside.u_force, outside.v_force,
    )  # fmt: skip
    f = outside.coriolis
    last = len(theta) - 1
    t0 = theta[0]
    q0 = humidity[0]
    u0 = u[0]
    v0 = v[0]
    below_t = ground.heat
    below_q = ground.vapour
    below_u = -ground.drag * u0
    below_v = -ground.drag * v0
    for i in range(last):
        e = exchange[i]
        t1 = theta[i + 1]
        q1 = humidity[i + 1]
        u1 = u[i + 1]
        v1 = v[i + 1]
        flux_t = e * (t0 - t1)
        flux_q = e * (q0 - q1)
        flux_u = e * (u0 - u1)
        flux_v = e * (v0 - v1)
        m = 1.0 / mass[i]
        out_t[i] = (below_t - flux_t) * m + theta_rate[i]
        out_q[i] = (below_q - flux_q) * m + humidity_rate[i]
        out_u[i] = (below_u - flux_u) * m + f * v0 + u_force[i]
        out_v[i] = (below_v - flux_v) * m - f * u0 + v_force[i]
        t0 = t1
        q0 = q1
        u0 = u1
        v0 = v1
        below_t = flux_t
        below_q = flux_q
        below_u = flux_u
        below_v = flux_v
    m = 1.0 / mass[last]
    out_t[last] = below_t * m + theta_rate[last]
    out_q[last] = below_q * m + humidity_rate[last]
    out_u[last] = below_u * m + f * v0 + u_force[last]
    out_v[last] = below_v * m - f * u0 + v_force[last]


@kernel
def _ground_rates(
    boundary: int, foot: Footing, drive: Drive, soil: Soil, state: Column, ground: Link, out: Column
) -> None:
    """d/dt of skin and soil layers; no flux through the bottom."""
    if boundary == ENERGY:
        loss = CP_DRY * foot.exner * ground.heat + ground.latent_heat * ground.vapour + ground.ground
        out.skin[0] = (ground.net_radiation - loss) / foot.skin_capacity
    elif boundary == TEMPERATURE:
        out.skin[0] = drive.temperature_rate
    else:
        out.skin[0] = (drive.sensible + ground.net_radiation - ground.ground) / foot.skin_capacity
    layers = state.soil
    flux = 0.0 if boundary == FLUX else ground.ground
    last = len(layers) - 1
    for j in range(last):
        below = soil.conductance[j] * (layers[j] - layers[j + 1])
        out.soil[j] = (flux - below) / soil.capacity[j]
        flux = below
    out.soil[last] = flux / soil.capacity[last]


@kernel
def right_side(
    method: Method, grid: Grid, foot: Footing, soil: Soil, drive: Drive, outside: Outside, state: Column, out: Column,
    work: Work, slopes: bool,
) -> Link:  # fmt: skip
    """d(state)/dt into ``out``; with ``slopes`` also what the Jacobian needs into ``work``. Returns the surface fluxes."""
    exchange = work.exchange
    if slopes:
        _mixing_and_slopes(method, grid, state, work)
    else:
        exchange = work.trial_exchange
        _mixing(method, grid, state, exchange)
    ground = link(
        method.closure, method.boundary, foot, drive, state.skin[0], state.soil[0], state.theta[0], state.humidity[0],
        state.u[0], state.v[0],
    )  # fmt: skip
    _air_rates(grid, outside, state, exchange, ground, out)
    _ground_rates(method.boundary, foot, drive, soil, state, ground, out)
    return ground
