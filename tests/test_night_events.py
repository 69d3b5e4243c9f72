"""What a forecast says of its first night: dew, frost, fog, the wind that keeps the air mixed, and windows."""

from __future__ import annotations

from dataclasses import replace
from datetime import datetime

import pytest

from forcing.bundled import bundled
from forcing.scenario import load, with_run, with_setting
from slab.cycle import Run, run
from slab.night_answers import CROSSING_HEIGHT
from slab.products.forecast import both_depths
from slab.products.night_events import night_answers, windows


@pytest.fixture(scope="module")
def plain() -> Run:
    return run(with_run(load(bundled("summer_plain")), hours=26.0))


def test_a_clear_night_asks_for_a_wind_of_the_published_size(plain: Run) -> None:
    """Van de Wiel et al. 2012: about 5 to 7 m/s at some tens of metres on clear nights."""
    found = night_answers(plain)
    assert found["mixed_night_wind_height_m"] == CROSSING_HEIGHT
    assert 4.0 < found["mixed_night_wind_m_s"] < 9.0


def test_cloud_asks_for_less_wind(plain: Run) -> None:
    cloudy = run(with_setting(plain.scenario, "weather.cloud_fraction", 0.9))
    assert night_answers(cloudy)["mixed_night_wind_m_s"] < night_answers(plain)["mixed_night_wind_m_s"]


def test_snow_brings_air_frost_and_no_dew() -> None:
    found = night_answers(run(with_run(load(bundled("snow_field")), hours=24.0)))
    assert found["air_frost_onset_time"] is not None
    assert found["dew_onset_time"] is None


def test_a_run_without_a_night_answers_nothing(plain: Run) -> None:
    short = run(with_run(load(bundled("summer_plain")), hours=6.0))
    assert set(night_answers(short).values()) == {None}
    assert short.time[-1] < plain.time[-1]


def test_windows_hold_their_time_and_are_half_hours() -> None:
    summary = {"inversion_onset_time": "2026-07-15T00:37:00Z", "inversion_gone_time": None}
    found = windows(summary)
    assert found["inversion_gone_window"] is None
    low, high = (datetime.fromisoformat(one) for one in found["inversion_onset_window"])
    assert low < datetime.fromisoformat("2026-07-15T00:37:00Z") < high
    assert low.minute % 30 == 0
    assert high.minute % 30 == 0
    assert (high - low).total_seconds() >= 7200.0


def test_both_depths_are_told_where_the_rules_differ(plain: Run) -> None:
    moved = replace(plain.scenario, rebase="sea-level")
    answers = {"mixing_depth_max_m": 1000.0}
    assert both_depths(moved, answers, {"profile.rebase": (120.0, 0.1)}) == []
    (said,) = both_depths(moved, answers, {"profile.rebase": (-300.0, 0.1)})
    assert "1000 m" in said
    assert "700 m" in said
