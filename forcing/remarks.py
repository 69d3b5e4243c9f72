"""What to say beside a result about the inputs themselves: a place that does not fit its zone, units read otherwise."""

from __future__ import annotations

from collections.abc import Iterator

from forcing.scenario_types import Scenario
from forcing.sounding import Profile
from forcing.zones import FAR_OFF_H, hours_from_sun

#: Flags that put the numbers of the file in doubt; the others are about weather that is only unusual.
DOUBTFUL_FLAGS = ("wind unit", "heights against hydrostatic", "height against pressure", "elevation against heights")


def scenario_remarks(scenario: Scenario) -> tuple[str, ...]:
    """Remarks on position, zone and profiles of a scenario."""
    profiles = [scenario.original, *([scenario.later_original] if scenario.later_original is not None else [])]
    found = [*_place(scenario), *(text for one in profiles for text in profile_remarks(one))]
    return tuple(dict.fromkeys(found))


def profile_remarks(profile: Profile) -> tuple[str, ...]:
    """Remarks on a profile: units that were read otherwise than named, and doubtful heights and winds."""
    units = [f"{one.name}: {one.detail}" for one in profile.repairs if one.name.endswith(" unit")]
    name = profile.file or "profile"
    doubtful = [f"{name}: {one.name}: {one.detail}" for one in profile.flags if one.name in DOUBTFUL_FLAGS]
    return (*([f"{name}: units repaired: {'; '.join(units)}"] if units else []), *doubtful)


def _place(scenario: Scenario) -> Iterator[str]:
    site = scenario.site
    apart = hours_from_sun(site.time_zone, scenario.profile.valid, site.longitude)
    if abs(apart) > FAR_OFF_H:
        yield (
            f"the clock of {site.time_zone} is {abs(apart):.1f} h {'ahead of' if apart > 0 else 'behind'} the sun at longitude "
            f"{site.longitude:g}: check the longitude (east is positive, west negative) and the time zone"
        )
