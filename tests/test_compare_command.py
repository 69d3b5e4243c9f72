"""`compare` and `covers` from the command line: exit codes, files, words, and nothing half-written."""

from __future__ import annotations

import csv
import io
import json
import re
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from forcing.scenario import bundled
from slab.commands.main import main

VERDICTS = re.compile(r"\b(safe|legal|permitted|ok|approved|go|green light)\b", re.IGNORECASE)
SHORT = ["--hours", "6", "--accept-doubt"]


def run(*arguments: str) -> Result:
    return CliRunner().invoke(main, list(arguments))


def scenario_file(folder: Path, tail: str = "", *, lines: str = "") -> str:
    """The bundled plain in another folder, with more text at its end."""
    source = bundled("summer_plain")
    text = source.read_text(encoding="utf-8").replace('"summer_plain.csv"', f'"{source.parent / "summer_plain.csv"}"')
    path = folder / "case.toml"
    path.write_text(text.replace("[weather]", f"[weather]\n{lines}") + tail, encoding="utf-8")
    return str(path)


def test_everything_is_written(tmp_path: Path) -> None:
    names = [str(tmp_path / name) for name in ("c.json", "c.csv", "c.nc", "c.svg")]
    result = run("compare", *SHORT, "--change", "brighter: albedo +0.10", "--json", names[0], "--csv", names[1],
                 "--netcdf", names[2], "--picture", names[3])  # fmt: skip
    assert result.exit_code == 0, result.stderr
    assert result.stdout.startswith("brighter: highest 2 m temperature -")
    assert not VERDICTS.search(result.stdout + result.stderr)
    document = json.loads(Path(names[0]).read_text(encoding="utf-8"))
    assert {"schema", "kind", "site", "base", "days", "changes", "patch", "cautions", "not_modelled", "run"} <= set(
        document
    )
    assert document["changes"][0]["name"] == "brighter"
    rows = list(csv.DictReader(Path(names[1]).read_text(encoding="utf-8").splitlines()))
    assert {row["change"] for row in rows} == {"brighter"}
    assert Path(names[2]).read_bytes()[:3] == b"CDF"
    assert "<svg" in Path(names[3]).read_text(encoding="utf-8")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["c.csv", "c.json", "c.nc", "c.svg"]


def test_changes_of_a_file_come_before_those_of_the_line(tmp_path: Path) -> None:
    case = scenario_file(tmp_path, '\n[[change]]\nname = "wet"\nmake = "irrigation"\n')
    result = run("compare", case, *SHORT, "--change", "albedo +0.10", "--json", "-")
    assert result.exit_code == 0, result.stderr
    assert [change["name"] for change in json.loads(result.stdout)["changes"]] == ["wet", "albedo +0.10"]


def test_without_a_change_two_usual_ones_are_shown() -> None:
    result = run("compare", "--hours", "2", "--accept-doubt", "--quiet", "--json", "-")
    assert result.exit_code == 0
    assert len(json.loads(result.stdout)["changes"]) == 2
    told = run("compare", "--hours", "2", "--accept-doubt")
    assert "no change was given; shown are: albedo +0.10, canopy +10%" in told.stderr


def test_a_doubt_ends_with_three(tmp_path: Path) -> None:
    text = (bundled("summer_plain").parent / "summer_plain.csv").read_text(encoding="utf-8")
    calm = "\n".join(line if line.startswith("#") else ",".join(line.split(",")[:4]) for line in text.splitlines())
    (tmp_path / "calm.csv").write_text(calm + "\n", encoding="utf-8")
    arguments = ["compare", "--profile", str(tmp_path / "calm.csv"), "--zone", "Etc/GMT+6", "--cover", "heath", "--hours", "2",
                 "--change", "albedo +0.10"]  # fmt: skip
    result = run(*arguments)
    assert result.exit_code == 3, result.stderr
    assert "doubt: neither the profile nor the weather gives a wind" in result.stderr
    assert run(*arguments, "--accept-doubt").exit_code == 0


def test_readings_score_the_base(tmp_path: Path) -> None:
    readings = tmp_path / "tower.csv"
    hours = [f"2026-07-14T{hour:02d}:00Z,{20.0 + 0.8 * (hour - 11)}" for hour in range(11, 18)]
    readings.write_text("time,temperature_2m_C\n" + "\n".join(hours) + "\n", encoding="utf-8")
    result = run("compare", *SHORT, "--change", "albedo +0.10", "--observed", str(readings), "--json", "-")
    assert result.exit_code == 0, result.stderr
    found = json.loads(result.stdout)["observed"]["temperature_2m_C"]["day"]
    assert found["n"] > 20
    assert abs(found["bias"]) <= found["mean_absolute"] <= found["root_mean_square"]
    far = readings.with_name("far.csv")
    far.write_text(readings.read_text(encoding="utf-8").replace("2026-07-14", "2026-09-14"), encoding="utf-8")
    lost = run("compare", *SHORT, "--change", "albedo +0.10", "--observed", str(far))
    assert lost.exit_code == 1
    assert "no reading falls into the days that were run" in lost.stderr


def test_bundled_days_over_a_ground_of_ones_own(tmp_path: Path) -> None:
    result = run("compare", "--days", "temperate", "--cover", "open low buildings", "--soil-moisture", "0.3", "--hours", "9",
                 "--change", "roof albedo 0.65", "--accept-doubt", "--json", "-")  # fmt: skip
    assert result.exit_code == 0, result.stderr
    document = json.loads(result.stdout)
    assert document["base"]["cover"] == "open low buildings"
    assert document["base"]["soil_moisture"] == 0.3
    assert [one["day"] for one in document["days"]["runs"]] == ["temperate-1", "temperate-2"]
    cooler = document["changes"][0]["answers"]["temperature_2m_max_C"]["difference"]
    assert cooler["days"] == 2
    assert cooler["high"] < 0.0
    case = scenario_file(tmp_path)
    again = run(
        "compare",
        case,
        "--days",
        "temperate",
        "--hours",
        "2",
        "--change",
        "albedo +0.1",
        "--accept-doubt",
        "--json",
        "-",
    )
    assert json.loads(again.stdout)["base"]["cover"] == "short grass"


def test_a_folder_of_profiles(tmp_path: Path) -> None:
    folder = tmp_path / "soundings"
    folder.mkdir()
    text = (bundled("summer_plain").parent / "summer_plain.csv").read_text(encoding="utf-8")
    for day in (14, 15):
        name = f"2026-07-{day}.csv"
        (folder / name).write_text(text.replace("2026-07-14", f"2026-07-{day}"), encoding="utf-8")
    (folder / "torn.csv").write_text("pressure_hPa\n", encoding="utf-8")
    result = run("compare", "--profiles", str(folder), "--zone", "Etc/GMT+6", "--months", "6-8", "--hours", "2",
                 "--change", "albedo +0.10", "--accept-doubt", "--json", "-")  # fmt: skip
    assert result.exit_code == 0, result.stderr
    days = json.loads(result.stdout)["days"]
    assert days["used"] == 2
    assert days["given"] == 3
    assert [one["count"] for one in days["left_out"]] == [1]
    none = run("compare", "--profiles", str(folder), "--zone", "Etc/GMT+6", "--months", "1", "--change", "albedo +0.10")
    assert none.exit_code == 1
    assert "none of 3 days can be used" in none.stderr


@pytest.mark.parametrize(
    ("arguments", "code", "said"),
    [
        (["--change", "albdo 0.2"], 1, "did you mean 'albedo'"),
        (["--change", "cover lava"], 1, "unknown land cover"),
        (["--change", "cover 50% heath + 40% stubble"], 1, "sum to 0.9"),
        (["--change", "albedo +0.1", "--change", "albedo +0.1"], 2, "two changes are named"),
        (["--days", "lunar"], 1, "no bundled days of 'lunar'"),
        (["--days", "dry", "--profiles", "."], 2, "exclude each other"),
        (["--months", "6"], 2, "choose among --profiles"),
        (["--profiles", ".", "--months", "june"], 2, "is not understood"),
        (["--profiles", ".", "--months", "13"], 2, "months are 1 to 12"),
        (["--profiles", "."], 2, "--profiles needs a site"),
        (["--threshold", "900"], 2, "--threshold"),
        (["missing.toml"], 1, "missing.toml"),
        (["--picture", "page.bmp"], 2, "must end in"),
        (["--observed", "missing.csv", "--change", "albedo +0.1"], 1, "missing.csv"),
    ],
)
def test_what_is_wrong_is_said_in_one_line(arguments: list[str], code: int, said: str) -> None:
    result = run("compare", *arguments)
    assert result.exit_code == code, result.stderr
    assert said in result.stderr
    assert result.stdout == ""
    if code == 1:
        assert result.stderr.strip().splitlines()[-1].startswith("error: ")


def test_an_output_that_cannot_be_written_leaves_nothing(tmp_path: Path) -> None:
    result = run("compare", "--hours", "2", "--change", "albedo +0.1", "--json", str(tmp_path / "c.json"), "--csv",
                 str(tmp_path / "no" / "c.csv"))  # fmt: skip
    assert result.exit_code == 1
    assert "its folder does not exist" in result.stderr
    assert list(tmp_path.iterdir()) == []


def test_given_net_radiation_is_refused(tmp_path: Path) -> None:
    case = scenario_file(tmp_path, lines="net_radiation_W_m2 = 300.0\n")
    result = run("compare", case, *SHORT, "--change", "albedo +0.1")
    assert result.exit_code == 1
    assert "net radiation is given" in result.stderr


def test_covers() -> None:
    result = run("covers")
    assert result.exit_code == 0
    assert "short grass" in result.stdout
    assert not VERDICTS.search(result.stdout)
    one = run("covers", "short grass", "--json", "-")
    document = json.loads(one.stdout)
    assert document["kind"] == "covers"
    assert set(document["covers"][0]["properties"]["albedo"]) == {"value", "low", "high", "unit", "meaning", "source"}
    table = run("covers", "--csv", "-")
    assert next(iter(csv.DictReader(io.StringIO(table.stdout))))["cover"] == "short grass"
    wrong = run("covers", "shrot grass")
    assert wrong.exit_code == 1
    assert 'did you mean "short grass"' in wrong.stderr


def test_covers_of_a_file(tmp_path: Path) -> None:
    case = scenario_file(tmp_path, '\n[covers."my meadow"]\nlike = "tall grass"\nalbedo = 0.24\n')
    result = run("covers", "my meadow", "50% my meadow + 50% heath", "--case", case, "--json", "-")
    assert result.exit_code == 0, result.stderr
    first, second = json.loads(result.stdout)["covers"]
    assert first["properties"]["albedo"]["value"] == 0.24
    assert [part["area_fraction"] for part in second["parts"]] == [0.5, 0.5]
