"""Single groups of FM 35 TEMP (WMO-No. 306, Manual on Codes, Volume I.1; tables 0777 and 3931)."""

from __future__ import annotations

from forcing.air import ZERO_CELSIUS, standard_height


def temperature(code: str) -> float:
    """Decode TTTa, K: whole degrees and tenths, odd tenths mean below zero (table 3931)."""
    value = int(code) / 10.0
    return ZERO_CELSIUS + (-value if int(code[2]) % 2 else value)


def depression(code: str) -> float:
    """Decode DD, K: tenths up to 50, whole degrees plus 50 above (table 0777; 51 to 55 are not used)."""
    value = int(code)
    return value / 10.0 if value <= 50 else float(value - 50)


def wind(code: str) -> tuple[float, float]:
    """Decode ddfff: direction it blows from in degrees (5 where 500 is added to the speed) and speed as sent."""
    tens, speed = int(code[:2]), int(code[2:])
    half, speed = divmod(speed, 500)
    return float(tens * 10 + 5 * half), float(speed)


def geopotential(code: str, level: int) -> float:
    """Decode hhh at a mandatory level (hPa), m: thousands (tens of thousands from 500 hPa up) come from the level.

    Up to 500 hPa in m, from there in tens of m; at 1000 hPa 500 is added to negative heights. The missing leading
    digits are those that bring the height nearest to the standard atmosphere.
    """
    value = int(code)
    if level == 1000:
        return float(500 - value if value > 500 else value)
    unit, period = (10, 10_000) if level <= 500 else (1, 1000)
    near = float(standard_height(level * 100.0))
    return float(value * unit + period * round((near - value * unit) / period))
