"""Changes of ground in words, covers of the user's own, and the days a comparison runs over."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from forcing.cover import cover, mixture, tiles
from forcing.errors import DaylayerError, ScenarioError
from forcing.own_covers import resolve
from forcing.scenario import bundled, load, with_setting, write_toml
from forcing.scenario_types import Scenario
from slab.products.changes import apply, change_of, changes_of
from slab.products.days import climates, left_out, moistest, profile_days, typical_days

OWN = """
[covers."my meadow"]
like = "tall grass"
albedo = 0.24
source = "measured on site"

[[change]]
name = "meadow"
make = "cover my meadow"

[[change]]
make = "25% my meadow"
"""


@pytest.fixture(scope="module")
def plain() -> Scenario:
    return load(bundled("summer_plain"))


def with_own(folder: Path) -> Path:
    """The bundled plain with a cover of its own and two changes."""
    source = bundled("summer_plain")
    text = source.read_text(encoding="utf-8").replace('"summer_plain.csv"', f'"{source.parent / "summer_plain.csv"}"')
    path = folder / "own.toml"
    path.write_text(text + OWN, encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("words", "key", "value"),
    [
        ("albedo +0.10", "albedo", 0.30),
        ("albedo+0.1", "albedo", 0.30),
        ("albedo -0.05", "albedo", 0.15),
        ("albedo 0.35", "albedo", 0.35),
        ("albedo = 0.35", "albedo", 0.35),
        ("albedo +10%", "albedo", 0.22),
        ("roughness +20%", "roughness_momentum", 0.036),
        ("heat +20 W/m2", "anthropogenic_heat", 20.0),
        ("Leaf Area 1.5", "leaf_area", 1.5),
    ],
)
def test_a_property_is_set_shifted_or_scaled(plain: Scenario, words: str, key: str, value: float) -> None:
    assert plain.cover.albedo == 0.2
    made = apply(change_of(words), plain)
    assert getattr(made.scenario.cover, key) == pytest.approx(value, abs=1e-12)
    assert made.albedo_step == (pytest.approx(value - 0.2) if key == "albedo" else None)
    assert made.area_fraction is None


def test_covers_parts_and_water(plain: Scenario) -> None:
    assert apply(change_of("cover irrigated crop"), plain).scenario.cover == cover("irrigated crop")
    part = apply(change_of("30% deciduous forest"), plain)
    assert part.scenario.cover == mixture({cover("short grass"): 0.7, cover("deciduous forest"): 0.3})
    assert part.area_fraction == pytest.approx(0.3)
    assert apply(change_of("canopy +30%"), plain).scenario.cover == part.scenario.cover
    assert apply(change_of("irrigation"), plain).scenario.soil_moisture == cover("irrigated crop").soil_moisture_least
    assert apply(change_of("soil moisture -0.1"), plain).scenario.soil_moisture == pytest.approx(0.3)
    whole = apply(change_of("cover 40% heath + 60% stubble"), plain).scenario.cover
    assert whole == cover({"heath": 0.4, "stubble": 0.6})


def test_steps_follow_each_other_and_have_a_name(plain: Scenario) -> None:
    change = change_of("greener: 20% deciduous forest, albedo +0.05")
    made = apply(change, plain)
    assert change.name == "greener"
    assert made.scenario.cover.albedo == pytest.approx(
        0.05 + mixture({cover("short grass"): 0.8, cover("deciduous forest"): 0.2}).albedo
    )
    # two causes at once have no effect per unit of one of them
    assert made.area_fraction is None
    assert made.albedo_step is None


def test_roofs_count_by_their_area(plain: Scenario) -> None:
    town = with_setting(plain, "surface.cover", "open low buildings")
    ground = town.cover
    made = apply(change_of("roof albedo 0.65"), town)
    expected = ground.albedo + ground.built_fraction * (0.65 - ground.albedo)
    assert made.scenario.cover.albedo == pytest.approx(expected)
    assert made.albedo_step == pytest.approx(expected - ground.albedo)


def test_a_mixture_of_one_cover_is_that_cover(plain: Scenario) -> None:
    assert apply(change_of("30% short grass"), plain).scenario.cover == plain.cover
    assert apply(change_of("cover 100% short grass"), plain).scenario.cover == plain.cover
    assert apply(change_of("cover 30% short grass + 70% short grass"), plain).scenario.cover == plain.cover
    assert len(tiles(apply(change_of("30% short grass"), plain).scenario.cover, 0.5)) == 1


@pytest.mark.parametrize(
    ("words", "said"),
    [
        ("brighter", "is not understood"),
        ("albdo 0.2", "did you mean 'albedo'"),
        ("albedo +1", "albedo = 1.2 is not possible"),
        ("albedo 10%", "has no sign"),
        ("cover lava", "unknown land cover"),
        ("120% heath", "120% of the area is not possible"),
        ("soil moisture +0.9", "soil moisture 1.3 is not possible"),
        ("roof albedo 0.6", "has no roofs"),
        ("cover 60% heath + 30% stubble", r"sum to 0.9 \(0.6 \+ 0.3\)"),
        ("cover 60% heath + stubble", "is no part of a mixture"),
    ],
)
def test_what_cannot_be_changed_is_said(plain: Scenario, words: str, said: str) -> None:
    with pytest.raises(DaylayerError, match=said) as caught:
        apply(change_of(words), plain)
    assert f"--change '{words}'" in str(caught.value)


def test_no_words_are_no_change() -> None:
    with pytest.raises(ScenarioError, match="says no change"):
        change_of("cool roofs: ")


def test_a_file_names_covers_and_changes(tmp_path: Path) -> None:
    path = with_own(tmp_path)
    scenario = load(path)
    named, unnamed = changes_of(scenario)
    assert (named.name, unnamed.name) == ("meadow", "25% my meadow")
    own = apply(named, scenario).scenario.cover
    assert (own.name, own.albedo) == ("my meadow", 0.24)
    assert own.leaf_area == cover("tall grass").leaf_area
    assert apply(unnamed, scenario).scenario.cover.albedo == pytest.approx(0.75 * 0.2 + 0.25 * 0.24)
    # and the scenario written out says the same
    copy = tmp_path / "copy.toml"
    copy.write_text(write_toml(scenario, beside=copy), encoding="utf-8")
    again = load(copy)
    assert changes_of(again)[0].text == named.text
    assert apply(changes_of(again)[0], again).scenario.cover == own


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ('like = "tall grass"', 'like = "tal grass"', 'did you mean "tall grass"'),
        ('like = "tall grass"\n', "", r"like: missing"),
        ("albedo = 0.24", "albedo = 1.24", "outside 0 to 0.98"),
        ("albedo = 0.24", "albeto = 0.24", "did you mean 'albedo'"),
        ('"my meadow"]', '"short grass"]', "is built in"),
        ('make = "cover my meadow"', "maek = 1", "did you mean 'make'"),
        ('name = "meadow"\nmake = "cover my meadow"', 'name = "meadow"', "make: missing"),
    ],
)
def test_a_wrong_table_is_named(tmp_path: Path, old: str, new: str, said: str) -> None:
    path = with_own(tmp_path)
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(DaylayerError, match=said) as caught:
        changes_of(load(path))
    assert str(path) in str(caught.value)


def test_own_covers_in_a_mixture() -> None:
    meadow = cover("tall grass", albedo=0.24)
    found = resolve("50% my meadow + 50% my meadow", {"my meadow": meadow})
    assert found == meadow


def test_bundled_days_are_ten_fair_mornings() -> None:
    days = typical_days("all", {"surface": {"cover": "heath"}, "run": {"hours": 30.0}})
    assert len(days) == 10
    assert len(climates()) == 5
    for day in days:
        assert day.scenario is not None
        assert day.scenario.cover == cover("heath")
        assert day.scenario.profile.repairs == ()
        assert "invented" in day.scenario.site.name
        assert moistest(day.scenario.profile) < 0.95
        assert day.scenario.profile.height[-1] > 5000.0
    assert [day.name for day in typical_days("dry", {})] == ["dry-1", "dry-2"]
    with pytest.raises(ScenarioError, match="no bundled days of 'lunar'"):
        typical_days("lunar", {})


def test_days_of_a_folder_keep_count_of_what_is_left_out(tmp_path: Path) -> None:
    text = bundled("summer_plain").with_suffix(".csv").read_text(encoding="utf-8")
    for name, valid in [("a", "2026-07-14T11:30Z"), ("b", "2026-07-15T20:30Z"), ("c", "2026-01-15T11:30Z")]:
        (tmp_path / f"{name}.csv").write_text(text.replace("2026-07-14T11:30Z", valid), encoding="utf-8")
    (tmp_path / "d.csv").write_text("no table\n", encoding="utf-8")
    settings = {"site": {"time_zone": "Etc/GMT+6"}, "surface": {"cover": "heath"}}
    days = profile_days(tmp_path, settings, months=(6, 7, 8))
    assert [day.name for day in days if day.scenario is not None] == ["2026-07-14 a.csv"]
    reasons = {reason: count for reason, count, _ in left_out(days)}
    assert sum(reasons.values()) == 3
    assert any("month not asked for" in reason for reason in reasons)
    assert any("not of the night or morning" in reason for reason in reasons)
    assert any("d.csv" in reason for reason in reasons)
    everything = profile_days(tmp_path, settings)
    assert sum(day.scenario is not None for day in everything) == 2
    damp = text.replace("16.5,10.3", "16.5,15.9")
    assert damp != text
    (tmp_path / "a.csv").write_text(damp, encoding="utf-8")
    clear = profile_days(tmp_path, settings, months=(7,), clear_only=True)
    assert all(day.scenario is None for day in clear)
    assert any(re.match("not clear", day.problem) for day in clear)
    with pytest.raises(ScenarioError, match="holds one day only"):
        profile_days(tmp_path, {**settings, "weather": {"file": "w.csv"}})
    with pytest.raises(ScenarioError, match="no profiles there"):
        profile_days(tmp_path / "nowhere", settings)
