"""Text and units at the edge; inside the library everything is SI.

Conversion factors are exact by definition (international foot 0.3048 m, international nautical mile 1852 m, statute
mile 1609.344 m: NIST SP 811 appendix B) unless a source stands beside them.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

from forcing.errors import DaylayerError

FOOT_M = 0.3048
KNOT_M_S = 1852.0 / 3600.0
MILE_PER_HOUR_M_S = 1609.344 / 3600.0
SQUARE_METRES_PER_S_PER_KNOT_FOOT = KNOT_M_S * FOOT_M
ZERO_CELSIUS_K = 273.15
#: Height [m] of the wind in fire weather, 20 ft.
FIRE_WIND_HEIGHT_M = 20.0 * FOOT_M


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit as people write it: ``si = value * factor + offset`` in ``si_unit``."""

    factor: float
    si_unit: str
    offset: float = 0.0

    def to_si(self, value: float) -> float:
        """Bring a value in this unit to SI."""
        return value * self.factor + self.offset

    def from_si(self, value: float) -> float:
        """Bring an SI value to this unit."""
        return (value - self.offset) / self.factor


#: The suffix of a column or key name, and its unit.
SUFFIXES: Mapping[str, Unit] = MappingProxyType(
    {
        "hPa": Unit(100.0, "Pa"),
        "Pa": Unit(1.0, "Pa"),
        "m": Unit(1.0, "m"),
        "ft": Unit(FOOT_M, "m"),
        "K": Unit(1.0, "K"),
        "C": Unit(1.0, "K", ZERO_CELSIUS_K),
        "F": Unit(5.0 / 9.0, "K", ZERO_CELSIUS_K - 32.0 * 5.0 / 9.0),
        "pct": Unit(0.01, "1"),
        "g_kg": Unit(1e-3, "kg kg-1"),
        "deg": Unit(1.0, "degree"),
        "m_s": Unit(1.0, "m s-1"),
        "ms": Unit(1.0, "m s-1"),
        "kt": Unit(KNOT_M_S, "m s-1"),
        "km_h": Unit(1.0 / 3.6, "m s-1"),
        "mph": Unit(MILE_PER_HOUR_M_S, "m s-1"),
        "m2_s": Unit(1.0, "m2 s-1"),
        "kt_ft": Unit(SQUARE_METRES_PER_S_PER_KNOT_FOOT, "m2 s-1"),
        "W_m2": Unit(1.0, "W m-2"),
        "per_s": Unit(1.0, "s-1"),
        "K_h": Unit(1.0 / 3600.0, "K s-1"),
        "g_kg_h": Unit(1e-3 / 3600.0, "kg kg-1 s-1"),
        "mm_h": Unit(1.0 / 3600.0, "kg m-2 s-1"),
        "MJ_m2": Unit(1e6, "J m-2"),
        "h": Unit(3600.0, "s"),
    }
)


def log_wind_factor(height: float, reference_height: float, roughness: float) -> float:
    """Wind at one height over wind at another by the neutral logarithmic profile [1].

    Parameters
    ----------
    height, reference_height : float
        Metres above the zero-plane displacement.
    roughness : float
        Roughness length for momentum [m], below both heights.

    Notes
    -----
    Neutral air: ``u(z) = u*/k ln(z/z0)`` (Stull 1988, section 9.7). For 20 ft against 10 m over 0.03 m it is 0.915.
    """
    if not 0.0 < roughness < min(height, reference_height):
        raise DaylayerError(
            f"roughness length {roughness:g} m is not below {height:g} m and {reference_height:g} m",
            remedy="ask for wind at heights above the roughness length",
        )
    return math.log(height / roughness) / math.log(reference_height / roughness)


def round_to(value: float, step: float) -> float:
    """Nearest multiple of a step, halves upward; NaN stays NaN."""
    if not math.isfinite(value):
        return value
    return math.floor(value / step + 0.5) * step


def round_figures(value: float, figures: int = 2) -> float:
    """Value to so many significant figures."""
    if value == 0.0 or not math.isfinite(value):
        return value
    digits = figures - 1 - math.floor(math.log10(abs(value)))
    return round(value, digits)


MISSING_TEXT = "-"


def _known(value: float | None) -> bool:
    return value is not None and math.isfinite(value)


@dataclass(frozen=True, slots=True)
class Style:
    """How numbers are shown: metric or us. A missing number (None, NaN) is shown as a dash.

    Rounding (common practice): depth to 50 m or 100 ft, ventilation to two figures.
    """

    name: str
    length: str
    speed: str
    temperature: str
    ventilation: str
    depth_step: float

    def _in(self, value: float | None, suffix: str) -> float:
        return math.nan if value is None else SUFFIXES[suffix].from_si(value)

    def depth(self, metres: float | None, *, unit: bool = True) -> str:
        """Height above ground [m], rounded to the step of the style."""
        return self._text(round_to(self._in(metres, self.length), self.depth_step), self.length, 0, unit)

    def height(self, metres: float | None, *, unit: bool = True) -> str:
        """Height or depth [m] to the metre or ten feet, where the step of the style is too coarse."""
        shown = self._in(metres, self.length)
        return self._text(round_to(shown, 10.0) if self.length == "ft" else shown, self.length, 0, unit)

    def depth_and_altitude(self, metres: float | None, elevation: float) -> str:
        """Height above ground [m] and the same above sea level, both named."""
        if not _known(metres) or metres is None:
            return MISSING_TEXT
        return f"{self.depth(metres)} above ground, {self.depth(metres + elevation)} above sea level"

    def wind(self, metres_per_second: float | None, *, unit: bool = True, decimals: int | None = None) -> str:
        """Wind speed [m/s]: metric to 0.1 m/s, us to the knot."""
        places = (1 if self.speed == "m_s" else 0) if decimals is None else decimals
        return self._text(self._in(metres_per_second, self.speed), self.speed, places, unit)

    def surface_wind(self, metres_per_second: float | None, *, unit: bool = True) -> str:
        """Wind near the ground [m/s]: metric in m/s, us in mph."""
        suffix = "m_s" if self.name == "metric" else "mph"
        return self._text(self._in(metres_per_second, suffix), suffix, 1 if suffix == "m_s" else 0, unit)

    def degrees(self, kelvin: float | None, *, unit: bool = True) -> str:
        """Temperature [K]: metric to 0.1 degree C, us to the degree F."""
        places = 1 if self.temperature == "C" else 0
        return self._text(self._in(kelvin, self.temperature), self.temperature, places, unit)

    def difference(self, kelvin: float | None, *, unit: bool = True) -> str:
        """Temperature difference [K]: metric in K, us in F degrees, both to 0.1."""
        if self.name == "metric" or kelvin is None:
            return self._text(math.nan if kelvin is None else kelvin, "K", 1, unit)
        return self._text(kelvin * 1.8, "F", 1, unit)

    def ventilation_rate(self, square_metres_per_second: float | None, *, unit: bool = True) -> str:
        """Ventilation rate [m2/s] to two figures."""
        shown = round_figures(self._in(square_metres_per_second, self.ventilation))
        return self._text(shown, self.ventilation, 0, unit)

    @staticmethod
    def _text(value: float, suffix: str, decimals: int, unit: bool) -> str:
        if not math.isfinite(value):
            return MISSING_TEXT
        text = f"{value:.{decimals}f}"
        if float(text) == 0.0:
            text = text.lstrip("-")
        return f"{text} {UNIT_TEXT[suffix]}" if unit else text


UNIT_TEXT: Mapping[str, str] = MappingProxyType(
    {
        "m": "m",
        "ft": "ft",
        "m_s": "m/s",
        "kt": "kt",
        "mph": "mph",
        "C": "°C",
        "F": "°F",
        "K": "K",
        "m2_s": "m2/s",
        "kt_ft": "kt ft",
    }
)

METRIC = Style("metric", "m", "m_s", "C", "m2_s", 50.0)
US = Style("us", "ft", "kt", "F", "kt_ft", 100.0)
STYLES: Mapping[str, Style] = MappingProxyType({"metric": METRIC, "us": US})
