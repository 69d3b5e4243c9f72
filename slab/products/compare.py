"""Base case against changes of ground, over one day or many, by day and night: one document of plain values."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from forcing.errors import ModelError, ScenarioError
from forcing.named_files import shown_settings, shown_source
from forcing.scenario_types import Scenario
from forcing.weather import ObservedTable
from slab import __version__
from slab.cycle import Known, Run, run
from slab.products.changes import BLENDING, Change, Changed, apply
from slab.products.compare_answers import HOURLY, QUANTITIES, Answered, answers
from slab.products.compare_cautions import NOT_MODELLED, planning_cautions
from slab.products.compare_observed import score
from slab.products.compare_spread import (
    MANY,
    SPREAD_WORDS,
    answer_table,
    day_record,
    effectiveness,
    hourly_table,
    spread,
)
from slab.products.compare_tiles import tile_check
from slab.products.covers import cover_record
from slab.products.days import Day, left_out
from slab.products.forecast import SCHEMA, doubts

THRESHOLD = 30.0  # [degrees C] of hours above and degree-hours, where the user gives none (our choice)
PATCHES = (3.0, 5.0)  # several turnover lengths are preferred (common practice)
Progress = Callable[[str], None]


@dataclass(frozen=True, slots=True)
class Pair:
    """One day: base run and answers, then for every change what it made and its answers."""

    name: str
    base: Run
    answered: Answered
    changed: tuple[tuple[Changed, Answered], ...]
    tiles: tuple[dict[str, Any] | None, ...]


def check_ground(scenario: Scenario) -> None:
    """Raise where the ground cannot act, because what it would do is given."""
    if scenario.fluxes is not None:
        raise ScenarioError(
            "surface fluxes are given, so a change of ground changes nothing",
            place=f"{scenario.source}: [surface] fluxes",
            remedy="drop them, so that the energy balance computes the fluxes",
        )
    if scenario.weather.given("net_radiation_W_m2"):
        raise ScenarioError(
            "net radiation is given, so that a change of albedo or skin temperature would not count",
            place=f"{scenario.source}: [weather] net_radiation_W_m2",
            remedy="drop it, so that net radiation is computed",
        )


def run_pair(name: str, scenario: Scenario, changes: Sequence[Change], threshold: float) -> Pair:
    """Run one day with its base ground and with every change; all from the same release and weather.

    Raises
    ------
    ScenarioError, CoverError, ModelError
        Where a change is not possible or a run cannot be made.
    """
    check_ground(scenario)
    base = run(scenario)
    known = Known(base.anchor, base.free, None)  # of the profile alone, so the same for every ground
    found, tiles = [], []
    for change in changes:
        changed = apply(change, scenario)
        done = run(changed.scenario, known=known)
        found.append((changed, answers(done, threshold)))
        tiles.append(tile_check(done))
    return Pair(name, base, answers(base, threshold), tuple(found), tuple(tiles))


def run_days(days: Sequence[Day], changes: Sequence[Change], threshold: float,
             progress: Progress = lambda _: None) -> tuple[list[Pair], list[Day]]:  # fmt: skip
    """All days that can be run, and those that cannot with their reason.

    Raises
    ------
    DaylayerError
        A change that is wrong on every day; no day at all.
    """
    pairs, failed = [], []
    usable = [day for day in days if day.scenario is not None]
    for number, day in enumerate(usable, start=1):
        assert day.scenario is not None
        progress(f"day {number} of {len(usable)}: {day.name}")
        try:
            pairs.append(run_pair(day.name, day.scenario, changes, threshold))
        except ModelError as problem:
            if len(usable) == 1:
                raise
            failed.append(replace(day, scenario=None, problem=str(problem)))
    if not pairs:
        reasons = "; ".join(f"{reason}: {count}" for reason, count, _ in left_out([*days, *failed]))
        raise ScenarioError(f"none of {len(days)} days can be used ({reasons})", remedy="give other profiles or months")
    return pairs, failed


def compare(days: Sequence[Day], changes: Sequence[Change], *, threshold: float = THRESHOLD,
            observed: ObservedTable | None = None, sensitivity: bool = False,
            progress: Progress = lambda _: None) -> dict[str, Any]:  # fmt: skip
    """Compare a base case with changes of its ground.

    Parameters
    ----------
    days : sequence of Day
        Base cases that share their ground.
    changes : sequence of Change
    threshold : float
        2 m temperature [degrees C] for hours above it and degree-hours.
    observed : ObservedTable, optional
        Readings that the base case is scored with.
    sensitivity : bool
        Also rerun the middle day with each property of the ground at the ends of its published range.

    Returns
    -------
    dict
        Plain values; missing is None. Differences are changed minus base.
    """
    if not changes:
        raise ScenarioError("no change to compare with", place="--change", remedy='write --change "albedo +0.10"')
    pairs, failed = run_days(days, changes, threshold, progress)
    base = [pair.answered for pair in pairs]
    first = pairs[0].base.scenario
    document: dict[str, Any] = {
        "schema": SCHEMA,
        "kind": "comparison",
        "title": first.title if len(pairs) == 1 else str(first.settings.get("title", "")).split(",")[0],
        "site": _site(pairs),
        "base": _base(first),
        "days": _days(pairs, days, failed),
        "changes": [_change(n, one, pairs, base) for n, one in enumerate(changes)],
        "patch": _patch(base),
        "threshold_C": threshold,
        "spread": SPREAD_WORDS[len(pairs) >= MANY] if len(pairs) > 1 else "one day, no spread",
        "observed": None if observed is None else score([pair.base for pair in pairs], observed),
        "sensitivity": None,
        "not_modelled": list(NOT_MODELLED),
        "warnings": _warnings(pairs),
        "cautions": [],
        "doubts": _doubts(pairs),
        "definitions": {name: one.meaning for name, one in (dict(QUANTITIES) | dict(HOURLY)).items()} | {"blending": BLENDING},
        "run": {
            "hours": first.run.hours, "entrainment": first.run.entrainment, "flux_ratio": first.run.flux_ratio,
            "version": __version__, "scenario": shown_source(first),
            "settings": shown_settings(first),
        },
    }  # fmt: skip
    if sensitivity:
        from slab.products.compare_sensitivity import sensitivities

        document["sensitivity"] = sensitivities(middle(pairs), changes, progress)
    document["cautions"] = planning_cautions(document)
    return document



def middle(pairs: Sequence[Pair]) -> Pair:
    """The day whose greatest depth is in the middle of all; shallower of two."""
    known = sorted(pairs, key=lambda pair: pair.answered.numbers["mixing_depth_max_m"])
    return known[(len(known) - 1) // 2]


def _site(pairs: Sequence[Pair]) -> dict[str, Any]:
    sites = [pair.base.scenario.site for pair in pairs]
    one = sites[0]
    if all((s.latitude, s.longitude) == (one.latitude, one.longitude) for s in sites):
        return {
            "name": one.name, "latitude": one.latitude, "longitude": one.longitude, "elevation_m": one.elevation,
            "time_zone": one.time_zone,
        }  # fmt: skip
    return {"name": f"{len(sites)} places", "latitude": None, "longitude": None, "elevation_m": None, "time_zone": None}


def _base(scenario: Scenario) -> dict[str, Any]:
    return cover_record(scenario.cover) | {
        "soil_moisture": scenario.soil_moisture,
        "assumed": [
            {"name": one.name, "value": one.value_text, "source": one.source, "why": one.why}
            for one in scenario.assumptions
        ],
    }


def _days(pairs: Sequence[Pair], days: Sequence[Day], failed: Sequence[Day]) -> dict[str, Any]:
    runs = []
    for pair in pairs:
        scenario = pair.base.scenario
        record = day_record(pair.name, pair.answered)
        runs.append(
            record
            | {
                "site": scenario.site.name,
                "time_zone": scenario.site.time_zone,
                "valid": scenario.profile.valid.strftime("%Y-%m-%dT%H:%M:%SZ"),
                "file": Path(scenario.original.file).name,
                "repairs": [{"name": r.name, "count": r.count} for r in scenario.original.repairs],
            }
        )
    out = [{"reason": reason, "count": count, "first": name} for reason, count, name in left_out([*days, *failed])]
    return {"used": len(pairs), "given": len(days), "left_out": out, "runs": runs}


def _change(number: int, change: Change, pairs: Sequence[Pair], base: Sequence[Answered]) -> dict[str, Any]:
    made = pairs[0].changed[number][0]
    changed = [pair.changed[number][1] for pair in pairs]
    table = answer_table(base, changed)
    return {
        "name": change.name,
        "text": change.text,
        "steps": list(made.words),
        "ground": cover_record(made.scenario.cover) | {"soil_moisture": made.scenario.soil_moisture},
        "tiles": pairs[0].tiles[number],
        "area_fraction": made.area_fraction,
        "albedo_step": None if made.albedo_step is None else round(made.albedo_step, 6),
        "answers": table,
        "hourly": hourly_table(base, changed),
        "effectiveness": [
            one
            for one in (
                effectiveness(table, made.albedo_step, "area-mean albedo"),
                effectiveness(table, made.area_fraction, "area fraction of the other cover"),
            )
            if one is not None
        ],
        "runs": [day_record(pair.name, pair.changed[number][1]) for pair in pairs],
    }


def _patch(base: Sequence[Answered]) -> dict[str, Any]:
    return {
        "length_m": spread((one.patch for one in base), "m"),
        "turnover_s": spread((one.turnover for one in base), "m"),
        "wind_m_s": spread((one.wind for one in base), "m s-1"),
        "heating_length_m": spread((one.heating for one in base), "m"),
        "several": list(PATCHES),
        "text": "mixed-layer wind times turnover time (depth over convective velocity), 10 to 14 h solar time, of the base case; "
        "several such lengths are preferred; at night air travels further before it is mixed, so the length is longer. The whole "
        "difference of the afternoon needs air that was over the changed ground since the morning: wind times hours of heating",
    }


def _warnings(pairs: Sequence[Pair]) -> list[str]:
    said = [
        (
            "base and changes start from the same release: the air and the night before are those of the ground it was "
            "released over; only the soil is adapted to each ground"
        )
    ]
    if any(pair.base.scenario.weather.given("wind_10m_m_s") for pair in pairs):
        said.append("the 10 m wind is given, so that a change of roughness does not change it")
    for pair in pairs:
        for label, one in [("base", pair.answered), *((c.scenario.cover.name, a) for c, a in pair.changed)]:
            if one.stopped != "end of the run":
                said.append(f"{pair.name}, {label}: {one.stopped}; depth and what follows are left out")
    return said


def _doubts(pairs: Sequence[Pair]) -> list[dict[str, str]]:
    """Doubts of the base runs, but for the age of a release: a comparison is of stated days, not of today."""
    found: dict[str, tuple[str, list[str]]] = {}
    for pair in pairs:
        for one in doubts(pair.base, pair.base.scenario.original.valid):
            found.setdefault(one["code"], (one["text"], []))[1].append(pair.name)
    return [
        {
            "code": code,
            "text": text if len(pairs) == 1 else f"{text} ({len(names)} of {len(pairs)} days, first {names[0]})",
        }
        for code, (text, names) in found.items()
    ]


__all__ = ["THRESHOLD", "Pair", "check_ground", "compare", "middle", "run_days", "run_pair"]
