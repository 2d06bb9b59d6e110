"""The benchmark of cases runs; how fast they are depends on the machine and is no test."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest
from conftest import ROOT


@pytest.mark.slow
def test_the_benchmark_of_cases_runs(tmp_path: Path) -> None:
    """Six cases of the demo month: both ways agree on every best value, and are compared."""
    command = [sys.executable, str(ROOT / "tests" / "benchmarks" / "bench_cases.py"), "--cases", "6", "--repetitions", "2"]
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, encoding="utf-8", check=False, timeout=300)
    assert done.returncode == 0, done.stderr
    for name in ("solved", "plans", "anew"):
        found = re.search(rf"^ratio {name} +/ bare ([\d.]+)", done.stdout, re.MULTILINE)
        assert found
        assert float(found[1]) > 0
    assert list(tmp_path.iterdir()) == []
