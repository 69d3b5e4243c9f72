"""Observed days: order of depths under given fluxes, and the fair pairs of morning and afternoon releases against baselines.

The full tables come from ``tests/bench/observed_days.py`` and ``tests/bench/observed_pairs.py``; only what holds is asserted.
"""

from __future__ import annotations

import functools
import importlib.util
import math
import sys
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pytest
from observed import file, folder

pytestmark = pytest.mark.observed

DAYS = ("BLLAST_20110620", "AMMA_20060710", "SCMS_19950805", "LBA_19990223", "CASES99_19991023", "CASS_composite")
CLOUDY = "SCMS_19950805"
"""Fair-weather cumulus stand on this layer all day."""
TABLE_ROUNDING = 10.0  # m, step of the tables


@functools.cache
def bench(name: str) -> ModuleType:
    """One of the two benchmarks as a module."""
    path = Path(__file__).resolve().parent / "bench" / f"{name}.py"
    spec = importlib.util.spec_from_file_location(name, path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[name] = module
    spec.loader.exec_module(module)
    return module


@functools.cache
def day(name: str) -> Any:
    """A test day, run three ways."""
    file("testdays", "cases.csv")
    days = bench("observed_days")
    case = next(one for one in days.CASES if one.name == name)
    return days.run_day(case, folder() / "testdays")


@pytest.mark.parametrize("name", DAYS)
def test_cumulus_stand_only_over_the_condensation_level(name: str) -> None:
    check = bench("observed_days").order_checks(day(name))[2]
    assert check.held, check.detail


@pytest.mark.parametrize("name", DAYS)
def test_calm_layer_is_at_most_1_3_times_the_encroachment_depth(name: str) -> None:
    check = bench("observed_days").order_checks(day(name))[1]
    assert check.held, check.detail


@pytest.mark.parametrize("name", DAYS)
def test_layer_is_at_least_as_deep_as_encroachment(name: str) -> None:
    check = bench("observed_days").order_checks(day(name))[0]
    assert check.held, check.detail


def test_layer_under_cumulus_stays_near_the_condensation_level() -> None:
    """From the first cumulus on, the layer stands at its condensation level within a tenth.

    They form when the top of the entrainment zone reaches it, so the layer itself may then be short of it by an eighth.
    """
    days, one = bench("observed_days"), day(CLOUDY)
    fields = one.given.fields
    cloudy = [k for k in range(len(one.given.day)) if one.given.day[k] and fields["cumulus_fraction"][k] > days.CUMULUS_SEEN]
    assert len(cloudy) > 12
    ratios = [fields["depth"][k] / days.condensation(one.given, k) for k in cloudy]
    assert min(ratios) > (1.0 - days.CONDENSATION_SLACK) / days.ZONE_TOP
    assert max(ratios) < 1.1
    assert max(ratios) > 0.9


@pytest.mark.parametrize("name", DAYS)
def test_given_fluxes_warm_the_day_as_a_column(name: str) -> None:
    """Every run reaches its end, and its slab never cools while the ground heats it and the air aloft is warmer."""
    one = day(name)
    assert one.given.stopped == "end of the run"
    f = one.given.fields
    fed = one.given.day & (f["sensible"] > 50.0)
    steps = np.diff(f["theta"])[fed[1:] & fed[:-1]]
    assert steps.size > 3
    assert np.all(steps > -0.02)


@functools.cache
def pairs() -> list[Any]:
    """The fair pairs on land."""
    file("fair_pairs.csv")
    found: list[Any] = bench("observed_pairs").read_pairs(folder())
    return found


@functools.cache
def forecasts() -> list[Any]:
    """Every pair by the default closure."""
    return [bench("observed_pairs").predict(pair) for pair in pairs()]


def _values(states: list[Any], member: str) -> np.ndarray:
    return np.asarray(bench("observed_pairs").values(states, member))


def test_pairs_are_those_of_the_table() -> None:
    """All of April and May, with the tables' depth recovered on every later release to one step of their grid."""
    assert len(pairs()) == 41
    gaps = [abs(pair.observed.depth - pair.told_depth) for pair in pairs()]
    assert max(gaps) <= TABLE_ROUNDING


def test_choices_are_one_row_per_station() -> None:
    for pair in pairs():
        assert pair.choice["dataset"] == pair.dataset
        assert math.isfinite(float(pair.choice["soil_moisture"]))


def test_every_pair_has_an_answer() -> None:
    for one in forecasts():
        assert one.done.stopped == "end of the run"
        assert math.isfinite(one.state.depth)


def _mae(member: str, states: list[Any]) -> tuple[float, float]:
    """Mean absolute error of ours and of a baseline over the pairs that the baseline knows."""
    observed = _values([pair.observed for pair in pairs()], member)
    ours, other = _values([one.state for one in forecasts()], member), _values(states, member)
    known = np.isfinite(other)
    return float(np.mean(abs(ours - observed)[known])), float(np.mean(abs(other - observed)[known]))


@pytest.mark.parametrize(("member", "bound"), [("theta", 2.5), ("humidity", 1.1)])
def test_theta_and_humidity_beat_climatology_and_persistence(member: str, bound: float) -> None:
    ours, climatology = _mae(member, bench("observed_pairs").climatology(pairs()))
    assert ours < bound
    assert ours < 0.75 * climatology
    ours, persistence = _mae(member, [pair.before for pair in pairs()])
    assert ours < 0.85 * persistence


def test_theta_and_depth_beat_the_plain_adiabat() -> None:
    for member in ("theta", "depth"):
        ours, adiabat = _mae(member, [one.adiabat for one in forecasts()])
        assert ours < adiabat
