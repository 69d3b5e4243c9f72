"""Time zones: the check of a name, the name that was likely meant, and whether a zone fits a longitude."""

from __future__ import annotations

import re
from collections.abc import Mapping
from datetime import datetime
from types import MappingProxyType
from zoneinfo import ZoneInfo

from forcing.errors import ScenarioError

#: Abbreviation -> an IANA name it may stand for (common practice; several are used on more than one continent).
ABBREVIATIONS: Mapping[str, str] = MappingProxyType(
    {
        "cst": "America/Chicago", "cdt": "America/Chicago", "edt": "America/New_York", "mdt": "America/Denver",
        "pst": "America/Los_Angeles", "pdt": "America/Los_Angeles", "akst": "America/Anchorage",
        "akdt": "America/Anchorage", "ast": "America/Halifax", "adt": "America/Halifax", "brt": "America/Sao_Paulo",
        "bst": "Europe/London", "cest": "Europe/Berlin", "eest": "Europe/Helsinki", "msk": "Europe/Moscow",
        "sast": "Africa/Johannesburg", "ist": "Asia/Kolkata", "jst": "Asia/Tokyo", "awst": "Australia/Perth",
        "acst": "Australia/Adelaide", "acdt": "Australia/Adelaide", "aest": "Australia/Sydney",
        "aedt": "Australia/Sydney", "nzst": "Pacific/Auckland", "nzdt": "Pacific/Auckland",
    }
)  # fmt: skip
_OFFSET = re.compile(r"(?:utc|gmt)?\s*([+-])0?(\d{1,2})(?::?00)?", re.IGNORECASE)
#: Hours between a zone's clock and the sun's from which the position or the zone is doubted: no zone in use is further off.
FAR_OFF_H = 3.5


def check_zone(name: str, *, place: str) -> str:
    """The name, if it is an IANA zone.

    Raises
    ------
    ScenarioError
        It is none; the remedy names the zone that was likely meant.
    """
    try:
        ZoneInfo(name)
    except (ValueError, OSError, LookupError):
        raise ScenarioError(f"'{name}' is not a time zone", place=place, remedy=_remedy(name)) from None
    return name


def _remedy(name: str) -> str:
    from difflib import get_close_matches
    from zoneinfo import available_timezones

    lower = name.strip().lower().replace(" ", "_")
    if lower in ABBREVIATIONS:
        return f"write an IANA name such as {ABBREVIATIONS[lower]}"
    offset = _OFFSET.fullmatch(name.strip())
    if offset and int(offset[2]) <= 12:
        sign = "-" if offset[1] == "+" else "+"
        return f"write an IANA name such as America/Chicago, or Etc/GMT{sign}{int(offset[2])} (its sign is turned)"
    known = {one.lower(): one for one in sorted(available_timezones())}
    town = next((one for key, one in known.items() if key.rpartition("/")[2] == lower), None)
    near = get_close_matches(lower, known, n=1, cutoff=0.8)
    found = town or (known[near[0]] if near else None)
    return f"did you mean '{found}'?" if found else "write an IANA name such as America/Chicago, Etc/GMT+6 or UTC"


def hours_from_sun(zone: str, when: datetime, longitude: float) -> float:
    """Clock of the zone minus local mean solar time, h, from -12 to 12.

    Parameters
    ----------
    when : datetime
        Aware.
    longitude : float
        Degrees east.
    """
    offset = when.astimezone(ZoneInfo(zone)).utcoffset()
    assert offset is not None
    return (offset.total_seconds() / 3600.0 - longitude / 15.0 + 12.0) % 24.0 - 12.0
