"""Nights for tests: an invented clear evening, a published laboratory-like case, and the shared afternoon soundings."""

from __future__ import annotations

import math
from pathlib import Path
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from observed import number, rows

from forcing.air import EPSILON, KAPPA, OMEGA, P_REFERENCE, STEFAN_BOLTZMANN, saturation_vapour_pressure
from forcing.cover import cover, ground
from forcing.emissivity import prata_emissivity
from slab.night import NightForcing, NightOptions, NightResult, NightStart, run

Array = NDArray[np.float64]
HOUR = 3600.0

GRASS = ground(cover("short grass"), 0.5)


class Case(NamedTuple):
    """What `slab.night.run` needs."""

    name: str
    start: NightStart
    forcing: NightForcing


def one(value: float) -> Array:
    """A table of one value."""
    return np.array([value])


def clear_evening(
    *, wind: float = 7.0, longwave: float = 348.0, humidity: float = 0.008, afternoon: float = 300.0, **tables: Array
) -> Case:
    """A neutral layer of 1500 m under 5 K/km, uniform wind, at 40 N."""
    z = np.array([0.0, 1500.0, 1550.0, 5000.0])
    theta = afternoon + np.array([0.0, 0.0, 2.0, 19.25])
    q = humidity * np.array([1.0, 1.0, 0.5, 0.2])
    pressure = 98000.0
    warm = afternoon * (pressure / P_REFERENCE) ** KAPPA
    soil = tuple(warm - k for k in (2.0, 4.0, 5.0, 6.0, 6.0, 6.0))
    flow = np.full(4, wind)
    start = NightStart(z, theta, q, flow, 0.0 * flow, pressure, warm, soil, 2.0 * OMEGA * math.sin(math.radians(40.0)))
    forcing = NightForcing(one(0.0), one(wind), one(0.0), **({"longwave_down": one(longwave)} | tables))
    return Case("invented", start, forcing)


def gabls1(*, closure: str, levels: int, hours: float = 9.0, tolerance: float = 1.0) -> NightResult:
    """The first GABLS case: 265 K to 100 m, 10 K/km above, 8 m/s, cooling 0.25 K/h for nine hours (D001 to D007)."""
    z = np.array([0.0, 100.0, 401.0])
    theta = np.array([265.0, 265.0, 268.01])
    zero = np.zeros(3)
    rough = GRASS._replace(roughness_momentum=0.1, roughness_heat=0.1)
    start = NightStart(z, theta, zero, zero + 8.0, zero, P_REFERENCE, 265.0, (265.0,) * 6, 1.39e-4)
    seconds = np.array([-HOUR, 12.0 * HOUR])
    forcing = NightForcing(
        seconds, one(8.0), one(0.0), skin_temperature=265.0 - 0.25 * seconds / HOUR, surface_resistance=one(1e12)
    )
    options = NightOptions(
        closure=closure, boundary="temperature", levels=levels, top=400.0, tolerance=tolerance, constant_density=1.3223
    )
    return run(start, rough, forcing, duration=hours * HOUR, options=options)


def read_columns(path: Path) -> tuple[Array, Array, Array, Array, Array, Array]:
    """Pressure, height above ground, theta, humidity, u, v of one shared sounding, missing values filled linearly."""
    lines = rows(*path.parts)
    names = ("pressure_hPa", "height_m", "temperature_C", "dewpoint_C", "wind_dir_deg", "wind_speed_ms")
    p, z, t, td, way, speed = (np.array([number(line[name]) for line in lines]) for name in names)
    good = np.isfinite(p) & np.isfinite(z) & np.isfinite(t)
    good[good] = np.diff(z[good], prepend=-1e9) > 0.5
    p, z, t, td, way, speed = (x[good] for x in (p, z, t, td, way, speed))
    p, z, t = 100.0 * p, z - z[0], t + 273.15
    u, v = -speed * np.sin(np.radians(way)), -speed * np.cos(np.radians(way))
    u, v, td = (np.interp(z, z[np.isfinite(x)], x[np.isfinite(x)]) for x in (u, v, td + 273.15))
    e = np.array([saturation_vapour_pressure(float(x)) for x in td])
    return p, z, t * (P_REFERENCE / p) ** KAPPA, EPSILON * e / (p - (1.0 - EPSILON) * e), u, v


def plains_nights() -> list[Case]:
    """The ten shared afternoon soundings of 21 May 2023 with constant clear-sky long-wave (skips where absent)."""
    cases = []
    for row in rows("plains_2023", "night_pairs.csv"):
        p, z, theta, q, u, v = read_columns(Path("plains_2023") / row["first_file"])
        warm = float(theta[0] * (p[0] / P_REFERENCE) ** KAPPA)
        vapour = float(q[0] * p[0] / EPSILON)
        aloft = (z > 1000.0) & (z < 2000.0)
        soil = tuple(warm - k for k in (2.0, 4.0, 5.0, 6.0, 6.0, 6.0))
        start = NightStart(z, theta, q, u, v, float(p[0]), warm + 1.0, soil, 2.0 * OMEGA * math.sin(math.radians(38.0)))
        down = prata_emissivity(vapour, warm) * STEFAN_BOLTZMANN * warm**4 - 5.0
        forcing = NightForcing(
            one(0.0), one(float(u[aloft].mean())), one(float(v[aloft].mean())), longwave_down=one(down)
        )
        cases.append(Case(row["night_id"], start, forcing))
    return cases
