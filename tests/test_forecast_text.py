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
from slab.wording import METRIC, US, Clock, cloud_percent, number, two_figures

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


def flat(text: str) -> str:
    return " ".join(text.split())


def test_the_headline_then_the_assumptions_then_the_day() -> None:
    text = forecast_text(sample())
    headline, assumed, day = (
        text.index(words) for words in ("Mixed layer to 1850 m", "assumed, most", "The mixed layer")
    )
    assert headline < assumed < day
    assert len(text[:headline].splitlines()) <= 8


def test_assumptions_are_sorted_by_what_a_step_changes_and_small_ones_share_a_line() -> None:
    document = sample()
    document["assumptions"].append(
        {"name": "ozone column", "value": "0.3 cm", "source": "assumed", "why": "no ozone was given; mid-latitude mean",
         "step": "0.4 cm", "effect_on_depth_m": -6.0, "effect_on_max_temperature_K": -0.03}
    )  # fmt: skip
    text = forecast_text(document)
    assert "  soil moisture: 0.40 (middle of the range); +0.20: -210 m, -1.3 K\n" in text
    names = (
        "soil moisture:",
        "divergence:",
        "deep soil",
        "aerosol optical",
        "small effect, under 10 m",
        "later profile:",
    )
    places = [text.index(name) for name in names]
    assert places == sorted(places)
    assert "small effect, under 10 m and 0.1 K: ozone column 0.3 cm (0.4 cm)" in text
    assert "given: cover short grass; cloud fraction 0.10" in text


def test_standing_remarks_are_no_warnings_in_the_text() -> None:
    document = sample()
    document["warnings"] += ["after 24 h the air aloft is a day old", "long-wave from the profile's own emission"]
    lines = forecast_text(document).splitlines()
    n = lines.index("warnings")
    assert lines[n + 1 : n + 3] == ["  after 24 h the air aloft is a day old", ""]


def test_the_age_of_the_release_is_told_from_the_start_of_the_run() -> None:
    document = sample()
    assert "0.1 h after the start of the run" in flat(forecast_text(document))
    document["profile"] |= {"age_at_start_hours": 0.0, "age_hours": 3366.0}
    text = forecast_text(document)
    assert "released at the start of the run" in flat(text)
    assert "3366" not in text
    document["doubts"] = [{"code": "profile_age", "text": "the profile is 3366 h old, over 12 h"}]
    text = forecast_text(document)
    assert "3366 h old now" in flat(text)
    assert text.index("doubt, profile_age: the profile") < text.index("assumed, most")


def deeper(document: dict[str, Any], factor: float, *, until: int = 37) -> dict[str, Any]:
    """The same document with another depth on its second day, cut after some rows."""
    series = document["series"]
    series["mixing_depth_m"] = [
        depth * factor if n > 20 and regime != "stable" else depth
        for n, (depth, regime) in enumerate(zip(series["mixing_depth_m"], series["regime"], strict=True))
    ]
    for name, values in series.items():
        series[name] = values[:until]
    return document


def test_a_later_day_is_told_where_it_differs_and_the_runs_end_is_named() -> None:
    assert "Later" not in forecast_text(sample())
    assert "Later" not in forecast_text(deeper(sample(), 0.95))
    told = flat(forecast_text(deeper(sample(), 1.2)))
    assert "by the slab top. Later 2200 m at 17:00 on Wed 15 Jul local (23:00 UTC) (run ends)." in told
    longer = flat(forecast_text(deeper(sample(hours=44), 1.2, until=45)))
    assert "Later 2200 m" in longer
    assert "(run ends)" not in longer
    assert "Later 15" in flat(forecast_text(deeper(sample(), 0.85)))


def test_the_lowest_temperature_is_told_with_its_day() -> None:
    document = sample()
    document["summary"]["temperature_2m_min_time"] = "2026-07-15T11:00:00Z"
    text = flat(forecast_text(document))
    assert "lowest 11.0 °C at 05:00 tomorrow morning, Wed 15 Jul; " in text
    assert "at 05:00 local tomorrow morning, Wed 15 Jul (11:00 UTC)" in text
    clock = Clock.of(document)
    assert clock.day_word("2026-07-15T02:00:00Z") == "tonight"
    assert clock.day_word("2026-07-14T21:00:00Z") == "this afternoon"


def test_a_burst_of_cumulus_is_told_from_a_day_of_them() -> None:
    document = sample()
    fractions = [0.0] * 37
    fractions[5:9] = [0.02, 0.017, 0.011, 0.006]
    document["series"]["cumulus_fraction"] = fractions
    document["series"]["condensation_level_m"][5:8] = [1600.0, 1700.0, 1900.0]
    document["summary"] |= {"cumulus_onset_time": document["series"]["time"][5], "cumulus_base_m": 1600.0}
    text = flat(forecast_text(document))
    assert "A few cumulus around 10:00 local (16:00 UTC), then almost none, base 1600 to 1900 m above ground." in text
    assert "a few cumulus around 10:00, then almost none, base 1600 to 1900 m." in text
    fractions[8] = 0.15
    assert "Cumulus from about 10:00 local" in flat(forecast_text(document))


def test_cumulus_under_one_in_a_hundred_is_printed_as_none() -> None:
    assert [cloud_percent(part) for part in (0.0, 0.006, 0.0099, 0.01, 0.024)] == ["0", "0", "0", "1", "2"]


def test_gusts_name_their_hours_and_whose_winds_they_are() -> None:
    document = sample()
    assert "gusts mixed down at any time of the day are 7.5 to 12.0 m/s" in flat(forecast_text(document))
    document["assumptions"][-1]["key"] = "profile.later"
    assert "by the winds aloft held from the release" in flat(forecast_text(document))


def test_the_inverted_v_is_told_only_with_its_note() -> None:
    document = sample(cumulus=False)
    assert "(inverted-V): dry outflow" in flat(forecast_text(document))
    document["summary"]["dry_outflow_note"] = None
    assert "inverted-V" not in forecast_text(document)


def test_the_evening_collapse_is_explained_and_the_method_stands_in_each_row() -> None:
    document = sample()
    text = forecast_text(document)
    assert "From then on the depth is that of shear-driven mixing; the day's layer stays above it" in flat(text)
    document["series"]["regime"][20] = "very stable"
    text = forecast_text(document)
    assert "\nvery stable: stable, and the wind can carry less than half of it\n" in text
    assert "\nintermittent:" not in text
    rows = [line.split() for line in table(text) if re.match(r"\d\d:\d\d  \d\d:\d\d  ", line)]
    assert {row[4] for row in rows if row[2] == "mixed"} == {"slab"}
    assert {row[4] for row in rows if row[2] == "stable"} == {"stress"}


def test_the_hour_of_the_lowest_humidity_is_told_where_it_is_known() -> None:
    document = sample()
    document["summary"]["relative_humidity_2m_min_time"] = "2026-07-14T21:30:00Z"
    assert "% at 15:30 local (21:30 UTC)." in flat(forecast_text(document))


def test_headline_table_and_sentences_round_alike() -> None:
    document = sample()
    document["series"]["mixing_depth_m"][10] = 1848.8
    row = next(line for line in table(forecast_text(document)) if line.startswith("15:00"))
    assert row.split()[3] == METRIC.height_number(1848.8) == "1850"


def test_metric_words_are_restyled() -> None:
    words = "9.2 m/s from 224 degrees at 1000 to 2000 m, 18.3 and 26.3 C, 2.1 K a day, 150 km, 300.5 K, 1.5 m, 2 m2/s, 5 W m-2"
    assert METRIC.restyle(words) == words
    assert US.restyle(words) == (
        "18 kt from 224 degrees at 3300 to 6600 ft, 65 and 79 °F, 3.8 °F a day, 93 mi, 300.5 K, 4.9 ft, 2 m2/s, 5 W m-2"
    )


@pytest.mark.parametrize("units", ["metric", "us"])
@pytest.mark.parametrize("case", list(CASES))
def test_no_line_is_longer_than_a_page(case: str, units: str) -> None:
    assert max(len(line) for line in forecast_text(sample(**CASES[case]), units).splitlines()) <= 110


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
    text = flat(forecast_text(sample(cumulus=False)))
    assert (
        "No cumulus. The convective temperature, the surface temperature at which the morning profile's own air" in text
    )
    assert "is 26.4 °C." in text


def test_an_inversion_that_stays_or_never_was_is_told_apart() -> None:
    document = sample()
    document["summary"]["inversion_gone_time"] = None
    assert "not seen to break in these hours; it takes 1.42 MJ/m², 6.90 MJ/m² expected" in forecast_text(document)
    document["summary"]["inversion_heat_needed_MJ_m2"] = 0.0
    assert "no surface inversion to break" in forecast_text(document)


def table(text: str) -> list[str]:
    lines = text.splitlines()
    first = next(n for n, line in enumerate(lines) if line.startswith("local  "))
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
    assert "today, 05:00 to 19:24 local" in text
    assert "tonight, 19:24 to 04:54 local" in text
    assert "tomorrow, 04:54 to 17:00 local, where the run ends" in text
    assert "14 km" not in text
    assert "Other definitions give 5200 ft to 6400 ft" in " ".join(text.split())
    assert "above ground and above sea level" in " ".join(text.split())
    assert not re.search(r"\d m above ground", text)


def test_blocks_hold_ranges_of_their_own_hours() -> None:
    lines = blocks(sample())
    night = lines[lines.index("tonight, 19:24 to 04:54 local") :]
    assert night[1] == "  mixing depth      300 ft above ground, 1800 ft above sea level"
    day = lines[:8]
    assert day[1] == "  mixing depth      6100 ft above ground, 7500 ft above sea level, at 18:00"
    assert re.fullmatch(r"  mixing depth      over 3000 ft above ground from 1\d:00 to 18:00", day[2])
    assert "highest temp      80 to 85 °F" in day[3]
    assert re.search(r"20 ft wind +\d+ to \d+ mph", "\n".join(day))


def test_a_polar_day_without_sun_times_still_has_blocks() -> None:
    document = sample()
    document["sun"] = {"sunrise": None, "sunset": None, "solar_noon": None}
    names = [line for line in blocks(document) if not line.startswith(" ")]
    assert names[:2] == ["before sunrise, 05:00 to 06:00 local", "today, 06:00 to 18:00 local"]


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


def test_signs_looked_for_are_named_and_snow_cover_is_no_reason_on_snow() -> None:
    document = sample() | {"cautions": []}
    assert (
        "deep fog or snow cover. Of their signs the run looks only for saturated air" in complete(document)[1]["text"]
    )
    document["assumptions"].append({"name": "land cover", "value": "old snow", "source": "given"})
    assert "snow" not in complete(document)[1]["text"]
    document["doubts"] = [{"code": "saturated_layer", "text": "the layer is saturated"}]
    assert "and found it, see the doubts." in complete(document)[1]["text"]


def test_a_caution_kept_in_metric_words_is_said_in_the_asked_units() -> None:
    document = sample()
    document["cautions"] = complete(document)
    texts = {item["code"]: item["text"] for item in complete(document, US)}
    assert "9 mi away, 100 ft lower than the site" in texts["G1"]
    assert "ft" in texts["G3"]


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
