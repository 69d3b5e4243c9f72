"""How numbers, heights and hours of a result are said, for text and picture alike."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any, Literal
from zoneinfo import ZoneInfo

from forcing.errors import DaylayerError
from forcing.units import (
    FIRE_WIND_HEIGHT_M,
    FOOT_M,
    KNOT_M_S,
    MILE_PER_HOUR_M_S,
    SQUARE_METRES_PER_S_PER_KNOT_FOOT,
    log_wind_factor,
    round_to,
)

__all__ = ["METRIC", "US", "Clock", "Units", "cloud_percent", "number", "units_named"]

Document = Mapping[str, Any]

OPEN_GROUND_ROUGHNESS_M = 0.03  # short grass; Davenport class 3, "open" (Wieringa 1992)
UNKNOWN = "not known"
MILE_M = 1609.344
LEAST_ABSOLUTE_K = 100.0  # a number of kelvin above this is a (potential) temperature, not a difference; it stays
CLOUD_SHOWN = 0.01  # [1] least cumulus fraction that is drawn, and printed as other than 0 % (our choice)
_QUANTITY = re.compile(
    r"(?<![\w.])(?P<first>[-+]?\d+(?:\.\d+)?)(?:(?P<join> to | and )(?P<second>[-+]?\d+(?:\.\d+)?))?"
    r" (?P<unit>km|m/s|m|°?C|K)\b(?![/²2])"
)


def number(value: float, step: float) -> str:
    """Text of a value rounded to a step, without a trailing point and never minus zero."""
    rounded = round_to(value, step)
    decimals = max(0, -math.floor(math.log10(step))) if step < 1.0 else 0
    return f"{rounded + 0.0:.{decimals}f}"


@dataclass(frozen=True, slots=True)
class Units:
    """One set of display units; every method takes SI (or degrees C) and gives text."""

    name: Literal["metric", "us"]
    height_unit: str
    speed_unit: str
    temperature_unit: str
    ventilation_unit: str

    def height_value(self, metres: float) -> float:
        """Height in the display unit."""
        return metres if self.name == "metric" else metres / FOOT_M

    def height_step(self, metres: float) -> float:
        """Rounding step: 50 m or 100 ft (common practice), finer where that would hide a shallow layer."""
        if self.name == "metric":
            return 50.0 if metres >= 500.0 else 10.0
        return 100.0 if metres >= 500.0 else 50.0 if metres >= 60.0 else 10.0

    def height_number(self, metres: float) -> str:
        """Height without its unit, rounded as everywhere in sentences, tables and pictures."""
        return number(self.height_value(metres), self.height_step(abs(metres)))

    def height(self, metres: float | None) -> str:
        """Height with its unit."""
        return UNKNOWN if metres is None else f"{self.height_number(metres)} {self.height_unit}"

    def distance(self, kilometres: float) -> str:
        """Distance over the ground with its unit: km or miles."""
        return f"{kilometres:.0f} km" if self.name == "metric" else f"{1000.0 * kilometres / MILE_M:.0f} mi"

    def length(self, metres: float) -> str:
        """A small length with its unit, to two figures."""
        return f"{self.height_value(metres):.2g} {self.height_unit}"

    def above_ground(self, metres: float | None, elevation: float | None) -> str:
        """Height above ground in words; us adds the height above sea level."""
        if metres is None:
            return UNKNOWN
        text = f"{self.height(metres)} above ground"
        if self.name == "us" and elevation is not None:
            text += f" ({number(self.height_value(metres + elevation), 100.0)} ft above sea level)"
        return text

    def height_change(self, metres: float) -> str:
        """Signed change of a height, to 5 m or 20 ft."""
        return f"{round_to(self.height_value(metres), 5.0 if self.name == 'metric' else 20.0):+.0f} {self.height_unit}"

    def temperature_value(self, celsius: float) -> float:
        """Temperature in the display unit."""
        return celsius if self.name == "metric" else celsius * 1.8 + 32.0

    def temperature_number(self, celsius: float) -> str:
        """Temperature without its unit, rounded as everywhere in sentences, tables and pictures."""
        return number(self.temperature_value(celsius), 0.1 if self.name == "metric" else 1.0)

    def temperature(self, celsius: float | None) -> str:
        """Temperature with its unit."""
        return UNKNOWN if celsius is None else f"{self.temperature_number(celsius)} {self.temperature_unit}"

    def difference(self, kelvin: float, *, signed: bool = False) -> str:
        """Temperature difference with its unit."""
        value, unit = (kelvin, "K") if self.name == "metric" else (kelvin * 1.8, "°F")
        text = number(value, 0.1)
        plus = signed and text != "0.0" and not text.startswith("-")
        return f"{'+' if plus else ''}{text} {unit}"

    def speed_value(self, metres_per_second: float) -> float:
        """Wind aloft or transport wind in the display unit: m/s or kt."""
        return metres_per_second if self.name == "metric" else metres_per_second / KNOT_M_S

    def speed_number(self, metres_per_second: float) -> str:
        """Wind speed without its unit, rounded as everywhere in sentences, tables and pictures."""
        return number(self.speed_value(metres_per_second), 0.1 if self.name == "metric" else 1.0)

    def speed(self, metres_per_second: float | None) -> str:
        """Wind speed with its unit."""
        return UNKNOWN if metres_per_second is None else f"{self.speed_number(metres_per_second)} {self.speed_unit}"

    def surface_wind_value(self, ten_metre: float, roughness: float = OPEN_GROUND_ROUGHNESS_M) -> float:
        """10 m wind in m/s, or the 20 ft wind in mph by the neutral logarithmic profile over a roughness [m]."""
        if self.name == "metric":
            return ten_metre
        factor = log_wind_factor(FIRE_WIND_HEIGHT_M, 10.0, min(roughness, 1.0))
        return ten_metre * factor / MILE_PER_HOUR_M_S

    def ventilation_value(self, square_metres_per_second: float) -> float:
        """Ventilation in the display unit: m2/s or kt ft."""
        if self.name == "metric":
            return square_metres_per_second
        return square_metres_per_second / SQUARE_METRES_PER_S_PER_KNOT_FOOT

    def ventilation_number(self, square_metres_per_second: float) -> str:
        """Ventilation to two figures (common practice) without its unit."""
        return two_figures(self.ventilation_value(square_metres_per_second))

    def ventilation(self, square_metres_per_second: float | None) -> str:
        """Ventilation to two figures with its unit."""
        if square_metres_per_second is None:
            return UNKNOWN
        return f"{self.ventilation_number(square_metres_per_second)} {self.ventilation_unit}"

    def restyle(self, words: str) -> str:
        """Words of an input, a doubt or a definition with the metric quantities in them in these units."""
        return words if self.name == "metric" else _QUANTITY.sub(self._restyled, words)

    def _restyled(self, found: re.Match[str]) -> str:
        unit = found["unit"].removeprefix("°")
        texts = [self._quantity(float(text), unit) for text in (found["first"], found["second"]) if text is not None]
        if unit == "K" and abs(float(found["first"])) > LEAST_ABSOLUTE_K:
            return found[0]
        return (found["join"] or "").join([*(text.split()[0] for text in texts[:-1]), texts[-1]])

    def _quantity(self, value: float, unit: str) -> str:
        if unit == "m":
            return self.height(value) if abs(value) >= 10.0 else self.length(value)
        if unit == "m/s":
            return self.speed(value)
        if unit == "C":
            return self.temperature(value)
        return self.distance(value) if unit == "km" else self.difference(value)


METRIC = Units("metric", "m", "m/s", "°C", "m²/s")
US = Units("us", "ft", "kt", "°F", "kt ft")


def units_named(name: str) -> Units:
    """Units of the option's word.

    Raises
    ------
    DaylayerError
        For any other word.
    """
    known = {"metric": METRIC, "us": US}
    if name not in known:
        raise DaylayerError(f"units {name!r} are not known", remedy="use metric or us")
    return known[name]


def two_figures(value: float) -> str:
    """Text of a value to two significant figures, never in powers of ten."""
    if value == 0.0:
        return "0"
    step = 10.0 ** (math.floor(math.log10(abs(value))) - 1)
    return number(value, step)


def cloud_percent(fraction: float) -> str:
    """Cumulus fraction in per cent; 0 where there is less than is drawn."""
    return number(100.0 * fraction, 1.0) if fraction >= CLOUD_SHOWN else "0"


_POINTS = ("north", "north-east", "east", "south-east", "south", "south-west", "west", "north-west")


def compass(degrees: float) -> str:
    """Eight-point name of the direction a wind comes from."""
    return _POINTS[round(degrees / 45.0) % 8]


@dataclass(frozen=True, slots=True)
class Clock:
    """Says the hours of one result in local time and UTC; a brief one in local time alone, without the word."""

    zone: ZoneInfo
    start: datetime
    brief: bool = False

    @classmethod
    def of(cls, document: Document, *, brief: bool = False) -> Clock:
        """Clock of a document: its site's zone and its first hour."""
        zone = ZoneInfo(document["site"].get("time_zone") or "UTC")
        return cls(zone, datetime.fromisoformat(document["series"]["time"][0]), brief)

    def local(self, moment: datetime) -> datetime:
        """Local time of an aware time."""
        return moment.astimezone(self.zone)

    def offset(self, moment: datetime | None = None) -> str:
        """Offset from UTC in words, such as ``UTC-06:00``."""
        text = self.local(moment or self.start).strftime("%z")
        return f"UTC{text[:3]}:{text[3:5]}"

    def say(self, iso: str | None, *, half_hours: bool = False, utc: bool = True, zone: bool = True) -> str:
        """``16:00 local (22:00 UTC)``, with the local date where it is not the first day's.

        With ``half_hours`` the time is rounded to the half hour, for events that no model knows to the minute.
        """
        if iso is None:
            return UNKNOWN
        moment = datetime.fromisoformat(iso).astimezone(UTC)
        if half_hours:
            moment = datetime.fromtimestamp(round_to(moment.timestamp(), 1800.0), tz=UTC)
        local = self.local(moment)
        text = f"{local:%H:%M}"
        if local.date() != self.local(self.start).date():
            text += f" on {local:%a} {local.day} {local:%b}"
        text += " local" if zone and not self.brief else ""
        return f"{text} ({moment:%H:%M} UTC)" if utc and not self.brief else text

    def day_word(self, iso: str) -> str:
        """``this morning``, ``this afternoon``, ``tonight``, ``tomorrow morning``, counted from the first row's day."""
        local = self.local(datetime.fromisoformat(iso))
        days = (local.date() - self.local(self.start).date()).days
        if local.hour >= 18:
            return "tonight" if days == 0 else "tomorrow night" if days == 1 else f"in the night of day {days + 1}"
        part = "morning" if local.hour < 12 else "afternoon"
        if days == 0:
            return f"this {part}"
        return f"tomorrow {part}" if days == 1 else f"in the {part} of day {days + 1}"

    def say_with_day(self, iso: str | None) -> str:
        """``05:30 local tomorrow morning, Wed 15 Jul (11:30 UTC)``; the date only where it is not the first day's."""
        if iso is None:
            return UNKNOWN
        moment = datetime.fromisoformat(iso).astimezone(UTC)
        local = self.local(moment)
        zone, tail = ("", "") if self.brief else (" local", f" ({moment:%H:%M} UTC)")
        dated = f", {local:%a} {local.day} {local:%b}" if local.date() != self.local(self.start).date() else ""
        return f"{local:%H:%M}{zone} {self.day_word(iso)}{dated}{tail}"
