"""The benchmark of the answers runs; how fast they are depends on the machine and is no test."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest
from conftest import ROOT


@pytest.mark.slow
def test_the_benchmark_of_the_answers_runs(tmp_path: Path) -> None:
    """Two repetitions on the smallest plant: both ways agree on every best value, and are compared."""
    script, scenario = ROOT / "tests" / "benchmarks" / "bench_answers.py", ROOT / "scenarios" / "thermal_cracker.yaml"
    command = [sys.executable, str(script), str(scenario), "--repetitions", "2"]
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, encoding="utf-8", check=False, timeout=300)
    assert done.returncode == 0, done.stderr
    found = re.search(r"^ratio answers / bare +([\d.]+)", done.stdout, re.MULTILINE)
    assert found
    assert float(found[1]) > 0
    solves = re.search(r"^solves +(\d+), best values apart by at most ([\d.e-]+)", done.stdout, re.MULTILINE)
    assert solves
    assert int(solves[1]) > 50
    assert float(solves[2]) <= 1e-7
    assert list(tmp_path.iterdir()) == []
