"""The `sounding` command and the group around it: exit codes, files, words."""

from __future__ import annotations

import csv
import io
import json
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest
from click.testing import CliRunner, Result
from column import AFTERNOON, BROKEN, column

from forcing.profile import prepare
from forcing.readers import parse
from slab.commands.main import main
from slab.commands.options import Outputs
from slab.products.sounding import describe
from slab.products.sounding_text import levels_csv, text

MOMENT = ["--valid", "2024-06-01T11:00Z"]
PLACE = ["--latitude", "40", "--longitude", "-95", "--elevation", "100"]
ROOT = Path(__file__).resolve().parents[1]


def run(*arguments: str) -> Result:
    return CliRunner().invoke(main, list(arguments))


@pytest.fixture
def morning(tmp_path: Path) -> str:
    """A table of an invented morning with an inversion."""
    made = column(BROKEN, humidity=[0.008, 0.007, 0.002], wind=[2.0, 6.0, 12.0])
    path = tmp_path / "morning.csv"
    path.write_text(levels_csv(describe(made)))
    return str(path)


def test_text_opens_with_a_sentence_and_ends_well(morning: str) -> None:
    result = run("sounding", morning, *MOMENT, *PLACE)
    assert result.exit_code == 0, result.stderr
    assert result.stdout.startswith("At 11:00 UTC on 1 June 2024 ")
    assert "surface inversion" in result.stdout
    assert result.stderr == ""


def test_json_has_the_documented_keys(morning: str) -> None:
    result = run("sounding", morning, *MOMENT, *PLACE, "--json", "-")
    document = json.loads(result.stdout)
    assert document["schema"] == "daylayer/1"
    assert set(document) == {
        "schema", "kind", "summary", "profile", "levels", "repairs", "flags", "definitions", "tops", "tops_range",
        "critical_richardson", "inversion", "inversion_tables", "superadiabatic", "cloud", "heat",
        "precipitable_water_mm", "cautions", "doubts",
    }  # fmt: skip
    lengths = {len(values) for values in document["levels"].values()}
    assert lengths == {document["profile"]["levels"]}
    assert document["superadiabatic"] is None
    assert {top["definition"] for top in document["tops"]} <= set(document["definitions"])
    assert document["profile"]["valid"] == "2024-06-01T11:00:00Z"


def test_every_key_is_documented() -> None:
    from slab.products import sounding

    def names(value: object) -> set[str]:
        if isinstance(value, dict):
            return set(value) | {name for inner in value.values() for name in names(inner)}
        return {name for inner in value for name in names(inner)} if isinstance(value, list) else set()

    document = describe(column(AFTERNOON, humidity=0.008, wind=5.0))
    document["definitions"] = {}
    words = set(re.findall(r"\w+", sounding.__doc__ or ""))
    assert names(document) <= words


def test_missing_is_null_not_a_number() -> None:
    document = describe(column(BROKEN))
    assert document["levels"]["wind_m_s"][0] is None
    assert document["levels"]["dewpoint_C"][0] is None
    assert document["cloud"]["convective_temperature_C"] is None
    assert document["precipitable_water_mm"] is None
    json.dumps(document, allow_nan=False)
    assert "no wind and no humidity" in text(document)


def test_csv_can_be_read_again(morning: str, tmp_path: Path) -> None:
    target = tmp_path / "levels.csv"
    assert run("sounding", morning, *MOMENT, *PLACE, "--csv", str(target), "--quiet").exit_code == 0
    first = prepare(parse(Path(morning).read_bytes(), "a"), elevation=100.0, utc_default=column(BROKEN).valid)
    again = prepare(parse(target.read_bytes(), "b"), elevation=100.0, utc_default=column(BROKEN).valid)
    assert again.theta == pytest.approx(first.theta, abs=0.02)
    assert again.height == pytest.approx(first.height, abs=0.2)
    assert again.u == pytest.approx(first.u, abs=0.02)


def test_us_units_are_feet_knots_and_fahrenheit(morning: str) -> None:
    result = run("sounding", morning, *MOMENT, *PLACE, "--units", "us", "--no-levels")
    assert re.search(r"reaches \d+ ft above ground", result.stdout)
    assert " °F at the ground" in result.stdout
    assert not re.search(r"\d m\b(?!\s*[sgW-])", result.stdout.split("where the top")[0])


def test_heights_inside_words_follow_the_units() -> None:
    from forcing.units import METRIC, US
    from slab.products.sounding import restyle

    words = "never passes 0.25 below the profile's end (6000 m), 10 m/s, 100 m to 4 km, 5 K"
    assert restyle(words, METRIC) == words
    assert restyle(words, US) == (
        "never passes 0.25 below the profile's end (19690 ft), 10 m/s, 330 ft to 13120 ft, 5 K"
    )


def test_release_is_told_in_utc_and_local_solar_time(morning: str) -> None:
    # 11:00 UTC at 95 W: 95 / 15 h = 6 h 20 min behind
    assert "2024-06-01 11:00 UTC, 04:40 local mean solar time" in run("sounding", morning, *MOMENT, *PLACE).stdout


def test_levels_can_be_left_out(morning: str) -> None:
    assert "\nlevels\n" in run("sounding", morning, *MOMENT, *PLACE).stdout
    assert "\nlevels\n" not in run("sounding", morning, *MOMENT, *PLACE, "--no-levels").stdout


def test_quiet_says_nothing(morning: str) -> None:
    result = run("sounding", morning, *MOMENT, *PLACE, "--quiet")
    assert (result.stdout, result.stderr, result.exit_code) == ("", "", 0)


def test_pictures_by_ending(morning: str, tmp_path: Path) -> None:
    for ending, head in (("png", b"\x89PNG"), ("svg", b"<?xml"), ("pdf", b"%PDF")):
        target = tmp_path / f"page.{ending}"
        assert run("sounding", morning, *MOMENT, *PLACE, "--picture", str(target), "--quiet").exit_code == 0
        assert target.read_bytes().startswith(head)


def test_picture_of_dry_calm_air_is_drawn(tmp_path: Path) -> None:
    from slab.pictures_sounding import draw

    for name, points in (("a.png", BROKEN), ("b.png", AFTERNOON)):
        draw(describe(column(points)), tmp_path / name, units="us")
        assert (tmp_path / name).stat().st_size > 20_000


def test_smallest_text_of_the_picture_is_seven_points() -> None:
    from matplotlib.text import Text

    from slab.pictures_sounding import page

    figure = page(describe(column(AFTERNOON, humidity=0.008, wind=5.0)))
    figure.canvas.draw()
    sizes = [item.get_fontsize() for item in figure.findobj(Text) if item.get_text() and item.get_visible()]
    assert min(sizes) >= 7.0


def test_words_beside_the_picture_do_not_cover_each_other() -> None:
    from slab.pictures_sounding import page

    for made in (
        column(BROKEN, humidity=0.006, wind=4.0),
        column(AFTERNOON, humidity=0.008, wind=5.0),
        column(AFTERNOON),
    ):
        figure = page(describe(made))
        figure.canvas.draw()
        boxes = [item.get_window_extent() for item in figure.texts]
        frame = figure.bbox
        for n, box in enumerate(boxes):
            assert frame.x0 <= box.x0, figure.texts[n].get_text()
            assert box.x1 <= frame.x1, figure.texts[n].get_text()
            assert frame.y0 <= box.y0, figure.texts[n].get_text()
            for m in range(n):
                other = boxes[m]
                apart = box.x1 <= other.x0 or other.x1 <= box.x0 or box.y1 <= other.y0 + 1.5 or other.y1 <= box.y0 + 1.5
                assert apart, (figure.texts[n].get_text(), figure.texts[m].get_text())


@pytest.mark.parametrize(
    ("content", "arguments", "code"),
    [
        (b"", MOMENT, 1),
        (b"\x00\x01\x02\x03binary", MOMENT, 1),
        (b"pressure_hPa,temperature_C\n1000,20\n", MOMENT, 1),
        (None, MOMENT, 1),
        (b"pressure_hPa,temperature_C\n1000,20\n900,15\n700,2\n500,-15\n", ["--valid", "2024-06-01T11:00"], 2),
        (b"pressure_hPa,temperature_C\n1000,20\n900,15\n700,2\n500,-15\n", ["--valid", "noon"], 2),
        (b"pressure_hPa,temperature_C\n1000,20\n900,15\n700,2\n500,-15\n", [], 1),
        (b"pressure_hPa,temperature_C\n1000,20\n900,15\n700,2\n500,-15\n", [*MOMENT, "--format", "paper"], 2),
        (b"pressure_hPa,temperature_C\n1000,20\n900,15\n700,2\n500,-15\n", [*MOMENT, "--latitude", "95"], 2),
        (b"pressure_hPa,temperature_C\n1000,20\n900,15\n700,2\n500,-15\n", [*MOMENT, "--picture", "a.gif"], 2),
    ],
)
def test_bad_input_ends_with_one_line_and_its_code(
    content: bytes | None, arguments: list[str], code: int, tmp_path: Path
) -> None:
    path = tmp_path / "in.csv"
    if content is not None:
        path.write_bytes(content)
    target = tmp_path / "out.json"
    result = run("sounding", str(path), *arguments, "--json", str(target))
    assert result.exit_code == code, result.output
    assert "Traceback" not in result.output
    assert result.stdout == ""
    assert sorted(p.name for p in tmp_path.iterdir()) == (["in.csv"] if content is not None else [])
    if code == 1:
        assert result.stderr.startswith("error: ")
        assert result.stderr.count("\n") == 1
        assert "in.csv" in result.stderr


def test_one_bad_output_leaves_none(morning: str, tmp_path: Path) -> None:
    good, bad = tmp_path / "good.json", tmp_path / "no" / "such" / "levels.csv"
    result = run("sounding", morning, *MOMENT, *PLACE, "--json", str(good), "--csv", str(bad))
    assert result.exit_code == 1
    assert "folder does not exist" in result.stderr
    assert result.stdout == ""
    assert sorted(p.name for p in tmp_path.iterdir()) == ["morning.csv"]


def test_the_input_is_never_an_output(morning: str) -> None:
    before = Path(morning).read_bytes()
    assert run("sounding", morning, *MOMENT, *PLACE, "--csv", morning).exit_code == 2
    assert Path(morning).read_bytes() == before


def test_two_outputs_cannot_share_a_place(morning: str, tmp_path: Path) -> None:
    assert run("sounding", morning, *MOMENT, *PLACE, "--json", "-", "--csv", "-").exit_code == 2
    same = str(tmp_path / "x")
    assert run("sounding", morning, *MOMENT, *PLACE, "--json", same, "--csv", same).exit_code == 2
    assert not Path(same).exists()


def test_a_device_is_written_and_not_replaced() -> None:
    with Outputs() as outputs:
        outputs.text("/dev/null", "gone")
    assert not Path("/dev/null").is_file()


def test_a_written_file_has_the_usual_rights(tmp_path: Path) -> None:
    plain = tmp_path / "plain"
    plain.write_text("x")
    with Outputs() as outputs:
        outputs.text(str(tmp_path / "made"), "x")
    assert (tmp_path / "made").stat().st_mode == plain.stat().st_mode


def test_a_doubt_ends_with_three_unless_accepted(tmp_path: Path) -> None:
    deep = column([(0.0, 300.0), (2500.0, 300.2)], humidity=0.006, wind=4.0)
    path = tmp_path / "deep.csv"
    path.write_text(levels_csv(describe(deep)))
    result = run("sounding", str(path), *MOMENT, *PLACE)
    assert result.exit_code == 3
    assert "doubt: the layer reaches the profile's top" in result.stderr
    assert result.stdout != ""
    assert run("sounding", str(path), *MOMENT, *PLACE, "--accept-doubt").exit_code == 0


def test_saturated_air_is_a_doubt() -> None:
    from forcing.air import saturation_humidity

    dry = column(AFTERNOON)
    from dataclasses import replace

    wet = replace(
        dry,
        humidity=dry.humidity + saturation_humidity(float(dry.temperature[0]), float(dry.pressure[0])),
        humidity_known=True,
    )
    assert [one["code"] for one in describe(wet)["doubts"]] == ["saturated_layer"]


def test_help_starts_with_an_example() -> None:
    for arguments in (["-h"], ["--help"], ["sounding", "-h"], ["sounding", "--help"]):
        result = run(*arguments)
        assert result.exit_code == 0
        assert result.stdout.startswith("Example:")


def test_usage_errors_end_with_two() -> None:
    assert run("sounding").exit_code == 2
    assert run("sounding", "a", "--no-such-option").exit_code == 2
    wrong = run("soundin")
    assert wrong.exit_code == 2
    assert "sounding" in wrong.stderr


def test_no_word_that_permits() -> None:
    document = describe(column(AFTERNOON, humidity=0.008, wind=5.0))
    said = text(document) + json.dumps(document) + run("sounding", "-h").stdout + run("-h").stdout
    assert not re.search(r"\b(safe|legal|permitted|ok|approved|go|green light)\b", said, re.IGNORECASE)


def _python(code: str, **extra: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=False, env={**os.environ, **extra}
    )


def test_help_loads_nothing_heavy() -> None:
    code = (
        "import sys\nfrom slab.commands.main import main\n"
        "try:\n    main(['--help'])\nexcept SystemExit:\n    pass\n"
        "print([m for m in ('numpy', 'scipy', 'numba', 'matplotlib') if m in sys.modules], file=sys.stderr)"
    )
    assert _python(code).stderr.strip().endswith("[]")


def test_text_loads_no_pictures(morning: str) -> None:
    code = (
        "import sys\nfrom slab.commands.main import main\n"
        f"try:\n    main(['sounding', {morning!r}, '--valid', '2024-06-01T11:00Z', '--elevation', '100'])\n"
        "except SystemExit:\n    pass\n"
        "print([m for m in ('scipy', 'numba', 'matplotlib') if m in sys.modules], file=sys.stderr)"
    )
    assert _python(code).stderr.strip().endswith("[]")


def test_a_reader_that_leaves_is_no_error(morning: str) -> None:
    code = (
        "import sys\nfrom slab.commands.main import main\n"
        f"main(['sounding', {morning!r}, '--valid', '2024-06-01T11:00Z', '--elevation', '100'])"
    )
    process = subprocess.Popen(
        [sys.executable, "-c", code], cwd=ROOT, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    assert process.stdout is not None
    process.stdout.close()
    assert process.stderr is not None
    assert process.stderr.read() == ""
    process.stderr.close()
    assert process.wait() == 0


def test_text_has_one_row_a_level() -> None:
    made = column(AFTERNOON, humidity=0.008, wind=5.0)
    listed = text(describe(made)).split("\nlevels\n")[1].split("\n\n")[0].splitlines()
    assert len(listed) == 3 + made.height.size
    rows = list(csv.reader(io.StringIO(levels_csv(describe(made)))))
    assert len(rows) == 1 + made.height.size
