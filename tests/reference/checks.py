"""Published values: small tables beside this file, and the larger collection where it is present.

The collection is the folder named by DAYLAYER_CHECKS, or ../shared/checks beside the checkout. Tables beside this file
begin with comment lines that name the source.
"""

from __future__ import annotations

import csv
import os
from pathlib import Path

import pytest

HERE = Path(__file__).resolve().parent


def table(name: str) -> list[dict[str, float]]:
    """Read a table of numbers beside this file; NaN where a cell is blank."""
    lines = (HERE / name).read_text(encoding="utf-8").splitlines()
    reader = csv.DictReader(line for line in lines if not line.startswith("#"))
    return [{key: float(text) if text else float("nan") for key, text in row.items()} for row in reader]


def folder() -> Path:
    """Give the folder of the collection, or skip the test with a message."""
    told = os.environ.get("DAYLAYER_CHECKS")
    path = Path(told) if told else HERE.parents[2] / "shared" / "checks"
    if not path.is_dir():
        pytest.skip(f"published check values are not at {path}; set DAYLAYER_CHECKS")
    return path


def rows(name: str) -> list[dict[str, str]]:
    """Read a table of the collection: a dictionary of texts per row."""
    with (folder() / name).open(newline="", encoding="utf-8") as lines:
        return list(csv.DictReader(lines))
