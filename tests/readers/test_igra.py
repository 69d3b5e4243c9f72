"""IGRA version 2: a record written by hand, and the archive's originals against their CSV twins."""

from __future__ import annotations

import csv
import re
from datetime import UTC, datetime

import numpy as np
import pytest
from observed import folder

from forcing.errors import ProfileError
from forcing.profile import prepare
from forcing.readers import parse, parse_all, read_all, read_sounding


def header(time: str = "2020 06 01 00 2331", levels: int = 6, station: str = "XXM00099901") -> str:
    return f"#{station} {time} {levels:4d} made     made     -123456  1712345"


def level(kind: str, pressure: int, *numbers: int) -> str:
    height, warm, humid, depression, angle, speed = numbers
    return f"{kind} -9999 {pressure:6d} {height:5d} {warm:5d} {humid:5d} {depression:5d} {angle:5d} {speed:5d} "


BODY = [
    level("21", 98200, 123, 182, -9999, 80, 270, 90),
    level("10", 92500, 640, 138, 500, -9999, 270, 220),
    level("20", 86100, -9999, 89, -9999, 39, -9999, -9999),
    level("30", -9999, 1400, -9999, -9999, -9999, 280, 230),
    level("10", 70000, 2950, -27, -9999, 127, -8888, -8888),
    level("10", 50000, 5560, -129, -9999, 150, 300, 300),
]


def record(time: str = "2020 06 01 00 2331", levels: int = 6) -> str:
    return "\n".join([header(time, levels), *BODY]) + "\n"


def test_header_and_levels() -> None:
    sounding = parse(record(), "made.txt")
    assert sounding.format == "igra"
    assert sounding.station == "XXM00099901"
    assert sounding.valid == datetime(2020, 5, 31, 23, 31, tzinfo=UTC)  # released before the nominal midnight
    assert sounding.nominal == datetime(2020, 6, 1, tzinfo=UTC)
    assert (sounding.latitude, sounding.longitude) == (pytest.approx(-12.3456), pytest.approx(171.2345))
    assert sounding.elevation == 123.0
    assert sounding.surface == 0
    assert sounding.lines == (2, 3, 4, 5, 6, 7)
    np.testing.assert_allclose(sounding.temperature[:3], [291.35, 286.95, 282.05])
    assert sounding.dewpoint[0] == pytest.approx(291.35 - 8.0)  # 80 tenths are 8 K of depression
    # 50 % at 13.8 C: dew point 3.6 C (August-Roche-Magnus by hand: 7.89 hPa)
    assert sounding.dewpoint[1] - 273.15 == pytest.approx(3.6, abs=0.1)
    assert np.isnan(sounding.pressure[3])
    assert np.isnan(sounding.wind_speed[4])
    assert sounding.wind_speed[0] == 9.0


def test_wind_only_height_level_is_placed() -> None:
    profile = prepare(parse(record(), "made.txt"))
    assert {"pressure from height", "wind-only level placed"} <= {repair.name for repair in profile.repairs}
    near = np.abs(profile.height + profile.elevation - 1400.0).min()
    assert near < 15.0


@pytest.mark.parametrize(
    ("time", "valid", "nominal"),
    [
        ("2020 06 01 12 1131", (1, 11, 31), (1, 12)),
        ("2020 06 01 99 0540", (1, 5, 40), None),
        ("2020 06 01 12 9999", (1, 12, 0), (1, 12)),
        ("2020 06 01 23 0012", (2, 0, 12), (1, 23)),
        ("2020 06 01 12 1199", (1, 11, 0), (1, 12)),
    ],
)
def test_times(time: str, valid: tuple[int, ...], nominal: tuple[int, ...] | None) -> None:
    sounding = parse(record(time), "made.txt")
    assert sounding.valid == datetime(2020, 6, *valid, tzinfo=UTC)
    assert sounding.nominal == (None if nominal is None else datetime(2020, 6, *nominal, tzinfo=UTC))


def test_choice_by_time() -> None:
    text = record() + record("2020 06 01 12 1131")
    assert len(parse_all(text, "two.txt")) == 2
    assert parse(text, "two.txt", valid=datetime(2020, 6, 1, 13, tzinfo=UTC)).nominal == datetime(
        2020, 6, 1, 12, tzinfo=UTC
    )
    with pytest.raises(
        ProfileError, match=r"two.txt: no sounding within 3 h of 2020-06-01T06:00Z; the nearest are .*12:00Z"
    ):
        parse(text, "two.txt", valid=datetime(2020, 6, 1, 6, tzinfo=UTC))
    with pytest.raises(ProfileError, match=r"2 soundings in one file.*--valid"):
        parse(text, "two.txt")


def test_a_time_that_is_not_there_is_answered_with_the_nearest() -> None:
    text = "".join(record(f"2020 06 {day:02d} 12 1131") for day in range(1, 21))
    for valid, first in ((datetime(2020, 6, 15, 18, tzinfo=UTC), 15), (datetime(2021, 6, 1, tzinfo=UTC), 20)):
        with pytest.raises(ProfileError) as caught:
            parse(text, "many.txt", valid=valid)
        said = str(caught.value)
        days = [int(day) for day in re.findall(r"2020-06-(\d\d)T12:00Z", said)]
        assert len(days) == 6
        assert days[0] == first
        assert "and 14 more, from 2020-06-01 to 2020-06-20" in said
        assert "--valid" in said


@pytest.mark.observed
def test_originals_equal_their_tables() -> None:
    """Level by level, April and May 2015; every record of the archive file that has a table."""
    root = folder()
    archive = {
        f"{sounding.valid:%Y%m%dT%H%M}": sounding
        for sounding in read_all(root / "raw" / "igra_v2" / "AUM00011035-2015-apr-may.txt")
    }
    with (root / "vienna_2015" / "index.csv").open(newline="") as stream:
        files = [row["file"] for row in csv.DictReader(stream)]
    twins = [(name, archive[name[-17:-4]]) for name in files if name[-17:-4] in archive]
    assert len(twins) == 120
    for name, original in twins:
        table = read_sounding(root / "vienna_2015" / name)
        for column in ("pressure", "height_msl", "temperature", "dewpoint", "wind_speed", "wind_from"):
            np.testing.assert_allclose(getattr(table, column), getattr(original, column), atol=1e-6, err_msg=name)


@pytest.mark.observed
def test_every_original_can_be_prepared() -> None:
    root = folder() / "raw" / "igra_v2"
    counts = {}
    for path in sorted(root.glob("*.txt")):
        profiles = [prepare(sounding) for sounding in read_all(path)]
        counts[path.name] = len(profiles)
        if path.name.startswith("AUM00011035"):  # the ground from the lowest mandatory height: within one pressure unit
            assert all(abs(profile.elevation - 200.0) < 10.0 for profile in profiles)
    assert counts == {
        "AUM00011035-2015-apr-may.txt": 122,
        "AUM00011035_odd_hours.txt": 6,
        "SWM00002527_observation_multi.txt": 5,
        "SWM00002527_observation_single.txt": 1,
    }
