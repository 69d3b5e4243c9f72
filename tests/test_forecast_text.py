"""The forecast in words: order, units, missing values, cautions, and words it never uses."""

from __future__ import annotations

import re
from typing import Any

import pytest
from sample_document import CASES, sample

from forcing.errors import DaylayerError
from slab.cautions import complete, forecast_cautions
from slab.products.forecast_table import blocks
from slab.products.forecast_text import forecast_text
from slab.wording import METRIC, US, Clock, number, two_figures

FORBIDDEN = re.compile(r"\b(safe|legal|permitted|ok|approved|go|green light)\b", re.IGNORECASE)


@pytest.mark.parametrize("units", ["metric", "us"])
@pytest.mark.parametrize("case", list(CASES))
def test_no_word_of_permission_and_no_bulletin_capitals(case: str, units: str) -> None:
    text = forecast_text(sample(**CASES[case]), units)
    assert FORBIDDEN.search(text) is None
    shouted = [word for word in re.findall(r"\b[A-Z]{3,}\b", text) if word not in {"UTC", "GMT"}]  # names of clocks
    assert shouted == []
    assert "None" not in text
    assert "nan" not in text


def test_assumptions_stand_above_the_result_with_what_a_step_changes() -> None:
    text = forecast_text(sample())
    assert text.index("soil moisture: 0.40 (middle of the range)") < text.index("The mixed layer reaches")
    lines = text.splitlines()
    n = next(n for n, line in enumerate(lines) if line.strip().startswith("soil moisture"))
    assert lines[n + 1].strip() == "+0.20: -210 m, -1.3 K"
    assert "What would change the depth most: soil moisture (+0.20: -210 m, -1.3 K)." in " ".join(text.split())


def test_a_second_day_is_told_after_the_first() -> None:
    assert "by the slab top. Later 1850 m at 17:00 on Wed 15 Jul local (23:00 UTC)." in " ".join(
        forecast_text(sample()).split()
    )
    assert "Later" not in forecast_text(sample(hours=12))


def test_the_day_is_told_in_order_before_the_table() -> None:
    text = forecast_text(sample())
    parts = [
        "The mixed layer reaches 1850 m",
        "The highest temperature",
        "The morning inversion",
        "Cumulus from",
        "transport wind is",
        "hour by hour",
        "depth is by",
    ]
    places = [text.index(part) for part in parts]
    assert places == sorted(places)
    assert "by the slab top" in text
    assert "1.42 MJ/m²" in text


def test_times_are_local_and_utc_and_events_are_not_told_to_the_minute() -> None:
    document = sample()
    text = forecast_text(document)
    assert "18:00 local (00:00 UTC)" in text
    document["summary"]["inversion_gone_time"] = "2026-07-14T14:37:00Z"
    assert "gone about 08:30 local (14:30 UTC)" in forecast_text(document)
    document["summary"]["inversion_gone_window"] = ["2026-07-14T14:00:00Z", "2026-07-14T15:10:00Z"]
    assert "gone between 08:00 local (14:00 UTC) and 09:00 local (15:00 UTC)" in " ".join(
        forecast_text(document).split()
    )


def test_a_time_on_another_day_carries_its_date() -> None:
    clock = Clock.of(sample())
    assert clock.say("2026-07-14T12:00:00Z") == "06:00 local (12:00 UTC)"
    assert clock.say("2026-07-15T12:00:00Z") == "06:00 on Wed 15 Jul local (12:00 UTC)"
    assert clock.say(None) == "not known"


def test_a_missing_summary_is_said_to_be_not_known() -> None:
    document = sample()
    document["summary"] = dict.fromkeys(document["summary"])
    document["series"]["cumulus_fraction"] = [None] * len(document["series"]["time"])
    text = forecast_text(document)
    for words in (
        "depth of the mixed layer is not known",
        "highest temperature at 2 m is not known",
        "Cumulus is not known",
        "gusts are not known",
        "inversion breaks is not known",
    ):
        assert words in text
    assert "no cumulus" not in text.lower()


def test_no_cumulus_only_where_the_run_computed_it() -> None:
    assert "No cumulus (convective temperature 26.4 °C)." in forecast_text(sample(cumulus=False))


def test_an_inversion_that_stays_or_never_was_is_told_apart() -> None:
    document = sample()
    document["summary"]["inversion_gone_time"] = None
    assert "not seen to break in these hours; it takes 1.42 MJ/m², 6.90 MJ/m² expected" in forecast_text(document)
    document["summary"]["inversion_heat_needed_MJ_m2"] = 0.0
    assert "no surface inversion to break" in forecast_text(document)


def table(text: str) -> list[str]:
    lines = text.splitlines()
    first = next(n for n, line in enumerate(lines) if line.lstrip().startswith("local  "))
    return lines[first : first + len(sample()["series"]["time"]) + 4]


@pytest.mark.parametrize("units", ["metric", "us"])
def test_the_table_is_aligned_and_has_both_clocks(units: str) -> None:
    lines = table(forecast_text(sample(), units))
    rows = [line for line in lines[2:] if re.match(r"\s*\d\d:\d\d  \d\d:\d\d  ", line)]
    assert len(rows) == 37
    assert rows[0].split()[:3] == ["05:00", "11:00", "stable"]
    assert len({len(row) for row in rows}) == 1
    assert len({len(row.split()) for row in rows}) == 1
    assert lines[0] == lines[0].lower()


def test_missing_values_are_dashes_in_the_table() -> None:
    lines = table(forecast_text(sample(missing=True)))
    row = next(line for line in lines if line.split()[:2] == ["10:00", "16:00"])
    assert row.split()[3:5] == ["-", "-"]


def test_us_units() -> None:
    text = forecast_text(sample(limits=True), "us")
    # 1848.8 m is 6066 ft; 450 m higher is 7542 ft; 28.4 degrees C is 83.1 degrees F
    assert "reaches 6100 ft above ground (7500 ft above sea level)" in " ".join(text.split())
    assert "83 °F" in text
    assert "today, 05:00 to 19:00 local" in text
    assert "tonight, 20:00 to 04:00 local" in text
    assert "tomorrow, 05:00 to 17:00 local" in text
    assert "above ground and above sea level" in " ".join(text.split())
    assert not re.search(r"\d m above ground", text)


def test_blocks_hold_ranges_of_their_own_hours() -> None:
    lines = blocks(sample())
    night = lines[lines.index("tonight, 20:00 to 04:00 local") :]
    assert night[1] == "  mixing depth      300 ft above ground, 1800 ft above sea level"
    day = lines[:7]
    assert "highest temp      80 to 85 °F" in day[2]
    assert re.search(r"20 ft wind +\d+ to \d+ mph", "\n".join(day))


def test_a_polar_day_without_sun_times_still_has_blocks() -> None:
    document = sample()
    document["sun"] = {"sunrise": None, "sunset": None, "solar_noon": None}
    assert [line for line in blocks(document) if not line.startswith(" ")][1] == "today, 06:00 to 17:00 local"


def test_conversions() -> None:
    # 1 m2/s = 6.377 kt ft, derived from the definitions of knot and foot
    assert US.ventilation_value(1.0) == pytest.approx(6.3775, abs=2e-4)
    assert US.speed(10.0) == "19 kt"
    # neutral log profile over 0.03 m: ln(6.096/0.03)/ln(10/0.03) = 0.915
    assert US.surface_wind_value(10.0) == pytest.approx(0.9148 * 22.369, abs=0.01)
    assert METRIC.height(1234.0) == "1250 m"
    assert METRIC.height(234.0) == "230 m"
    assert METRIC.temperature(-0.04) == "0.0 °C"
    assert two_figures(18432.0) == "18000"
    assert number(0.25, 0.1) == "0.3"


def test_unknown_units_are_refused_with_a_remedy() -> None:
    with pytest.raises(DaylayerError, match="metric or us"):
        forecast_text(sample(), "imperial")


def test_cautions_are_complete_and_burning_ones_come_with_a_ventilation_class() -> None:
    plain = [item["code"] for item in forecast_cautions(sample())]
    assert plain == ["G1", "G2", "G3", "G4", "G5", "A1"]
    classed = [item["code"] for item in forecast_cautions(sample(limits=True))]
    assert classed == ["G1", "G2", "G3", "G4", "G5", "B1", "B2", "B3", "A1"]
    text = " ".join(forecast_text(sample(limits=True)).split())
    assert "B3 Ventilation table: invented county, dated 2026-01-01." in text
    assert "class 'middle'" in text


def test_a_document_keeps_its_own_caution_and_gets_those_it_lacks() -> None:
    document = sample()
    codes = {item["code"]: item["text"] for item in complete(document)}
    assert codes["G2"] == document["cautions"][0]["text"]
    assert "14 km away, 30 m lower than the site, launched at 11:06 UTC (05:06 local)" in codes["G1"]
    assert "1600 m to 1950 m" in codes["G3"]
    assert "levels removed 2" in codes["G5"]


def test_doubts_and_repairs_are_told() -> None:
    text = forecast_text(sample(missing=True))
    assert "wind-unknown: the profile carries no wind" in text
    assert "levels removed: 2 (pressure not falling)" in text
    assert "distance not known" in text


def test_the_document_is_not_changed() -> None:
    document: dict[str, Any] = sample()
    before = repr(document)
    forecast_text(document, "us")
    assert repr(document) == before
