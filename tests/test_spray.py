"""The spray calendar: windows, limits, low ground, the tower, and what the document says."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from itertools import combinations, pairwise
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from spray_cases import LIMITS, NOW, field, plain_document, plain_plan, tower

from forcing.errors import DaylayerError, WeatherError
from slab.export import to_json
from slab.products.spray import boom_height, check_heights, document, plan
from slab.products.spray_air import rows_of, stability_word, wind_at
from slab.products.spray_field import low_field
from slab.products.spray_limits import (
    CONDITIONS,
    INSIDE,
    NONE,
    OUTSIDE,
    POSSIBLE,
    PRESENT,
    UNKNOWN,
    Reason,
    in_order,
    inversion_reasons,
    reasons,
    spray_limits,
    status_of,
)
from slab.products.spray_members import design
from slab.products.spray_observed import assimilate, tower_pair
from slab.products.spray_window import Night, Window, suns

HOUR = 3600.0


# members


def test_the_members_are_balanced_and_no_two_steps_go_together() -> None:
    table = np.array(design(6))
    assert table.shape == (8, 6)
    assert np.all(table.sum(axis=0) == 0.0)
    for a, b in combinations(range(6), 2):
        assert float(table[:, a] @ table[:, b]) == 0.0


# limits


def reasons_at(limits: Any, row: int, state: str, **changes: Any) -> list[Reason]:
    made = plain_plan()
    moved: dict[str, Any] = {key: np.full(made.air.time.shape, value) for key, value in changes.items()}
    air = replace(made.air, **moved)
    scenario = replace(made.run.scenario, limits=limits)
    sun = suns(scenario.site, float(air.time[0]), float(air.time[-1]))
    return reasons(scenario, air, row, state, sun)


def midday() -> int:
    return int(np.argmin(np.abs(plain_plan().air.time - datetime(2026, 7, 14, 17, tzinfo=UTC).timestamp())))


def test_inside_only_with_limits_and_without_a_reason() -> None:
    assert status_of([], limited=True) == INSIDE
    assert status_of([], limited=False) == CONDITIONS
    outside, unknown = Reason("wind", OUTSIDE, ""), Reason("rain", UNKNOWN, "")
    assert status_of([unknown], limited=True) == UNKNOWN
    assert status_of([unknown, outside], limited=True) == OUTSIDE
    assert status_of([outside, unknown], limited=False) == CONDITIONS


def test_a_quiet_midday_within_all_limits_is_inside() -> None:
    assert reasons_at(LIMITS, midday(), NONE, wind=3.0, delta_t=6.0) == []


@pytest.mark.parametrize(
    ("change", "code"),
    [
        ({"wind": 0.5}, "wind"), ({"wind": 6.5}, "wind"), ({"delta_t": 1.0}, "delta-t"), ({"delta_t": 12.0}, "delta-t"),
        ({"temperature": 40.0}, "temperature"), ({"humidity": 10.0}, "humidity"),
    ],
)  # fmt: skip
def test_each_limit_has_two_sides_that_are_seen(change: dict[str, float], code: str) -> None:
    limits = replace(LIMITS, temperature_max_C=35.0, humidity_min_pct=20.0)
    quiet = {"wind": 3.0, "delta_t": 6.0, "temperature": 25.0, "humidity": 50.0}
    (one,) = reasons_at(limits, midday(), NONE, **{**quiet, **change})
    assert (one.code, one.kind) == (code, OUTSIDE)


def test_a_value_on_the_limit_is_inside() -> None:
    assert reasons_at(LIMITS, midday(), NONE, wind=6.0, delta_t=2.0) == []


def test_wind_that_is_not_known_is_unknown_even_where_no_limit_speaks_of_wind() -> None:
    for limits in (LIMITS, replace(LIMITS, wind_min_m_s=None, wind_max_m_s=None)):
        found = reasons_at(limits, midday(), NONE, wind=math.nan, delta_t=6.0)
        assert [(one.code, one.kind) for one in found] == [("wind", UNKNOWN)]
        assert status_of(found, limited=True) == UNKNOWN


@pytest.mark.parametrize("name", ["delta_t", "temperature", "humidity"])
def test_what_is_not_known_never_counts_as_inside(name: str) -> None:
    limits = replace(LIMITS, temperature_max_C=45.0, humidity_min_pct=1.0)
    quiet = {"wind": 3.0, "delta_t": 6.0, "temperature": 25.0, "humidity": 50.0}
    found = reasons_at(limits, midday(), NONE, **{**quiet, name: math.nan})
    assert [one.kind for one in found] == [UNKNOWN]


def test_rain_that_the_weather_does_not_say_is_unknown_and_rain_to_come_is_outside() -> None:
    limits = replace(LIMITS, rain_free_hours=4.0)
    made = plain_plan()
    row, air = (
        midday(),
        replace(made.air, wind=np.full(made.air.time.shape, 3.0), delta_t=np.full(made.air.time.shape, 6.0)),
    )
    sun = suns(made.run.scenario.site, float(air.time[0]), float(air.time[-1]))
    for rain, kind in ((None, UNKNOWN), (1.0, OUTSIDE)):
        weather = made.run.scenario.weather
        constants = {key: value for key, value in weather.constants.items() if key != "rain_mm_h"}
        constants |= {} if rain is None else {"rain_mm_h": rain}
        scenario = replace(made.run.scenario, limits=limits, weather=replace(weather, constants=constants))
        (one,) = reasons(scenario, air, row, NONE, sun)
        assert (one.code, one.kind) == ("rain", kind)


def test_the_hours_follow_the_sun_of_the_day() -> None:
    made = plain_plan()
    sun = suns(made.run.scenario.site, float(made.air.time[0]), float(made.air.time[-1]))
    rise = next(one.sunrise for one in sun if one.sunrise and one.sunrise > datetime(2026, 7, 14, 6, tzinfo=UTC))
    for n, moment in enumerate(made.air.time):
        found = [one for one in reasons_at(LIMITS, n, NONE, wind=3.0, delta_t=6.0) if one.code == "hours"]
        after = (moment - rise.timestamp()) / HOUR
        if 0.0 <= after < 1.0:
            assert "after sunrise" in found[0].text
        elif 1.0 <= after < 12.0:
            assert found == []


def test_the_most_limiting_reason_comes_first_and_outside_before_unknown() -> None:
    found = reasons_at(
        replace(LIMITS, humidity_min_pct=90.0), midday(), PRESENT, wind=math.nan, delta_t=20.0, humidity=5.0
    )
    assert [one.code for one in found] == ["inversion", "delta-t", "humidity", "wind"]
    mixed = in_order([*inversion_reasons(POSSIBLE), *inversion_reasons(PRESENT)])
    assert [one.code for one in mixed] == ["inversion"]


def test_limits_without_a_number_for_spraying_are_no_limits() -> None:
    nothing: dict[str, Any] = dict.fromkeys(spray_limits(LIMITS))
    bare = replace(LIMITS, **nothing)
    assert spray_limits(bare) == {}
    assert spray_limits(None) == {}


def test_the_boom_height_is_the_users_or_said_to_be_assumed() -> None:
    assert boom_height(field()) == (2.0, "from your limits")
    height, source = boom_height(field(None))
    assert height == 2.0
    assert source.startswith("assumed")


# air over the field


@pytest.mark.parametrize("zone", ["Etc/GMT+6", "Asia/Kolkata", "Asia/Kathmandu", "Australia/Lord_Howe"])
def test_rows_stand_on_local_half_hours(zone: str) -> None:
    start = datetime(2026, 7, 14, 11, 7, tzinfo=UTC).timestamp()
    for moment in rows_of(start, start + 86400.0, zone):
        assert datetime.fromtimestamp(moment, ZoneInfo(zone)).minute in (0, 30)


def test_the_wind_read_at_10_m_is_the_runs_own_and_it_falls_towards_the_ground() -> None:
    run = plain_plan().run
    for knot in range(0, len(run.time) - 1, 5):
        ten = wind_at(run, knot, 10.0)
        assert ten == pytest.approx(float(run.fields["wind_10m"][knot]), rel=0.02)
        profile = [wind_at(run, knot, z) for z in (0.5, 2.0, 5.0, 10.0)]
        assert all(a < b for a, b in pairwise(profile))


def test_stability_words_go_from_unstable_to_strong() -> None:
    words = [stability_word(x) for x in (-0.5, -0.078, 0.0, 0.5, 1.5, 3.0)]
    assert words == [
        "unstable", "near neutral", "near neutral", "inversion, slight", "inversion, distinct", "inversion, marked",
    ]  # fmt: skip
    assert stability_word(math.nan) == "not known"


@pytest.mark.parametrize("pair", [(9.0, 1.5), (1.5, 1.5), (0.1, 9.0), (1.5, 80.0)])
def test_heights_that_make_no_difference_are_refused(pair: tuple[float, float]) -> None:
    with pytest.raises(DaylayerError):
        check_heights(pair)


# low ground


def test_low_ground_ends_later_and_not_earlier_with_depth() -> None:
    end = Window(0.0, 1800.0, 3600.0, 9)
    night = Night(-9e4, 9e4, -4e4, 0.0, None, end, 9, False, False, 1.0)
    fields = [low_field(below, [night]) for below in (1.0, 3.0, 6.0, 12.0, 40.0)]
    starts = [one.ends[0][0] for one in fields if one.ends[0]]
    assert starts == sorted(starts)
    assert all(one.ends[0] and one.ends[0][1] > 3600.0 for one in fields)
    assert fields[-1].later == fields[2].later == (2.0, 4.0)
    assert all(moment % 1800.0 == 0.0 for one in fields if one.ends[0] for moment in one.ends[0])


# the tower


def test_a_reading_moves_the_members_towards_it_and_together() -> None:
    values = np.array([[0.0, 1.0], [1.0, 3.0], [2.0, 5.0]])
    times = np.array([0.0, 600.0])
    moved = assimilate(values, values[:, 0], times, 0.0, 3.0, 0.3, 0.0)
    assert 1.0 < moved[:, 0].mean() < 3.0
    assert moved[:, 1].mean() > values[:, 1].mean()
    assert np.ptp(moved[:, 0]) < np.ptp(values[:, 0])
    exact = assimilate(values, values[:, 0], times, 0.0, 3.0, 1e-9, 0.0)
    assert exact[:, 0] == pytest.approx(3.0, abs=1e-5)


def test_members_that_agree_still_follow_the_tower_and_forget_it() -> None:
    values = np.ones((3, 3))
    moved = assimilate(values, values[:, 0], np.array([0.0, 4 * HOUR, 24 * HOUR]), 0.0, 2.0, 0.3, 0.5)
    mean = moved.mean(axis=0) - 1.0
    assert mean[0] > mean[1] > mean[2] > 0.0
    assert mean[2] < 0.01


def test_the_towers_heights_are_chosen_or_refused() -> None:
    table = tower(0.5, last=NOW)
    assert tower_pair(table, None) == (1.5, 9.0)
    with pytest.raises(WeatherError, match="no temperature at 4 m"):
        tower_pair(table, (4.0, 9.0))
    with pytest.raises(WeatherError, match="no two temperatures"):
        tower_pair(replace(table, temperature={1.5: table.temperature[1.5]}), None)


def onset_and_end(difference: float) -> tuple[float, float]:
    made = plan(field(), observed=tower(difference, last=datetime(2026, 7, 14, 23, 30, tzinfo=UTC)))
    night = next(one for one in made.nights if one.onset is not None)
    assert night.onset is not None
    assert night.end is not None
    return night.onset.middle, night.end.middle


def test_a_tower_with_a_larger_difference_brings_the_onset_forward_and_a_smaller_one_delays_it() -> None:
    made = plain_plan()
    night = next(one for one in made.nights if one.onset is not None)
    assert night.onset is not None
    larger, smaller = onset_and_end(0.0), onset_and_end(-1.2)
    assert larger[0] < night.onset.middle < smaller[0]


def test_an_inversion_that_was_read_stands_and_its_onset_lies_before_the_reading() -> None:
    last = datetime(2026, 7, 14, 22, tzinfo=UTC)
    made = plan(field(), observed=tower(0.4, last=last))
    read = int(np.argmin(np.abs(made.air.time - last.timestamp())))
    assert made.judged.states[read] == PRESENT
    assert plain_plan().judged.states[read] == NONE
    answer = document(made, now=last)
    seen = answer["observed"]
    assert seen["observed_difference_K"] == pytest.approx(0.4)
    assert seen["modelled_difference_K"] < 0.0
    assert answer["series"]["observed_difference_K"][read] == pytest.approx(0.4)
    assert answer["nights"] != seen["nights_before"]


# the document


def test_every_hour_to_come_is_a_plan_and_no_past_one_is() -> None:
    for hour in plain_document()["calendar"]:  # type: ignore[attr-defined]
        assert hour["plan_only"] == (datetime.fromisoformat(hour["end"]) > NOW)


def test_hours_are_local_full_hours_without_a_gap() -> None:
    answer: Any = plain_document()
    starts = [datetime.fromisoformat(hour["start"]) for hour in answer["calendar"]]
    assert all(one.minute == 0 for one in starts)
    assert all(b - a == timedelta(hours=1) for a, b in pairwise(starts))
    assert len(starts) >= 28


def test_no_hour_with_an_inversion_or_the_possibility_of_one_is_inside() -> None:
    answer: Any = plain_document()
    assert any(hour["status"] == INSIDE for hour in answer["calendar"])
    assert any(hour["inversion"] == PRESENT for hour in answer["calendar"])
    for hour in answer["calendar"]:
        if hour["inversion"] != NONE:
            assert hour["status"] == OUTSIDE
            assert hour["reasons"][0]["code"] in ("inversion", "possible inversion")
        if hour["status"] == INSIDE:
            assert hour["reasons"] == []
            assert hour["share_with_inversion"] == 0.0


def test_stretches_cover_the_calendar_in_order_and_carry_spreads() -> None:
    answer: Any = plain_document()
    found = answer["stretches"]
    assert sum(one["hours"] for one in found) == len(answer["calendar"])
    assert all(a["end"] == b["start"] for a, b in pairwise(found))
    edges = [one for one in found if one["limit"] == "inversion" and one["hours"] > 5]
    assert all(one["start_spread"] and one["end_spread"] for one in edges)
    for one in found:
        for key, spread in (("start", one["start_spread"]), ("end", one["end_spread"])):
            assert spread is None or spread[0] <= one[key] <= spread[1]


def test_onset_and_end_are_windows_and_never_a_single_minute() -> None:
    answer: Any = plain_document()
    windows = [one[key] for one in answer["nights"] for key in ("onset", "end") if one[key]]
    assert windows
    for one in windows:
        assert datetime.fromisoformat(one["late"]) - datetime.fromisoformat(one["early"]) >= timedelta(hours=1)
    assert "inversion_onset_time" not in answer["summary"]


def test_the_document_is_strict_json_with_the_schema_equal_columns_and_all_cautions() -> None:
    answer = json.loads(to_json(plain_document()))
    assert answer["schema"] == "daylayer/1"
    assert len({len(values) for values in answer["series"].values()}) == 1
    assert [one["code"] for one in answer["cautions"]][:5] == ["S1", "S2", "S3", "S4", "S5"]
    assert len(answer["low_ground"]["fields"]) == 2
    assert "few observations" in answer["low_ground"]["rule"]
    assert answer["profile"]["age_hours"] == pytest.approx(6.5)
    assert answer["profile"]["distance_km"] == 0.0


def test_without_limits_nothing_is_inside_and_it_says_so() -> None:
    made = plain_plan()
    bare = replace(made, run=replace(made.run, scenario=replace(made.run.scenario, limits=None)))
    answer = document(bare, now=NOW)
    assert {hour["status"] for hour in answer["calendar"]} == {CONDITIONS}
    assert answer["summary"]["hours_inside"] is None
    assert answer["limits"]["given"] is False
