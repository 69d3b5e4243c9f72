"""What the benchmarks of observed nights share: where the data are, the runs, errors and baselines."""

from __future__ import annotations

import csv
import math
import os
from collections.abc import Sequence
from datetime import datetime
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def observed_folder() -> Path:
    """Folder of observed days: DAYLAYER_OBSERVED, or ../shared/observed beside the checkout."""
    told = os.environ.get("DAYLAYER_OBSERVED")
    return Path(told) if told else Path(__file__).resolve().parents[3] / "shared" / "observed"


def rows(path: Path) -> list[dict[str, str]]:
    """A table as a dictionary of texts per row."""
    with path.open(newline="", encoding="utf-8") as lines:
        return list(csv.DictReader(lines))


def number(text: str) -> float:
    """A cell as a number, NaN where blank."""
    return float(text) if text.strip() else math.nan


def instant(text: str) -> datetime:
    """An aware time of the tables."""
    return datetime.fromisoformat(text)


def mae(errors: Array) -> float:
    """Mean absolute error, missing ones left out."""
    return float(np.nanmean(np.abs(errors)))


def bias(errors: Array) -> float:
    """Mean error, missing ones left out."""
    return float(np.nanmean(errors))


def ranks(values: Array) -> Array:
    """Ranks from 1, equal values share their mean rank."""
    order = np.argsort(values, kind="stable")
    out = np.empty(values.size)
    out[order] = np.arange(1, values.size + 1)
    for value in np.unique(values):
        same = values == value
        out[same] = out[same].mean()
    return out


def rank_correlation(a: Array, b: Array) -> float:
    """Spearman's rank correlation, NaN where one side is constant."""
    x, y = ranks(a) - np.mean(ranks(a)), ranks(b) - np.mean(ranks(b))
    size = float(np.sqrt(np.sum(x * x) * np.sum(y * y)))
    return float(np.sum(x * y)) / size if size > 0.0 else math.nan


def mean_of_others(values: Array) -> Array:
    """Leave-one-out mean for every value."""
    return np.asarray((values.sum() - values) / (values.size - 1))


def median_of_others(values: Array) -> Array:
    """Leave-one-out median for every value."""
    return np.array([np.median(np.delete(values, i)) for i in range(values.size)])


def score_line(name: str, errors: Array, beside: Sequence[tuple[str, float]]) -> str:
    """One line of a table: MAE and bias, and other numbers by name."""
    rest = "".join(f"   {label} {value:.2f}" for label, value in beside)
    return f"{name:<46} MAE {mae(errors):7.2f}   bias {bias(errors):+7.2f}{rest}"
