"""How long a plan takes, as a ratio to what nothing can save: loading the libraries and solving the matrices.

Processes are timed in turn, whole, from start to end:

plan         `python -m olefinlp plan SCENARIO --quick -o plan.xlsx`
floor        imports the libraries with all of Pyomo and solves the same matrices, read from a file of arrays
core floor   the same with the core of Pyomo alone, without its solvers and transformations

The aim is a ratio of plan to floor of at most 1.5. Then the steps of a plan are timed inside one process, to see where
the rest goes. Run it from anywhere: `python tests/benchmarks/bench_plan.py --repetitions 7`.
"""

from __future__ import annotations

import argparse
import json
import math
import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parents[2]
DEMO = ROOT / "scenarios" / "brackwater_2031_03.yaml"
AIM = 1.5
FLOORS = {"floor": "pyomo.environ", "core floor": "pyomo.core"}
LIBRARIES = ("numpy", "pyomo.core", "highspy", "pydantic", "ruamel.yaml", "xlsxwriter")

FLOOR = """
import sys
import numpy as np
import {pyomo}
import highspy, pydantic, ruamel.yaml, xlsxwriter
a = np.load(sys.argv[1])
lp = highspy.HighsLp()
lp.num_col_, lp.num_row_, lp.sense_ = len(a["cost"]), len(a["row_low"]), highspy.ObjSense.kMaximize
lp.col_cost_, lp.col_lower_, lp.col_upper_ = a["cost"], a["low"], a["high"]
lp.row_lower_, lp.row_upper_ = a["row_low"], a["row_high"]
lp.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
lp.a_matrix_.start_, lp.a_matrix_.index_, lp.a_matrix_.value_ = a["starts"], a["index"], a["value"]
highs = highspy.Highs()
highs.setOptionValue("output_flag", False)
highs.setOptionValue("threads", 1)
highs.passModel(lp)
highs.run()
print(highs.getInfo().objective_function_value + float(a["offset"]))
"""


def save_matrices(scenario: Path, path: Path) -> None:
    """The arrays of a scenario's linear program, for the floor."""
    import numpy as np

    from olefinlp.inputs.scenario import read_scenario
    from olefinlp.lp.algebra import build_model
    from olefinlp.lp.compile import compile_model

    lp = compile_model(build_model(read_scenario(scenario).case))
    names = ("starts", "index", "value", "row_low", "row_high", "low", "high", "cost", "offset")
    np.savez(path, **{name: getattr(lp, name) for name in names})


def run(arguments: list[str], folder: Path) -> tuple[float, str]:
    """Seconds of a whole Python process, and what it printed.

    Compiled modules are kept in the folder, as they are for whoever has started the tool once before.
    """
    variables = {name: value for name, value in os.environ.items() if name != "PYTHONDONTWRITEBYTECODE"}
    variables |= {"PYTHONPATH": str(ROOT), "PYTHONPYCACHEPREFIX": str(folder / "compiled")}
    start = time.perf_counter()
    done = subprocess.run(
        [sys.executable, *arguments], cwd=folder, env=variables, capture_output=True, encoding="utf-8", check=False
    )
    seconds = time.perf_counter() - start
    if done.returncode:
        raise RuntimeError(f"{arguments[:3]} ended with {done.returncode}\n{done.stderr}")
    return seconds, done.stdout


def compare(scenario: Path, repetitions: int, folder: Path) -> dict[str, list[float]]:
    """Seconds of plan and floors, in turn; the first of each, which fills the caches, is not counted."""
    matrices = folder / "matrices.npz"
    save_matrices(scenario, matrices)
    plan = ["-m", "olefinlp", "plan", str(scenario), "--quick", "-o", str(folder / "plan.xlsx")]
    processes = {"plan": plan, **{name: ["-c", FLOOR.format(pyomo=pyomo), str(matrices)] for name, pyomo in FLOORS.items()}}
    margin = json.loads(run([*plan, "--json", "-"], folder)[1])["margin"] / 1000
    for name in FLOORS:
        optimum = float(run(processes[name], folder)[1].splitlines()[-1])
        if not math.isclose(margin, optimum, rel_tol=1e-7):
            raise RuntimeError(f"the {name} solves something else: {optimum} instead of {margin}")
    seconds: dict[str, list[float]] = {name: [] for name in processes}
    for repetition in range(repetitions):
        for name in processes if repetition % 2 else reversed(processes):
            seconds[name].append(run(processes[name], folder)[0])
    return seconds


def steps(scenario: Path, repetitions: int, folder: Path) -> dict[str, float]:
    """Median seconds of each step of a plan inside one process, and of starting and ending it."""
    found: list[dict[str, float]] = []
    for _ in range(repetitions):
        whole, printed = run([str(Path(__file__).resolve()), "--inside", str(scenario)], folder)
        inside: dict[str, float] = json.loads(printed.splitlines()[-1])
        found.append({"Python itself, start and end": whole - sum(inside.values()), **inside})
    return {name: statistics.median(one[name] for one in found) for name in found[0]}


def inside(scenario: Path) -> dict[str, float]:
    """Seconds of each step of a plan in this process, which must not have loaded anything yet."""
    import atexit
    import gc
    import importlib

    gc.set_threshold(100_000, 50, 100)  # both as the program does at its start
    atexit.register(gc.freeze)
    seconds: dict[str, float] = {}

    def timed(name: str, work: Callable[[], Any]) -> Any:
        start = time.perf_counter()
        result = work()
        seconds[name] = time.perf_counter() - start
        return result

    def load(*names: str) -> Callable[[], Any]:
        return lambda: [importlib.import_module(name) for name in names]

    for library in LIBRARIES:
        timed(f"import {library}", load(library))
    timed("import typer", load("typer"))
    timed("read units", lambda: importlib.import_module("olefinlp.inputs.units").parse_unit("USD/t"))
    timed("import what describes the files", load("olefinlp.inputs.plant_file", "olefinlp.inputs.scenario_file"))
    timed("import the rest of inputs and lp", load("olefinlp.inputs.scenario", "olefinlp.inputs.case", "olefinlp.lp.certificate"))
    timed(
        "import answers and outputs",
        load("olefinlp.cli", "olefinlp.answers.plan", "olefinlp.outputs.summary", "olefinlp.outputs.workbook"),
    )

    from olefinlp.answers.plan import plan_of
    from olefinlp.inputs.scenario import read_scenario
    from olefinlp.lp.algebra import build_model
    from olefinlp.lp.compile import compile_model
    from olefinlp.lp.solver import Solver
    from olefinlp.outputs import write_workbook
    from olefinlp.outputs.summary import summary

    read = timed("read and check the files", lambda: read_scenario(scenario))
    model = timed("build the algebra", lambda: build_model(read.case))
    lp = timed("compile it to arrays", lambda: compile_model(model))
    solution = timed("solve", lambda: Solver(lp).solve().solution)
    plan = timed("prove", lambda: plan_of(read, lp, solution))
    timed("tables", lambda: list(plan.tables()))
    timed("summary", lambda: summary(plan))
    with tempfile.TemporaryDirectory() as folder:
        timed("workbook", lambda: write_workbook(plan, Path(folder) / "plan.xlsx"))
    return seconds


def report(seconds: dict[str, list[float]], parts: dict[str, float]) -> str:
    """Medians with their spread, the ratios, and the steps."""
    lines = [f"{'':36}{'median':>9}{'least':>9}{'most':>9}"]
    lines += [f"{name:36}{statistics.median(s):9.3f}{min(s):9.3f}{max(s):9.3f} s" for name, s in seconds.items()]
    for name in FLOORS:
        medians = statistics.median(seconds["plan"]) / statistics.median(seconds[name])
        least = min(seconds["plan"]) / min(seconds[name])
        lines.append(
            f"{'ratio plan / ' + name:36}{medians:9.2f}{least:9.2f}" + (f"{'':12}aim: at most {AIM}" if name == "floor" else "")
        )
    lines += ["", "Steps of a plan inside one process"]
    lines += [f"  {name:34}{1000 * value:9.0f} ms" for name, value in parts.items()]
    lines.append(f"  {'together':34}{1000 * sum(parts.values()):9.0f} ms")
    return "\n".join(lines)


def main(arguments: list[str] | None = None) -> None:
    """Time and print."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("scenario", nargs="?", type=Path, default=DEMO)
    parser.add_argument("--repetitions", type=int, default=7)
    parser.add_argument("--inside", action="store_true", help="time the steps in this process and print them as JSON")
    options = parser.parse_args(arguments)
    scenario = options.scenario.resolve()
    if options.inside:
        print(json.dumps(inside(scenario)))
        return
    sys.path.insert(0, str(ROOT))
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        seconds = compare(scenario, options.repetitions, folder)
        print(report(seconds, steps(scenario, options.repetitions, folder)))


if __name__ == "__main__":
    main()
