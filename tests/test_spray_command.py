"""`daylayer spray`: flags, files, exit codes; and that no command of ours speaks of permission and all carry cautions."""

from __future__ import annotations

import colorsys
import csv
import hashlib
import json
import re
from functools import cache
from itertools import combinations
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result
from matplotlib.figure import Figure
from matplotlib.text import Text
from spray_cases import plain_document, written_tower

from forcing.bundled import bundled
from slab.commands.main import main
from slab.pictures_spray import spray_page
from slab.pictures_spray_strip import shade
from slab.pictures_spray_words import HATCHES, SHADES
from slab.pictures_style import canvas_of, lightness
from slab.products.spray_text import spray_text

FORBIDDEN = re.compile(r"\b(safe|legal|permitted|ok|approved|go|green light)\b", re.IGNORECASE)
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


def own_text(text: str) -> str:
    """What was written, without file names, which are the user's words."""
    return re.sub(r"\S*[/\\]\S*", "", text)


@cache
def page(units: str = "metric") -> Figure:
    figure = spray_page(plain_document(), units=units)
    canvas_of(figure).draw()
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
    assert min(text.get_fontsize() for text in said(figure)) >= 7.0
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


# words of permission, in every command


def outputs_of(folder: Path, *words: str) -> str:
    """Text, remarks and files of a call; exit 0 or a doubt."""
    result = called(*words)
    assert result.exit_code in (0, 3), result.output
    files = (
        path.read_text(encoding="utf-8")
        for path in sorted(folder.iterdir())
        if path.suffix in (".json", ".csv", ".svg")
    )
    return "\n".join([result.stdout, result.stderr, *files])


def cautioned(text: str, codes: tuple[str, ...]) -> bool:
    return all(re.search(rf"\b{code}\b", text) for code in codes)


@pytest.mark.parametrize("case", ["summer_plain", "snow_field", "southern_wheat"])
def test_spray_never_speaks_of_permission(case: str, tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    out = tmp_path / "out"
    text = outputs_of(out, "spray", str(bundled(case)), "--hours", "24", "--units", "us", "--json", str(out / "a.json"),
                      "--csv", str(out / "a.csv"), "--record", str(out / "r.csv"), "--field-below", "5",
                      "--picture", str(tmp_path / "page.svg"))  # fmt: skip
    assert FORBIDDEN.findall(own_text(text)) == []
    for path in out.iterdir():
        assert cautioned(path.read_text(encoding="utf-8"), SPRAY_CODES)
    for text_of_page in said(spray_page(json.loads((out / "a.json").read_text(encoding="utf-8")))):
        assert FORBIDDEN.search(text_of_page.get_text()) is None


@pytest.mark.parametrize("case", ["summer_plain", "humid_lowland", "snow_field"])
def test_forecast_never_speaks_of_permission(case: str, tmp_path: Path) -> None:
    text = outputs_of(tmp_path, "forecast", str(bundled(case)), "--hours", "24", "--json", str(tmp_path / "a.json"))
    assert FORBIDDEN.findall(own_text(text)) == []
    assert cautioned(text, ("G1", "G2", "G3", "G4", "G5"))
    assert cautioned((tmp_path / "a.json").read_text(encoding="utf-8"), ("G1", "G2", "G3", "G4", "G5"))


@pytest.mark.parametrize(
    ("case", "ground"),
    [
        ("summer_plain", 330),
        ("humid_lowland", 60),
        ("southern_wheat", 180),
        ("snow_field", 140),
        ("high_plateau", 1690),
    ],
)
def test_sounding_never_speaks_of_permission(case: str, ground: int, tmp_path: Path) -> None:
    profile = Path(bundled(case)).with_suffix(".csv")
    text = outputs_of(tmp_path, "sounding", str(profile), "--latitude", "40", "--longitude", "0", "--elevation", str(ground),
                      "--valid", "2026-07-14T11:30Z", "--json", str(tmp_path / "a.json"))  # fmt: skip
    assert FORBIDDEN.findall(own_text(text)) == []


def test_help_never_speaks_of_permission() -> None:
    for name in ("forecast", "sounding", "spray"):
        text = called(name, "--help").output
        assert text.startswith("Example")
        assert FORBIDDEN.findall(own_text(text)) == []


@pytest.mark.parametrize(
    "bad", ["It is safe.", "You may GO now", "legal", "ok", "a green light", "Approved", "permitted"]
)
def test_a_word_of_permission_would_be_found(bad: str) -> None:
    assert FORBIDDEN.search(bad) is not None


@pytest.mark.parametrize("good", ["permit", "unsafe", "token", "illegal", "ago", "goes"])
def test_other_words_are_left_alone(good: str) -> None:
    assert FORBIDDEN.search(good) is None
