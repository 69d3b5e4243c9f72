"""Files are shown as bundled or as the user named them: no output says where something lies on this machine."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

import forcing
from forcing.bundled import DEFAULT, bundled, bundled_as, folder, located
from forcing.errors import ScenarioError
from forcing.named_files import shown_settings, shown_source
from forcing.scenario import load, with_run, with_setting, write_toml
from slab.commands.main import main

ALL_OF_FORECAST = ("--json", "--csv", "--netcdf", "--write", "--picture")
FILES = {
    ("forecast", "--hours", "3", "--accept-doubt"): ALL_OF_FORECAST,
    ("spray", "--hours", "24", "--now", "2026-07-14T18:00Z"): ("--json", "--csv", "--record"),
    ("compare", "--hours", "3", "--change", "albedo +0.10", "--accept-doubt"): ("--json", "--csv", "--netcdf"),
    ("compare", "--days", "dry", "--hours", "3", "--change", "irrigation", "--accept-doubt"): ("--json", "--netcdf"),
    (
        "forecast", "--profile", f"bundled:{DEFAULT}.csv", "--zone", "Etc/GMT+6", "--latitude", "39.2", "--longitude", "-98.6",
        "--elevation", "330", "--hours", "3", "--accept-doubt",
    ): ALL_OF_FORECAST,
}  # fmt: skip
ENDINGS = {"--json": "json", "--csv": "csv", "--netcdf": "nc", "--write": "toml", "--picture": "svg", "--record": "csv"}


def run(*words: str) -> Result:
    return CliRunner().invoke(main, list(words))


@pytest.mark.parametrize("words", FILES, ids=lambda words: f"{words[0]} {words[1]}")
def test_no_output_says_where_the_package_lies(words: tuple[str, ...], tmp_path: Path) -> None:
    outputs = {flag: tmp_path / f"{flag[2:]}.{ENDINGS[flag]}" for flag in FILES[words]}
    result = run(*words, *(word for flag, path in outputs.items() for word in (flag, str(path))))
    assert result.exit_code == 0, result.output
    texts = {flag: path.read_bytes().decode("utf-8", "replace") for flag, path in outputs.items()}
    texts["stdout"], texts["stderr"] = result.stdout, result.stderr
    places = {str(Path(forcing.__file__).parents[1]), str(folder()), str(folder().resolve())}
    places |= {Path(place).as_posix() for place in places} | {json.dumps(place)[1:-1] for place in places}
    for flag, text in texts.items():
        for place in (*places, str(Path.cwd())):
            assert place not in text, flag
    assert any("bundled" in text or "--days" in words for text in texts.values())


def test_a_bundled_case_written_elsewhere_reloads_and_gives_the_same_numbers(tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    first = json.loads(run("forecast", "--hours", "3", "--write", str(path), "--json", "-").stdout)
    assert f'\nfile = "bundled:{DEFAULT}.csv"' in path.read_text(encoding="utf-8")
    second = json.loads(run("forecast", str(path), "--json", "-").stdout)
    assert second["series"] == first["series"]
    assert second["run"]["settings"]["profile"] == first["run"]["settings"]["profile"]
    assert (first["run"]["scenario"], second["run"]["scenario"]) == (f"bundled: {DEFAULT}", str(path))


def test_every_kind_of_file_may_be_a_bundled_one(tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    pattern = load(bundled("humid_lowland"))
    path.write_text(pattern.text.replace('"humid_lowland', '"bundled:humid_lowland'), encoding="utf-8")
    case = load(path)
    assert case.settings == pattern.settings
    assert case.weather.series.keys() == pattern.weather.series.keys()
    assert case.later is not None
    fluxes = with_setting(load(bundled("southern_wheat")), "run.hours", 2.0)
    assert fluxes.fluxes is not None
    written = write_toml(fluxes)
    assert 'fluxes = "bundled:southern_wheat_fluxes.csv"' in written
    path.write_text(written, encoding="utf-8")
    assert load(path).settings == fluxes.settings


def test_beside_the_bundled_files_names_stay_relative() -> None:
    text = write_toml(load(bundled()), beside=folder() / "written.toml")
    assert f'\nfile = "{DEFAULT}.csv"' in text


def test_own_files_are_shown_as_they_were_named(tmp_path: Path) -> None:
    (tmp_path / "data").mkdir()
    shutil.copy(folder() / f"{DEFAULT}.csv", tmp_path / "data" / "morning.csv")
    path = tmp_path / "mine.toml"
    text = bundled().read_text(encoding="utf-8").replace(f'"{DEFAULT}.csv"', '"data/../data/morning.csv"')
    path.write_text(text, encoding="utf-8")
    case = load(path)
    for one in (case, with_run(case, hours=3.0), with_setting(with_run(case, hours=3.0), "surface.soil_moisture", 0.9)):
        assert shown_settings(one)["profile"] == {"file": "data/../data/morning.csv"}
        assert shown_source(one) == str(path)
    other = with_setting(case, "profile.file", str(folder() / f"{DEFAULT}.csv"))
    assert shown_settings(other)["profile"] == {"file": f"bundled: {DEFAULT}.csv"}
    assert case.settings["profile"] == {"file": str((tmp_path / "data" / "morning.csv").resolve())}


@pytest.mark.parametrize("name", ["nowhere.csv", "../pyproject.toml", "", f"{DEFAULT}.toml"])
def test_an_unknown_bundled_file_is_refused_with_its_key(name: str, tmp_path: Path) -> None:
    with pytest.raises(ScenarioError, match="no bundled file"):
        located(f"bundled:{name}", tmp_path)
    path = tmp_path / "mine.toml"
    path.write_text(f'[site]\ntime_zone = "UTC"\n[profile]\nfile = "bundled:{name}"\n', encoding="utf-8")
    with pytest.raises(ScenarioError, match=r"mine\.toml: \[profile\] file: no bundled file"):
        load(path)


def test_a_file_of_the_same_name_elsewhere_is_not_bundled(tmp_path: Path) -> None:
    copy = tmp_path / f"{DEFAULT}.csv"
    shutil.copy(folder() / copy.name, copy)
    assert bundled_as(copy) is None
    assert bundled_as(folder() / copy.name) == copy.name
    assert bundled_as(folder() / "nowhere.csv") is None
