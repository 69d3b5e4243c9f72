"""What a comparison does not cover, and the cautions that go with it in text, picture and JSON."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

NOT_MODELLED = (
    "one column, the same ground everywhere: no edge, no advection from ground that is not changed, no sea or valley breeze",
    "no shade of buildings or trees on people, no street canyon air, no indoor air",
    "the ground stands for a mean over streets, roofs and gardens; parts of a mixture do not exchange side by side",
    "the air aloft, cloud cover and large-scale wind are those of the base case; a change of ground does not alter them",
    "the release was made over the ground there is: a change that has lasted long would also alter the morning profile",
    "soil moisture is held through the run",
)


def planning_cautions(document: Mapping[str, Any]) -> list[dict[str, str]]:
    """Cautions H1, H2 and the general ones that hold for a comparison."""
    used, patch = document["days"]["used"], document["patch"]["length_m"]["median"]
    size = "not known" if patch is None else f"{patch / 1000.0:.0f} km"
    whole = document["patch"]["heating_length_m"]["median"]
    reach = (
        ""
        if whole is None
        else f" The afternoon difference is that of a region wider than about {whole / 1000.0:.0f} km."
    )
    days = "one stated day" if used == 1 else f"{used} stated days"
    assumed = [item["name"] for item in document["base"]["assumed"] if item["source"] == "assumed"]
    texts = {
        "H1": f"Scenario comparison under {days}; not a forecast, not a health assessment. Heat-health warnings and thresholds "
        "belong to the health and weather authorities.",
        "H2": "Temperatures are those of a uniform area: at 2 m by similarity, of the mixed layer and of the skin, kept apart; street, "
        "indoor and comfort temperatures differ.",
        "H3": f"A one-column answer needs a changed area wider than wind times turnover time: {size} by day on these days, "
        f"better several times that.{reach} Over a smaller area the effect on air temperature is less than shown.",
        "G2": "Not valid with fronts, sea or lake breezes, thunderstorm outflow, persistent rain, deep fog or snow cover; "
        "the run does not look for signs of these.",
        "G4": f"The spread shown is over the days ({document['spread']}); it does not include errors of the ground's properties "
        "or of the model.",
        "G5": f"Assumed, not observed: {', '.join(assumed)}." if assumed else "No input of the base case is assumed.",
    }
    return [{"code": code, "text": text} for code, text in texts.items()]
