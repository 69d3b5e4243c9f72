"""Invented columns for tests: potential temperature through given points, hydrostatic pressure."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import UTC, datetime

import numpy as np

from forcing.air import GRAVITY, KAPPA, P_REFERENCE, R_DRY, VIRTUAL
from forcing.sounding import Profile


def column(
    points: Sequence[tuple[float, float]],
    *,
    humidity: Sequence[float] | float = 0.0,
    wind: Sequence[float] | float | None = None,
    surface_pressure: float = P_REFERENCE,
    elevation: float = 100.0,
) -> Profile:
    """Profile through points (height m, theta K), with specific humidity and westerly wind at the same points.

    Pressure is hydrostatic: the Exner function falls by KAPPA g dz / (R theta_v).
    """
    height = np.array([z for z, _ in points])
    theta = np.array([t for _, t in points])
    fine = np.unique(np.concatenate([np.arange(0.0, height[-1], 20.0), height]))
    th = np.interp(fine, height, theta)
    moist = np.interp(fine, height, np.broadcast_to(humidity, height.shape))
    light = 1.0 / (th * (1.0 + VIRTUAL * moist))
    step = GRAVITY * KAPPA / R_DRY * np.diff(fine) * 0.5 * (light[1:] + light[:-1])
    exner = (surface_pressure / P_REFERENCE) ** KAPPA - np.concatenate([[0.0], np.cumsum(step)])
    u = np.interp(fine, height, np.broadcast_to(0.0 if wind is None else wind, height.shape))
    return Profile(
        height=fine,
        pressure=P_REFERENCE * exner ** (1.0 / KAPPA),
        theta=th,
        humidity=moist,
        u=u,
        v=np.zeros_like(fine),
        wind_known=wind is not None,
        humidity_known=bool(np.any(moist > 0.0)),
        valid=datetime(2024, 6, 1, 11, tzinfo=UTC),
        latitude=40.0,
        longitude=-95.0,
        elevation=elevation,
        station="invented",
    )


BROKEN = ((0.0, 288.0), (200.0, 290.0), (3200.0, 299.0))
"""288 K at the ground, +2 K to 200 m, then 3 K/km."""
AFTERNOON = (
    (0.0, 302.0),
    (30.0, 300.5),
    (60.0, 300.0),
    (1500.0, 300.0),
    (1600.0, 303.0),
    (4000.0, 315.0),
    (6000.0, 322.0),
)
"""Superadiabatic to 60 m, mixed to 1500 m, a cap of 3 K, then 5 K/km."""
