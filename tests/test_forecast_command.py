"""The `forecast` command: exit codes, what goes where, files whole or absent, and malformed input in one line."""

from __future__ import annotations

import csv
import io
import json
import os
import re
import subprocess
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import NamedTuple

import pytest
import test_malformed_profiles as profiles
import test_malformed_scenarios as scenarios
from click.testing import CliRunner, Result
from column import BROKEN, column

from forcing.cover import names
from slab.commands.main import main
from slab.products.sounding import describe
from slab.products.sounding_text import levels_csv

ROOT = Path(__file__).resolve().parents[1]
VALID = ["--valid", "2024-06-01T11:00Z"]
PLACE = ["--latitude", "40", "--longitude", "-95", "--elevation", "100", "--zone", "Etc/GMT+6"]
SHORT = ["--hours", "3"]


def run(*arguments: str) -> Result:
    return CliRunner().invoke(main, ["forecast", *arguments])


def write_profile(path: Path, *, wind: bool = True) -> str:
    """A table of an invented morning, two years old, so that its age is no doubt."""
    made = column(BROKEN, humidity=[0.007, 0.006, 0.002], wind=[2.0, 6.0, 12.0] if wind else None)
    text = levels_csv(describe(made))
    if not wind:
        rows = list(csv.reader(io.StringIO(text)))
        keep = [i for i, name in enumerate(rows[0]) if not name.startswith("wind")]
        text = "\n".join(",".join(row[i] for i in keep) for row in rows) + "\n"
    path.write_text(text, encoding="utf-8")
    return str(path)


@pytest.fixture
def morning(tmp_path: Path) -> str:
    return write_profile(tmp_path / "morning.csv")


@pytest.fixture
def flags(morning: str) -> list[str]:
    """First use: one profile and a few flags."""
    return ["--profile", morning, *VALID, *PLACE, "--cover", "short grass", *SHORT]


@pytest.fixture
def case(tmp_path: Path, morning: str) -> str:
    path = tmp_path / "case.toml"
    path.write_text(
        'title = "A test"\n[site]\nname = "field"\nlatitude = 40\nlongitude = -95\nelevation = 100\ntime_zone = "Etc/GMT+6"\n'
        '[profile]\nfile = "morning.csv"\nvalid = "2024-06-01T11:00Z"\n[surface]\ncover = "short grass"\nsoil_moisture = 0.3\n'
        "[weather]\ncloud_fraction = 0.1\n[run]\nhours = 3\n",
        encoding="utf-8",
    )
    return str(path)


def one_line(result: Result, code: int, parts: Sequence[str]) -> str:
    """Nothing on stdout, no traceback, and one line that says it."""
    assert result.exit_code == code, (result.exit_code, result.stderr, result.exception)
    assert result.stdout == ""
    assert "Traceback" not in result.stderr
    lines = [line for line in result.stderr.splitlines() if line.lower().startswith("error:")]
    assert len(lines) == 1, result.stderr
    if code == 1:
        assert result.stderr.splitlines() == lines
    for part in parts:
        assert part in lines[0], (part, lines[0])
    return lines[0]


# --- exit codes, and what goes where


def test_a_plain_forecast_ends_with_0_and_talks_on_stderr(case: str) -> None:
    result = run(case)
    assert result.exit_code == 0, result.stderr
    assert result.stdout.count("\n") > 20
    assert all(line.startswith("warning: ") for line in result.stderr.splitlines())
    assert "warning:" not in result.stdout


def test_a_doubt_ends_with_3_unless_it_is_accepted(tmp_path: Path) -> None:
    still = write_profile(tmp_path / "still.csv", wind=False)
    arguments = ["--profile", still, *VALID, *PLACE, *SHORT]
    doubtful = run(*arguments)
    assert doubtful.exit_code == 3
    assert "doubt: " in doubtful.stderr
    assert doubtful.stdout, "it is answered all the same"
    accepted = run(*arguments, "--accept-doubt")
    assert accepted.exit_code == 0
    assert accepted.stdout == doubtful.stdout
    assert "doubt: " in accepted.stderr


def test_quiet_says_nothing(case: str) -> None:
    result = run(case, "--quiet")
    assert (result.exit_code, result.stdout, result.stderr) == (0, "", "")


def test_a_bare_command_runs_a_bundled_scenario() -> None:
    result = run("--hours", "2", "--accept-doubt")
    assert result.exit_code == 0, result.stderr
    assert "invented" in result.stdout


def test_a_bundled_scenario_runs_by_its_name() -> None:
    result = run("bundled:dry_desert", "--hours", "2", "--accept-doubt")
    assert result.exit_code == 0, result.stderr
    assert "invented" in result.stdout


def test_an_unknown_bundled_scenario_is_named_with_those_there_are() -> None:
    result = run("bundled:dry_dessert")
    assert result.exit_code == 1
    assert "dry_dessert" in result.stderr
    assert "dry_desert" in result.stderr


def test_help_starts_with_an_example() -> None:
    result = run("-h")
    assert result.exit_code == 0
    assert result.stdout.startswith("Example")


def test_in_a_process_of_its_own(case: str, tmp_path: Path) -> None:
    """Streams and exit code as a shell sees them."""
    done = subprocess.run(
        [sys.executable, "-c", "from slab.commands.main import main; main()", "forecast", case, "--json", "-"],
        capture_output=True, text=True, check=False, cwd=tmp_path, env={**os.environ, "PYTHONPATH": str(ROOT)},
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout)["schema"] == "daylayer/1"
    assert all(line.startswith("warning: ") for line in done.stderr.splitlines())


# --- outputs


def test_json_on_stdout_is_nothing_but_json(case: str) -> None:
    result = run(case, "--json", "-")
    document = json.loads(result.stdout)
    assert set(document) >= {"schema", "site", "profile", "assumptions", "summary", "series", "doubts", "cautions"}
    assert document["run"]["hours"] == 3.0


def test_csv_holds_the_series(case: str) -> None:
    document = json.loads(run(case, "--json", "-").stdout)
    table = run(case, "--csv", "-").stdout
    rows = list(csv.DictReader(line for line in table.splitlines() if not line.startswith("#")))
    assert len(rows) == len(document["series"]["time"])
    assert [float(row["mixing_depth_m"]) for row in rows] == document["series"]["mixing_depth_m"]


@pytest.mark.filterwarnings("ignore::DeprecationWarning", "ignore::PendingDeprecationWarning")
def test_all_files_at_once_beside_the_text(case: str, tmp_path: Path) -> None:
    files = {
        "--json": "day.json",
        "--csv": "day.csv",
        "--netcdf": "day.nc",
        "--picture": "day.svg",
        "--write": "used.toml",
    }
    arguments = [x for option, name in files.items() for x in (option, str(tmp_path / "out" / name))]
    (tmp_path / "out").mkdir()
    result = run(case, *arguments)
    assert result.exit_code == 0, result.stderr
    assert result.stdout
    assert {path.name for path in (tmp_path / "out").iterdir()} == set(files.values())
    assert (tmp_path / "out" / "day.nc").read_bytes()[:3] == b"CDF"
    assert "<svg" in (tmp_path / "out" / "day.svg").read_text(encoding="utf-8")[:1000]


@pytest.mark.parametrize(("ending", "magic"), [("png", b"\x89PNG"), ("pdf", b"%PDF")])
def test_pictures_by_ending(case: str, tmp_path: Path, ending: str, magic: bytes) -> None:
    path = tmp_path / f"day.{ending}"
    assert run(case, "--picture", str(path), "--quiet").exit_code == 0
    assert path.read_bytes().startswith(magic)


def test_write_saves_a_scenario_that_runs_to_the_same_numbers(flags: list[str], tmp_path: Path) -> None:
    used = tmp_path / "used.toml"
    first = json.loads(run(*flags, "--write", str(used), "--json", "-").stdout)
    assert "#" in used.read_text(encoding="utf-8")
    second = json.loads(run(str(used), "--json", "-").stdout)
    assert second["series"] == first["series"]
    assert second["summary"] == first["summary"]
    assert [(a["name"], a["source"]) for a in second["assumptions"]] == [
        (a["name"], a["source"]) for a in first["assumptions"]
    ], "what was assumed stays assumed"


def test_first_use_lists_what_it_assumed_above_the_result(flags: list[str]) -> None:
    result = run(*flags)
    assert result.exit_code == 0, result.stderr
    text = result.stdout
    assert "assumed" in text
    assert text.index("assumed") < text.index("cloud") or "cloud" in text
    document = json.loads(run(*flags, "--json", "-").stdout)
    assumed = {a["key"] for a in document["assumptions"] if a["source"] == "assumed"}
    assert {"surface.soil_moisture", "weather.cloud_fraction"} <= assumed
    assert "surface.cover" not in assumed


def test_units_change_the_text_and_not_the_files(case: str) -> None:
    us, metric = run(case, "--units", "us").stdout, run(case).stdout
    assert us != metric
    assert " ft" in us
    assert "kt" in us
    assert "mph" in us
    assert "mph" not in metric
    assert run(case, "--units", "us", "--json", "-").stdout == run(case, "--json", "-").stdout


def test_two_outputs_cannot_share_a_file_or_stdout(case: str, tmp_path: Path) -> None:
    one_line(run(case, "--json", "-", "--csv", "-"), 2, ["stdout"])
    same = str(tmp_path / "same.txt")
    one_line(run(case, "--json", same, "--csv", same), 2, ["same.txt", "named twice"])
    one_line(run(case, "--json", case), 2, ["case.toml"])
    assert "A test" in Path(case).read_text(encoding="utf-8"), "the input is as it was"


def test_no_output_goes_over_a_table_of_the_scenario(
    case: str, morning: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Tables are looked for beside the scenario, so a file of that name elsewhere is another one."""
    elsewhere = tmp_path / "elsewhere"
    elsewhere.mkdir()
    monkeypatch.chdir(elsewhere)
    before = Path(morning).read_bytes()
    one_line(run(case, "--csv", morning), 2, ["morning.csv", "would be overwritten"])
    one_line(run("../case.toml", "--csv", "../morning.csv"), 2, ["morning.csv", "would be overwritten"])
    assert Path(morning).read_bytes() == before
    assert run(case, "--csv", "morning.csv", "--quiet").exit_code == 0
    assert (elsewhere / "morning.csv").stat().st_size > 0


def test_a_profile_for_a_case_is_told_from_a_broken_scenario(morning: str) -> None:
    one_line(run(morning), 1, ["looks like a profile", f"use --profile {morning}"])


def test_a_release_without_a_position_has_no_distance(case: str) -> None:
    document = json.loads(run(case, "--json", "-").stdout)
    assert document["profile"]["distance_km"] is None
    assert "profile.latitude" in {a["key"] for a in document["assumptions"] if a["source"] == "assumed"}


def test_a_place_that_does_not_fit_its_zone_is_warned_about(flags: list[str]) -> None:
    result = run(*[x.replace("-95", "95") for x in flags])
    assert result.exit_code == 0
    assert "warning: the clock of Etc/GMT+6 is 11.7 h ahead of the sun at longitude 95" in result.stderr


@pytest.mark.parametrize("option", ["--json", "--csv", "--netcdf", "--picture", "--write"])
def test_unwritable_output_leaves_nothing_half_written(case: str, tmp_path: Path, option: str) -> None:
    folder = tmp_path / "out"
    folder.mkdir()
    kept = folder / "kept.json"
    kept.write_text("old", encoding="utf-8")
    bad = str(tmp_path / "missing" / "day.png")
    others = [] if option == "--json" else ["--json", str(kept)]
    one_line(run(case, *others, option, bad), 1, ["missing", "folder does not exist", "make the folder"])
    assert [path.name for path in folder.iterdir()] == ["kept.json"]
    assert kept.read_text(encoding="utf-8") == "old"
    assert not (tmp_path / "missing").exists()


def test_a_file_that_cannot_be_made(case: str, tmp_path: Path) -> None:
    """A name longer than any file system takes fails for every user, also for one who may write anywhere."""
    before = set(tmp_path.iterdir())
    one_line(
        run(case, "--json", str(tmp_path / f"{'x' * 300}.json")), 1, ["xxx.json", "cannot be written", "may write"]
    )
    assert set(tmp_path.iterdir()) == before


# --- one table of malformed input


class Row(NamedTuple):
    """One malformed input: what to run in a folder of files, the exit code, and what the one line must hold."""

    name: str
    files: dict[str, str | bytes]
    arguments: tuple[str, ...]
    code: int
    parts: tuple[str, ...]


FIRST_USE = ("--profile", "given.txt", "--latitude", "47.5", "--longitude", "15.25", "--elevation", "310", "--zone", "UTC",
             "--valid", "2026-07-01T12:00Z", "--hours", "2")  # fmt: skip
FILES: dict[str, str | bytes] = {
    "morning.csv": scenarios.PROFILE,
    "untimed.csv": re.sub(r"# valid.*\n", "", scenarios.PROFILE),
}
GOOD: dict[str, str | bytes] = {"given.txt": profiles.GOOD}


def _without(*options: str) -> tuple[str, ...]:
    kept = list(FIRST_USE)
    for option in options:
        at = kept.index(option)
        del kept[at : at + 2]
    return tuple(kept)


def _rows() -> list[Row]:
    rows = [Row(f"profile: {name}", {"given.txt": data}, FIRST_USE, 1, ("given.txt", *parts))
            for name, (data, parts) in profiles.REFUSED.items()]  # fmt: skip
    for old, new, said in scenarios.SCENARIOS:
        text = scenarios.GOOD.replace(old, new, 1)
        rows.append(
            Row(f"scenario: {' / '.join(said[:2])}", {**FILES, "case.toml": text}, ("case.toml",), 1, tuple(said))
        )
    rest = re.sub(r"\[surface\][^\[]*|\[weather\][^\[]*", "", scenarios.GOOD)
    for section, table, said in scenarios.TABLES:
        files = {**FILES, "case.toml": f"{rest}{section}\n"}
        if table is not None:
            files["w.csv"] = table
        rows.append(Row(f"table: {' / '.join(said[:2])}", files, ("case.toml",), 1, tuple(said)))
    rows += [
        Row("no such scenario", {}, ("nowhere.toml",), 1, ("nowhere.toml", "no such file")),
        Row("a folder for a scenario", {}, (".",), 1, ("cannot be read",)),
        Row("a binary scenario", {"case.toml": b"\x00\x01"}, ("case.toml",), 1, ("case.toml", "binary")),
        Row("an empty scenario", {"case.toml": ""}, ("case.toml",), 1, ("case.toml", "is empty")),
        Row("a latin-1 scenario", {"case.toml": b"title = '\xe9'\n"}, ("case.toml",), 1, ("case.toml", "not UTF-8")),
        Row("no such profile", {}, FIRST_USE, 1, ("given.txt", "No such file")),
        Row("unknown cover", GOOD, (*FIRST_USE, "--cover", "short gras"), 2, ("short gras", "short grass")),
        Row("bad zone", GOOD, (*_without("--zone"), "--zone", "Mars/Base"), 2, ("'Mars/Base'", "time zone")),
        Row("flags missing", GOOD, _without("--zone", "--latitude"), 2, ("--latitude", "--zone")),
        Row("naive time", GOOD, (*_without("--valid"), "--valid", "2026-07-01T12:00"), 2, ("no offset", "add Z")),
        Row("no time at all", GOOD, (*_without("--valid"), "--valid", "noon"), 2, ("'noon'", "ISO 8601")),
        Row("latitude 140", GOOD, (*_without("--latitude"), "--latitude", "140"), 2, ("140", "-90")),
        Row("cloud in percent", GOOD, (*FIRST_USE, "--cloud", "40"), 2, ("40", "--cloud")),
        Row("negative hours", GOOD, (*_without("--hours"), "--hours", "-3"), 2, ("-3", "--hours")),
        Row("case and profile", {**GOOD, **FILES, "case.toml": scenarios.GOOD}, ("case.toml", *FIRST_USE), 2, ("exclude",)),
        Row("flags beside a case", {**FILES, "case.toml": scenarios.GOOD}, ("case.toml", "--cover", "stubble"), 2,
            ("--cover", "--profile")),
        Row("unknown option", {}, ("--cloudy",), 2, ("--cloudy",)),
        Row("unknown units", {}, ("--units", "imperial"), 2, ("imperial", "metric")),
        Row("picture without an ending", {}, ("--picture", "day.jpg"), 2, ("day.jpg", ".png")),
        Row("output into no folder", GOOD, (*FIRST_USE, "--json", "none/day.json"), 1, ("none/day.json", "make the folder")),
        Row("a folder as output", GOOD, (*FIRST_USE, "--json", "."), 1, ("is a folder", "name a file")),
        Row("output over its input", GOOD, (*FIRST_USE, "--json", "given.txt"), 2, ("given.txt",)),
    ]  # fmt: skip
    return rows


MALFORMED = _rows()


def test_the_table_is_long_and_of_every_kind() -> None:
    assert len(MALFORMED) >= 40
    assert {row.code for row in MALFORMED} == {1, 2}
    assert len(names()) >= 10


@pytest.mark.parametrize("row", MALFORMED, ids=[row.name for row in MALFORMED])
def test_malformed_input_is_refused_in_one_line(row: Row, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for name, data in row.files.items():
        (tmp_path / name).write_bytes(data if isinstance(data, bytes) else data.encode())
    monkeypatch.chdir(tmp_path)
    line = one_line(run(*row.arguments, "--accept-doubt"), row.code, row.parts)
    assert row.code == 2 or "; " in line, "a remedy is named"
    assert {path.name for path in tmp_path.iterdir()} == set(row.files), "nothing is left behind"


@pytest.mark.parametrize("name", ["windows line ends", "pressure in Pa", "reversed", "duplicate level", "nan cells"])
def test_a_repaired_profile_is_answered_and_the_repair_named(
    name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    data, repair = profiles.REPAIRED[name]
    (tmp_path / "given.txt").write_bytes(data if isinstance(data, bytes) else data.encode())
    monkeypatch.chdir(tmp_path)
    result = run(*FIRST_USE, "--accept-doubt")
    assert result.exit_code == 0, result.stderr
    if repair is not None:
        assert repair in result.stdout
