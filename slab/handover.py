"""What one part of a run hands to the next: the whole column, the ground, and how much each held in all."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from slab.column import Aloft, Sample, distinct, origins, sample, tabulate
from slab.daytime import HEAT, MASS, VAPOUR, Offsets
from slab.growth import slab_at
from slab.night_grid import Column, Grid

Array = NDArray[np.float64]

# half the thickness in which a slab's top is drawn, as a share of its depth
SHARP = 5e-6  # for budgets: keeps heat and vapour to round-off
RESIDUAL = 0.05  # for a residual layer: a jump in no thickness would hold the next day's top like a step
ENTRAINMENT_ZONE = 0.125  # for comparing with soundings: a quarter of the depth in all (Haghshenas and Mellado 2018)
TOO_CLOSE = 0.01  # [m] levels this near the ramp's ends are dropped


@dataclass(frozen=True, slots=True)
class Handover:
    """State of column and ground at one instant.

    Attributes
    ----------
    air : Aloft
        The whole column as it is now (n,), from the ground to the top of the table.
    heat, vapour : float
        Held by the air beyond what ``air`` integrates to [K kg m-2, kg m-2]; it goes to the next lowest layer, so
        that nothing is lost or made between a layer model and a cell model.
    soil : tuple of float
        Soil layers from the top [K].
    skin : float
        [K].
    residual_top : float
        Top of the last mixed layer [m above ground], NaN before there was one.
    sums : tuple of float
        Running sums of the record so far, from its ``surface_heat`` on.
    """

    air: Aloft
    heat: float
    vapour: float
    soil: tuple[float, ...]
    skin: float
    residual_top: float
    sums: tuple[float, ...]


def moved(air: Aloft, later: Aloft | None, at: Offsets, mass: Array) -> tuple[Array, Array, Array, Array]:
    """Theta [K], humidity [kg kg-1] and wind [m s-1] of the air aloft now at mass levels (n,) [kg m-2]."""
    start = origins(air, mass, at.sunk)
    values = [np.interp(start, np.asarray(air.mass), np.asarray(x)) for x in (air.theta, air.humidity, air.u, air.v)]
    if later is not None and at.later > 0.0:
        w = at.later
        then = (np.interp(mass, np.asarray(later.mass), np.asarray(x))
                for x in (later.theta, later.humidity, later.u, later.v))  # fmt: skip
        values = [(1.0 - w) * now + w * other for now, other in zip(values, then, strict=True)]
    theta, humidity, u, v = values
    return theta + at.warmed, np.maximum(humidity + at.moistened, 1e-7), u, v


def nodes_now(air: Aloft, at: Offsets) -> Array:
    """Mass levels where the table's own levels are now, with ground, cap and table top: the moved air is linear between."""
    mass = np.asarray(air.mass)
    if at.sunk == 0.0:
        return mass
    where = origins(air, mass, -at.sunk)
    top = min(float(where[-1]), float(mass[-1]))
    inside = where[where < top]
    return distinct(np.concatenate((inside, [0.0, top], [air.cap] if air.cap < top else [])))


def column_after_slab(air: Aloft, later: Aloft | None, at: Offsets, y: list[float], wind: tuple[float, float],
                      half: float) -> tuple[Aloft, float, float]:  # fmt: skip
    """The column under and above a slab of state ``y`` as one table; also the heat and vapour the table leaves out.

    ``half`` is the share of the depth over which the jump is drawn as a ramp on either side of the top: `SHARP`,
    `RESIDUAL` or `ENTRAINMENT_ZONE`.
    """
    mass, height = np.asarray(air.mass), np.asarray(air.height)
    nodes = nodes_now(air, at)
    node_height = np.interp(nodes, mass, height)
    top = float(np.interp(y[MASS], mass, height))
    low, high = top - half * top, min(top + half * top, float(node_height[-1]))
    kept = node_height[(node_height < low - TOO_CLOSE) | (node_height > high + TOO_CLOSE)]
    lid = [float(np.interp(air.cap, mass, height))] if air.cap < nodes[-1] else []
    levels = np.sort(np.concatenate((kept, [0.0, low, high], lid)))
    levels = levels[np.concatenate(([True], np.diff(levels) > 0.0))]
    level_mass = np.interp(levels, height, mass)
    aloft = moved(air, later, at, level_mass)
    slab = slab_at(y[MASS], y[HEAT], y[VAPOUR], _integrals(air, later, at, y[MASS]))
    values = (slab.theta + at.warmed, max(slab.humidity + at.moistened, 1e-7), *wind)
    share = np.clip((levels - low) / (high - low), 0.0, 1.0)
    over = [float(np.interp(high, levels, above)) for above in aloft]
    mixed = [
        np.where(levels >= high, above, value + share * (end - value))
        for value, above, end in zip(values, aloft, over, strict=True)
    ]
    table = tabulate(level_mass, levels, mixed, air.cap)
    i = int(np.searchsorted(levels, high))
    whole = _integrals(air, later, at, float(level_mass[i]))
    heat = y[HEAT] + whole.sum_theta + at.warmed * float(level_mass[i]) - table.sum_theta[i]
    vapour = y[VAPOUR] + whole.sum_humidity + at.moistened * float(level_mass[i]) - table.sum_humidity[i]
    return table, heat, vapour


def _integrals(air: Aloft, later: Aloft | None, at: Offsets, mass: float) -> Sample:
    """The air aloft at a mass level, with its integrals, moved toward a later profile where there is one."""
    now = sample(air, mass, at.sunk)
    if later is None or at.later <= 0.0:
        return now
    then, w = sample(later, mass, 0.0), at.later
    return Sample(*((1.0 - w) * a + w * b for a, b in zip(now, then, strict=True)))


def column_after_night(edges: Array, grid: Grid, state: Column, above: Aloft, later: Aloft | None,
                       at: Offsets) -> tuple[Aloft, float, float]:  # fmt: skip
    """The night's cells and the air above them, moved by ``at``, as one table; also the heat and vapour it leaves out."""
    centre = np.asarray(grid.height)
    cell_mass = np.concatenate(([0.0], np.cumsum(np.asarray(grid.mass))))
    nodes = nodes_now(above, at)
    upper_mass = np.concatenate((cell_mass[-1:], nodes[nodes > cell_mass[-1] * (1.0 + 1e-9)]))
    upper = moved(above, later, at, upper_mass)
    levels = np.concatenate(([0.0], centre, np.interp(upper_mass, np.asarray(above.mass), np.asarray(above.height))))
    mass = np.concatenate(([0.0], np.interp(centre, edges, cell_mass), upper_mass))
    columns = []
    for cells, air in zip(state[:4], upper, strict=True):
        columns.append(np.concatenate(([cells[0]], np.asarray(cells), air)))
    table = tabulate(mass, levels, columns, above.cap)
    held = sample(table, float(cell_mass[-1]), 0.0)
    heat = float(np.dot(grid.mass, state.theta)) - held.sum_theta
    vapour = float(np.dot(grid.mass, state.humidity)) - held.sum_humidity
    return table, heat, vapour
