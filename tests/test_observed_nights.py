"""Three of the shared plains nights stay within loose bounds of what was measured; the benchmarks print the rest.

The whole tables: ``python tests/bench/observed_nights.py``, ``mesonet_night.py`` and ``cases99.py``.
"""

from __future__ import annotations

import functools

import numpy as np
import pytest
from bench import cases99, mesonet_night, night_scores, observed_nights
from observed import folder

from slab.cycle import run

pytestmark = pytest.mark.observed

CHOSEN = (0, 4, 9)  # first, middle and last of the table, not chosen by their errors


@functools.cache
def _nights() -> tuple[list[observed_nights.Night], list[observed_nights.Reading], list[observed_nights.Reading]]:
    given = observed_nights.constants()
    every = observed_nights.nights(folder() / observed_nights.SET)
    nights = [every[i] for i in CHOSEN]
    measured = [observed_nights.read(night.dawn.height, night.dawn.temperature, night.surface) for night in nights]
    computed = [observed_nights.read_run(run(observed_nights.scenario_of(night, given)), night) for night in nights]
    return nights, measured, computed


def test_dawn_temperature() -> None:
    _, measured, computed = _nights()
    errors = np.array([b.surface - a.surface for a, b in zip(measured, computed, strict=True)])
    assert np.abs(errors).max() < 4.0
    assert night_scores.mae(errors) < 2.5


def test_the_night_cools_by_far_more_than_the_error() -> None:
    nights, _, computed = _nights()
    drops = [night.surface_before - reading.surface for night, reading in zip(nights, computed, strict=True)]
    assert min(drops) > 4.0


def test_strength_and_contrast() -> None:
    _, measured, computed = _nights()
    strength = np.array([b.rising.strength - a.rising.strength for a, b in zip(measured, computed, strict=True)])
    contrast = np.array([b.contrast - a.contrast for a, b in zip(measured, computed, strict=True)])
    assert night_scores.mae(strength) < 3.5
    assert night_scores.mae(contrast) < 2.5
    assert all(reading.rising.present for reading in computed)


def test_measured_side_is_the_table() -> None:
    nights, measured, _ = _nights()
    for night, reading in zip(nights, measured, strict=True):
        assert reading.tables.top == pytest.approx(night.told_top, abs=10.0)
        assert reading.tables.strength == pytest.approx(night.told_strength, abs=0.06)


def test_cloud_rule_is_a_fraction_and_finds_the_moist_middle_levels() -> None:
    given = observed_nights.constants()["cloud"]
    found = [observed_nights.guessed_cloud(night.afternoon, **given)[0] for night in _nights()[0]]  # type: ignore[arg-type]
    assert all(0.0 <= fraction <= 1.0 for fraction in found)
    assert max(found) > 0.1
    assert min(found) == 0.0


def test_mesonet_mean_contrast_over_stations() -> None:
    """Over the first three usable stations the night's mean T(9 m) - T(1.5 m) is near the measured one."""
    used = [one for one in mesonet_night.stations(folder() / mesonet_night.SET) if mesonet_night.usable(one)][:3]
    pairs = []
    for one in used:
        dark = (one.time > one.sunset) & (one.time < one.sunrise)
        computed = mesonet_night.compute(one, measured_sun=False)
        pairs.append((float(np.mean(computed[dark])), float(np.mean(one.contrast[dark]))))
        assert abs(mesonet_night.onset(one.time, computed) - one.sunset) < 3.0 * 3600.0
    assert abs(np.mean([a - b for a, b in pairs])) < 0.5


def test_measured_wind_orders_the_nights_of_cases99() -> None:
    """Under the tower's wind the sensible heat of every night is near the tower's: weak, strong, next to none."""
    place = folder() / "testdays"
    tower = cases99.tower(place)
    done = run(cases99.scenario_of(place, tower, own_wind=False, imposed=False))
    for dusk, dawn in cases99.nights(tower):
        seen = (tower.time >= dusk) & (tower.time <= dawn)
        computed = np.interp(tower.time[seen], done.time, done.fields["sensible"])
        assert abs(computed.mean() - tower.sensible[seen].mean()) < 8.0
