"""Morning release in, afternoon release out, on all shared fair pairs on land: ``python tests/bench/observed_pairs.py``.

Nothing but the earlier release and ``observed_pairs.csv`` beside this file (ground, soil moisture and cloud, one row per station, chosen
by its description before any scoring) is given. The computed column is read at the hour of the later release by the same functions
as the measured one: depth by the tables' rule, theta and specific humidity as means between 0.2 and 0.8 of that depth.

Beside it stand: climatology (mean of the other days' observed values), persistence (the day before at the same hour, where released)
and the plain adiabat method (the earlier profile cut by the dry adiabat of the *model's own* highest 2 m temperature so far).
"""

from __future__ import annotations

import argparse
import csv
import math
import os
import sys
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date, datetime, timedelta
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parents[1]))

import numpy as np
from numpy.typing import NDArray

from forcing.air import KAPPA, P_REFERENCE
from forcing.profile import Profile, prepare
from forcing.readers import read_sounding
from forcing.scenario import build
from forcing.scenario_types import Scenario
from slab.cycle import Run, run
from slab.rendered import profile_at
from slab.tops import adiabat, tables_depth

Array = NDArray[np.float64]

CLOSURES = ("encroachment", "buoyant", "sheared")
DEFAULT = "sheared"
SETS = ("plains_2023", "vienna_2015")
MONTHS = (4, 5)
TABLE_EXPONENT = 0.2857  # R/cp of the observed tables
INSIDE = (0.2, 0.8)  # share of the depth over which the layer is averaged: clear of the ground and of the top
SAME_HOUR = 1.5  # [h] of solar time within which the day before counts as the same hour
MEMBERS = ("depth", "theta", "humidity")
UNITS = {"depth": "m", "theta": "K", "humidity": "g/kg"}


@dataclass(frozen=True, slots=True)
class State:
    """Depth [m], layer potential temperature [K] and specific humidity [g/kg]; NaN where unknown."""

    depth: float
    theta: float
    humidity: float


UNKNOWN = State(math.nan, math.nan, math.nan)


@dataclass(frozen=True, slots=True)
class Pair:
    """Two releases of one day with the row of its station in the file of choices."""

    name: str
    dataset: str
    choice: dict[str, str]
    morning: Path
    start: datetime
    first: Profile
    afternoon: Path
    second: Profile
    observed: State
    before: State
    told_depth: float
    aloft: float
    quiet: bool


@dataclass(frozen=True, slots=True)
class Forecast:
    """What a run says at the later release, and the adiabat method on its highest 2 m temperature so far."""

    state: State
    adiabat: State
    done: Run


def observed_folder() -> Path:
    """Folder of observed days: DAYLAYER_OBSERVED, or ../shared/observed beside the checkout."""
    told = os.environ.get("DAYLAYER_OBSERVED")
    return Path(told) if told else HERE.parents[2] / "shared" / "observed"


def _rows(path: Path) -> list[dict[str, str]]:
    with path.open(newline="", encoding="utf-8") as lines:
        return list(csv.DictReader(lines))


def layer_mean(profile: Profile, depth: float) -> tuple[float, float]:
    """Mean theta [K] and specific humidity [g/kg] between 0.2 and 0.8 of a depth."""
    z = np.linspace(INSIDE[0] * depth, INSIDE[1] * depth, 61)
    theta = float(np.mean(np.interp(z, profile.height, profile.theta)))
    return theta, 1000.0 * float(np.mean(np.interp(z, profile.height, profile.humidity)))


def state_of(profile: Profile) -> State:
    """The layer of a profile, measured or computed, by the tables' rule."""
    depth = tables_depth(profile, exponent=TABLE_EXPONENT).height
    return State(depth, *layer_mean(profile, depth)) if math.isfinite(depth) else UNKNOWN


def _profile(folder: Path, about: dict[str, str]) -> Profile:
    valid = datetime.fromisoformat(about["utc_time"])
    return prepare(
        read_sounding(folder / about["file"], valid=valid), latitude=float(about["lat"]), longitude=float(about["lon"]),
        elevation=float(about["elev_m"]),
    )  # fmt: skip


def _day_before(folder: Path, index: Sequence[dict[str, str]], later: dict[str, str]) -> State:
    """The layer a day earlier at the same station and hour."""
    wanted = datetime.fromisoformat(later["utc_time"]) - timedelta(days=1)
    for about in index:
        gap = abs(datetime.fromisoformat(about["utc_time"]) - wanted) / timedelta(hours=1)
        if about["station"] == later["station"] and gap <= SAME_HOUR:
            return state_of(_profile(folder, about))
    return UNKNOWN


def read_pairs(observed: Path) -> list[Pair]:
    """The fair pairs of the two sets on land in April and May."""
    choices = {row["dataset"]: row for row in _rows(HERE / "observed_pairs.csv")}
    found = []
    for row in _rows(observed / "fair_pairs.csv"):
        name = row["dataset"]
        if name not in SETS or date.fromisoformat(row["local_date"]).month not in MONTHS or row["fair_clear"] != "1":
            continue
        folder = observed / name
        index = _rows(folder / "index.csv")
        by_file = {about["file"]: about for about in index}
        early, late = by_file[row["morning_file"]], by_file[row["afternoon_file"]]
        second = _profile(folder, late)
        found.append(
            Pair(
                name=row["pair_id"], dataset=name, choice=choices[name], morning=folder / early["file"],
                start=datetime.fromisoformat(early["utc_time"]), first=_profile(folder, early),
                afternoon=folder / late["file"], second=second, observed=state_of(second),
                before=_day_before(folder, index, late), told_depth=float(row["second_depth_m"]),
                aloft=float(row["dtheta_aloft_K"]), quiet=row["fair_quiet"] == "1",
            )
        )  # fmt: skip
    return found


def scenario_of(pair: Pair, *, entrainment: str = DEFAULT, later: bool = False) -> Scenario:
    """The pair as a scenario; ``later`` also tells the run how the air aloft will be (no forecast can know it)."""
    choice = pair.choice
    profile = {"file": str(pair.morning), "valid": pair.start.isoformat()}
    if later:
        profile |= {"later": str(pair.afternoon), "later_valid": pair.second.valid.isoformat()}
    settings = {
        "title": pair.name,
        "site": {
            "name": choice["station"], "latitude": float(choice["latitude"]), "longitude": float(choice["longitude"]),
            "elevation": float(choice["elevation_m"]), "time_zone": choice["time_zone"],
        },
        "profile": profile,
        "surface": {"cover": choice["cover"], "soil_moisture": float(choice["soil_moisture"])},
        "weather": {"cloud_fraction": float(choice["cloud_fraction"])},
        "run": {"hours": (pair.second.valid - pair.start) / timedelta(hours=1), "entrainment": entrainment},
    }  # fmt: skip
    return build(settings, folder=Path(), source=pair.name)


def by_adiabat(morning: Profile, warmest: float) -> State:
    """Layer of the adiabat method: depth by the dry adiabat, humidity the earlier profile's mean up to it."""
    depth = adiabat(morning, surface_temperature=warmest).height
    theta = warmest * (P_REFERENCE / morning.surface_pressure) ** KAPPA
    return State(depth, theta, layer_mean(morning, depth)[1] if math.isfinite(depth) else math.nan)


def predict(pair: Pair, *, entrainment: str = DEFAULT, later: bool = False) -> Forecast:
    """Run a pair to the hour of its later release."""
    scenario = scenario_of(pair, entrainment=entrainment, later=later)
    done = run(scenario)
    known = np.flatnonzero(np.isfinite(done.fields["temperature_2m"]))
    knot = int(known[np.argmin(np.abs(done.time[known] - pair.second.valid.timestamp()))])
    warmest = float(np.nanmax(done.fields["temperature_2m"][: knot + 1]))
    return Forecast(state_of(profile_at(done, knot)), by_adiabat(scenario.profile, warmest), done)


def climatology(pairs: Sequence[Pair]) -> list[State]:
    """Mean of the other days' observed values at the same station."""
    found = []
    for pair in pairs:
        others = [one.observed for one in pairs if one.dataset == pair.dataset and one is not pair]
        means = (float(np.mean([getattr(o, m) for o in others])) if others else math.nan for m in MEMBERS)
        found.append(State(*means))
    return found


def values(states: Sequence[State], member: str) -> Array:
    """One member of many states."""
    return np.array([getattr(one, member) for one in states])


@dataclass(frozen=True, slots=True)
class Score:
    """Mean absolute, root mean square and mean error and correlation over ``n`` known pairs."""

    n: int
    mae: float
    rmse: float
    bias: float
    correlation: float


def score(predicted: Array, observed: Array) -> Score:
    """Score of predictions, over the pairs where both are known."""
    known = np.isfinite(predicted) & np.isfinite(observed)
    if not known.any():
        return Score(0, math.nan, math.nan, math.nan, math.nan)
    a, b = predicted[known], observed[known]
    correlation = float(np.corrcoef(a, b)[0, 1]) if a.size > 2 else math.nan
    gap = a - b
    return Score(a.size, float(np.mean(abs(gap))), float(np.sqrt(np.mean(gap**2))), float(np.mean(gap)), correlation)


def share_lost(ours: Array, other: Array, observed: Array) -> tuple[float, int]:
    """Share of pairs in which the baseline is nearer than we are, and of how many."""
    known = np.isfinite(ours) & np.isfinite(other) & np.isfinite(observed)
    lost = abs(ours - observed)[known] > abs(other - observed)[known]
    return (float(np.mean(lost)) if known.any() else math.nan), int(known.sum())


def score_table(title: str, pairs: Sequence[Pair], answers: dict[str, list[State]]) -> list[str]:
    """Every method by member, over the given pairs; ``ours`` is the default closure."""
    lines = ["", title]
    seen = [pair.observed for pair in pairs]
    for member in MEMBERS:
        observed = values(seen, member)
        digits = 0 if member == "depth" else 2
        ours = values(answers[DEFAULT], member)
        lines.append(
            f"{member + ' (' + UNITS[member] + ')':<24}{'n':>4}{'mae':>8}{'rmse':>8}{'bias':>8}{'corr':>7}   nearer than {DEFAULT}"
        )
        for name, states in answers.items():
            s = score(values(states, member), observed)
            share, n = share_lost(ours, values(states, member), observed)
            told = "" if name == DEFAULT else f"{100.0 * share:>9.0f} % of {n}"
            lines.append(
                f"  {name:<22}{s.n:>4}{s.mae:>8.{digits}f}{s.rmse:>8.{digits}f}{s.bias:>+8.{digits}f}{s.correlation:>7.2f}{told}"
            )
    return lines


def pair_table(pairs: Sequence[Pair], forecasts: Sequence[Forecast]) -> list[str]:
    """Every pair: observed beside predicted by the default closure."""
    lines = [f"{'pair':<32}{'depth':>7}{'model':>7} |{'theta':>8}{'model':>8} |{'q':>6}{'model':>7} |{'aloft':>7}",
             f"{'':<32}{'m':>7}{'m':>7} |{'K':>8}{'K':>8} |{'g/kg':>6}{'g/kg':>7} |{'K':>7}"]  # fmt: skip
    for pair, one in zip(pairs, forecasts, strict=True):
        o, p = pair.observed, one.state
        lines.append(
            f"{pair.name:<32}{o.depth:>7.0f}{p.depth:>7.0f} |{o.theta:>8.2f}{p.theta:>8.2f} |{o.humidity:>6.2f}{p.humidity:>7.2f}"
            f" |{pair.aloft:>+7.2f}"
        )
    return lines


def main() -> int:
    """Print pairs and scores."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0] if __doc__ else "")
    parser.add_argument("--later", action="store_true", help="also with the change aloft told, which no forecast knows")
    asked = parser.parse_args()
    if not (observed_folder() / "fair_pairs.csv").is_file():
        print(f"observed pairs are not at {observed_folder()}; set DAYLAYER_OBSERVED", file=sys.stderr)
        return 1
    pairs = read_pairs(observed_folder())
    for choice in _rows(HERE / "observed_pairs.csv"):
        print(
            f"{choice['station']}: {choice['cover']}, soil moisture {choice['soil_moisture']}, cloud {choice['cloud_fraction']}; {choice['why']}"
        )
    runs = {closure: [predict(pair, entrainment=closure) for pair in pairs] for closure in CLOSURES}
    answers = {closure: [one.state for one in found] for closure, found in runs.items()}
    if asked.later:
        answers["sheared, aloft told"] = [predict(pair, later=True).state for pair in pairs]
    answers["climatology"] = climatology(pairs)
    answers["persistence"] = [pair.before for pair in pairs]
    answers["adiabat, model maximum"] = [one.adiabat for one in runs[DEFAULT]]
    print("\n".join(["", *pair_table(pairs, runs[DEFAULT])]))
    print("\na mean of the other days correlates with -1 by construction; one pair of Springfield has no climatology")
    groups = (("all pairs (all of them have fair_clear = 1)", [True] * len(pairs)),
              ("pairs of Vienna", [pair.dataset == "vienna_2015" for pair in pairs]),
              ("pairs with little change aloft (fair_quiet = 1)", [pair.quiet for pair in pairs]))  # fmt: skip
    for title, keep in groups:
        chosen = [pair for pair, kept in zip(pairs, keep, strict=True) if kept]
        part = {name: [s for s, kept in zip(found, keep, strict=True) if kept] for name, found in answers.items()}
        print("\n".join(score_table(title, chosen, part)))
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
