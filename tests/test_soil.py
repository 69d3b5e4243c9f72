"""Soil layers: heat is kept, waves and cooling follow the closed solutions of conduction."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from forcing.cover import cover, ground, names
from forcing.soil import damping_depth, implicit_soil, layer_thicknesses, soil_rates, soil_rates_from
from forcing.surface import periodic_soil, soil_layers

DAY = 86400.0


def march(flux, thicknesses, conductivity, capacity, step, seconds, start=0.0):
    """Heun steps through `soil_rates`; returns the temperatures."""
    n = len(thicknesses)
    state, first, second = [start] * n, [0.0] * n, [0.0] * n
    for k in range(round(seconds / step)):
        t = k * step
        soil_rates(state, thicknesses, conductivity, capacity, flux(t), first)
        guess = [a + step * b for a, b in zip(state, first, strict=True)]
        soil_rates(guess, thicknesses, conductivity, capacity, flux(t + step), second)
        state = [a + 0.5 * step * (b + c) for a, b, c in zip(state, first, second, strict=True)]
    return state


@given(
    temperatures=st.lists(st.floats(230.0, 330.0), min_size=6, max_size=6),
    flux=st.floats(-300.0, 600.0),
    conductivity=st.floats(0.05, 4.0),
    capacity=st.floats(2e5, 4e6),
)
def test_heat_content_changes_by_the_ground_flux_alone(temperatures, flux, conductivity, capacity):
    layers = layer_thicknesses(conductivity, capacity)
    out = [0.0] * 6
    soil_rates(temperatures, layers, conductivity, capacity, flux, out)
    gained = math.fsum(capacity * dz * rate for dz, rate in zip(layers, out, strict=True))
    assert gained == pytest.approx(flux, abs=1e-9 * (1.0 + conductivity * 100.0 / layers[0]))


@given(
    temperatures=st.lists(st.floats(230.0, 330.0), min_size=6, max_size=6),
    flux=st.floats(-300.0, 600.0),
    step=st.floats(10.0, 86400.0),
)
def test_implicit_step_keeps_heat(temperatures, flux, step):
    layers = layer_thicknesses(1.0, 2e6)
    base, answer = [0.0] * 6, [0.0] * 6
    implicit_soil(temperatures, layers, 1.0, 2e6, step, 0.0, base, answer)
    new = [b + a * flux for b, a in zip(base, answer, strict=True)]
    gained = math.fsum(2e6 * dz * (b - a) for dz, a, b in zip(layers, temperatures, new, strict=True))
    assert gained == pytest.approx(flux * step, rel=1e-9, abs=1e-4)


def test_implicit_step_is_the_explicit_one_for_a_short_step():
    layers = layer_thicknesses(1.0, 2e6)
    start = [300.0, 295.0, 291.0, 290.0, 289.5, 289.0]
    base, answer, rates = [0.0] * 6, [0.0] * 6, [0.0] * 6
    implicit_soil(start, layers, 1.0, 2e6, 0.01, 0.0, base, answer)
    soil_rates(start, layers, 1.0, 2e6, 120.0, rates)
    for before, b, a, rate in zip(start, base, answer, rates, strict=True):
        assert (b + 120.0 * a - before) / 0.01 == pytest.approx(rate, rel=1e-3, abs=1e-9)


def test_held_bottom_stays():
    layers = layer_thicknesses(1.0, 2e6)
    base, answer = [0.0] * 6, [0.0] * 6
    implicit_soil([300.0] * 5 + [285.0], layers, 1.0, 2e6, 3600.0, 1.0, base, answer)
    assert base[5] == 285.0
    assert answer[5] == 0.0


def test_rates_inside_a_longer_state_are_the_same():
    layers = layer_thicknesses(1.0, 2e6)
    soil = [300.0, 295.0, 291.0, 290.0, 289.5, 289.0]
    plain, longer = [0.0] * 6, [7.0] * 9
    soil_rates(soil, layers, 1.0, 2e6, 50.0, plain)
    soil_rates_from([1.0, 2.0, *soil, 3.0], 2, layers, 1.0, 2e6, 50.0, longer)
    assert longer == [7.0, 7.0, *plain, 7.0]


# 2 R sqrt(t) / (sqrt(pi) mu): constant loss from a half-space (Brunt 1932; Carslaw & Jaeger 1959, section 2.9)
@pytest.mark.parametrize(
    ("loss", "admittance", "hours", "cooling"),
    [(80, 1000, 9, 16.2487), (60, 600, 1, 6.7703), (100, 2000, 12, 11.7265), (80, 600, 4, 2 * 9.027)],
)
def test_brunt_cooling_on_a_fine_grid(loss, admittance, hours, cooling):
    conductivity = 1.0
    capacity = admittance**2 / conductivity
    depth = damping_depth(conductivity, capacity, DAY)
    layers = [depth / 40.0 * 1.03**i for i in range(130)]
    step = 0.3 * layers[0] ** 2 * capacity / conductivity
    step = hours * 3600.0 / math.ceil(hours * 3600.0 / step)
    state = march(lambda t: -float(loss), layers, conductivity, capacity, step, hours * 3600.0)
    surface = state[0] - loss * 0.5 * layers[0] / conductivity
    assert -surface == pytest.approx(cooling, rel=0.005)


def wave_error(count_per_depth: int) -> float:
    """Worst error [K] of the second day's wave at two depths, for uniform layers."""
    conductivity, capacity, amplitude = 1.0, 2e6, 100.0
    omega = 2.0 * math.pi / DAY
    depth = damping_depth(conductivity, capacity, DAY)
    dz = depth / count_per_depth
    layers = [dz] * (7 * count_per_depth)
    step = DAY / math.ceil(DAY / (0.4 * dz * dz * capacity / conductivity))
    scale = amplitude / math.sqrt(conductivity * capacity * omega)
    n = len(layers)
    mid = [(i + 0.5) * dz for i in range(n)]

    def exact(z: float, t: float) -> float:
        # periodic conduction into a half-space, Carslaw & Jaeger 1959, section 2.6
        return scale * math.exp(-z / depth) * math.sin(omega * t - z / depth - math.pi / 4.0)

    state = [exact(z, 0.0) for z in mid]
    first, second = [0.0] * n, [0.0] * n
    for k in range(round(0.5 * DAY / step)):
        soil_rates(state, layers, conductivity, capacity, amplitude * math.sin(omega * k * step), first)
        guess = [a + step * b for a, b in zip(state, first, strict=True)]
        soil_rates(guess, layers, conductivity, capacity, amplitude * math.sin(omega * (k + 1) * step), second)
        state = [a + 0.5 * step * (b + c) for a, b, c in zip(state, first, second, strict=True)]
    end = round(0.5 * DAY / step) * step
    return max(abs(state[i] - exact(mid[i], end)) for i in range(3 * count_per_depth))


def test_daily_wave_is_met_to_second_order():
    coarse, fine = wave_error(4), wave_error(8)
    assert fine < 0.05
    assert math.log2(coarse / fine) == pytest.approx(2.0, abs=0.35)


def test_six_layers_carry_the_daily_wave():
    """The surface wave through the six default layers is the half-space's within 6 %."""
    conductivity, capacity, amplitude = 1.0, 2e6, 100.0
    layers = layer_thicknesses(conductivity, capacity)
    omega = 2.0 * math.pi / DAY
    n, step = 6, 300.0
    state, first, second = [0.0] * n, [0.0] * n, [0.0] * n
    seen = []
    for k in range(round(20 * DAY / step)):
        flux = amplitude * math.sin(omega * k * step)
        if k * step >= 19 * DAY:
            seen.append(state[0] + 0.5 * flux * layers[0] / conductivity)
        soil_rates(state, layers, conductivity, capacity, flux, first)
        guess = [a + step * b for a, b in zip(state, first, strict=True)]
        soil_rates(guess, layers, conductivity, capacity, amplitude * math.sin(omega * (k + 1) * step), second)
        state = [a + 0.5 * step * (b + c) for a, b, c in zip(state, first, second, strict=True)]
    expected = amplitude / math.sqrt(conductivity * capacity * omega)
    assert 0.5 * (max(seen) - min(seen)) == pytest.approx(expected, rel=0.06)


@pytest.mark.parametrize("name", names())
def test_first_layer_is_stable_for_explicit_steps_of_five_minutes(name):
    one = ground(cover(name), 0.5)
    dz = soil_layers(one)[0]
    assert dz * dz * one.soil_heat_capacity / (2.0 * one.soil_conductivity) > 500.0


def day_of(one, days):
    hours = range(24)
    sun = [max(0.0, 800.0 * math.sin((h - 6) / 12 * math.pi)) for h in hours]
    air = [290.0 + 6.0 * math.sin((h - 9) / 12 * math.pi) for h in hours]
    out = [0.0] * 6
    skin = periodic_soil(
        one, soil_layers(one), sun, [320.0] * 24, air, [0.007] * 24, [3.0] * 24, [800.0] * 24, [0.0] * 24, 20.0, 10.0,
        97000.0, 289.0, 3600.0, days, out,
    )  # fmt: skip
    return out, skin


def test_start_is_periodic_and_keeps_the_deep_temperature():
    one = ground(cover("short grass"), 0.5)
    six, skin_six = day_of(one, 6)
    twelve, skin_twelve = day_of(one, 12)
    assert six[5] == 289.0
    assert skin_six == pytest.approx(skin_twelve, abs=0.1)
    assert six == pytest.approx(twelve, abs=0.4)
    assert skin_six < six[0] < six[2]  # at midnight the soil is warmer with depth
