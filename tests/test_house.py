"""The shape of the package: four rooms that data pass one way, no plant in the code, one public face."""

from __future__ import annotations

import ast
import csv
import importlib
import io
import re
import subprocess
import sys
import tokenize
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from conftest import ROOT
from ruamel.yaml import YAML

import olefinlp

PACKAGE = Path(olefinlp.__file__).resolve().parent
ROOMS = ("inputs", "lp", "answers", "outputs")
"""From top to bottom: a room imports only from itself and from rooms above."""
MODULES = sorted(p for p in PACKAGE.rglob("*.py") if "starter" not in p.relative_to(PACKAGE).parts)
SOLVER_STACK = {"pyomo", "highspy"}
TOP_LEVEL = {"README.md", "DEVELOPERS.md", "pyproject.toml", "LICENSE", "olefinlp", "models", "scenarios", "tests"}
NAMED_IN_FILES = (
    "feeds",
    "side_streams",
    "furnace_groups",
    "cuts",
    "outlets",
    "utilities",
    "conversions",
    "ratio_limits",
    "limits",
)
NAME_COLUMNS = {"component": "components.csv", "unit": "recovery_units.csv"}
TRADE_WORDS = {
    "hydrogen": "an element: its balance is worked out from formulas, whatever the plant",
    "fuel": "what a utility measured in heat is for; a word of sentences, not looked up",
    "power": "a way to measure a utility, as mass and heat are",
    "carbon": "an element, as hydrogen is",
}
"""Words that the code may hold although a shipped plant uses them as names, and why."""


def short(path: Path) -> str:
    """A module as people name it."""
    return path.relative_to(PACKAGE).as_posix()


def imports(path: Path) -> Iterator[tuple[str, int]]:
    """Every module that a file imports, anywhere in it, with the line."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from ((alias.name, node.lineno) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{short(path)}:{node.lineno} imports relatively"
            yield node.module or "", node.lineno
            if node.module == "olefinlp":
                yield from ((f"olefinlp.{alias.name}", node.lineno) for alias in node.names)


def room_of(module: str) -> str | None:
    """The room that a dotted module stands in."""
    parts = module.split(".")
    return parts[1] if len(parts) > 1 and parts[0] == "olefinlp" and parts[1] in ROOMS else None


# ---------------------------------------------------------------------------------- rooms


@pytest.mark.parametrize("path", MODULES, ids=short)
def test_a_room_imports_only_from_rooms_above(path: Path) -> None:
    """inputs → lp → answers → outputs; only the command line and the public face see all of them."""
    here = path.relative_to(PACKAGE).parts[0]
    if here not in ROOMS:
        return
    below = ROOMS[ROOMS.index(here) + 1 :]
    wrong = [f"line {line}: {name}" for name, line in imports(path) if room_of(name) in below or name == "olefinlp.cli"]
    assert wrong == []


@pytest.mark.parametrize("path", MODULES, ids=short)
def test_only_lp_knows_the_algebra_and_the_solver(path: Path) -> None:
    """Nothing in inputs, nothing after lp. The command line may load Pyomo early, never use it."""
    if path.relative_to(PACKAGE).parts[0] == "lp":
        return
    found = {(name, line) for name, line in imports(path) if name.partition(".")[0] in SOLVER_STACK}
    if path.name in ("cli.py", "__init__.py") and path.parent == PACKAGE:
        lines = path.read_text(encoding="utf-8").splitlines()
        early = re.compile(r"import pyomo\.(environ|core)  # noqa: F401")
        found = {(name, line) for name, line in found if not early.match(lines[line - 1].strip())}
    assert found == set()


def test_the_files_alone_need_no_solver() -> None:
    """Reading and checking works in a process that has neither Pyomo nor HiGHS."""
    code = "import sys; sys.modules['pyomo'] = sys.modules['highspy'] = None\n"
    code += (
        f"from olefinlp.inputs.scenario import read_scenario; read_scenario({str(ROOT / 'scenarios' / 'thermal_cracker.yaml')!r})"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=PACKAGE.parent, capture_output=True, check=False, timeout=120)
    assert done.returncode == 0, done.stderr.decode()


# ---------------------------------------------------------------------------------- public face


def test_the_public_names_are_the_names_that_load() -> None:
    """`__all__`, `dir()` and what is imported lazily are the same list, in order."""
    assert sorted(olefinlp.__all__) == olefinlp.__all__
    assert dir(olefinlp) == olefinlp.__all__
    assert set(olefinlp._HOMES) == set(olefinlp.__all__) - {"__version__"}
    typed = {
        name.asname
        for node in ast.walk(ast.parse((PACKAGE / "__init__.py").read_text(encoding="utf-8")))
        if isinstance(node, ast.ImportFrom)
        for name in node.names
        if name.asname
    }
    assert typed == set(olefinlp._HOMES)
    with pytest.raises(AttributeError, match="has no attribute 'make_plam'"):
        olefinlp.make_plam  # noqa: B018


@pytest.mark.parametrize("name", [name for name in olefinlp.__all__ if name != "__version__"])
def test_each_public_name_says_what_it_is(name: str) -> None:
    """It loads, is what its home calls so, and has a docstring of its own."""
    thing = getattr(olefinlp, name)
    assert thing.__name__ == name
    assert thing is getattr(importlib.import_module(olefinlp._HOMES[name]), name)
    assert (thing.__dict__.get("__doc__") if isinstance(thing, type) else thing.__doc__).strip()


@pytest.mark.parametrize("path", MODULES, ids=short)
def test_each_module_says_what_it_is_for(path: Path) -> None:
    """A docstring whose first line is a sentence."""
    first = (ast.get_docstring(ast.parse(path.read_text(encoding="utf-8"))) or "").partition("\n")[0]
    assert first.endswith((".", ":", "?")) or len(first) > 60, f"{short(path)}: {first!r}"


@pytest.mark.parametrize("path", MODULES, ids=short)
def test_modules_hold_one_idea(path: Path) -> None:
    """Longer than this and a second idea hides inside."""
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 600


# ---------------------------------------------------------------------------------- no plant in the code


def plant_names() -> dict[str, str]:
    """Every name that a shipped plant gives, with the file that gives it."""
    found: dict[str, str] = {}
    for plant in sorted((ROOT / "models").glob("*/plant.yaml")):
        data: dict[str, Any] = YAML(typ="safe", pure=True).load(plant.read_text(encoding="utf-8"))
        for section in NAMED_IN_FILES:
            found |= {str(name): f"{plant.parent.name}: {section}" for name in data.get(section) or {}}
        for utility in (data.get("utilities") or {}).values():
            for kind in ("imports", "exports", "emissions"):
                found |= {str(name): f"{plant.parent.name}: {kind}" for name in utility.get(kind) or {}}
        for cut in data["cuts"].values():
            found |= {str(name): f"{plant.parent.name}: contents" for name in cut.get("content_items") or {}}
        for column, table in NAME_COLUMNS.items():
            with (plant.parent / table).open(encoding="utf-8", newline="") as file:
                found |= {row[column]: f"{plant.parent.name}: {table}" for row in csv.DictReader(file)}
        found[plant.parent.name] = "models"
    return found


def docstring_lines(tree: ast.Module) -> set[int]:
    """Lines of every string that stands alone: docstrings, and texts under a constant."""
    return {
        line
        for node in ast.walk(tree)
        if isinstance(node, ast.Expr) and isinstance(node.value, ast.Constant) and isinstance(node.value.value, str)
        for line in range(node.lineno, (node.end_lineno or node.lineno) + 1)
    }


def words_of_code(path: Path) -> Iterator[tuple[str, int]]:
    """Every name, and every word inside a string, outside docstrings and comments, with its line."""
    text = path.read_text(encoding="utf-8")
    silent = docstring_lines(ast.parse(text))
    kinds = {tokenize.NAME, tokenize.STRING, getattr(tokenize, "FSTRING_MIDDLE", tokenize.STRING)}
    for token in tokenize.generate_tokens(io.StringIO(text).readline):
        if token.type in kinds and token.start[0] not in silent:
            yield from ((word, token.start[0]) for word in re.findall(r"[A-Za-z_][A-Za-z0-9_]*", token.string))


def test_the_words_of_code_are_found(tmp_path: Path) -> None:
    """Names and strings are read, docstrings and comments are not, so that the next test means something."""
    path = tmp_path / "example.py"
    path.write_text('"""About ethane."""\n\nnaphtha = {"full range": f"{pygas} crude_c4"}  # propane\n', encoding="utf-8")
    assert {word for word, _ in words_of_code(path)} >= {"naphtha", "full", "range", "pygas", "crude_c4"}
    assert not {word for word, _ in words_of_code(path)} & {"ethane", "propane"}


def test_the_plants_give_names() -> None:
    """All three plants are looked at."""
    names = plant_names()
    assert {"ethane", "cracked_gas_compressor", "polymer_grade_propylene", "catalytic_crackers", "gasoline_sale"} <= set(names)
    assert len(names) > 80


@pytest.mark.parametrize("path", MODULES, ids=short)
def test_nothing_about_a_plant_is_in_the_code(path: Path) -> None:
    """No component, cut, unit, outlet, feed, group or utility of a shipped plant is a word of the code."""
    names = {name: home for name, home in plant_names().items() if name not in TRADE_WORDS}
    if path == PACKAGE / "starter_files.py":
        names.pop("brackwater", None)  # the folder of the demo: which files are shipped is this module's business
    found = [f"line {line}: {word} ({names[word]})" for word, line in words_of_code(path) if word in names]
    assert found == []


def test_every_allowed_word_is_needed() -> None:
    """A word that the code no longer holds, or no plant uses, leaves the list."""
    used = {word for path in MODULES for word, _ in words_of_code(path)}
    assert set(TRADE_WORDS) <= used & set(plant_names())


# ---------------------------------------------------------------------------------- top level


def test_the_top_level_holds_what_it_should() -> None:
    """Names that git knows, or would take up, at the top of the repository; dot files are free."""
    if not (ROOT / ".git").exists():
        pytest.skip("no git here: this is not a checkout")
    listed = subprocess.run(
        ["git", "ls-files", "--cached", "--others", "--exclude-standard"], cwd=ROOT, capture_output=True, text=True, check=True
    )
    names = {line.partition("/")[0] for line in listed.stdout.splitlines()}
    assert {name for name in names if not name.startswith(".")} <= TOP_LEVEL
    assert names >= TOP_LEVEL


def test_every_plant_and_scenario_is_described_beside_the_files() -> None:
    """User reference stands with the files."""
    for folder in ("models", "scenarios"):
        assert (ROOT / folder / "README.md").stat().st_size > 1000
