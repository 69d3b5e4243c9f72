"""No command of ours speaks of permission on any bundled case, in text, files, page or help; every answer carries its cautions."""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from click import Context
from click.testing import CliRunner
from matplotlib.figure import Figure
from matplotlib.text import Text

from forcing.bundled import bundled, bundled_names
from forcing.scenario import load
from slab import pictures, pictures_compare, pictures_sounding
from slab.commands.main import main
from slab.pictures_spray import spray_page

FORBIDDEN = re.compile(r"\b(safe|legal|permitted|ok|approved|go|green light)\b", re.IGNORECASE)
CASES = bundled_names()
GENERAL = ("G1", "G2", "G3", "G4", "G5")
CODES = {
    "forecast": GENERAL, "spray": ("S1", "S2", "S3", "S4", "S5", "G1", "G2", "G4", "G5"),
    "compare": ("H1", "H2", "G2", "G4", "G5"),
}  # fmt: skip
REFUSED = ("compare", "southern_wheat")
"""Given fluxes leave nothing to compare."""
COMMANDS = (*CODES, "sounding", "covers")
PAGES: dict[str, Callable[..., Figure]] = {
    "forecast": pictures.day, "spray": spray_page, "compare": pictures_compare.page, "sounding": pictures_sounding.page,
}  # fmt: skip
WORDS = {
    "forecast": ["--hours", "24"], "spray": ["--hours", "12", "--field-below", "5"],
    "compare": ["--hours", "8", "--change", "albedo +0.10"],
}  # fmt: skip


def own_words(text: str) -> list[str]:
    """Words of permission in what was written, without file names, which are the user's words."""
    return FORBIDDEN.findall(re.sub(r"\S*[/\\]\S*", "", text))


def answered(*words: str) -> str:
    """Text and remarks of a call that ends with 0 or a doubt."""
    result = CliRunner().invoke(main, list(words))
    assert result.exit_code in (0, 3), result.output
    return result.stdout + "\n" + result.stderr


def words_on(figure: Figure) -> str:
    return "\n".join(one.get_text() for one in figure.findobj(Text) if isinstance(one, Text))


def missing(text: str, codes: tuple[str, ...]) -> list[str]:
    return [code for code in codes if re.search(rf"\b{code}\b", text) is None]


@pytest.mark.parametrize(
    ("command", "case"), [(command, case) for command in CODES for case in CASES if (command, case) != REFUSED]
)
def test_a_run_never_speaks_of_permission_and_carries_its_cautions(command: str, case: str, tmp_path: Path) -> None:
    out = tmp_path / "a.json"
    files = ["--json", str(out), "--csv", str(tmp_path / "a.csv")]
    if command == "spray":
        files += ["--record", str(tmp_path / "r.csv")]
    text = answered(command, str(bundled(case)), *WORDS[command], "--units", "us", *files)
    assert own_words(text) == []
    assert missing(text, CODES[command]) == []
    for path in tmp_path.iterdir():
        assert own_words(path.read_text(encoding="utf-8")) == [], path.name
    document: Any = json.loads(out.read_text(encoding="utf-8"))
    assert missing(" ".join(one["code"] for one in document["cautions"]), CODES[command]) == []
    assert own_words(words_on(PAGES[command](document))) == []


@pytest.mark.parametrize("case", CASES)
def test_a_sounding_never_speaks_of_permission_and_carries_its_cautions(case: str, tmp_path: Path) -> None:
    scenario = load(bundled(case))
    given: Any = scenario.settings["profile"]
    out, own, valid = tmp_path / "a.json", scenario.site, scenario.profile.valid.isoformat()
    text = answered("sounding", str(given["file"]), "--valid", valid, "--latitude", f"{own.latitude:g}",
                    "--longitude", f"{own.longitude:g}", "--json", str(out))  # fmt: skip
    assert own_words(text) == []
    assert missing(text, ("G3", "A1")) == []
    answer = out.read_text(encoding="utf-8")
    assert own_words(answer) == []
    assert own_words(words_on(PAGES["sounding"](json.loads(answer)))) == []


@pytest.mark.parametrize("names", [[], ["short grass"], ["70% short grass + 30% deciduous forest"]])
def test_the_covers_never_speak_of_permission(names: list[str], tmp_path: Path) -> None:
    out, table = tmp_path / "a.json", tmp_path / "a.csv"
    text = answered("covers", *names, "--json", str(out), "--csv", str(table))
    for words in (text, out.read_text(encoding="utf-8"), table.read_text(encoding="utf-8")):
        assert own_words(words) == []


@pytest.mark.parametrize("command", main.list_commands(Context(main)))
def test_help_never_speaks_of_permission(command: str) -> None:
    text = answered(command, "--help")
    assert text.startswith("Example")
    assert own_words(text) == []


def test_the_help_of_the_program_names_these_commands_and_no_word_of_permission() -> None:
    text = answered("--help")
    assert own_words(text) == []
    assert set(COMMANDS) <= set(main.list_commands(Context(main)))


def test_a_refusal_never_speaks_of_permission() -> None:
    command, case = REFUSED
    result = CliRunner().invoke(main, [command, str(bundled(case)), *WORDS[command]])
    assert result.exit_code == 1
    assert own_words(result.stderr) == []


@pytest.mark.parametrize(
    "bad", ["It is safe.", "You may GO now", "legal", "ok", "a green light", "Approved", "permitted"]
)
def test_a_word_of_permission_would_be_found(bad: str) -> None:
    assert FORBIDDEN.search(bad) is not None


@pytest.mark.parametrize("good", ["permit", "unsafe", "token", "illegal", "ago", "goes"])
def test_other_words_are_left_alone(good: str) -> None:
    assert FORBIDDEN.search(good) is None
