"""The result document: keys, types and nulls; doubts, effects of assumptions, and answers in the right direction."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from itertools import pairwise
from typing import Any

import pytest
from column import column
from invented import scenario

from forcing.bundled import bundled
from forcing.scenario import load, with_run, with_setting
from forcing.scenario_types import Scenario
from slab.commands.options import DOUBTS
from slab.cycle import run
from slab.inputs_words import BEYOND, untold_lines
from slab.march import Control
from slab.products.events import ventilation_class
from slab.products.forecast import document_of, effects, forecast
from slab.wording import METRIC

NOW = datetime(2026, 7, 14, 13, tzinfo=UTC)
TEXT, LIST = str, list
NUMBER = (int, float)
SERIES: dict[str, Any] = {
    "time": TEXT, "regime": TEXT, "mixing_depth_m": NUMBER, "depth_method": TEXT, "residual_top_m": NUMBER, "theta_K": NUMBER,
    "mixing_ratio_g_kg": NUMBER, "temperature_2m_C": NUMBER, "dewpoint_2m_C": NUMBER, "relative_humidity_2m_pct": NUMBER,
    "wind_10m_m_s": NUMBER, "transport_wind_m_s": NUMBER, "transport_wind_from_deg": NUMBER, "ventilation_m2_s": NUMBER,
    "shortwave_down_W_m2": NUMBER, "longwave_down_W_m2": NUMBER, "net_radiation_W_m2": NUMBER, "sensible_flux_W_m2": NUMBER,
    "latent_flux_W_m2": NUMBER, "ground_flux_W_m2": NUMBER, "condensation_level_m": NUMBER, "cumulus_fraction": NUMBER,
    "inversion_depth_m": NUMBER, "inversion_strength_K": NUMBER, "temperature_10m_C": NUMBER, "temperature_1_5m_C": NUMBER,
    "temperature_9m_C": NUMBER,
}  # fmt: skip
SUMMARY: dict[str, Any] = {
    "mixing_depth_max_m": NUMBER, "mixing_depth_max_time": TEXT, "temperature_2m_max_C": NUMBER, "temperature_2m_max_time": TEXT,
    "temperature_2m_min_C": NUMBER, "temperature_2m_min_time": TEXT, "relative_humidity_2m_min_pct": NUMBER,
    "inversion_gone_time": TEXT, "inversion_heat_needed_MJ_m2": NUMBER, "inversion_heat_expected_MJ_m2": NUMBER,
    "convective_temperature_C": NUMBER, "cumulus_onset_time": TEXT, "cumulus_base_m": NUMBER, "gust_low_m_s": NUMBER,
    "gust_high_m_s": NUMBER, "transport_wind_m_s": NUMBER, "ventilation_m2_s": NUMBER, "sensible_flux_reversal_time": TEXT,
    "inversion_onset_time": TEXT, "mixing_end_time": TEXT,
}  # fmt: skip
MEASURED = ("mixing_depth_m", "temperature_2m_C", "theta_K", "wind_10m_m_s", "sensible_flux_W_m2", "latent_flux_W_m2")


def case(name: str = "summer_plain", hours: float = 36.0) -> Scenario:
    return with_run(load(bundled(name)), hours=hours)


@pytest.fixture(scope="module")
def summer() -> dict[str, Any]:
    return forecast(case(), now=NOW, with_effects=False)


def quick(one: Scenario, **settings: object) -> dict[str, Any]:
    """A short forecast with some settings changed, without reruns."""
    for key, value in settings.items():
        one = with_setting(one, key.replace("__", "."), value)
    return forecast(one, now=NOW, with_effects=False)


def test_the_document_holds_every_part_with_its_keys(summer: dict[str, Any]) -> None:
    assert summer["schema"] == "daylayer/1"
    for key, kind in {
        "site": dict, "profile": dict, "assumptions": LIST, "repairs": LIST, "warnings": LIST, "cautions": LIST,
        "doubts": LIST, "summary": dict, "series": dict, "definitions": dict, "profiles": dict, "sun": dict, "run": dict,
    }.items():  # fmt: skip
        assert isinstance(summer[key], kind), key
    assert set(summer["site"]) >= {"name", "latitude", "longitude", "elevation_m", "time_zone"}
    assert set(summer["profile"]) >= {
        "file", "format", "station", "valid", "age_hours", "distance_km", "height_difference_m", "tops"
    }  # fmt: skip
    for one in summer["assumptions"]:
        assert set(one) >= {
            "name",
            "value",
            "source",
            "why",
            "step",
            "effect_on_depth_m",
            "effect_on_max_temperature_K",
        }
        assert one["source"] in {"observed", "given", "assumed"}
    assert {one["code"] for one in summer["cautions"]} >= {"G1", "G2", "G3", "G4", "G5", "A1", "B1", "B2", "B3"}
    assert all(one["text"] for one in summer["cautions"])


def test_series_are_complete_equally_long_and_typed(summer: dict[str, Any]) -> None:
    series = summer["series"]
    assert set(series) >= set(SERIES)
    assert {len(values) for values in series.values()} == {len(series["time"])}
    for name, kind in SERIES.items():
        for value in series[name]:
            assert value is None or isinstance(value, kind), (name, value)
            assert not (isinstance(value, float) and not math.isfinite(value)), name
    for name in MEASURED:
        assert None not in series[name], name
    times = [datetime.fromisoformat(text) for text in series["time"]]
    assert all(time.utcoffset() == timedelta(0) for time in times)
    assert times == sorted(set(times))
    assert all(b - a <= timedelta(hours=1) for a, b in pairwise(times))
    assert times[-1] - times[0] == timedelta(hours=36)
    assert all(time.minute == 0 for time in times[1:-1])
    known = set(summer["definitions"]) | {"turbulent", "intermittent", "very stable", "unstable"}
    assert set(series["regime"]) | set(series["depth_method"]) <= known


def test_summary_is_complete_and_agrees_with_the_series(summer: dict[str, Any]) -> None:
    answers, series = summer["summary"], summer["series"]
    assert set(answers) >= set(SUMMARY)
    for name, kind in SUMMARY.items():
        assert answers[name] is None or isinstance(answers[name], kind), name
        if name.endswith("_time") and answers[name] is not None:
            assert datetime.fromisoformat(answers[name]).tzinfo is not None
    day = [
        h for h, method in zip(series["mixing_depth_m"], series["depth_method"], strict=True) if method == "slab top"
    ]
    assert answers["mixing_depth_max_m"] >= max(day[:12]) - 0.1
    assert answers["temperature_2m_max_C"] >= max(series["temperature_2m_C"][:24]) - 0.01
    assert answers["relative_humidity_2m_min_pct"] <= min(series["relative_humidity_2m_pct"][:24]) + 0.1
    assert answers["inversion_heat_needed_MJ_m2"] > 0.0
    assert answers["inversion_heat_expected_MJ_m2"] > answers["inversion_heat_needed_MJ_m2"]
    order = ["inversion_gone_time", "temperature_2m_max_time", "sensible_flux_reversal_time"]
    assert [answers[name] for name in order] == sorted(answers[name] for name in order)
    assert answers["gust_low_m_s"] <= answers["gust_high_m_s"]
    assert answers["superadiabatic_excess_K"] > 0.0


def test_the_document_is_plain_json(summer: dict[str, Any]) -> None:
    assert json.loads(json.dumps(summer, allow_nan=False)) == summer


def test_fluxes_given_leave_radiation_null_not_made_up() -> None:
    series = forecast(case("southern_wheat", 14.0), now=NOW, with_effects=False)["series"]
    for name in ("net_radiation_W_m2", "ground_flux_W_m2"):
        assert set(series[name]) == {None}


def test_no_ventilation_without_a_wind() -> None:
    still = column(((0.0, 288.0), (200.0, 293.0), (1200.0, 294.0), (1300.0, 297.0), (7000.0, 322.0)), humidity=0.007)
    document = document_of(run(scenario(still, hours=10.0)), now=NOW, with_effects=False)
    assert set(document["series"]["ventilation_m2_s"]) == {None}
    assert document["summary"]["ventilation_m2_s"] is None
    assert document["summary"]["gust_high_m_s"] is None
    assert "wind_unknown" in {one["code"] for one in document["doubts"]}


def test_a_layer_at_the_profiles_top_gives_null_warning_and_doubt() -> None:
    low = column(((0.0, 288.0), (100.0, 290.0), (1400.0, 292.0)), humidity=0.005, wind=4.0)
    document = document_of(run(scenario(low, hours=14.0)), now=NOW, with_effects=False)
    assert document["summary"]["mixing_depth_max_m"] is None
    assert document["summary"]["mixing_depth_max_time"] is None
    assert "top_of_profile" in {one["code"] for one in document["doubts"]}
    assert any("top of the profile" in warning for warning in document["warnings"])
    assert max(value for value in document["series"]["mixing_depth_m"] if value is not None) <= 1400.0


@pytest.mark.parametrize(("age", "said"), [(2.0, False), (11.9, False), (12.1, True), (48.0, True), (24.0 * 30, False)])
def test_an_old_profile_is_a_doubt_unless_it_is_an_archive_case(age: float, said: bool) -> None:
    one = case(hours=2.0)
    moment = one.original.valid + timedelta(hours=age)
    document = forecast(one, now=moment, with_effects=False)
    assert ("profile_age" in {d["code"] for d in document["doubts"]}) is said
    assert document["profile"]["age_hours"] == pytest.approx(age, abs=0.01)
    assert document["profile"]["age_at_start_hours"] == 0.0
    archive = [warning for warning in document["warnings"] if "days old" in warning]
    assert archive == (["the release is 30 days old: a case from the archive"] if age > 24.0 * 14 else [])


def test_a_far_or_high_release_is_a_doubt() -> None:
    one = case(hours=2.0)
    away = replace(one, original=replace(one.original, latitude=one.site.latitude + 2.0))
    high = replace(one, original=replace(one.original, elevation=one.site.elevation + 400.0))
    near = replace(one, original=replace(one.original, latitude=one.site.latitude + 1.0))
    for changed, said in ((away, True), (high, True), (near, False)):
        document = forecast(changed, now=NOW, with_effects=False)
        assert ("release_distance" in {d["code"] for d in document["doubts"]}) is said
    assert forecast(near, now=NOW, with_effects=False)["profile"]["distance_km"] == pytest.approx(111.2, abs=0.2)


def test_fog_is_a_doubt() -> None:
    foggy = column(((0.0, 278.0), (100.0, 279.5), (1500.0, 284.0), (7000.0, 310.0)), humidity=(0.0056, 0.0055, 0.003, 0.0005),
                   wind=2.0)  # fmt: skip
    document = document_of(run(scenario(foggy, valid=datetime(2024, 10, 1, 3, tzinfo=UTC), hours=10.0)), now=NOW,
                           with_effects=False)  # fmt: skip
    assert "saturated_layer" in {one["code"] for one in document["doubts"]}


def test_every_doubt_is_of_the_printed_list(summer: dict[str, Any]) -> None:
    assert {one["code"] for one in summer["doubts"]} <= set(DOUBTS)


def test_air_held_aloft_is_said_and_said_again_after_a_day(summer: dict[str, Any]) -> None:
    held = [warning for warning in summer["warnings"] if "aloft" in warning]
    assert len(held) == 2
    assert len([w for w in quick(case(hours=12.0))["warnings"] if "aloft" in w]) == 1


# --- directions


def test_drier_soil_deepens_warms_and_dries() -> None:
    wet, dry = (quick(case(hours=12.0), surface__soil_moisture=m)["summary"] for m in (0.9, 0.1))
    assert dry["mixing_depth_max_m"] > wet["mixing_depth_max_m"] + 100.0
    assert dry["temperature_2m_max_C"] > wet["temperature_2m_max_C"] + 0.5
    assert dry["relative_humidity_2m_min_pct"] < wet["relative_humidity_2m_min_pct"]


def test_more_cloud_is_cooler_and_shallower() -> None:
    clear, overcast = (quick(case(hours=12.0), weather__cloud_fraction=c)["summary"] for c in (0.0, 0.9))
    assert overcast["temperature_2m_max_C"] < clear["temperature_2m_max_C"] - 1.0
    assert overcast["mixing_depth_max_m"] < clear["mixing_depth_max_m"] - 100.0


def test_sinking_air_makes_it_shallower_and_advection_of_warm_air_warmer() -> None:
    plain = quick(case(hours=12.0))["summary"]
    assert (
        quick(case(hours=12.0), weather__divergence_per_s=1e-5)["summary"]["mixing_depth_max_m"]
        < plain["mixing_depth_max_m"]
    )
    warm = quick(case(hours=12.0), weather__heat_advection_K_h=0.3)["summary"]
    assert warm["temperature_2m_max_C"] > plain["temperature_2m_max_C"] + 1.0


def test_effects_of_assumptions_have_the_sign_of_their_step() -> None:
    one = with_setting(case(hours=14.0), "surface.soil_moisture", None)
    one = with_setting(with_setting(one, "weather.cloud_fraction", None), "weather.cloud_base_m", None)
    document = forecast(one, now=NOW)
    by_key = {
        a["key"]: a for a in document["assumptions"] if a["source"] == "assumed" and a["effect_on_depth_m"] is not None
    }
    soil, cloud = by_key["surface.soil_moisture"], by_key["weather.cloud_fraction"]
    stepped = {a.key: a for a in one.assumptions}
    wetter = float(stepped["surface.soil_moisture"].stepped) > one.soil_moisture  # type: ignore[arg-type]
    assert (soil["effect_on_depth_m"] < 0.0) is wetter
    assert (soil["effect_on_max_temperature_K"] < 0.0) is wetter
    # a little cloud takes hardly any sun and gives long-wave: its sign is its own, but it is no large change
    assert 0.0 < abs(cloud["effect_on_max_temperature_K"]) < 1.0
    assert all(a["step"] for a in by_key.values())
    given = [a for a in document["assumptions"] if a["source"] == "given"]
    assert all(a["effect_on_depth_m"] is None for a in given)


@pytest.mark.parametrize("name", ["summer_plain", "dry_desert", "spring_crop", "snow_field"])
def test_effects_hold_at_four_times_the_accuracy(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    scenario = case(name, hours=12.0)
    done = run(scenario)
    quick = effects(scenario, done)
    monkeypatch.setattr("slab.products.forecast.COARSE", Control(2.0, 900.0, 1200.0))
    careful = effects(scenario, done)
    for key, (depth, warmth) in careful.items():
        if depth is None or warmth is None:
            assert quick[key] == (None, None)
        else:
            assert quick[key] == (pytest.approx(depth, abs=10.0), pytest.approx(warmth, abs=0.05)), key


def test_a_step_that_fogs_the_day_has_no_figure() -> None:
    document = forecast(case("snow_field", hours=12.0), now=NOW)
    moist = next(a for a in document["assumptions"] if a["key"] == "weather.moisture_advection_g_kg_h")
    assert moist["effect_on_depth_m"] is None
    assert moist["effect_on_max_temperature_K"] is None
    told = [line for line in untold_lines(document, METRIC) if "moistening" in line]
    assert len(told) == 1
    assert told[0].endswith(BEYOND)


def test_the_ventilation_class_is_the_users_own() -> None:
    done = run(case(hours=10.0))
    found = [ventilation_class(done, rate) for rate in (0.0, 2999.0, 3000.0, 8999.0, 20000.0)]
    assert [one["name"] for one in found if one] == ["low", "low", "middling", "middling", "high"]
    assert all(one["authority"] and one["dated"] for one in found if one)
    assert ventilation_class(replace(done, scenario=replace(done.scenario, limits=None)), 5000.0) is None
    named = quick(case("dry_desert", 16.0))["summary"]["ventilation_class"]
    assert named is None or load(bundled("dry_desert")).limits is not None


def test_cumulus_onset_only_where_there_is_cumulus() -> None:
    for name in ("humid_lowland", "dry_desert", "summer_plain"):
        document = forecast(case(name, 20.0), now=NOW, with_effects=False)
        most = max(document["series"]["cumulus_fraction"])
        answers = document["summary"]
        assert (answers["cumulus_onset_time"] is None) == (answers["cumulus_base_m"] is None)
        if most > 0.011:
            assert answers["cumulus_onset_time"] is not None
            k = document["series"]["time"].index(answers["cumulus_onset_time"][:14] + "00:00Z")
            assert answers["cumulus_base_m"] < 1.2 * max(document["series"]["mixing_depth_m"][k : k + 2])
        if answers["cumulus_onset_time"] is None:
            assert most <= 0.011
    assert forecast(case("dry_desert", 20.0), now=NOW, with_effects=False)["summary"]["cumulus_onset_time"] is None


def test_output_minutes_set_the_rows() -> None:
    document = forecast(with_run(case(hours=4.0), output_minutes=30.0), now=NOW, with_effects=False)
    assert len(document["series"]["time"]) == 9


def test_the_same_case_gives_the_same_document() -> None:
    one = case("spring_crop", 6.0)
    assert forecast(one, now=NOW) == forecast(one, now=NOW)
