"""The computed column at any knot of a run, as a profile that the same questions can be put to as to a sounding."""

from __future__ import annotations

from datetime import UTC, datetime

import numpy as np

from forcing.air import GRAVITY, KAPPA, P_REFERENCE
from forcing.profile import Profile
from slab.column import Aloft
from slab.cycle import DAY, Part, Run
from slab.daytime import EAST, HEAT, MASS, MEMBERS, NORTH, VAPOUR, Offsets
from slab.handover import ENTRAINMENT_ZONE, SHARP, column_after_slab, moved, nodes_now


def part_at(run: Run, knot: int) -> Part:
    """The stretch of day or night that a knot belongs to; a shared knot belongs to the later one."""
    holding = [part for part in run.parts if part.first <= knot <= part.last]
    if not holding:
        raise IndexError(f"knot {knot} was not computed")
    return holding[-1]


def offsets_of(run: Run, knot: int) -> Offsets:
    """What has happened to the air aloft since the start of the knot's part."""
    f = run.fields
    return Offsets(f["sunk"][knot], f["warmed"][knot], f["moistened"][knot], f["later"][knot], 0.0, 0.0)


def profile_at(run: Run, knot: int, *, softened: bool = True) -> Profile:
    """Slab, entrainment zone a quarter of the depth thick, and air aloft by day; the night's cells and air aloft by night.

    Parameters
    ----------
    softened : bool
        False draws the slab's top as sharp as the table allows (a few centimetres), which keeps heat and vapour exactly.
    """
    part = part_at(run, knot)
    at = offsets_of(run, knot)
    if part.kind == DAY:
        y = [0.0] * MEMBERS
        f = run.fields
        y[MASS], y[HEAT], y[VAPOUR] = f["mass"][knot], f["heat"][knot], f["vapour"][knot]
        y[EAST], y[NORTH] = f["east"][knot], f["north"][knot]
        table, _, _ = column_after_slab(part.air, part.later, at, y, (y[EAST], y[NORTH]),
                                        ENTRAINMENT_ZONE if softened else SHARP)  # fmt: skip
        return _profile(run, knot, table)
    assert part.course is not None
    note = part.course.notes[knot]
    nodes = nodes_now(part.air, at)
    above = nodes[nodes > part.course.mass[-1] * 1.001]
    aloft = moved(part.air, part.later, at, above)
    height = np.interp(above, np.asarray(part.air.mass), np.asarray(part.air.height))
    levels = np.concatenate(([0.0], part.course.height, height))
    cell_mass = np.concatenate(([0.0], part.course.mass))
    centre_mass = 0.5 * (cell_mass[1:] + cell_mass[:-1])
    level_mass = np.concatenate(([0.0], centre_mass, above))
    cells = (note.theta, note.humidity, note.u, note.v)
    columns = [np.concatenate((c[:1], c, a)) for c, a in zip(cells, aloft, strict=True)]
    exner = (run.surface_pressure / P_REFERENCE) ** KAPPA
    columns[0][0] = run.fields["temperature_2m"][knot] / exner
    pressure = run.surface_pressure - GRAVITY * level_mass
    return _as_profile(run, knot, levels, pressure, *columns)


def _profile(run: Run, knot: int, table: Aloft) -> Profile:
    pressure = run.surface_pressure - GRAVITY * np.asarray(table.mass)
    columns = (np.asarray(x) for x in (table.theta, table.humidity, table.u, table.v))
    return _as_profile(run, knot, np.asarray(table.height), pressure, *columns)


def _as_profile(run: Run, knot: int, height: np.ndarray, pressure: np.ndarray, theta: np.ndarray,
                humidity: np.ndarray, u: np.ndarray, v: np.ndarray) -> Profile:  # fmt: skip
    site, release = run.scenario.site, run.scenario.profile
    return Profile(
        height=height, pressure=pressure, theta=theta, humidity=humidity, u=u, v=v, wind_known=True,
        humidity_known=release.humidity_known, valid=datetime.fromtimestamp(float(run.time[knot]), UTC),
        latitude=site.latitude, longitude=site.longitude, elevation=site.elevation, station=site.name,
        file="", format="computed",
    )  # fmt: skip
