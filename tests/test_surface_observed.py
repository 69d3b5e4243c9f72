"""Energy balance against measured net radiation and fluxes, with the covers fixed beside the benchmark."""

from __future__ import annotations

import importlib.util
import math
import sys
from pathlib import Path

import observed
import pytest

from forcing.surface import energy_balance, energy_balance_net

_PATH = Path(__file__).resolve().parent / "bench" / "flux_sites.py"
_SPEC = importlib.util.spec_from_file_location("flux_sites", _PATH)
assert _SPEC is not None
assert _SPEC.loader is not None
flux_sites = importlib.util.module_from_spec(_SPEC)
sys.modules["flux_sites"] = flux_sites
_SPEC.loader.exec_module(flux_sites)

SITES = {site.name: site for site in flux_sites.read_sites()}
pytestmark = pytest.mark.observed


@pytest.mark.parametrize("name", ["Woodward", "ARM E39"])
def test_net_radiation_from_measured_sun_and_sky(name):
    site = SITES[name]
    rows = flux_sites.read_rows(observed.file("fluxes", site.file))
    found = flux_sites.run(site, rows, energy_balance, "longwave")
    pairs = [
        (one.net_radiation, row.net)
        for one, row in zip(found, rows, strict=True)
        if one is not None and math.isfinite(row.net)
    ]
    assert len(pairs) > 0.9 * len(rows)
    assert flux_sites.rmse(pairs) < 40.0


@pytest.mark.parametrize(
    ("name", "least"), [("Neustift", 0.6), ("Tharandt", 0.2), ("Woodward", 0.45), ("ARM E39", 0.45)]
)
def test_share_of_evaporation_has_the_size_of_the_cover(name, least):
    """Evaporative fraction by day within 0.2 of the measured one, of H + LE, and no less than its cover would have."""
    site = SITES[name]
    rows = [
        row
        for row in flux_sites.read_rows(observed.file("fluxes", site.file))
        if site.start <= row.time.date().isoformat() <= site.end
    ]
    found = flux_sites.run(site, rows, energy_balance_net, "net")
    used = [
        (one, row)
        for one, row in zip(found, rows, strict=True)
        if one is not None and row.net > 100.0 and math.isfinite(row.sensible + row.latent)
    ]
    measured = sum(r.latent for _, r in used) / sum(r.latent + r.sensible for _, r in used)
    model = sum(m.latent for m, _ in used) / sum(m.latent + m.sensible for m, _ in used)
    assert model == pytest.approx(measured, abs=0.2)
    assert model > least
