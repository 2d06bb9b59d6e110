"""What README.md says can be typed is typed here, in a clean copy of the repository."""

from __future__ import annotations

import itertools
import os
import re
import shlex
import shutil
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from conftest import ROOT

README = (ROOT / "README.md").read_text(encoding="utf-8")
FENCE = re.compile(r"^```[ ]*(\w+)[^\n]*\n(.*?)^```[ ]*$", re.MULTILINE | re.DOTALL)
SHELLS = ("sh", "bash", "shell", "console")
SHIM = """#!/bin/sh
PYTHONPATH="{root}" exec "{python}" {what} "$@"
"""


def blocks(*languages: str) -> list[str]:
    """Fenced blocks of README.md in one of these languages, in order."""
    return [text for language, text in FENCE.findall(README) if language in languages]


def commands() -> Iterator[str]:
    """Every command of the shell blocks: continued lines joined, comments and prompts left out, `&&` taken apart."""
    for language, block in FENCE.findall(README):
        if language not in SHELLS:
            continue
        for line in block.replace("\\\n", " ").splitlines():
            if language == "console":
                if not line.startswith("$ "):
                    continue  # what the command prints
                line = line.removeprefix("$ ")
            text = line.strip()
            if text and not text.startswith("#"):
                yield from (part.strip() for part in text.split("&&"))


def program(command: str) -> tuple[str, ...]:
    """The words of a command, the path of its program left out."""
    words = shlex.split(command, comments=True)
    return (Path(words[0]).name, *words[1:]) if words else ()


def sets_up(command: str) -> bool:
    """Whether a command makes an environment: here the running one stands for it."""
    name, *rest = program(command)
    return name.startswith("pip") or (name.startswith("python") and rest[:2] in (["-m", "venv"], ["-m", "pip"]))


def is_test_command(command: str) -> bool:
    """Whether a command is the test command, which would start this test again."""
    name, *rest = program(command)
    return name == "pytest" or (name.startswith("python") and rest[:2] == ["-m", "pytest"])


TYPED = [command for command in commands() if not sets_up(command) and not is_test_command(command)]


# ---------------------------------------------------------------------------------- what there is


def test_the_readme_has_commands_and_python() -> None:
    """Otherwise the tests below would be about nothing."""
    assert blocks(*SHELLS)
    assert blocks("python")
    assert any(sets_up(command) for command in commands())
    assert any(is_test_command(command) for command in commands())
    assert {program(command)[1] for command in TYPED if program(command)[0] == "olefinlp"} >= {"plan", "check", "export", "new"}


def test_only_commands_that_can_run_here_are_shown() -> None:
    """Anything else would stay untested."""
    assert {program(command)[0] for command in TYPED} <= {"olefinlp", "python", "python3"}


def test_the_test_command_is_the_one_that_every_change_must_pass() -> None:
    """To the letter."""
    script = ROOT / ".ci" / "run"
    if not script.exists():
        pytest.skip("no continuous integration script here")
    (line,) = [text for block in blocks(*SHELLS) for text in block.splitlines() if is_test_command(text.split("&&")[-1].strip())]
    assert line.strip() in script.read_text(encoding="utf-8")


def test_links_lead_somewhere() -> None:
    """Every relative link of the pages for people."""
    for page in ("README.md", "DEVELOPERS.md", "models/README.md", "scenarios/README.md"):
        text = re.sub(r"```.*?```", "", (ROOT / page).read_text(encoding="utf-8"), flags=re.DOTALL)
        for target in re.findall(r"\[[^\]]+\]\(([^)#\s]+)(?:#[^)]*)?\)", text):
            if "://" not in target and not target.startswith("mailto:"):
                assert (ROOT / page).parent.joinpath(target).exists(), f"{page}: {target}"


# ---------------------------------------------------------------------------------- what is typed


def files_of_the_repository() -> list[Path]:
    """What a clean checkout holds: what git knows or would take up, or else all but what is made."""
    if (ROOT / ".git").exists():
        listed = subprocess.run(
            ["git", "ls-files", "-z", "--cached", "--others", "--exclude-standard"], cwd=ROOT, capture_output=True, check=True
        )
        names = [Path(name) for name in listed.stdout.decode("utf-8").split("\0") if name]
        return [name for name in names if (ROOT / name).is_file()]
    found = (path.relative_to(ROOT) for path in ROOT.rglob("*") if path.is_file())
    return [path for path in found if not any(part.startswith(".") or part == "__pycache__" for part in path.parts)]


@pytest.fixture(scope="module")
def clean_copy(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A copy of the repository, with the running Python standing for the environment that README.md makes."""
    copy = tmp_path_factory.mktemp("repository")
    for name in files_of_the_repository():
        (copy / name).parent.mkdir(parents=True, exist_ok=True)
        shutil.copyfile(ROOT / name, copy / name)
    programs = copy / ".venv" / "bin"
    programs.mkdir(parents=True)
    for name, what in (("olefinlp", "-m olefinlp"), ("python", ""), ("python3", "")):
        path = programs / name
        path.write_text(SHIM.format(root=copy, python=sys.executable, what=what), encoding="utf-8")
        path.chmod(0o755)
    return copy


def typed(command: str, folder: Path) -> subprocess.CompletedProcess[str]:
    """A command as a person types it, with the environment active."""
    variables = {**os.environ, "PATH": f"{folder / '.venv' / 'bin'}{os.pathsep}{os.environ['PATH']}"}
    variables.pop("PYTHONPATH", None)
    return subprocess.run(
        ["sh", "-c", command], cwd=folder, env=variables, capture_output=True, encoding="utf-8", check=False, timeout=600
    )


def written_by(command: str) -> list[str]:
    """Files and folders that a command of README.md says it writes."""
    words = program(command)
    options = [after for word, after in itertools.pairwise(words) if word in ("-o", "--output", "--json", "--csv")]
    places = [word for word in words[2:] if words[:2] in (("olefinlp", "new"),) or word.endswith((".mps", ".lp"))]
    return [name for name in (*options, *places) if name != "-"]


@pytest.mark.skipif(os.name == "nt", reason="types commands into a posix shell")
@pytest.mark.parametrize("command", TYPED)
def test_the_commands_of_the_readme(clean_copy: Path, command: str) -> None:
    """Each ends well and writes what it says."""
    done = typed(command, clean_copy)
    assert done.returncode == 0, done.stderr
    assert "Traceback" not in done.stderr
    for name in written_by(command):
        assert (clean_copy / name).exists(), name


@pytest.mark.skipif(os.name == "nt", reason="types commands into a posix shell")
def test_the_output_shown_is_the_output(clean_copy: Path) -> None:
    """Each block of printed text stands, line by line and in order, in what the first plan prints."""
    shown = blocks("text")
    if not shown:
        pytest.skip("README.md shows no output")
    first = next(command for command in TYPED if program(command)[:2] == ("olefinlp", "plan"))
    printed = typed(first, clean_copy).stdout
    for block in shown:
        assert block in printed


@pytest.mark.parametrize("number", range(len(blocks("python"))))
def test_the_python_of_the_readme(clean_copy: Path, number: int) -> None:
    """Each block runs by itself from the repository's folder; a comment `# -> text` would be what it prints."""
    code = blocks("python")[number]
    variables = {**os.environ, "PYTHONPATH": str(clean_copy)}
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=clean_copy,
        env=variables,
        capture_output=True,
        encoding="utf-8",
        check=False,
        timeout=600,
    )
    assert done.returncode == 0, done.stderr
    for expected in re.findall(r"# -> (.*)$", code, re.MULTILINE):
        assert expected.strip() in done.stdout
