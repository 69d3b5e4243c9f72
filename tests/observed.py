"""Where the observed days are: the folder named by DAYLAYER_OBSERVED, or ../shared/observed beside the checkout."""

from __future__ import annotations

import csv
import os
from pathlib import Path

import pytest


def folder() -> Path:
    """Give the folder, or skip the test with a message."""
    told = os.environ.get("DAYLAYER_OBSERVED")
    path = Path(told) if told else Path(__file__).resolve().parents[2] / "shared" / "observed"
    if not path.is_dir():
        pytest.skip(f"observed days are not at {path}; set DAYLAYER_OBSERVED")
    return path


def file(*parts: str) -> Path:
    """Give one file of the folder, or skip the test with a message."""
    path = folder().joinpath(*parts)
    if not path.is_file():
        pytest.skip(f"{path} is absent; set DAYLAYER_OBSERVED")
    return path


def rows(*parts: str) -> list[dict[str, str]]:
    """Read a table of the folder: a dictionary of texts per row, blank where missing."""
    with file(*parts).open(newline="", encoding="utf-8") as lines:
        return list(csv.DictReader(lines))


def number(text: str) -> float:
    """Turn a cell into a number, NaN where blank."""
    return float(text) if text.strip() else float("nan")
