"""The benchmark runs; how fast it is depends on the machine and is no test."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest
from conftest import ROOT


@pytest.mark.slow
def test_the_benchmark_runs(tmp_path: Path) -> None:
    """One repetition on the smallest plant: both processes end well, agree on the optimum, and are compared."""
    script, scenario = ROOT / "tests" / "benchmarks" / "bench_plan.py", ROOT / "scenarios" / "thermal_cracker.yaml"
    command = [sys.executable, str(script), str(scenario), "--repetitions", "1"]
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, encoding="utf-8", check=False, timeout=300)
    assert done.returncode == 0, done.stderr
    found = re.search(r"^ratio plan / floor +([\d.]+)", done.stdout, re.MULTILINE)
    assert found
    assert float(found[1]) > 0
    for step in ("read and check the files", "build the algebra", "solve", "prove", "workbook"):
        assert f"  {step} " in done.stdout
    assert list(tmp_path.iterdir()) == []
