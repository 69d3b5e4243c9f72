"""The spray calendar: one scenario in, the result document out."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from datetime import UTC, datetime
from typing import Any

import numpy as np
from numpy.typing import NDArray

from forcing.air import ZERO_CELSIUS
from forcing.errors import DaylayerError
from forcing.scenario_types import Scenario
from forcing.weather import ObservedTable
from slab.cycle import Run, run
from slab.products.forecast import document_of
from slab.products.series import iso
from slab.products.spray_air import BOOM_HEIGHT, PER_METRES, FieldAir, field_air, rows_of, wind_at
from slab.products.spray_calendar import Rows, hours, judge, stretches
from slab.products.spray_field import RULE, SOURCES, LowField, low_field, what_to_measure
from slab.products.spray_limits import ORDER, SPRAY_KEYS, spray_limits
from slab.products.spray_members import Member, members, steps_of
from slab.products.spray_observed import Reading, Update, reading, tower_pair, update
from slab.products.spray_window import Night, Window, nights, outward, suns, timing_words
from slab.spray_cautions import spray_cautions
from slab.timing import TIMING

Array = NDArray[np.float64]

BETWEEN = (1.5, 9.0)  # [m] the two heights of the mesonets
LONGEST = 72.0  # [h] that a calendar is meant for
LEAST, MOST = 0.3, 40.0  # [m] heights that the difference may be taken between

DEFINITIONS = {
    "inversion": "air at the upper height warmer than at the lower, however little",
    "present / possible / none": "in all nine members / in some, or inside a window of onset or end / in no member",
    "window": "10 to 90 % of the members, widened by what the model itself may be off "
    f"({timing_words()}), rounded outward to half hours",
    "inside": "inside all limits that you gave, wind known, and no inversion in any member, at begin, middle and end of the hour",
    "Delta-T": "dry minus wet bulb at 2 m; thermodynamic wet bulb, ASHRAE Handbook Fundamentals 2017, chapter 1",
    "slight, distinct, marked": "under 1, under 2.5 and from 2.5 K per 8 m (our choice)",
    "regime": "turbulent, intermittent or very stable: heat that the surface asks for against what turbulence can carry "
    "(Van de Wiel et al. 2012); by day mixed or decaying",
    "wind": "by similarity from the computed 10 m wind, over displacement and roughness of the cover",
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Plan:
    """Everything behind a calendar."""

    run: Run
    air: FieldAir
    members: tuple[Member, ...]
    nights: tuple[Night, ...]
    judged: Rows
    reading: Reading | None
    update: Update | None
    low: tuple[LowField, ...]


def boom_height(scenario: Scenario) -> tuple[float, str]:
    """Height that the wind is read at [m], and where it is from."""
    limits = scenario.limits
    if limits is not None and limits.wind_height_m is not None:
        return limits.wind_height_m, "from your limits"
    return BOOM_HEIGHT, "assumed: no limits name a height"


def check_heights(between: tuple[float, float]) -> None:
    """Raise `DaylayerError` where two heights cannot make a difference near the ground."""
    low, high = between
    if not (LEAST <= low < high <= MOST):
        raise DaylayerError(
            f"heights {low:g} and {high:g} m cannot be compared",
            remedy=f"give a lower and an upper height between {LEAST:g} and {MOST:g} m",
        )


def plan(
    scenario: Scenario, *, between: tuple[float, float] | None = None,
    observed: ObservedTable | None = None, fields_below: Sequence[float] = (),
) -> Plan:  # fmt: skip
    """Run a scenario and its members and judge every half hour.

    Parameters
    ----------
    between : tuple of float, optional
        Lower and upper height [m] of the difference; the tower's, or 1.5 and 9 m, where left out.
    observed : ObservedTable, optional
        Tower readings that the coming hours are moved toward.
    fields_below : sequence of float
        How far fields lie below the site [m].

    Raises
    ------
    DaylayerError
        For heights that make no sense, a run too short for an hour, and readings outside the run.
    """
    pair = tower_pair(observed, between) if observed is not None else between or BETWEEN
    check_heights(pair)
    done = run(scenario, heights=tuple(sorted({*pair, *BETWEEN, 2.0, 10.0})))
    rows = rows_of(float(done.time[0]), float(done.time[-1]), scenario.site.time_zone)
    boom, _ = boom_height(scenario)
    air = field_air(done, rows, pair, boom)
    if len(rows) - air.first_hour < 3:
        raise DaylayerError("the run holds no full local hour", remedy="ask for more hours")
    found = members(done, rows, pair)
    seen = reading(observed, rows, pair) if observed is not None else None
    changed = update(found, rows, seen, _wind_like(done, rows, seen.wind_height)) if seen is not None else None
    used = changed.members if changed is not None else found
    by_night = nights(scenario.site, rows, used)
    read = np.isfinite(seen.difference) & (rows <= seen.last) if seen is not None else np.zeros(rows.shape, dtype=bool)
    sun = suns(scenario.site, float(rows[0]), float(rows[-1]))
    judged = judge(scenario, air, used, by_night, sun, done.surface_pressure, read)
    low = tuple(low_field(below, by_night) for below in fields_below)
    return Plan(done, air, found, tuple(by_night), judged, seen, changed, low)


def _wind_like(done: Run, rows: Array, height: float) -> Array:
    """The run's wind at a tower's height [m s-1] on the rows; NaN without one."""
    if not math.isfinite(height):
        return np.full(rows.shape, math.nan)
    known = np.isfinite(done.fields["wind_10m"])
    knots = [int(np.argmin(np.where(known, np.abs(done.time - t), math.inf))) for t in rows]
    return np.array([wind_at(done, k, height) for k in knots])


def _window(window: Window | None) -> dict[str, Any] | None:
    if window is None:
        return None
    early, late = outward(window)
    return {"early": iso(early), "late": iso(late), "members": window.have}


def _when(seconds: float) -> str | None:
    return iso(seconds) if math.isfinite(seconds) else None


def _night(one: Night) -> dict[str, Any]:
    return {
        "from": iso(one.start), "to": iso(one.stop), "sunset": _when(one.sunset), "sunrise": _when(one.sunrise),
        "onset": _window(one.onset), "end": _window(one.end), "of_members": one.members,
        "there_before": one.from_before, "goes_on": one.goes_on,
        "strongest_difference_K": round(one.strongest, 2) if math.isfinite(one.strongest) else None,
    }  # fmt: skip


def _limits(scenario: Scenario) -> dict[str, Any]:
    limits, values = scenario.limits, spray_limits(scenario.limits)
    height, source = boom_height(scenario)
    return {
        "given": bool(values), "authority": limits.authority if limits is not None else None,
        "dated": limits.dated if limits is not None else None, "wind_height_m": height, "wind_height_source": source,
        **{key: values.get(key) for key in SPRAY_KEYS},
        "order": [{"code": code, "meaning": meaning} for code, meaning in ORDER],
    }  # fmt: skip


def _numbers(values: Array, digits: int) -> list[float | None]:
    return [round(float(x), digits) if math.isfinite(x) else None for x in values]


def _series(made: Plan) -> dict[str, list[Any]]:
    air, judged = made.air, made.judged
    low, high = air.between
    out: dict[str, list[Any]] = {
        "time": [iso(t) for t in air.time],
        "regime": list(air.regime),
        "inversion_state": list(judged.states),
        "temperature_2m_C": _numbers(air.temperature, 3),
        "relative_humidity_2m_pct": _numbers(air.humidity, 2),
        "delta_t_2m_K": _numbers(air.delta_t, 3),
        "wind_10m_m_s": _numbers(air.wind_10m, 3),
        "temperature_difference_K": _numbers(air.difference, 3),
        "temperature_difference_per_8m_K": _numbers(air.per_8m, 3),
        "inversion_from_m": _numbers(air.inversion_from, 1),
        "inversion_depth_m": _numbers(air.inversion_to, 1),
        "share_with_inversion": _numbers(judged.with_inversion, 3),
        "share_inside": _numbers(judged.inside, 3),
        "status": list(judged.statuses),
        "hours_since_break_up": _numbers(air.since, 2),
        "rain_mm_h": _numbers(air.rain, 3),
        "deposit": list(air.deposit),
    }
    if air.boom_height != 10.0:
        out[f"wind_{air.boom_height:g}m_m_s".replace(".", "_")] = _numbers(air.wind, 3)
    for height in (low, high):
        knots = made.run.temperatures[:, made.run.heights.index(height)]
        known = np.isfinite(knots)
        values = np.interp(air.time, made.run.time[known], knots[known], left=math.nan, right=math.nan) - ZERO_CELSIUS
        out[f"temperature_{height:g}m_C".replace(".", "_")] = _numbers(values, 3)
    if made.reading is not None:
        out["observed_difference_K"] = _numbers(made.reading.difference, 3)
        out["observed_wind_m_s"] = _numbers(made.reading.wind, 3)
    return out


def _observed(made: Plan) -> dict[str, Any] | None:
    seen, changed = made.reading, made.update
    if seen is None or changed is None:
        return None
    before = nights(made.run.scenario.site, made.air.time, made.members)
    return {
        "file": seen.file, "heights_m": list(made.air.between),
        "wind_height_m": seen.wind_height if math.isfinite(seen.wind_height) else None,
        "last": iso(changed.last), "observed_difference_K": round(changed.observed_difference, 2),
        "modelled_difference_K": round(changed.modelled_difference, 2),
        "observed_wind_m_s": round(changed.observed_wind, 2) if math.isfinite(changed.observed_wind) else None,
        "modelled_wind_m_s": round(changed.modelled_wind, 2) if math.isfinite(changed.modelled_wind) else None,
        "nights_before": [_night(one) for one in before],
        "method": "the members' differences are moved toward the mean reading of the last hour (ensemble square-root filter, "
        "Whitaker and Hamill 2002) with a common offset that dies away in 4 h; hours that were read take the reading; wind, "
        "Delta-T and the other columns stay as modelled",
    }  # fmt: skip


def _warnings(scenario: Scenario, base: Sequence[str]) -> list[str]:
    said = list(base)
    if scenario.run.hours > LONGEST:
        said.append(
            f"the calendar is meant for 24 to {LONGEST:.0f} h; the rest of {scenario.run.hours:g} h is an outlook"
        )
    if not scenario.weather.given("rain_mm_h"):
        said.append("rain is not known: the weather says nothing of it")
    said.append("wet leaf from rain or irrigation is not known; dew and hoar frost are the model's own")
    return said


def document(made: Plan, *, now: datetime) -> dict[str, Any]:
    """The result document of a plan: plain values, missing is None."""
    scenario = made.run.scenario
    base = document_of(made.run, now=now, with_effects=False)
    limited = bool(spray_limits(scenario.limits))
    seen = made.reading
    beside = {} if seen is None else {"observed_difference_K": seen.difference, "observed_wind_m_s": seen.wind}
    calendar = hours(made.air, made.judged, limited=limited, now=now.timestamp(), seen=beside)
    coming = next((one for one in made.nights if one.stop > now.timestamp()), made.nights[-1])
    out: dict[str, Any] = {
        **{key: base[key] for key in ("schema", "title", "site", "profile", "assumptions", "repairs", "doubts", "sun")},
        "warnings": _warnings(scenario, base["warnings"]), "cautions": [], "product": "spray", "now": iso(now.timestamp()),
        "summary": {
            "hours_inside": sum(hour["status"] == "inside" for hour in calendar) if limited else None,
            "hours_with_inversion": sum(hour["inversion"] == "present" for hour in calendar),
            "onset": _window(coming.onset), "end": _window(coming.end),
            "wind_known": bool(np.any(np.isfinite(made.air.wind))),
        },
        "limits": _limits(scenario), "calendar": calendar,
        "stretches": stretches(calendar, made.air.time, made.judged, made.nights),
        "nights": [_night(one) for one in made.nights],
        "low_ground": {
            "rule": RULE, "source": SOURCES,
            "fields": [
                {"below_m": one.below, "later_h": [round(x, 2) for x in one.later],
                 "ends": [None if end is None else [iso(end[0]), iso(end[1])] for end in one.ends]} for one in made.low
            ],
        },
        "measure": what_to_measure(made.air.between, made.air.boom_height), "observed": _observed(made),
        "spread": {
            "members": len(made.members), "model_timing_min": {key: value / 60.0 for key, value in asdict(TIMING).items()},
            "steps": [{"input": one.name, "step": one.words} for one in steps_of(scenario)],
        },
        "between_m": list(made.air.between), "per_m": PER_METRES, "series": _series(made), "definitions": DEFINITIONS,
        "run": base["run"],
    }  # fmt: skip
    out["cautions"] = spray_cautions(out)
    return out


def spray(
    scenario: Scenario, *, now: datetime | None = None, between: tuple[float, float] | None = None,
    observed: ObservedTable | None = None, fields_below: Sequence[float] = (),
) -> dict[str, Any]:  # fmt: skip
    """Make the calendar of a scenario (see `plan`); ``now`` (aware) is the present where left out."""
    now = now or datetime.now(UTC)
    made = plan(scenario, between=between, observed=observed, fields_below=fields_below)
    return document(made, now=now)
