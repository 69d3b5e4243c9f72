"""Malformed profile files: each is repaired under a name, or refused in one line with place, value and remedy."""

from __future__ import annotations

import subprocess
import sys
from datetime import UTC, datetime
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from observed import folder

from forcing.errors import ProfileError
from forcing.profile import prepare
from forcing.readers import parse, read_sounding

VALID = datetime(2026, 7, 1, 12, tzinfo=UTC)
HEAD = "pressure_hPa,height_m,temperature_C,dewpoint_C,wind_dir_deg,wind_speed_m_s"
ROWS = """980,310,22.0,9.0,200,2
950,580,20.0,8.0,210,3
900,1042,16.0,5.0,220,4
850,1524,12.0,3.0,230,5
800,2029,8.0,-2.0,240,6
700,3117,0.0,-15.0,250,7
600,4336,-9.0,-20.0,260,8
500,5728,-18.0,-35.0,270,9"""
GOOD = f"{HEAD}\n{ROWS}\n"
TEMP = """TTAA 51121 99901 99004 21459 24007 00147 21059 24507 92813 15056 25012 85535 10262 26015 70145 00766 27020
50582 13380 28030 40752 24580 28035 88999 77999="""
IGRA = """#XXM00099901 2026 07 01 12 1131    4 made     made      475000   152500
21 -9999  98000   310   220 -9999   130   200    20 
10 -9999  92500   806   180 -9999   110   210    30 
10 -9999  85000  1524   120 -9999    90   230    50 
10 -9999  70000  3117     0 -9999   150   250    70 
"""


def column(index: int, function: str) -> str:
    """Rewrite one column of the good table, by a format of its number."""
    rows = [row.split(",") for row in ROWS.splitlines()]
    for row in rows:
        row[index] = function.format(
            float(row[index]), k=float(row[index]) + 273.15, h=float(row[index]) * 100, f=float(row[index]) / 0.3048
        )
    return HEAD + "\n" + "\n".join(",".join(row) for row in rows) + "\n"


def without(name: str) -> str:
    """Take a column out of the good table."""
    at = HEAD.split(",").index(name)
    return "\n".join(",".join(c for i, c in enumerate(line.split(",")) if i != at) for line in GOOD.splitlines())


REPAIRED: dict[str, tuple[str | bytes, str | None]] = {
    "good": (GOOD, None),
    "windows line ends": (GOOD.replace("\n", "\r\n").encode(), None),
    "old mac line ends": (GOOD.replace("\n", "\r").encode(), None),
    "byte order mark": (b"\xef\xbb\xbf" + GOOD.encode(), None),
    "utf-16": (GOOD.encode("utf-16"), None),
    "latin-1 comment": (("# station: Grünfeld\n" + GOOD).encode("latin-1"), None),
    "blank lines": ("\n\n" + GOOD.replace("\n", "\n\n"), None),
    "decimal comma with semicolons": (GOOD.replace(",", ";").replace(".", ","), None),
    "pressure in Pa": (column(0, "{h}"), "pressure unit"),
    "temperature in K": (column(2, "{k}"), "temperature unit"),
    "humidity as a fraction": (
        column(3, "0.5").replace("dewpoint_C", "relative_humidity_pct"),
        "humidity unit",
    ),
    "kelvins beside relative humidity": (
        column(2, "{k}").replace("dewpoint_C", "relative_humidity_pct").replace(",-", ","),
        "temperature unit",
    ),
    "reversed": (HEAD + "\n" + "\n".join(ROWS.splitlines()[::-1]), "reversed order"),
    "duplicate level": (GOOD.replace("900,1042", "950,580"), "duplicate level"),
    "every level twice": (HEAD + "\n" + "\n".join(row for r in ROWS.splitlines() for row in (r, r)), "duplicate level"),
    "zigzag": (GOOD.replace("850,1524", "960,1524"), "level out of order"),
    "nan cells": (GOOD.replace("5.0,220,4", "nan,nan,NaN"), "not-a-number cell"),
    "repeated header": (GOOD.replace("850,1524", f"{HEAD}\n850,1524"), "repeated header"),
    "missing humidity": (GOOD.replace("-15.0", ""), "humidity interpolated"),
    "missing wind": (GOOD.replace("230,5", ","), "wind interpolated"),
    "missing heights": (GOOD.replace("1524", "").replace("4336", ""), "height integrated"),
    "wrong height": (GOOD.replace("1524", "2524"), "height replaced"),
    "height below ground": ("# elevation_m: 700\n" + GOOD, "level below ground"),
    "surface level missing": ("# elevation_m: 120\n" + GOOD, "ground level added"),
    "dew point over temperature": (GOOD.replace("9.0,200", "22.4,200"), "dew point above temperature"),
    "heights in feet": (column(1, "{f:.0f}"), "height unit"),
    "level without pressure": (GOOD.replace("850,1524", ",1524"), "pressure from height"),
    "message cut in a group": (TEMP.replace("24580 28035 88999 77999=", "24580 28"), "message cut short"),
    "record cut in a line": (IGRA[:-30], "record cut short"),
    "record cut between lines": (IGRA.replace("    4 made", "   40 made"), "record cut short"),
}

# file -> what one line must hold
REFUSED: dict[str, tuple[str | bytes, tuple[str, ...]]] = {
    "empty": ("", ("empty",)),
    "white space": ("  \n\t\n", ("empty",)),
    "binary": (b"\x01\x02\x00\x03" * 50, ("byte 2 is 0", "give CSV")),
    "bufr": (b"BUFR\x00\x01\x02" * 10, ("BUFR", "decode")),
    "bufr under a heading": (b"IUKX01 XXXX 010000\r\r\nBUFR\x00\x01", ("BUFR", "decode")),
    "gzip": (b"\x1f\x8b\x08\x00" * 9, ("gzip", "unpack")),
    "netcdf": (b"CDF\x01\x00\x00", ("netCDF", "CSV")),
    "web page": ("<!DOCTYPE html>\n<html><body>404</body></html>", ("line 1", "web page", "save the data")),
    "prose": ("Dear all,\nplease find the sounding attached.\n", ("line 1", "'Dear all,'", "name one of")),
    "header only": (HEAD + "\n", ("line 1", "0 lines", "add the levels")),
    "comments only": ("# valid: 2026-07-01T12:00Z\n# pressure_hPa\n", ("line 1", "not recognised")),
    "one level": ("\n".join(GOOD.splitlines()[:2]), ("1 usable level", "at least 3")),
    "two levels": ("\n".join(GOOD.splitlines()[:3]), ("2 usable levels", "at least 3")),
    "too low a top": ("\n".join(GOOD.splitlines()[:2]) + "\n970,398,21,9,,\n965,440,20,9,,\n", ("ends", "reach 500 m")),
    "text in a number": (GOOD.replace("16.0", "warm"), ("line 4", "temperature_C 'warm'", "blank")),
    "missing code": (GOOD.replace("16.0", "-9999"), ("line 4", "-9999", "leave it empty")),
    "digits in groups": (GOOD.replace("5728", "5_728"), ("line 9", "height_m '5_728'", "blank")),
    "endless line": (GOOD + "9" * 200_000 + "\n", ("line 10", "remove the line")),
    "infinite": (GOOD.replace("16.0", "inf"), ("line 4", "inf", "leave it empty")),
    "absurd temperature": (GOOD.replace("22.0,9.0", "71.6,9.0"), ("line 2", "71.6", "unit")),
    "temperature in tenths": (column(2, "{0:.0f}0"), ("line 2", "220 C", "unit")),
    "pressure zero": (GOOD.replace("500,5728", "0,5728"), ("line 9", "pressure 0 hPa", "correct")),
    "negative wind": (GOOD.replace("270,9", "270,-9"), ("line 9", "-9 m/s", "correct")),
    "direction over 360": (GOOD.replace("270,9", "400,9"), ("line 9", "400 degrees", "correct")),
    "dew point in percent": (
        HEAD + "\n" + "\n".join(",".join([*r.split(",")[:3], "62", "", ""]) for r in ROWS.splitlines()),
        ("line 2", "62.0", "relative_humidity_pct"),
    ),
    "humidity over 110": (
        GOOD.replace("dewpoint_C", "relative_humidity_pct").replace(",9.0,", ",140,"),
        ("line 2", "140", "0 to 110"),
    ),
    "no temperature column": (without("temperature_C"), ("line 1", "no temperature column", "temperature_C")),
    "no pressure column": (without("pressure_hPa"), ("line 1", "no pressure column", "pressure_hPa")),
    "speed without direction": (without("wind_dir_deg"), ("line 1", "wind_speed_m_s", "neither")),
    "unknown column": (GOOD.replace("dewpoint_C", "dew_point_C"), ("line 1", "'dew_point_C'", "did you mean dewpoint_C?")),
    "column without unit": (GOOD.replace("temperature_C", "temperature"), ("line 1", "'temperature'", "did you mean")),
    "column twice": (GOOD.replace("dewpoint_C", "temperature_K"), ("line 1", "temperature_K", "keep one")),
    "too many cells": (GOOD.replace("20.0", "20,0"), ("line 3", "7 cells under 6", "decimal point")),
    "too few cells": (GOOD.replace(",8.0,210,3", ""), ("line 3", "3 cells under 6", "blank cells")),
    "all pressures equal": (column(0, "900"), ("1 usable levels", "at least 3")),
    "shuffled": (
        HEAD + "\n" + "\n".join(ROWS.splitlines()[i] for i in (7, 0, 6, 1, 5, 2, 4, 3)),
        ("line", "does not fall", "sort the levels"),
    ),
    "time without offset": ("# valid: 2026-07-01 12:00\n" + GOOD, ("line 1", "no offset", "2026-07-01T12:00Z")),
    "time not ISO": ("# valid: noon\n" + GOOD, ("line 1", "'noon'", "2026-07-01T12:00Z")),
    "another day": ("# valid: 2026-06-01T12:00Z\n" + GOOD, ("within 3 h of 2026-07-01T12:00Z", "2026-06-01T12:00Z")),
    "latitude 95": ("# latitude: 95\n" + GOOD, ("line 1", "'95'", "degrees north")),
    "two times": ("# valid: 2026-07-01T12:00Z\n# valid: 2026-07-01T13:00Z\n" + GOOD, ("line 2", "contradicts", "keep one")),
    "ship message": (TEMP.replace("TTAA", "UUAA"), ("line 1", "UUAA", "land TEMP")),
    "message of nothing": ("TTAA 51121 99901 NIL=", ("TTAA", "give")),
    "message cut in its head": ("TTAA 51121", ("line 1", "1 groups", "whole message")),
    "letters in a group": (TEMP.replace("15056", "15O56"), ("line 1", "'15O56'", "5 figures")),
    "group lost": (TEMP.replace("92813 15056", "15056"), ("line 1", "15056", "correct or complete")),
    "message of another day": (TEMP.replace("51121", "59121"), ("line 1", "day 9", "valid time")),
    "record with letters": (IGRA.replace("  806", "  8O6"), ("line 3", "'8O6'", "17-21")),
    "record of another day": (IGRA.replace("07 01", "07 09"), ("within 3 h", "2026-07-09", "ask for one")),
    "record without levels": (IGRA.splitlines()[0] + "\n", ("holds no level", "3 levels")),
    "record with a bad date": (IGRA.replace("07 01", "07 32"), ("line 1", "07 32", "correct the header")),
    "foreign line in a record": (IGRA + "Total 4 levels and some more text to fill the line up to the end\n", ("line 6", "Total")),
}  # fmt: skip


def run(path: Path, data: str | bytes) -> tuple[set[str], int]:
    path.write_bytes(data if isinstance(data, bytes) else data.encode())
    profile = prepare(read_sounding(path, valid=VALID))
    return {repair.name for repair in profile.repairs}, profile.height.size


@pytest.mark.parametrize("case", REPAIRED)
def test_repaired(case: str, tmp_path: Path) -> None:
    data, name = REPAIRED[case]
    names, size = run(tmp_path / "given.txt", data)
    assert size >= 3
    if name is None:
        assert names == set()
    else:
        assert name in names


@pytest.mark.observed
def test_original_binary_messages_are_refused_by_name() -> None:
    paths = sorted((folder() / "raw" / "bufr").iterdir())
    assert len(paths) == 6
    for path in paths:
        with pytest.raises(ProfileError, match="BUFR message"):
            read_sounding(path)


@pytest.mark.parametrize("case", REFUSED)
def test_refused(case: str, tmp_path: Path) -> None:
    data, words = REFUSED[case]
    with pytest.raises(ProfileError) as error:
        run(tmp_path / "given.txt", data)
    text = str(error.value)
    assert "\n" not in text
    assert text.startswith("given.txt")
    assert "; " in text, "no remedy"
    for word in words:
        assert word in text
    assert error.value.remedy


def test_every_utf8_prefix_of_a_message_is_repaired_or_refused(tmp_path: Path) -> None:
    """However a transfer is cut, nothing but a ProfileError comes out."""
    for text in (TEMP, IGRA, GOOD):
        for end in range(0, len(text), 3):
            try:
                run(tmp_path / "cut.txt", text[:end])
            except ProfileError as error:
                assert error.remedy  # noqa: PT017


@settings(max_examples=150, deadline=None)
@given(st.sampled_from((TEMP, IGRA, GOOD)), st.integers(0, 10_000), st.text("0123456789/-. ,;#\nANX=", max_size=4))
def test_any_scribble_is_repaired_or_refused(text: str, at: int, scribble: str) -> None:
    at %= len(text)
    try:
        prepare(parse(text[:at] + scribble + text[at + len(scribble) :], "scribbled.txt", valid=VALID))
    except ProfileError as error:
        if not (error.remedy and "scribbled.txt" in str(error)):
            raise AssertionError(str(error)) from error


def test_no_warning_on_standard_error(tmp_path: Path) -> None:
    path = tmp_path / "given.csv"
    path.write_text(GOOD.replace("5.0,220,4", ",,"), encoding="utf-8")
    code = (
        "import sys; from datetime import datetime, UTC; from forcing.readers import parse, read_sounding; "
        "from forcing.profile import prepare; prepare(read_sounding(sys.argv[1], valid=datetime(2026, 7, 1, tzinfo=UTC)))"
    )
    done = subprocess.run([sys.executable, "-c", code, str(path)], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr, done.stdout) == (0, "", "")
