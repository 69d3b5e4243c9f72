"""Whole-process time of the commands, as ratios to `python -c "import numpy"` in one run.

Run with the Python that has daylayer installed: `python tests/bench/startup.py [repeats]`. Commands take turns, so that
a machine whose speed drifts does not favour one; each ratio is that of the medians. The first call of each is not counted.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

BASELINE = [sys.executable, "-c", "import numpy"]
DAYLAYER = [sys.executable, "-c", "from slab.commands.main import main; main()"]
CASES = {
    "import numpy (baseline)": (BASELINE, 1.0),
    "daylayer --help": ([*DAYLAYER, "--help"], 1.5),
    "daylayer forecast --hours 12": ([*DAYLAYER, "forecast", "--accept-doubt", "--hours", "12"], 4.0),
    "daylayer forecast --hours 48": ([*DAYLAYER, "forecast", "--accept-doubt", "--hours", "48"], 12.0),
}


def once(command: list[str]) -> tuple[float, float]:
    """Wall and processor seconds of one whole process."""
    before = os.times()
    start = time.perf_counter()
    with tempfile.TemporaryDirectory() as folder:
        subprocess.run(command, check=True, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, cwd=folder)
    wall = time.perf_counter() - start
    after = os.times()
    used = after.children_user + after.children_system - before.children_user - before.children_system
    return wall, used


def main() -> None:
    """Print medians and ratios."""
    repeats = int(sys.argv[1]) if len(sys.argv) > 1 else 7
    found: dict[str, list[tuple[float, float]]] = {name: [] for name in CASES}
    for command, _ in CASES.values():
        once(command)
    for _ in range(repeats):
        for name, (command, _) in CASES.items():
            found[name].append(once(command))
    wall, used = (statistics.median(x[i] for x in found["import numpy (baseline)"]) for i in (0, 1))
    print(f"{'command':32} {'wall s':>8} {'ratio':>6} {'processor s':>12} {'ratio':>6} {'aim':>6}")
    for name, (_, aim) in CASES.items():
        w, u = (statistics.median(x[i] for x in found[name]) for i in (0, 1))
        print(f"{name:32} {w:8.3f} {w / wall:6.2f} {u:12.3f} {u / used:6.2f} {aim:6.1f}")
    print(f"python {sys.version.split()[0]}, {repeats} runs, {Path(sys.executable).name}")


if __name__ == "__main__":
    main()
