"""FM 35 TEMP: codes, hand-made messages of an invented station (99 9xx), and one original message."""

from __future__ import annotations

from datetime import UTC, datetime

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from observed import folder

from forcing.errors import ProfileError
from forcing.profile import prepare
from forcing.readers import parse, parse_all, read_sounding
from forcing.readers.temp_codes import depression, geopotential, temperature, wind

NOON = datetime(2026, 7, 3, 12, tzinfo=UTC)
# surface 1004 hPa 21.4 C, dew point 12.4 C, 240 degrees 7 kt; release 11:31
AA = """TTAA 53121 99901 99004 21459 24007 00147 21059 24507 92813 15056 25012 85535 10262 26015
70145 00766 27020 50582 13380 28030 40752 24580 28035 30955 40180 28545 25078 50180 28550
20223 58380 29040 15406 60180 29035 10660 61780 29020 88201 58380 29040 77999 31313 48108 81131"""
BB = """TTBB 53128 99901 00004 21459 11990 20259 22905 13450 33850 10262 44700 00766 55500 13380
21212 00004 24007 11950 24511 22700 27020 31313 48108 81131 41414 ///// 51515 11900 24510"""


def bulletin(*parts: str) -> str:
    """Put parts in a bulletin with heading and ends."""
    return "\r\n".join(["042 ", "USXX01 XXXX 031200", *(f"{part}=" for part in parts), "NNNN"])


def test_surface_level_and_release() -> None:
    sounding = parse(bulletin(AA, BB), "noon.txt", valid=NOON)
    assert sounding.format == "temp"
    assert sounding.station == "99901"
    assert sounding.valid == datetime(2026, 7, 3, 11, 31, tzinfo=UTC)
    assert sounding.nominal == NOON
    assert sounding.surface == 0
    assert sounding.pressure[0] == 100_400.0
    assert sounding.temperature[0] == pytest.approx(273.15 + 21.4)
    assert sounding.dewpoint[0] == pytest.approx(273.15 + 21.4 - 9.0)
    assert sounding.wind_from[0] == 240.0
    assert sounding.wind_speed[0] == pytest.approx(7 * 1852 / 3600)


def test_levels_of_both_parts_are_one_column() -> None:
    sounding = parse(bulletin(AA, BB), "noon.txt", valid=NOON)
    pressure = (sounding.pressure / 100.0).round().astype(int).tolist()
    assert pressure == [1004, 1000, 990, 950, 925, 905, 850, 700, 500, 400, 300, 250, 201, 200, 150, 100]
    heights = dict(zip(pressure, sounding.height_msl.tolist(), strict=True))
    assert [heights[p] for p in (1000, 925, 850, 700, 500, 400, 300, 250, 200, 150, 100)] == [
        147, 813, 1535, 3145, 5820, 7520, 9550, 10780, 12230, 14060, 16600,
    ]  # fmt: skip
    assert np.isnan(heights[990])
    at = pressure.index(905)
    assert sounding.temperature[at] == pytest.approx(273.15 + 13.4)
    assert sounding.dewpoint[at] == pytest.approx(sounding.temperature[at] - 5.0)
    assert sounding.temperature[pressure.index(500)] == pytest.approx(273.15 - 13.3)
    assert sounding.wind_from[pressure.index(950)] == 245.0  # 24511: 240 degrees, 500 added for another 5


def test_a_message_without_925_hpa() -> None:
    sounding = parse(AA.replace("92813 15056 25012 ", ""), "old.txt", valid=NOON)
    assert 92_500.0 not in sounding.pressure.tolist()


def test_split_lines_and_order_of_parts_do_not_matter() -> None:
    once = parse(bulletin(AA, BB), "a", valid=NOON)
    again = parse("\n".join(f"{BB} = {AA} =".split()), "b", valid=NOON)
    np.testing.assert_array_equal(once.pressure, again.pressure)
    np.testing.assert_array_equal(once.temperature, again.temperature)


def test_metres_per_second_when_day_is_not_raised() -> None:
    sounding = parse(AA.replace("53121", "03121"), "noon.txt", valid=NOON)
    assert sounding.wind_speed[0] == 7.0


def test_wind_ends_where_the_indicator_says() -> None:
    text = "TTAA 53125 99901 99004 21459 24007 00147 21059 24507 92813 15056 25012 85535 10262 26015 "
    text += "70145 00766 27020 50582 13380 28030 40752 24580 30955 40180 88999 77999"
    sounding = parse(text, "noon.txt", valid=NOON)
    known = np.isfinite(sounding.wind_speed)
    assert (sounding.pressure[known] >= 50_000.0).all()
    assert known.sum() == 6
    assert np.isfinite(sounding.temperature).sum() == 8


def test_levels_below_ground_are_left_out() -> None:
    text = AA.replace("99004", "99932").replace("00147 21059 24507", "00147 ///// /////")
    sounding = parse(text, "high.txt", valid=NOON)
    assert sounding.pressure[0] == 93_200.0
    assert sounding.surface == 0


def test_release_the_evening_before() -> None:
    midnight = datetime(2026, 7, 3, 0, tzinfo=UTC)
    text = AA.replace("53121", "53001").replace("81131", "82330")
    assert parse(text, "night.txt", valid=midnight).valid == datetime(2026, 7, 2, 23, 30, tzinfo=UTC)
    assert parse(text, "night.txt", valid=midnight.replace(hour=1)).nominal == midnight


def test_month_end_takes_the_nearest_date() -> None:
    text = AA.replace("53121", "51001").replace("81131", "82330")  # day 1, hour 00
    sounding = parse(text, "x", valid=datetime(2026, 7, 31, 23, 30, tzinfo=UTC))
    assert sounding.nominal == datetime(2026, 8, 1, tzinfo=UTC)


def test_without_valid_there_is_no_date_and_prepare_says_so() -> None:
    sounding = parse(bulletin(AA, BB), "noon.txt")
    assert sounding.valid is None
    assert "day 3 at 12 UTC" in sounding.notes[0]
    with pytest.raises(ProfileError, match=r"noon.txt: .*when the balloon was released"):
        prepare(sounding)


def test_wrong_valid_is_refused() -> None:
    with pytest.raises(ProfileError, match=r"noon.txt, line 3: .*day 3 at 12 UTC.*2026-07-09"):
        parse(bulletin(AA, BB), "noon.txt", valid=datetime(2026, 7, 9, 12, tzinfo=UTC))


def test_two_stations_in_one_bulletin() -> None:
    other = AA.replace("99901", "99902")
    assert [s.station for s in parse_all(bulletin(AA, other), "two.txt")] == ["99901", "99902"]
    with pytest.raises(ProfileError, match="2 soundings in one file: 99901"):
        parse(bulletin(AA, other), "two.txt")
    with pytest.raises(ProfileError, match=r"two.txt: 2 stations at that time: 99901 .*, 99902"):
        parse(bulletin(AA, other), "two.txt", valid=NOON)


@pytest.mark.parametrize(
    ("head", "what"), [("UUAA", "ship"), ("IIAA", "mobile"), ("XXAA", "dropsonde"), ("PPAA", "wind-only")]
)
def test_other_reports_are_refused(head: str, what: str) -> None:
    with pytest.raises(ProfileError, match=rf"x.txt, line 3: {head} is .*{what}.*; give a land TEMP"):
        parse(bulletin(AA.replace("TTAA", head)), "x.txt", valid=NOON)


def test_nil_parts() -> None:
    sounding = parse(bulletin(AA, "TTBB 53128 99901 NIL"), "nil.txt", valid=NOON)
    assert sounding.pressure[0] == 100_400.0
    with pytest.raises(ProfileError, match=r"nil\.txt"):
        parse(bulletin("TTAA 53121 99901 NIL"), "nil.txt", valid=NOON)


def test_negative_surface_geopotential() -> None:
    assert geopotential("550", 1000) == -50.0
    assert geopotential("147", 1000) == 147.0


# heights of the US Standard Atmosphere 1976 at the mandatory levels, m (geopotential): the hundreds rule must find them
@pytest.mark.parametrize(
    ("level", "code", "height"),
    [(925, "762", 762), (850, "457", 1457), (700, "012", 3012), (500, "557", 5570), (400, "718", 7180),
     (300, "916", 9160), (250, "036", 10360), (200, "178", 11780), (150, "361", 13610), (100, "618", 16180),
     (70, "844", 18440), (50, "058", 20580), (30, "385", 23850), (20, "648", 26480), (10, "105", 31050)],
)  # fmt: skip
def test_hundreds_rule(level: int, code: str, height: int) -> None:
    assert geopotential(code, level) == height


def encode(celsius: float) -> str:
    """Encode by table 3931: tenths come in pairs, the even one above zero and the odd one below."""
    tenths = round(abs(celsius) * 10)
    return f"{tenths // 2 * 2 + (celsius < 0):03d}"


@given(st.integers(-999, 998))
def test_temperature_round_trip(tenths: int) -> None:
    decoded = temperature(encode(tenths / 10)) - 273.15
    assert abs(decoded - tenths / 10) < 0.1 + 1e-9
    assert (decoded < 0) == (tenths < 0)
    assert encode(decoded) == encode(tenths / 10)


@given(st.integers(0, 490))
def test_depression_round_trip(tenths: int) -> None:
    """Encode by table 0777: tenths up to 5.0 K, whole degrees plus 50 from 6 K (51 to 55 are not used)."""
    code = f"{tenths:02d}" if tenths <= 50 else f"{max(56, 50 + round(tenths / 10)):02d}"
    assert abs(depression(code) - tenths / 10) <= (1e-9 if tenths <= 50 else 0.9 + 1e-9 if tenths < 60 else 0.5)


@given(st.integers(0, 71), st.integers(0, 250))
def test_wind_round_trip(fives: int, speed: int) -> None:
    """Directions in steps of 5 degrees: the odd five adds 500 to the speed."""
    tens, odd = divmod(fives * 5, 10)
    code = f"{tens:02d}{speed + (500 if odd else 0):03d}"
    assert wind(code) == (fives * 5.0, float(speed))


@pytest.mark.observed
def test_original_message() -> None:
    """Numbers decoded by hand from the text of the message (station 02963, 10 Apr 2006, 12 UTC)."""
    path = folder() / "raw" / "temp_fm35" / "02963_20060410_12UTC.txt"
    sounding = read_sounding(path, valid=datetime(2006, 4, 10, 12, tzinfo=UTC))
    assert sounding.valid == datetime(2006, 4, 10, 11, 30, tzinfo=UTC)
    assert sounding.pressure[0] == 99_200.0
    assert sounding.temperature[0] - 273.15 == pytest.approx(1.6)
    hpa = (sounding.pressure / 100).round(1).tolist()
    at = hpa.index(784.0)  # 22784 25510 of section 21212
    assert (sounding.wind_from[at], sounding.wind_speed[at]) == (255.0, pytest.approx(10 * 1852 / 3600))
    assert sounding.height_msl[hpa.index(925.0)] == 660.0
    assert sounding.height_msl[hpa.index(500.0)] == 5240.0
    assert sounding.height_msl[hpa.index(30.0)] == 23660.0
    assert sounding.temperature[hpa.index(68.6)] - 273.15 == pytest.approx(-49.1)
    profile = prepare(sounding)
    # 992 hPa and 1.6 C under 925 hPa at 660 m, mean virtual temperature 272.8 K: 660 - 287.05/9.80665*272.8*ln(992/925)
    assert profile.elevation == pytest.approx(660 - 558.6, abs=5)
    assert profile.height[-1] > 23_000.0
