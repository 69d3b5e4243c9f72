"""Land covers of the user's own, from the ``[covers.<name>]`` tables of a scenario file."""

from __future__ import annotations

import math
from collections.abc import Mapping

from forcing.cover import LIMITS, Cover, adapt, cover, mixture, names
from forcing.errors import CoverError, ScenarioError
from forcing.section import Section

#: Keys of a ``[covers.<name>]`` table beside the properties of a cover.
OWN_KEYS = ("like", "source")


def spelled(name: str) -> str:
    """A cover's name as it is compared: lower case, single blanks."""
    return " ".join(name.replace("_", " ").lower().split())


def read_own_covers(settings: Mapping[str, object], file: str) -> dict[str, Cover]:
    """Covers by name; each starts from a built-in cover or one above it (``like``) and replaces some properties.

    Raises
    ------
    ScenarioError, CoverError
        Name that is taken, unknown cover to start from, unknown property, impossible value.
    """
    found: dict[str, Cover] = {}
    tables = settings.get("covers", {})
    for title, values in tables.items() if isinstance(tables, Mapping) else ():
        name = spelled(str(title))
        section = Section(file, f'covers."{title}"', values if isinstance(values, Mapping) else {})
        if name in names():
            raise ScenarioError(
                f'"{name}" is built in', place=f"{file}: [{section.name}]", remedy="give the cover a name of its own"
            )
        section.only([*OWN_KEYS, *LIMITS])
        section.text("source")
        like = section.text("like", needed=True, example="short grass") or ""
        changes = {key: section.number(key, *bounds) for key, bounds in LIMITS.items() if key in section.values}
        base = resolve(like, found, place=section.place("like"))
        try:
            found[name] = adapt(base, changes, name=name)
        except CoverError as problem:
            raise CoverError(problem.problem, place=f"{file}: [{section.name}]", remedy=problem.remedy) from None
    return found


def resolve(what: str | Mapping[str, float], own: Mapping[str, Cover], *, place: str = "") -> Cover:
    """Cover of a name or mixture, among the built-in covers and the user's own.

    A mixture is ``{name: area fraction}`` or text such as ``"70% short grass + 30% heath"``.

    Raises
    ------
    CoverError
        Unknown name, or area fractions that do not sum to 1.
    """
    try:
        if isinstance(what, str) and "%" in what:
            what = _shares(what)
        if isinstance(what, str):
            return own.get(spelled(what)) or cover(what)
        shares: dict[Cover, float] = {}
        for name, share in what.items():
            part = own.get(spelled(name)) or cover(name)
            shares[part] = shares.get(part, 0.0) + share
        return mixture(shares)
    except CoverError as problem:
        also = f"; your own: {', '.join(own)}" if own and "unknown land cover" in problem.problem else ""
        raise CoverError(problem.problem, place=place, remedy=f"{problem.remedy}{also}") from None


def _shares(text: str) -> dict[str, float]:
    """Area fractions by name of a mixture that is written with percentages."""
    shares: dict[str, float] = {}
    for part in text.split("+"):
        share, percent, name = part.partition("%")
        try:
            value = float(share) / 100.0
        except ValueError:
            value = math.nan
        if not percent or not name.strip() or not math.isfinite(value):
            raise CoverError(f"'{part.strip()}' is no part of a mixture", remedy='write "70% short grass + 30% heath"')
        shares[name.strip()] = shares.get(name.strip(), 0.0) + value
    return shares
