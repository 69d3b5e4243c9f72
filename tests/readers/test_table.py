"""Profile CSV: units, metadata, delimiters, recognition."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import numpy as np
import pytest

from forcing.errors import ProfileError
from forcing.readers import FORMATS, detect, parse, read_all, read_sounding

PLAIN = """# station: Invented Field
# valid: 2026-07-01T05:30+02:00
# latitude: 47.5
# longitude: 15.25
# elevation_m: 310
pressure_hPa,height_m,temperature_C,dewpoint_C,wind_dir_deg,wind_speed_m_s
980,310,12.0,9.0,200,2
950,,16.0,8.0,,
900,1035,14.0,5.0,250,8
800,2010,7.0,-4.0,260,10
"""


def test_plain_table() -> None:
    sounding = parse(PLAIN, "field.csv")
    assert (sounding.format, sounding.file, sounding.station) == ("csv", "field.csv", "Invented Field")
    assert sounding.valid == datetime(2026, 7, 1, 3, 30, tzinfo=UTC)
    assert sounding.valid.utcoffset() == timedelta(0)
    assert (sounding.latitude, sounding.longitude, sounding.elevation) == (47.5, 15.25, 310.0)
    assert sounding.lines == (7, 8, 9, 10)
    np.testing.assert_allclose(sounding.pressure, [98000, 95000, 90000, 80000])
    np.testing.assert_allclose(sounding.temperature, np.array([12.0, 16.0, 14.0, 7.0]) + 273.15)
    assert np.isnan(sounding.height_msl[1])
    assert np.isnan(sounding.wind_speed[1])


@pytest.mark.parametrize(
    ("column", "value", "quantity", "expected"),
    [
        ("pressure_Pa", "98000", "pressure", 98000.0),
        ("temperature_K", "285.15", "temperature", 285.15),
        ("dewpoint_K", "282.15", "dewpoint", 282.15),
        ("wind_speed_ms", "5", "wind_speed", 5.0),
        ("wind_speed_kt", "36", "wind_speed", 18.52),  # 36 kt = 36 x 1852 m / 3600 s
        ("height_agl_m", "0", "height_msl", 0.0),
    ],
)
def test_units_by_name(column: str, value: str, quantity: str, expected: float) -> None:
    base = {"pressure_hPa": "980", "height_m": "310", "temperature_C": "12", "dewpoint_C": "9", "wind_dir_deg": "200"}
    base["wind_speed_m_s"] = "2"
    stem = column.split("_")[0]
    cells = {column if name.startswith(stem) and name != "wind_dir_deg" else name: text for name, text in base.items()}
    cells[column] = value
    text = ",".join(cells) + "\n" + ",".join(cells.values()) + "\n"
    assert getattr(parse(text, "x.csv"), quantity)[0] == pytest.approx(expected)


# dew points by hand from the Magnus form over water (WMO-No. 8, annex 4.B: 6.112 exp(17.62 t / (243.12 + t))):
# 20 C holds 23.33 hPa; half of it is 11.67 hPa, dew point 9.27 C; 8 g/kg at 1000 hPa is 12.70 hPa, dew point 10.53 C
@pytest.mark.parametrize(
    ("column", "value", "celsius"), [("relative_humidity_pct", "50", 9.27), ("mixing_ratio_g_kg", "8", 10.53)]
)
def test_humidity_columns(column: str, value: str, celsius: float) -> None:
    sounding = parse(f"pressure_hPa,temperature_C,{column}\n1000,20,{value}\n", "x.csv")
    assert sounding.dewpoint[0] - 273.15 == pytest.approx(celsius, abs=0.06)


def test_semicolons_with_decimal_commas_and_tabs() -> None:
    text = PLAIN.split("pressure_hPa")[0] + "pressure_hPa;temperature_C\n980,5;12,5\n900;14,0\n"
    np.testing.assert_allclose(parse(text, "x.csv").pressure, [98050.0, 90000.0])
    assert parse(text.replace(";", "\t").replace(",", "."), "x.csv").temperature[0] == pytest.approx(285.65)


def test_time_of_the_caller() -> None:
    bare = PLAIN.replace("# valid: 2026-07-01T05:30+02:00\n", "")
    assert parse(bare, "x.csv").valid is None
    local = datetime(2026, 7, 1, 6, tzinfo=timezone(timedelta(hours=2)))
    assert parse(bare, "x.csv", valid=local).valid == datetime(2026, 7, 1, 4, tzinfo=UTC)
    assert parse(PLAIN, "x.csv", valid=local).valid == datetime(2026, 7, 1, 3, 30, tzinfo=UTC)
    with pytest.raises(ProfileError, match=r"x.csv: no sounding within 3 h of 2026-07-02T04:00Z"):
        parse(PLAIN, "x.csv", valid=local + timedelta(days=1))
    with pytest.raises(ProfileError, match="no offset"):
        parse(PLAIN, "x.csv", valid=datetime(2026, 7, 1, 6))  # noqa: DTZ001


def test_files(tmp_path: Path) -> None:
    path = tmp_path / "field.csv"
    path.write_text(PLAIN, encoding="utf-8")
    assert read_sounding(path).file == "field.csv"
    assert len(read_all(path, format="csv")) == 1
    with pytest.raises(ProfileError, match=r"unknown format 'tabel'; use one of csv, temp, igra"):
        read_sounding(path, format="tabel")
    with pytest.raises(ProfileError, match=r"none.csv: cannot be read: No such file"):
        read_sounding(tmp_path / "none.csv")


def test_recognition() -> None:
    assert FORMATS == ("csv", "temp", "igra")
    assert detect(PLAIN, "x") == "csv"
    assert detect("USXX01 XXXX 031200\r\nTTAA 53121 99901 99004", "x") == "temp"
    assert detect("#XXM00099901 2020 06 01 00 2331    6 made", "x") == "igra"
