"""The tabulated air aloft: exact integrals, and what sinking and rising do to them."""

from __future__ import annotations

import math

import numpy as np
import pytest
from column import column
from hypothesis import given, settings
from hypothesis import strategies as st

from slab.column import Aloft, from_profile, height_of, linear, mass_of, origins, sample

POINTS = ((0.0, 290.0), (150.0, 294.0), (1400.0, 296.0), (1500.0, 299.0), (4200.0, 310.0), (6000.0, 316.0))
MOISTURE = (0.010, 0.0095, 0.008, 0.005, 0.002, 0.001)


@pytest.fixture(scope="module")
def air() -> Aloft:
    return from_profile(column(POINTS, humidity=MOISTURE, wind=5.0, surface_pressure=97000.0))


def by_quadrature(air: Aloft, level: float, sunk: float) -> tuple[float, float]:
    """Integrals of a sunken profile by the midpoint rule on 200 000 points."""
    edges = np.linspace(0.0, level, 200001)
    middle = 0.5 * (edges[1:] + edges[:-1])
    start = origins(air, middle, sunk)
    d = level / 200000
    return (
        float(np.sum(np.interp(start, np.asarray(air.mass), np.asarray(air.theta))) * d),
        float(np.sum(np.interp(start, np.asarray(air.mass), np.asarray(air.humidity))) * d),
    )


@pytest.mark.parametrize("sunk", [0.0, 0.3, 0.8, -0.3, -0.7])
@pytest.mark.parametrize("height", [40.0, 800.0, 1900.0, 2100.0, 3000.0])
def test_integrals_agree_with_quadrature(air: Aloft, sunk: float, height: float) -> None:
    level = mass_of(air, height)
    found = sample(air, level, sunk)
    theta, humidity = by_quadrature(air, level, sunk)
    assert found.sum_theta == pytest.approx(theta, rel=1e-8)
    assert found.sum_humidity == pytest.approx(humidity, rel=1e-7)


def test_parts_below_the_cap_are_told_apart(air: Aloft) -> None:
    deep, shallow = mass_of(air, 3000.0), mass_of(air, 1000.0)
    assert sample(air, shallow, 0.2).sum_theta_below_cap == sample(air, shallow, 0.2).sum_theta
    at_cap = sample(air, air.cap, 0.2).sum_theta
    assert sample(air, deep, 0.2).sum_theta_below_cap == pytest.approx(at_cap, rel=1e-12)


@given(height=st.floats(1.0, 5000.0), sunk=st.floats(-0.8, 0.8))
@settings(max_examples=60, deadline=None)
def test_sinking_is_undone_by_rising(height: float, sunk: float) -> None:
    air = linear(theta_ground=290.0, gradient=0.004, top=50000.0)._replace(cap=2000.0)
    once = float(origins(air, np.array([height]), sunk)[0])
    back = float(origins(air, np.array([once]), -sunk)[0])
    assert back == pytest.approx(height, rel=1e-9)


@given(height=st.floats(1.0, 5000.0), sunk=st.floats(0.001, 0.8))
@settings(max_examples=60, deadline=None)
def test_sunken_air_comes_from_above_and_is_warmer(height: float, sunk: float) -> None:
    air = linear(theta_ground=290.0, gradient=0.004)
    assert sample(air, height, sunk).theta > sample(air, height, 0.0).theta


def test_sinking_moves_a_parcel_as_the_law_says(air: Aloft) -> None:
    """Integrate dm/dt = -D min(m, cap) by tiny steps from the origin and arrive at the level."""
    for height in (500.0, 1990.0, 2600.0):
        level, sunk = mass_of(air, height), 0.4
        m = float(origins(air, np.array([level]), sunk)[0])
        for _ in range(20000):
            m -= sunk / 20000 * min(m, air.cap)
        assert m == pytest.approx(level, rel=1e-4)


def test_height_and_mass_are_inverse(air: Aloft) -> None:
    for height in (0.0, 10.0, 333.0, 1999.0, 5200.0):
        assert height_of(air, mass_of(air, height)) == pytest.approx(height, abs=1e-8)


def test_mass_is_hydrostatic(air: Aloft) -> None:
    profile = column(POINTS, humidity=MOISTURE, surface_pressure=97000.0)
    expected = (profile.surface_pressure - profile.pressure) / 9.80665
    mine = np.interp(profile.height, np.asarray(air.height), np.asarray(air.mass))
    assert np.allclose(mine, expected, rtol=1e-4)
    assert math.isclose(mine[0], 0.0)
