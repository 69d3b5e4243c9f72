"""Accuracy and cost of the night's stepping on the shared afternoon soundings (all ten).

Run ``python tests/bench/night_convergence.py`` (compiled, about two minutes of compilation the first time) or with
``--plain`` for the cost of plain Python alone. Errors are the largest over all levels at hours 4 to 12 [K]; the same
constant forcing for all schemes.
"""

from __future__ import annotations

import argparse
import os
import sys
import time
from pathlib import Path

if "--plain" not in sys.argv:
    os.environ.setdefault("DAYLAYER_COMPILED", "1")
ROOT = Path(__file__).resolve().parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "tests"), str(Path(__file__).resolve().parent)]

import numpy as np
from night_cases import GRASS, HOUR, Case, plains_nights
from night_schemes import chebyshev_night, frozen_night, rosenbrock_night

from slab.night import NightOptions, Setup, drive_ground, outside_air, prepare
from slab.night_grid import numbers
from slab.night_step import copy_state
from slab.night_terms import make_work

HOURS = 12


class Night:
    """One night ready to be run by any scheme."""

    def __init__(self, case: Case, *, levels: int = 48, first_cell: float = 2.0, closure: str = "blend",
                 tolerance: float = 1.0) -> None:  # fmt: skip
        options = NightOptions(levels=levels, first_cell=first_cell, closure=closure, tolerance=tolerance)
        self.setup: Setup = prepare(case.start, GRASS, options)
        self.outside = outside_air(case.forcing, self.setup, 0.0, case.start.coriolis, None)
        self.drive = drive_ground(self.setup, GRASS, case.forcing, 0.0, 300.0, float(case.forcing.longwave_down[0]))
        self.start = make_work(levels, 6).trial
        copy_state(self.setup.state, self.start)
        self.totals = numbers([0.0] * 8)

    def run(self, scheme: str, step: float = 300.0) -> tuple[np.ndarray, float]:
        """Potential temperature at hours 4 to 12 (9, n) and processor time [ms]."""
        setup = self.setup
        work, state = setup.work, setup.state
        copy_state(self.start, state)
        for i in range(8):
            self.totals[i] = 0.0
        common = (setup.method, setup.grid, setup.foot, setup.soil, self.drive, self.outside, state, work)
        rows, spent, trial = [], 0.0, 1.0
        for hour in range(1, HOURS + 1):
            begun = time.process_time()
            if scheme == "rosenbrock":
                trial = rosenbrock_night(*common, self.totals, HOUR, step, trial)
            elif scheme == "frozen":
                frozen_night(*common, HOUR, step)
            else:
                chebyshev_night(*common, work.trial, make_work(len(state.theta), 6).trial, HOUR, step)
            spent += time.process_time() - begun
            if hour > 3:
                rows.append(np.array(state.theta))
        return np.array(rows), 1e3 * spent


def compare(cases: list[Case], closure: str) -> None:
    """Print the table of one closure."""
    references = [Night(case, closure=closure, tolerance=1e-3).run("rosenbrock")[0] for case in cases]
    trials = [("rosenbrock", 300.0), ("chebyshev", 10.0)]
    trials += [("frozen", step) for step in (300.0, 60.0, 20.0, 10.0, 5.0, 2.0, 1.0)]
    print(
        f"\nclosure {closure}: scheme, step [s], median and worst error [K], median processor time [ms a night], steps"
    )
    for scheme, step in trials:
        nights = [Night(case, closure=closure) for case in cases]
        nights[0].run(scheme, step)
        done = [night.run(scheme, step) for night in nights]
        errors = [float(np.abs(a - b).max()) for (a, _), b in zip(done, references, strict=True)]
        cost = float(np.median([ms for _, ms in done]))
        count = (
            float(np.median([n.totals[6] + n.totals[7] for n in nights])) if scheme == "rosenbrock" else 43200 / step
        )
        print(f"  {scheme:<11} {step:5.0f}  {np.median(errors):6.3f} {max(errors):6.3f}  {cost:8.2f}  {count:7.0f}")


def compare_levels(cases: list[Case], closure: str) -> None:
    """Print the difference of fewer levels to 160 at the coarse cells' centres up to 100 m."""
    fine = [Night(case, closure=closure, levels=160, first_cell=0.6) for case in cases]
    results = [night.run("rosenbrock")[0] for night in fine]
    print(f"\nclosure {closure}: levels, difference to 160 levels up to 100 m, median and worst [K]")
    for levels in (24, 32, 48, 64):
        worst = []
        for case, night, result in zip(cases, fine, results, strict=True):
            coarse = Night(case, closure=closure, levels=levels)
            mine = coarse.run("rosenbrock")[0]
            z = np.array(coarse.setup.grid.height)
            other = np.array([np.interp(z, np.array(night.setup.grid.height), row) for row in result])
            worst.append(float(np.abs(other - mine)[:, z < 100.0].max()))
        print(f"  {levels:3d}  {np.median(worst):6.3f} {max(worst):6.3f}")


def main() -> None:
    """Run the comparison."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--plain", action="store_true", help="plain Python: cost of the product's stepping only")
    arguments = parser.parse_args()
    cases = plains_nights()
    if arguments.plain:
        for closure in ("blend", "short"):
            times = [
                min(night.run("rosenbrock")[1] for _ in range(2))
                for night in (Night(c, closure=closure) for c in cases)
            ]
            print(f"plain Python, closure {closure}: median {np.median(times):.0f} ms a night of 12 h")
        return
    for closure in ("blend", "short"):
        compare(cases, closure)
        compare_levels(cases, closure)


if __name__ == "__main__":
    main()
