"""The definitions reproduce the tables that came with the observed days."""

from __future__ import annotations

import csv
import functools
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest
from observed import folder

from forcing.profile import Profile, prepare
from forcing.readers import read_sounding
from slab.inversions import tables_inversion
from slab.tops import tables_depth

pytestmark = pytest.mark.observed

SETS = ("plains_2023", "vienna_2015", "coast_2014")
TABLE_EXPONENT = 0.2857
"""R/cp behind the tables: with it the Vienna depths fall on the tables' own 10 m step twelve points more often."""


def _rows(path: Path) -> list[dict[str, str]]:
    with path.open(newline="") as lines:
        return list(csv.DictReader(lines))


@functools.cache
def _index(name: str) -> dict[str, dict[str, str]]:
    return {row["file"]: row for row in _rows(folder() / name / "index.csv")}


@functools.cache
def _profile(name: str, file: str) -> Profile:
    about = _index(name)[file]
    sounding = read_sounding(folder() / name / file, valid=datetime.fromisoformat(about["utc_time"]))
    return prepare(
        sounding,
        latitude=float(about["lat"]),
        longitude=float(about["lon"]),
        elevation=float(about["elev_m"]),
    )


def _depths(name: str, exponent: float | None) -> tuple[np.ndarray, np.ndarray]:
    options = {} if exponent is None else {"exponent": exponent}
    told, found = [], []
    for row in _rows(folder() / name / "pairs.csv"):
        for which, depth in (("morning_file", "first_depth_m"), ("afternoon_file", "second_depth_m")):
            told.append(float(row[depth]))
            found.append(tables_depth(_profile(name, row[which]), **options).height)
    return np.array(told), np.array(found)


@pytest.mark.parametrize("name", SETS)
def test_depths_of_the_tables(name: str) -> None:
    told, found = _depths(name, TABLE_EXPONENT)
    assert np.abs(found - told).max() <= 10.0
    assert np.mean(np.abs(found - told) < 0.5) > 0.9


@pytest.mark.parametrize("name", SETS)
def test_depths_with_the_exponent_of_the_program(name: str) -> None:
    told, found = _depths(name, None)
    assert np.mean(np.abs(found - told) <= 10.0) > 0.98
    assert np.abs(found - told).max() <= 30.0


@pytest.mark.parametrize("name", SETS)
def test_inversions_of_the_tables(name: str) -> None:
    tops, strengths = [], []
    for row in _rows(folder() / name / "night_pairs.csv"):
        profile = _profile(name, row["second_file"])
        found = tables_inversion(profile.height, profile.temperature)
        tops.append(found.top - float(row["inversion_top_agl_m"]))
        strengths.append(found.strength - float(row["inversion_strength_K"]))
    assert np.abs(tops).max() <= 10.0
    assert np.mean(np.abs(tops) < 0.5) > 0.98
    assert np.abs(strengths).max() < 0.051
