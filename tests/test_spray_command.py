"""`daylayer spray`: flags, files, exit codes, and the page."""

from __future__ import annotations

import colorsys
import csv
import hashlib
import json
import re
import subprocess
import sys
from datetime import datetime, timedelta
from functools import cache
from itertools import combinations
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result
from matplotlib.figure import Figure
from matplotlib.text import Text
from scipy.io import netcdf_file
from spray_cases import field, plain_document, plain_plan, written_tower

from forcing.bundled import bundled
from forcing.scenario import load
from slab.commands.main import main
from slab.pictures_spray import spray_page
from slab.pictures_spray_strip import shade
from slab.pictures_spray_words import HATCHES, SHADES
from slab.pictures_style import canvas_of, lightness
from slab.products.spray import document, plan
from slab.products.spray_text import spray_text

NOW = "2026-07-14T18:00Z"
FLAGS = [
    "--latitude",
    "39.2",
    "--longitude",
    "-98.6",
    "--elevation",
    "330",
    "--zone",
    "Etc/GMT+6",
    "--cover",
    "short grass",
]
SPRAY_CODES = ("S1", "S2", "S3", "S4", "S5")


def called(*words: str) -> Result:
    return CliRunner().invoke(main, list(words))


@cache
def page(units: str = "metric") -> Figure:
    figure = spray_page(plain_document(), units=units)
    canvas_of(figure).draw()  # type: ignore[no-untyped-call]
    return figure


def said(figure: Figure) -> list[Text]:
    return [
        one for one in figure.findobj(Text) if isinstance(one, Text) and one.get_visible() and one.get_text().strip()
    ]


# files and exit codes


def test_an_adviser_without_a_scenario_starts_from_flags(tmp_path: Path) -> None:
    profile = str(Path(bundled("summer_plain")).with_suffix(".csv"))
    out = tmp_path / "answer.json"
    result = called("spray", "--profile", profile, *FLAGS, "--hours", "24", "--now", NOW, "--json", str(out))
    assert result.exit_code == 0, result.output
    assert re.search(r"6\.5 h old at 2026-07-14\s+18:00 UTC, 0 km away", result.stdout)
    assert "No limits were given" in result.stdout
    answer = json.loads(out.read_text(encoding="utf-8"))
    assert {hour["status"] for hour in answer["calendar"]} == {"conditions only"}
    assert set(answer["series"]["status"]) == {"conditions only"}


def test_a_profile_over_twelve_hours_old_is_a_doubt(tmp_path: Path) -> None:
    words = ["spray", "--hours", "24", "--now", "2026-07-15T06:00Z", "--csv", str(tmp_path / "c.csv"), "--quiet"]
    assert called(*words).exit_code == 3
    assert called(*words, "--accept-doubt").exit_code == 0


@pytest.mark.parametrize(
    ("words", "code", "message"),
    [
        (["--between", "9", "1.5"], 1, "cannot be compared"),
        (["--field-below", "-3"], 2, "field-below"),
        (["--now", "2026-07-14T18:00"], 2, "no offset"),
        (["--observed", "nowhere.csv"], 1, "nowhere.csv"),
        (["--hours", "1"], 1, "no full local hour"),
        (["--picture", "wall.gif"], 2, "must end in"),
    ],
)
def test_bad_words_are_answered_in_one_line(words: list[str], code: int, message: str) -> None:
    result = called("spray", *words)
    assert result.exit_code == code
    assert message in result.stderr
    assert "Traceback" not in result.stderr


def test_an_observed_table_outside_the_run_is_refused_and_nothing_is_written(tmp_path: Path) -> None:
    tower = tmp_path / "tower.csv"
    tower.write_text("time,temperature_1.5m_C,temperature_9m_C\n2026-01-01T00:00Z,1,2\n", encoding="utf-8")
    out = tmp_path / "answer.json"
    result = called("spray", "--hours", "24", "--observed", str(tower), "--json", str(out))
    assert result.exit_code == 1
    assert "within the run" in result.stderr
    assert not out.exists()


def test_the_record_sheet_holds_all_inputs_and_is_the_same_again(tmp_path: Path) -> None:
    tower, sheets = written_tower(tmp_path / "tower.csv"), [tmp_path / "a.csv", tmp_path / "b.csv"]
    for sheet in sheets:
        words = ["--hours", "24", "--now", NOW, "--observed", str(tower), "--record", str(sheet), "--field-below", "8"]
        result = called("spray", *words, "--quiet")
        assert result.exit_code == 0, result.output
    text = sheets[0].read_text(encoding="utf-8")
    assert text == sheets[1].read_text(encoding="utf-8")
    for path in (bundled("summer_plain"), Path(bundled("summer_plain")).with_suffix(".csv"), tower):
        assert hashlib.sha256(Path(path).read_bytes()).hexdigest() in text
    for word in (
        "daylayer",
        "numpy",
        "settings sha256",
        "limits:",
        "tower:",
        "low ground:",
        "scenario text:",
        "assumed:",
    ):
        assert word in text
    for code in SPRAY_CODES:
        assert f"caution {code}:" in text
    table = list(csv.DictReader(line for line in text.splitlines() if not line.startswith("#")))
    assert len(table) >= 22
    assert {"measured_low_C", "measured_high_C", "remarks", "status", "per_8m_K", "observed_difference_K"} <= set(
        table[0]
    )
    assert {row["note"] for row in table} == {"past", "plan only"}
    assert all(row["remarks"] == "" for row in table)


def test_text_json_and_csv_say_the_same(tmp_path: Path) -> None:
    answer: Any = plain_document()
    text = spray_text(answer)
    lines = [line for line in text.splitlines() if re.match(r" \d\d:00  ", line)]
    assert len(lines) == len(answer["calendar"])
    for line, hour in zip(lines, answer["calendar"], strict=True):
        assert hour["inversion"] in line
        assert f"{hour['status']}" in line
        assert ("[plan only]" in line) == hour["plan_only"]
        if hour["reasons"]:
            assert hour["reasons"][0]["text"] in line
    for code in SPRAY_CODES:
        assert f"\n  {code} " in text


def line_of(text: str, words: str) -> str:
    """The first paragraph line that holds these words, with what it is wrapped into."""
    lines = text.splitlines()
    first = next(n for n, line in enumerate(lines) if words in line)
    rest = lines[first + 1 :]
    more = next((n for n, line in enumerate(rest) if not line.startswith("  ")), len(rest))
    return " ".join(" ".join(line.split()) for line in [lines[first], *rest[:more]])


def at(moment: str) -> str:
    """Text of the field's calendar as if made at another moment."""
    return spray_text(document(plain_plan(), now=datetime.fromisoformat(moment)))


def test_the_first_sentence_says_what_the_inversion_means_for_work_that_begins_now() -> None:
    answer: Any = plain_document()
    (night,) = (one for one in answer["nights"] if one["onset"])
    early, late = (datetime.fromisoformat(night["onset"][key]) for key in ("early", "late"))
    before, inside = (early - timedelta(hours=1.5)).isoformat(), (early + 0.5 * (late - early)).isoformat()
    assert "may begin from" in line_of(at(before), "Now, ")
    assert "1.5 h ahead" in line_of(at(before), "Now, ")
    assert "window of onset" in line_of(at(inside), "Now, ")
    assert "the run has an inversion" in line_of(at((late + timedelta(hours=1)).isoformat()), "Now, ")
    dawn = datetime.fromisoformat(night["end"]["early"]) + timedelta(minutes=10)
    assert "window of the end" in line_of(at(dawn.isoformat()), "Now, ")
    assert "Now, " not in at("2026-08-14T12:00+00:00")


def test_nights_that_are_over_come_last_and_a_stretch_is_a_plan_only_from_now() -> None:
    text = at(NOW.replace("Z", "+00:00"))
    nights = [line for line in text.splitlines() if line.startswith("night from ")]
    assert nights[0].startswith("night from Tue 14 Jul")
    assert nights[-1].startswith("night from Mon 13 Jul")
    assert re.search(r"\[past to 12:00, then\s+plan only\]", text)
    archive = at("2026-08-14T12:00+00:00")
    assert archive.startswith("Spray calendar of past hours, as modelled")
    assert "Plan only." not in archive.split("\ncautions\n")[0]
    assert "[plan only]" not in archive
    assert "Of the past hours, as modelled, inside your own limits" in archive


def test_a_night_that_the_run_does_not_reach_is_said_to_be_not_covered() -> None:
    made = plan(field(hours=8.0))
    text = spray_text(document(made, now=datetime.fromisoformat("2026-07-14T12:00+00:00")))
    assert "before sunset" in line_of(text, "night from Tue 14 Jul: not covered")


def test_the_bundled_case_shows_hours_inside_outside_and_possible() -> None:
    answer = document(plan(load(bundled("summer_plain"))), now=datetime.fromisoformat("2026-07-14T11:30+00:00"))
    found = {(hour["status"], hour["inversion"]) for hour in answer["calendar"]}
    assert {("inside", "none"), ("outside", "possible"), ("outside", "present"), ("outside", "none")} <= found
    assert "invented" in answer["limits"]["authority"]


def test_netcdf_carries_every_series_with_its_unit_and_passes_the_public_checker(tmp_path: Path) -> None:
    path = tmp_path / "calendar.nc"
    assert called("spray", "--hours", "24", "--now", NOW, "--netcdf", str(path), "--quiet").exit_code == 0
    with netcdf_file(path, mmap=False) as file:
        for name in plain_document()["series"]:  # type: ignore[attr-defined]
            assert name.replace(".", "_") in file.variables
        assert file.variables["delta_t_2m_K"].units == b"K"
        assert file.variables["rain_mm_h"].standard_name == b"rainfall_rate"
        assert b"inside" in file.variables["status"].flag_meanings.split()
        assert b"S1" in file.comment
    pytest.importorskip("compliance_checker")
    script = Path(sys.executable).with_name("compliance-checker")
    command = [str(script)] if script.exists() else [sys.executable, "-m", "compliance_checker.cchecker"]
    done = subprocess.run([*command, "-t", "cf:1.11", str(path)], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout
    assert "All tests passed" in done.stdout


# the picture


def test_shades_part_in_grey_and_hatches_differ() -> None:
    for one, other in combinations(SHADES, 2):
        assert abs(lightness(one) - lightness(other)) >= 20.0
    assert len(set(HATCHES.values())) == len(HATCHES)
    levels = [lightness(shade(n / 9.0)) for n in range(10)]
    assert levels == sorted(levels, reverse=True)
    assert shade(0.0, "possible") != shade(0.0)


@pytest.mark.parametrize("units", ["metric", "us"])
def test_the_page_is_legible_and_no_words_cover_each_other(units: str) -> None:
    figure = page(units)
    assert min(float(text.get_fontsize()) for text in said(figure)) >= 7.0
    width, height = figure.get_size_inches() * figure.dpi
    renderer = canvas_of(figure).get_renderer()  # type: ignore[no-untyped-call]
    boxes = [(text.get_text(), text.get_window_extent(renderer)) for text in said(figure)]
    for words, box in boxes:
        assert min(box.x0, box.y0, width - box.x1, height - box.y1) >= 0, words
    for (one, a), (other, b) in combinations(boxes, 2):
        across, up = min(a.x1, b.x1) - max(a.x0, b.x0), min(a.y1, b.y1) - max(a.y0, b.y0)
        assert not (across > 2.0 and up > 4.0), (one, other)


def test_every_hour_to_come_is_marked_on_the_page_and_all_cautions_stand_under_it() -> None:
    words = [text.get_text() for text in said(page())]
    answer: Any = plain_document()
    assert sum(word == "plan\nonly" for word in words) == sum(hour["plan_only"] for hour in answer["calendar"])
    together = " ".join(words)
    for one in answer["cautions"]:
        assert one["code"] in together
    assert "Absence of a predicted inversion" in together


def test_the_page_is_drawn_in_one_hue() -> None:
    hues = [colorsys.rgb_to_hsv(*(int(one[n : n + 2], 16) / 255.0 for n in (1, 3, 5)))[0] for one in SHADES[1:]]
    assert max(hues) - min(hues) < 0.03
