"""The page of the day: what is drawn, that it reads in grey, and that no words cover each other."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from datetime import UTC, datetime
from functools import cache
from itertools import combinations, pairwise
from pathlib import Path
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from matplotlib.collections import PolyCollection
from matplotlib.colors import to_hex
from matplotlib.figure import Figure
from matplotlib.patches import Polygon
from matplotlib.text import Text
from sample_document import CASES, sample

from forcing.errors import DaylayerError
from slab import pictures
from slab.pictures_layers import day_layers
from slab.pictures_strips import hour_marks
from slab.pictures_style import FLUXES, LAYERS, canvas_of, lightness, spread
from slab.wording import METRIC

WINDS = ("transport wind", "wind near the ground")
FORBIDDEN = re.compile(r"\b(safe|legal|permitted|ok|approved|go|green light)\b", re.IGNORECASE)

PAGES = [*((case, "metric") for case in CASES), ("plain", "us"), ("no cumulus", "us"), ("southern winter", "us")]


@cache
def page(case: str, units: str = "metric") -> Figure:
    figure = pictures.day(sample(**CASES[case]), units=units)
    canvas_of(figure).draw()
    return figure


def words_on(figure: Figure) -> Iterator[Text]:
    """Every text that is seen, axis labels and ticks included."""
    for text in figure.findobj(Text):
        assert isinstance(text, Text)
        if text.get_visible() and text.get_text().strip():
            yield text


def seen_ticks(figure: Figure) -> set[int]:
    """Tick labels outside the view are not drawn; matplotlib keeps them as objects."""
    hidden: set[int] = set()
    for axes in figure.axes:
        for axis, (low, high) in ((axes.xaxis, axes.get_xlim()), (axes.yaxis, axes.get_ylim())):
            for tick in (*axis.get_major_ticks(), *axis.get_minor_ticks()):
                if not low - 1e-9 <= tick.get_loc() <= high + 1e-9:
                    hidden |= {id(tick.label1), id(tick.label2)}
    return hidden


@pytest.mark.parametrize("classes", [LAYERS, FLUXES])
def test_every_pair_of_classes_is_far_apart_in_lightness(classes: dict[str, str]) -> None:
    for (one, first), (other, second) in combinations(classes.items(), 2):
        assert abs(lightness(first) - lightness(second)) >= 20.0, (one, other)


def test_lightness_of_known_greys() -> None:
    # CIE 15: L* of white is 100, of black 0; sRGB #777777 has relative luminance 0.1845, L* 50.0
    assert lightness("#ffffff") == pytest.approx(100.0, abs=0.01)
    assert lightness("#000000") == 0.0
    assert lightness("#777777") == pytest.approx(50.0, abs=0.1)


def test_the_drawn_fills_are_those_colours() -> None:
    layers = page("plain").axes[0]
    drawn = {to_hex(item.get_facecolor()[0]) for item in layers.collections if isinstance(item, PolyCollection)}
    assert {LAYERS[name] for name in ("free air", "mixed layer", "residual layer", "stable layer")} <= drawn


@pytest.mark.parametrize(("case", "units"), PAGES)
def test_the_smallest_text_is_seven_points_on_the_page(case: str, units: str) -> None:
    figure = page(case, units)
    assert tuple(figure.get_size_inches()) == (11.69, 8.27)
    assert min(text.get_fontsize() for text in words_on(figure)) >= 7.0


@pytest.mark.parametrize(("case", "units"), PAGES)
def test_no_words_cover_each_other_or_leave_the_page(case: str, units: str) -> None:
    figure = page(case, units)
    renderer = canvas_of(figure).get_renderer()  # type: ignore[no-untyped-call]
    hidden = seen_ticks(figure)
    boxes = [(text.get_text(), text.get_window_extent(renderer)) for text in words_on(figure) if id(text) not in hidden]
    width, height = figure.get_size_inches() * figure.dpi
    for words, box in boxes:
        assert min(box.x0, box.y0, width - box.x1, height - box.y1) >= 0, words
    for (one, a), (other, b) in combinations(boxes, 2):
        across, up = min(a.x1, b.x1) - max(a.x0, b.x0), min(a.y1, b.y1) - max(a.y0, b.y0)
        # lines of one paragraph may touch by the descent of their letters, 3 of 15 pixels
        assert not (across > 1.0 and up > 3.0), (one, other)


@pytest.mark.parametrize("case", list(CASES))
def test_layers_are_named_with_words_and_nothing_speaks_of_permission(case: str) -> None:
    figure = page(case)
    said = " ".join(text.get_text() for text in words_on(figure))
    for name in ("mixed layer", "residual layer", "stable layer", "free air", "local hour", "UTC hour", "balloon"):
        assert name in said
    for code in ("G1", "G2", "G3", "G4", "G5", "A1"):
        assert re.search(rf"\b{code}\b", said)
    assert FORBIDDEN.search(said) is None


def test_the_mixed_layer_top_is_drawn_at_its_values() -> None:
    document = sample()
    line = next(line for line in page("plain").axes[0].lines if line.get_label() == "mixed layer top")
    hours, heights = np.asarray(line.get_xdata(), float), np.asarray(line.get_ydata(), float)
    for hour, height, regime, depth in zip(
        hours, heights, document["series"]["regime"], document["series"]["mixing_depth_m"], strict=True
    ):
        assert math.isnan(height) if regime == "stable" else height == depth
        assert hour == round(hour)


def test_us_heights_are_feet() -> None:
    metric, feet = page("plain").axes[0], page("plain", "us").axes[0]
    assert feet.get_ylim()[1] == pytest.approx(metric.get_ylim()[1] / 0.3048)
    assert feet.get_ylabel() == "height above ground, ft"


def test_lines_differ_in_dash_as_well_as_in_colour() -> None:
    figure = page("plain")
    temperature = {line.get_label(): line for line in figure.axes[1].lines}
    assert temperature["temperature"].is_dashed() != temperature["dew point"].is_dashed()
    theta = figure.axes[3].lines
    assert len(theta) == 2
    assert theta[0].is_dashed() != theta[1].is_dashed()


def test_profiles_share_the_height_axis_of_the_layers() -> None:
    layers, _, _, theta, water, _ = page("plain").axes
    assert theta.get_ylim() == layers.get_ylim() == water.get_ylim()
    assert theta.get_position().y0 == layers.get_position().y0


def test_clouds_are_drawn_only_where_there_are_some() -> None:
    clouds = [patch for patch in page("plain").axes[0].patches if isinstance(patch, Polygon)]
    document = sample()
    assert len(clouds) == sum(1 for part in document["series"]["cumulus_fraction"] if part > 0)
    assert not page("no cumulus").axes[0].patches


def test_wind_ventilation_and_gusts_stand_on_the_page() -> None:
    wind = page("plain").axes[5]
    transport, near = (next(line for line in wind.lines if line.get_label() == name) for name in WINDS)
    document = sample()
    assert list(np.asarray(transport.get_ydata(), float)) == document["series"]["transport_wind_m_s"]
    assert near.is_dashed() != transport.is_dashed()
    words = {text.get_text() for text in words_on(page("plain"))}
    assert "wind, m/s, gusts 7.5 to 12.0" in words
    at_noon = document["series"]["ventilation_m2_s"][7]
    assert METRIC.ventilation_number(at_noon) in words


def test_profiles_are_named_by_their_hours() -> None:
    words = {text.get_text() for text in words_on(page("plain"))}
    assert {"profile 05:05", "profile 15:00"} <= words


def test_small_parts_of_cloud_are_not_drawn() -> None:
    document = sample()
    document["series"]["cumulus_fraction"] = [0.009, 0.01] + [0.0] * 35
    assert list(np.flatnonzero(~np.isnan(day_layers(document).cloud_base))) == [1]


def test_missing_hours_stay_empty_and_are_said_to_be() -> None:
    layers = day_layers(sample(missing=True))
    assert list(np.flatnonzero(layers.missing)) == [5, 6, 7]
    assert np.isnan(layers.mixed[5:8]).all()
    assert any(text.get_text() == "no value" for text in words_on(page("missing values")))
    assert not any(text.get_text() == "no value" for text in words_on(page("plain")))


def test_the_balloon_stands_at_its_own_hour() -> None:
    def hour(case: str) -> float:
        line = next(line for line in page(case).axes[0].lines if line.get_label() == "balloon")
        return float(np.asarray(line.get_xdata())[0])

    assert hour("plain") == pytest.approx(0.1)
    assert hour("late balloon") == pytest.approx(7.0)
    assert hour("old balloon") == 0.0  # nine hours before: at the edge, and the words say so
    assert any("9 h before" in text.get_text() for text in words_on(page("old balloon")))


def test_the_residual_layer_takes_over_without_a_gap() -> None:
    layers = day_layers(sample())
    last = int(np.flatnonzero(layers.mixed[:20] > 0)[-1])
    assert layers.residual[last] == layers.mixed[last]
    assert layers.residual[last + 1] > 0.9 * layers.mixed[last]


def test_hours_are_whole_on_a_clock_off_by_half_an_hour() -> None:
    marks = list(hour_marks(datetime(2026, 7, 1, 1, 30, tzinfo=UTC), 12.0, ZoneInfo("Asia/Kolkata"), 3))
    assert [there.hour for _, there in marks] == [9, 12, 15, 18]
    assert marks[0][0] == pytest.approx(2.0)


def test_a_single_row_without_optional_parts_is_still_a_page() -> None:
    document = sample(hours=12)
    document["series"] = {name: values[:1] for name, values in document["series"].items()}
    document |= {"profiles": {}, "profile": {}, "sun": {}, "assumptions": [], "cautions": []}
    document["summary"] = dict.fromkeys(document["summary"])
    canvas_of(pictures.day(document)).draw()


def test_a_crowded_page_says_how_much_it_leaves_out() -> None:
    document = sample()
    document["assumptions"] = [
        dict(item, name=f"{item['name']} {n}") for n in range(8) for item in document["assumptions"]
    ]
    said = [text.get_text() for text in words_on(pictures.day(document))]
    assert any(re.search(r"and \d+ more lines in the text output", words) for words in said)


def test_spread_keeps_order_and_gap() -> None:
    placed = spread([10.0, 11.0, 12.0, 90.0], 5.0, 0.0, 100.0)
    assert placed == sorted(placed)
    assert min(b - a for a, b in pairwise(placed)) >= 5.0
    assert spread([99.0, 99.5], 5.0, 0.0, 100.0) == [95.0, 100.0]


@pytest.mark.parametrize(("ending", "mark"), [("png", b"\x89PNG"), ("svg", b"<?xml"), ("pdf", b"%PDF")])
def test_saving_by_ending(ending: str, mark: bytes, tmp_path: Path) -> None:
    path = tmp_path / f"day.{ending}"
    pictures.save(page("plain"), path)
    assert path.read_bytes().startswith(mark)
    assert [item.name for item in tmp_path.iterdir()] == [path.name]


def test_another_ending_is_refused_and_nothing_is_written(tmp_path: Path) -> None:
    with pytest.raises(DaylayerError, match=r"\.png, \.svg or \.pdf"):
        pictures.save(page("plain"), tmp_path / "day.gif")
    assert list(tmp_path.iterdir()) == []
