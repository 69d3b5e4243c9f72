"""March a slab from knot to knot: adaptive steps inside, one record per knot, a reason for stopping."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from forcing.air import GRAVITY, VIRTUAL
from forcing.speed import kernel
from forcing.surface import Ground
from forcing.table import CLOUD, CLOUD_BASE, COLUMNS, LONGWAVE
from slab.column import Aloft, as_numbers, height_of, pressure_at
from slab.daytime import (
    HEAT,
    MASS,
    MEMBERS,
    THETA_TOLERANCE,
    VAPOUR,
    Offsets,
    Place,
    air_at,
    offsets_at,
    tendencies,
)
from slab.growth import Closure, encroached_mass, slab_at
from slab.radiation import SkyColumn, longwave_under_slab
from slab.record import write_record

Numbers = Sequence[float]

RAN_TO_END, REACHED_TOP, FAILED, EVENING = 0, 1, 2, 3
KELVIN_PER_HUMIDITY = 300.0 * VIRTUAL  # [K] change of virtual theta with specific humidity
TOP_MARGIN = 0.995  # the slab has reached the top of the profile when it holds this share of the table's mass


class Control(NamedTuple):
    """Accuracy of the march: local depth tolerance [m], longest step [s], spacing of the
    knots [s], shortest step [s], and whether (1.0) a step starts from the rates at the last one's predicted end.

    Forcing is linear between knots, and long-wave and shade are refreshed at each. Reuse of the predicted end's rates
    halves the work: predicted and corrected state differ by the square of the step, so the order stays two, but it
    is less stable (a predictor-corrector without the last evaluation; common practice).
    """

    depth_tolerance: float
    longest_step: float
    knot: float = 600.0
    least_step: float = 0.5
    reuse: float = 0.0


STANDARD = Control(0.25, 300.0)


class Work(NamedTuple):
    """Scratch sequences of the stepping, so that nothing is allocated inside."""

    rate: list[float]
    rate_ahead: list[float]
    ahead: list[float]
    values: list[float]
    memory: list[float]


@kernel
def heun_step(y: list[float], tau: float, step: float, span: float, row: Numbers, following: Numbers, start: Offsets,
              air: Aloft, later: Aloft, place: Place, ground: Ground, thickness: Numbers, closure: Closure,
              work: Work, rate_known: bool) -> tuple[float, float]:  # fmt: skip
    """Try one Heun step; the new state is left in ``work.ahead``. Returns local errors in depth [m] and theta [K];
    an error in humidity counts as the one in virtual theta that it makes.

    ``rate_known`` says that ``work.rate`` already holds the rates at the step's start.
    """
    if not rate_known:
        tendencies(y, work.rate, tau, span, row, following, work.values, start, air, later, place, ground, thickness,
                   closure, work.memory)  # fmt: skip
    for i in range(MEMBERS):
        work.ahead[i] = y[i] + step * work.rate[i]
    settle(work.ahead, tau + step, span, row, following, start, air, later, closure)
    guess_mass = work.ahead[MASS]
    if not guess_mass > 0.0:
        return math.inf, math.inf
    guess_heat = work.ahead[HEAT]
    guess_vapour = work.ahead[VAPOUR]
    tendencies(work.ahead, work.rate_ahead, tau + step, span, row, following, work.values, start, air, later, place,
               ground, thickness, closure, work.memory)  # fmt: skip
    for i in range(MEMBERS):
        work.ahead[i] = y[i] + 0.5 * step * (work.rate[i] + work.rate_ahead[i])
    settle(work.ahead, tau + step, span, row, following, start, air, later, closure)
    mass = work.ahead[MASS]
    if not mass > 0.0:
        return math.inf, math.inf
    in_heat = abs(work.ahead[HEAT] - guess_heat)
    in_vapour = KELVIN_PER_HUMIDITY * abs(work.ahead[VAPOUR] - guess_vapour)  # cumulus dry the slab within seconds
    return abs(height_of(air, mass) - height_of(air, guess_mass)), max(in_heat, in_vapour) / mass


@kernel
def settle(y: list[float], tau: float, span: float, row: Numbers, following: Numbers, start: Offsets, air: Aloft,
           later: Aloft, closure: Closure) -> None:  # fmt: skip
    """Under encroachment the depth follows from heat alone, but is never less than the old top carried by the air."""
    if closure.encroachment > 0.0 and y[MASS] > 0.0:
        at = offsets_at(start, row, following, span, tau)
        y[MASS] = encroached_mass(air, later, at.later, y[HEAT], y[VAPOUR], at.sunk, y[MASS])


@kernel
def advance(y: list[float], step: float, span: float, row: Numbers, following: Numbers, start: Offsets, air: Aloft,
            later: Aloft, place: Place, ground: Ground, thickness: Numbers, closure: Closure, control: Control,
            work: Work, rate_known: bool) -> tuple[float, int]:  # fmt: skip
    """March ``y`` over one span between knots; returns the next step to try and why the march ended.

    ``rate_known`` says that ``work.rate`` already holds the rates at the knot.
    """
    tau = 0.0
    top = TOP_MARGIN * air.mass[len(air.mass) - 1]
    while tau < span:
        wanted = min(step, control.longest_step)
        last = wanted >= (span - tau) * 0.999
        trial = span - tau if last else wanted
        in_depth, in_theta = heun_step(
            y, tau, trial, span, row, following, start, air, later, place, ground, thickness, closure, work, rate_known
        )
        rate_known = True
        error = max(in_depth / control.depth_tolerance, in_theta / (THETA_TOLERANCE * control.depth_tolerance / 0.25))
        if not in_depth + in_theta < 1e9:
            error = 100.0
        if error > 1.0 and trial > control.least_step:
            step = max(control.least_step, trial * max(0.2, 0.9 / math.sqrt(error)))
            continue
        if not in_depth + in_theta < 1e9:
            return step, FAILED
        for i in range(MEMBERS):
            y[i] = work.ahead[i]
        tau = span if last else tau + trial
        rate_known = control.reuse > 0.0
        if rate_known:
            for i in range(MEMBERS):
                work.rate[i] = work.rate_ahead[i]
        grown = trial * min(3.0, 0.9 / math.sqrt(max(error, 0.01)))
        step = max(step, grown) if last else grown
        if y[MASS] >= top:
            return step, REACHED_TOP
    return step, RAN_TO_END



@kernel
def march(first: int, last: int, times: Numbers, rows: Sequence[list[float]], y: list[float], start: Offsets,
          air: Aloft, later: Aloft, place: Place, ground: Ground, thickness: Numbers, closure: Closure,
          control: Control, work: Work, sky: SkyColumn, heights: Numbers,
          record: Sequence[list[float]], patience: int) -> tuple[int, int, Offsets]:  # fmt: skip
    """March from knot ``first`` to ``last``, recording every knot, until the surface stops feeding the layer.

    Returns the knot reached, why it ended there, and the offsets of the air aloft at that knot. It ends at the second
    knot in a row with a downward virtual flux after one with an upward flux, so that a passing cloud does not end the
    day; the state then is that of the knot. Where no flux has been upward yet, ``patience`` knots are waited for one.
    """
    k = first
    at = start
    step = 30.0
    seen_upward = False
    downward = 0
    while True:
        following = min(k + 1, last)
        span = times[following] - times[k] if following > k else 600.0
        radiation_step(rows[k], rows[following], y, at, air, later, place, work, sky)
        flow = tendencies(y, work.rate, 0.0, span, rows[k], rows[following], work.values, at, air, later, place,
                          ground, thickness, closure, work.memory)  # fmt: skip
        write_record(record[k], y, flow, at, place, ground, heights)
        work.memory[3] = flow.cumulus
        if flow.buoyancy_flux > 0.0:
            seen_upward = True
            downward = 0
        else:
            downward += 1
        if k == last:
            return k, RAN_TO_END, at
        if downward >= (2 if seen_upward else patience):
            return k, EVENING, at
        step, reason = advance(y, step, span, rows[k], rows[k + 1], at, air, later, place, ground, thickness, closure,
                               control, work, True)  # fmt: skip
        if reason != RAN_TO_END:
            return k, reason, at
        at = offsets_at(at, rows[k], rows[k + 1], span, span)
        k += 1


@kernel
def radiation_step(row: list[float], following: list[float], y: Numbers, at: Offsets, air: Aloft, later: Aloft,
                   place: Place, work: Work, sky: SkyColumn) -> None:  # fmt: skip
    """Long-wave from the sky and the shade of cumulus, held until the next knot.

    Cumulus emit from the slab's top; other cloud from its own base where it covers more.
    """
    slab = slab_at(y[MASS], y[HEAT], y[VAPOUR], air_at(air, later, y[MASS], at))
    work.memory[2] = shade_of(row[CLOUD], work.memory[3]) if sky.shade > 0.0 else 0.0
    if sky.given > 0.0:
        return
    base = pressure_at(air, place.pressure, row[CLOUD_BASE])
    if work.memory[3] > row[CLOUD]:
        base = place.pressure - GRAVITY * y[MASS]
    cloud = 1.0 - (1.0 - row[CLOUD]) * (1.0 - work.memory[3])
    flux = longwave_under_slab(sky, y[MASS], slab.theta + at.warmed, slab.humidity + at.moistened, at.warmed,
                               at.moistened, cloud, base)  # fmt: skip
    row[LONGWAVE] = flux
    following[LONGWAVE] = flux


@kernel
def shade_of(cloud: float, cumulus: float) -> float:
    """Share of the short-wave under the given cloud that cumulus takes (Kasten and Czeplak 1980 with joint cover).

    Given cloud and cumulus overlap at random: N = 1 - (1 - N_given)(1 - N_cumulus).
    """
    joint = 1.0 - (1.0 - cloud) * (1.0 - cumulus)
    return 1.0 - (1.0 - 0.75 * math.pow(joint, 3.4)) / (1.0 - 0.75 * math.pow(cloud, 3.4))


def scratch() -> Work:
    """Scratch sequences for one march; ``memory`` holds skin temperature, 1/L, shade and
    cumulus fraction of the last radiation step."""
    blank = [as_numbers(np.zeros(n)) for n in (MEMBERS, MEMBERS, MEMBERS, COLUMNS, 4)]
    blank[4][0] = 290.0
    return Work(*blank)
