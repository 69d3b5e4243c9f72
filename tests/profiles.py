"""Soundings made for tests: an invented field at 310 m, stable below, well mixed above."""

from __future__ import annotations

from datetime import UTC, datetime

import numpy as np
from numpy.typing import ArrayLike

from forcing.sounding import Profile, Sounding

VALID = datetime(2026, 7, 1, 3, 30, tzinfo=UTC)
PRESSURE = (980.0, 950.0, 900.0, 850.0, 800.0, 700.0, 600.0, 500.0)  # hPa
TEMPERATURE = (12.0, 16.0, 13.0, 9.0, 5.0, -2.0, -8.0, -18.0)  # C
DEWPOINT = (9.0, 8.0, 5.0, 3.0, -2.0, -15.0, -20.0, -35.0)  # C
NONE = (np.nan,) * len(PRESSURE)
LIGHT = (2.0,) * len(PRESSURE)  # m s-1
SOUTHERLY = (200.0,) * len(PRESSURE)  # degrees


def sounding(
    pressure: ArrayLike = PRESSURE,
    temperature: ArrayLike = TEMPERATURE,
    dewpoint: ArrayLike = DEWPOINT,
    height: ArrayLike = NONE,
    wind_speed: ArrayLike = LIGHT,
    wind_from: ArrayLike = SOUTHERLY,
    elevation: float | None = 310.0,
    surface: int | None = None,
    heights_above_ground: bool = False,
) -> Sounding:
    """Make a sounding from hPa and C."""
    p = np.asarray(pressure, dtype=float) * 100.0
    return Sounding(
        p,
        np.asarray(height, dtype=float),
        np.asarray(temperature, dtype=float) + 273.15,
        np.asarray(dewpoint, dtype=float) + 273.15,
        np.asarray(wind_speed, dtype=float),
        np.asarray(wind_from, dtype=float),
        lines=tuple(range(2, 2 + p.size)),
        valid=VALID,
        latitude=47.5,
        longitude=15.25,
        elevation=elevation,
        station="field",
        file="field.csv",
        format="csv",
        surface=surface,
        heights_above_ground=heights_above_ground,
    )


def as_sounding(profile: Profile) -> Sounding:
    """Write a prepared profile back as a sounding."""
    return Sounding(
        profile.pressure,
        profile.height + profile.elevation,
        profile.temperature,
        profile.dewpoint,
        np.hypot(profile.u, profile.v),
        np.degrees(np.arctan2(-profile.u, -profile.v)) % 360.0,
        lines=tuple(range(profile.height.size)),
        valid=profile.valid,
        latitude=profile.latitude,
        longitude=profile.longitude,
        elevation=profile.elevation,
        surface=0,
    )
