"""How far a blended mixture is from its parts side by side: every part exchanging with the same computed air.

A check beside the run, one way: the air is that of the blended run, each part has a soil, a skin and a stability of its own.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from forcing.air import KAPPA, P_REFERENCE
from forcing.cover import Cover, ground
from forcing.soil import implicit_soil
from forcing.surface import energy_balance, soil_layers
from forcing.table import anthropogenic_heat
from slab.column import as_numbers
from slab.cycle import Run
from slab.daytime import LEAST_REFERENCE, SURFACE_LAYER
from slab.products.compare_answers import sun_up
from slab.products.events import first_day
from slab.start import ground_start

Array = NDArray[np.float64]
SOIL_HELD = 4.0 * 3600.0  # [s]
TERMS = ("net_radiation", "sensible", "latent", "ground")


class Tile(NamedTuple):
    """Fluxes of one part by knot [W m-2], shape (n, 4) in the order of `TERMS`, and its heat from people, shape (n,)."""

    fluxes: Array
    people: Array


def march(run: Run, cover: Cover, knots: Sequence[int]) -> Tile:
    """One ground under the air of a run, from the soil that it starts with."""
    scenario = replace(run.scenario, cover=cover)
    mine, f = ground(cover, scenario.soil_moisture), run.fields
    layers = soil_layers(mine)
    half = 2.0 * mine.soil_conductivity / layers[0]
    start = ground_start(scenario, mine)
    soil: list[float] = list(start.soil)
    skin, obukhov = start.skin, 0.0
    people = anthropogenic_heat(scenario, run.time)
    thickness, held, answer = (as_numbers(np.array(x, dtype=float)) for x in (layers, np.zeros(6), np.zeros(6)))
    step = float(run.time[1] - run.time[0])
    exner = (run.surface_pressure / P_REFERENCE) ** KAPPA
    given = run.scenario.weather.given("wind_10m_m_s")
    out = np.zeros((len(knots), len(TERMS)))
    for row, k in enumerate(knots):
        depth = float(f["depth"][k])
        height = max(SURFACE_LAYER * depth, LEAST_REFERENCE, 10.0 * mine.roughness_momentum)
        wind = float(f["wind_10m"][k]) if given else float(np.hypot(f["east"][k], f["north"][k]))
        implicit_soil(
            as_numbers(np.array(soil)), thickness, mine.soil_conductivity, mine.soil_heat_capacity, step, 0.0, held, answer
        )  # fmt: skip
        found = energy_balance(
            mine, float(f["shortwave_down"][k]), float(f["longwave_down"][k]), float(f["theta"][k]) * exner,
            float(f["humidity"][k]), height, wind, 10.0 if given else height, depth, run.surface_pressure, float(held[0]),
            half / (1.0 + half * float(answer[0])), float(people[k]), skin, obukhov,
        )  # fmt: skip
        skin, obukhov = found.skin_temperature, found.inverse_obukhov
        soil = [float(b) + float(a) * found.ground for b, a in zip(held, answer, strict=True)]
        out[row] = (found.net_radiation, found.sensible, found.latent, found.ground)
    return Tile(out, people[list(knots)])


def tile_check(run: Run) -> dict[str, Any] | None:
    """Mean fluxes of the first day of every part of a mixture and of their sum, beside those of the blend.

    Returns
    -------
    dict or None
        None where the ground is one cover, or the first day begins over 4 h after the start, whose soil the parts take.
    """
    cover = run.scenario.cover
    first = first_day(run)
    if not cover.parts or first is None or run.time[first.first] - run.time[0] > SOIL_HELD:
        return None
    knots = [k for k in range(first.first, first.last) if np.isfinite(run.fields["theta"][k])]
    lit = sun_up(run)[knots]
    if not lit.any():
        return None
    whole = march(run, cover, knots)
    tiles = [(share, part, march(run, part, knots)) for share, part in cover.parts]
    side_by_side = np.sum([share * tile.fluxes for share, _, tile in tiles], axis=0)

    def means(fluxes: Array) -> dict[str, float]:
        return {
            f"{term}_W_m2": round(float(v), 1) + 0.0 for term, v in zip(TERMS, fluxes[lit].mean(axis=0), strict=True)
        }

    return {
        "of": "first day, sun up, under the air of the blended run",
        "parts": [
            {"cover": part.name, "area_fraction": round(share, 6)} | means(tile.fluxes) for share, part, tile in tiles
        ],
        "side_by_side_minus_blend": means(side_by_side - whole.fluxes),
    }
