"""Land covers: every number has a range and a source; mixtures, overrides and errors."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from forcing.cover import (
    LIMITS,
    Cover,
    adapt,
    anthropogenic_course,
    cover,
    ground,
    names,
    soil_resistance,
    table,
    tiles,
)
from forcing.errors import CoverError


def test_there_are_covers_of_every_kind():
    assert len(names()) >= 20
    for wanted in ("short grass", "irrigated crop", "wet bare soil", "tropical forest", "desert shrub", "fresh snow",
                   "compact high buildings", "sparse buildings"):  # fmt: skip
        assert wanted in names()


@pytest.mark.parametrize("name", names())
def test_every_number_has_range_unit_and_source(name):
    rows = table()[name]
    assert set(rows) == set(LIMITS)
    for key, one in rows.items():
        assert one.low <= one.value <= one.high, (name, key)
        assert LIMITS[key][0] <= one.low, (name, key)
        assert one.high <= LIMITS[key][1], (name, key)
        assert len(one.source) > 8
        assert one.unit
    found = cover(name)
    assert found.vegetation_fraction + found.impervious_fraction <= 1.0
    assert found.albedo == rows["albedo"].value


@pytest.mark.parametrize("name", names())
@pytest.mark.parametrize("moisture", [0.0, 0.5, 1.0])
def test_ground_is_usable(name, moisture):
    one = ground(cover(name), moisture)
    assert all(math.isfinite(value) for value in one)
    assert 0.0 < one.roughness_heat < one.roughness_momentum
    assert 0.0 < one.sky_view <= 1.0
    assert one.bare_fraction >= 0.0


def test_name_is_found_whatever_its_case():
    assert cover("Short_Grass") == cover("short grass")


def test_unknown_cover_says_what_was_meant():
    with pytest.raises(CoverError, match=r'unknown land cover "short gras".*did you mean "short grass"'):
        cover("short gras")
    with pytest.raises(CoverError, match="known: short grass"):
        cover("zzz")


def test_overrides():
    assert cover("short grass", albedo=0.3).albedo == 0.3
    assert cover("short grass").albedo != 0.3
    with pytest.raises(CoverError, match="did you mean albedo"):
        adapt(cover("short grass"), {"albdo": 0.3})
    with pytest.raises(CoverError, match=r"albedo = 1.4 is not possible.*0 to 0.98"):
        cover("short grass", albedo=1.4)
    with pytest.raises(CoverError, match="is not possible"):
        adapt(cover("short grass"), {"albedo": "high"})
    with pytest.raises(CoverError, match="is not possible"):
        adapt(cover("short grass"), {"albedo": math.nan})
    with pytest.raises(CoverError, match=r"sum to 1.6"):
        cover("short grass", impervious_fraction=0.7)
    assert isinstance(replace(cover("short grass"), albedo=0.5), Cover)


def test_own_cover():
    own = adapt(cover("green crop"), {"leaf_area": 4.0, "albedo": 0.17}, name="my maize")
    assert own.name == "my maize"
    assert ground(own, 0.5).leaf_area == 4.0


def test_mixture_of_one_is_that_cover():
    assert cover({"short grass": 1.0}) == cover("short grass")
    assert cover({"short grass": 1.0, "paved ground": 0.0}) == cover("short grass")


def test_mixture_blends_by_area():
    grass, stone = cover("short grass"), cover("paved ground")
    both = cover({"short grass": 0.6, "paved ground": 0.4})
    assert both.albedo == pytest.approx(0.6 * grass.albedo + 0.4 * stone.albedo)
    assert both.vegetation_fraction == pytest.approx(0.6 * grass.vegetation_fraction)
    assert both.leaf_area == pytest.approx(grass.leaf_area)  # of the vegetated part alone
    assert stone.roughness_momentum < both.roughness_momentum < grass.roughness_momentum
    assert both.parts == ((0.6, grass), (0.4, stone))
    shares = tiles(both, 0.5)
    assert shares == ((0.6, ground(grass, 0.5)), (0.4, ground(stone, 0.5)))
    assert tiles(grass, 0.5) == ((1.0, ground(grass, 0.5)),)


def test_change_of_a_mixture_reaches_its_parts():
    both = cover({"short grass": 0.6, "paved ground": 0.4}, albedo=0.33)
    assert both.albedo == 0.33
    assert all(one.albedo == 0.33 for _, one in tiles(both, 0.5))


@given(st.floats(0.01, 0.99))
def test_mixture_lies_between_its_parts(share):
    both = cover({"deciduous forest": share, "dry bare soil": 1.0 - share})
    for key in LIMITS:
        low, high = sorted((getattr(cover("deciduous forest"), key), getattr(cover("dry bare soil"), key)))
        assert low - 1e-9 * abs(low) <= getattr(both, key) <= high + 1e-9 * abs(high), key


def test_fractions_must_sum_to_one():
    with pytest.raises(CoverError, match=r"sum to 0.9 \(0.6 \+ 0.3\)"):
        cover({"short grass": 0.6, "paved ground": 0.3})
    with pytest.raises(CoverError, match=r'area fraction of "paved ground" is -0.2'):
        cover({"short grass": 0.9, "paved ground": -0.2, "heath": 0.3})
    with pytest.raises(CoverError, match="sum to 0"):
        cover({})
    with pytest.raises(CoverError, match="snow"):
        cover({"short grass": 0.5, "fresh snow": 0.5})


def test_roofs_see_the_whole_sky():
    town = cover("compact high buildings", built_fraction=0.5, sky_view=0.3)
    assert ground(town, 0.5).sky_view == pytest.approx(0.65)
    assert ground(cover("short grass"), 0.5).sky_view == 1.0


def test_soil_moisture_bounds():
    with pytest.raises(CoverError, match=r"soil_moisture 1.5"):
        ground(cover("short grass"), 1.5)
    assert ground(cover("irrigated crop"), 0.1).soil_moisture == pytest.approx(0.9)
    assert ground(cover("dry bare soil"), 0.9).soil_moisture == pytest.approx(0.15)
    assert ground(cover("short grass"), 1.0).soil_conductivity > ground(cover("short grass"), 0.0).soil_conductivity
    assert soil_resistance(0.0) > 10.0 * soil_resistance(1.0)


def test_course_of_anthropogenic_heat():
    hours = [h / 10.0 for h in range(240)]
    course = [anthropogenic_course(h) for h in hours]
    assert math.fsum(course) / len(course) == pytest.approx(1.0, abs=1e-12)
    assert min(course) > 0.0
    assert 1.0 < hours[course.index(min(course))] < 5.0
    peaks = [h for h, a, b, c in zip(hours[1:], course, course[1:], course[2:], strict=False) if a < b > c]
    assert len(peaks) == 2
    assert anthropogenic_course(24.0) == pytest.approx(anthropogenic_course(0.0))
