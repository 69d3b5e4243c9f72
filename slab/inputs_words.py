"""The inputs of a result in few lines: what was assumed, the most telling first, then what was given and observed."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Any

from slab.wording import Units

__all__ = ["change_words", "known_words", "most_telling", "real_warnings", "telling_lines", "untold_lines"]

Document = Mapping[str, Any]

SMALL_M, SMALL_K = 10.0, 0.1  # changes of depth and temperature under which an input is only named
BEYOND = "no figure, with it the layer would leave what this model treats"
STANDING = ("the air aloft is held", "long-wave from")  # remarks that stand among the assumptions, so not warnings
NOT_GIVEN = re.compile(r"^(derived: )?no [\w -]+? (was|were) given([;:,] (so )?|$)")
KEY_AND_VALUE = re.compile(r"^[a-z]\w*? = ")
ENDINGS = (("_m_s", "m/s"), ("_per_s", "per s"), ("_K_h", "K per h"), ("_g_kg_h", "g/kg per h"), ("_W_m2", "W m-2"),
           ("_cm", "cm"), ("_m", "m"), ("_C", "C"))  # fmt: skip


def most_telling(document: Document) -> list[Document]:
    """Inputs with a computed change, the largest change of depth first, then of temperature."""
    items = [item for item in document.get("assumptions") or [] if item.get("effect_on_depth_m") is not None]
    return sorted(items, key=lambda item: (-abs(float(item["effect_on_depth_m"])), -abs(_warmth(item))))


def change_words(item: Document, units: Units) -> str:
    """What the step in an assumed input changes: greatest depth, then highest temperature; empty where not computed."""
    depth, warm = item.get("effect_on_depth_m"), item.get("effect_on_max_temperature_K")
    changes = [
        *([units.height_change(depth)] if depth is not None else []),
        *([units.difference(warm, signed=True)] if warm is not None else []),
    ]
    return f"{units.restyle(str(item.get('step') or 'one step'))}: {', '.join(changes)}" if changes else ""


def telling_lines(document: Document, units: Units, *, letters: int = 0) -> list[str]:
    """One text for each assumed input with a step: the most telling first, those of small effect together at the end.

    ``letters`` is the width of a line: a reason is left out where it alone would need another line, and always with 0.
    """
    stepped = [item for item in most_telling(document) if item.get("source") == "assumed"]
    small = [item for item in stepped if _is_small(item)]
    lines = [_one(item, units, letters, change_words(item, units)) for item in stepped if item not in small]
    if small:
        limits = f"under {units.height_number(SMALL_M)} {units.height_unit} and {units.difference(SMALL_K)}"
        named = "; ".join(f"{item['name']} {_value(item, units)} ({item.get('step')})" for item in small)
        lines.append(f"small effect, {limits}: {named}")
    return lines


def untold_lines(document: Document, units: Units, *, letters: int = 0) -> list[str]:
    """One text for each assumed input for which no change is known; where others have one, a step's missing one is explained."""
    items = [item for item in document.get("assumptions") or [] if item.get("source") == "assumed"]
    missing = f": {BEYOND}" if most_telling(document) else ""
    return [
        _one(item, units, letters, units.restyle(str(item["step"])) + missing if item.get("step") and missing else "")
        for item in items
        if item.get("effect_on_depth_m") is None
    ]


def known_words(document: Document, source: str, units: Units) -> str:
    """Inputs that were given, or observed, in one text; empty where there are none."""
    items = [item for item in document.get("assumptions") or [] if item.get("source") == source]
    return "; ".join(f"{item['name']} {_value(item, units)}" for item in items)


def real_warnings(document: Document) -> list[str]:
    """Warnings of a result without the standing remarks, which are said among the assumptions."""
    return [text for text in document.get("warnings") or [] if not text.startswith(STANDING)]


def _warmth(item: Document) -> float:
    return float(item.get("effect_on_max_temperature_K") or 0.0)


def _is_small(item: Document) -> bool:
    return abs(float(item["effect_on_depth_m"])) < SMALL_M and abs(_warmth(item)) < SMALL_K


def _one(item: Document, units: Units, letters: int, step: str) -> str:
    start = f"{item['name']}: {_value(item, units)}"
    end = f"; {step}" if step else ""
    why = units.restyle(NOT_GIVEN.sub("", str(item.get("why") or "")).strip())
    if not (why and letters):
        return start + end
    whole = f"{start} ({why}){end}"
    rows, bare_rows = (-(-len(text) // letters) for text in (whole, start + end))
    return whole if rows == bare_rows else start + end


def _value(item: Document, units: Units) -> str:
    """The value without what its name or key says already, and with a unit where the key names one."""
    text = str(item.get("value")).removeprefix(f"{item['name']} ")
    key = KEY_AND_VALUE.match(text)
    if key is None:
        return units.restyle(text)
    name, value = key[0].removesuffix(" = "), text[key.end() :]
    unit = next((unit for ending, unit in ENDINGS if name.endswith(ending)), "")
    return units.restyle(f"{value} {unit}".rstrip())
