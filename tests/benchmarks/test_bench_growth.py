"""The benchmark of growth runs; how fast anything is depends on the machine and is no test."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest
from conftest import ROOT

from olefinlp.inputs.scenario import read_scenario

sys.path.append(str(ROOT / "tests" / "benchmarks"))
from bench_growth import ByHand, exponent
from large_plant import write_scenario

from olefinlp.answers.plan import make_plan


@pytest.mark.slow
def test_the_benchmark_of_growth_runs(tmp_path: Path) -> None:
    """One and three periods of the smaller plant: sizes and margins of both programs agree, or it ends with an error."""
    script = ROOT / "tests" / "benchmarks" / "bench_growth.py"
    sizes = ["--periods", "1", "3", "--furnaces", "12", "--repetitions", "1"]
    done = subprocess.run(
        [sys.executable, str(script), *sizes], cwd=tmp_path, capture_output=True, encoding="utf-8", check=False, timeout=300
    )
    assert done.returncode == 0, done.stderr
    ratios = re.search(r"^ratio build / hand +([\d.]+) +([\d.]+)", done.stdout, re.MULTILINE)
    assert ratios
    assert all(float(ratio) > 0 for ratio in ratios.groups())
    for thing in ("read", "build", "hand", "solve", "hand run", "prove"):
        assert re.search(rf"^  {thing} +[\d.]+ +[\d.]+", done.stdout, re.MULTILINE), thing
    assert list(tmp_path.iterdir()) == []


def test_both_routes_find_the_same_margin(tmp_path: Path) -> None:
    """Six periods, so that availability, outages and factors of every month of the demo are met, with the tanks between."""
    scenario = read_scenario(write_scenario(tmp_path / "plant of 12", 6))
    plan, hand = make_plan(scenario), ByHand(scenario.case)
    assert hand.margin() == pytest.approx(plan.margin / 1000, rel=1e-9)
    assert len(hand.value) == len(plan.lp.value)
    assert {limit.month for key, limit in scenario.case.limits.items() if key[0] == "stock"} == set(scenario.case.months)


def test_more_furnaces_are_a_larger_plant(tmp_path: Path) -> None:
    """Five times the furnaces earn five times the margin of as many single ones: all else is five times as large."""
    small, large = (make_plan(read_scenario(write_scenario(tmp_path / str(n), 1, n))) for n in (12, 60))
    assert len(large.scenario.plant.file.furnace_groups) == 60
    assert large.margin == pytest.approx(5 * small.margin, rel=1e-6)


def test_furnaces_are_multiples_of_those_of_the_plant(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="multiple"):
        write_scenario(tmp_path / "odd", 1, 13)


def test_the_exponent_is_that_of_the_growth() -> None:
    sizes = [{"periods": n, "seconds": {"build": 0.01 * n**1.5}} for n in (1, 12, 365)]
    assert exponent(sizes, "seconds", "build") == pytest.approx(1.5)
    assert exponent(sizes[:1], "seconds", "build") is None
