"""Turbulence closures of the night column and the transfer through its lowest half cell."""

from __future__ import annotations

import math

import pytest
from scipy.integrate import quad
from scipy.optimize import brentq

from slab.night_bulk import bulk
from slab.night_closure import BLEND, SHORT, diffusivity


@pytest.mark.parametrize("closure", [SHORT, BLEND])
@pytest.mark.parametrize("stability", [-1e-3, -1e-6, 1e-7, 2e-5, 8e-5, 1.5e-4, 1e-3])
def test_diffusivity_slopes(closure: int, stability: float) -> None:
    shear, tail, length = 1e-3, 0.4, 100.0
    _, by_n, by_s = diffusivity(closure, tail, length, stability, shear)
    for slope, dn, ds in ((by_n, 1e-10, 0.0), (by_s, 0.0, 1e-9)):
        high = diffusivity(closure, tail, length, stability + dn, shear + ds)[0]
        low = diffusivity(closure, tail, length, stability - dn, shear - ds)[0]
        assert slope == pytest.approx((high - low) / (2.0 * (dn + ds)), rel=1e-4, abs=1e-9)


@pytest.mark.parametrize("closure", [SHORT, BLEND])
def test_diffusivity_does_not_jump_at_neutral(closure: int) -> None:
    below = diffusivity(closure, 0.5, 100.0, -1e-12, 1e-3)[0]
    above = diffusivity(closure, 0.5, 100.0, 1e-12, 1e-3)[0]
    assert below == pytest.approx(above, rel=1e-6)


@pytest.mark.parametrize("richardson", [1e-3, 0.05, 0.3, 2.0, 50.0])
@pytest.mark.parametrize("logs", [(3.5, 3.5), (3.5, 5.8), (0.7, 3.0), (6.0, 9.0)])
def test_bulk_transfer_is_the_integrated_closure(richardson: float, logs: tuple[float, float]) -> None:
    """Integrate phi = (1 + 10 Ri)^(1/2), zeta = Ri phi, by quadrature and solve for the bulk Richardson number."""

    def phi(zeta: float) -> float:
        local = brentq(lambda r: r * math.sqrt(1.0 + 10.0 * r) - zeta, 0.0, 1.0 + zeta)
        return math.sqrt(1.0 + 10.0 * local)

    def span(zeta: float, log: float) -> float:
        return float(quad(lambda x: phi(zeta * math.exp(x)), -log, 0.0, epsabs=1e-10, limit=200)[0])

    def mismatch(log_zeta: float) -> float:
        zeta = math.exp(log_zeta)
        return zeta * span(zeta, logs[1]) / span(zeta, logs[0]) ** 2 - richardson

    zeta = math.exp(brentq(mismatch, math.log(1e-5), math.log(1e5), xtol=1e-10))
    found = bulk(BLEND, richardson, *logs, 50.0)
    assert found.momentum == pytest.approx((logs[0] / span(zeta, logs[0])) ** 2, rel=1e-6)
    assert found.heat == pytest.approx(logs[0] * logs[1] / span(zeta, logs[0]) / span(zeta, logs[1]), rel=1e-6)


@pytest.mark.parametrize("closure", [SHORT, BLEND])
@pytest.mark.parametrize("richardson", [-3.0, -0.01, 1e-4, 0.05, 0.15, 0.5, 20.0])
def test_bulk_slopes(closure: int, richardson: float) -> None:
    step = 1e-6 * abs(richardson)
    here = bulk(closure, richardson, 3.5, 5.8, 40.0)
    high, low = (bulk(closure, richardson + s, 3.5, 5.8, 40.0) for s in (step, -step))
    assert here.momentum_slope == pytest.approx((high.momentum - low.momentum) / (2.0 * step), rel=1e-5, abs=1e-9)
    assert here.heat_slope == pytest.approx((high.heat - low.heat) / (2.0 * step), rel=1e-5, abs=1e-9)
