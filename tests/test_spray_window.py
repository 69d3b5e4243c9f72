"""Onset and end of the inversion as windows, and what is said of them."""

from __future__ import annotations

import math
from datetime import datetime
from typing import Any

import numpy as np
import pytest
from spray_cases import plain_document

from slab.products.spray_window import _window, outward, since_break_up, spells, timing_words
from slab.timing import TIMING


def rows(count: int) -> np.ndarray:
    return 1800.0 * np.arange(count, dtype=float)


def test_a_spell_begins_and_ends_where_the_difference_passes_zero() -> None:
    found = spells(rows(7), np.array([-1.0, -0.5, 0.5, 1.0, 1.0, -1.0, -1.0]))
    assert [(one.onset, one.end) for one in found] == [(1800.0 * 1.5, 1800.0 * 4.5)]


def test_what_is_shorter_than_half_an_hour_does_not_count() -> None:
    assert spells(rows(5), np.array([-1.0, -1.0, 0.1, -1.0, -1.0])) == []
    joined = spells(rows(7), np.array([-1.0, 1.0, 1.0, -0.1, 1.0, 1.0, -1.0]))
    assert len(joined) == 1


def test_a_spell_open_at_an_edge_has_no_end_there() -> None:
    first, last = spells(rows(6), np.array([1.0, 1.0, -1.0, -1.0, 1.0, 1.0]))
    assert math.isnan(first.onset)
    assert math.isfinite(first.end)
    assert math.isfinite(last.onset)
    assert math.isnan(last.end)


def test_a_window_is_wider_than_its_members_and_never_a_single_minute() -> None:
    same = _window([7200.0] * 9, 1800.0, 3600.0)
    assert same is not None
    early, late = outward(same)
    assert early <= 7200.0 - 1800.0
    assert late >= 7200.0 + 3600.0
    spread = _window([7200.0 + 600.0 * k for k in range(9)], 1800.0, 3600.0)
    assert spread is not None
    assert spread.late - spread.early > same.late - same.early
    assert early % 1800.0 == late % 1800.0 == 0.0
    assert _window([math.nan, math.nan], 0.0, 0.0) is None
    some = _window([7200.0, math.nan], 0.0, 0.0)
    assert some is not None
    assert some.have == 1


def test_no_window_is_narrower_than_what_the_model_was_off_on_the_mesonet_night() -> None:
    answer: Any = plain_document()
    for name, least in (("onset", TIMING.onset_early + TIMING.onset_late), ("end", TIMING.end_early + TIMING.end_late)):
        for one in (night[name] for night in answer["nights"] if night[name]):
            width = datetime.fromisoformat(one["late"]) - datetime.fromisoformat(one["early"])
            assert width.total_seconds() >= least
    # the dangerous sides: an onset before its window, an end after it
    assert TIMING.onset_early >= TIMING.end_early
    assert TIMING.end_late >= TIMING.end_early
    assert timing_words() in answer["definitions"]["window"]


def test_time_since_the_break_up_counts_from_the_last_end() -> None:
    since = since_break_up(rows(8), np.array([1.0, 1.0, -1.0, -1.0, -1.0, 1.0, 1.0, 1.0]))
    assert np.isnan(since[[0, 1, 5, 6, 7]]).all()
    assert since[4] == pytest.approx((4 - 1.5) * 0.5)
