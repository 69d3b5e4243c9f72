"""How much an answer depends on each property of the ground: one at a time, at both ends of its published range."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from forcing.cover import LIMITS, Cover, adapt
from forcing.errors import CoverError
from forcing.scenario_types import Scenario
from slab.cycle import Known, run
from slab.products.changes import Change, apply
from slab.products.compare_answers import extremes
from slab.products.covers import ranges
from slab.products.forecast import COARSE

if TYPE_CHECKING:
    from slab.products.compare import Pair

MOISTURE_STEP = 0.25  # a plausible step of soil moisture (common practice), which has no published range
ANSWERS = ("temperature_2m_max_C", "temperature_2m_min_C", "mixing_depth_max_m")
UNITS = {"temperature_2m_max_C": "K", "temperature_2m_min_C": "K", "mixing_depth_max_m": "m"}
#: Snow is another ground; the bounds of soil moisture act through it; the model's heights are above displacement.
SKIPPED = ("snow", "soil_moisture_least", "soil_moisture_most", "displacement")
_PARTS = ("vegetation_fraction", "impervious_fraction")


def sensitivities(pair: Pair, changes: Sequence[Change], progress: Callable[[str], None]) -> dict[str, Any]:
    """Answers of one day with each property of the base ground at the ends of its range, and what each change then does.

    Returns
    -------
    dict
        ``day``; ``rows`` ranked by the effect on the highest temperature, each with the property, its ends, and for both
        ends the change of the base's answers (``base``) and the difference that every change then makes (``changes``).
    """
    scenario = pair.base.scenario
    known = Known(pair.base.anchor, pair.base.free, None)
    here = _numbers(scenario, known)
    rows = []
    for name, unit, source, ends in _variants(scenario):
        progress(f"sensitivity: {name}")
        row: dict[str, Any] = {"property": name, "unit": unit, "source": source, "ends": []}
        for value, changed in ends:
            numbers = _numbers(changed, known)
            entry: dict[str, Any] = {
                "value": value,
                "base": {key: _gap(numbers[key], here[key], key) for key in ANSWERS},
                "changes": {},
            }
            for change in changes:
                entry["changes"][change.name] = _change(change, changed, known, numbers)
            row["ends"].append(entry)
        row["size_K"] = max((abs(e["base"]["temperature_2m_max_C"] or 0.0) for e in row["ends"]), default=0.0)
        rows.append(row)
    rows.sort(key=lambda row: -row["size_K"])
    return {
        "day": pair.name,
        "rows": rows,
        "differences": {
            change.name: {
                key: _gap(made.numbers[key], pair.answered.numbers[key], key) for key in ANSWERS
            }
            for change, (_, made) in zip(changes, pair.changed, strict=True)
        },
        "text": "one property at a time at each end of its published range, everything else as in the base case; soil moisture by "
        f"{MOISTURE_STEP:g} either way, which is no published range",
    }  # fmt: skip


def _numbers(scenario: Scenario, known: Known) -> dict[str, float]:
    """Extremes of one run with coarser steps; both sides of every difference here use them."""
    return dict.fromkeys(ANSWERS, math.nan) | extremes(run(scenario, known=known, control=COARSE))


def _change(change: Change, base: Scenario, known: Known, numbers: dict[str, float]) -> dict[str, float | None] | None:
    """Difference that a change makes to a base whose property was moved; None where both cannot be had together."""
    try:
        changed = apply(change, base).scenario
    except CoverError:
        return None
    after = _numbers(changed, known)
    return {key: _gap(after[key], numbers[key], key) for key in ANSWERS}


def _gap(after: float, before: float, key: str) -> float | None:
    gap = after - before
    return round(gap, 3 if UNITS[key] == "K" else 0) + 0.0 if math.isfinite(gap) else None


def _variants(scenario: Scenario) -> Iterator[tuple[str, str, str, list[tuple[float, Scenario]]]]:
    """Property, unit, source, and the scenario at each end that differs from the value and is possible."""
    ground = scenario.cover
    for key, one in ranges(ground).items():
        if key in SKIPPED:
            continue
        found = []
        for end in (one.low, one.high):
            value = _possible(ground, key, end)
            if abs(value - one.value) > 1e-9 * max(abs(one.value), 1e-6):
                found.append((value, replace(scenario, cover=adapt(ground, {key: value}))))
        if found:
            yield key, one.unit, one.source, found
    least, most = ground.soil_moisture_least, ground.soil_moisture_most
    held = max(least, min(most, scenario.soil_moisture))
    moved = [max(least, min(most, held + step)) for step in (-MOISTURE_STEP, MOISTURE_STEP)]
    steps = [(v, replace(scenario, soil_moisture=v)) for v in moved if v != held]
    if steps:
        yield "soil_moisture", "1", "plausible step", steps


def _possible(ground: Cover, key: str, value: float) -> float:
    """An end of a range inside what is possible; plants and sealed ground cannot exceed the area together."""
    low, high = LIMITS[key]
    if key in _PARTS:
        other = getattr(ground, _PARTS[1 - _PARTS.index(key)])
        high = min(high, 1.0 - other)
    return max(low, min(high, value))
