"""What one part of a run hands to the next: the whole column, the ground, and how much each held in all."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from slab.column import Aloft, distinct, origins, sample, tabulate
from slab.daytime import HEAT, MASS, VAPOUR, Offsets
from slab.growth import slab_at
from slab.night_grid import Column, Grid

Array = NDArray[np.float64]

SHARP = 0.01  # [m] half the thickness in which a sharp slab top is drawn


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
    return distinct(np.unique(np.concatenate((inside, [0.0, top], [air.cap] if air.cap < top else []))))


def column_after_slab(air: Aloft, later: Aloft | None, at: Offsets, y: list[float], wind: tuple[float, float],
                      softened: bool) -> tuple[Aloft, float, float]:  # fmt: skip
    """The column under and above a slab of state ``y`` as one table; also the heat and vapour the table leaves out.

    ``softened`` draws the jump as an entrainment zone a quarter of the depth thick (for comparing with soundings),
    else it is as sharp as the table allows (a few centimetres).
    """
    mass, height = np.asarray(air.mass), np.asarray(air.height)
    nodes = nodes_now(air, at)
    node_height = np.interp(nodes, mass, height)
    top = float(np.interp(y[MASS], mass, height))
    half = 0.125 * top if softened else SHARP
    low, high = top - half, min(top + half, float(node_height[-1]))
    kept = node_height[(node_height < low - SHARP) | (node_height > high + SHARP)]
    lid = [float(np.interp(air.cap, mass, height))] if air.cap < nodes[-1] else []
    levels = np.unique(np.concatenate((kept, [0.0, low, high], lid)))
    level_mass = np.interp(levels, height, mass)
    aloft = moved(air, later, at, level_mass)
    here = sample(air, y[MASS], at.sunk)
    if later is not None and at.later > 0.0:
        then = sample(later, y[MASS], 0.0)
        w = at.later
        here = here._replace(
            sum_theta=(1.0 - w) * here.sum_theta + w * then.sum_theta,
            sum_humidity=(1.0 - w) * here.sum_humidity + w * then.sum_humidity,
        )
    slab = slab_at(y[MASS], y[HEAT], y[VAPOUR], here)
    inside = levels <= low
    values = (slab.theta + at.warmed, max(slab.humidity + at.moistened, 1e-7), *wind)
    mixed = [np.where(inside, value, above) for value, above in zip(values, aloft, strict=True)]
    table = tabulate(level_mass, levels, *mixed, air.cap)
    missing_heat, missing_vapour = 0.0, 0.0
    if not softened:
        missing_heat = _content_above(y, values[0], aloft[0], level_mass, top, table.sum_theta)
        missing_vapour = _content_above(y, values[1], aloft[1], level_mass, top, table.sum_humidity)
    return table, missing_heat, missing_vapour


def _content_above(y: list[float], slab: float, aloft: Array, mass: Array, top: float, running: object) -> float:
    """Content of slab and air aloft less what the table holds, up to the first table level above the slab."""
    i = int(np.searchsorted(mass, y[MASS]))
    at_top = float(np.interp(y[MASS], mass, aloft))
    exact = slab * y[MASS] + 0.5 * (at_top + float(aloft[i])) * (float(mass[i]) - y[MASS])
    return exact - float(np.asarray(running)[i])


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
    table = tabulate(mass, levels, *columns, above.cap)
    held = sample(table, float(cell_mass[-1]), 0.0)
    heat = float(np.dot(grid.mass, state.theta)) - held.sum_theta
    vapour = float(np.dot(grid.mass, state.humidity)) - held.sum_humidity
    return table, heat, vapour
