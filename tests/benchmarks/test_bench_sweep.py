"""The benchmark of sweeps runs; how fast they are depends on the machine and is no test."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest
from conftest import ROOT


@pytest.mark.slow
def test_the_benchmark_of_sweeps_runs(tmp_path: Path) -> None:
    """A few cases: the bare loop and the sweep find the same margins, and are compared."""
    command = [sys.executable, str(ROOT / "tests" / "benchmarks" / "bench_sweep.py"), "--cases", "40", "--repetitions", "1"]
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, encoding="utf-8", check=False, timeout=300)
    assert done.returncode == 0, done.stderr
    assert len(re.findall(r"^  ratio sweep +/ bare [\d.]+", done.stdout, re.MULTILINE)) == 2
    assert re.findall(r"margins apart by at most ([\d.e-]+)", done.stdout)
    assert list(tmp_path.iterdir()) == []
