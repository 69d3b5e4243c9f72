"""Mixed-layer growth against closed solutions and worked examples, through the constant-density entry.

C-rows are those of the published check values; the closed solution is that of the zero-order jump model (Tennekes
1973; Carson 1973; implicit solution in a boundary-layer meteorology course text, MAQ-32306 exercise 6.3b3).
"""

from __future__ import annotations

import csv
import math

import numpy as np
import pytest
from reference import checks

from forcing.air import CP_DRY
from slab.growth import BUOYANT, ENCROACHMENT, Closure, entrainment, velocity_scale
from slab.heat import area_below
from slab.linear import grow

PLAIN = Closure(flux_ratio=0.2, shear_factor=0.0, spin_up_factor=0.0, growth_cap=0.0, encroachment=0.0)


def half_sine(t: float) -> float:
    """Kinematic heat flux of C050: 0.2 sin(pi (t - 06) / 12 h) K m/s, from 06 UTC."""
    return 0.2 * math.sin(math.pi * t / 43200.0)


def closed_depth(heat: float, gamma: float, start: float, jump: float, ratio: float) -> float:
    """Depth [m] of the implicit closed solution C053 for a kinematic heat sum [K m]."""
    k = (2.0 + 4.0 * ratio) / gamma
    kg = ratio * gamma / (1.0 + 2.0 * ratio)
    right = start**2 - k * (jump * start - kg * start**2) + k * heat
    power = (1.0 + 2.0 * ratio) / ratio
    memory = jump * start ** ((1.0 + ratio) / ratio) - kg * start**power if start > 0.0 else 0.0
    low, high = max(start, 1.0), 20000.0
    for _ in range(200):
        middle = 0.5 * (low + high)
        if middle**2 * (1.0 - k * memory * middle ** (-power)) < right:
            low = middle
        else:
            high = middle
    return low


@pytest.mark.parametrize("ratio", [0.1, 0.2, 0.3])
@pytest.mark.parametrize(("start", "jump"), [(0.0, 0.0), (200.0, 1.0), (500.0, 0.0), (300.0, 2.0)])
@pytest.mark.parametrize(("gamma", "flux"), [(0.0025, 0.05), (0.005, 0.1), (0.01, 0.3)])
def test_closed_solution(ratio: float, start: float, jump: float, gamma: float, flux: float) -> None:
    done = grow(depth=start, jump=jump, gradient=gamma, heat_flux=lambda t: flux, hours=6.0,
                closure=PLAIN._replace(flux_ratio=ratio))  # fmt: skip
    assert done.depth[-1] == pytest.approx(closed_depth(flux * 21600.0, gamma, start, jump, ratio), rel=1e-3)


def test_every_row_of_the_analytic_table() -> None:
    rows = list(csv.DictReader((checks.folder() / "mixed_layer_analytic.csv").read_text().splitlines()))
    assert len(rows) >= 90
    for row in rows:
        ratio = float(row["beta"])
        closure = PLAIN._replace(flux_ratio=ratio) if ratio > 0.0 else ENCROACHMENT
        flux = float(row["Qs_Kms"])
        done = grow(depth=float(row["h0_m"]), jump=float(row["jump0_K"]), gradient=float(row["gamma_Kpm"]),
                    heat_flux=lambda t, flux=flux: flux, hours=float(row["t_h"]), closure=closure)  # fmt: skip
        assert done.depth[-1] == pytest.approx(float(row["h_m"]), rel=1e-3), row
        assert done.theta[-1] == pytest.approx(float(row["theta_m_K"]), abs=0.01), row


def test_c050_accumulated_heat() -> None:
    times = np.linspace(0.0, 28800.0, 2881)
    assert np.trapezoid([half_sine(t) for t in times], times) == pytest.approx(4125.3, rel=1e-3)


def test_c051_encroachment() -> None:
    done = grow(depth=300.0, jump=0.0, gradient=0.005, heat_flux=half_sine, hours=8.0, closure=ENCROACHMENT,
                theta_ground=283.5)  # fmt: skip
    assert done.depth[-1] == pytest.approx(1319.14, abs=1.0)
    assert done.theta[-1] == pytest.approx(290.1, abs=0.1)  # C057: 285 K at h0, so 283.5 K at the ground


def test_c052_encroachment_formula() -> None:
    done = grow(depth=250.0, jump=0.0, gradient=0.004, heat_flux=half_sine, hours=10.0, closure=ENCROACHMENT)
    times = np.linspace(0.0, 36000.0, 36001)
    heat = float(np.trapezoid([half_sine(t) for t in times], times))
    assert done.depth[-1] == pytest.approx(math.sqrt(250.0**2 + 2.0 / 0.004 * heat), rel=1e-4)


def test_c055_full_solution_factor_one_plus_two_ratios() -> None:
    """C055 counts entrained heat and jump growth (factor 1 + 2 ratios); C054, 1439 m, only the entrained heat."""
    done = grow(
        depth=300.0, jump=0.0, gradient=0.005, heat_flux=half_sine, hours=8.0, closure=PLAIN, theta_ground=285.0
    )
    assert done.depth[-1] == pytest.approx(1560.82, rel=1e-3)
    assert done.jump[-1] == pytest.approx(1.1149, rel=1e-2)
    assert done.theta[-1] == pytest.approx(291.689, abs=0.01)


def test_c056_start_jump_of_one_kelvin() -> None:
    done = grow(depth=300.0, jump=1.0, gradient=0.005, heat_flux=half_sine, hours=8.0, closure=PLAIN)
    assert done.depth[-1] == pytest.approx(1506.06, rel=1e-3)


def test_c054_entrained_heat_alone_is_encroachment_with_more_heat() -> None:
    done = grow(depth=300.0, jump=0.0, gradient=0.005, heat_flux=lambda t: 1.2 * half_sine(t), hours=8.0,
                closure=ENCROACHMENT)  # fmt: skip
    assert done.depth[-1] == pytest.approx(1438.80, abs=1.0)


def test_c059_growth_and_warming() -> None:
    speed = entrainment(PLAIN, 0.15, 0.0, 1000.0, 290.0, 6.0)
    assert 3600.0 * speed == pytest.approx(18.0, rel=0.02)
    assert 3600.0 * (0.15 + speed * 6.0) / 1000.0 == pytest.approx(0.65, rel=0.02)


def test_c060_velocity_scale_and_turnover() -> None:
    scale = velocity_scale(1000.0, 0.15, 290.0)
    assert scale == pytest.approx(1.72, rel=0.005)
    assert 1000.0 / scale == pytest.approx(582.0, rel=0.005)
    assert velocity_scale(1000.0, 0.2, 300.0) == pytest.approx(1.870, rel=0.005)  # C020


def test_c007_humidity_by_mass_conservation() -> None:
    done = grow(depth=200.0, jump=1.0, gradient=0.006, heat_flux=lambda t: 0.1, hours=6.0, closure=PLAIN,
                humidity=0.008, humidity_aloft=0.004, humidity_gradient=-1e-6, vapour_flux=5e-5)  # fmt: skip
    # buoyancy here is virtual, in C006 dry: so the depth is the run's own and the budget is what is checked
    h = float(done.depth[-1])
    expected = (200.0 * 0.008 + 5e-5 * 21600.0 + 0.004 * (h - 200.0) - 0.5e-6 * (h**2 - 200.0**2)) / h
    assert done.humidity[-1] == pytest.approx(expected, rel=1e-6)


def test_c016_depth_grows_with_the_square_root_of_time() -> None:
    done = grow(depth=0.0, jump=0.0, gradient=0.005, heat_flux=lambda t: 0.1, hours=8.0, closure=PLAIN)
    early, late = np.searchsorted(done.time, 7200.0), len(done.time) - 1
    power = math.log(done.depth[late] / done.depth[early]) / math.log(done.time[late] / done.time[early])
    assert power == pytest.approx(0.5, abs=0.02)


def test_c009_encroachment_on_a_broken_profile() -> None:
    z = np.array([0.0, 200.0, 1000.0])
    theta = np.array([288.0, 290.0, 292.4])
    assert area_below(z, theta, 1000.0) == pytest.approx(1640.0, rel=1e-3)


@pytest.mark.parametrize(("divergence", "depth"), [(0.0, 1740.0), (5e-6, 1521.0), (2e-5, 1025.0)])
def test_subsidence_figures(divergence: float, depth: float) -> None:
    """Plain budget h dtheta/dt = F + w_e jump, dh/dt = w_e - D h integrated independently gives these depths."""
    done = grow(depth=100.0, jump=0.2, gradient=0.005, heat_flux=lambda t: 0.15, hours=10.0, closure=PLAIN,
                divergence=divergence)  # fmt: skip
    assert done.depth[-1] == pytest.approx(depth, abs=1.0)
    assert done.depth[-1] == pytest.approx(_plain_budget(divergence), abs=0.5)


def _plain_budget(divergence: float) -> float:
    """The same layer by the plain budget with tiny explicit steps: shares nothing with the deficit form."""
    h, theta, gamma, start = 100.0, 290.0 + 0.5 - 0.2, 0.005, 290.0
    step = 0.5
    for n in range(int(36000.0 / step)):
        t = n * step
        above = start + gamma * h * math.exp(divergence * t)
        jump = above - theta
        speed = 0.2 * 0.15 / jump
        theta += step * (0.15 + speed * jump) / h
        h += step * (speed - divergence * h)
    return h


def test_c058_warming_is_a_fifth_faster_with_entrained_heat() -> None:
    speed = entrainment(BUOYANT, 0.1, 0.0, 800.0, 290.0, 2.0)
    assert (0.1 + speed * 2.0) / 0.1 == pytest.approx(1.2, rel=1e-12)


def test_mass_weighting_matters() -> None:
    """A heat flux of 200 W m-2 for 8 h, 5 K/km: 1.41 km without and 1.67 km with entrainment (derived here)."""
    flux = 200.0 / 1156.0
    for closure, depth in ((ENCROACHMENT, 1412.0), (PLAIN, 1670.0)):
        done = grow(depth=0.0, jump=0.0, gradient=0.005, heat_flux=lambda t: flux, hours=8.0, closure=closure)
        assert done.depth[-1] == pytest.approx(depth, rel=5e-3)
    assert pytest.approx(1005.0) == CP_DRY
