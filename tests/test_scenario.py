"""Scenario files and first-use flags: what is read, what is assumed, and that writing and reading undo each other."""

from __future__ import annotations

import re
import sys
from dataclasses import fields
from datetime import UTC, datetime
from pathlib import Path
from typing import Any
from zoneinfo import available_timezones

import numpy as np
import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from forcing.assumptions import wind_near
from forcing.errors import ProfileError, ScenarioError
from forcing.remarks import scenario_remarks
from forcing.scenario import (
    Scenario,
    bundled,
    bundled_names,
    from_flags,
    load,
    with_run,
    with_setting,
    with_step,
    write_toml,
)
from forcing.sounding import Profile
from forcing.zones import ABBREVIATIONS, check_zone, hours_from_sun

PROFILE = """pressure_hPa,height_m,temperature_C,dewpoint_C,wind_dir_deg,wind_speed_m_s
980,300,15,12,180,2
970,388,18,11,190,6
900,1035,16,7,200,9
850,1520,12,5,210,10
700,3090,0,-10,230,12
500,5680,-17,-30,250,18
"""
TOML = """title = "A test"
[site]
latitude = 40
longitude = -100.5
elevation = 300
time_zone = "Etc/GMT+6"
[profile]
file = "morning.csv"
valid = 2026-07-01T06:30:00-05:00
"""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "morning.csv").write_text(PROFILE, encoding="ascii")
    return tmp_path


def _load(folder: Path, text: str = "", *, base: str = TOML) -> Scenario:
    path = folder / "case.toml"
    path.write_text(base + text, encoding="utf-8")
    return load(path)


def _same_profile(first: Profile | None, second: Profile | None) -> bool:
    if first is None or second is None:
        return first is second
    return all(
        np.array_equal(getattr(first, one.name), getattr(second, one.name), equal_nan=True)
        if isinstance(getattr(first, one.name), np.ndarray | float)
        else getattr(first, one.name) == getattr(second, one.name)
        for one in fields(Profile)
    )


def _same(first: Scenario, second: Scenario) -> None:
    for name in ("profile", "later", "original", "later_original"):
        assert _same_profile(getattr(first, name), getattr(second, name)), name
    for name in ("title", "site", "cover", "soil_moisture", "run", "limits", "assumptions", "rebase", "settings"):
        assert getattr(first, name) == getattr(second, name), name
    assert first.weather.constants == second.weather.constants
    assert first.weather.defaults == second.weather.defaults
    tables = [(first.weather.series, second.weather.series)]
    assert (first.fluxes is None) == (second.fluxes is None)
    if first.fluxes is not None and second.fluxes is not None:
        tables.append((first.fluxes.series, second.fluxes.series))
    for one, other in tables:
        assert list(one) == list(other)
        for key, series in one.items():
            assert np.array_equal(series.posix, other[key].posix)
            assert np.array_equal(series.values, other[key].values)


def test_the_least_scenario(folder: Path) -> None:
    case = _load(folder)
    assert case.title == "A test"
    assert case.site.name == "A test"
    assert case.profile.valid == datetime(2026, 7, 1, 11, 30, tzinfo=UTC)
    assert case.profile is case.original
    assert case.profile.elevation == 300.0
    assert np.isnan(case.profile.latitude)  # nobody says where the balloon was released
    assert np.isnan(case.profile.longitude)
    release = next(one for one in case.assumptions if one.key == "profile.latitude")
    assert (release.source, release.value_text) == ("assumed", "the site's")
    assert (case.run.hours, case.run.output_minutes, case.run.entrainment) == (36.0, 60.0, "sheared")
    assert (case.run.flux_ratio, case.run.shear_factor, case.run.spin_up_factor) == (0.2, None, None)
    assert case.end - case.start == 36 * 3600
    assert case.limits is None
    assert case.fluxes is None
    assert case.later is None
    assert case.soil_moisture == 0.5
    assert case.cover.name == "short grass"


def test_everything_assumed_is_listed_with_a_reason(folder: Path) -> None:
    assumed = {one.key: one for one in _load(folder).assumptions if one.source == "assumed"}
    for key, stepped in (
        ("surface.soil_moisture", 0.25),
        ("weather.cloud_fraction", 0.25),
        ("weather.aerosol_optical_depth", 0.25),
        ("weather.divergence_per_s", 1e-5),
    ):
        assert assumed[key].stepped == stepped
    assert "0.05 K" in assumed["weather.ozone_cm"].why  # a step too small to rerun is told in words
    for key in ("surface.cover", "weather.wind_10m_m_s", "profile.later", "run.entrainment", "run.flux_ratio"):
        assert key in assumed
    wind = assumed["weather.pressure_gradient_wind_m_s"]
    # wind between 1000 and 2000 m above ground is 10 m/s from 210 degrees, within the spread of the levels there
    assert "profile's own wind" in wind.value_text
    speed, from_deg = wind_near(_load(folder).profile)
    assert speed == pytest.approx(10.0, abs=0.7)
    assert from_deg == pytest.approx(212.0, abs=5.0)
    assert wind.stepped == pytest.approx(speed + 2.0, abs=0.05)
    for one in assumed.values():
        assert one.name
        assert one.value_text
        assert one.why
        assert bool(one.step) == (one.stepped is not None)


def test_what_is_given_is_listed_as_given(folder: Path) -> None:
    case = _load(
        folder,
        '[surface]\ncover = "dry bare soil"\nsoil_moisture = 0.1\nalbedo = 0.3\n'
        "[weather]\ncloud_fraction = 0.5\npressure_gradient_wind_m_s = 7\n",
    )
    source = {one.key: one.source for one in case.assumptions}
    for key in (
        "surface.cover",
        "surface.soil_moisture",
        "weather.cloud_fraction",
        "weather.pressure_gradient_wind_m_s",
    ):
        assert source[key] == "given"
    assert source["weather.cloud_base_m"] == "assumed"
    assert source["weather.pressure_gradient_wind_from_deg"] == "assumed"
    assert case.cover.albedo == 0.3
    assert "albedo 0.3" in next(one.value_text for one in case.assumptions if one.key == "surface.cover")


def test_every_step_can_be_taken(folder: Path) -> None:
    case = _load(folder)
    stepped = [one for one in case.assumptions if one.stepped is not None]
    assert len(stepped) >= 10
    for one in stepped:
        changed = with_step(case, one)
        again = {other.key: other for other in changed.assumptions}[one.key]
        assert again.source == "given"
        assert changed.original is case.original  # the profile is not read again
        assert changed.settings != case.settings
    one = next(one for one in stepped if one.key == "surface.soil_moisture")
    assert with_step(case, one).soil_moisture == 0.25
    assert case.soil_moisture == 0.5
    unsteppable = next(one for one in case.assumptions if one.stepped is None)
    with pytest.raises(ScenarioError, match="no step"):
        with_step(case, unsteppable)


def test_a_profile_without_wind_gets_an_assumed_one(folder: Path) -> None:
    rows = [",".join(line.split(",")[:4]) for line in PROFILE.splitlines()]
    (folder / "morning.csv").write_text("\n".join(rows) + "\n", encoding="ascii")
    case = _load(folder)
    wind = next(one for one in case.assumptions if one.key == "weather.pressure_gradient_wind_m_s")
    assert wind.source == "assumed"
    assert float(case.weather.sample("pressure_gradient_wind_m_s", np.array([case.start]))[0]) == 5.0
    assert not case.weather.given("pressure_gradient_wind_m_s")


def test_rebase_over_100_m_by_the_usual_rule_only(folder: Path) -> None:
    far = TOML.replace("elevation = 300", "elevation = 450")
    case = _load(folder, base=far)
    assert case.rebase == "sea-level"
    assert (case.original.elevation, case.profile.elevation) == (300.0, 450.0)
    note = next(one for one in case.assumptions if one.key == "profile.rebase")
    assert (note.source, note.stepped) == ("assumed", "ground")
    other = with_step(case, note)
    assert other.rebase == "ground"
    assert other.profile.theta[0] != case.profile.theta[0]
    near = _load(folder, base=TOML.replace("elevation = 300", "elevation = 390"))
    assert near.rebase == ""
    asked = _load(
        folder, 'elevation = 300\nrebase = "ground"\n', base=TOML.replace("elevation = 300", "elevation = 390")
    )
    assert asked.rebase == "ground"


def test_position_of_the_release(folder: Path) -> None:
    case = _load(folder, "latitude = 41\nlongitude = -101\nelevation = 310\n")
    assert (case.original.latitude, case.original.longitude) == (41.0, -101.0)
    assert (case.site.latitude, case.site.longitude) == (40.0, -100.5)


def test_site_from_the_file(folder: Path) -> None:
    told = "# valid: 2026-07-01T11:30Z\n# latitude: 40.5\n# longitude: -99\n# elevation_m: 305\n# station: T1\n"
    (folder / "morning.csv").write_text(told + PROFILE, encoding="ascii")
    case = _load(folder, base='[site]\ntime_zone = "UTC"\n[profile]\nfile = "morning.csv"\n')
    assert (case.site.latitude, case.site.longitude, case.site.elevation) == (40.5, -99.0, 305.0)
    assert next(one for one in case.assumptions if one.name == "site").source == "assumed"
    flags = from_flags(profile=folder / "morning.csv", zone="UTC")
    assert flags.site == type(flags.site)("T1", 40.5, -99.0, 305.0, "UTC")
    assert next(one for one in flags.assumptions if one.name == "site").source == "assumed"


def _flags(folder: Path, name: str = "morning.csv", **changes: Any) -> Scenario:
    usual = {"latitude": 40.0, "longitude": -100.5, "zone": "Etc/GMT+6", "valid": "2026-07-01T11:30Z"}
    return from_flags(profile=folder / name, **{**usual, **changes})


def test_the_site_stands_on_the_ground_of_the_prepared_profile(folder: Path) -> None:
    rows = [line.split(",") for line in PROFILE.splitlines()]
    feet = [rows[0], *([row[0], f"{float(row[1]) / 0.3048:.0f}", *row[2:]] for row in rows[1:])]
    aloft = [rows[0], *([row[0], "" if n < 2 else row[1], *row[2:]] for n, row in enumerate(rows[1:]))]
    for name, table in (("feet.csv", feet), ("aloft.csv", aloft)):
        (folder / name).write_text("\n".join(map(",".join, table)) + "\n", encoding="ascii")
        case = _flags(folder, name)
        # 300 m is the height of the lowest level; over 900 hPa at 1035 m the two lowest are integrated
        assert case.site.elevation == pytest.approx(300.0, abs=12.0)
        assert case.site.elevation == case.profile.elevation
        assert case.profile is case.original
        assert case.rebase == ""
        site = next(one for one in case.assumptions if one.name == "site")
        assert (site.source, site.key) == ("assumed", "site.elevation")
        assert site.value_text == f"elevation {round(case.site.elevation, 1):g}"


def test_an_assumed_place_is_written_as_a_comment(folder: Path) -> None:
    case = _flags(folder)
    written = write_toml(case, beside=folder / "kept.toml").splitlines()
    assert "# elevation = 300.0  # m above sea level; assumed: taken from the release site" in written
    assert "latitude = 40.0  # degrees north" in written
    assert not any("not given; not given" in line for line in written)
    (folder / "kept.toml").write_text("\n".join(written), encoding="utf-8")
    _same(load(folder / "kept.toml"), case)


def test_no_height_anywhere_asks_for_the_elevation(folder: Path) -> None:
    bare = [",".join(cell for n, cell in enumerate(line.split(",")) if n != 1) for line in PROFILE.splitlines()]
    (folder / "bare.csv").write_text("\n".join(bare) + "\n", encoding="ascii")
    with pytest.raises(ScenarioError, match="add --elevation"):
        _flags(folder, "bare.csv")
    (folder / "morning.csv").write_text("\n".join(bare) + "\n", encoding="ascii")
    with pytest.raises(ScenarioError, match=r"\[site\] elevation: missing"):
        _load(folder, base=TOML.replace("elevation = 300\n", ""))
    assert _flags(folder, "bare.csv", elevation=310.0).profile.elevation == 310.0


@pytest.mark.parametrize(
    ("zone", "meant"),
    [
        ("CST", "America/Chicago"),
        ("chicago", "America/Chicago"),
        ("Europe/Viena", "Europe/Vienna"),
        ("UTC-6", "Etc/GMT+6"),
        ("+02:00", "Etc/GMT-2"),
        ("nowhere at all", "America/Chicago"),
    ],
)
def test_a_wrong_zone_is_answered_with_an_iana_name(zone: str, meant: str) -> None:
    with pytest.raises(ScenarioError, match=f"(?i){re.escape(zone)}.*{re.escape(meant)}"):
        check_zone(zone, place="--zone")


def test_names_suggested_for_abbreviations_are_zones() -> None:
    assert set(ABBREVIATIONS.values()) <= available_timezones()
    assert not {name.upper() for name in ABBREVIATIONS} & available_timezones()


def test_a_place_far_from_its_zone_is_remarked(folder: Path) -> None:
    assert scenario_remarks(_flags(folder, zone="America/Chicago")) == ()
    (said,) = scenario_remarks(_flags(folder, longitude=93.4, zone="America/Chicago"))
    # 93.4 / 15 h ahead of UTC by the sun, 5 h behind by the clock in July
    assert "11.2 h behind the sun at longitude 93.4" in said
    assert "America/Chicago" in said
    # beyond the date line the clock is a day ahead, not 24 h wrong: 157.4 W is 10.5 h behind UTC, the clock 14 h ahead
    when = datetime(2026, 7, 1, tzinfo=UTC)
    assert hours_from_sun("Pacific/Kiritimati", when, -157.4) == pytest.approx(14.0 - 24.0 + 157.4 / 15.0)


def test_units_read_otherwise_and_doubtful_numbers_are_remarked(folder: Path) -> None:
    rows = [line.split(",") for line in PROFILE.splitlines()]
    kelvin = [rows[0], *([*row[:2], f"{float(row[2]) + 273.15:.2f}", *row[3:]] for row in rows[1:])]
    fast = [rows[0], *([*row[:5], f"{7.0 * float(row[5]):.0f}"] for row in rows[1:])]
    for name, table in (("kelvin.csv", kelvin), ("fast.csv", fast)):
        (folder / name).write_text("\n".join(map(",".join, table)) + "\n", encoding="ascii")
    assert scenario_remarks(_flags(folder, "kelvin.csv")) == (
        "kelvin.csv: units repaired: temperature unit: values named C were kelvins: read as K",
    )
    (said,) = scenario_remarks(_flags(folder, "fast.csv"))
    assert said.startswith("fast.csv: wind unit: 126 m/s")
    assert "knots" in said


@pytest.mark.parametrize("name", bundled_names())
def test_nothing_is_remarked_on_bundled_inputs(name: str) -> None:
    assert scenario_remarks(load(bundled(name))) == ()


def test_a_profile_in_place_of_a_scenario_is_recognised(folder: Path) -> None:
    with pytest.raises(ScenarioError, match=r"looks like a profile, not a scenario; use --profile .*morning.csv"):
        load(folder / "morning.csv")
    (folder / "broken.toml").write_text("pressure_gradient_wind_m_s = five\n", encoding="ascii")
    with pytest.raises(ScenarioError, match="not valid TOML"):
        load(folder / "broken.toml")


def test_a_mixture_of_covers(folder: Path) -> None:
    case = _load(folder, '[surface]\ncover = { "short grass" = 0.25, stubble = 0.75 }\n')
    assert [share for share, _ in case.cover.parts] == [0.25, 0.75]
    (folder / "again.toml").write_text(write_toml(case), encoding="utf-8")
    _same(load(folder / "again.toml"), case)


def test_limits(folder: Path) -> None:
    case = _load(
        folder,
        '[limits]\nauthority = "me"\ndated = 2026-05-01\nwind_height_m = 2\nwind_max_m_s = 4\n'
        'ventilation = [{ name = "a", from_m2_s = 0 }, { name = "b", from_kt_ft = 10000 }]\n',
    )
    assert case.limits is not None
    assert (case.limits.authority, case.limits.dated, case.limits.wind_min_m_s) == ("me", "2026-05-01", None)
    # 10000 kt ft x 0.156803 m2/s
    assert [one.from_m2_s for one in case.limits.ventilation] == pytest.approx([0.0, 1568.03], rel=1e-5)


def test_weather_file_beside_constants(folder: Path) -> None:
    rows = "\n".join(f"2026-07-01T{hour:02d}:00Z,0.{hour % 10}" for hour in range(11, 20))
    (folder / "weather.csv").write_text(f"time,cloud_fraction\n{rows}\n", encoding="ascii")
    case = _load(folder, '[weather]\nfile = "weather.csv"\naerosol_optical_depth = 0.2\n[run]\nhours = 6\n')
    assert case.weather.given("cloud_fraction")
    assert case.weather.sample("aerosol_optical_depth", np.array([case.start])) == pytest.approx([0.2])
    with pytest.raises(ValueError, match="shorten the run"):
        with_run(case, hours=24.0)
    assert with_run(case, hours=3.0, entrainment="buoyant").run.hours == 3.0
    stepped = next(one for one in case.assumptions if one.key == "surface.soil_moisture")
    assert with_step(case, stepped).weather.series == case.weather.series


def test_bundled_scenarios_are_found_inside_a_wheel(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    package = tmp_path / "slab"
    (package / "scenarios").mkdir(parents=True)
    (package / "__init__.py").write_text("raise RuntimeError('found, never imported')\n", encoding="ascii")
    (package / "scenarios" / "one.toml").write_text("", encoding="ascii")
    monkeypatch.delitem(sys.modules, "slab", raising=False)
    monkeypatch.syspath_prepend(str(tmp_path))
    assert bundled_names() == ("one",)
    assert bundled("one") == package / "scenarios" / "one.toml"


def test_with_setting_takes_back_a_value(folder: Path) -> None:
    case = _load(folder, "[weather]\ncloud_fraction = 0.5\n")
    assert not with_setting(case, "weather.cloud_fraction", None).weather.given("cloud_fraction")
    assert with_setting(case, "site.elevation", 330.0).site.elevation == 330.0


def test_flags_list_precisely_what_is_missing(folder: Path) -> None:
    with pytest.raises(ScenarioError) as caught:
        from_flags(profile=folder / "morning.csv", latitude=40.0)
    text = str(caught.value)
    for flag in ("--longitude", "--zone", "--valid"):
        assert flag in text
    # the table says its lowest height above sea level
    for flag in ("--latitude", "--elevation"):
        assert flag not in text


def test_flags(folder: Path) -> None:
    case = from_flags(
        profile=folder / "morning.csv",
        latitude=40.0,
        longitude=-100.5,
        elevation=300.0,
        zone="Etc/GMT+6",
        cover="dry bare soil",
        soil_moisture=0.3,
        cloud=0.2,
        wind=6.0,
        hours=12.0,
        valid="2026-07-01T11:30Z",
    )
    assert case.cover.name == "dry bare soil"
    assert case.run.hours == 12.0
    assert case.weather.sample("pressure_gradient_wind_m_s", np.array([case.start])) == pytest.approx([6.0])
    path = folder / "kept" / "mine.toml"
    path.parent.mkdir()
    path.write_text(write_toml(case, beside=path), encoding="utf-8")
    assert 'file = "../morning.csv"' in path.read_text(encoding="utf-8")
    _same(load(path), case)


@pytest.mark.parametrize(
    ("changes", "flag"),
    [
        ({"latitude": 95.0}, "--latitude"),
        ({"zone": "Nowhere/Else"}, "--zone"),
        ({"cover": "lava"}, "--cover"),
        ({"soil_moisture": 1.5}, "--soil-moisture"),
        ({"cloud": 2.0}, "--cloud"),
        ({"wind": -1.0}, "--wind"),
        ({"hours": 0.0}, "--hours"),
        ({"valid": "2026-07-01T11:30"}, "--valid"),
        ({"profile": "none.csv"}, "none.csv"),
    ],
)
def test_a_wrong_flag_is_named(folder: Path, changes: dict[str, object], flag: str) -> None:
    usual: dict[str, object] = {
        "profile": folder / "morning.csv",
        "latitude": 40.0,
        "longitude": -100.0,
        "elevation": 300.0,
        "zone": "UTC",
        "valid": "2026-07-01T11:30Z",
    }
    with pytest.raises(ValueError) as caught:
        from_flags(**{**usual, **changes})  # type: ignore[arg-type]
    assert flag in str(caught.value)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("name", bundled_names())
def test_bundled_scenarios_load_and_write_back(name: str, tmp_path: Path) -> None:
    case = load(bundled(name))
    assert "invented" in case.title
    assert "invented" in case.site.name
    assert case.profile.wind_known
    assert case.profile.humidity_known
    assert case.profile.height[-1] > 5000.0
    path = tmp_path / "written.toml"
    path.write_text(write_toml(case, beside=path), encoding="utf-8")
    _same(load(path), case)


def test_bundled_scenarios_cover_the_formats_and_climates() -> None:
    cases = [load(bundled(name)) for name in bundled_names()]
    assert bundled_names()[0] == "summer_plain"
    assert {case.profile.format for case in cases} >= {"csv", "temp", "igra"}
    assert any(case.fluxes is not None for case in cases)
    assert any(case.weather.series for case in cases)
    assert any(case.later is not None for case in cases)
    assert any(case.site.latitude < 0 for case in cases)
    assert any(case.site.elevation > 1500 for case in cases)
    assert any(case.rebase for case in cases)
    limits = [case.limits for case in cases if case.limits is not None]
    assert limits
    assert all("invented" in one.authority for one in limits)


def test_bundled_profiles_are_hydrostatic() -> None:
    # no repair of heights is made beyond integrating those that a format leaves out, and no level is doubtful but
    # the warm ground of the afternoon profile
    for name in bundled_names():
        case = load(bundled(name))
        assert {flag.name for flag in case.original.flags} == set()
        assert {one.name for one in case.original.repairs} <= {
            "height integrated",
            "wind-only level placed",
            "wind interpolated",
        }


def test_no_such_bundled_scenario() -> None:
    with pytest.raises(ScenarioError, match="did you mean 'summer_plain'"):
        bundled("summer_plan")


def test_later_profile_must_be_later(folder: Path) -> None:
    with pytest.raises(ScenarioError, match="not after"):
        _load(folder, 'later = "morning.csv"\nlater_valid = "2026-07-01T11:30Z"\n')


def test_a_bad_profile_keeps_its_own_error(folder: Path) -> None:
    (folder / "morning.csv").write_text("pressure_hPa,temperature_C\n980,15\n", encoding="ascii")
    with pytest.raises(ProfileError):
        _load(folder)


@settings(max_examples=40, deadline=None, phases=(Phase.explicit, Phase.reuse, Phase.generate))
@given(
    title=st.text(st.characters(exclude_categories=("Cs",), exclude_characters="\x00"), min_size=1, max_size=30).filter(
        lambda text: bool(text.strip())
    ),
    soil=st.floats(0.0, 1.0),
    cloud=st.none() | st.floats(0.0, 1.0),
    divergence=st.none() | st.floats(-1e-5, 1e-5),
    hours=st.floats(0.5, 96.0),
    elevation=st.floats(100.0, 900.0),
)
def test_any_scenario_is_written_and_read_back(
    tmp_path_factory: pytest.TempPathFactory,
    title: str,
    soil: float,
    cloud: float | None,
    divergence: float | None,
    hours: float,
    elevation: float,
) -> None:
    folder = tmp_path_factory.mktemp("round")
    (folder / "morning.csv").write_text(PROFILE, encoding="ascii")
    case = _load(folder)
    for key, value in (
        ("surface.soil_moisture", soil),
        ("weather.cloud_fraction", cloud),
        ("weather.divergence_per_s", divergence),
        ("run.hours", hours),
        ("site.elevation", elevation),
    ):
        case = with_setting(case, key, value)
    changed = from_flags(
        profile=folder / "morning.csv", latitude=1.0, longitude=2.0, zone="UTC", valid="2026-07-01T11:30Z", title=title
    )
    for one in (case, changed):
        path = folder / "written.toml"
        path.write_text(write_toml(one, beside=path), encoding="utf-8", newline="\n")
        _same(load(path), one)
