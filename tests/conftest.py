"""Fixtures of the whole suite: the shipped files and their plans, from whatever folder the tests are started."""

from __future__ import annotations

import contextlib
import os
import shutil
import subprocess
import sys
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING

import pytest
from hypothesis import HealthCheck, settings

TESTS = Path(__file__).resolve().parent
ROOT = TESTS.parent
# helper modules beside the tests first; the checkout last, so that an installed package is the one tested
sys.path[:0] = [str(TESTS)]
sys.path.append(str(ROOT))

import pyomo.environ  # noqa: E402, F401  # before scipy and pint: far slower to load after them

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan
    from olefinlp.inputs.scenario import Scenario

SCENARIOS = tuple(sorted(path.name for path in (ROOT / "scenarios").glob("*.yaml")))

RECALCULATE_ALWAYS = """<?xml version="1.0" encoding="UTF-8"?>
<oor:items xmlns:oor="http://openoffice.org/2001/registry">
<item oor:path="/org.openoffice.Office.Calc/Formula/Load">
<prop oor:name="OOXMLRecalcMode" oor:op="fuse"><value>0</value></prop>
</item>
</oor:items>
"""

needs_office = pytest.mark.skipif(
    shutil.which("soffice") is None and "OLEFINLP_NEEDS_LIBREOFFICE" not in os.environ,
    reason="needs LibreOffice (soffice) to recalculate; where OLEFINLP_NEEDS_LIBREOFFICE is set it fails instead",
)
Recalculate = Callable[..., list[Path]]
"""Files through LibreOffice, every formula calculated again: what the fixture `recalculate` gives."""

settings.register_profile(
    "repeatable",
    derandomize=True,
    deadline=None,
    max_examples=25,
    database=None,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.function_scoped_fixture],
)
settings.load_profile("repeatable")


@cache
def _scenario(name: str) -> Scenario:
    from olefinlp.inputs.scenario import read_scenario

    with contextlib.chdir(ROOT):  # places are written as seen from the folder in which a file is read
        return read_scenario(ROOT / "scenarios" / name)


@cache
def _plan(name: str) -> Plan:
    from olefinlp.answers.plan import make_plan

    return make_plan(_scenario(name))


@pytest.fixture(scope="session")
def root() -> Path:
    """The top folder of the repository."""
    return ROOT


@pytest.fixture(scope="session")
def shipped_scenario() -> Callable[[str], Scenario]:
    """A shipped scenario by its file name, read once a session."""
    return _scenario


@pytest.fixture(scope="session")
def shipped_plan() -> Callable[[str], Plan]:
    """The plan of a shipped scenario by its file name, made once a session."""
    return _plan


@pytest.fixture(params=SCENARIOS)
def every_plan(request: pytest.FixtureRequest) -> Plan:
    """The plan of each shipped scenario in turn."""
    return _plan(request.param)


@pytest.fixture(scope="session")
def march() -> Plan:
    """The plan of March 2031, the case most checks begin with."""
    return _plan("brackwater_2031_03.yaml")


@pytest.fixture(scope="session")
def recalculate(tmp_path_factory: pytest.TempPathFactory) -> Recalculate:
    """Files through LibreOffice, every formula calculated again."""
    profile = tmp_path_factory.mktemp("profile")
    (profile / "user").mkdir()
    (profile / "user" / "registrymodifications.xcu").write_text(RECALCULATE_ALWAYS, encoding="utf-8")
    out = tmp_path_factory.mktemp("recalculated")

    def run(*files: Path) -> list[Path]:
        command = [
            "soffice",
            f"-env:UserInstallation=file://{profile}",
            "--headless",
            "--convert-to",
            "xlsx",
            "--outdir",
            str(out),
        ]
        subprocess.run([*command, *map(str, files)], check=True, capture_output=True, timeout=300)
        return [out / file.name for file in files]

    return run
