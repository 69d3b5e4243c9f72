"""The night column: solver, budgets, convergence, and the direction in which causes act."""

from __future__ import annotations

import dataclasses
import math
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from night_cases import GRASS, HOUR, Case, clear_evening, one, plains_nights
from scipy.integrate import solve_ivp

from forcing.errors import ModelError
from slab.night import NightForcing, NightOptions, NightResult, Setup, drive_ground, outside_air, prepare, run
from slab.night_grid import Column, cell_edges, numbers
from slab.night_solve import factor, solve
from slab.night_step import GAMMA
from slab.night_surface import BOUNDARIES
from slab.night_terms import right_side

NIGHT = 12.0 * HOUR


def night(case: Case, *, hours: float = 12.0, **options: object) -> NightResult:
    return run(case.start, GRASS, case.forcing, duration=hours * HOUR, options=NightOptions(**options))  # type: ignore[arg-type]


def flat(state: Column) -> np.ndarray:
    return np.concatenate([np.asarray(part, dtype=float) for part in state])


def unflat(values: np.ndarray, like: Column) -> Column:
    cuts = np.cumsum([len(part) for part in like])[:-1]
    return Column(*(numbers(part) for part in np.split(values, cuts)))


@pytest.fixture(scope="module")
def ordinary() -> NightResult:
    return night(clear_evening())


# --- the linear solver


def linear_case(closure: str, boundary: str) -> tuple[Setup, NightForcing, float]:
    case = clear_evening(sensible=one(-20.0), latent=one(5.0), surface_resistance=one(200.0))
    setup = prepare(case.start, GRASS, NightOptions(closure=closure, boundary=boundary, levels=14, top=800.0))
    z = np.asarray(setup.grid.height)
    state = setup.state
    for i in range(z.size):
        state.theta[i] = 280.0 + 0.01 * z[i] + 0.02 * math.sin(z[i])
        state.humidity[i] = 0.005 + 4e-6 * z[i]
        state.u[i] = 1.5 + 3.0 * math.log1p(z[i])
        state.v[i] = 1.0 + 0.3 * math.cos(0.1 * z[i])
    state.skin[0] = 278.0
    return setup, case.forcing, case.start.coriolis


@pytest.mark.parametrize("closure", ["short", "blend"])
@pytest.mark.parametrize("boundary", list(BOUNDARIES))
def test_solver_inverts_the_jacobian(closure: str, boundary: str) -> None:
    """Against a Jacobian by finite differences; the terms left out of J are of the order of gradient over theta."""
    setup, forcing, coriolis = linear_case(closure, boundary)
    outside = outside_air(forcing, setup, 0.0, coriolis, None)
    drive = drive_ground(setup, GRASS, forcing, 0.0, 300.0, 300.0)
    kernel = (setup.method, setup.grid, setup.foot, setup.soil)
    start = flat(setup.state)
    out, work = unflat(0.0 * start, setup.state), setup.work

    def side(values: np.ndarray) -> np.ndarray:
        right_side(*kernel, drive, outside, unflat(values, setup.state), out, work, False)
        return flat(out)

    jacobian = np.empty((start.size, start.size))
    for k in range(start.size):
        step = 1e-8 if 14 <= k < 28 else 1e-5
        nudge = np.zeros_like(start)
        nudge[k] = step
        jacobian[:, k] = (side(start + nudge) - side(start - nudge)) / (2.0 * step)
    gh = GAMMA * 60.0
    ground = right_side(*kernel, drive, outside, setup.state, work.rates, work, True)
    factor(setup.method, gh, coriolis, *kernel[1:], ground, setup.state, work)
    wanted = np.random.default_rng(3).normal(size=start.size) * np.where(np.arange(start.size) // 14 == 1, 1e-3, 1.0)
    solve(setup.method, gh, *kernel[1:], unflat(wanted, setup.state), work, out)
    answer = flat(out)
    rest = answer - gh * jacobian @ answer - wanted
    if boundary == "flux":
        rest[-1] = 0.0  # the skin of this boundary only follows; its row is kept diagonal
    assert np.abs(rest[14:28]).max() < 0.01 * np.abs(answer[14:28]).max()
    assert np.abs(np.delete(rest, slice(14, 28))).max() < 0.02 * np.abs(answer).max()


# --- budgets


@pytest.mark.parametrize("closure", ["short", "blend"])
@pytest.mark.parametrize("boundary", list(BOUNDARIES))
def test_heat_and_water_budgets_close(closure: str, boundary: str) -> None:
    seconds = np.array([0.0, 6.0 * HOUR, 14.0 * HOUR])
    case = clear_evening(
        divergence=one(1e-5), theta_rate=one(-1e-5), humidity_rate=one(1e-9), surface_resistance=one(150.0),
        shortwave_down=np.array([200.0, 0.0, 300.0]), skin_temperature=np.array([298.0, 290.0, 285.0]),
        sensible=np.array([20.0, -25.0, -10.0]), latent=np.array([20.0, -2.0, 5.0]),
    )  # fmt: skip
    case = case._replace(forcing=dataclasses.replace(case.forcing, seconds=seconds))

    def heating(setup: Setup, elapsed: float) -> tuple[float, list[float]]:
        return 290.0, [-5e-5 * math.exp(-z / 300.0) for z in setup.grid.height]

    result = run(case.start, GRASS, case.forcing, duration=14.0 * HOUR, longwave=heating,
                 options=NightOptions(closure=closure, boundary=boundary))  # type: ignore[arg-type]  # fmt: skip
    budget = result.budget
    assert budget.relative_error < 1e-9
    assert abs(budget.air_change) > 1e4
    assert budget.water_change == pytest.approx(budget.water_input, rel=1e-8, abs=1e-9)


def test_outputs_alone_close_the_heat_budget(ordinary: NightResult) -> None:
    """Change of skin and soil between two records against the records' fluxes by the trapezium rule."""
    fine = night(clear_evening(), output=300.0)
    setup = prepare(clear_evening().start, GRASS, NightOptions())
    first = 3  # the skin leaves its start within minutes, faster than the records
    soil = float(np.dot(setup.soil.capacity, fine.soil[-1] - fine.soil[first]))
    ground = soil + setup.foot.skin_capacity * float(fine.skin[-1] - fine.skin[first])
    into = (fine.net_radiation - fine.sensible - fine.latent)[first:]
    summed = float(np.sum(0.5 * (into[1:] + into[:-1]) * np.diff(fine.seconds[first:])))
    assert ground == pytest.approx(summed, rel=0.003)
    assert fine.theta[-1] == pytest.approx(ordinary.theta[-1], abs=1e-9)


# --- convergence


def errors_after_hour_three(a: NightResult, b: NightResult) -> np.ndarray:
    late = a.seconds > 3.0 * HOUR
    return np.abs(a.theta - b.theta)[late]


def test_default_tolerance_against_none() -> None:
    for case in (clear_evening(), clear_evening(wind=2.5), clear_evening(wind=12.0, longwave=380.0)):
        error = errors_after_hour_three(night(case, output=HOUR), night(case, output=HOUR, tolerance=0.02))
        assert error.max() < 0.05


def test_against_an_independent_integrator() -> None:
    """Implicit Runge-Kutta of fifth order (scipy's Radau) on the same right side with constant forcing."""
    case = clear_evening()
    options = NightOptions(levels=20, top=1500.0, output=2.0 * HOUR)
    mine = run(case.start, GRASS, case.forcing, duration=6.0 * HOUR, options=options)
    setup = prepare(case.start, GRASS, options)
    outside = outside_air(case.forcing, setup, 0.0, case.start.coriolis, None)
    drive = drive_ground(setup, GRASS, case.forcing, 0.0, 300.0, float(case.forcing.longwave_down[0]))
    out = unflat(0.0 * flat(setup.state), setup.state)

    def side(_: float, values: np.ndarray) -> np.ndarray:
        # surface resistance follows the state, as in `run`
        held = dataclasses.replace(setup, state=unflat(values, setup.state))
        now = drive_ground(held, GRASS, case.forcing, 0.0, 300.0, drive.longwave_down)
        right_side(setup.method, setup.grid, setup.foot, setup.soil, now, outside, held.state, out, setup.work, False)
        return flat(out)

    other = solve_ivp(
        side, (0.0, 6.0 * HOUR), flat(setup.state), method="Radau", rtol=1e-6, atol=1e-6,
        t_eval=[4.0 * HOUR, 6.0 * HOUR],
    )  # fmt: skip
    assert other.success
    assert np.abs(mine.theta[2:] - other.y[:20].T).max() < 0.05
    assert np.abs(mine.u[2:] - other.y[40:60].T).max() < 0.05


def on_cells(edges: np.ndarray, fine_edges: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Means of fine cells over coarse ones."""
    running = np.concatenate((np.zeros((len(values), 1)), np.cumsum(values * np.diff(fine_edges), axis=1)), axis=1)
    return np.array([np.diff(np.interp(edges, fine_edges, row)) for row in running]) / np.diff(edges)


def levels_difference(case: Case) -> tuple[float, float]:
    """Largest difference of 48 levels to 160 up to 100 m and anywhere after hour three [K]."""
    coarse = night(case, output=HOUR)
    fine = night(case, output=HOUR, levels=160, first_cell=0.6)
    # near the ground a cell stands for the air at its centre (similarity), aloft for its mean
    low = coarse.height < 100.0
    centre = np.array([np.interp(coarse.height, fine.height, row) for row in fine.theta])
    other = np.where(low, centre, on_cells(cell_edges(), cell_edges(160, 0.6), fine.theta))
    rest = np.abs(other - coarse.theta)[coarse.seconds > 3.0 * HOUR]
    return float(rest[:, low].max()), float(rest.max())


def test_levels_are_enough() -> None:
    low, anywhere = levels_difference(clear_evening())
    assert low < 0.1
    assert anywhere < 0.25


@pytest.mark.observed
def test_convergence_on_the_shared_nights() -> None:
    worst = []
    for case in plains_nights()[::2]:  # all ten: tests/bench/night_convergence.py
        error = errors_after_hour_three(night(case, output=HOUR), night(case, output=HOUR, tolerance=0.02))
        worst.append(float(error.max()))
    assert np.median(worst) < 0.03
    assert max(worst) < 0.1


@pytest.mark.observed
def test_levels_on_a_shared_night() -> None:
    low, anywhere = levels_difference(plains_nights()[3])
    assert low < 0.1
    assert anywhere < 0.25


# --- what the night says


def test_an_inversion_grows_and_the_jet_turns(ordinary: NightResult) -> None:
    assert ordinary.temperature[-1, 1] < ordinary.temperature[0, 1] - 5.0
    assert ordinary.theta[-1, 20] > ordinary.theta[-1, 0] + 1.0
    speed = np.hypot(ordinary.u[-1], ordinary.v[-1])
    assert speed.max() > 7.5
    assert ordinary.sensible[-1] < 0.0 < -ordinary.net_radiation[-1]
    assert np.all(ordinary.depth[3:] > 20.0)
    assert np.all(np.diff(ordinary.temperature[-1][[0, 1, 3, 2]][:2]) >= 0.0)


def test_causes_act_in_the_right_direction(ordinary: NightResult) -> None:
    cloudy = night(clear_evening(longwave=400.0))
    windy = night(clear_evening(wind=13.0))
    calm = night(clear_evening(wind=1.5))
    coldest = float(ordinary.temperature[-1, 1])
    assert cloudy.temperature[-1, 1] > coldest + 2.0
    assert windy.temperature[-1, 1] > coldest + 0.5
    assert calm.temperature[-1, 1] < coldest - 0.5
    strength = [r.theta[-1, 24] - r.theta[-1, 0] for r in (windy, ordinary, calm)]
    assert strength[0] < strength[1] < strength[2]
    assert windy.depth[-1] > ordinary.depth[-1] > calm.depth[-1]


def test_regime_follows_wind() -> None:
    order = ("very stable", "intermittent", "turbulent")
    seen = [order.index(night(clear_evening(wind=w), hours=6.0).regime[-1]) for w in (1.5, 7.0, 16.0)]
    assert seen == sorted(seen)
    assert seen[0] == 0
    assert seen[-1] == 2


@pytest.mark.parametrize("closure", ["short", "blend"])
def test_calm_air_does_not_run_away(closure: str) -> None:
    still = night(clear_evening(wind=0.0), closure=closure)
    assert np.all(np.isfinite(still.theta))
    assert 270.0 < still.skin[-1] < still.skin[0]


def test_dew_frost_and_fog() -> None:
    dry = night(clear_evening(humidity=0.002, afternoon=295.0))
    moist = night(clear_evening(humidity=0.0175, longwave=360.0, wind=3.0, theta_rate=one(-1e-4)))
    cold = night(clear_evening(humidity=0.0038, afternoon=278.0, longwave=230.0))
    assert np.all(dry.deposit == 0.0)
    assert np.all(dry.fog_depth == 0.0)
    assert 1.0 in moist.deposit
    assert moist.fog_depth[-1] > 0.0
    assert moist.fog_depth[0] == 0.0
    assert cold.deposit[-1] == 2.0


def test_fluxes_and_temperatures_can_be_prescribed() -> None:
    seconds = np.array([0.0, 12.0 * HOUR])
    case = clear_evening(sensible=one(-15.0), latent=one(3.0), skin_temperature=np.array([298.0, 286.0]))
    case = case._replace(forcing=dataclasses.replace(case.forcing, seconds=seconds))
    fluxes = night(case, boundary="flux")
    assert fluxes.sensible == pytest.approx(np.full(fluxes.sensible.size, -15.0))
    assert fluxes.latent == pytest.approx(np.full(fluxes.latent.size, 3.0))
    skins = night(case, boundary="temperature")
    assert skins.skin[-1] == pytest.approx(case.start.skin - 12.0, abs=1e-6)


def test_bulk_exponential_inversion_agrees() -> None:
    """Stull (1983): theta_residual - theta = D exp(-z / H), D H = accumulated cooling / (rho cp).

    With the column's own surface cooling D the scale H from the heat budget must describe the column: half the cooling lies
    below H ln 2, within the factor that a profile other than exponential allows.
    """
    result = night(clear_evening(wind=6.0))
    deficit = result.theta[0].max() - result.theta[-1]
    inside = result.height < 1400.0
    edges = cell_edges()
    start = np.interp(result.height, result.height, result.theta[0])
    cooling = (start - result.theta[-1])[inside] * np.diff(edges)[inside]
    scale = cooling.sum() / (start - result.theta[-1])[0]
    half = np.interp(0.5 * cooling.sum(), np.cumsum(cooling), edges[1:][inside])
    assert deficit[0] > 3.0
    assert 20.0 < scale < 400.0
    assert 0.5 < half / (scale * math.log(2.0)) < 2.0
    heat = -result.budget.air_input / (1005.0 * 1.1)
    assert scale * (start - result.theta[-1])[0] == pytest.approx(heat, rel=0.15)


# --- the edges


@pytest.mark.parametrize("options", [{"closure": "long"}, {"boundary": "wall"}, {"levels": 3}, {"first_cell": 100.0}])
def test_unusable_options_are_refused(options: dict[str, object]) -> None:
    with pytest.raises(ModelError):
        night(clear_evening(), **options)


def test_soil_temperatures_must_match_the_layers() -> None:
    case = clear_evening()
    with pytest.raises(ModelError, match="2 soil temperatures for 6 layers"):
        night(case._replace(start=dataclasses.replace(case.start, soil=(280.0, 281.0))))


def test_inputs_are_left_alone() -> None:
    case = clear_evening()
    before = case.start.theta.copy()
    night(case, hours=1.0)
    assert np.array_equal(before, case.start.theta)


COMPILED = """
import sys
sys.path[:0] = {paths}
import numpy as np
from night_cases import GRASS, clear_evening
from slab.night import NightOptions, run
case = clear_evening()
for closure in ("short", "blend"):
    night = run(case.start, GRASS, case.forcing, duration=3600.0, options=NightOptions(closure=closure, levels=16))
    print(" ".join(float(x).hex() for x in np.concatenate([night.theta[-1], night.u[-1], night.humidity[-1], night.soil[-1]])))
"""


def test_compiled_numbers_are_the_plain_ones() -> None:
    here = Path(__file__).resolve().parent
    script = COMPILED.format(paths=repr([str(here.parent), str(here)]))
    done = subprocess.run(
        [sys.executable, "-c", script],
        env=os.environ | {"DAYLAYER_COMPILED": "1"},
        capture_output=True,
        text=True,
        check=True,
    )
    for closure, line in zip(("short", "blend"), done.stdout.splitlines(), strict=True):
        plain = night(clear_evening(), hours=1.0, closure=closure, levels=16)
        mine = np.concatenate([plain.theta[-1], plain.u[-1], plain.humidity[-1], plain.soil[-1]])
        theirs = np.array([float.fromhex(x) for x in line.split()])
        assert theirs == pytest.approx(mine, rel=1e-12, abs=1e-12)
