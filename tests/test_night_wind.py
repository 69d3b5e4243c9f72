"""The wind at nightfall: no jump at the hand-over, and a measured wind acts on the column."""

from __future__ import annotations

import math
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from forcing.air import GRAVITY, KAPPA, P_REFERENCE, R_DRY
from forcing.profile import Profile
from forcing.scenario import build
from forcing.scenario_parts import Parts
from forcing.weather import Weather
from slab.cycle import NIGHT, Part, Run, run

START = datetime(2026, 6, 20, 22, tzinfo=UTC)  # four hours before sunset at the site


def _profile(wind: float) -> Profile:
    """A neutral layer of 1500 m at 298 K under 5 K/km, with the same wind everywhere."""
    height = np.concatenate((np.arange(0.0, 1500.0, 100.0), np.arange(1500.0, 8001.0, 250.0)))
    theta = 298.0 + 0.005 * np.maximum(height - 1500.0, 0.0)
    steps = KAPPA * GRAVITY / R_DRY * np.diff(height) / (0.5 * (theta[1:] + theta[:-1]))
    exner = (97000.0 / P_REFERENCE) ** KAPPA - np.concatenate(([0.0], np.cumsum(steps)))
    pressure = P_REFERENCE * exner ** (1.0 / KAPPA)
    humidity = np.where(height <= 1500.0, 0.007, 0.003 * (pressure / pressure[15]) ** 3)
    flow = np.full(height.size, wind)
    return Profile(
        height=height, pressure=pressure, theta=theta, humidity=humidity, u=flow, v=0.0 * flow, wind_known=True,
        humidity_known=True, valid=START, latitude=40.0, longitude=-99.0, elevation=400.0,
    )  # fmt: skip


def _run(aloft: float, measured: float | None) -> Run:
    weather = {} if measured is None else {"wind_10m_m_s": measured}
    settings = {
        "site": {"latitude": 40.0, "longitude": -99.0, "elevation": 400.0, "time_zone": "Etc/GMT+6"},
        "weather": weather,
        "run": {"hours": 11.0},
    }
    parts = Parts(settings, _profile(aloft), None, None, Weather())
    return run(build(settings, folder=Path(), source="invented", parts=parts))


def _night(done: Run) -> Part:
    """The night that follows the day."""
    return [part for part in done.parts if part.kind == NIGHT][-1]


def test_friction_velocity_does_not_jump_at_the_hand_over() -> None:
    done = _run(8.0, None)
    first = _night(done).first
    friction = done.fields["friction_velocity"][first - 1 : first + 3]
    assert np.abs(np.diff(friction)).max() < 0.2 * friction[0]
    wind = done.fields["wind_10m"][first - 1 : first + 3]
    assert np.abs(np.diff(wind)).max() < 0.2 * wind[0]


def test_first_cells_follow_the_logarithmic_law_up_to_the_top_of_the_surface_layer() -> None:
    done = _run(8.0, None)
    part = _night(done)
    assert part.course is not None
    note = part.course.notes[part.first]
    speed, height = np.hypot(note.u, note.v), part.course.height
    top = 0.1 * done.fields["depth"][part.first - 1]
    z0 = done.ground.roughness_momentum
    inside = height < 0.9 * top
    law = np.log((height[inside] + z0) / z0) / math.log((top + z0) / z0)
    slab = float(np.interp(1.5 * top, height, speed))
    np.testing.assert_allclose(speed[inside] / slab, law, rtol=0.02)


@pytest.mark.parametrize("measured", [1.0, 3.0, 6.0])
def test_column_comes_to_the_measured_wind(measured: float) -> None:
    done = _run(8.0, measured)
    night = _night(done)
    late = slice(night.first + 6, night.last + 1)
    assert np.abs(done.fields["wind_10m"][late] - measured).mean() < 0.15 * measured + 0.3


def test_weaker_measured_wind_makes_a_stronger_inversion() -> None:
    contrast = []
    for measured in (1.0, 3.0, 6.0):
        done = _run(8.0, measured)
        high, low = (done.temperatures[-1, done.heights.index(z)] for z in (9.0, 1.5))
        contrast.append(float(high - low))
    assert contrast[0] > contrast[1] > contrast[2] > 0.0
