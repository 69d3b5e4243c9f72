"""The cautions that go with every spray calendar, in our own words."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from slab.cautions import forecast_cautions
from slab.wording import METRIC, Units

__all__ = ["spray_cautions"]

SPRAY = {
    "S1": "Absence of a predicted inversion is not evidence that there is none. Measure temperature at two heights on the "
    "field, at spray height, before and during application.",
    "S2": "Inversions can begin hours before sunset, last after sunrise, and occur with wind blowing. Low ground is "
    "affected earlier and longer.",
    "S3": "Wind within a range and Delta-T within a range do not make conditions suitable.",
    "S4": "The product label, and national, state and local law, decide. This tool does not know your label, licence, "
    "buffers or neighbours. Records are your responsibility.",
    "S5": "Plan only: every hour still to come is a plan, not a finding.",
}
SPREAD = "Windows and shares come from changing the listed inputs and what the model may be off; they do not include every error."


def spray_cautions(document: Mapping[str, Any], units: Units = METRIC) -> list[dict[str, str]]:
    """S1 to S5, then what holds for every result from one profile (G1, G2, G4, G5)."""
    general = {one["code"]: one["text"] for one in forecast_cautions(document, units)}
    texts = {**SPRAY, "G1": general["G1"], "G2": general["G2"], "G4": SPREAD, "G5": general["G5"]}
    return [{"code": code, "text": text} for code, text in texts.items()]
