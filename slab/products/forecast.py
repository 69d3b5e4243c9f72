"""The forecast: one scenario in, the result document out."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from datetime import UTC, datetime
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np

from forcing.named_files import shown_settings, shown_source
from forcing.remarks import scenario_remarks
from forcing.scenario import with_step
from forcing.scenario_types import Assumption, Scenario
from forcing.sun import sunrise_sunset
from slab import __version__
from slab.cautions import complete
from slab.cycle import HEIGHTS, Known, Run, run
from slab.march import Control
from slab.products.events import definitions_at, first_day, summary, wind_known
from slab.products.night_events import night_answers, windows
from slab.products.series import DECAYING, RICHARDSON, SLAB_TOP, STRESS, iso, output_knots, series
from slab.products.sounding import wind
from slab.rendered import profile_at

SCHEMA = "daylayer/1"
COARSE = Control(8.0, 1800.0, 3600.0, reuse=1.0)  # accuracy of the reruns behind the effects of assumptions; both sides use it
OLD_HOURS = 12.0
ARCHIVE_DAYS = 14.0  # an older release is a case from the archive, not a stale input
FAR_KM, FAR_M = 150.0, 300.0
REBASE_DIFFERS = 0.15  # share of the depth from which both rules of re-basing are told
STRATUS, STRATUS_LASTS = 0.4, 3600.0  # cumulus fraction that, held this long [s], counts as a stratus top (our choice)
HELD_HOURS = 24.0

DEFINITIONS = {
    SLAB_TOP: "height of the density jump at the top of the mixed slab",
    STRESS: "height where the stress falls to 5 % of its surface value, divided by 0.95",
    RICHARDSON: "lowest bulk Richardson number over 0.25, in the first hour, while the column settles",
    "mixed": "the surface feeds the layer from below",
    DECAYING: "the slab is still mixed but the surface has begun to take heat from it",
    "gust range": "from the layer's mean wind to the strongest wind up to the top of the entrainment zone, winds aloft as held",
    "inversion": "lowest level where temperature stops rising, minus the lowest level kept (1.5 m)",
}


def profile_document(profile: Any) -> dict[str, Any]:
    """A profile as lists for pictures and files."""
    speed, direction = wind(profile)

    def numbers(values: Any, digits: int) -> list[float | None]:
        return [round(float(x), digits) if math.isfinite(x) else None for x in values]

    ratio = 1000.0 * profile.humidity / (1.0 - profile.humidity)
    return {
        "valid": iso(profile.valid.timestamp()),
        "height_m": numbers(profile.height, 1),
        "pressure_hPa": numbers(profile.pressure / 100.0, 2),
        "theta_K": numbers(profile.theta, 3),
        "mixing_ratio_g_kg": numbers(ratio, 4),
        "temperature_C": numbers(profile.temperature - 273.15, 2),
        "dewpoint_C": numbers(profile.dewpoint - 273.15, 2),
        "wind_m_s": numbers(speed, 2),
        "wind_from_deg": numbers(direction, 1),
    }


def distance_km(scenario: Scenario) -> float:
    """Great-circle distance from release to site [km]; NaN where the release position is unknown."""
    release, site = scenario.original, scenario.site
    a, b = math.radians(release.latitude), math.radians(site.latitude)
    turn = math.radians(release.longitude - site.longitude)
    h = math.sin((a - b) / 2.0) ** 2 + math.cos(a) * math.cos(b) * math.sin(turn / 2.0) ** 2
    return 2.0 * 6371.0 * math.asin(math.sqrt(h)) if math.isfinite(h) else math.nan


def _release(scenario: Scenario, now: datetime) -> dict[str, Any]:
    original = scenario.original
    far = distance_km(scenario)
    return {
        "file": original.file,
        "format": original.format,
        "station": original.station,
        "valid": iso(original.valid.timestamp()),
        "age_hours": round((now - original.valid).total_seconds() / 3600.0, 2),
        "age_at_start_hours": round((scenario.start - original.valid.timestamp()) / 3600.0, 2),
        "distance_km": round(far, 1) if math.isfinite(far) else None,
        "height_difference_m": round(original.elevation - scenario.site.elevation, 1),
        "rebase": scenario.rebase or None,
        "tops": [
            {"definition": t["definition"], "height_m": t["height_m"], "detail": ""}
            for t in definitions_at(scenario.profile)
        ],
    }


def doubts(done: Run, now: datetime) -> list[dict[str, str]]:
    """Doubts of the printed list that apply, with a code each."""
    scenario, found = done.scenario, []
    age = (now - scenario.original.valid).total_seconds() / 3600.0
    if OLD_HOURS < age < 24.0 * ARCHIVE_DAYS:
        found.append(("profile_age", f"the profile is {age:.0f} h old, over {OLD_HOURS:.0f} h"))
    far, rise = distance_km(scenario), abs(scenario.original.elevation - scenario.site.elevation)
    if far > FAR_KM or rise > FAR_M:
        away = f"{far:.0f} km and " if math.isfinite(far) else ""
        found.append(("release_distance", f"the release is {away}{rise:.0f} m of height away"))
    if done.stopped != "end of the run":
        found.append(("top_of_profile", f"the layer reaches the profile's top at {scenario.profile.height[-1]:.0f} m"))
    if _saturated(done):
        found.append(("saturated_layer", "the layer is saturated or topped by fog or stratus, which this model does not treat"))
    if not wind_known(done) and not scenario.weather.given("wind_10m_m_s"):
        found.append(("wind_unknown", "neither the profile nor the weather gives a wind"))
    return [{"code": code, "text": text} for code, text in found]


def _saturated(done: Run) -> bool:
    lasting = np.diff(done.time, append=done.time[-1])
    covered = done.day & (done.fields["cumulus_fraction"] > STRATUS)
    cloudy = float(np.sum(lasting[covered])) >= STRATUS_LASTS
    fog = any(
        note.fog_depth > 0.0 for part in done.parts if part.course is not None for note in part.course.notes.values()
    )
    return cloudy or fog


def warnings(done: Run, now: datetime | None = None) -> list[str]:
    """Remarks on the run and its inputs that are no doubts; on the age of the release only where ``now`` is given."""
    scenario = done.scenario
    said = list(scenario_remarks(scenario))
    days = math.nan if now is None else (now - scenario.original.valid).total_seconds() / 86400.0
    if days >= ARCHIVE_DAYS:
        said.append(f"the release is {days:.0f} days old: a case from the archive")
    if scenario.later is None:
        said.append("the air aloft is held as the balloon found it, but for sinking, advection and radiation")
        if scenario.run.hours > HELD_HOURS:
            said.append("after 24 h the air aloft is a day old: give a later profile, or read the second day as an outlook")
    if done.stopped != "end of the run":
        said.append(f"{done.stopped}: depth and everything after it are left out, not extrapolated")
    said.append(done.anchor.text)
    return said


def effects(scenario: Scenario, done: Run) -> dict[str, tuple[float | None, float | None]]:
    """Change of greatest depth [m] and highest temperature [K] that each assumption's plausible step makes.

    One rerun of the first day for each, by the slab alone and with coarser steps than the forecast; the base it is
    compared with is rerun in the same way. The ground starts as in the forecast unless the step is in the surface.
    None where the step leaves what the model treats: the top of the profile, or saturated air where the forecast has none.
    """
    day = first_day(done)
    if day is None:
        return {}
    hours = max(1.0, (done.time[day.last] - done.time[0]) / 3600.0)
    known = Known(done.anchor, done.free, done.soil_start)

    def rerun(changed: Scenario, key: str) -> Run:
        short = replace(changed, run=replace(changed.run, hours=hours))
        kept = known._replace(soil=None) if key.startswith("surface.") else known
        return run(short, control=COARSE, heights=(), known=kept, by_day=True)

    base_run = rerun(scenario, "")
    base, fogged = _extremes(base_run), _saturated(base_run)
    found = {}
    for one in scenario.assumptions:
        if one.stepped is not None:
            stepped = rerun(with_step(scenario, one), one.key)
            beyond = _saturated(stepped) and not fogged
            depth, warmth = (math.nan, math.nan) if beyond else _extremes(stepped)
            found[one.key] = (_change(depth, base[0], 0), _change(warmth, base[1], 2))
    return found


def _extremes(done: Run) -> tuple[float, float]:
    depth = done.fields["depth"][done.day & np.isfinite(done.fields["depth"])]
    warm = done.fields["temperature_2m"]
    ended = done.stopped == "end of the run"
    return (float(np.max(depth)) if depth.size and ended else math.nan), float(np.nanmax(warm))


def _change(new: float, old: float, digits: int) -> float | None:
    return round(new - old, digits) if math.isfinite(new - old) else None


def _assumption(one: Assumption, found: dict[str, tuple[float | None, float | None]]) -> dict[str, Any]:
    depth, warmth = found.get(one.key, (None, None)) if one.stepped is not None else (None, None)
    return {
        "name": one.name, "key": one.key, "value": one.value_text, "source": one.source, "why": one.why,
        "step": one.step, "effect_on_depth_m": depth, "effect_on_max_temperature_K": warmth,
    }  # fmt: skip


def _own_assumptions(done: Run) -> list[dict[str, Any]]:
    """What the run itself took for granted beyond the scenario's inputs."""
    found = [("long-wave", done.anchor.text, "no long-wave was given"),
             ("long-wave cooling of the free air", f"{86400.0 * done.free.heating:.1f} K a day, the same at all heights",
              "mean of the column's own fluxes between 1 and 4 km")]  # fmt: skip
    if done.soil_start is not None:
        s = done.soil_start
        found.append((
            "soil temperature at the start",
            f"{s.soil[0] - 273.15:.1f} C under the skin, {s.deep - 273.15:.1f} C deep",
            (f"four days between {s.coldest - 273.15:.1f} and {s.warmest - 273.15:.1f} C: surface air at dawn and the residual "
            "layer brought down dry-adiabatically"),
        ))  # fmt: skip
    return [
        {"name": name, "key": "", "value": value, "source": "assumed", "why": why, "step": "", "effect_on_depth_m": None,
         "effect_on_max_temperature_K": None} for name, value, why in found
    ]  # fmt: skip


def _sun(scenario: Scenario) -> dict[str, str | None]:
    local = scenario.profile.valid.astimezone(ZoneInfo(scenario.site.time_zone))
    offset = local.utcoffset()
    hours = offset.total_seconds() / 3600.0 if offset is not None else 0.0
    sun = sunrise_sunset(local.date(), scenario.site.latitude, scenario.site.longitude, utc_offset_hours=hours)

    def said(moment: datetime | None) -> str | None:
        return iso(moment.timestamp()) if moment is not None else None

    return {"sunrise": said(sun.sunrise), "sunset": said(sun.sunset), "solar_noon": said(sun.solar_noon), "polar": sun.polar}


def _afternoon(done: Run, answers: dict[str, Any]) -> int:
    moment = answers.get("mixing_depth_max_time") or answers.get("temperature_2m_max_time")
    known = np.flatnonzero(np.isfinite(done.fields["temperature_2m"]))
    if moment is None:
        return int(known[-1])
    wanted = datetime.fromisoformat(moment).timestamp()
    return int(known[np.argmin(np.abs(done.time[known] - wanted))])


def document_of(done: Run, *, now: datetime | None = None, with_effects: bool = True) -> dict[str, Any]:
    """The result document of a finished run: plain values, missing is None.

    Parameters
    ----------
    now : datetime, optional
        Aware; what the age of the release is counted to. The present where left out.
    with_effects : bool
        Whether to rerun the day once for every assumption that has a plausible step.
    """
    now = now or datetime.now(UTC)
    scenario = done.scenario
    knots = output_knots(done)
    answers = summary(done)
    answers |= windows(answers) | night_answers(done)
    afternoon = profile_at(done, _afternoon(done, answers))
    answers["other_definitions"] = definitions_at(afternoon) if answers["mixing_depth_max_m"] is not None else []
    found = effects(scenario, done) if with_effects else {}
    site = scenario.site
    document: dict[str, Any] = {
        "schema": SCHEMA,
        "title": scenario.title,
        "site": {
            "name": site.name, "latitude": site.latitude, "longitude": site.longitude,
            "elevation_m": site.elevation, "time_zone": site.time_zone,
        },
        "profile": _release(scenario, now),
        "assumptions": [_assumption(one, found) for one in scenario.assumptions] + _own_assumptions(done),
        "repairs": [{"name": r.name, "count": r.count, "detail": r.detail} for r in scenario.original.repairs],
        "warnings": warnings(done, now),
        "cautions": [],
        "doubts": doubts(done, now),
        "summary": answers,
        "series": series(done, knots),
        "definitions": DEFINITIONS,
        "profiles": {"morning": profile_document(scenario.profile), "afternoon": profile_document(afternoon)},
        "sun": _sun(scenario),
        "run": {
            "hours": scenario.run.hours, "output_minutes": scenario.run.output_minutes,
            "entrainment": scenario.run.entrainment, "flux_ratio": scenario.run.flux_ratio,
            "shear_factor": scenario.run.shear_factor, "spin_up_factor": scenario.run.spin_up_factor,
            "stopped": done.stopped, "version": __version__, "scenario": shown_source(scenario),
            "settings": shown_settings(scenario),
        },
    }  # fmt: skip
    document["warnings"] += both_depths(scenario, answers, found)
    document["cautions"] = complete(document)
    return document


def both_depths(scenario: Scenario, answers: dict[str, Any], found: dict[str, tuple[float | None, float | None]]) -> list[str]:
    """A warning with both depths where the two rules of re-basing differ by more than 15 %."""
    change = found.get("profile.rebase", (None, None))[0]
    depth = answers["mixing_depth_max_m"]
    if change is None or not depth or abs(change) <= REBASE_DIFFERS * depth:
        return []
    other = "ground" if scenario.rebase == "sea-level" else "sea-level"
    said = f"{depth:.0f} m by rule {scenario.rebase}, {depth + change:.0f} m by rule {other}"
    return [f"the depth hangs on how the profile is brought to the site: {said}"]


def forecast(scenario: Scenario, *, now: datetime | None = None, with_effects: bool = True,
             heights: Sequence[float] = ()) -> dict[str, Any]:  # fmt: skip
    """Run a scenario and answer (see `document_of`); ``heights`` [m above ground] adds temperatures to the usual ones."""
    kept = tuple(sorted({*HEIGHTS, *heights}))
    return document_of(run(scenario, heights=kept), now=now, with_effects=with_effects)
