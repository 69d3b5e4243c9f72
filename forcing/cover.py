"""Land covers: what the ground is made of, one sourced number and range per property.

`cover` finds a cover by name or blends several by area; `ground` turns it into the numbers the kernels need, and `tiles` into
one ground per part, for surfaces that exchange side by side with one layer of air.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from difflib import get_close_matches
from functools import cache
from pathlib import Path

from forcing.errors import CoverError
from forcing.exchange import NO_EVAPORATION, Ground

BLENDING_HEIGHT = 60.0  # m, where wind over a patchwork is common to all patches (Wieringa 1986: 60 m; recalled)
# Sellers et al. 1992 (J. Geophys. Res. 97, 19033): ln r = 8.206 - 4.255 W, W saturation of the upper soil (recalled)
SOIL_RESISTANCE = (8.206, 4.255)
FIELD_SATURATION = 0.75  # saturation of a loam at field capacity (common practice); the soil's top dries to nothing
FRACTION_SLACK = 1e-6


@dataclass(frozen=True, slots=True)
class Cover:
    """Properties of one land cover; the numbers may be overridden one by one (`dataclasses.replace`)."""

    name: str
    albedo: float
    emissivity: float
    roughness_momentum: float  # m
    roughness_log_ratio: float  # ln(roughness of momentum / of heat)
    displacement: float  # m
    skin_conductance: float  # W m-2 K-1
    vegetation_fraction: float
    impervious_fraction: float
    leaf_area: float  # m2 m-2 of the vegetated part
    stomatal_resistance_min: float  # s m-1
    stomatal_radiation: float  # W m-2
    stomatal_slope: float  # kPa^0.5
    soil_conductivity_dry: float  # W m-1 K-1 at the wilting point
    soil_conductivity_wet: float  # W m-1 K-1 at field capacity
    soil_heat_capacity_dry: float  # J m-3 K-1
    soil_heat_capacity_wet: float  # J m-3 K-1
    soil_moisture_least: float  # the soil is never drier, 0..1
    soil_moisture_most: float  # the soil is never wetter, 0..1
    built_fraction: float  # plan area of roofs
    sky_view: float  # of the open ground between
    anthropogenic_heat: float  # W m-2, mean of the day
    snow: float  # 1 where snow lies
    parts: tuple[tuple[float, Cover], ...] = field(default=(), repr=False)


@dataclass(frozen=True, slots=True)
class Property:
    """One number with its range and where it is from."""

    value: float
    low: float
    high: float
    unit: str
    source: str


#: Bounds of the physically possible, for overrides: (lowest, highest).
LIMITS: Mapping[str, tuple[float, float]] = {
    "albedo": (0.0, 0.98),
    "emissivity": (0.5, 1.0),
    "roughness_momentum": (1e-5, 6.0),
    "roughness_log_ratio": (-2.0, 25.0),
    "displacement": (0.0, 100.0),
    "skin_conductance": (0.1, 1000.0),
    "vegetation_fraction": (0.0, 1.0),
    "impervious_fraction": (0.0, 1.0),
    "leaf_area": (0.0, 12.0),
    "stomatal_resistance_min": (10.0, 2000.0),
    "stomatal_radiation": (1.0, 1000.0),
    "stomatal_slope": (0.0, 50.0),
    "soil_conductivity_dry": (0.02, 10.0),
    "soil_conductivity_wet": (0.02, 10.0),
    "soil_heat_capacity_dry": (5e4, 6e6),
    "soil_heat_capacity_wet": (5e4, 6e6),
    "soil_moisture_least": (0.0, 1.0),
    "soil_moisture_most": (0.0, 1.0),
    "built_fraction": (0.0, 1.0),
    "sky_view": (0.05, 1.0),
    "anthropogenic_heat": (0.0, 2000.0),
    "snow": (0.0, 1.0),
}


@cache
def table() -> Mapping[str, Mapping[str, Property]]:
    """Cover name -> property name -> number with range, unit and source, as shipped."""
    found: dict[str, dict[str, Property]] = {}
    text = Path(__file__).with_name("covers.csv").read_text(encoding="utf-8")
    for row in csv.DictReader(text.splitlines()):
        one = Property(float(row["value"]), float(row["low"]), float(row["high"]), row["unit"], row["source"])
        found.setdefault(row["cover"], {})[row["property"]] = one
    return found


def names() -> tuple[str, ...]:
    """Names of the covers that are built in."""
    return tuple(table())


def _of(name: str, values: Mapping[str, float], parts: tuple[tuple[float, Cover], ...] = ()) -> Cover:
    return Cover(name, **values, parts=parts)


def _known(name: str) -> Cover:
    wanted = " ".join(name.replace("_", " ").lower().split())
    rows = table().get(wanted)
    if rows is None:
        close = get_close_matches(wanted, names(), n=1, cutoff=0.5)
        meant = f'did you mean "{close[0]}"? ' if close else ""
        raise CoverError(f'unknown land cover "{name}"', remedy=f"{meant}known: {', '.join(names())}")
    return _of(wanted, {key: one.value for key, one in rows.items()})


def adapt(base: Cover, changes: Mapping[str, object], *, name: str | None = None) -> Cover:
    """Cover with some properties changed.

    Raises
    ------
    CoverError
        For a property that does not exist, is not a number, or lies outside what is possible.
    """
    values: dict[str, float] = {}
    for key, value in changes.items():
        if key not in LIMITS:
            close = get_close_matches(key, LIMITS, n=1, cutoff=0.5)
            meant = f"did you mean {close[0]}? " if close else ""
            raise CoverError(f"unknown property {key} of a land cover", remedy=f"{meant}known: {', '.join(LIMITS)}")
        low, high = LIMITS[key]
        if isinstance(value, bool) or not isinstance(value, int | float) or not low <= value <= high:
            raise CoverError(f"{key} = {value!r} is not possible", remedy=f"give a number from {low:g} to {high:g}")
        values[key] = float(value)
    changed = replace(base, name=name or base.name, **values)  # type: ignore[arg-type]
    if changed.vegetation_fraction + changed.impervious_fraction > 1.0 + FRACTION_SLACK:
        raise CoverError(
            f"vegetation_fraction {changed.vegetation_fraction:g} and impervious_fraction "
            f"{changed.impervious_fraction:g} sum to {changed.vegetation_fraction + changed.impervious_fraction:g}",
            remedy="leave at most 1 for both",
        )
    if base.parts:  # a change to a mixture reaches every part of it
        return replace(changed, parts=tuple((share, adapt(part, changes)) for share, part in base.parts))
    return changed


def cover(what: str | Cover | Mapping[str, float], **changes: float) -> Cover:
    """Find a cover by name, or blend covers by area fraction, and change properties.

    Parameters
    ----------
    what : str, Cover or mapping
        A built-in name, a cover, or ``{name: area fraction}`` with fractions that sum to 1.
    **changes : float
        Any property of `Cover`.

    Raises
    ------
    CoverError
        Unknown name or property, impossible value, or fractions that do not sum to 1.
    """
    if isinstance(what, Mapping):
        base = mixture({_known(name) if isinstance(name, str) else name: share for name, share in what.items()})
    else:
        base = what if isinstance(what, Cover) else _known(what)
    return adapt(base, changes) if changes else base


def mixture(parts: Mapping[Cover, float]) -> Cover:
    """Blend covers by area into one.

    Albedo, emissivity, sky view, heat, conductances and soil are area means; roughness is that of the mean drag coefficient at a
    blending height of 60 m (Wieringa 1986); leaves and stomata are means over the vegetated area. Surfaces that differ much
    are better kept apart as `tiles`.
    """
    total = math.fsum(parts.values())
    for part, share in parts.items():
        if not 0.0 <= share <= 1.0:
            raise CoverError(f'area fraction of "{part.name}" is {share:g}', remedy="give fractions from 0 to 1")
    if abs(total - 1.0) > FRACTION_SLACK or not parts:
        listed = " + ".join(f"{share:g}" for share in parts.values())
        raise CoverError(f"area fractions sum to {total:g} ({listed})", remedy="make them sum to 1")
    kept = [(part, share / total) for part, share in parts.items() if share > 0.0]
    if len(kept) == 1:
        return kept[0][0]
    if len({part.snow for part, _ in kept}) > 1:
        raise CoverError("snow and ground without snow cannot share one skin", remedy="use one or the other")

    def mean(key: str, weight: str = "") -> float:
        weights = [share * (getattr(part, weight) if weight else 1.0) for part, share in kept]
        whole = math.fsum(weights)
        if whole <= 0.0:
            weights, whole = [share for _, share in kept], 1.0
        return math.fsum(w * getattr(part, key) for (part, _), w in zip(kept, weights, strict=True)) / whole

    values = {key: mean(key) for key in LIMITS}
    drag = math.fsum(share / math.log(BLENDING_HEIGHT / part.roughness_momentum) ** 2 for part, share in kept)
    values["roughness_momentum"] = BLENDING_HEIGHT * math.exp(-1.0 / math.sqrt(drag))
    for key in ("leaf_area", "stomatal_resistance_min", "stomatal_radiation", "stomatal_slope"):
        values[key] = mean(key, "vegetation_fraction")
    name = " + ".join(f"{share:.0%} {part.name}" for part, share in kept)
    return _of(name, values, tuple((share, part) for part, share in kept))


def soil_resistance(moisture: float) -> float:
    """Resistance of bare soil to evaporation [s m-1] for moisture 0 (wilting point) to 1 (field capacity)."""
    level, slope = SOIL_RESISTANCE
    return math.exp(level - slope * FIELD_SATURATION * moisture)


def ground(what: Cover, soil_moisture: float) -> Ground:
    """Numbers for the kernels at a soil moisture from 0 (wilting point) to 1 (field capacity)."""
    if not 0.0 <= soil_moisture <= 1.0:
        raise CoverError(
            f"soil_moisture {soil_moisture:g} is outside 0 to 1", remedy="0 wilting point, 1 field capacity"
        )
    moisture = max(what.soil_moisture_least, min(what.soil_moisture_most, soil_moisture))
    bare = max(0.0, 1.0 - what.vegetation_fraction - what.impervious_fraction)
    return Ground(
        albedo=what.albedo,
        emissivity=what.emissivity,
        roughness_momentum=what.roughness_momentum,
        roughness_heat=what.roughness_momentum * math.exp(-what.roughness_log_ratio),
        displacement=what.displacement,
        skin_conductance=what.skin_conductance,
        vegetation_fraction=what.vegetation_fraction,
        leaf_area=what.leaf_area,
        stomatal_resistance_min=what.stomatal_resistance_min,
        soil_moisture=moisture,
        soil_conductivity=what.soil_conductivity_dry
        + moisture * (what.soil_conductivity_wet - what.soil_conductivity_dry),
        soil_heat_capacity=what.soil_heat_capacity_dry
        + moisture * (what.soil_heat_capacity_wet - what.soil_heat_capacity_dry),
        # roofs see the whole sky, streets the share left by walls, which are at the same temperature
        sky_view=what.built_fraction + (1.0 - what.built_fraction) * what.sky_view,
        anthropogenic_heat=what.anthropogenic_heat,
        snow=1.0 if what.snow >= 0.5 else 0.0,
        stomatal_radiation=what.stomatal_radiation,
        stomatal_slope=what.stomatal_slope,
        bare_fraction=bare,
        bare_resistance=1.0 if what.snow >= 0.5 else min(NO_EVAPORATION, soil_resistance(moisture)),
    )


def tiles(what: Cover, soil_moisture: float) -> tuple[tuple[float, Ground], ...]:
    """(Area fraction, ground) of every part of a mixture; a plain cover is one tile."""
    if not what.parts:
        return ((1.0, ground(what, soil_moisture)),)
    return tuple((share, ground(part, soil_moisture)) for share, part in what.parts)


def anthropogenic_course(local_hour: float) -> float:
    """Anthropogenic heat now over its daily mean, by local hour (0 to 24).

    Two peaks at the hours of traffic, a low before dawn: the shape of Sailor & Lu 2004 (Atmos. Environ. 38, 2737) as two
    harmonics (recalled); its mean over the day is 1.
    """
    day = math.tau * local_hour / 24.0
    return 1.0 - 0.40 * math.cos(day - math.tau * 3.0 / 24.0) + 0.18 * math.cos(2.0 * day - math.tau * 2.0 * 8.0 / 24.0)
