"""The day's stepping: the forecast's tolerance against one 40 times finer, and the order of the pair."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from itertools import pairwise
from typing import NamedTuple

import numpy as np
import pytest
from column import column
from invented import DAWN, fluxes, scenario

from forcing.scenario_types import Scenario
from forcing.sounding import Profile
from slab.cycle import Run, run
from slab.growth import Closure
from slab.linear import grow
from slab.march import STANDARD, Control

FINE = STANDARD._replace(depth_tolerance=STANDARD.depth_tolerance / 40.0)
METRES, KELVINS, BURST = 1.0, 0.02, 60.0
HOURS = 12.0
COVERS = ("short grass", "green crop", "stubble", "dry bare soil", "deciduous forest")
CLOSURES = ("sheared", "buoyant", "encroachment")


class Case(NamedTuple):
    """One invented day."""

    family: str
    number: int
    scenario: Scenario


def _morning(rng: np.random.Generator, *, residual: bool, coolest: float, wind: float, moist: float, pressure: float,
             elevation: float) -> Profile:  # fmt: skip
    """A surface inversion under a stable or a residual layer, a cap, and free air."""
    inversion, strength = rng.uniform(80.0, 350.0), rng.uniform(2.0, 9.0)
    residual_top = inversion + rng.uniform(500.0, 1900.0)
    lapse = rng.uniform(0.0, 0.3e-3) if residual else rng.uniform(2.5e-3, 6e-3)
    cap, free = rng.uniform(0.5, 5.0), rng.uniform(3e-3, 6e-3)
    ground = coolest + rng.uniform(0.0, 10.0)
    at_top = ground + strength + lapse * (residual_top - inversion)
    points = (
        (0.0, ground),
        (0.4 * inversion, ground + 0.65 * strength),
        (inversion, ground + strength),
        (residual_top, at_top),
        (residual_top + 150.0, at_top + cap),
        (8000.0, at_top + cap + free * (7850.0 - residual_top)),
    )
    dry = rng.uniform(0.3, 0.7)
    humidity = (moist, moist, 0.95 * moist, 0.85 * moist, dry * moist, 0.05 * moist)
    speed = (0.3 * wind, 0.8 * wind, wind, wind, 1.2 * wind, 1.5 * wind)
    return column(points, humidity=humidity, wind=speed, surface_pressure=pressure, elevation=elevation)


def _half_sine(most: float) -> Callable[[float], float]:
    """A flux [W m-2] that rises and falls within 13 hours."""
    return lambda hours: most * math.sin(math.pi * hours / 13.0)


def _cases() -> Iterator[Case]:
    sizes = {"plain": 10, "residual": 14, "calm": 8, "high": 8, "wet": 10, "sinking": 6}
    n = 0
    for family, size in sizes.items():
        for number in range(size):
            rng = np.random.default_rng(1000 + n)
            high = family == "high"
            wind = rng.uniform(0.0, 0.8) if family == "calm" else rng.uniform(3.0, 12.0)
            wet = family == "wet"
            profile = _morning(
                rng, residual=family == "residual" or (family != "plain" and number % 2 == 1),
                coolest=312.0 if high else 295.0 if wet else 286.0, wind=wind,
                moist=rng.uniform(0.010, 0.014) if wet else rng.uniform(0.002, 0.005 if high else 0.007),
                pressure=rng.uniform(65000.0, 83000.0) if high else rng.uniform(94000.0, 101000.0),
                elevation=2500.0 if high else 100.0,
            )  # fmt: skip
            imposed = fluxes(DAWN, HOURS, _half_sine(rng.uniform(120.0, 420.0)), _half_sine(rng.uniform(30.0, 350.0)))
            weather = {"cloud_fraction": rng.uniform(0.0, 0.4)}
            if family == "sinking":
                weather |= {"divergence_per_s": rng.uniform(2e-6, 2e-5), "heat_advection_K_h": rng.uniform(-0.3, 0.3)}
            day = scenario(
                profile, cover=COVERS[n % len(COVERS)],
                soil_moisture=rng.uniform(0.75, 1.0) if wet else rng.uniform(0.0, 0.5), weather=weather,
                fluxes=imposed if n % 4 == 3 else None, hours=HOURS, entrainment=CLOSURES[n % 3],
            )  # fmt: skip
            yield Case(family, number, day)
            n += 1


CASES = tuple(_cases())


def run_pair(day: Scenario) -> tuple[Run, Run]:
    return tuple(run(day, control=c, heights=(), by_day=True) for c in (STANDARD, FINE))  # type: ignore[return-value]


def _burst(depth: np.ndarray, time: np.ndarray) -> np.ndarray:
    """Depth [m] that the finer run gains or loses in a minute at each knot where it grows by over 0.3 m/s, else 0."""
    speed = np.abs(np.diff(depth)) / np.diff(time)
    near = np.maximum(np.append(speed, 0.0), np.insert(speed, 0, 0.0))
    return np.where(near > 0.3, BURST * near, 0.0)


@pytest.mark.parametrize("case", CASES, ids=[f"{c.family}-{c.number}-{c.scenario.run.entrainment}" for c in CASES])
def test_depth_and_theta_have_converged(case: Case) -> None:
    """The finer run has the same knots, so its forcing is the same; only the steps between knots are finer."""
    usual, finer = run_pair(case.scenario)
    assert usual.parts[0].last == finer.parts[0].last
    day = slice(0, usual.parts[0].last + 1)
    depth, exact = usual.fields["depth"][day], finer.fields["depth"][day]
    assert np.nanmax(exact) > exact[0] + 50.0, "the layer grows at all"
    allowed = METRES + _burst(exact, finer.time[day])
    assert np.all(np.abs(depth - exact) < allowed), np.max(np.abs(depth - exact) / allowed)
    assert np.max(np.abs(usual.fields["theta"][day] - finer.fields["theta"][day])) < KELVINS
    assert np.max(np.abs(usual.fields["humidity"][day] - finer.fields["humidity"][day])) < 2e-5


def test_the_days_are_as_varied_as_asked() -> None:
    assert len(CASES) >= 48
    tally = {family: sum(c.family == family for c in CASES) for family in {c.family for c in CASES}}
    assert tally["residual"] >= 10
    assert tally["calm"] >= 6
    assert all(np.max(np.hypot(c.scenario.profile.u, c.scenario.profile.v)) < 1.5 for c in CASES if c.family == "calm")
    assert sum(c.scenario.profile.elevation > 1500.0 for c in CASES) >= 6
    assert sum(c.scenario.profile.humidity[0] >= 0.010 for c in CASES) >= 6
    assert {c.scenario.run.entrainment for c in CASES} == set(CLOSURES)
    imposed = [c for c in CASES if c.scenario.fluxes is not None]
    assert {c.scenario.run.entrainment for c in imposed} == set(CLOSURES)


@pytest.mark.parametrize("reuse", [0.0, 1.0])
@pytest.mark.parametrize("closure", [Closure(0.2, 0.0, 0.0, 0.0, 0.0), Closure(0.2, 2.5, 8.0, 0.0, 0.0)])
def test_the_pair_is_of_second_order(closure: Closure, reuse: float) -> None:
    """Halving the step of a smooth case divides the error by four."""

    def depth(step: float) -> float:
        blind = Control(depth_tolerance=1e9, longest_step=step, reuse=reuse)
        done = grow(depth=400.0, jump=1.0, gradient=0.005, heat_flux=lambda t: 0.1, hours=4.0, closure=closure,
                    friction_velocity=0.3, control=blind)  # fmt: skip
        return float(done.depth[-1])

    exact = depth(1.0)
    errors = [abs(depth(step) - exact) for step in (60.0, 30.0, 15.0)]  # a knot every 120 s: nothing is reused over it
    for coarse, fine in pairwise(errors):
        assert math.log2(coarse / fine) == pytest.approx(2.0, abs=0.35)
