"""What the weather does during the run: constants or an hourly file; also flux and observed tables.

Column names carry the unit that people write; `Weather.sample` gives SI (`COLUMNS` holds the way to it).
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike

from forcing.errors import WeatherError
from forcing.series import Array, Column, Series, check_span, read_table, suggestion

_HOUR = 3600.0
_CELSIUS = {"offset": 273.15, "si_unit": "K"}

#: What acts on the air. It must cover the whole run; bounds are plausibility limits (common practice).
ACTING: Mapping[str, Column] = MappingProxyType(
    {
        "wind_10m_m_s": Column(0.0, 100.0, si_unit="m s-1"),
        "wind_10m_from_deg": Column(0.0, 360.0, si_unit="degree", direction=True),
        "pressure_gradient_wind_m_s": Column(0.0, 100.0, si_unit="m s-1"),
        "pressure_gradient_wind_from_deg": Column(0.0, 360.0, si_unit="degree", direction=True),
        "cloud_fraction": Column(0.0, 1.0, si_unit="1"),
        "cloud_base_m": Column(0.0, 20000.0, si_unit="m"),
        "aerosol_optical_depth": Column(0.0, 5.0, si_unit="1"),
        "ozone_cm": Column(0.1, 0.6, factor=0.01, si_unit="m"),
        "divergence_per_s": Column(-1e-4, 1e-4, si_unit="s-1"),
        "heat_advection_K_h": Column(-10.0, 10.0, factor=1.0 / _HOUR, si_unit="K s-1"),
        "moisture_advection_g_kg_h": Column(-10.0, 10.0, factor=1e-3 / _HOUR, si_unit="kg kg-1 s-1"),
    }
)
#: What was measured (or is known only in part). Before the first and after the last value it is unknown, NaN.
MEASURED: Mapping[str, Column] = MappingProxyType(
    {
        "rain_mm_h": Column(0.0, 500.0, factor=1.0 / _HOUR, si_unit="kg m-2 s-1"),
        "shortwave_down_W_m2": Column(-20.0, 1500.0, si_unit="W m-2"),
        "longwave_down_W_m2": Column(50.0, 700.0, si_unit="W m-2"),
        "net_radiation_W_m2": Column(-300.0, 1200.0, si_unit="W m-2"),
        "temperature_2m_C": Column(-90.0, 60.0, **_CELSIUS),  # type: ignore[arg-type]
        "dewpoint_2m_C": Column(-100.0, 40.0, **_CELSIUS),  # type: ignore[arg-type]
    }
)
COLUMNS: Mapping[str, Column] = MappingProxyType({**ACTING, **MEASURED})

#: What is assumed, in the unit of the name, where a scenario gives nothing. Aerosol 0.1: clean continental air, ozone
#: 0.3 cm: mid-latitude mean (both common practice); the rest is absence.
DEFAULTS: Mapping[str, float] = MappingProxyType(
    {
        "cloud_fraction": 0.0,
        "cloud_base_m": 2000.0,
        "aerosol_optical_depth": 0.1,
        "ozone_cm": 0.3,
        "divergence_per_s": 0.0,
        "heat_advection_K_h": 0.0,
        "moisture_advection_g_kg_h": 0.0,
    }
)

_FLUXES: Mapping[str, Column] = MappingProxyType(
    {
        "sensible_flux_W_m2": Column(-500.0, 1500.0, si_unit="W m-2"),
        "latent_flux_W_m2": Column(-500.0, 1500.0, si_unit="W m-2"),
        "friction_velocity_m_s": Column(0.0, 5.0, si_unit="m s-1"),
    }
)


def _posix(times: ArrayLike) -> Array:
    return np.asarray(times, dtype=np.float64)


@dataclass(frozen=True, slots=True)
class Weather:
    """Weather of a run.

    Attributes
    ----------
    constants : mapping
        Given constants by name, in the unit of the name.
    series : mapping
        Columns of the file by name, SI.
    file : str
        Path of the file, empty without one.
    defaults : mapping
        What stands in for an acting input that is not given, in the unit of the name.
    """

    constants: Mapping[str, float] = field(default_factory=dict)
    series: Mapping[str, Series] = field(default_factory=dict)
    file: str = ""
    defaults: Mapping[str, float] = field(default_factory=lambda: DEFAULTS)

    def given(self, name: str) -> bool:
        """Whether the scenario gives the input, so that no default stands in for it."""
        _column(name)
        return name in self.constants or name in self.series

    def sample(self, name: str, posix_seconds: ArrayLike) -> Array:
        """Input at the given times, SI (see `COLUMNS`); linear in time, a direction turns the shorter way.

        Parameters
        ----------
        name : str
            Name as in the scenario.
        posix_seconds : array (n,)
            Seconds since 1970 UTC.

        Returns
        -------
        array (n,)
            NaN where the input is neither given nor defaulted, and where a measured one was not measured. Acting
            inputs hold their end value outside the file; `covers` has checked that a run does not get there.
        """
        column = _column(name)
        times = _posix(posix_seconds)
        if name in self.series:
            return self.series[name].sample(times, hold=name in ACTING)
        value = self.constants.get(name, self.defaults.get(name, math.nan))
        return np.full(times.shape, column.si(value))

    def covers(self, start: float, end: float) -> None:
        """Raise `WeatherError` where the file leaves a gap over 3 h, or does not reach, in the span [s since 1970 UTC]."""
        for name, series in self.series.items():
            check_span(series, name, start, end, place=self.file, ends=name in ACTING)

    def with_constant(self, name: str, value: float) -> Weather:
        """Weather with one input held at a constant, in the unit of its name."""
        _column(name)
        rest = {key: series for key, series in self.series.items() if key != name}
        return Weather({**self.constants, name: value}, rest, self.file, self.defaults)

    def shifted(self, name: str, amount: float) -> Weather:
        """Weather with one input shifted by an amount in the unit of its name, kept within its bounds.

        A direction turns by the amount. An input that is neither given nor defaulted cannot be shifted.
        """
        column = _column(name)
        if name in self.series:
            old = self.series[name]
            values = old.values + column.factor * amount
            values = (
                values % 360.0 if column.direction else np.clip(values, column.si(column.low), column.si(column.high))
            )
            series = {**self.series, name: Series(old.posix, values, old.direction)}
            return Weather(self.constants, series, self.file, self.defaults)
        value = self.constants.get(name, self.defaults.get(name))
        if value is None:
            raise WeatherError(f"{name} is not given, so it cannot be shifted", remedy="give it in the scenario")
        moved = value + amount
        return self.with_constant(name, moved % 360.0 if column.direction else min(max(moved, column.low), column.high))


@dataclass(frozen=True, slots=True)
class FluxTable:
    """Surface fluxes from a file: sensible and latent heat [W m-2, positive upward], friction velocity [m/s] if there."""

    series: Mapping[str, Series]
    file: str

    def given(self, name: str) -> bool:
        """Whether the column is in the table."""
        return name in self.series

    def sample(self, name: str, posix_seconds: ArrayLike) -> Array:
        """Column at the given times [s since 1970 UTC], linear in time, NaN if the column is not there."""
        times = _posix(posix_seconds)
        if name not in _FLUXES:
            raise WeatherError(f"unknown flux '{name}'", remedy=suggestion(name, _FLUXES))
        if name not in self.series:
            return np.full(times.shape, math.nan)
        return self.series[name].sample(times, hold=True)

    def covers(self, start: float, end: float) -> None:
        """Raise `WeatherError` where a column leaves a gap over 3 h in the span [s since 1970 UTC] or does not reach."""
        for name, series in self.series.items():
            check_span(series, name, start, end, place=self.file, ends=True)


@dataclass(frozen=True, slots=True)
class ObservedTable:
    """Readings of a tower or screen, to compare with: SI series by height [m] above ground.

    ``temperature`` [K], ``dewpoint`` [K], ``wind`` [m/s].
    """

    temperature: Mapping[float, Series]
    dewpoint: Mapping[float, Series]
    wind: Mapping[float, Series]
    file: str

    def sample(self, quantity: str, height: float, posix_seconds: ArrayLike) -> Array:
        """Reading at the given times [s since 1970 UTC]; NaN outside the table and in gaps over 3 h."""
        series: Mapping[float, Series] = {
            "temperature": self.temperature,
            "dewpoint": self.dewpoint,
            "wind": self.wind,
        }[quantity]
        times = _posix(posix_seconds)
        if height not in series:
            return np.full(times.shape, math.nan)
        return series[height].sample(times, hold=False)


def _column(name: str) -> Column:
    column = COLUMNS.get(name)
    if column is None:
        raise WeatherError(f"unknown weather input '{name}'", remedy=suggestion(name, COLUMNS))
    return column


def check_constant(name: str, value: float, *, place: str) -> None:
    """Raise `WeatherError` where a constant lies outside the bounds of its name."""
    column = _column(name)
    if not column.low <= value <= column.high:
        raise WeatherError(
            f"{name} is {value:g}, outside {column.low:g} to {column.high:g}", place=place, remedy="check its unit"
        )


def read_weather(path: Path) -> Weather:
    """Weather from an hourly CSV with the columns of `COLUMNS` that it has."""
    series = read_table(path, COLUMNS.get, list(COLUMNS))
    if not series:
        raise WeatherError("has a time column only", place=str(path), remedy="add columns: " + ", ".join(COLUMNS))
    return Weather(series=series, file=str(path))


def read_fluxes(path: Path) -> FluxTable:
    """Flux table: ``time, sensible_flux_W_m2, latent_flux_W_m2`` (positive upward) and maybe ``friction_velocity_m_s``."""
    series = read_table(path, _FLUXES.get, list(_FLUXES))
    for name in ("sensible_flux_W_m2", "latent_flux_W_m2"):
        if name not in series:
            raise WeatherError(f"has no values of '{name}'", place=str(path), remedy=f"add a column {name}")
    return FluxTable(series=series, file=str(path))


_OBSERVED = re.compile(r"(temperature|dewpoint|wind)_(\d+(?:\.\d+)?)m_(C|m_s)")


def _observed_column(name: str) -> Column | None:
    found = _OBSERVED.fullmatch(name)
    if found is None or (found[1] == "wind") != (found[3] == "m_s"):
        return None
    if found[1] == "wind":
        return Column(0.0, 100.0, si_unit="m s-1")
    return MEASURED["temperature_2m_C" if found[1] == "temperature" else "dewpoint_2m_C"]


def read_observed(path: Path) -> ObservedTable:
    """Observed table: ``time, temperature_<height>m_C, dewpoint_2m_C, wind_<height>m_m_s``, heights above ground."""
    names = ["temperature_2m_C", "temperature_9m_C", "dewpoint_2m_C", "wind_10m_m_s"]
    series = read_table(path, _observed_column, names)
    if not series:
        raise WeatherError("has a time column only", place=str(path), remedy="add columns such as " + ", ".join(names))
    found: dict[str, dict[float, Series]] = {"temperature": {}, "dewpoint": {}, "wind": {}}
    for name, one in series.items():
        match = _OBSERVED.fullmatch(name)
        if match is not None:
            found[match[1]][float(match[2])] = one
    return ObservedTable(**found, file=str(path))
