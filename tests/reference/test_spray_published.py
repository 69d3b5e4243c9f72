"""Delta-T, units, and onset and end of the inversion against published values."""

from __future__ import annotations

import csv
import math
import sys
from functools import cache
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

from forcing.air import humidity_from_mixing_ratio
from forcing.units import MILE_PER_HOUR_M_S
from slab.products.spray_air import delta_t, rows_of
from slab.products.spray_members import member_of
from slab.products.spray_window import spells

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parent / "bench"))

from spray_ranges import BETWEEN, HEIGHTS, PLACES, Result, result_of, scenario_of

from slab.cycle import Run, run

KELVIN = 273.15


def table() -> list[dict[str, float]]:
    with (HERE / "delta_t.csv").open(encoding="utf-8") as file:
        return [{name: float(value) for name, value in row.items()} for row in csv.DictReader(file)]


def test_delta_t_of_the_psychrometric_table() -> None:
    # 160 rows at 101325 and 84000 Pa, 5 to 40 C, 10 to 95 %, computed by the ASHRAE Handbook's adiabatic saturation
    rows = table()
    assert len(rows) == 160
    wrong = []
    for row in rows:
        humidity = humidity_from_mixing_ratio(row["mixing_ratio_g_kg"] / 1000.0)
        found = delta_t(row["temperature_C"] + KELVIN, humidity, row["pressure_Pa"])
        if abs(found - row["delta_t_K"]) > 0.05:
            wrong.append((row["temperature_C"], row["relative_humidity_pct"], row["pressure_Pa"]))
    # there both a wet and an iced bulb satisfy the equations, at +0.08 and -0.24 C; the table takes ice, a fresh drop is wet
    assert wrong == [(5.0, 40.0, 84000.0)]


@pytest.mark.parametrize(
    ("celsius", "percent", "expected"),
    [(30.0, 40.0, 9.94), (30.0, 50.0, 8.00), (30.0, 80.0, 2.91), (20.0, 50.0, 6.22), (20.0, 90.0, 1.14)],
)
def test_delta_t_worked_examples(celsius: float, percent: float, expected: float) -> None:
    # ASHRAE method at 101325 Pa, printed with a tolerance of 0.3 K
    from forcing.air import humidity_from_vapour_pressure, saturation_vapour_pressure

    vapour = 0.01 * percent * saturation_vapour_pressure(celsius + KELVIN)
    found = delta_t(celsius + KELVIN, humidity_from_vapour_pressure(vapour, 101325.0), 101325.0)
    assert found == pytest.approx(expected, abs=0.3)


@pytest.mark.parametrize(("celsius", "percent"), [(10.0, 50.0), (20.0, 30.0), (25.0, 80.0), (35.0, 20.0), (40.0, 60.0)])
def test_delta_t_beside_an_independent_library(celsius: float, percent: float) -> None:
    coolprop = pytest.importorskip("CoolProp.CoolProp")
    warm, pressure = celsius + KELVIN, 101325.0
    wet = coolprop.HAPropsSI("B", "T", warm, "P", pressure, "R", 0.01 * percent)
    ratio = coolprop.HAPropsSI("W", "T", warm, "P", pressure, "R", 0.01 * percent)
    assert delta_t(warm, humidity_from_mixing_ratio(ratio), pressure) == pytest.approx(
        warm - wet, abs=0.08
    )  # that library's air is not ideal


@pytest.mark.parametrize(
    ("value", "factor", "expected"),
    [(3.0, 1.0 / 3.6, 0.83), (15.0, 1.0 / 3.6, 4.17), (11.0, 1.0 / 3.6, 3.06), (3.0, MILE_PER_HOUR_M_S, 1.34),
     (10.0, MILE_PER_HOUR_M_S, 4.47)],
)  # fmt: skip
def test_wind_limits_in_other_units(value: float, factor: float, expected: float) -> None:
    # 3, 15, 11 km/h and 3, 10 mph of the published wind windows, in m/s
    assert value * factor == pytest.approx(expected, abs=0.005)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("ranges")


RUNS: dict[tuple[int, float, float], Run] = {}


def run_of(folder: Path, place: int, wind: float, cloud: float) -> Run:
    key = (place, wind, cloud)
    if key not in RUNS:
        RUNS[key] = run(scenario_of(PLACES[place], wind, cloud, folder), heights=HEIGHTS)
    return RUNS[key]


def answer(folder: Path, place: int, wind: float, cloud: float) -> Result:
    return result_of(run_of(folder, place, wind, cloud), spread=False)


@pytest.mark.parametrize("place", range(len(PLACES)), ids=[one.name for one in PLACES])
def test_a_clear_light_night_begins_and_ends_within_the_published_ranges(folder: Path, place: int) -> None:
    # typically 1-2 h (GRDC manual 10.8), 2-3 h and up to 5 h (North Dakota State University, 6 June 2019), 3-4 h (Ontario)
    # before sunset; 1-2 h, up to 3 h after sunrise (the same; DPIRD July 2023: two hours)
    one = answer(folder, place, 2.0, 0.0)
    assert one.wind < 3.0
    assert 0.0 <= one.onset <= 5.0
    assert 0.0 <= one.end <= 3.0


@pytest.mark.parametrize("place", [0, 2])
def test_cooling_by_the_skin_turns_before_sunset(folder: Path, place: int) -> None:
    # Mahrt 2017 (Q. J. R. Meteorol. Soc.): the rapid evening cooling follows the reversal of the heat flux, 60 to 90 min,
    # mostly before sunset
    one = answer(folder, place, 2.0, 0.0)
    made = run_of(folder, place, 2.0, 0.0)
    temperature, time = made.fields["temperature_2m"], made.time
    rate = np.gradient(temperature, time) * 3600.0
    evening = (time > time[0] + 3.0 * 3600.0) & (time < time[0] + 12.0 * 3600.0)
    fastest = time[evening][int(np.nanargmin(rate[evening]))]
    sunset = _sunset(made)
    assert abs(fastest - (sunset - 3600.0 * one.onset)) < 2.0 * 3600.0
    assert fastest < sunset + 3600.0


def _sunset(made: Run) -> float:
    from slab.products.spray_window import suns

    site = made.scenario.site
    after = [one.sunset for one in suns(site, float(made.time[0]), float(made.time[-1])) if one.sunset]
    return min(one.timestamp() for one in after if one.timestamp() > made.time[0])


WINDS = ((2.0, 0.0), (4.0, 0.0), (7.0, 0.0), (11.0, 0.0))
CLOUDS = ((4.0, 0.0), (4.0, 0.4), (4.0, 0.8))


@cache
def strong_spell(key: tuple[int, float, float]) -> tuple[float, float]:
    """Onset [s since 1970 UTC] and length [h] of a difference above 1 K, which sensors cannot miss; NaN and 0 without."""
    made = RUNS[key]
    rows = rows_of(float(made.time[0]), float(made.time[-1]), "UTC")
    found = [one for one in spells(rows, member_of(made, rows, BETWEEN).difference - 1.0) if math.isfinite(one.onset)]
    if not found:
        return math.nan, 0.0
    return found[0].onset, sum(
        (min(one.end, rows[-1]) if math.isfinite(one.end) else rows[-1]) - one.onset for one in found
    ) / 3600.0


@pytest.mark.parametrize("place", [0, 1, 5])
@pytest.mark.parametrize("series", [WINDS, CLOUDS], ids=["wind", "cloud"])
def test_more_wind_or_cloud_never_makes_it_stronger_or_a_strong_one_earlier_or_longer(
    folder: Path, place: int, series: tuple[tuple[float, float], ...]
) -> None:
    # "stronger wind: weaker, shorter" (six soybean and cotton sites, 2012 to 2017); the difference itself, and 1 K of it
    strongest = [answer(folder, place, *one).strongest for one in series]
    assert all(b <= a + 0.02 for a, b in pairwise(strongest))
    found = [strong_spell((place, *one)) for one in series]
    for (onset, length), (later, shorter) in pairwise(found):
        assert shorter <= length + 0.05
        if math.isfinite(later):
            assert later >= onset - 120.0
