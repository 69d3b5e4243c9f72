"""What the model's inversion times may be off by: measured once, used by every answer that names such a time."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Timing:
    """What the model itself may be off [s]: how far the 10 and 90 % ends of onset and end are moved out, in quadrature with
    the spread of the members."""

    onset_early: float
    onset_late: float
    end_early: float
    end_late: float


TIMING = Timing(onset_early=5400.0, onset_late=5400.0, end_early=1800.0, end_late=5400.0)
"""From 15 stations of one mesonet night (``python tests/bench/spray_mesonet.py``): with 90 min the 10-90 % window holds 12 of 15
observed onsets, with 60 min 10, with none 5. The computed end lay half an hour early in the mean, up to two hours, and never late
by more than 15 min, so that its late side, which is the dangerous one, gets 90 min (14 of 15; 60 min stands at an edge of half
hours and holds 11) and its early side 30. The widths are chosen on the night they are counted on."""
