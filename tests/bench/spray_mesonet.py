"""The spray calendar's windows on the mesonet night of 22-23 March 2019: ``python tests/bench/spray_mesonet.py [--stations N]``.

Every used station of `mesonet_night` (its scenario, its measured 10 m wind, clear-sky long-wave) runs with the calendar's nine
members, about 7 s of one core a station in plain Python. Printed: hits, misses and false alarms by half hours for the run alone,
for "present or possible" as the calendar says it, and for two baselines; the same by station; errors of onset and end; how many
observed onsets and ends lie in the 10-90 % windows, also for other widths than the calendar's own.

It is one night: the stations are not independent of each other, so that no number here has an error bar that means anything,
and the calendar's own widths (`slab.timing.TIMING`) were chosen on it, so that its row is no test of them. A
miss, a half hour with an inversion that nothing warned of, is the dangerous side: the members and windows take away most
misses, and pay for it with false alarms. Cloud was not measured; the runs take the sky as clear.
"""

from __future__ import annotations

import argparse
import math
import sys
import time as clock
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE), str(HERE.parents[1])]

import numpy as np
from mesonet_night import (
    HEIGHTS,
    SET,
    THRESHOLDS,
    Flags,
    Station,
    contingency,
    end,
    onset,
    scenario_of,
    slots,
    stations,
    usable,
)
from night_scores import Array, bias, mae, observed_folder

from forcing.scenario_types import Site
from slab.cycle import run
from slab.products.spray_air import rows_of
from slab.products.spray_calendar import states_of
from slab.products.spray_limits import POSSIBLE, PRESENT
from slab.products.spray_members import Member, members
from slab.products.spray_window import Night, nights, outward
from slab.timing import TIMING, Timing

BETWEEN = (1.5, 9.0)
MINUTE = 60.0
WIDTHS = (0.0, 30.0, 60.0, 90.0, 120.0, 150.0)  # [min] tried beside the calendar's own
NO_SPREAD = Timing(0.0, 0.0, 0.0, 0.0)


@dataclass(frozen=True, slots=True)
class Case:
    """A station with its nine members on half-hour rows, beginning with the first reading."""

    station: Station
    site: Site
    rows: Array
    members: tuple[Member, ...]

    @property
    def seen(self) -> Array:
        """Observed T(9 m) - T(1.5 m) [K], means of the half hours between rows."""
        return slots(self.station.time, self.station.contrast)

    def night(self, timing: Timing) -> Night:
        """The one night of the run, with windows of a given width."""
        found = nights(self.site, self.rows, self.members, timing=timing)
        return max(found, key=lambda one: min(one.stop, self.rows[-1]) - max(one.start, self.rows[0]))

    @property
    def times(self) -> tuple[float, float]:
        """Observed onset and end [s since 1970 UTC]."""
        one = self.station
        return onset(one.time, one.contrast), end(one.time, one.contrast, one.sunrise)


def case_of(station: Station) -> Case:
    """Run a station and its members."""
    scenario = scenario_of(station, measured_sun=False)
    done = run(scenario, heights=HEIGHTS)
    rows = rows_of(float(done.time[0]), float(done.time[-1]), scenario.site.time_zone)
    return Case(station, scenario.site, rows, members(done, rows, BETWEEN))


def between_rows(values: Array) -> Array:
    """Means of the half hours between rows."""
    return 0.5 * (values[1:] + values[:-1])


def alone(case: Case, threshold: float) -> Flags:
    """The run itself, without members or windows."""
    return np.asarray(between_rows(case.members[0].difference) > threshold)


def any_member(case: Case, threshold: float) -> Flags:
    """Any of the nine members."""
    return np.asarray(np.any([between_rows(one.difference) > threshold for one in case.members], axis=0))


def as_said(timing: Timing, words: tuple[str, ...]) -> Callable[[Case, float], Flags]:
    """What the calendar says at either end of the half hour (it speaks of above zero only, whatever the threshold)."""

    def rule(case: Case, _: float) -> Flags:
        nothing_read = np.zeros(case.rows.shape, dtype=bool)
        states = states_of(case.rows, case.members, [case.night(timing)], nothing_read)
        warned = np.array([state in words for state in states])
        return np.asarray(warned[1:] | warned[:-1])

    return rule


def dark(case: Case, _: float) -> Flags:
    """From sunset to sunrise."""
    middle = between_rows(case.rows)
    return np.asarray((middle > case.station.sunset) & (middle < case.station.sunrise))


def calm(case: Case, _: float) -> Flags:
    """Measured wind below 2 m/s; the sky is taken as clear, so that cloud is below a quarter."""
    return np.asarray(slots(case.station.time, case.station.wind) < 2.0)


RULES: tuple[tuple[str, Callable[[Case, float], Flags]], ...] = (
    ("the run alone", alone),
    ("any of nine members", any_member),
    ("present (every member)", as_said(TIMING, (PRESENT,))),
    ("present or possible, no model error", as_said(NO_SPREAD, (PRESENT, POSSIBLE))),
    ("present or possible, as the calendar", as_said(TIMING, (PRESENT, POSSIBLE))),
    ("sunset to sunrise", dark),
    ("wind below 2 m/s (clear sky)", calm),
)


def table(cases: Sequence[Case]) -> list[str]:
    """Counts over all stations by threshold and rule."""
    lines = [f"half hours over {len(cases)} stations of one night (not independent)"]
    for threshold in THRESHOLDS:
        seen = np.concatenate([one.seen > threshold for one in cases])
        lines.append(
            f"observed T(9 m) - T(1.5 m) above {threshold:g} K {'':<8}{'hits':>6}{'misses':>8}{'false':>8}{'quiet':>8}"
        )
        for name, rule in RULES:
            said = np.concatenate([rule(one, threshold) for one in cases])
            lines.append(f"   {name:<40}{contingency(said, seen)}")
    return lines


def by_station(cases: Sequence[Case]) -> list[str]:
    """Hits, misses and false alarms above 0 K of the run alone and of the calendar's words, and where the misses lie."""
    lines = [
        "by station, above 0 K: hits/misses/false of the run alone, and of present or possible; when the latter misses"
    ]
    said_by = as_said(TIMING, (PRESENT, POSSIBLE))
    for one in cases:
        seen, middle = one.seen > 0.0, between_rows(one.rows)
        counts = []
        for said in (alone(one, 0.0), said_by(one, 0.0)):
            counts.append(f"{np.sum(said & seen):>4}{np.sum(~said & seen):>4}{np.sum(said & ~seen):>4}")
        missed = middle[seen & ~said_by(one, 0.0)]
        sunset, sunrise = one.station.sunset, one.station.sunrise
        evening = int(np.sum(missed < 0.5 * (sunset + sunrise)))
        lines.append(
            f"   {one.station.name:<7}{counts[0]} {counts[1]}   evening {evening}, morning {missed.size - evening}"
        )
    return lines


def coverage(cases: Sequence[Case]) -> list[str]:
    """Errors of onset and end, and how many observed ones lie before, in and after windows of several widths."""
    lines = []
    for n, name in enumerate(("onset", "end")):
        pairs = [(one.times[n], (one.night(NO_SPREAD).onset, one.night(NO_SPREAD).end)[n]) for one in cases]
        errors = np.array([(w.middle - t) / MINUTE for t, w in pairs if w is not None and math.isfinite(t)])
        lines.append(
            f"{name}: {errors.size} of {len(pairs)} stations have both; median member minus observed: bias {bias(errors):+.0f} min, "
            f"MAE {mae(errors):.0f}, median of sizes {np.median(np.abs(errors)):.0f}, least {errors.min():+.0f}, most {errors.max():+.0f}"
        )
        lines.append("   10-90 % window          observed before it   in it   after it   mean width, h")
        widths = [(f"model error {w:.0f} min", Timing(*([w * MINUTE] * 4))) for w in WIDTHS]
        for words, timing in [*widths, ("as the calendar", TIMING)]:
            lines.append(f"   {words:<22}{_placed(cases, n, timing)}")
    return lines


def _placed(cases: Sequence[Case], which: int, timing: Timing) -> str:
    before = inside = after = 0
    wide = []
    for one in cases:
        night, moment = one.night(timing), one.times[which]
        window = (night.onset, night.end)[which]
        if window is None or not math.isfinite(moment):
            continue
        early, late = outward(window)
        wide.append((late - early) / 3600.0)
        before, inside, after = before + (moment < early), inside + (early <= moment <= late), after + (moment > late)
    return f"{before:>18}{inside:>8}{after:>11}{np.mean(wide):>15.1f}"


def main() -> int:
    """Print the tables."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--stations", type=int, default=0, metavar="N", help="only the first N used stations")
    wanted = parser.parse_args().stations
    folder = observed_folder() / SET
    if not folder.is_dir():
        print(f"the mesonet night is not at {folder}; set DAYLAYER_OBSERVED", file=sys.stderr)
        return 1
    used = [one for one in stations(folder) if usable(one)]
    begun = clock.process_time()
    cases = [case_of(one) for one in used[: wanted or None]]
    cost = clock.process_time() - begun
    print(f"one night, {len(cases)} of {len(used)} used stations, nine members each, {cost:.0f} s of one core")
    print("\n".join([*table(cases), "", *by_station(cases), "", *coverage(cases)]))
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
