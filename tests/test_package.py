"""The package as others get it: a wheel with its starter files, that plans from an empty folder."""

from __future__ import annotations

import importlib.util
import json
import os
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest
from conftest import ROOT

import olefinlp

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(
        importlib.util.find_spec("hatchling") is None, reason="hatchling is not installed: no wheel without network"
    ),
    pytest.mark.skipif(importlib.util.find_spec("pip") is None, reason="pip is not installed"),
]

OFFLINE = {"PIP_NO_INDEX": "1", "PIP_DISABLE_PIP_VERSION_CHECK": "1", "PIP_NO_INPUT": "1"}


def run(*command: object, folder: Path, **environment: str) -> subprocess.CompletedProcess[str]:
    """A Python command in a folder, which must work."""
    variables = {**os.environ, **OFFLINE, **environment}
    program = [sys.executable, *map(str, command)]
    done = subprocess.run(program, cwd=folder, env=variables, capture_output=True, encoding="utf-8", check=False, timeout=600)
    assert done.returncode == 0, f"{command}\n{done.stdout}\n{done.stderr}"
    return done


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The wheel, built from this checkout without network."""
    folder = tmp_path_factory.mktemp("wheel")
    run("-m", "pip", "wheel", ROOT, "--no-deps", "--no-build-isolation", "--quiet", "--wheel-dir", folder, folder=folder)
    (built,) = folder.glob("*.whl")
    return built


@pytest.fixture(scope="module")
def installed(wheel: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder in which the wheel alone is installed."""
    folder = tmp_path_factory.mktemp("installed")
    run("-m", "pip", "install", wheel, "--no-deps", "--quiet", "--target", folder, folder=folder)
    return folder


def test_the_wheel_holds_the_package_and_nothing_beside_it(wheel: Path) -> None:
    """One name at the top of site-packages, of the version that the package says."""
    names = zipfile.ZipFile(wheel).namelist()
    info = f"olefinlp-{olefinlp.__version__}.dist-info"
    assert {name.partition("/")[0] for name in names} == {"olefinlp", info}
    assert f"{info}/licenses/LICENSE" in names
    assert not [name for name in names if "test" in name or "__pycache__" in name]


def test_the_wheel_holds_every_module_and_data_file(wheel: Path) -> None:
    """What is imported and what is read beside it, byte for byte."""
    archive = zipfile.ZipFile(wheel)
    package = [p for p in (ROOT / "olefinlp").rglob("*") if p.is_file() and "__pycache__" not in p.parts]
    for path in package:
        assert archive.read(path.relative_to(ROOT).as_posix()) == path.read_bytes()
    assert {"olefinlp/inputs/units.txt", "olefinlp/py.typed"} <= set(archive.namelist())


def test_the_wheel_holds_the_starter_files(wheel: Path) -> None:
    """All of models/ and scenarios/, with the references for people."""
    archive = zipfile.ZipFile(wheel)
    inside = {name.removeprefix("olefinlp/starter/") for name in archive.namelist() if name.startswith("olefinlp/starter/")}
    files = [p for folder in ("models", "scenarios") for p in (ROOT / folder).rglob("*") if p.suffix in (".yaml", ".csv", ".md")]
    assert inside == {p.relative_to(ROOT).as_posix() for p in files}
    for path in files:
        name = path.relative_to(ROOT).as_posix()
        assert archive.read(f"olefinlp/starter/{name}") == path.read_bytes()


def test_the_wheel_needs_what_is_written(wheel: Path) -> None:
    """The run-time dependencies; those of the tests are an extra."""
    archive = zipfile.ZipFile(wheel)
    metadata = archive.read(f"olefinlp-{olefinlp.__version__}.dist-info/METADATA").decode("utf-8").splitlines()
    needed = [line.removeprefix("Requires-Dist: ") for line in metadata if line.startswith("Requires-Dist: ")]
    plain = {line.split(";")[0].split("<")[0].split(">")[0].strip() for line in needed if "extra ==" not in line}
    assert {"pyomo", "highspy", "numpy", "pandas", "pydantic", "typer", "xlsxwriter", "openpyxl"} <= plain
    assert not plain & {"pytest", "scipy", "ruff", "mypy", "hypothesis"}
    assert "Requires-Python: >=3.11" in metadata
    scripts = archive.read(f"olefinlp-{olefinlp.__version__}.dist-info/entry_points.txt").decode("utf-8")
    assert "olefinlp = olefinlp.cli:start" in scripts


def test_the_installed_package_plans_from_an_empty_folder(installed: Path, tmp_path: Path) -> None:
    """The demo month of the package itself, not of any checkout."""
    where = run("-c", "import olefinlp; print(olefinlp.__file__)", folder=tmp_path, PYTHONPATH=str(installed))
    assert Path(where.stdout.strip()).is_relative_to(installed)
    done = run("-m", "olefinlp", "plan", "--json", "-", folder=tmp_path, PYTHONPATH=str(installed))
    record = json.loads(done.stdout)
    assert record["status"] == "optimal"
    assert record["margin"] == pytest.approx(26_808_667, abs=1)
    assert "planning the invented demo" in done.stderr
    assert [p.name for p in tmp_path.iterdir()] == ["brackwater_2031_03_plan.xlsx"]


def test_the_installed_package_starts_a_plant_of_ones_own(installed: Path, tmp_path: Path) -> None:
    """`new`, then `check` and `plan` what it put there."""
    done = run("-m", "olefinlp", "new", "mine", folder=tmp_path, PYTHONPATH=str(installed))
    assert "files written to mine" in done.stdout
    for scenario in sorted(p.name for p in (ROOT / "scenarios").glob("*.yaml")):
        path = f"mine/scenarios/{scenario}"
        assert "no errors" in run("-m", "olefinlp", "check", path, folder=tmp_path, PYTHONPATH=str(installed)).stdout
    plan = run("-m", "olefinlp", "plan", "mine/scenarios/thermal_cracker.yaml", folder=tmp_path, PYTHONPATH=str(installed))
    assert "3,684.20" in plan.stdout
    assert (tmp_path / "thermal_cracker_plan.xlsx").exists()
