"""Fields below the site, and what to measure before and while working."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from slab.products.spray_window import WIDTH_STEP, Night, outward

RULE_DEPTH = 12.0  # [m] the creek bottom lay 40 ft under the hill (University of Tennessee, July 2018)
RULE_LATER = (2.0, 4.0)  # [h] the hill's inversion ended 04 to 06 h, the bottom's at 08 h or later
FULL_FROM = 6.0  # [m] cold pools formed in a depression only about 6 m deep (Bodine et al. 2009)
RULE = (
    "rule of thumb from few observations: in one pair of fields 12 m apart in height the lower one's inversion ended 2 to 4 h "
    "later or later still. The same is used from 6 m below the site "
    "downwards (cold pools formed in a hollow 6 m deep), in proportion above that. Onset there is earlier by an unknown time."
)
SOURCES = "University of Tennessee crop news, July 2018; Bodine et al. 2009, J. Appl. Meteorol. Climatol. 48, 1843"


@dataclass(frozen=True, slots=True)
class LowField:
    """A field below the site: how far [m], and the range by which its inversion ends later [h]; and the ends by night."""

    below: float
    later: tuple[float, float]
    ends: tuple[tuple[float, float] | None, ...]


def low_field(below: float, nights: Sequence[Night]) -> LowField:
    """Later end of the inversion in a field ``below`` the site [m]."""
    share = min(1.0, below / FULL_FROM)
    later = (RULE_LATER[0] * share, RULE_LATER[1] * share)
    ends: list[tuple[float, float] | None] = []
    for night in nights:
        if night.end is None:
            ends.append(None)
            continue
        early, late = outward(night.end)
        first, last = early + 3600.0 * later[0], late + 3600.0 * later[1]
        ends.append((math.floor(first / WIDTH_STEP) * WIDTH_STEP, math.ceil(last / WIDTH_STEP) * WIDTH_STEP))
    return LowField(below, later, tuple(ends))


def what_to_measure(between: tuple[float, float], boom_height: float) -> list[str]:
    """The two-height check in words: heights, accuracy, when."""
    low, high = between
    return [
        (
            f"Temperature at two heights on the field itself, at the lowest ground to be worked: near {low:g} m and near "
            f"{high:g} m, or as high as the mast reaches, and once more at the spray's own height. Warmer above than below is an "
            "inversion, however small the difference."
        ),
        (
            "Two sensors of one kind in equal shields with a fan; they must agree to 0.1 °C side by side (EPA-454/R-99-005, "
            "8.1.3), since sun on a plain shield alone makes more than 0.2 °C. Exchange the two once to see the difference change "
            "sides."
        ),
        f"Wind at {boom_height:g} m over the crop beside the field, not by eye and not from an airport.",
        (
            "Every 15 minutes from four hours before sunset, and from sunrise until the lower sensor has been the warmer one for "
            "half an hour; before starting, at every refill, and whenever the wind drops or the sky clears. Note the readings "
            "with the hour."
        ),
        (
            "Look for smoke or dust that hangs and drifts sideways, for dew, mist and sounds that carry (common practice): "
            "any of them counts against a reading that shows no inversion."
        ),
    ]
