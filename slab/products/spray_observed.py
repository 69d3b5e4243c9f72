"""Tower readings beside the model, and the coming hours moved toward them.

The readings of the last hour are put to the nine members as one temperature difference and one wind. Each member is moved
by the ensemble square-root filter (Whitaker and Hamill 2002, Mon. Wea. Rev. 130, 1913, the single-observation form): where
the members say that a larger difference now goes with a larger one later, later hours move too. Beside that, a common
offset between model and tower is allowed for, which dies away within hours, so that readings outside the members' range
still count. Rows that were read take the reading itself.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from forcing.errors import WeatherError
from forcing.weather import ObservedTable
from slab.products.spray_members import Member

Array = NDArray[np.float64]

WANTED = (1.5, 9.0)  # [m] the pair that is looked for where the user names none
LOWEST, HIGHEST, LEAST_GAP = 0.3, 40.0, 1.0  # [m] heights that count as near the ground, and their least distance
LAST = 3600.0  # [s] readings of this long are put to the members
DIFFERENCE_ERROR, WIND_ERROR = 0.3, 0.7  # [K, m/s] of a reading, siting included (our choice)
DIFFERENCE_OFFSET, WIND_OFFSET = 0.5, 1.0  # [K, m/s] by which the whole model may be off at one place (our choice)
OFFSET_LASTS = 4.0 * 3600.0  # [s]
REACH = 8.0 * 3600.0  # [s] how far ahead what the members say together is believed


@dataclass(frozen=True, slots=True)
class Reading:
    """What the tower says on the rows; NaN where it says nothing.

    ``difference`` [K] and ``wind`` [m s-1] by row; ``last`` [s since 1970 UTC] the last time with a difference;
    ``wind_height`` [m], NaN without wind.
    """

    difference: Array
    wind: Array
    last: float
    wind_height: float
    file: str


@dataclass(frozen=True, slots=True)
class Update:
    """What the readings did: last reading and what the model had there, and the members after it."""

    last: float
    observed_difference: float
    modelled_difference: float
    observed_wind: float
    modelled_wind: float
    members: tuple[Member, ...]


def tower_pair(table: ObservedTable, asked: tuple[float, float] | None) -> tuple[float, float]:
    """The two heights [m] that the difference is taken between: the asked ones, else those nearest 1.5 and 9 m.

    Raises
    ------
    WeatherError
        Where the table has no such pair.
    """
    heights = sorted(z for z in table.temperature if LOWEST <= z <= HIGHEST)
    if asked is not None:
        lacking = [z for z in asked if z not in heights]
        if lacking:
            raise WeatherError(
                f"has no temperature at {lacking[0]:g} m", place=table.file,
                remedy="ask for heights that it has: " + (", ".join(f"{z:g}" for z in heights) or "none near the ground"),
            )  # fmt: skip
        return asked
    pairs = [(a, b) for a in heights for b in heights if b - a >= LEAST_GAP]
    if not pairs:
        raise WeatherError(
            "has no two temperatures near the ground", place=table.file,
            remedy="add columns such as temperature_1.5m_C and temperature_9m_C",
        )  # fmt: skip
    return min(pairs, key=lambda pair: abs(pair[0] - WANTED[0]) + abs(pair[1] - WANTED[1]))


def reading(table: ObservedTable, rows: Array, between: tuple[float, float]) -> Reading:
    """The table on the rows, linear between its readings.

    Raises
    ------
    WeatherError
        Where it has no difference within the run.
    """
    low, high = between
    difference = table.sample("temperature", high, rows) - table.sample("temperature", low, rows)
    known = np.flatnonzero(np.isfinite(difference))
    if known.size == 0:
        raise WeatherError(
            f"has no readings at {low:g} and {high:g} m within the run", place=table.file,
            remedy="give readings between the start and the end of the run",
        )  # fmt: skip
    winds = sorted(table.wind, key=lambda z: abs(z - 10.0))
    height = winds[0] if winds else math.nan
    wind = table.sample("wind", height, rows) if winds else np.full(rows.shape, math.nan)
    return Reading(difference, wind, float(rows[known[-1]]), height, table.file)


def assimilate(
    values: Array, at: Array, rows: Array, now: float, observed: float, error: float, offset: float
) -> Array:
    """Move members toward one reading.

    Parameters
    ----------
    values : ndarray, shape (m, n)
        What is moved, by member and row.
    at : ndarray, shape (m,)
        The members' own value of what was read.
    now : float
        Time of the reading [s since 1970 UTC]; later rows move less, earlier ones too.
    observed, error, offset : float
        The reading, its standard error, and the standard deviation of the common offset (0 where it does not apply).
    """
    mean, mean_at = values.mean(axis=0), float(at.mean())
    spread, spread_at = values - mean, at - mean_at
    variance = float(np.mean(spread_at * spread_at))
    total = variance + offset * offset + error * error
    away = np.abs(rows - now)
    together = np.mean(spread * spread_at[:, None], axis=0) * np.exp(-away / REACH)
    innovation = observed - mean_at
    moved = mean + (together + offset * offset * np.exp(-away / OFFSET_LASTS)) / total * innovation
    own = variance + error * error
    share = 1.0 / (1.0 + math.sqrt(error * error / own))
    return np.asarray(moved + spread - share * (together / own)[None, :] * spread_at[:, None])


def _recent(values: Array, rows: Array, last: float) -> Array:
    return np.asarray((rows > last - LAST - 1.0) & (rows <= last + 1.0) & np.isfinite(values))


def update(members: Sequence[Member], rows: Array, seen: Reading, modelled_wind: Array) -> Update:
    """Members moved toward the readings.

    Parameters
    ----------
    modelled_wind : ndarray, shape (n,)
        The run's own wind at the tower's wind height [m s-1].
    """
    difference = np.array([one.difference for one in members])
    wind = np.array([one.wind for one in members])
    usable = np.all(np.isfinite(difference), axis=0)
    recent = _recent(seen.difference, rows, seen.last) & usable
    if not recent.any():
        raise WeatherError(
            "has no readings within the hours that were computed", place=seen.file, remedy="check its times"
        )
    said, had = float(np.mean(seen.difference[recent])), difference[:, recent].mean(axis=1)
    moved = difference.copy()
    moved[:, usable] = assimilate(
        difference[:, usable], had, rows[usable], seen.last, said, DIFFERENCE_ERROR, DIFFERENCE_OFFSET
    )
    blowing = _recent(seen.wind, rows, seen.last) & usable & np.isfinite(modelled_wind)
    said_wind = had_wind = math.nan
    if blowing.any():
        said_wind, had_wind = float(np.mean(seen.wind[blowing])), float(np.mean(modelled_wind[blowing]))
        ratio = had_wind / max(float(np.mean(wind[0][blowing])), 0.1)
        at = ratio * wind[:, blowing].mean(axis=1)
        error = math.hypot(WIND_ERROR, WIND_OFFSET)
        moved[:, usable] = assimilate(moved[:, usable], at, rows[usable], seen.last, said_wind, error, 0.0)
    read = np.isfinite(seen.difference) & (rows <= seen.last)
    moved[:, read] = seen.difference[read]
    after = tuple(replace(one, difference=moved[n]) for n, one in enumerate(members))
    return Update(seen.last, said, float(np.mean(difference[0][recent])), said_wind, had_wind, after)
