"""A comparison: what must be zero, what must flip, what must close, and what the files and pictures say."""

from __future__ import annotations

import csv
import io
import json
import math
import re
import subprocess
import sys
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.io import netcdf_file

from forcing.errors import CoverError, ScenarioError
from forcing.own_covers import resolve
from forcing.scenario import bundled, load, with_run, with_setting
from forcing.scenario_types import Scenario
from slab.cycle import run
from slab.export import to_json
from slab.pictures_compare import page
from slab.pictures_style import canvas_of
from slab.products.changes import change_of
from slab.products.compare import compare, run_pair
from slab.products.compare_answers import QUANTITIES
from slab.products.compare_files import compare_csv, compare_netcdf
from slab.products.compare_spread import MANY, spread
from slab.products.compare_text import compare_text
from slab.products.compare_tiles import march, tile_check
from slab.products.covers import UNCHECKED, covers_csv, covers_document, covers_text, ranges
from slab.products.days import Day
from slab.products.events import summary
from slab.wording import units_named

HOURS = 25.5  # past the minimum of the next dawn
NEUTRAL = ("albedo +0", "30% short grass", "cover short grass", "soil moisture +0")
VERDICTS = re.compile(r"\b(safe|legal|permitted|ok|approved|go|green light)\b", re.IGNORECASE)


def plain(cover: str = "short grass") -> Scenario:
    """The bundled plain, to the next dawn, over a cover."""
    return with_setting(with_run(load(bundled("summer_plain")), hours=HOURS), "surface.cover", cover)


@cache
def document() -> dict[str, Any]:
    """One comparison that most tests read."""
    changes = [change_of("albedo +0.10"), change_of("watered: cover irrigated crop"), *map(change_of, NEUTRAL)]
    return compare([Day("2026-07-14", plain())], changes)


def by_name(name: str) -> dict[str, Any]:
    return next(change for change in document()["changes"] if change["name"] == name)


@pytest.mark.parametrize("words", NEUTRAL)
def test_a_neutral_change_changes_nothing(words: str) -> None:
    change = by_name(words)
    for name, row in change["answers"].items():
        assert row["difference"]["median"] in (0.0, None), name
        assert row["base"] == row["changed"]
    for name, row in change["hourly"].items():
        if name != "hour_local":
            assert set(row["median"]) <= {0.0, None}, name
    assert change["runs"][0]["series"] == document()["days"]["runs"][0]["series"]


def test_the_base_is_the_forecast() -> None:
    told = summary(run(plain()))
    base = document()["days"]["runs"][0]["answers"]
    for name in ("temperature_2m_max_C", "temperature_2m_min_C", "mixing_depth_max_m"):
        assert round(base[name], 1 if name.endswith("_m") else 2) == pytest.approx(told[name], abs=0.011)


def test_a_changed_ground_is_the_forecast_of_that_ground() -> None:
    told = summary(run(plain("irrigated crop")))
    changed = by_name("watered")["runs"][0]["answers"]
    assert changed["temperature_2m_max_C"] == pytest.approx(told["temperature_2m_max_C"], abs=0.0051)
    assert changed["mixing_depth_max_m"] == pytest.approx(told["mixing_depth_max_m"], abs=0.051)


def test_swapping_base_and_change_flips_every_sign() -> None:
    forth = run_pair("day", plain(), [change_of("cover irrigated crop")], 28.0)
    back = run_pair("day", plain("irrigated crop"), [change_of("cover short grass")], 28.0)
    differing = 0
    for name in QUANTITIES:
        there = forth.changed[0][1].numbers[name] - forth.answered.numbers[name]
        home = back.changed[0][1].numbers[name] - back.answered.numbers[name]
        assert math.isnan(there) == math.isnan(home), name
        if not math.isnan(there):
            assert there == -home, name
            differing += there != 0.0
    assert differing > 20


def test_the_balance_closes_by_day() -> None:
    for change in document()["changes"]:
        for side in ("base", "changed"):
            assert change["answers"]["balance_residual_W_m2"][side]["median"] == pytest.approx(0.0, abs=1e-6)
            means = {
                term: change["answers"][f"{term}_day_W_m2"][side]["median"]
                for term in ("net_radiation", "anthropogenic", "sensible", "latent", "ground")
            }
            gained = means["net_radiation"] + means["anthropogenic"]
            assert gained == pytest.approx(means["sensible"] + means["latent"] + means["ground"], abs=3.0)


def test_signs_of_a_brighter_and_of_a_watered_ground() -> None:
    brighter = {name: row["difference"]["median"] for name, row in by_name("albedo +0.10")["answers"].items()}
    assert brighter["temperature_2m_max_C"] < 0.0 > brighter["mixing_depth_max_m"]
    assert brighter["net_radiation_day_W_m2"] < 0.0 > brighter["sensible_day_W_m2"]
    # the skin cools most, then the air at 2 m, then the layer: they are different answers
    assert brighter["skin_temperature_max_C"] < brighter["temperature_2m_max_C"] < brighter["theta_max_K"] < 0.0
    watered = {name: row["difference"]["median"] for name, row in by_name("watered")["answers"].items()}
    assert watered["bowen_ratio_midday"] < 0.0 < watered["latent_day_W_m2"]
    assert watered["mixing_ratio_day_g_kg"] > 0.0 > watered["mixing_depth_max_m"]


def test_effect_per_tenth() -> None:
    brighter = by_name("albedo +0.10")
    (one,) = brighter["effectiveness"]
    assert one["of"] == "area-mean albedo"
    assert one["step"] == pytest.approx(0.1)
    wanted = brighter["answers"]["temperature_2m_max_C"]["difference"]["median"]
    assert one["temperature_2m_max_C"]["median"] == pytest.approx(wanted, abs=0.0011)
    assert by_name("watered")["effectiveness"] == []
    (part,) = by_name("30% short grass")["effectiveness"]
    assert part["step"] == pytest.approx(0.3)


def test_smallest_area_is_wind_times_turnover() -> None:
    patch = document()["patch"]
    assert 500.0 < patch["turnover_s"]["median"] < 1500.0
    product = patch["turnover_s"]["median"] * patch["wind_m_s"]["median"]
    assert patch["length_m"]["median"] == pytest.approx(product, rel=0.2)
    assert f"{patch['length_m']['median'] / 1000.0:.0f} km" in next(
        item["text"] for item in document()["cautions"] if item["code"] == "H3"
    )


def test_hours_above_and_degree_hours() -> None:
    scenario = plain()
    answers = run_pair("day", scenario, [change_of("albedo +0.10")], 27.0).answered.numbers
    done = run(scenario)
    inside = done.time <= done.time[0] + 86400.0
    warm = done.fields["temperature_2m"][inside] - 273.15
    assert answers["hours_above_threshold"] == pytest.approx(np.sum(warm > 27.0) / 6.0)
    assert answers["degree_hours"] == pytest.approx(np.sum(np.maximum(warm - 27.0, 0.0)) / 6.0)


def test_spread_over_days() -> None:
    few = spread([1.0, 3.0, 2.0, math.nan], "K")
    assert few == {"median": 2.0, "low": 1.0, "high": 3.0, "days": 3}
    many = spread([float(n) for n in range(MANY + 1)], "K")
    assert (many["low"], many["median"], many["high"]) == (1.0, 5.0, 9.0)
    assert spread([], "K") == {"median": None, "low": None, "high": None, "days": 0}


def test_two_days_have_a_spread_and_a_lost_day_its_reason() -> None:
    days = [
        Day("first", with_run(plain(), hours=9.0)),
        Day("second", with_run(plain("heath"), hours=9.0)),
        Day("lost", None, "torn"),
    ]
    found = compare(days, [change_of("albedo +0.10")])
    row = found["changes"][0]["answers"]["temperature_2m_max_C"]["difference"]
    assert row["days"] == 2
    assert row["low"] <= row["median"] <= row["high"] < 0.0
    assert found["days"]["used"] == 2
    assert found["days"]["left_out"] == [{"reason": "torn", "count": 1, "first": "lost"}]
    words = compare_text(found)
    assert "days: 2 of 3 used (first, second)" in words
    assert "left out 1: torn" in words
    assert "lowest to highest day" in words


def test_ground_that_cannot_act_is_refused() -> None:
    fluxes = load(bundled("southern_wheat"))
    with pytest.raises(ScenarioError, match="surface fluxes are given"):
        compare([Day("day", fluxes)], [change_of("albedo +0.10")])
    given = with_setting(plain(), "weather.net_radiation_W_m2", 300.0)
    with pytest.raises(ScenarioError, match="net radiation is given"):
        compare([Day("day", given)], [change_of("albedo +0.10")])
    with pytest.raises(ScenarioError, match="no change"):
        compare([Day("day", plain())], [])
    with pytest.raises(ScenarioError, match="none of 1 days"):
        compare([Day("day", None, "torn")], [change_of("albedo +0.10")])
    with pytest.raises(CoverError, match="unknown land cover"):
        compare([Day("day", with_run(plain(), hours=2.0))], [change_of("cover lava")])


def test_files_hold_everything() -> None:
    text = to_json(document())
    again = json.loads(text)
    assert again["kind"] == "comparison"
    rows = list(csv.DictReader(io.StringIO(compare_csv(document()))))
    hours = len(document()["days"]["runs"][0]["series"]["time"])
    assert len(rows) == len(document()["changes"]) * (len(QUANTITIES) + 15 * hours)
    for row in rows:
        if row["base"] and row["changed"]:
            assert float(row["changed"]) - float(row["base"]) == pytest.approx(float(row["difference"]), abs=1e-3)
    file = netcdf_file(io.BytesIO(compare_netcdf(document())), mmap=False)
    assert file.Conventions == b"CF-1.11"
    names = ["".join(map(bytes.decode, row)).strip() for row in file.variables["change_name"][:]]
    assert names == [change["name"] for change in document()["changes"]]
    base = file.variables["base_temperature_2m_max_C"]
    assert base[0] == document()["days"]["runs"][0]["answers"]["temperature_2m_max_C"]
    hourly = file.variables["changed_hourly_temperature_2m_C"]
    assert hourly.dimensions == ("change", "day", "hour")
    assert hourly.standard_name == b"air_temperature"
    assert list(hourly[1, 0, :]) == by_name("watered")["runs"][0]["series"]["temperature_2m_C"]


def test_netcdf_passes_the_public_checker_and_repeats(tmp_path: Path) -> None:
    pytest.importorskip("compliance_checker")
    assert compare_netcdf(document()) == compare_netcdf(document())
    path = tmp_path / "grounds.nc"
    path.write_bytes(compare_netcdf(document()))
    script = Path(sys.executable).with_name("compliance-checker")
    command = [str(script)] if script.exists() else [sys.executable, "-m", "compliance_checker.cchecker"]
    done = subprocess.run([*command, "-t", "cf:1.11", str(path)], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout
    assert "All tests passed" in done.stdout


@pytest.mark.parametrize("units", ["metric", "us"])
def test_words(units: str) -> None:
    words = compare_text(document(), units_named(units))
    assert words.startswith("albedo +0.10: highest 2 m temperature -")
    assert not VERDICTS.search(words)
    for code in ("H1", "H2", "H3", "G2", "G4", "G5"):
        assert f"{code}  " in words
    assert "not a health assessment" in words
    assert "no advection" in words
    assert ("°F" in words) == (units == "us")
    assert re.search(r"wider than [\d.]+ (km|miles)", words)


@pytest.mark.parametrize("units", ["metric", "us"])
def test_the_page_has_no_words_over_its_edge(units: str) -> None:
    figure = page(document(), units=units)
    canvas = canvas_of(figure)
    canvas.draw()
    renderer = canvas.get_renderer()
    width, height = figure.get_size_inches() * figure.dpi
    texts = [*figure.texts, *(text for axes in figure.axes for text in axes.get_yticklabels())]
    for text in texts:
        box = text.get_window_extent(renderer)
        assert box.x0 >= 0.0, text.get_text()
        assert box.x1 <= width, text.get_text()
        assert box.y0 >= 0.0, text.get_text()
        assert box.y1 <= height, text.get_text()
        assert text.get_fontsize() >= 7.0
        assert not VERDICTS.search(text.get_text())


def test_covers_have_every_property_with_a_range_and_a_source() -> None:
    found = covers_document()
    assert len(found["covers"]) >= 20
    for cover in found["covers"]:
        assert len(cover["properties"]) == 22
        for key, one in cover["properties"].items():
            assert one["low"] <= one["value"] <= one["high"], (cover["name"], key)
            assert len(one["source"]) > 3
            assert one["meaning"]
    rows = list(csv.DictReader(io.StringIO(covers_csv(found))))
    assert len(rows) == 22 * len(found["covers"])
    words = covers_text(found, full=False)
    assert "compact high buildings" in words
    assert not VERDICTS.search(words)


def test_sources_are_published_or_said_to_be_unchecked_and_that_is_explained_once() -> None:
    found = covers_document()
    sources = {one["source"] for cover in found["covers"] for one in cover["properties"].values()}
    for source in sources:
        assert not re.search(r"recalled|\bE\d{3}\b|course text|not used", source), source
    assert any(UNCHECKED in source for source in sources)
    assert UNCHECKED in found["notes"]["sources"]
    text = covers_text(covers_document(["short grass"]), full=True)
    assert text.count("\nsources: where it says") == 1
    assert covers_text(found, full=False).count(found["notes"]["built_classes"]) == 1


def test_range_of_a_mixture_and_of_a_cover_of_ones_own() -> None:
    mixed = covers_document(["50% short grass + 50% paved ground"])["covers"][0]
    one = mixed["properties"]["albedo"]
    ends = [ranges(plain(name).cover)["albedo"] for name in ("short grass", "paved ground")]
    assert one["value"] == pytest.approx(sum(end.value for end in ends) / 2.0)
    assert one["low"] == pytest.approx(sum(end.low for end in ends) / 2.0)
    assert one["high"] == pytest.approx(sum(end.high for end in ends) / 2.0)
    own = with_setting(plain(), "surface.albedo", 0.3).cover
    assert ranges(own)["albedo"].high == 0.3
    assert "given by the user" in ranges(own)["albedo"].source
    with pytest.raises(CoverError, match=r"sum to 0\.9"):
        covers_document(["50% short grass + 40% heath"])


def test_sensitivity_is_ranked_and_says_what_each_change_then_does(monkeypatch: pytest.MonkeyPatch) -> None:
    from slab.products import compare_sensitivity

    few = ("albedo", "emissivity", "leaf_area")
    monkeypatch.setattr(compare_sensitivity, "ranges", lambda cover: {key: ranges(cover)[key] for key in few})
    scenario = with_run(plain(), hours=9.0)
    brighter = change_of("albedo +0.10")
    found = compare([Day("day", scenario)], [brighter], sensitivity=True)["sensitivity"]
    assert {row["property"] for row in found["rows"]} == {*few, "soil_moisture"}
    sizes = [row["size_K"] for row in found["rows"]]
    assert sizes == sorted(sizes, reverse=True)
    assert found["rows"][-1]["property"] == "emissivity"
    albedo = next(row for row in found["rows"] if row["property"] == "albedo")
    dark, bright = albedo["ends"]
    assert (dark["value"], bright["value"]) == (0.15, 0.25)
    assert dark["base"]["temperature_2m_max_C"] > 0.0 > bright["base"]["temperature_2m_max_C"]
    for row in found["rows"]:
        for end in row["ends"]:
            assert end["changes"]["albedo +0.10"]["temperature_2m_max_C"] < 0.0
    # the ends of a range move the base by what a change of that size does, to the accuracy of the coarser steps
    half = compare([Day("day", scenario)], [change_of("albedo +0.05")])["changes"][0]["answers"]
    assert bright["base"]["temperature_2m_max_C"] == pytest.approx(
        half["temperature_2m_max_C"]["difference"]["median"], abs=0.05
    )


def test_energy_closes_in_every_tile_and_one_cover_is_its_own_tile() -> None:
    mixed = resolve("50% short grass + 50% paved ground", {})
    done = run(replace(with_run(plain(), hours=9.0), cover=mixed))
    knots = range(done.parts[-1].first, len(done.time) - 1)
    for _, part in mixed.parts:
        fluxes, people = march(done, part, knots)
        gained = fluxes[:, 0] + people
        assert np.allclose(gained, fluxes[:, 1] + fluxes[:, 2] + fluxes[:, 3], rtol=0.0, atol=1e-6)
    found = tile_check(done)
    assert found is not None
    sealed, grass = (next(p for p in found["parts"] if p["cover"] == name) for name in ("paved ground", "short grass"))
    assert sealed["latent_W_m2"] < 0.1 * grass["latent_W_m2"]
    assert sealed["ground_W_m2"] > grass["ground_W_m2"]
    # one cover: no tiles, and its own march repeats the run's fluxes but for the soil's coarser steps
    alone = run(with_run(plain(), hours=9.0))
    assert tile_check(alone) is None
    knots = range(alone.parts[-1].first, len(alone.time) - 1)
    fluxes, _ = march(alone, alone.scenario.cover, knots)
    for column, name in enumerate(("net_radiation", "sensible", "latent", "ground")):
        assert np.mean(np.abs(fluxes[:, column] - alone.fields[name][knots.start : -1])) < 6.0, name
