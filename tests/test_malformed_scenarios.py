"""Malformed scenarios and tables: each gives one line that names the place, the value and a remedy."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from forcing.errors import DaylayerError
from forcing.scenario import load

PROFILE = """# valid: 2026-07-01T11:00Z
# elevation_m: 300
pressure_hPa,height_m,temperature_C,dewpoint_C,wind_dir_deg,wind_speed_m_s
980,300,15,12,180,2
970,388,18,11,190,6
900,1035,16,7,200,9
850,1520,12,5,210,10
700,3090,0,-10,230,12
500,5680,-17,-30,250,18
"""
GOOD = """title = "A test"
[site]
latitude = 40
longitude = -100
elevation = 300
time_zone = "Etc/GMT+6"
[profile]
file = "morning.csv"
[surface]
cover = "short grass"
[weather]
cloud_fraction = 0.2
[run]
hours = 6
"""
WEATHER = "[weather]\nfile = 'w.csv'"
FLUXES = "[surface]\nfluxes = 'w.csv'"
LIMITS = '[limits]\nauthority = "me"\ndated = "2026-05-01"\n'
HOURLY = "\n".join(f"2026-07-01T{hour}:00Z,0.1" for hour in range(11, 18))

#: (what is replaced, what by, what the message must contain)
SCENARIOS = [
    # keys and sections
    ("cloud_fraction", "cloud_fracton", ["[weather] cloud_fracton", "did you mean 'cloud_fraction'"]),
    ("latitude", "lattitude", ["[site] lattitude", "did you mean 'latitude'"]),
    ("[weather]", "[wether]", ["unknown section", "wether", "did you mean 'weather'"]),
    ('title = "A test"', "hours = 6", ["'hours'", "put it under [run]"]),
    ('title = "A test"', "title = 3", ["title", "3 is not text"]),
    ('title = "A test"', 'title = "A"\nlimits = 3', ["limits", "3 is not a section"]),
    ('cover = "short grass"', "albdo = 0.3", ["[surface] albdo", "did you mean 'albedo'"]),
    # types and bounds
    ("latitude = 40", 'latitude = "40 N"', ["[site] latitude", "'40 N' is not a number", "degrees north"]),
    ("latitude = 40", "latitude = 140", ["[site] latitude", "140 is outside -90 to 90"]),
    ("latitude = 40", "latitude = nan", ["[site] latitude", "nan"]),
    ("longitude = -100", "longitude = 260", ["[site] longitude", "260 is outside -180 to 180"]),
    ("elevation = 300", "elevation = true", ["[site] elevation", "True is not a number"]),
    ("elevation = 300", "elevation = 30000", ["[site] elevation", "30000 is outside", "m above sea level"]),
    ("hours = 6", "hours = -6", ["[run] hours", "-6 is outside"]),
    ("hours = 6", "output_minutes = 0", ["[run] output_minutes", "0 is outside"]),
    ("hours = 6", 'entrainment = "shear"', ["[run] entrainment", "'shear'", "did you mean 'sheared'"]),
    ("cloud_fraction = 0.2", "cloud_fraction = 40", ["[weather] cloud_fraction", "40, outside 0 to 1"]),
    ("cloud_fraction = 0.2", "wind_10m_m_s = -1", ["[weather] wind_10m_m_s", "-1, outside 0 to 100"]),
    ("cloud_fraction = 0.2", "divergence_per_s = 3", ["[weather] divergence_per_s", "3, outside"]),
    ("cloud_fraction = 0.2", "wind_10m_from_deg = 90", ["wind_10m_from_deg", "direction without a speed"]),
    ('cover = "short grass"', "soil_moisture = 30", ["[surface] soil_moisture", "30 is outside 0 to 1"]),
    ('cover = "short grass"', "albedo = 20", ["[surface] albedo", "20 is outside"]),
    ('cover = "short grass"', 'cover = "short gras"', ["[surface] cover", "short gras", 'did you mean "short grass"']),
    ('cover = "short grass"', "cover = 3", ["[surface] cover", "3 is not text"]),
    ('cover = "short grass"', "cover = { stubble = 0.5 }", ["[surface] cover", "sum to 0.5"]),
    # zone, files, times
    ("Etc/GMT+6", "America/Nowhere", ["[site] time_zone", "'America/Nowhere' is not a time zone"]),
    ("Etc/GMT+6", "etc/gmt+6x", ["[site] time_zone", "did you mean 'Etc/GMT+6'"]),
    ('time_zone = "Etc/GMT+6"', "", ["[site] time_zone", "missing"]),
    ("latitude = 40", "", ["[site] latitude", "missing", "degrees north"]),
    ("morning.csv", "evening.csv", ["[profile] file", "no file", "evening.csv", "folder of the scenario"]),
    ('file = "morning.csv"', "", ["[profile] file", "missing"]),
    ("morning.csv", "untimed.csv", ["[profile] valid", "untimed.csv does not say when", "offset"]),
    ("morning.csv", 'morning.csv"\nvalid = "2026-07-01T11:00', ["[profile] valid", "no offset", "add Z"]),
    ("[surface]", "valid = 2026-07-01T11:00:00\n[surface]", ["[profile] valid", "no offset", "add Z"]),
    ("[surface]", "valid = 2026-07-01\n[surface]", ["[profile] valid", "2026-07-01 is not a time"]),
    ("morning.csv", 'morning.csv"\nvalid = "yesterday', ["[profile] valid", "'yesterday' is not an ISO 8601 time"]),
    ("morning.csv", 'morning.csv"\nvalid = "2026-07-03T11:00Z', ["morning.csv", "no sounding within 3 h"]),
    ("morning.csv", 'morning.csv"\nrebase = "hills', ["[profile] rebase", "'hills'", "known: sea-level, ground"]),
    ("morning.csv", 'morning.csv"\nlater = "morning.csv', ["[profile] later", "not after"]),
    # limits
    ("[run]", '[limits]\nauthority = "me"\n[run]', ["[limits] dated", "missing"]),
    ("[run]", '[limits]\ndated = "2026-05-01"\n[run]', ["[limits] authority", "missing"]),
    ("[run]", '[limits]\nauthority = "me"\ndated = "May"\n[run]', ["[limits] dated", "'May' is not a date"]),
    ("[run]", LIMITS + "wind_min_m_s = 2\n[run]", ["[limits] wind_height_m", "at which height"]),
    ("[run]", LIMITS + "delta_t_min_K = 8\ndelta_t_max_K = 2\n[run]", ["[limits] delta_t_min_K", "8 is not below"]),
    ("[run]", LIMITS + "ventilation = 3\n[run]", ["[limits] ventilation", "not a list"]),
    ("[run]", LIMITS + 'ventilation = [{ name = "a" }]\n[run]', ["limits.ventilation 1", "from_m2_s and from_kt_ft"]),
    (
        "[run]",
        LIMITS + 'ventilation = [{ name = "a", from_m2_s = 9 }, { name = "b", from_m2_s = 2 }]\n[run]',
        ["[limits] ventilation", "class 'b'", "lowest first"],
    ),
    ("[run]", LIMITS + 'ventilation = [{ nam = "a" }]\n[run]', ["limits.ventilation 1", "did you mean 'name'"]),
    # not TOML
    ("latitude = 40", "latitude = forty", ["case.toml", "not valid TOML", "line 3"]),
    ("[run]", "[weather]\n[run]", ["case.toml", "not valid TOML"]),
]

#: (section that asks for the table, the table, what the message must contain)
TABLES: list[tuple[str, str | bytes | None, list[str]]] = [
    (WEATHER, None, ["[weather] file", "no file", "w.csv"]),
    (WEATHER, "", ["w.csv", "is empty"]),
    (WEATHER, "# nothing\n", ["w.csv", "comments only"]),
    (WEATHER, b"\x00\x01\x02\x03", ["w.csv", "binary"]),
    (WEATHER, "time,cloud_fraction\n# caf\xe9\n".encode("latin-1"), ["w.csv:2", "not UTF-8", "save the file as UTF-8"]),
    (WEATHER, "time,cloud_fraction\n", ["w.csv", "no rows"]),
    (WEATHER, f"time,cloud_fracton\n{HOURLY}\n", ["w.csv:1", "cloud_fracton", "did you mean 'cloud_fraction'"]),
    (WEATHER, f"time,wind_10m_kt\n{HOURLY}\n", ["w.csv:1", "wind_10m_kt", "did you mean 'wind_10m_m_s'"]),
    (WEATHER, f"hour,cloud_fraction\n{HOURLY}\n", ["w.csv:1", "unknown column 'hour'"]),
    (WEATHER, "cloud_fraction\n0.1\n", ["w.csv:1", "no column 'time'"]),
    (WEATHER, "time;cloud_fraction\n2026-07-01T11:00Z;0,1\n", ["w.csv:1", "not separated by commas"]),
    (WEATHER, "time,rain_mm_h,rain_mm_h\n", ["w.csv:1", "'rain_mm_h' appears twice"]),
    (WEATHER, "time\n2026-07-01T11:00Z\n", ["w.csv", "time column only"]),
    (WEATHER, "time,cloud_fraction\n2026-07-01T11:00Z\n", ["w.csv:2", "1 cells under 2 columns", "blank"]),
    (WEATHER, "time,cloud_fraction\n2026-07-01T11:00,0.1\n", ["w.csv:2", "'2026-07-01T11:00' has no offset", "add Z"]),
    (WEATHER, "time,cloud_fraction\n11 o'clock,0.1\n", ["w.csv:2", "11 o'clock", "ISO 8601"]),
    (
        WEATHER,
        "time,cloud_fraction\n2026-07-01T11:00Z,some\n",
        ["w.csv:2", "cloud_fraction", "'some'", "blank if missing"],
    ),
    (WEATHER, "time,cloud_fraction\n2026-07-01T11:00Z,8\n", ["w.csv:2", "cloud_fraction is 8, outside 0 to 1"]),
    (WEATHER, "time,temperature_2m_C\n2026-07-01T11:00Z,293\n", ["w.csv:2", "293, outside -90 to 60", "unit"]),
    (WEATHER, "time,cloud_fraction\n2026-07-01T11:00Z,inf\n", ["w.csv:2", "inf, outside"]),
    (
        WEATHER,
        "time,cloud_fraction\n2026-07-01T12:00Z,0.1\n2026-07-01T11:00Z,0.1\n",
        ["w.csv:3", "2026-07-01T11:00Z is earlier than the row before", "in order"],
    ),
    (
        WEATHER,
        "time,cloud_fraction\n2026-07-01T11:00Z,0.1\n2026-07-01T13:00+02:00,0.1\n",
        ["w.csv:3", "the same as the row before"],
    ),
    (
        WEATHER,
        "time,cloud_fraction\n2026-07-01T11:00Z,0.1\n2026-07-01T14:30Z,0.1\n2026-07-01T17:00Z,0.1\n",
        ["w.csv", "cloud_fraction", "gap from 2026-07-01T11:00Z to 2026-07-01T14:30Z", "over 3 h"],
    ),
    (
        WEATHER,
        "time,cloud_fraction\n2026-07-01T11:00Z,0.1\n2026-07-01T13:00Z,0.1\n",
        ["w.csv", "covers 2026-07-01T11:00Z to 2026-07-01T13:00Z", "needs 2026-07-01T11:00Z to 2026-07-01T17:00Z"],
    ),
    (
        "[weather]\nfile = 'w.csv'\ncloud_fraction = 0.1",
        f"time,cloud_fraction\n{HOURLY}\n",
        ["w.csv", "'cloud_fraction' is also given as a constant"],
    ),
    (FLUXES, None, ["[surface] fluxes", "no file"]),
    (FLUXES, f"time,sensible_flux_W_m2\n{HOURLY}\n", ["w.csv", "latent_flux_W_m2"]),
    (FLUXES, f"time,sensible_heat\n{HOURLY}\n", ["w.csv:1", "unknown column 'sensible_heat'", "sensible_flux_W_m2"]),
    (
        FLUXES,
        "time,sensible_flux_W_m2,latent_flux_W_m2\n2026-07-01T11:00Z,9999,1\n",
        ["w.csv:2", "sensible_flux_W_m2 is 9999, outside"],
    ),
    (
        FLUXES,
        "time,sensible_flux_W_m2,latent_flux_W_m2\n2026-07-01T11:00Z,1,1\n2026-07-01T13:00Z,1,1\n",
        ["w.csv", "needs 2026-07-01T11:00Z to 2026-07-01T17:00Z"],
    ),
]


def _message(path: Path) -> str:
    with pytest.raises(DaylayerError) as caught:
        load(path)
    error = caught.value
    assert "\n" not in str(error)
    assert error.place, "the place is named"
    assert error.remedy, "a remedy is named"
    return str(error)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "morning.csv").write_text(PROFILE, encoding="ascii")
    (tmp_path / "untimed.csv").write_text(re.sub(r"# valid.*\n", "", PROFILE), encoding="ascii")
    return tmp_path


def test_the_pattern_is_good(folder: Path) -> None:
    path = folder / "case.toml"
    path.write_text(GOOD, encoding="utf-8")
    assert load(path).run.hours == 6.0


@pytest.mark.parametrize(("old", "new", "parts"), SCENARIOS, ids=[" / ".join(row[2][:2]) for row in SCENARIOS])
def test_scenario(folder: Path, old: str, new: str, parts: list[str]) -> None:
    assert old in GOOD
    path = folder / "case.toml"
    path.write_text(GOOD.replace(old, new, 1), encoding="utf-8")
    text = _message(path)
    for part in parts:
        assert part in text


@pytest.mark.parametrize(("section", "table", "parts"), TABLES, ids=[" / ".join(row[2][:2]) for row in TABLES])
def test_table(folder: Path, section: str, table: str | bytes | None, parts: list[str]) -> None:
    path = folder / "case.toml"
    rest = re.sub(r"\[surface\][^\[]*|\[weather\][^\[]*", "", GOOD)
    path.write_text(rest + section + "\n", encoding="utf-8")
    if table is not None:
        (folder / "w.csv").write_bytes(table if isinstance(table, bytes) else table.encode())
    text = _message(path)
    for part in parts:
        assert part in text


@pytest.mark.parametrize(
    ("content", "part"),
    [(None, "no such file"), (b"", "is empty"), (b"\x00\x01", "binary"), (b"title = '\xe9'\n", "not UTF-8")],
)
def test_file(folder: Path, content: bytes | None, part: str) -> None:
    path = folder / "case.toml"
    if content is not None:
        path.write_bytes(content)
    text = _message(path)
    assert part in text
    assert "case.toml" in text


def test_a_folder_is_not_a_scenario(folder: Path) -> None:
    assert "cannot be read" in _message(folder)
