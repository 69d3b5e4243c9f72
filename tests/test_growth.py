"""Entrainment closures, the meeting point of slab and profile, and cumulus: signs, limits and order."""

from __future__ import annotations

import math

import numpy as np
import pytest
from column import column
from hypothesis import given, settings
from hypothesis import strategies as st
from invented import DAWN, fluxes, scenario

from forcing.air import GRAVITY, VIRTUAL, saturation_humidity
from slab.column import from_profile, linear, mass_of, sample
from slab.cycle import run
from slab.growth import (
    BUOYANT,
    CLOSURES,
    ENCROACHMENT,
    SHEAR_IN_CAP,
    SHEARED,
    cumulus_fraction,
    encroached_mass,
    entrainment,
    slab_at,
    velocity_scale,
)
from slab.linear import grow

FLUX, WIND = st.floats(-0.2, 0.5), st.floats(0.0, 1.0)
DEPTH, JUMP = st.floats(20.0, 4000.0), st.floats(-1.0, 8.0)


@given(flux=FLUX, friction=WIND, depth=DEPTH, jump=JUMP)
@settings(max_examples=300, deadline=None)
def test_entrainment_is_never_negative_and_never_over_the_cap(
    flux: float, friction: float, depth: float, jump: float
) -> None:
    for closure in CLOSURES.values():
        speed = entrainment(closure, flux, friction, depth, 300.0, jump)
        assert speed >= 0.0
        scale = velocity_scale(depth, flux, 300.0) ** 3 + SHEAR_IN_CAP * friction**3
        if closure.growth_cap > 0.0:
            assert speed <= closure.growth_cap * scale ** (1.0 / 3.0) * (1.0 + 1e-12)


@given(flux=st.floats(-0.5, 0.0), depth=DEPTH, jump=JUMP)
def test_a_downward_flux_without_wind_entrains_nothing(flux: float, depth: float, jump: float) -> None:
    for closure in CLOSURES.values():
        assert entrainment(closure, flux, 0.0, depth, 300.0, jump) == 0.0


@given(flux=st.floats(0.001, 0.5), friction=WIND, depth=DEPTH, jump=st.floats(0.05, 8.0))
def test_a_stronger_jump_slows_growth_and_a_stronger_flux_speeds_it(
    flux: float, friction: float, depth: float, jump: float
) -> None:
    speed = entrainment(SHEARED, flux, friction, depth, 300.0, jump)
    assert entrainment(SHEARED, flux, friction, depth, 300.0, 1.5 * jump) <= speed
    assert entrainment(SHEARED, 1.2 * flux, friction, depth, 300.0, jump) >= speed


def test_the_closure_is_the_published_one() -> None:
    """w_e = (a F + b u*^3 T / g h) / (jump + c u*^2 T / g h): Batchvarova and Gryning (1991), worked by hand."""
    ratio = 300.0 / (GRAVITY * 500.0)
    by_hand = (0.2 * 0.1 + 2.5 * 0.4**3 * ratio) / (1.5 + 8.0 * 0.4**2 * ratio)
    assert entrainment(SHEARED, 0.1, 0.4, 500.0, 300.0, 1.5) == pytest.approx(by_hand, rel=1e-12)
    assert entrainment(BUOYANT, 0.1, 0.4, 500.0, 300.0, 1.5) == pytest.approx(0.2 * 0.1 / 1.5, rel=1e-12)
    assert entrainment(ENCROACHMENT, 0.1, 0.4, 500.0, 300.0, 1.5) == 0.0


def test_growth_into_neutral_air_is_bounded_by_the_velocity_scale() -> None:
    assert entrainment(BUOYANT, 0.2, 0.0, 800.0, 300.0, 0.0) == pytest.approx(
        0.5 * velocity_scale(800.0, 0.2, 300.0), rel=1e-12
    )


@given(
    flux=st.floats(0.01, 0.3), gamma=st.floats(0.002, 0.01), friction=st.floats(0.0, 0.6), start=st.floats(50.0, 400.0)
)
@settings(max_examples=25, deadline=None)
def test_depths_come_in_order_for_the_same_fluxes(flux: float, gamma: float, friction: float, start: float) -> None:
    """Entrainment only ever adds to what heat alone does, and shear to what buoyancy does."""
    h = {
        name: float(
            grow(depth=start, jump=0.0, gradient=gamma, heat_flux=lambda t: flux, hours=5.0, closure=closure._replace(
                spin_up_factor=0.0), friction_velocity=friction).depth[-1]
        )
        for name, closure in CLOSURES.items()
    }  # fmt: skip
    assert h["encroachment"] <= h["buoyant"] + 0.5
    assert h["buoyant"] <= h["sheared"] + 0.5


def test_depths_come_in_order_on_a_measured_profile() -> None:
    points = ((0.0, 288.0), (200.0, 293.0), (1200.0, 294.0), (1300.0, 297.0), (7000.0, 322.0))
    given_fluxes = fluxes(DAWN, 10.0, lambda h: 250.0 * math.sin(math.pi * h / 12.0), lambda h: 80.0, lambda h: 0.3)
    profile = column(points, humidity=0.006, wind=6.0)
    depths = {}
    for name in CLOSURES:
        done = run(scenario(profile, fluxes=given_fluxes, hours=10.0, entrainment=name), by_day=True, heights=())
        depths[name] = done.fields["depth"][: done.parts[0].last]
    least = min(len(depth) for depth in depths.values())
    e, b, s = (depths[name][:least] for name in ("encroachment", "buoyant", "sheared"))
    assert e[-1] > 1300.0
    assert np.all(e[-12:] <= b[-12:] + 1.0)
    assert np.all(b[-12:] <= s[-12:] + 1.0)
    assert b[-1] < 1.3 * e[-1]


@given(
    heat=st.floats(0.0, 20000.0), vapour=st.floats(0.0, 5.0), sunk=st.floats(-0.3, 0.5), start=st.floats(20.0, 800.0)
)
@settings(max_examples=60, deadline=None)
def test_the_encroached_mass_is_where_slab_and_profile_meet(
    heat: float, vapour: float, sunk: float, start: float
) -> None:
    air = from_profile(
        column(((0.0, 290.0), (150.0, 294.0), (1400.0, 295.0), (1500.0, 299.0), (7000.0, 325.0)), humidity=0.008)
    )
    least = mass_of(air, start)
    mass = encroached_mass(air, air, 0.0, heat, vapour, sunk, least)
    assert mass >= least
    met = slab_at(mass, heat, vapour, sample(air, mass, sunk)).jump_virtual
    if mass > least:
        assert abs(met) < 1e-8
        just_below = slab_at(mass * (1.0 - 1e-6), heat, vapour, sample(air, mass * (1.0 - 1e-6), sunk)).jump_virtual
        assert just_below <= 1e-9
    else:
        assert met >= 0.0


def test_more_heat_than_the_table_holds_ends_at_its_top() -> None:
    air = linear(theta_ground=290.0, gradient=0.001, top=3000.0)
    assert encroached_mass(air, air, 0.0, 1e9, 0.0, 0.0, 100.0) == air.mass[-1]


def test_sinking_air_carries_an_unheated_top_down_whatever_the_step() -> None:
    """Without fluxes the top of an encroaching layer sinks with the air: h = h0 exp(-D t)."""
    done = grow(depth=500.0, jump=1.0, gradient=0.005, heat_flux=lambda t: 0.0, hours=6.0, closure=ENCROACHMENT,
                divergence=1e-5)  # fmt: skip
    assert done.depth[-1] == pytest.approx(500.0 * math.exp(-1e-5 * 21600.0), rel=1e-3)


def test_velocity_scale_needs_an_upward_flux() -> None:
    assert velocity_scale(1000.0, 0.0, 300.0) == 0.0
    assert velocity_scale(1000.0, -0.1, 300.0) == 0.0
    assert velocity_scale(1000.0, 0.1, 300.0) == pytest.approx((GRAVITY * 100.0 / 300.0) ** (1 / 3), rel=1e-12)


@given(
    humidity=st.floats(1e-6, 0.025), top=st.floats(250.0, 300.0), depth=st.floats(50.0, 4000.0),
    jump=st.floats(-0.012, 0.002), speed=st.floats(0.0, 1.0), scale=st.floats(-1.0, 3.0),
)  # fmt: skip
@settings(max_examples=300, deadline=None)
def test_cumulus_fraction_stays_between_nothing_and_a_half(
    humidity: float, top: float, depth: float, jump: float, speed: float, scale: float
) -> None:
    found = cumulus_fraction(humidity, top, 85000.0, depth, jump, speed, scale)
    assert 0.0 <= found <= 0.5
    if scale <= 0.0:
        assert found == 0.0
    wetter = cumulus_fraction(humidity * 1.02, top, 85000.0, depth, jump, speed, scale)
    assert wetter >= found - 1e-12


def test_cumulus_fraction_at_its_ends() -> None:
    saturated = saturation_humidity(285.0, 85000.0)
    ends = {
        share: cumulus_fraction(share * saturated, 285.0, 85000.0, 1500.0, -0.004, 0.03, 1.5)
        for share in (0.3, 1.0, 1.5)
    }
    assert ends[0.3] == 0.0
    assert ends[1.0] == pytest.approx(0.5)
    assert ends[1.5] == 0.5


@given(heat=st.floats(-100.0, 5000.0), vapour=st.floats(-1.0, 5.0), height=st.floats(30.0, 3000.0))
def test_the_slab_holds_exactly_its_deficit_and_the_profile_below(heat: float, vapour: float, height: float) -> None:
    air = linear(theta_ground=290.0, gradient=0.005, humidity_ground=0.01, humidity_gradient=-2e-6)
    below = sample(air, height, 0.0)
    slab = slab_at(height, heat, vapour, below)
    assert slab.theta * height - below.sum_theta == pytest.approx(heat, abs=1e-6)
    assert slab.humidity * height - below.sum_humidity == pytest.approx(vapour, abs=1e-9)
    warm = below.theta * (1.0 + VIRTUAL * below.humidity) - slab.theta * (1.0 + VIRTUAL * slab.humidity)
    assert slab.jump_virtual == pytest.approx(warm, abs=1e-9)
