"""Weather, flux and observed tables: interpolation, gaps, units."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from forcing.errors import WeatherError
from forcing.series import Series
from forcing.weather import ACTING, COLUMNS, Weather, read_fluxes, read_observed, read_weather

NOON = datetime(2026, 7, 1, 12, tzinfo=UTC).timestamp()
HOUR = 3600.0


def _write(folder: Path, *lines: str) -> Path:
    path = folder / "table.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def test_linear_in_time_and_si(tmp_path: Path) -> None:
    path = _write(
        tmp_path,
        "# a comment",
        "time,cloud_fraction,heat_advection_K_h,moisture_advection_g_kg_h,temperature_2m_C,rain_mm_h,ozone_cm",
        "2026-07-01T12:00Z,0.0,3.6,-3.6,20,3.6,0.3",
        "2026-07-01T15:00+01:00,1.0,0,0,30,0,0.3",
    )
    weather = read_weather(path)
    at = np.array([NOON, NOON + HOUR])
    assert weather.sample("cloud_fraction", at) == pytest.approx([0.0, 0.5])
    assert weather.sample("heat_advection_K_h", at) == pytest.approx([1e-3, 0.5e-3])
    assert weather.sample("moisture_advection_g_kg_h", at) == pytest.approx([-1e-6, -0.5e-6])
    assert weather.sample("temperature_2m_C", at) == pytest.approx([293.15, 298.15])
    assert weather.sample("rain_mm_h", at) == pytest.approx([1e-3, 0.5e-3])
    assert weather.sample("ozone_cm", at) == pytest.approx([0.003, 0.003])
    assert weather.given("cloud_fraction")
    assert not weather.given("wind_10m_m_s")
    assert np.isnan(weather.sample("wind_10m_m_s", at)).all()


@pytest.mark.parametrize(("first", "second", "middle"), [(350, 10, 0), (10, 350, 0), (80, 100, 90), (359, 271, 315)])
def test_direction_turns_the_shorter_way(tmp_path: Path, first: int, second: int, middle: int) -> None:
    path = _write(
        tmp_path,
        "time,wind_10m_m_s,wind_10m_from_deg",
        f"2026-07-01T12:00Z,4,{first}",
        f"2026-07-01T14:00Z,8,{second}",
    )
    found = float(read_weather(path).sample("wind_10m_from_deg", np.array([NOON + HOUR]))[0])
    assert np.cos(np.radians(found - middle)) == pytest.approx(1.0, abs=1e-9)
    assert 0.0 <= found < 360.0


def test_blank_is_bridged_up_to_three_hours(tmp_path: Path) -> None:
    rows = ["time,cloud_fraction,rain_mm_h"]
    rows += [f"2026-07-01T{12 + k}:00Z,{0.1 * k if k in (0, 3, 4) else ''},{1 if k < 2 else ''}" for k in range(5)]
    weather = read_weather(_write(tmp_path, *rows))
    weather.covers(NOON, NOON + 4 * HOUR)
    assert weather.sample("cloud_fraction", np.array([NOON + 2 * HOUR])) == pytest.approx([0.2])
    rain = weather.sample("rain_mm_h", np.array([NOON, NOON + HOUR, NOON + 2 * HOUR]))
    assert rain[:2] == pytest.approx([1.0 / HOUR, 1.0 / HOUR])
    assert np.isnan(rain[2])  # rain is not known after the last reading


def test_gap_over_three_hours_names_both_times(tmp_path: Path) -> None:
    weather = read_weather(
        _write(
            tmp_path,
            "time,cloud_fraction,wind_10m_m_s",
            "2026-07-01T12:00Z,0.1,2",
            "2026-07-01T14:00Z,,2",
            "2026-07-01T15:01Z,0.1,2",
            "2026-07-01T16:00Z,0.1,2",
        )
    )
    with pytest.raises(WeatherError, match=r"cloud_fraction.*2026-07-01T12:00Z.*2026-07-01T15:01Z"):
        weather.covers(NOON, NOON + 4 * HOUR)
    weather.covers(NOON + 3.5 * HOUR, NOON + 4 * HOUR)  # a gap outside the needed span does not matter


def test_table_must_reach_both_ends(tmp_path: Path) -> None:
    weather = read_weather(_write(tmp_path, "time,cloud_fraction", "2026-07-01T12:00Z,0.1", "2026-07-01T14:00Z,0.2"))
    weather.covers(NOON, NOON + 2 * HOUR)
    for start, end in ((NOON - 60, NOON + HOUR), (NOON, NOON + 2 * HOUR + 60)):
        with pytest.raises(WeatherError, match="covers 2026-07-01T12:00Z to 2026-07-01T14:00Z"):
            weather.covers(start, end)


def test_defaults_are_not_given() -> None:
    weather = Weather()
    at = np.array([NOON])
    assert weather.sample("cloud_fraction", at) == 0.0
    assert weather.sample("divergence_per_s", at) == 0.0
    assert weather.sample("aerosol_optical_depth", at) == pytest.approx([0.1])
    assert not any(weather.given(name) for name in COLUMNS)
    for name in ("wind_10m_m_s", "pressure_gradient_wind_m_s", "rain_mm_h", "net_radiation_W_m2", "temperature_2m_C"):
        assert np.isnan(weather.sample(name, at)).all()


def test_one_constant_replaces_a_column(tmp_path: Path) -> None:
    weather = read_weather(_write(tmp_path, "time,cloud_fraction", "2026-07-01T12:00Z,0.1", "2026-07-01T14:00Z,0.2"))
    changed = weather.with_constant("cloud_fraction", 0.7)
    assert changed.sample("cloud_fraction", np.array([NOON])) == pytest.approx([0.7])
    assert weather.sample("cloud_fraction", np.array([NOON])) == pytest.approx([0.1])


def test_an_input_is_shifted_within_its_bounds(tmp_path: Path) -> None:
    path = _write(
        tmp_path,
        "time,cloud_fraction,temperature_2m_C,wind_10m_from_deg",
        "2026-07-01T12:00Z,0.1,20,350",
        "2026-07-01T14:00Z,0.9,24,350",
    )
    weather = read_weather(path)
    at = np.array([NOON, NOON + 2 * HOUR])
    assert weather.shifted("cloud_fraction", 0.3).sample("cloud_fraction", at) == pytest.approx([0.4, 1.0])
    assert weather.shifted("temperature_2m_C", -2.0).sample("temperature_2m_C", at) == pytest.approx([291.15, 295.15])
    assert weather.shifted("wind_10m_from_deg", 20.0).sample("wind_10m_from_deg", at) == pytest.approx([10.0, 10.0])
    assert weather.shifted("divergence_per_s", 1e-5).sample("divergence_per_s", at) == pytest.approx([1e-5, 1e-5])
    with pytest.raises(WeatherError, match="cannot be shifted"):
        weather.shifted("rain_mm_h", 1.0)


def test_unknown_input_is_suggested() -> None:
    with pytest.raises(WeatherError, match="did you mean 'cloud_fraction'"):
        Weather().sample("cloud_fracton", np.array([NOON]))


@given(
    st.lists(st.floats(0.0, 1.0), min_size=2, max_size=12),
    st.floats(0.0, 1.0),
)
def test_samples_lie_between_neighbours(values: list[float], where: float) -> None:
    times = NOON + HOUR * np.arange(len(values))
    series = Series(times, np.asarray(values))
    at = NOON + where * HOUR * (len(values) - 1)
    before = min(int((at - NOON) // HOUR), len(values) - 2)
    low, high = sorted(values[before : before + 2])
    found = float(series.sample(np.array([at]), hold=False)[0])
    assert low - 1e-9 <= found <= high + 1e-9
    for time, value in zip(times, values, strict=True):
        assert float(series.sample(np.array([time]), hold=False)[0]) == pytest.approx(value, abs=1e-12)


def test_acting_inputs_hold_their_end_measured_ones_do_not() -> None:
    for name in COLUMNS:
        weather = Weather(series={name: Series(np.array([NOON, NOON + HOUR]), np.array([1.0, 2.0]))})
        late = float(weather.sample(name, np.array([NOON + 2 * HOUR]))[0])
        assert np.isnan(late) != (name in ACTING)


def test_fluxes(tmp_path: Path) -> None:
    table = read_fluxes(
        _write(
            tmp_path,
            "time,sensible_flux_W_m2,latent_flux_W_m2,friction_velocity_m_s",
            "2026-07-01T12:00Z,100,50,",
            "2026-07-01T13:00Z,200,150,",
        )
    )
    at = np.array([NOON + HOUR / 2])
    assert table.sample("sensible_flux_W_m2", at) == pytest.approx([150.0])
    assert table.sample("latent_flux_W_m2", at) == pytest.approx([100.0])
    assert not table.given("friction_velocity_m_s")
    assert np.isnan(table.sample("friction_velocity_m_s", at)).all()
    with pytest.raises(WeatherError, match="shorten the run"):
        table.covers(NOON, NOON + 2 * HOUR)


def test_observed_by_height(tmp_path: Path) -> None:
    table = read_observed(
        _write(
            tmp_path,
            "time,temperature_1.5m_C,temperature_9m_C,dewpoint_2m_C,wind_10m_m_s",
            "2026-07-01T12:00Z,20,19,10,3",
            "2026-07-01T17:00Z,22,,11,4",
        )
    )
    at = np.array([NOON, NOON + HOUR, NOON + 5 * HOUR])
    assert sorted(table.temperature) == [1.5, 9.0]
    found = table.sample("temperature", 1.5, at)
    assert found[[0, 2]] == pytest.approx([293.15, 295.15])
    assert np.isnan(found[1])  # inside a gap of five hours
    assert np.isnan(table.sample("temperature", 30.0, at)).all()
    assert table.sample("wind", 10.0, at)[0] == 3.0
    assert table.sample("dewpoint", 2.0, at)[2] == pytest.approx(284.15)


def test_crlf_and_byte_order_mark_are_read(tmp_path: Path) -> None:
    path = tmp_path / "table.csv"
    path.write_bytes(b"\xef\xbb\xbftime,cloud_fraction\r\n2026-07-01T12:00Z,0.5\r\n2026-07-01T13:00Z,0.5\r\n")
    assert read_weather(path).sample("cloud_fraction", np.array([NOON])) == pytest.approx([0.5])
