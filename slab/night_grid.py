"""Levels of the night column, and the state that lives on them.

Cells grow geometrically from a first one of 2 m to a top of 2 km. Against 160 levels, 48 are within 0.1 K in the
lowest 100 m; a 4 m first cell costs 0.1 to 0.4 K at 2 m and a top of 1 km up to 0.5 K (own measurements, see
tests/bench/night_convergence.py). Cell masses are hydrostatic, so that the column's heat and water are in J m-2 and
kg m-2 like the mixed layer's.
"""

from __future__ import annotations

from collections.abc import MutableSequence, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from forcing.air import GRAVITY, KAPPA, KARMAN, P_REFERENCE, R_DRY, VIRTUAL
from forcing.errors import ModelError
from forcing.speed import COMPILED

LEVELS = 48
FIRST_CELL = 2.0  # [m]
TOP = 2000.0  # [m above displacement and roughness length]
FREE_LENGTH = (
    40.0  # [m] mixing length far from the ground (own choice after GABLS1, where 40 m and phi = 1 + 5 z/L fit)
)
TAIL_DEPTH = 200.0  # [m] height over which the long tail of `blend` hands over to the sharp one (recalled)

Array = NDArray[np.float64]
Numbers = MutableSequence[float]


class Grid(NamedTuple):
    """Geometry and mass of the column; sequences of n (cells) or n - 1 (inner interfaces) floats.

    Attributes
    ----------
    height : (n,) cell centre, m above displacement + roughness length.
    thickness : (n,) m.
    mass : (n,) air in the cell, kg m-2.
    pressure : (n,) Pa at the cell centre.
    interface : (n - 1,) height between cells i and i + 1, m.
    density : (n - 1,) kg m-3 there.
    inverse_spacing : (n - 1,) 1 / distance of the two centres, m-1.
    length_squared : (n - 1,) mixing length squared, m2.
    tail : (n - 1,) share of the long tail in the closure `blend`.
    moist : kelvin of buoyancy per unit of humidity, 0.608 x the lowest theta at the start, K. One number for the column, so
        that theta + moist x humidity and humidity are the two quantities that the solver has to carry.
    """

    height: Numbers
    thickness: Numbers
    mass: Numbers
    pressure: Numbers
    interface: Numbers
    density: Numbers
    inverse_spacing: Numbers
    length_squared: Numbers
    tail: Numbers
    moist: float


class Column(NamedTuple):
    """The prognostic state; sequences that the stepping kernel changes in place.

    ``theta`` [K], ``humidity`` [kg/kg], ``u``, ``v`` [m s-1] of the cells (n,); ``soil`` [K] of the soil layers (m,);
    ``skin`` one float, the temperature of the skin [K].
    """

    theta: Numbers
    humidity: Numbers
    u: Numbers
    v: Numbers
    soil: Numbers
    skin: Numbers


def numbers(values: Array | Sequence[float]) -> Numbers:
    """Hand values to kernels as a fresh sequence: a list when plain, an array when compiled."""
    array = np.array(values, dtype=np.float64)
    return array if COMPILED else array.tolist()  # type: ignore[return-value]


def cell_edges(levels: int = LEVELS, first: float = FIRST_CELL, top: float = TOP) -> Array:
    """Heights of the cell edges [m], shape (levels + 1,), growing geometrically from `first`.

    Raises
    ------
    ModelError
        If the levels do not fit between the first cell and the top.
    """
    if levels < 4 or first <= 0.0 or first * levels > top:
        raise ModelError(
            f"{levels} levels from a first cell of {first:g} m do not reach {top:g} m by growing",
            remedy="take fewer levels, a thinner first cell or a higher top",
        )
    low, high = 0.0, 10.0
    for _ in range(200):
        middle = 0.5 * (low + high)
        total = first * levels if middle < 1e-9 else first * ((1.0 + middle) ** levels - 1.0) / middle
        low, high = (middle, high) if total < top else (low, middle)
    edges = np.concatenate(([0.0], np.cumsum(first * (1.0 + high) ** np.arange(levels))))
    return np.asarray(edges * (top / edges[-1]), dtype=np.float64)


def _edge_pressure(edges: Array, theta: Array, humidity: Array, surface_pressure: float) -> Array:
    """Pressure at the edges [Pa] by the Exner form of the hydrostatic equation."""
    virtual = theta * (1.0 + VIRTUAL * humidity)
    exner = (surface_pressure / P_REFERENCE) ** KAPPA
    steps = KAPPA * GRAVITY / R_DRY * np.diff(edges) / virtual
    return np.asarray(P_REFERENCE * (exner - np.concatenate(([0.0], np.cumsum(steps)))) ** (1.0 / KAPPA))


def build_grid(
    edges: Array,
    theta: Array,
    humidity: Array,
    *,
    surface_pressure: float,
    roughness: float,
    constant_density: float | None = None,
) -> Grid:
    """Geometry and masses for cells between `edges` [m] holding `theta` [K] and `humidity` [kg/kg].

    `constant_density` [kg m-3] replaces the hydrostatic masses (test cases that prescribe one density).
    The mixing length is l = k z / (1 + k z / 40 m) (Blackadar 1962); z counts from the displacement height and is the
    logarithmic mean of the two cells.
    """
    thickness = np.diff(edges)
    centre = 0.5 * (edges[1:] + edges[:-1])
    pressure = _edge_pressure(edges, theta, humidity, surface_pressure)
    hydrostatic = (pressure[:-1] - pressure[1:]) / GRAVITY
    mass = hydrostatic if constant_density is None else constant_density * thickness
    inner = edges[1:-1]
    rho = mass / thickness
    above = centre + roughness
    wall = KARMAN * np.diff(centre) / np.log(above[1:] / above[:-1])  # this mean of z makes a neutral log wind exact
    return Grid(
        height=numbers(centre),
        thickness=numbers(thickness),
        mass=numbers(mass),
        pressure=numbers(0.5 * (pressure[1:] + pressure[:-1])),
        interface=numbers(inner),
        density=numbers(0.5 * (rho[1:] + rho[:-1])),
        inverse_spacing=numbers(1.0 / np.diff(centre)),
        length_squared=numbers((wall / (1.0 + wall / FREE_LENGTH)) ** 2),
        tail=numbers(np.maximum(0.0, 1.0 - inner / TAIL_DEPTH)),
        moist=VIRTUAL * float(theta[0]),
    )


def cell_means(edges: Array, height: Array, values: Array) -> Array:
    """Mean over each cell of a profile that is linear between `height` (last value held above), shape (n,)."""
    inside = height[(height > edges[0]) & (height < edges[-1])]
    points = np.sort(np.concatenate((edges, inside)))
    points = points[np.concatenate(([True], np.diff(points) > 0.0))]
    y = np.interp(points, height, values)
    running = np.concatenate(([0.0], np.cumsum(np.diff(points) * 0.5 * (y[1:] + y[:-1]))))
    return np.asarray(np.diff(np.interp(edges, points, running)) / np.diff(edges), dtype=np.float64)
