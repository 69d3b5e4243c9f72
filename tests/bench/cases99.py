"""CASES-99, 23 to 26 October 1999, three days and nights: ``python tests/bench/cases99.py``.

From the profile of 19 UTC the run goes three times: with the energy balance over short grass under the wind that the profile
has aloft, the same under the tower's wind, and with the measured heat fluxes imposed. Beside the model stand the surface
temperature, sensible heat and friction velocity of the main tower. The tower's 10 m wind is not in the shared files: it is
taken from the friction velocity by the neutral law, too weak in stable air. Nor is the air's inversion: the run under measured fluxes
stands in for it. The nights differ: the first with weak, intermittent turbulence, the second turbulent, the third with hardly any.
"""

from __future__ import annotations

import math
import sys
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE), str(HERE.parents[1])]

import numpy as np
from night_scores import Array, bias, instant, mae, number, observed_folder, rows

from forcing.air import KARMAN, humidity_from_mixing_ratio
from forcing.cover import cover
from forcing.profile import Profile
from forcing.scenario import build
from forcing.scenario_parts import Parts
from forcing.scenario_types import Scenario
from forcing.series import Series
from forcing.weather import FluxTable, Weather
from slab.cycle import Run, run
from slab.inversions import rising_inversion
from slab.rendered import profile_at

CASE = "CASES99_19991023"
START = datetime(1999, 10, 23, 19, tzinfo=UTC)
HOURS = 71.0
SURFACE = {"cover": "short grass", "soil_moisture": 0.2}  # prairie grass in a dry autumn; fixed beforehand
FIRST_EVENING = datetime(1999, 10, 24, tzinfo=UTC).timestamp()
BEFORE_DUSK = 1.8  # [h]
DUSK, DAWN = 0.5, 12.0  # [h UTC] sunset is at 23:40, sunrise at 12:50: the night proper


@dataclass(frozen=True, slots=True)
class Tower:
    """Measurements of the main tower over time [s since 1970 UTC]: W m-2 positive upward, K, m s-1."""

    time: Array
    sensible: Array
    latent: Array
    surface: Array
    friction: Array


def tower(folder: Path) -> Tower:
    """Read the tower's file."""
    found = rows(folder / f"{CASE}_fluxes.csv")
    time = np.array([instant(row["time_as_in_source"] + "+00:00").timestamp() for row in found])
    names = ("sensible_heat_Wm2", "latent_heat_Wm2", "surface_temperature_K", "ustar_ms")
    return Tower(time, *(np.array([number(row[name]) for row in found]) for name in names))


def first_profile(folder: Path) -> Profile:
    """The profile of 19 UTC; below its first level, at 5 m, that level is held."""
    found = rows(folder / f"{CASE}_profile.csv")
    height, pressure, theta, ratio, u, v = (
        np.array([number(row[name]) for row in found])
        for name in ("height_agl_m", "pressure_hPa", "theta_K", "mixing_ratio_gkg", "u_ms", "v_ms")
    )
    pressure = 100.0 * pressure
    slope = (pressure[1] - pressure[0]) / (height[1] - height[0])
    ground = [np.zeros(1), pressure[:1] - slope * height[0], theta[:1], ratio[:1], u[:1], v[:1]]
    height, pressure, theta, ratio, u, v = (
        np.concatenate((low, high)) for low, high in zip(ground, (height, pressure, theta, ratio, u, v), strict=True)
    )
    humidity = np.array([humidity_from_mixing_ratio(max(float(r), 1e-4) / 1000.0) for r in ratio])
    return Profile(
        height=height, pressure=pressure, theta=theta, humidity=humidity, u=u, v=v, wind_known=True,
        humidity_known=True, valid=START, latitude=37.65, longitude=-96.74, elevation=436.0, station="tower",
        file="19 UTC",
    )  # fmt: skip


def scenario_of(folder: Path, measured: Tower, *, own_wind: bool, imposed: bool) -> Scenario:
    """The case with the energy balance or with measured fluxes imposed, under its own wind or the tower's."""
    fluxes = None
    weather = Weather()
    if not own_wind:
        wind = measured.friction / KARMAN * math.log(10.0 / cover(str(SURFACE["cover"])).roughness_momentum)
        weather = Weather(series={"wind_10m_m_s": Series(measured.time, wind)})
    settings: dict[str, object] = {
        "title": "CASES-99",
        "site": {"name": "tower", "latitude": 37.65, "longitude": -96.74, "elevation": 436.0, "time_zone": "Etc/GMT+6"},
        "surface": SURFACE,
        "run": {"hours": HOURS},
    }
    if imposed:
        names = ("sensible_flux_W_m2", "latent_flux_W_m2", "friction_velocity_m_s")
        values = (measured.sensible, measured.latent, measured.friction)
        table = {name: Series(measured.time, value) for name, value in zip(names, values, strict=True)}
        fluxes = FluxTable(table, "tower")
    return build(
        settings, folder=HERE, source="cases99", parts=Parts(settings, first_profile(folder), None, fluxes, weather)
    )


def nights(measured: Tower) -> list[tuple[float, float]]:
    """Start and end [s since 1970 UTC] of the three nights."""
    return [
        (FIRST_EVENING + 86400.0 * d + 3600.0 * DUSK, FIRST_EVENING + 86400.0 * d + 3600.0 * DAWN) for d in range(3)
    ]


def strengths(done: Run, when: float) -> tuple[float, float, float]:
    """Strength [K] and top [m] of the inversion at a time, and T(100 m) - T(2 m) [K]."""
    column = profile_at(done, int(np.argmin(np.abs(done.time - when))))
    found = rising_inversion(column.height, column.temperature)
    contrast = float(
        np.interp(100.0, column.height, column.temperature) - np.interp(2.0, column.height, column.temperature)
    )
    return found.strength, found.top, contrast


def fell(time: Array, surface: Array, dusk: float, dawn: float) -> float:
    """How far the surface [K] fell from an hour before sunset to dawn."""
    early = np.interp(dusk - 3600.0 * BEFORE_DUSK, time, surface)
    return float(early - np.interp(dawn, time, surface))


def lines_of(measured: Tower, runs: dict[str, Run]) -> list[str]:
    """The tables, night by night, and errors over all nights."""
    lines = [
        f"{'night':<6}{'':<26}{'coldest (C)':>12}{'fell by (K)':>13}{'H (W m-2)':>11}{'u* (m/s)':>10}{'strength (K)':>14}{'top (m)':>9}{'T100-T2 (K)':>13}"
    ]
    errors: dict[str, list[tuple[Array, Array, Array]]] = {name: [] for name in runs}
    for count, (dusk, dawn) in enumerate(nights(measured), start=1):
        seen = (measured.time >= dusk) & (measured.time <= dawn)
        at = measured.time[seen]
        truth = (measured.surface[seen], measured.sensible[seen], measured.friction[seen])
        lines.append(
            f"{count:<6}{'tower':<26}{truth[0].min() - 273.15:>12.1f}{fell(measured.time, measured.surface, dusk, dawn):>13.1f}{truth[1].mean():>11.1f}{truth[2].mean():>10.2f}"
        )
        for name, done in runs.items():
            said = [
                np.interp(at, done.time, done.fields[x]) for x in ("skin_temperature", "sensible", "friction_velocity")
            ]
            strength, top, contrast = strengths(done, dawn)
            lines.append(
                f"{'':<6}{name:<26}{said[0].min() - 273.15:>12.1f}{fell(done.time, done.fields['skin_temperature'], dusk, dawn):>13.1f}{said[1].mean():>11.1f}{said[2].mean():>10.2f}"
                f"{strength:>14.1f}{top:>9.0f}{contrast:>13.1f}"
            )
            errors[name].append((said[0] - truth[0], said[1] - truth[1], said[2] - truth[2]))
    lines.append(
        "errors by night, MAE and bias (bias of each night): surface temperature (K), sensible heat (W m-2), u* (m/s)"
    )
    for name, found in errors.items():
        whole = [np.concatenate([one[j] for one in found]) for j in range(3)]
        texts = [
            f"{mae(x):.2f} {bias(x):+.2f} ({', '.join(f'{bias(one[j]):+.2f}' for one in found)})"
            for j, x in enumerate(whole)
            if np.isfinite(whole[j]).all()
        ]
        lines.append(f"{name:<26}" + "   ".join(texts))
    return lines


def main() -> int:
    """Print the table."""
    folder = observed_folder() / "testdays"
    if not folder.is_dir():
        print(f"the test days are not at {folder}; set DAYLAYER_OBSERVED", file=sys.stderr)
        return 1
    measured = tower(folder)
    runs = {
        "balance, wind aloft": run(scenario_of(folder, measured, own_wind=True, imposed=False)),
        "balance, tower's wind": run(scenario_of(folder, measured, own_wind=False, imposed=False)),
        "imposed fluxes and wind": run(scenario_of(folder, measured, own_wind=False, imposed=True)),
    }
    print(f"given: profile of 19 UTC, {SURFACE}, clear sky, pressure-gradient wind of that profile held for three days")
    print("\n".join(lines_of(measured, runs)))
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
