"""The house rules, read from the sources: arrows, heavy imports, sizes, words. Each rule is also shown a bad sample."""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator, Mapping
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
PACKAGES = ("forcing", "slab")

FLOORS = (
    (re.compile(r"forcing(\..*)?"), 0),
    (re.compile(r"slab\.(growth|column|tops|night|night_\w+)"), 1),
    (re.compile(r"slab\.cycle"), 2),
    (re.compile(r"slab\.export"), 3),
    (re.compile(r"slab\.products(\..*)?"), 4),
    (re.compile(r"slab\.pictures\w*"), 5),
    (re.compile(r"slab\.commands(\..*)?"), 6),
)
"""Modules that stand on no floor (helpers) may be used from any, but hand on what they import."""

HEAVY = ("scipy", "matplotlib", "mpl_toolkits", "numba")
MAY_IMPORT_HEAVY = {("forcing.speed", "numba")}
DRAWS = re.compile(r"slab\.pictures\w*")
"""Modules that draw import matplotlib at their top; nothing else may import them at its own."""
LONGEST_FILE = 400
LONGEST_FUNCTION = 60

VERDICTS = re.compile(r"\b(safe|legal|permitted|ok|approved|green light)\b", re.IGNORECASE)
"""Verdicts are the user's: no text of ours says them."""

# the words are put together here so that this file does not contain them
LEFTOVERS = re.compile(
    "|".join(
        (
            r"\bTO" + r"DO\b",
            r"\bFIX" + r"ME\b",
            r"\bXX" + r"X\b",
            r"\bHA" + r"CK\b",
            r"(?i:\bpha" + r"se \d)",
            r"(?i:\biss" + r"ue #?\d)",
            r"(?i:\blec" + r"tures?\b)",
            r"(?i:\btrans" + r"cripts?\b)",
            r"(?i:\bwork in pro" + r"gress\b)",
            r"(?i:\blanguage mo" + r"del\b)",
            r"(?i:\bassis" + r"tant\b)",
            r"(?<![\w.])/(?:t" + r"mp|w" + r"ork|o" + r"pt)/",
        )
    )
)
PLANS = re.compile(
    "|".join((r"\bDES" + r"IGN\b", r"\bTRA" + r"DE\b", r"\bNIG" + r"HT\.md\b", r"(?i:\bcontr" + r"act C\d)"))
)
"""Papers that a reader of the sources does not have: a source says its reason itself, or names what is published."""
TEXT_ENDINGS = {".py", ".toml", ".csv", ".txt", ".md"}


class Import:
    """One import: the module it names, its line, whether it runs on import and whether it is for types only."""

    def __init__(self, target: str, line: int, *, top: bool, types: bool) -> None:
        self.target, self.line, self.top, self.types = target, line, top, types


def imports(source: str, module: str, *, package: bool = False) -> list[Import]:
    """All imports of a source, relative ones resolved; `from a import b` gives both a and a.b."""
    found: list[Import] = []

    def visit(node: ast.AST, top: bool, types: bool) -> None:
        if isinstance(node, ast.Import):
            found.extend(Import(alias.name, node.lineno, top=top, types=types) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            parts = module.split(".")
            drop = node.level - (1 if package else 0)
            stem = parts[: len(parts) - drop] if node.level else []
            base = ".".join([*stem, *([node.module] if node.module else [])])
            found.append(Import(base, node.lineno, top=top, types=types))
            found.extend(Import(f"{base}.{alias.name}", node.lineno, top=top, types=types) for alias in node.names)
        inside = isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda)
        if isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test):
            for statement in node.body:
                visit(statement, top, True)
            for statement in node.orelse:
                visit(statement, top, types)
            return
        for child in ast.iter_child_nodes(node):
            visit(child, top and not inside, types)

    visit(ast.parse(source), True, False)
    return found


def edges(sources: Mapping[str, str], *, types: bool, packages: frozenset[str] = frozenset()) -> dict[str, set[str]]:
    """Which module of ours names which, also inside functions; with or without imports for types only."""
    return {
        module: {
            one.target
            for one in imports(source, module, package=module in packages)
            if one.target in sources and one.target != module and (types or not one.types)
        }
        for module, source in sources.items()
    }


def floor(module: str) -> int | None:
    """Give the floor that a module stands on, None for a helper."""
    return next((level for pattern, level in FLOORS if pattern.fullmatch(module)), None)


def arrows_back(graph: Mapping[str, set[str]]) -> list[str]:
    """Chains of imports by which a module reaches a higher floor; `forcing` may reach nothing of `slab` at all."""
    faults = []
    for start in graph:
        level = floor(start)
        if level is None:
            continue
        queue: list[tuple[str, ...]] = [(start,)]
        seen = {start}
        while queue:
            chain = queue.pop(0)
            for target in sorted(graph.get(chain[-1], ())):
                reached = floor(target)
                higher = reached is not None and reached > level
                if higher or (start.startswith("forcing") and target.startswith("slab")):
                    faults.append(" -> ".join((*chain, target)))
                elif target not in seen:
                    seen.add(target)
                    queue.append((*chain, target))
    return faults


def users_of_commands(graph: Mapping[str, set[str]]) -> list[str]:
    """Modules outside `slab.commands` that import it."""
    return [
        f"{module} -> {target}"
        for module, targets in graph.items()
        for target in sorted(targets)
        if target.startswith("slab.commands") and not module.startswith("slab.commands")
    ]


def circles(graph: Mapping[str, set[str]]) -> list[str]:
    """Modules that reach themselves."""
    faults = []
    for start in graph:
        queue, seen = list(graph[start]), set(graph[start])
        while queue:
            for target in graph.get(queue.pop(), ()):
                if target not in seen:
                    seen.add(target)
                    queue.append(target)
        if start in seen:
            faults.append(start)
    return faults


def heavy_imports(source: str, module: str) -> list[str]:
    """Imports at the top of a module, guarded or not, that slow every start."""
    return [
        f"{module}, line {one.line}: {one.target}"
        for one in imports(source, module)
        if one.top
        and not one.types
        and (one.target.split(".")[0] in HEAVY or DRAWS.fullmatch(one.target))
        and (module, one.target.split(".")[0]) not in MAY_IMPORT_HEAVY
        and not DRAWS.fullmatch(module)
    ]


def too_long(source: str, name: str) -> list[str]:
    """Files over 400 lines and functions over 60, docstring apart."""
    faults = []
    length = len(source.splitlines())
    if length > LONGEST_FILE:
        faults.append(f"{name}: {length} lines")
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            size = (node.end_lineno or node.lineno) - node.lineno + 1
            if ast.get_docstring(node) is not None:
                size -= (node.body[0].end_lineno or 0) - node.body[0].lineno + 1
            if size > LONGEST_FUNCTION:
                faults.append(f"{name}, line {node.lineno}: {node.name} has {size} lines")
    return faults


def verdicts(source: str, name: str) -> list[str]:
    """Words of judgement in string literals, docstrings included."""
    return [
        f"{name}, line {node.lineno}: {match.group()!r}"
        for node in ast.walk(ast.parse(source))
        if isinstance(node, ast.Constant) and isinstance(node.value, str)
        for match in VERDICTS.finditer(node.value)
    ]


def leftovers(text: str, name: str) -> list[str]:
    """Words about how the project was made or papers kept apart from it, in code, comments, data or the file name."""
    return [
        f"{name}, line {number}: {match.group()!r}"
        for number, line in enumerate([name, *text.splitlines()])
        for pattern in (LEFTOVERS, PLANS)
        for match in pattern.finditer(line)
    ]


def modules() -> dict[str, Path]:
    """Files of both packages by module name."""
    found = {}
    for package in PACKAGES:
        for path in sorted((ROOT / package).rglob("*.py")):
            parts = path.relative_to(ROOT).with_suffix("").parts
            found[".".join(parts[:-1] if parts[-1] == "__init__" else parts)] = path
    return found


def texts() -> Iterator[Path]:
    """Every text file of the project."""
    for folder in (*PACKAGES, "tests", "scenarios"):
        for path in sorted((ROOT / folder).rglob("*")):
            if path.suffix in TEXT_ENDINGS and "__pycache__" not in path.parts:
                yield path
    yield from sorted(path for path in ROOT.glob("*.*") if path.suffix in TEXT_ENDINGS)


@pytest.fixture(scope="module")
def sources() -> dict[str, str]:
    return {name: path.read_text(encoding="utf-8") for name, path in modules().items()}


@pytest.fixture(scope="module")
def packages() -> frozenset[str]:
    return frozenset(name for name, path in modules().items() if path.name == "__init__.py")


def test_both_packages_are_walked(sources: dict[str, str], packages: frozenset[str]) -> None:
    graph = edges(sources, types=False, packages=packages)
    assert {"forcing.air", "forcing.speed", "slab.growth", "slab.tops"} <= set(graph)
    assert "forcing.speed" in graph["forcing.air"]


def test_arrows_point_one_way(sources: dict[str, str], packages: frozenset[str]) -> None:
    graph = edges(sources, types=True, packages=packages)
    assert arrows_back(graph) == []
    assert users_of_commands(graph) == []


def test_no_circles(sources: dict[str, str], packages: frozenset[str]) -> None:
    assert circles(edges(sources, types=False, packages=packages)) == []


def test_no_heavy_import_at_the_top(sources: dict[str, str]) -> None:
    assert [fault for name, source in sources.items() for fault in heavy_imports(source, name)] == []


def test_files_and_functions_stay_small() -> None:
    faults = [
        fault
        for path in modules().values()
        for fault in too_long(path.read_text(encoding="utf-8"), path.relative_to(ROOT).as_posix())
    ]
    assert faults == []


def test_no_verdicts(sources: dict[str, str]) -> None:
    assert [fault for name, source in sources.items() for fault in verdicts(source, name)] == []


def test_no_leftovers() -> None:
    faults = [
        fault
        for path in texts()
        for fault in leftovers(path.read_text(encoding="utf-8", errors="replace"), path.relative_to(ROOT).as_posix())
    ]
    assert faults == []


BAD_ARROWS = {
    "forcing uses slab": {"forcing.air": "from slab import helper", "slab.helper": ""},
    "forcing uses slab in a function": {
        "forcing.air": "def f():\n    import slab.helper",
        "slab.helper": "",
    },
    "forcing uses slab for types": {
        "forcing.air": "from typing import TYPE_CHECKING\nif TYPE_CHECKING:\n    from slab.helper import Thing",
        "slab.helper": "",
    },
    "growth uses cycle": {"slab.growth": "from slab.cycle import run", "slab.cycle": ""},
    "night part uses cycle": {"slab.night_step": "from . import cycle", "slab.cycle": ""},
    "cycle uses products": {"slab.cycle": "from .products.forecast import text", "slab.products.forecast": ""},
    "products use pictures": {"slab.products.forecast": "import slab.pictures_sky", "slab.pictures_sky": ""},
    "products use commands": {"slab.products.forecast": "from slab.commands import main", "slab.commands.main": ""},
    "tops reach cycle by a helper": {
        "slab.tops": "import slab.helper",
        "slab.helper": "import slab.cycle",
        "slab.cycle": "",
    },
}


@pytest.mark.parametrize("bad", BAD_ARROWS.values(), ids=BAD_ARROWS)
def test_an_arrow_back_is_seen(bad: dict[str, str]) -> None:
    assert arrows_back(edges(bad, types=True)) != []


def test_right_arrows_are_left_alone() -> None:
    good = {
        "slab.commands.main": "def f():\n    from slab.products.forecast import text",
        "slab.products.forecast": "from .. import cycle, export",
        "slab.export": "import slab.cycle",
        "slab.cycle": "from slab.growth import step\nfrom forcing.air import exner",
        "slab.growth": "import forcing.air",
        "forcing.air": "import math",
    }
    graph = edges(good, types=True)
    assert graph["slab.products.forecast"] == {"slab.cycle", "slab.export"}
    assert arrows_back(graph) == []
    assert users_of_commands(graph) == []
    assert circles(graph) == []


def test_a_user_of_commands_is_seen() -> None:
    bad = {"slab.helper": "from slab.commands import main", "slab.commands.main": ""}
    assert users_of_commands(edges(bad, types=True)) == ["slab.helper -> slab.commands.main"]


def test_a_circle_is_seen() -> None:
    bad = {"slab.one": "import slab.two", "slab.two": "def f():\n    from slab import one"}
    assert circles(edges(bad, types=False)) == ["slab.one", "slab.two"]


@pytest.mark.parametrize(
    "bad",
    [
        "import scipy",
        "from matplotlib import pyplot",
        "import numpy\nimport scipy.optimize as so",
        "try:\n    import numba\nexcept ImportError:\n    pass",
        "class A:\n    import matplotlib",
    ],
)
def test_a_heavy_import_is_seen(bad: str) -> None:
    assert len(heavy_imports(bad, "slab.sample")) > 0


@pytest.mark.parametrize(
    ("good", "module"),
    [
        ("def f():\n    import scipy.io", "slab.sample"),
        ("if TYPE_CHECKING:\n    from matplotlib.axes import Axes", "slab.sample"),
        ("if COMPILED:\n    import numba", "forcing.speed"),
        ("import scipyish", "slab.sample"),
    ],
)
def test_a_late_import_is_left_alone(good: str, module: str) -> None:
    assert heavy_imports(good, module) == []


def test_a_long_file_or_function_is_seen() -> None:
    assert too_long("x = 1\n" * 401, "sample.py") == ["sample.py: 401 lines"]
    assert too_long("x = 1\n" * 400, "sample.py") == []
    assert too_long("def f():\n" + "    x = 1\n" * 60, "sample.py") == ["sample.py, line 1: f has 61 lines"]
    assert too_long("def f():\n" + "    x = 1\n" * 59, "sample.py") == []


@pytest.mark.parametrize(
    "bad", ['"Spraying is safe"', 'f"{x} OK"', '"a Green Light"', '"ok"', '"""Legal."""', '"permitted, approved"']
)
def test_a_verdict_is_seen(bad: str) -> None:
    assert len(verdicts(f"x = 1\nf({bad})", "sample.py")) > 0


@pytest.mark.parametrize("good", ['"unsafe_flag"', '"book, token, illegally"', "safe", "# legal"])
def test_other_words_are_left_alone(good: str) -> None:
    assert verdicts(f"f({good}\n)", "sample.py") == []


@pytest.mark.parametrize(
    "bad",
    [
        "# TO" + "DO: later",
        "x = 1  # FIX" + "ME",
        "as of pha" + "se 2",
        "see iss" + "ue #12",
        'open("/t' + 'mp/x")',
        "from the Lec" + "ture",
        "LONGEST = 3  # (DES" + "IGN section 7)",
        "common practice, TRA" + "DE 1.5",
        "see NIG" + "HT.md",
        "the document (contr" + "act C4)",
    ],
)
def test_a_leftover_is_seen(bad: str) -> None:
    assert leftovers("\n\n" + bad, "sample.py") != []
    assert leftovers("", bad) != []


@pytest.mark.parametrize(
    "good", ["phase of the wave", "1/tmp/2", "an issue of water", "the stub of a tree", "design and trade"]
)
def test_plain_words_are_left_alone(good: str) -> None:
    assert leftovers(good, "sample.py") == []
