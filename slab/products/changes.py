"""A change of ground in words, and the scenario it makes of a base case.

A change is one or more steps, parted by commas, with a name before a colon where one is wanted::

    cover irrigated crop              the whole area becomes this cover, or a mixture: cover 70% heath + 30% stubble
    30% deciduous forest              that part of the area does; the rest stays as it was
    canopy +10%                       the same with trees (deciduous forest)
    irrigation                        the soil is kept wet
    soil moisture 0.8                 a value; +0.2 or -0.2 shifts it, +10% scales it
    albedo +0.10                      any property of a cover, in the same three ways
    roof albedo 0.65                  roofs only: their share of the plan area counts
    heat +20                          anthropogenic heat, mean of the day, W/m2
    cool roofs: roof albedo 0.65, emissivity 0.92
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

from forcing.cover import LIMITS, Cover, adapt, cover, mixture
from forcing.errors import CoverError, ScenarioError
from forcing.own_covers import read_own_covers, resolve
from forcing.scenario_types import Scenario
from forcing.series import suggestion

TREES = "deciduous forest"
IRRIGATED = "irrigated crop"
BLENDING = (
    "a mixture is one ground: area means of its parts' properties, roughness by the mean drag at 60 m height; "
    "its parts do not exchange side by side"
)
ALIASES: Mapping[str, str] = {
    "heat": "anthropogenic_heat",
    "roughness": "roughness_momentum",
    "vegetation": "vegetation_fraction",
    "roofs": "built_fraction",
}
MOISTURE, ROOF = "soil_moisture", "roof_albedo"

_PART = re.compile(r"(\d+(?:\.\d+)?)\s*%\s*(?:of\s+)?(\D.*)")
_VALUE = re.compile(r"(.+?)\s*(?:=\s*|\s|(?=[+-]))\s*([+-]?\d+(?:\.\d+)?(?:e-?\d+)?)\s*(%?)(?:\s*(?:W/m2|W m-2|K|m))?")


@dataclass(frozen=True, slots=True)
class Change:
    """A change as it was written: name, words, and where it stands (for messages)."""

    name: str
    text: str
    place: str


@dataclass(frozen=True, slots=True)
class Changed:
    """What a change makes of a base case.

    ``area_fraction`` of the area with another cover and ``albedo_step`` of the area mean are None where the change is not
    that, or not that alone: an effect per unit would then mix several causes. ``words`` say what each step did.
    """

    scenario: Scenario
    area_fraction: float | None
    albedo_step: float | None
    words: tuple[str, ...]


def change_of(text: str, *, name: str = "", place: str = "--change") -> Change:
    """A change from its words; a name may stand before a colon.

    Raises
    ------
    ScenarioError
        Where there are no words.
    """
    before, colon, after = text.partition(":")
    words = (after if colon else text).strip()
    if not words:
        raise ScenarioError(f"'{text}' says no change", place=place, remedy='write for example "albedo +0.10"')
    return Change(name.strip() or (before.strip() if colon else words), words, place)


def changes_of(scenario: Scenario) -> tuple[Change, ...]:
    """Changes from the ``[[change]]`` tables of a scenario."""
    rows = scenario.settings.get("change")
    return tuple(
        change_of(str(row["make"]), name=str(row.get("name", "")), place=f"{scenario.source}: change {number} make")
        for number, row in enumerate(rows if isinstance(rows, list | tuple) else (), start=1)
    )


def apply(change: Change, scenario: Scenario) -> Changed:
    """The scenario with the ground changed.

    Raises
    ------
    ScenarioError, CoverError
        Words that are no change, an unknown cover or property, an impossible value; the change is named.
    """
    now, done, kinds, share = scenario, [], set(), 0.0
    own = read_own_covers(scenario.settings, scenario.source)
    for step in (one.strip() for one in change.text.split(",")):
        try:
            now, kind, part = _step(step, now, own)
        except CoverError as problem:
            raise CoverError(problem.problem, place=f"{change.place} '{change.text}'", remedy=problem.remedy) from None
        kinds.add(kind)
        share += part
        done.append(_told(step, scenario, now, kind))
    step_albedo = now.cover.albedo - scenario.cover.albedo
    return Changed(
        now,
        share if kinds == {"part"} and len(done) == 1 and share > 0.0 else None,
        step_albedo if kinds <= {"albedo", ROOF} and step_albedo != 0.0 else None,
        tuple(done),
    )


def _told(step: str, before: Scenario, after: Scenario, kind: str) -> str:
    if kind == "part":
        return f"{step}: the ground is then {after.cover.name} ({BLENDING})"
    if kind == ROOF:
        return (
            f"{step}: roofs are {before.cover.built_fraction:.0%} of the area and have its albedo before; "
            f"area albedo {before.cover.albedo:.3g} to {after.cover.albedo:.3g}"
        )
    if kind == MOISTURE:
        return f"{step}: soil moisture {before.soil_moisture:.3g} to {after.soil_moisture:.3g}"
    if kind in LIMITS:
        return f"{step}: {kind} {getattr(before.cover, kind):.3g} to {getattr(after.cover, kind):.3g}"
    return step


def _step(step: str, scenario: Scenario, own: Mapping[str, Cover]) -> tuple[Scenario, str, float]:
    """Scenario after one step, what kind it was, and the share of the area that got another cover."""
    words = " ".join(step.split())
    low = words.lower()
    if low.startswith("cover "):
        return replace(scenario, cover=resolve(words[6:].strip(), own)), "cover", 1.0
    if low in ("irrigation", "irrigated", "irrigate"):
        wet = cover(IRRIGATED).soil_moisture_least
        ground = adapt(scenario.cover, {"soil_moisture_most": max(scenario.cover.soil_moisture_most, wet)})
        return replace(scenario, cover=ground, soil_moisture=max(wet, scenario.soil_moisture)), MOISTURE, 0.0
    found = _PART.fullmatch(words)
    trees = re.fullmatch(r"canopy\s*\+\s*(\d+(?:\.\d+)?)\s*%", low)
    if found or trees:
        share, name = (float(found[1]), found[2]) if found else (float(trees[1]), TREES)  # type: ignore[index]
        return (
            replace(scenario, cover=_with_part(scenario.cover, share / 100.0, resolve(name, own))),
            "part",
            share / 100.0,
        )
    value = _VALUE.fullmatch(words)
    if value is None:
        raise CoverError(
            f"'{step}' is not understood",
            remedy='write like "albedo +0.10", "30% deciduous forest", "cover irrigated crop" or "irrigation"',
        )
    return _valued(value[1], value[2], bool(value[3]), scenario)


def _with_part(base: Cover, share: float, other: Cover) -> Cover:
    """The base with a part of its area under another cover."""
    if not 0.0 <= share <= 1.0:
        raise CoverError(f"{100.0 * share:g}% of the area is not possible", remedy="give 0 to 100 percent")
    shares: dict[Cover, float] = {}
    for weight, part in [*((w * (1.0 - share), p) for w, p in base.parts or ((1.0, base),)), (share, other)]:
        shares[part] = shares.get(part, 0.0) + weight
    return mixture(shares)


def _valued(name: str, number: str, percent: bool, scenario: Scenario) -> tuple[Scenario, str, float]:
    """One step that sets, shifts or scales a number."""
    key = name.strip().lower().replace(" ", "_").replace("-", "_")
    key = ALIASES.get(key, key)
    if key not in LIMITS and key not in (MOISTURE, ROOF):
        known = [MOISTURE, ROOF, *ALIASES, *LIMITS]
        raise CoverError(f"unknown property '{name.strip()}'", remedy=suggestion(key, known).replace("_", " "))
    move = _mover(name, number, percent)
    if key == MOISTURE:
        moisture = move(scenario.soil_moisture)
        if not 0.0 <= moisture <= 1.0:
            raise CoverError(f"soil moisture {moisture:g} is not possible", remedy="stay from 0 to 1")
        return replace(scenario, soil_moisture=moisture), MOISTURE, 0.0
    if key == ROOF:
        return replace(scenario, cover=_each(scenario.cover, _roofs(move, scenario.cover))), ROOF, 0.0
    return replace(scenario, cover=_each(scenario.cover, lambda part: {key: move(getattr(part, key))})), key, 0.0


def _mover(name: str, number: str, percent: bool) -> Callable[[float], float]:
    """What a written number does to a value: a sign shifts it, a sign and a percent scale it, neither sets it."""
    amount = float(number)
    signed = number[0] in "+-"
    if percent and not signed:
        raise CoverError(f"'{name} {number}%' has no sign", remedy="write +10% or -10%")
    if percent:
        return lambda old: old * (1.0 + amount / 100.0)
    return (lambda old: old + amount) if signed else (lambda old: amount)


def _roofs(move: Callable[[float], float], base: Cover) -> Callable[[Cover], dict[str, float]]:
    """Change of a part's albedo where only its roofs change, which have the part's albedo before."""
    if base.built_fraction <= 0.0:
        raise CoverError(f'"{base.name}" has no roofs', remedy="choose a built cover as the base")

    def changed(part: Cover) -> dict[str, float]:
        return {"albedo": part.albedo + part.built_fraction * (move(part.albedo) - part.albedo)}

    return changed


def _each(base: Cover, changes: Callable[[Cover], dict[str, float]]) -> Cover:
    """A cover, or every part of a mixture, with changed properties."""
    if not base.parts:
        return adapt(base, _clean(changes(base)))
    shares: dict[Cover, float] = {}
    for share, part in base.parts:
        new = adapt(part, _clean(changes(part)))
        shares[new] = shares.get(new, 0.0) + share
    return mixture(shares)


def _clean(values: dict[str, float]) -> dict[str, float]:
    """Values without the last binary digits, so that 0.2 + 0.1 is 0.3."""
    return {key: float(f"{value:.12g}") if math.isfinite(value) else value for key, value in values.items()}
