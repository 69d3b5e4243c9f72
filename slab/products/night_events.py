"""What the first night of a run says: dew, frost, fog, the wind that would keep its air mixed, and windows for its times."""

from __future__ import annotations

import math
from datetime import datetime
from typing import Any

import numpy as np

from forcing.air import ZERO_CELSIUS
from slab.cycle import NIGHT, Part, Run
from slab.night_answers import CROSSING_HEIGHT
from slab.products.series import iso
from slab.timing import TIMING

SHORTEST = 7200.0  # [s] a stretch of night shorter than this is a dawn, not a night
HALF_HOUR = 1800
DEW, FROST = 1, 2


def first_night(run: Run) -> Part | None:
    """The first stretch of night of two hours or more, or None."""
    nights = (part for part in run.parts if part.kind == NIGHT)
    return next((part for part in nights if run.time[part.last] - run.time[part.first] >= SHORTEST), None)


def night_answers(run: Run) -> dict[str, Any]:
    """Dew, hoar frost, air frost and fog onset, greatest fog depth, and the least wind that would keep the air mixed.

    The least wind (Van de Wiel et al. 2012) is the largest that any hour of the night asks for at the crossing height. Fog
    is an onset only: its deepening is not computed.
    """
    night = first_night(run)
    empty = dict.fromkeys(
        ("dew_onset_time", "hoar_frost_onset_time", "air_frost_onset_time", "fog_onset_time", "fog_depth_max_m",
         "mixed_night_wind_m_s", "mixed_night_wind_height_m")
    )  # fmt: skip
    if night is None or night.course is None:
        return empty
    notes = sorted(night.course.notes.items())

    def first(holds: Any) -> str | None:
        return next((iso(run.time[knot]) for knot, note in notes if holds(knot, note)), None)

    cold = run.fields["temperature_2m"]
    fog = max(note.fog_depth for _, note in notes)
    least = max((note.minimum_wind for _, note in notes if math.isfinite(note.minimum_wind)), default=math.nan)
    return {
        "dew_onset_time": first(lambda _, note: note.deposit == DEW),
        "hoar_frost_onset_time": first(lambda _, note: note.deposit == FROST),
        "air_frost_onset_time": first(lambda knot, _: bool(np.isfinite(cold[knot]) and cold[knot] < ZERO_CELSIUS)),
        "fog_onset_time": first(lambda _, note: note.fog_depth > 0.0),
        "fog_depth_max_m": round(float(fog), 0) if fog > 0.0 else None,
        "mixed_night_wind_m_s": round(float(least), 1) if math.isfinite(least) else None,
        "mixed_night_wind_height_m": CROSSING_HEIGHT if math.isfinite(least) else None,
    }


def windows(summary: dict[str, Any]) -> dict[str, Any]:
    """Windows beside inversion times: no such time is known to the minute (see `slab.timing`); None where there is none."""
    return {
        "inversion_onset_window": _window(summary.get("inversion_onset_time"), TIMING.onset_early, TIMING.onset_late),
        "inversion_gone_window": _window(summary.get("inversion_gone_time"), TIMING.end_early, TIMING.end_late),
    }


def _window(moment: str | None, early: float, late: float) -> list[str] | None:
    if moment is None:
        return None
    at = datetime.fromisoformat(moment).timestamp()
    low, high = (at - early) // HALF_HOUR * HALF_HOUR, -((-at - late) // HALF_HOUR) * HALF_HOUR
    return [iso(low), iso(high)]
