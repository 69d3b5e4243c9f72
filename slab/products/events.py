"""Events and extremes of a run: when the inversion is gone, how deep, how warm, when cumulus form, and so on."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from forcing.air import CP_DRY, GRAVITY, KAPPA, P_REFERENCE, ZERO_CELSIUS, condensation_level, relative_humidity
from forcing.profile import Profile
from forcing.sun import solar_position
from slab.cycle import DAY, Part, Run
from slab.heat import cloud_levels, heat_to_break
from slab.inversions import Inversion, rising_inversion
from slab.products.series import SLAB_TOP, crossing, iso, screen_profile, transport_wind
from slab.rendered import profile_at

Array = NDArray[np.float64]

FIRST_HOURS = 24.0  # extremes of "the day" are looked for in the first 24 hours of the run
CUMULUS_SEEN = 0.01  # [1] area fraction from which cumulus are said to have begun (our choice)
INVERSION_HEIGHTS = (1.5, 9.0)  # [m] the two named heights of inversion onset, those of the sensors of Oklahoma Mesonet stations
DEEP_SUBCLOUD, DRY_SPREAD = 1500.0, 15.0  # [m, K] our thresholds for the dry-outflow note; the ingredients: NWS Western Region TA 00-09
MORNING_ENDS = 11.0  # [h] solar time
HOLDS = 5400.0  # [s] an evening event counts once it lasts this long: cloud at noon makes no evening (our choice)
ENTRAINMENT_ZONE = 1.125  # top of an entrainment zone a quarter of the depth thick


@dataclass(frozen=True, slots=True)
class Morning:
    """The inversion that the first day has to break: from the release, or from the night before that day."""

    inversion: Inversion
    heat_needed: float
    day: Part


def solar_hour(run: Run, knot: int) -> float:
    """Local solar time of a knot [h]."""
    site = run.scenario.site
    hour_angle = solar_position(run.time[knot : knot + 1], site.latitude, site.longitude).hour_angle
    return float(12.0 + hour_angle[0] * 12.0 / math.pi) % 24.0


def first_day(run: Run) -> Part | None:
    """The first stretch of day that lasts at least an hour, else the first one, else None."""
    days = [part for part in run.parts if part.kind == DAY]
    long = [part for part in days if run.time[part.last] - run.time[part.first] >= 3600.0]
    return next(iter(long or days), None)


def first_whole_day(run: Run) -> Part | None:
    """The first stretch of day that begins before 11 solar time, else None: the rest of an afternoon breaks no inversion."""
    days = [part for part in run.parts if part.kind == DAY and run.time[part.last] - run.time[part.first] >= 3600.0]
    return next((part for part in days if solar_hour(run, part.first) < MORNING_ENDS), None)


def morning(run: Run) -> Morning | None:
    """The inversion before the first day: of the release where the run starts with it, of the computed dawn otherwise."""
    day = first_whole_day(run)
    if day is None:
        return None
    release = run.scenario.profile
    if run.time[day.first] - run.time[0] <= 6.0 * 3600.0:
        found = rising_inversion(release.height, release.temperature)
        return Morning(found, heat_to_break(release, found), day)
    dawn = profile_at(run, max(day.first - 1, 0))
    found = rising_inversion(*screen_profile(run, max(day.first - 1, 0), dawn))
    return Morning(found, heat_to_break(dawn, found), day)


def _peak(values: Array, mask: NDArray[np.bool_], *, lowest: bool = False) -> int | None:
    usable = mask & np.isfinite(values)
    if not usable.any():
        return None
    masked = np.where(usable, -values if lowest else values, -math.inf)
    return int(np.argmax(masked))


def _number(value: float, digits: int) -> float | None:
    return round(float(value), digits) if math.isfinite(value) else None


def _when(seconds: float) -> str | None:
    return iso(seconds) if math.isfinite(seconds) else None


def gone_time(run: Run, found: Morning) -> float:
    """When the slab's top passes the inversion's top [s since 1970 UTC]; NaN if it never does or there was none."""
    if not found.inversion.present:
        return math.nan
    inside = slice(found.day.first, found.day.last + 1)
    over = run.fields["depth"][inside] - found.inversion.top
    if over[0] > 0.0:
        return float(run.time[inside][0])
    return crossing(run.time[inside], over, upward=True)


def gusts(run: Run, day: Part) -> tuple[float, float]:
    """Range of gusts mixed down in the day [m s-1]: the layer's mean wind, and the strongest wind up to the top of the
    entrainment zone (Brasseur 2001 brings the strongest wind of the turbulent layer down; here without its weighting)."""
    low = high = math.nan
    for knot in range(day.first, day.last + 1, 3):
        profile = profile_at(run, knot)
        top = ENTRAINMENT_ZONE * float(run.fields["depth"][knot])
        inside = profile.height <= top
        strongest = float(np.max(np.hypot(profile.u, profile.v)[inside]))
        mean, _ = transport_wind(profile, float(run.fields["depth"][knot]))
        if not strongest <= high:
            low, high = mean, strongest
    return min(low, high), high


def cumulus(run: Run) -> tuple[float, float]:
    """Onset [s since 1970 UTC] and base then [m above ground]; NaN where none form in the first 24 hours."""
    fraction = run.fields["cumulus_fraction"]
    early = run.time <= run.time[0] + FIRST_HOURS * 3600.0
    seen = np.flatnonzero(early & (fraction > CUMULUS_SEEN))
    if seen.size == 0:
        return math.nan, math.nan
    k = int(seen[0])
    theta, humidity = float(run.fields["theta"][k]), float(run.fields["humidity"][k])
    exner = (run.surface_pressure / P_REFERENCE) ** KAPPA
    return float(run.time[k]), condensation_level(theta * exner, humidity, run.surface_pressure)


def subcloud(run: Run, knot: int) -> tuple[float, str | None]:
    """Depth of the dry-adiabatic layer under the condensation level [m], and a note where dry outflow gusts are plausible.

    Ingredients: a deep dry-adiabatic layer that reaches a high condensation level (common practice; Western Region
    Technical Attachment 00-09 in general words).
    """
    f = run.fields
    theta, humidity = float(f["theta"][knot]), float(f["humidity"][knot])
    warm = theta * (run.surface_pressure / P_REFERENCE) ** KAPPA
    base = condensation_level(warm, humidity, run.surface_pressure)
    depth = min(float(f["depth"][knot]), base)
    reached = ENTRAINMENT_ZONE * float(f["depth"][knot]) >= base
    if reached and depth >= DEEP_SUBCLOUD and base / 125.0 >= DRY_SPREAD:
        return depth, "gusty dry outflow is plausible under any shower or deep cumulus"
    return depth, None


def evening(run: Run, day: Part) -> dict[str, str | None]:
    """Three events with three names: sensible flux reversal, inversion at two named heights, end of convective mixing."""
    f, time = run.fields, run.time
    span = time >= time[day.first] + 3600.0
    start = float(time[int(np.argmax(span))]) if span.any() else math.inf
    low, high = (run.heights.index(z) if z in run.heights else -1 for z in INVERSION_HEIGHTS)
    onset = math.nan
    if low >= 0 and high >= 0:
        difference = run.temperatures[:, high] - run.temperatures[:, low]
        onset = crossing(time, difference, upward=True, after=start, holds=HOLDS)
    return {
        "sensible_flux_reversal_time": _when(crossing(time, f["sensible"], upward=False, after=start, holds=HOLDS)),
        "inversion_onset_time": _when(onset),
        "mixing_end_time": _when(crossing(time, f["buoyancy_flux"], upward=False, after=start, holds=HOLDS)),
    }


def _relative_humidity(run: Run) -> Array:
    t, q = run.fields["temperature_2m"], run.fields["humidity_2m"]
    out = np.full(t.shape, math.nan)
    for k in np.flatnonzero(np.isfinite(t)):
        out[k] = 100.0 * min(1.0, relative_humidity(float(t[k]), float(q[k]), run.surface_pressure))
    return out


def summary(run: Run) -> dict[str, Any]:
    """The answers of the day, in the names of the result document; missing is None."""
    f, time = run.fields, run.time
    early = time <= time[0] + FIRST_HOURS * 3600.0
    deepest = _peak(f["depth"], early & run.day)
    warmest = _peak(f["temperature_2m"], early)
    after = time >= time[warmest] if warmest is not None else early
    coldest = _peak(f["temperature_2m"], after & (time <= time[0] + 36.0 * 3600.0), lowest=True)
    wet = _relative_humidity(run)
    driest = _peak(wet, early, lowest=True)
    cloud = cloud_levels(run.scenario.profile)
    onset, base = cumulus(run)
    reached_top = run.stopped != "end of the run"
    out: dict[str, Any] = {
        "mixing_depth_max_m": None if deepest is None or reached_top else _number(f["depth"][deepest], 1),
        "mixing_depth_max_time": None if deepest is None or reached_top else iso(time[deepest]),
        "mixing_depth_definition": SLAB_TOP,
        "temperature_2m_max_C": None if warmest is None else _number(f["temperature_2m"][warmest] - ZERO_CELSIUS, 2),
        "temperature_2m_max_time": None if warmest is None else iso(time[warmest]),
        "temperature_2m_min_C": None if coldest is None else _number(f["temperature_2m"][coldest] - ZERO_CELSIUS, 2),
        "temperature_2m_min_time": None if coldest is None else iso(time[coldest]),
        "relative_humidity_2m_min_pct": None if driest is None else _number(wet[driest], 1),
        "relative_humidity_2m_min_time": None if driest is None else iso(time[driest]),
        "convective_temperature_C": _number(cloud.convective_temperature - ZERO_CELSIUS, 2),
        "cumulus_onset_time": _when(onset),
        "cumulus_base_m": _number(base, 1),
    }
    out |= _morning_answers(run) | _wind_answers(run, None if reached_top else deepest)
    day = first_day(run)
    if day is not None:
        out |= evening(run, day)
    if warmest is not None:
        exner = (run.surface_pressure / P_REFERENCE) ** KAPPA
        screen = (float(f["temperature_2m"][warmest]) + 2.0 * GRAVITY / CP_DRY) / exner
        out["superadiabatic_excess_K"] = _number(screen - float(f["theta"][warmest]), 2) if run.day[warmest] else None
        depth, note = subcloud(run, warmest) if run.day[warmest] else (math.nan, None)
        out |= {"inverted_v_depth_m": _number(depth, 1), "dry_outflow_note": note}
    return out


def _morning_answers(run: Run) -> dict[str, Any]:
    found = morning(run)
    if found is None:
        return {"inversion_gone_time": None, "inversion_heat_needed_MJ_m2": None, "inversion_heat_expected_MJ_m2": None}
    inside = slice(found.day.first, found.day.last + 1)
    given = np.clip(run.fields["sensible"][inside], 0.0, None)
    steps = np.diff(run.time[inside])
    expected = float(np.sum(steps * 0.5 * (given[1:] + given[:-1])))
    return {
        "inversion_gone_time": _when(gone_time(run, found)),
        "inversion_heat_needed_MJ_m2": _number(found.heat_needed / 1e6, 3),
        "inversion_heat_expected_MJ_m2": _number(expected / 1e6, 3),
    }


def wind_known(run: Run) -> bool:
    """Whether profile or weather say anything about the wind aloft."""
    return run.scenario.profile.wind_known or run.scenario.weather.given("pressure_gradient_wind_m_s")


def _wind_answers(run: Run, deepest: int | None) -> dict[str, Any]:
    empty = {"gust_low_m_s": None, "gust_high_m_s": None, "transport_wind_m_s": None, "ventilation_m2_s": None,
             "ventilation_class": None}  # fmt: skip
    day = next((part for part in run.parts if deepest is not None and part.first <= deepest <= part.last), None)
    if deepest is None or day is None or not wind_known(run):
        return empty
    depth = float(run.fields["depth"][deepest])
    speed, from_deg = transport_wind(profile_at(run, deepest), depth)
    low, high = gusts(run, day)
    return {
        "gust_low_m_s": _number(low, 2),
        "gust_high_m_s": _number(high, 2),
        "transport_wind_m_s": _number(speed, 2),
        "transport_wind_from_deg": _number(from_deg, 0),
        "ventilation_m2_s": _number(depth * speed, 0),
        "ventilation_class": ventilation_class(run, depth * speed),
    }


def ventilation_class(run: Run, rate: float) -> dict[str, Any] | None:
    """Class of the user's own table that a ventilation rate [m2 s-1] falls in, with authority and date; None without one."""
    limits = run.scenario.limits
    if limits is None or not limits.ventilation:
        return None
    held = [one for one in sorted(limits.ventilation, key=lambda c: c.from_m2_s) if rate >= one.from_m2_s]
    if not held:
        return None
    return {"name": held[-1].name, "authority": limits.authority, "dated": limits.dated}


def definitions_at(profile: Profile) -> list[dict[str, Any]]:
    """Tops of one computed profile by the published definitions, for the range that is printed beside the depth."""
    from slab.tops import all_tops

    return [{"definition": top.definition, "height_m": _number(top.height, 0)} for top in all_tops(profile)]
