"""Making a column ready: every repair by name and number, every flag, re-basing, properties."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone

import numpy as np
import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st
from profiles import DEWPOINT, PRESSURE, TEMPERATURE, VALID, as_sounding, sounding

from forcing.air import temperature as temperature_of
from forcing.errors import ProfileError
from forcing.profile import Profile, interpolate, precipitable_water, prepare, rebase

# heights of the test sounding, m, by an independent library: MetPy 1.7.1, thickness_hydrostatic with the mixing ratio of
# the dew points, added to 310 m
HEIGHTS = (310.0, 572.5, 1029.5, 1506.6, 2005.2, 3080.6, 4291.6, 5680.7)
NAN = float("nan")


def counts(profile: Profile) -> dict[str, int]:
    return {repair.name: repair.count for repair in profile.repairs}


def flags(profile: Profile) -> set[str]:
    return {flag.name for flag in profile.flags}


def swap(values: tuple[float, ...], **changes: float) -> tuple[float, ...]:
    """Change single values: swap(values, at3=5.0)."""
    out = list(values)
    for key, value in changes.items():
        out[int(key[2:])] = value
    return tuple(out)


def test_heights_are_integrated() -> None:
    profile = prepare(sounding())
    assert counts(profile) == {"height integrated": 8}
    assert profile.elevation == 310.0
    np.testing.assert_allclose(profile.height + 310.0, HEIGHTS, atol=0.5)
    assert profile.height[0] == 0.0
    assert not profile.flags
    assert profile.valid == VALID
    assert (profile.latitude, profile.longitude) == (47.5, 15.25)
    np.testing.assert_allclose(profile.temperature, np.array(TEMPERATURE) + 273.15)
    np.testing.assert_allclose(profile.dewpoint, np.array(DEWPOINT) + 273.15, atol=1e-6)
    np.testing.assert_allclose(np.hypot(profile.u, profile.v), 2.0)
    assert profile.v[0] > 0.0  # wind from 200 degrees blows toward the north
    assert profile.u[0] > 0.0
    assert profile.surface_pressure == 98_000.0


def test_input_is_left_alone() -> None:
    raw = sounding(dewpoint=swap(DEWPOINT, at0=12.3))
    before = raw.dewpoint.copy()
    prepare(raw)
    np.testing.assert_array_equal(raw.dewpoint, before)


@pytest.mark.parametrize(
    ("factor", "words"), [(100.0, "were Pa"), (0.01, "were hPa"), (0.1, "were kPa"), (0.001, "were kPa")]
)
def test_pressure_units(factor: float, words: str) -> None:
    profile = prepare(sounding(pressure=np.array(PRESSURE) * factor))
    np.testing.assert_allclose(profile.pressure, np.array(PRESSURE) * 100.0)
    (done,) = [repair for repair in profile.repairs if repair.name == "pressure unit"]
    assert done.count == 8
    assert words in done.detail


@pytest.mark.parametrize("shift", [273.15, -273.15])
def test_temperature_units(shift: float) -> None:
    profile = prepare(sounding(temperature=np.array(TEMPERATURE) + shift, dewpoint=np.array(DEWPOINT) + shift))
    np.testing.assert_allclose(profile.temperature, np.array(TEMPERATURE) + 273.15)
    assert counts(profile)["temperature unit"] == 8
    assert counts(profile)["dew point unit"] == 8


@pytest.mark.parametrize(("factor", "words"), [(1 / 0.3048, "feet"), (0.001, "km")])
def test_height_units(factor: float, words: str) -> None:
    profile = prepare(sounding(height=np.array(HEIGHTS) * factor))
    np.testing.assert_allclose(profile.height + profile.elevation, HEIGHTS, atol=1e-6)
    (done,) = [repair for repair in profile.repairs if repair.name == "height unit"]
    assert words in done.detail


def test_heights_above_ground_named_above_sea_level() -> None:
    profile = prepare(sounding(height=np.array(HEIGHTS) - 310.0))
    assert counts(profile)["height above ground"] == 8
    assert profile.elevation == 310.0
    np.testing.assert_allclose(profile.height, np.array(HEIGHTS) - 310.0)


def test_heights_above_ground_by_name() -> None:
    heights = np.array(HEIGHTS) - 310.0 + 12.0
    profile = prepare(sounding(height=heights, heights_above_ground=True))
    assert profile.elevation == 310.0
    assert counts(profile)["ground level added"] == 1
    np.testing.assert_allclose(profile.height, [0.0, *heights])
    assert profile.theta[0] == profile.theta[1]
    assert profile.pressure[0] - profile.pressure[1] == pytest.approx(12.0 * 1.196 * 9.81, rel=0.01)


def test_heights_above_ground_without_elevation() -> None:
    profile = prepare(
        sounding(height=np.array(HEIGHTS) - 310.0, heights_above_ground=True, elevation=None),
    )
    assert counts(profile)["elevation from pressure"] == 1
    assert profile.elevation == pytest.approx(280.5, abs=0.1)  # 44330.8 m (1 - (980/1013.25)^0.190263), ICAO 7488


def test_bad_height_is_replaced() -> None:
    profile = prepare(sounding(height=swap(HEIGHTS, at3=1907.4)))
    assert counts(profile)["height replaced"] == 1
    assert profile.height[3] + 310.0 == pytest.approx(HEIGHTS[3], abs=5.0)


def test_wrong_first_height_does_not_move_the_column() -> None:
    """Some archive stations have a first height wrong by over 1000 m."""
    profile = prepare(sounding(height=swap(HEIGHTS, at0=1510.0), elevation=None))
    assert counts(profile)["height replaced"] == 1
    assert profile.elevation == pytest.approx(310.0, abs=4.0)


def test_heights_that_mostly_disagree_are_all_integrated() -> None:
    wild = (310.0, 900.0, 1030.0, 2500.0, 2000.0, 4500.0, 4000.0, 9000.0)
    profile = prepare(sounding(height=wild))
    assert counts(profile)["height replaced"] >= 4
    assert "heights against hydrostatic" in flags(profile)
    np.testing.assert_allclose(profile.height + profile.elevation, HEIGHTS, atol=40.0)


def test_given_elevation_that_disagrees_is_flagged() -> None:
    profile = prepare(sounding(height=HEIGHTS, elevation=None, surface=0), elevation=500.0)
    assert "elevation against heights" in flags(profile)
    assert profile.elevation == 310.0


def test_height_against_pressure_is_flagged() -> None:
    assert "height against pressure" in flags(prepare(sounding(elevation=1500.0)))


def test_reversed_profile() -> None:
    down = [np.array(values)[::-1] for values in (PRESSURE, TEMPERATURE, DEWPOINT, HEIGHTS)]
    profile = prepare(sounding(*down))
    assert counts(profile) == {"reversed order": 8}
    np.testing.assert_allclose(profile.height + 310.0, HEIGHTS)


def test_zigzag_level_is_dropped() -> None:
    profile = prepare(sounding(pressure=swap(PRESSURE, at3=990.0)))
    assert counts(profile)["level out of order"] == 1
    assert profile.pressure.size == 7


def test_spike_to_low_pressure_costs_one_level() -> None:
    assert counts(prepare(sounding(pressure=swap(PRESSURE, at2=400.0))))["level out of order"] == 1


def test_unordered_pressure_is_refused() -> None:
    mixed = (500.0, 980.0, 600.0, 950.0, 700.0, 990.0, 400.0, 995.0)
    with pytest.raises(ProfileError, match=r"field.csv, line \d+: pressure .* does not fall.*; sort"):
        prepare(sounding(pressure=mixed))


def test_duplicates_are_merged() -> None:
    profile = prepare(sounding(pressure=swap(PRESSURE, at2=950.0), temperature=swap(TEMPERATURE, at1=NAN)))
    assert counts(profile)["duplicate level"] == 1
    assert profile.pressure.size == 7
    assert profile.temperature[1] == pytest.approx(13.0 + 273.15)


def test_dew_point_above_temperature() -> None:
    slight = prepare(sounding(dewpoint=swap(DEWPOINT, at0=12.4)))
    assert counts(slight)["dew point above temperature"] == 1
    assert slight.dewpoint[0] == pytest.approx(12.0 + 273.15, abs=1e-6)
    gross = prepare(sounding(dewpoint=swap(DEWPOINT, at3=14.0)))
    assert counts(gross)["dew point refused"] == 1
    assert counts(gross)["humidity interpolated"] == 1
    assert gross.dewpoint[3] < gross.temperature[3]


def test_missing_humidity_rules() -> None:
    profile = prepare(sounding(dewpoint=swap(DEWPOINT, at0=NAN, at2=NAN, at6=NAN, at7=NAN)))
    assert {name: n for name, n in counts(profile).items() if name.startswith("humidity")} == {
        "humidity interpolated": 1,
        "humidity at the ground": 1,
        "humidity aloft": 2,
    }
    assert profile.humidity[0] == pytest.approx(profile.humidity[1])
    assert profile.humidity_known
    # halfway in ln p between 8 C at 950 and 3 C at 850 hPa
    share = np.log(950 / 900) / np.log(950 / 850)
    assert profile.dewpoint[2] - 273.15 == pytest.approx(8.0 - 5.0 * share, abs=1e-6)
    assert profile.temperature[6] - profile.dewpoint[6] == pytest.approx(13.0, abs=1e-6)
    assert profile.humidity[7] <= profile.humidity[5]


def test_no_humidity_at_all() -> None:
    profile = prepare(sounding(dewpoint=[NAN] * 8))
    assert not profile.humidity_known
    assert (profile.humidity == 0.0).all()
    assert np.isnan(profile.dewpoint).all()


def test_wind_rules() -> None:
    speed = (NAN, 4.0, NAN, 8.0, 8.0, 8.0, 8.0, NAN)
    profile = prepare(sounding(wind_speed=speed))
    assert counts(profile)["wind interpolated"] == 1
    assert counts(profile)["wind held"] == 2
    size = np.hypot(profile.u, profile.v)
    assert size[0] == pytest.approx(4.0)
    assert 4.0 < size[2] < 8.0
    calm = prepare(sounding(wind_speed=[NAN] * 8))
    assert not calm.wind_known
    assert (calm.u == 0.0).all()
    no_direction = prepare(sounding(wind_speed=[0.0] * 8, wind_from=[NAN] * 8))
    assert no_direction.wind_known


def test_wind_only_level_is_placed_on_the_straight_line() -> None:
    profile = prepare(sounding(temperature=swap(TEMPERATURE, at4=NAN), height=swap(HEIGHTS, at4=NAN)))
    assert counts(profile)["wind-only level placed"] == 1
    share = (profile.height[4] - profile.height[3]) / (profile.height[5] - profile.height[3])
    assert profile.theta[4] == pytest.approx(profile.theta[3] + share * (profile.theta[5] - profile.theta[3]))
    assert profile.height[4] + 310.0 == pytest.approx(HEIGHTS[4], abs=10.0)


def test_marked_ground() -> None:
    profile = prepare(sounding(surface=1, elevation=573.0))
    assert counts(profile)["level below ground"] == 1
    assert profile.pressure[0] == 95_000.0
    warm = prepare(sounding(surface=0, temperature=swap(TEMPERATURE, at0=NAN)))
    assert counts(warm)["ground temperature carried down"] == 1
    assert warm.theta[0] == pytest.approx(warm.theta[1])


def test_surface_level_missing() -> None:
    profile = prepare(sounding(height=HEIGHTS), elevation=200.0)
    assert counts(profile)["ground level added"] == 1
    assert "surface level missing" in flags(profile)
    assert profile.elevation == 200.0
    assert profile.height[1] == pytest.approx(110.0)
    assert profile.theta[0] == profile.theta[1]
    with pytest.raises(ProfileError, match=r"field.csv: lowest level at 310 m is 1310 m above the ground"):
        prepare(sounding(height=HEIGHTS), elevation=-1000.0)


def test_levels_below_ground() -> None:
    profile = prepare(sounding(height=HEIGHTS), elevation=800.0)
    assert counts(profile)["level below ground"] == 2
    assert "levels below ground" in flags(profile)
    assert profile.elevation == 800.0
    assert profile.height.size == 7
    assert profile.height[1] == pytest.approx(HEIGHTS[2] - 800.0)
    with pytest.raises(ProfileError, match="below the ground at 9000 m"):
        prepare(sounding(height=HEIGHTS), elevation=9000.0)


def test_superadiabatic_surface_layer_is_kept_and_flagged() -> None:
    profile = prepare(sounding(temperature=swap(TEMPERATURE, at0=22.0)))
    assert "superadiabatic surface layer" in flags(profile)
    assert "surface temperature" not in flags(profile)
    assert profile.temperature[0] == pytest.approx(295.15)
    assert "surface temperature" in flags(prepare(sounding(temperature=swap(TEMPERATURE, at0=40.0))))


def test_theta_drop_aloft_is_flagged() -> None:
    # Slonaker et al. 1996: a fall of potential temperature over 1 K away from the surface
    profile = prepare(sounding(temperature=swap(TEMPERATURE, at5=-8.5)))
    (flag,) = profile.flags
    assert flag.name == "potential temperature drop"
    assert flag.level_index == 5
    assert flag.height_m == profile.height[5]


def test_knots_are_suspected() -> None:
    assert "wind unit" in flags(prepare(sounding(wind_speed=[120.0] * 8)))


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"temperature": swap(TEMPERATURE, at2=-9999.0)}, "line 4: temperature -9999 C is outside"),
        ({"pressure": swap(PRESSURE, at7=0.0)}, "line 9: pressure 0 hPa is outside"),
        ({"wind_speed": [200.0] * 8}, "line 2: wind speed 200 m/s is outside"),
        ({"wind_from": [370.0] * 8}, "line 2: wind direction 370 degrees"),
        ({"height": swap(HEIGHTS, at1=99999.0)}, "line 3: height 99999 m"),
        ({"dewpoint": swap(DEWPOINT, at1=999.0)}, "line 3: dew point 999 C"),
        ({"dewpoint": [75.0] * 8}, "relative humidity in percent"),
        ({"temperature": [12.0, 11.0] + [NAN] * 6}, "2 usable levels"),
        ({"temperature": [12.0, 11.0, 10.0] + [NAN] * 5, "pressure": [980, 970, 960, 955, 950, 945, 940, 935]}, "ends"),
        ({"pressure": [NAN] * 8}, "no level has a pressure"),
    ],
)
def test_refused(change: dict[str, object], words: str) -> None:
    with pytest.raises(ProfileError) as error:
        prepare(sounding(**change))  # type: ignore[arg-type]
    assert words in str(error.value)
    assert "field.csv" in str(error.value)
    assert "; " in str(error.value)


def test_times() -> None:
    bare = replace(sounding(), valid=None)
    with pytest.raises(ProfileError, match="when the balloon was released"):
        prepare(bare)
    with pytest.raises(ProfileError, match="no offset"):
        prepare(bare, valid=datetime(2026, 7, 1))  # noqa: DTZ001
    local = datetime(2026, 7, 1, 6, tzinfo=timezone(timedelta(hours=2)))
    assert prepare(bare, valid=local).valid == datetime(2026, 7, 1, 4, tzinfo=UTC)
    assert prepare(bare, utc_default=local).valid.utcoffset() == timedelta(0)
    assert prepare(sounding(), utc_default=local).valid == VALID


def test_rebase_by_sea_level() -> None:
    profile = prepare(sounding(height=HEIGHTS))
    up = rebase(profile, 1200.0, "sea-level")
    assert up.elevation == 1200.0
    assert up.height[0] == 0.0
    np.testing.assert_allclose(up.height[1:] + 1200.0, HEIGHTS[3:])
    np.testing.assert_allclose(up.theta[1:], profile.theta[3:])
    low, high = profile.theta[2], profile.theta[3]
    assert low < up.theta[0] < high
    down = rebase(profile, 100.0, "sea-level")
    assert down.height[1] == pytest.approx(210.0)
    assert down.theta[0] == profile.theta[0]
    # 12 C and 9 C dew point at 980 hPa, 210 m of it: dp/p = g dz / (R Tv), Tv 286.4 K with the mean 1 K warmer
    assert down.pressure[0] == pytest.approx(98_000.0 * np.exp(9.80665 * 210.0 / (287.05 * 287.4)), rel=1e-4)
    assert "re-based" in counts(down)


def test_rebase_by_ground() -> None:
    profile = prepare(sounding(height=HEIGHTS))
    for elevation in (100.0, 1200.0):
        moved = rebase(profile, elevation, "ground")
        np.testing.assert_array_equal(moved.height, profile.height)
        np.testing.assert_array_equal(moved.theta, profile.theta)
        same = rebase(profile, elevation, "sea-level")
        assert moved.pressure[0] == pytest.approx(same.pressure[0])
    high = rebase(profile, 3000.0, "ground")
    assert "humidity capped" in counts(high)
    assert (high.dewpoint <= high.temperature + 1e-6).all()
    with pytest.raises(ProfileError, match="unknown re-basing rule"):
        rebase(profile, 500.0, "both")  # type: ignore[arg-type]
    with pytest.raises(ProfileError, match="reaches higher"):
        rebase(profile, 5500.0, "ground")
    assert rebase(profile, 310.0, "ground") is profile


def test_interpolate() -> None:
    profile = prepare(sounding(height=HEIGHTS))
    column = interpolate(profile, np.array([-1.0, 0.0, 0.5 * profile.height[1], 1e5]))
    assert np.isnan(column.theta[[0, 3]]).all()
    assert column.theta[1] == profile.theta[0]
    assert column.theta[2] == pytest.approx(profile.theta[:2].mean(), rel=1e-6)
    assert column.pressure[2] == pytest.approx(np.sqrt(98_000.0 * 95_000.0))


def test_precipitable_water() -> None:
    # 1 % of vapour by mass through 980 to 500 hPa: 0.01 * 48000 / 9.80665 kg m-2
    profile = replace(prepare(sounding()), humidity=np.full(8, 0.01))
    assert precipitable_water(profile) == pytest.approx(48.946, abs=1e-3)


layer = st.tuples(st.floats(5.0, 60.0), st.floats(-9.0, 6.0), st.floats(0.0, 25.0), st.floats(0.0, 40.0))


# without shrinking: a failing column is readable as it is, and shrinking one takes minutes
@settings(max_examples=60, deadline=None, phases=[Phase.explicit, Phase.reuse, Phase.generate])
@given(st.lists(layer, min_size=9, max_size=25), st.floats(5.0, 30.0), st.integers(0, 2**30))
def test_any_column_comes_out_ready(layers: list[tuple[float, ...]], start: float, seed: int) -> None:
    """Monotonic, without NaN, under saturation; and preparing the result changes nothing."""
    steps, lapse, depression, speed = (np.array(column) for column in zip(*layers, strict=True))
    pressure = 1000.0 - np.cumsum(steps) * 900.0 / max(900.0, float(steps.sum()))
    warm = np.maximum(start + np.cumsum(lapse * steps / 100.0), -80.0)
    random = np.random.default_rng(seed)
    holes = random.random((3, steps.size)) < 0.25
    warm_holes = np.where(holes[0], np.nan, warm)
    if np.isfinite(warm_holes).sum() < 6:
        warm_holes = warm
    raw = sounding(
        pressure,
        warm_holes,
        np.where(holes[1], np.nan, warm - depression),
        [np.nan] * steps.size,
        np.where(holes[2], np.nan, speed),
        random.integers(0, 361, steps.size),
        elevation=250.0,
    )
    try:
        profile = prepare(raw)
    except ProfileError as error:
        if "ends" not in error.problem:
            raise
        return
    assert profile.height[0] == 0.0
    assert (np.diff(profile.height) > 0.0).all()
    assert (np.diff(profile.pressure) < 0.0).all()
    for values in (profile.height, profile.pressure, profile.theta, profile.humidity, profile.u, profile.v):
        assert np.isfinite(values).all()
    known = np.isfinite(profile.dewpoint)
    assert (profile.dewpoint[known] <= profile.temperature[known] + 1e-6).all()
    again = prepare(as_sounding(profile))
    for name in ("height", "pressure", "theta", "humidity", "u", "v"):
        np.testing.assert_allclose(getattr(again, name), getattr(profile, name), rtol=1e-6, atol=1e-6, err_msg=name)
    assert {repair.name for repair in again.repairs} <= {"height replaced", "dew point above temperature"}


def test_temperature_property_uses_the_one_formula() -> None:
    profile = prepare(sounding())
    assert profile.temperature[3] == temperature_of(float(profile.theta[3]), float(profile.pressure[3]))
