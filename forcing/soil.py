"""Heat conduction below the skin: a few layers that keep their heat exactly.

The layers get thicker downward so that six of them hold the day's wave and several days more: the first is a fifth of the
depth at which the daily wave falls to 1/e (Carslaw & Jaeger 1959, periodic conduction into a half-space), each
next one 1.8 times thicker.
"""

from __future__ import annotations

import math
from collections.abc import MutableSequence, Sequence

from forcing.speed import kernel

DAY = 86400.0  # s
FIRST_LAYER = 0.2  # of the damping depth of the daily wave
LAYER_RATIO = 1.8


@kernel
def damping_depth(conductivity: float, heat_capacity: float, period: float) -> float:
    """Depth [m] at which a wave of ``period`` [s] has 1/e of its amplitude (Carslaw & Jaeger 1959)."""
    return math.sqrt(conductivity / heat_capacity * period / math.pi)


@kernel
def layer_thicknesses(conductivity: float, heat_capacity: float) -> tuple[float, float, float, float, float, float]:
    """Thickness [m] of the six layers from the top."""
    first = FIRST_LAYER * damping_depth(conductivity, heat_capacity, DAY)
    r = LAYER_RATIO
    return first, first * r, first * r * r, first * r**3, first * r**4, first * r**5


@kernel
def soil_rates_from(
    temperatures: Sequence[float],
    first: int,
    thicknesses: Sequence[float],
    conductivity: float,
    heat_capacity: float,
    ground_flux: float,
    out: MutableSequence[float],
) -> None:
    """Write dT/dt [K s-1] of the layers, whose temperatures [K] start at ``first`` in a longer state, into ``out``.

    ``ground_flux`` [W m-2] is positive into the soil; nothing passes the bottom, so the heat content changes by it alone.
    """
    entering = ground_flux
    last = len(thicknesses) - 1
    for i in range(last):
        here = thicknesses[i]
        j = first + i
        passing = 2.0 * conductivity * (temperatures[j] - temperatures[j + 1]) / (here + thicknesses[i + 1])
        out[j] = (entering - passing) / (heat_capacity * here)
        entering = passing
    out[first + last] = entering / (heat_capacity * thicknesses[last])


@kernel
def soil_rates(
    temperatures: Sequence[float],
    thicknesses: Sequence[float],
    conductivity: float,
    heat_capacity: float,
    ground_flux: float,
    out: MutableSequence[float],
) -> None:
    """Write dT/dt [K s-1] of every layer into ``out``; see `soil_rates_from`."""
    soil_rates_from(temperatures, 0, thicknesses, conductivity, heat_capacity, ground_flux, out)


@kernel
def implicit_soil(
    temperatures: Sequence[float],
    thicknesses: Sequence[float],
    conductivity: float,
    heat_capacity: float,
    step: float,
    hold_bottom: float,
    base: MutableSequence[float],
    answer: MutableSequence[float],
) -> None:
    """One backward Euler step of ``step`` [s], split so that the ground flux may stay unknown.

    After it the temperatures are ``base[i] + G answer[i]`` with G [W m-2, positive into the soil] constant over the step.
    ``hold_bottom`` 1 keeps the lowest layer where it is, 0 lets nothing pass its lower side.
    """
    last = len(thicknesses) - 1
    # upward elimination: T_i = base_i + answer_i * (flux entering layer i), bottom first
    for k in range(last + 1):
        i = last - k
        store = heat_capacity * thicknesses[i] / step
        if i == last:
            if hold_bottom > 0.0:
                base[i] = temperatures[i]
                answer[i] = 0.0
            else:
                base[i] = temperatures[i]
                answer[i] = 1.0 / store
        else:
            link = 1.0 / (0.5 * (thicknesses[i] + thicknesses[i + 1]) / conductivity + answer[i + 1])
            base[i] = (store * temperatures[i] + link * base[i + 1]) / (store + link)
            answer[i] = 1.0 / (store + link)
    # downward: the flux that enters each layer, as a constant and a part per unit of G
    fixed = 0.0
    part = 1.0
    for i in range(last + 1):
        own_base = base[i] + answer[i] * fixed
        own_answer = answer[i] * part
        if i < last:
            link = 1.0 / (0.5 * (thicknesses[i] + thicknesses[i + 1]) / conductivity + answer[i + 1])
            fixed = link * (own_base - base[i + 1])
            part = link * own_answer
        base[i] = own_base
        answer[i] = own_answer
