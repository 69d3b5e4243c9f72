"""Published test days with their own fluxes at the ground: ``python tests/bench/observed_days.py``.

Each case runs from its own profile with the fluxes of its table instead of the energy balance, and no advection or sinking, which the
tables do not give. Three order checks are printed with it:

- with the default closure the layer is at least as deep as encroachment alone makes it from the same fluxes;
- without any wind it is at most 1.3 times as deep as that;
- cumulus stand only in hours when the top of the entrainment zone is over the condensation level.
"""

from __future__ import annotations

import csv
import math
import os
import sys
import tempfile
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parents[1]))

from forcing.air import (
    CP_DRY,
    GRAVITY,
    KAPPA,
    P_REFERENCE,
    condensation_level,
    humidity_from_mixing_ratio,
    mixing_ratio_from_humidity,
    virtual,
)
from forcing.scenario import build
from forcing.scenario_types import Scenario
from slab.cycle import Run, run
from slab.products.events import CUMULUS_SEEN

ZONE_TOP = 1.125  # top of the entrainment zone over the slab top: a zone of a quarter of the depth, half of it above
CALM_LIMIT = 1.3
SLACK = 1.0  # [m], accuracy of the march in depth
CONDENSATION_SLACK = 0.01  # the slab cools upward by g/cp of dry air, the exact condensation level by that of moist air


@dataclass(frozen=True, slots=True)
class Case:
    """A test day: the offset of its clock from UTC [h] with the reason, and what of its table needs mending."""

    name: str
    offset: int
    clock: str
    friction: bool = False
    mixing_ratio_divisor: float = 1.0
    note: str = ""


CASES = (
    Case("BLLAST_20110620", 0, "UTC: the table calls its sounding 05:15 UTC; LE peaks at 12:00, the sun at 12:00 UTC"),
    Case("AMMA_20060710", 0, "UTC: H peaks at 11:30 to 12:00, the sun at 11:57 UTC"),
    Case("SCMS_19950805", 0, "UTC: fluxes peak at 18:00, the sun at 17:30 UTC (13:30 if the clock were local)"),
    Case("LBA_19990223", -4, "local, UTC-4: fluxes start at 07:30 and peak near 12:45, the sun at 12:26 UTC-4"),
    Case("CASES99_19991023", 0, "UTC: profile of the 19 UTC sounding; H turns at 23:05, sunset 23:36 UTC", friction=True,
         note="first day only: the run starts with a grown layer"),
    Case("CASS_composite", 0, "UTC: fluxes peak at 18:00 to 19:00, the sun at 18:38 UTC", mixing_ratio_divisor=1000.0,
         note="the mixing ratio column is 1000 times too large, so its dew points and pressures are wrong as well: "
              "ratio divided by 1000, pressure made hydrostatic from theta and the surface pressure"),
)  # fmt: skip
NOT_RUN = "MOSAI_20230819: fluxes only, there is no profile in the folder to start from: not run"


@dataclass(frozen=True, slots=True)
class Day:
    """A case run three times from the same fluxes: as given, without wind, and by encroachment alone (calm too)."""

    case: Case
    given: Run
    calm: Run
    encroachment: Run


@dataclass(frozen=True, slots=True)
class Check:
    """One order check: what it says, whether it held, and the worst number."""

    text: str
    held: bool
    detail: str


def observed_folder() -> Path:
    """Folder of observed days: DAYLAYER_OBSERVED, or ../shared/observed beside the checkout."""
    told = os.environ.get("DAYLAYER_OBSERVED")
    return Path(told) if told else HERE.parents[2] / "shared" / "observed"


def _rows(path: Path) -> list[dict[str, str]]:
    with path.open(newline="", encoding="utf-8") as lines:
        return list(csv.DictReader(lines))


def _about(folder: Path, name: str) -> dict[str, str]:
    return next(row for row in _rows(folder / "cases.csv") if row["case"] == name)


def _hydrostatic(rows: Sequence[dict[str, str]], divisor: float, surface: float) -> list[float]:
    """Pressures [Pa] of levels from theta, humidity and the pressure at the ground."""
    exner = (surface / P_REFERENCE) ** KAPPA
    found, below, last = [], 0.0, math.nan
    for row in rows:
        ratio = float(row["mixing_ratio_gkg"]) / 1000.0 / divisor
        now = virtual(float(row["theta_K"]), humidity_from_mixing_ratio(ratio))
        height = float(row["height_agl_m"])
        mean = now if math.isnan(last) else 0.5 * (now + last)
        exner -= GRAVITY * (height - below) / (CP_DRY * mean)
        below, last = height, now
        found.append(P_REFERENCE * exner ** (1.0 / KAPPA))
    return found


def write_profile(case: Case, folder: Path, to: Path, *, calm: bool) -> None:
    """The case's theta, humidity and wind as a profile CSV that the reader takes."""
    rows = _rows(folder / f"{case.name}_profile.csv")
    surface = 100.0 * float(_about(folder, case.name)["surface_pressure_hPa"])
    pressures = [100.0 * float(row["pressure_hPa"]) for row in rows]
    if case.mixing_ratio_divisor != 1.0:
        pressures = _hydrostatic(rows, case.mixing_ratio_divisor, surface)
    lines = ["pressure_hPa,height_agl_m,temperature_K,mixing_ratio_g_kg,wind_dir_deg,wind_speed_m_s"]
    for row, pressure in zip(rows, pressures, strict=True):
        warm = float(row["theta_K"]) * (pressure / P_REFERENCE) ** KAPPA
        ratio = float(row["mixing_ratio_gkg"]) / case.mixing_ratio_divisor
        u, v = (0.0, 0.0) if calm else (float(row["u_ms"]), float(row["v_ms"]))
        lines.append(
            f"{pressure / 100.0:.4f},{row['height_agl_m']},{warm:.4f},{ratio:.4f},"
            f"{math.degrees(math.atan2(-u, -v)) % 360.0:.3f},{math.hypot(u, v):.4f}"
        )
    to.write_text("\n".join(lines) + "\n", encoding="utf-8")


def _clock(text: str, case: Case) -> datetime:
    return datetime.fromisoformat(f"{text.strip()}{case.offset:+03d}:00")


def write_fluxes(case: Case, folder: Path, to: Path, *, calm: bool) -> tuple[datetime, datetime]:
    """The case's fluxes as a flux CSV; returns its first time and the end of the first day's feeding of the layer."""
    rows = _rows(folder / f"{case.name}_fluxes.csv")
    friction = case.friction and not calm
    lines = ["time,sensible_flux_W_m2,latent_flux_W_m2" + (",friction_velocity_m_s" if friction else "")]
    fed, end = False, None
    for row in rows:
        sensible, latent = float(row["sensible_heat_Wm2"]), float(row["latent_heat_Wm2"])
        moment = _clock(row["time_as_in_source"], case)
        lines.append(f"{moment.isoformat()},{sensible},{latent}" + (f",{row['ustar_ms']}" if friction else ""))
        fed = fed or sensible > 5.0
        if fed and end is None and sensible <= 0.5:
            end = moment
    to.write_text("\n".join(lines) + "\n", encoding="utf-8")
    last = _clock(rows[-1]["time_as_in_source"], case)
    return _clock(rows[0]["time_as_in_source"], case), end or last


def scenario_of(case: Case, folder: Path, work: Path, *, calm: bool, entrainment: str) -> Scenario:
    """The case as a scenario; the fluxes decide its hours."""
    write_profile(case, folder, work / "profile.csv", calm=calm)
    start, end = write_fluxes(case, folder, work / "fluxes.csv", calm=calm)
    about = _about(folder, case.name)
    settings = {
        "title": case.name,
        "site": {
            "name": about["place"], "latitude": float(about["lat"]), "longitude": float(about["lon"]),
            "elevation": float(about["orography_m_in_source"]), "time_zone": "UTC",
        },
        "profile": {"file": "profile.csv", "valid": start.isoformat()},
        "surface": {"fluxes": "fluxes.csv"},
        "run": {"hours": (end - start) / timedelta(hours=1), "entrainment": entrainment},
    }  # fmt: skip
    return build(settings, folder=work, source=case.name)


def run_day(case: Case, folder: Path) -> Day:
    """Run a case three times."""
    with tempfile.TemporaryDirectory() as place:
        given, calm, encroachment = (
            run(scenario_of(case, folder, Path(place), calm=still, entrainment=closure))
            for still, closure in ((False, "sheared"), (True, "sheared"), (True, "encroachment"))
        )
    return Day(case, given, calm, encroachment)


def condensation(done: Run, knot: int) -> float:
    """Condensation level [m above ground] of the layer's air."""
    warm = float(done.fields["theta"][knot]) * (done.surface_pressure / P_REFERENCE) ** KAPPA
    return float(condensation_level(warm, float(done.fields["humidity"][knot]), done.surface_pressure))


def _fed(day: Day) -> list[int]:
    """Knots in which all three runs have a slab that the ground feeds."""
    runs = (day.given, day.calm, day.encroachment)
    return [
        k
        for k in range(len(day.given.time))
        if all(
            one.day[k] and one.fields["buoyancy_flux"][k] > 0.0 and math.isfinite(one.fields["depth"][k])
            for one in runs
        )
    ]


def on_the_hour(second: float) -> bool:
    """Whether a time [s since 1970] is a full hour."""
    return (second / 3600.0) % 1.0 < 1e-6


def order_checks(day: Day) -> list[Check]:
    """The three checks: the first two judged at full hours, beside the worst of any knot; the third at every knot."""
    knots = _fed(day)
    hours = [k for k in knots if on_the_hour(day.given.time[k])]
    depth, calm, least = (one.fields["depth"] for one in (day.given, day.calm, day.encroachment))
    short, short_any = (max(float(least[k] - depth[k]) for k in chosen) for chosen in (hours, knots))
    ratio, ratio_any = (max(float((calm[k] - SLACK) / least[k]) for k in chosen) for chosen in (hours, knots))
    cumulus = [k for k in knots if day.given.fields["cumulus_fraction"][k] > CUMULUS_SEEN]
    early = max((1.0 - ZONE_TOP * float(depth[k]) / condensation(day.given, k) for k in cumulus), default=math.nan)
    return [
        Check(
            "at least the encroachment depth",
            short <= SLACK,
            f"largest shortfall {max(short, 0.0):.0f} m (every 10 minutes: {max(short_any, 0.0):.0f} m)",
        ),
        Check(
            f"at most {CALM_LIMIT} times it in calm air",
            ratio <= CALM_LIMIT,
            f"largest ratio {ratio:.3f} (every 10 minutes: {ratio_any:.3f})",
        ),
        Check(
            f"cumulus (over {100.0 * CUMULUS_SEEN:.0f} %) only with the entrainment zone over the condensation level",
            not cumulus or early <= CONDENSATION_SLACK,
            f"zone short of it by {100.0 * max(early, 0.0):.1f} % at most" if cumulus else "no cumulus",
        ),
    ]


def table(day: Day) -> list[str]:
    """The day by hour of its own clock."""
    lines = [
        f"{'clock':<8}{'H':>6}{'LE':>6} |{'depth':>7}{'calm':>7}{'encr':>7} |{'theta':>8}{'r':>7}{'condens':>9}{'zone top':>10}{'cumulus':>9}",
        f"{'':<8}{'W m-2':>6}{'W m-2':>6} |{'m':>7}{'m':>7}{'m':>7} |{'K':>8}{'g/kg':>7}{'m':>9}{'m':>10}{'%':>9}",
    ]
    for k, second in enumerate(day.given.time):
        if not on_the_hour(second) and k not in (0, len(day.given.time) - 1):
            continue
        f = {name: float(values[k]) for name, values in day.given.fields.items()}
        hour = (second / 3600.0 + day.case.offset) % 24.0
        clock = f"{int(hour + 1e-9):02d}:{round(60.0 * (hour % 1.0)) % 60:02d}"
        depths = [f["depth"], day.calm.fields["depth"][k], day.encroachment.fields["depth"][k]]
        lines.append(
            f"{clock:<8}{f['sensible']:>6.0f}{f['latent']:>6.0f} |" + "".join(f"{d:>7.0f}" for d in depths)
            + f" |{f['theta']:>8.2f}{1000.0 * mixing_ratio_from_humidity(f['humidity']):>7.2f}{condensation(day.given, k):>9.0f}"
            f"{ZONE_TOP * f['depth']:>10.0f}{100.0 * f['cumulus_fraction']:>9.1f}" + ("" if day.given.day[k] else "  night")
        )  # fmt: skip
    return lines


def main() -> int:
    """Print every case and its checks."""
    folder = observed_folder() / "testdays"
    if not folder.is_dir():
        print(f"observed test days are not at {folder}; set DAYLAYER_OBSERVED", file=sys.stderr)
        return 1
    print(
        "fluxes as in the tables, no advection or sinking; depth with the default closure, without wind, and by encroachment"
    )
    held, asked = 0, 0
    for case in CASES:
        print(f"\n{case.name}; clock {case.clock}")
        if case.note:
            print(f"  {case.note}")
        day = run_day(case, folder)
        print("\n".join(table(day)))
        for check in order_checks(day):
            held, asked = held + check.held, asked + 1
            print(f"  {'holds' if check.held else 'FAILS'}: {check.text}; {check.detail}")
        if day.given.stopped != "end of the run":
            print(f"  the run ended early: {day.given.stopped}")
    print(f"\n{NOT_RUN}\n{held} of {asked} order checks hold")
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
