"""Long-wave kernels: energy, equilibrium, cloud, agreement of the two ways in, and compiled twins."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from forcing.air import CP_DRY, GRAVITY, STEFAN_BOLTZMANN
from forcing.emissivity import TABLE, carbon_emissivity, prata_emissivity, transmissivity, water_emissivity, water_path
from forcing.errors import ProfileError
from forcing.longwave import downwelling, flux_profile, formula_downwelling, heating, transmissivities
from forcing.longwave_column import FORMULA_OFFSET, anchor, radiation_levels, upper_air

CELLS = 20
EDGES = [float(x) for x in 1e5 - 2e4 * np.linspace(0.0, 1.0, CELLS + 1) ** 2]
LEVELS = np.linspace(1e5, 1e4, 91)
WARM = 288.15 * (LEVELS / 1e5) ** 0.19
WET = 0.008 * (LEVELS / 1e5) ** 3


def night(
    temperature: list[float],
    humidity: list[float],
    skin: float,
    *,
    emissivity: float = 1.0,
    cloud: float = 0.0,
    base: int = 99,
    offset: float = 0.0,
    warm_above: float | None = None,
) -> tuple[list[float], list[float], list[float]]:
    upper = upper_air(
        LEVELS, WARM if warm_above is None else np.full(LEVELS.size, warm_above), WET, column_top=EDGES[-1], count=8
    )
    count = CELLS + 1 + 8
    work: Any = ([0.0] * count, [0.0] * count, [0.0] * count, [0.0] * (count * (CELLS + 1)))
    down, up, rate = [0.0] * (CELLS + 1), [0.0] * (CELLS + 1), [0.0] * CELLS
    flux_profile(EDGES, temperature, humidity, *upper, skin, emissivity, cloud, base, offset, TABLE, *work, down, up)
    heating(EDGES, down, up, rate)
    return down, up, rate


CELL_WARM = st.lists(st.floats(260.0, 305.0), min_size=CELLS, max_size=CELLS)
CELL_WET = st.lists(st.floats(0.0, 0.015), min_size=CELLS, max_size=CELLS)


@settings(max_examples=40)
@given(CELL_WARM, CELL_WET, st.floats(255.0, 310.0), st.floats(0.85, 1.0), st.floats(0.0, 1.0), st.integers(0, 40))
def test_layers_gain_what_crosses_their_ends(
    temperature: list[float], humidity: list[float], skin: float, emissivity: float, cloud: float, base: int
) -> None:
    down, up, rate = night(temperature, humidity, skin, emissivity=emissivity, cloud=cloud, base=base)
    mass = [CP_DRY * (EDGES[k] - EDGES[k + 1]) / GRAVITY for k in range(CELLS)]
    stored = sum(m * r for m, r in zip(mass, rate, strict=True))
    assert stored == pytest.approx((down[-1] - up[-1]) - (down[0] - up[0]), abs=1e-9)
    # what leaves the ground is emission and reflection, and no flux is beyond the warmest black body in sight
    assert up[0] == pytest.approx(emissivity * STEFAN_BOLTZMANN * skin**4 + (1.0 - emissivity) * down[0], rel=1e-12)
    hottest = STEFAN_BOLTZMANN * max(*temperature, skin, 290.0) ** 4
    assert all(0.0 < flux <= hottest * (1.0 + 1e-9) for flux in (*down, *up))


@settings(max_examples=25)
@given(st.floats(240.0, 310.0), st.floats(0.0, 0.015), st.floats(0.9, 1.0), st.integers(0, 40))
def test_nothing_happens_between_bodies_of_one_temperature(
    warm: float, wet: float, emissivity: float, base: int
) -> None:
    down, up, rate = night(
        [warm] * CELLS, [wet] * CELLS, warm, emissivity=emissivity, cloud=1.0, base=base, warm_above=warm
    )
    black = STEFAN_BOLTZMANN * warm**4
    assert down == pytest.approx([black] * (CELLS + 1), rel=1e-12)
    assert up == pytest.approx([black] * (CELLS + 1), rel=1e-12)
    assert [3600.0 * r for r in rate] == pytest.approx([0.0] * CELLS, abs=1e-8)


def test_a_colder_ground_cools_the_lowest_air_most() -> None:
    even = [285.0 - 0.1 * k for k in range(CELLS)]
    _, _, warm = night(even, [0.006] * CELLS, 285.0)
    _, _, cold = night(even, [0.006] * CELLS, 280.0)
    change = [after - before for before, after in zip(warm, cold, strict=True)]
    assert all(x < 0.0 for x in change)
    assert change[0] < 5.0 * change[3]


def test_cloud_warms_the_ground_and_low_cloud_more() -> None:
    even = [285.0 - 0.3 * k for k in range(CELLS)]
    clear, low, high = (
        night(even, [0.006] * CELLS, 285.0, cloud=c, base=b)[0][0] for c, b in ((0, 0), (1, 12), (1, 24))
    )
    assert clear < high < low <= STEFAN_BOLTZMANN * 285.0**4
    half = night(even, [0.006] * CELLS, 285.0, cloud=0.5, base=12)[0][0]
    assert half == pytest.approx(0.5 * (clear + low), rel=1e-12)


def test_an_offset_moves_the_flux_and_heats_nothing() -> None:
    even = [285.0 - 0.3 * k for k in range(CELLS)]
    plain, moved = night(even, [0.006] * CELLS, 280.0), night(even, [0.006] * CELLS, 280.0, offset=12.0)
    assert moved[0][0] - plain[0][0] == pytest.approx(12.0, abs=1e-9)
    assert moved[2] == pytest.approx(plain[2], abs=1e-14)


def test_ground_flux_is_the_bottom_of_the_profile() -> None:
    # the two ways in differ only by how they read levels and cells
    middle = [0.5 * (EDGES[k] + EDGES[k + 1]) for k in range(CELLS)]
    warm = [float(x) for x in np.interp([-p for p in middle], -LEVELS, WARM)]
    wet = [float(x) for x in np.interp([-p for p in middle], -LEVELS, WET)]
    for cloud, base, pressure in ((0.0, 99, 0.0), (0.7, 10, EDGES[10])):
        below = night(warm, wet, 288.0, cloud=cloud, base=base)[0][0]
        own = downwelling(*radiation_levels(LEVELS, WARM, WET, count=60), cloud, pressure, 0.0, 0.0, TABLE)
        assert own == pytest.approx(below, abs=1.0)


def test_cloud_base_moves_the_ground_flux_smoothly() -> None:
    levels = radiation_levels(LEVELS, WARM, WET)
    bases = np.linspace(1.0e5, 2.5e4, 400)
    flux = np.array([downwelling(*levels, 1.0, float(base), 0.0, 0.0, TABLE) for base in bases])
    assert flux[0] == pytest.approx(STEFAN_BOLTZMANN * WARM[0] ** 4, rel=1e-12)
    assert np.all(np.diff(flux) <= 1e-9)
    assert np.max(-np.diff(flux)) < 1.5


def test_overcast_at_the_ground_is_black_and_space_is_cold() -> None:
    levels = radiation_levels(LEVELS, WARM, WET)
    assert downwelling(*levels, 1.0, 2e5, 0.0, 0.0, TABLE) == pytest.approx(STEFAN_BOLTZMANN * WARM[0] ** 4)
    clear = downwelling(*levels, 0.0, 0.0, 0.0, 0.0, TABLE)
    lit = downwelling(*levels, 0.0, 0.0, 100.0, 0.0, TABLE)
    assert clear < lit < clear + 100.0


@given(st.floats(-8.0, 1.9), st.floats(-4.0, 2.9))
def test_lookup_is_the_formula(log_water: float, log_carbon: float) -> None:
    water, carbon = 10.0**log_water, 10.0**log_carbon
    dim = np.exp(-0.4 * np.sqrt(water))
    expected = max(1.0 - water_emissivity(water) - dim * carbon_emissivity(carbon), 0.0)
    assert transmissivity(water, carbon, TABLE) == pytest.approx(expected, abs=2e-3)


@given(st.floats(0.0, 60.0), st.floats(0.0, 300.0), st.floats(0.0, 5.0))
def test_more_path_lets_less_through(water: float, carbon: float, more: float) -> None:
    assert transmissivity(water, carbon + more, TABLE) <= transmissivity(water, carbon, TABLE) + 1e-12
    # more of the same air: carbon dioxide comes with the water; under 1e-6 kg m-2 of it the dimming is ahead by less than 2e-4
    assert transmissivity(water + more, carbon + 5.0 * more, TABLE) <= transmissivity(water, carbon, TABLE) + 2e-4


def test_matrix_holds_single_transmissivities() -> None:
    water, carbon = [0.0, 1e-9, 0.02, 0.5, 30.0, 900.0], [0.0, 1e-6, 0.4, 9.0, 200.0, 4000.0]
    matrix = [0.0] * 18
    transmissivities(water, carbon, 3, TABLE, matrix)
    for i in range(3):
        for k in range(i + 1, 6):
            assert matrix[6 * i + k] == transmissivity(water[k] - water[i], carbon[k] - carbon[i], TABLE)
    assert transmissivity(0.0, 0.0, TABLE) == 1.0


def test_path_of_a_layer_is_its_water_at_standard_conditions() -> None:
    # far from saturation the scaling is one at 1013.25 hPa and 273.15 K
    assert water_path(101825.0, 100825.0, 273.15, 1e-6) == pytest.approx(1e-6 * 1000.0 / GRAVITY, rel=2e-4)


def test_anchor_agrees_with_the_formula_at_the_start_and_says_so() -> None:
    levels = radiation_levels(LEVELS, WARM, WET)
    chosen = anchor(levels, profile_depth=11000.0, vapour_pressure=1280.0, temperature=288.15)
    wanted = prata_emissivity(1280.0, 288.15) * STEFAN_BOLTZMANN * 288.15**4 + FORMULA_OFFSET
    assert downwelling(*levels, 0.0, 0.0, 0.0, chosen.offset, TABLE) == pytest.approx(wanted, abs=1e-9)
    assert chosen.uses_column
    assert "Prata" in chosen.text
    free = anchor(levels, profile_depth=11000.0, vapour_pressure=1280.0, temperature=288.15, rule="column")
    assert (free.offset, free.uses_column) == (0.0, True)
    low = anchor(levels, profile_depth=2500.0, vapour_pressure=1280.0, temperature=288.15)
    assert not low.uses_column
    assert "2500 m" in low.text
    assert formula_downwelling(1280.0, 288.15, 0.0, 280.0, low.offset) == pytest.approx(wanted, abs=1e-9)
    assert formula_downwelling(1280.0, 288.15, 1.0, 288.15, 0.0) == pytest.approx(STEFAN_BOLTZMANN * 288.15**4)


def test_levels_reach_above_a_low_profile_and_refuse_gaps() -> None:
    levels = radiation_levels([1e5, 7e4], [290.0, 272.0], [0.01, 0.004])
    assert levels.pressure[0] == 1e5
    assert levels.pressure[-1] == 1e4
    assert min(levels.temperature) == 216.65
    assert all(a >= b for a, b in zip(levels.humidity, levels.humidity[1:], strict=False))
    with pytest.raises(ProfileError, match="none missing"):
        radiation_levels([1e5, 7e4], [290.0, np.nan], [0.01, 0.004])
    with pytest.raises(ProfileError, match="fall upward"):
        radiation_levels([7e4, 1e5], [290.0, 272.0], [0.01, 0.004])


TWIN = """
import json, sys
import numpy as np
from forcing.emissivity import TABLE, prata_emissivity
from forcing.longwave import downwelling, flux_profile, formula_downwelling, heating
from forcing.longwave_column import radiation_levels, upper_air
from forcing.speed import COMPILED
assert COMPILED == (sys.argv[1] == "1")
make = (lambda x: np.array(x, float)) if COMPILED else (lambda x: [float(v) for v in x])
p = np.linspace(1e5, 2e4, 81)
t = 288.15 * (p / 1e5) ** 0.19
q = 0.008 * (p / 1e5) ** 3
edges = 1e5 - 2e4 * np.linspace(0, 1, 21) ** 2
upper = upper_air(p, t, q, column_top=8e4, count=8)
rows, count = 21, 29
work = [make(np.zeros(n)) for n in (count, count, count, count * rows)]
down, up, rate = (make(np.zeros(n)) for n in (rows, rows, rows - 1))
cells = make(285.0 - 6.0 * np.exp(-np.arange(20) / 3.0)), make(np.linspace(0.007, 0.003, 20))
flux_profile(make(edges), *cells, *upper, 277.0, 0.97, 0.4, 15, 3.0, TABLE, *work, down, up)
heating(make(edges), down, up, rate)
levels = radiation_levels(p, t, q)
extra = [downwelling(*levels, 0.3, 7.3e4, 2.0, 4.0, TABLE), formula_downwelling(900.0, 280.0, 0.5, 270.0, -5.0),
         prata_emissivity(900.0, 280.0)]
print(json.dumps([float(v) for v in (*down, *up, *[r * 3600 for r in rate], *extra)]))
"""


def test_compiled_kernels_give_the_same_numbers(tmp_path: Path) -> None:
    def run(flag: str) -> list[float]:
        environment = os.environ | {"DAYLAYER_COMPILED": flag, "XDG_CACHE_HOME": str(tmp_path)}
        root = Path(__file__).resolve().parent.parent
        done = subprocess.run(
            [sys.executable, "-c", TWIN, flag], capture_output=True, text=True, check=True, env=environment, cwd=root
        )
        numbers: list[float] = json.loads(done.stdout)
        return numbers

    plain, compiled = run("0"), run("1")
    assert compiled[:42] == pytest.approx(plain[:42], rel=1e-12)
    # heating is the small difference of large fluxes
    assert compiled[42:] == pytest.approx(plain[42:], rel=1e-9, abs=1e-10)
