"""The LP as an MPS or LP file with readable names, for any solver."""

from __future__ import annotations

import re
from pathlib import Path

import highspy

from olefinlp.lp.compile import Label, LabelledLp
from olefinlp.lp.solver import Solver

ENDINGS = (".mps", ".lp")


def readable(labels: tuple[Label, ...]) -> list[str]:
    """Names that both file formats take: letters, digits, `_` and `.`; unique, at most 255 long.

    >>> readable((("bought", "ethane.contract", "1", "2031-03"),))
    ['bought.ethane.contract.1.2031_03']
    """
    names: list[str] = []
    taken: set[str] = set()
    for label in labels:
        stem = re.sub(r"[^A-Za-z0-9_.]+", "_", ".".join(label))[:240].strip("_.")
        name, times = stem, 1
        while name in taken:
            times += 1
            name = f"{stem}.again_{times}"
        taken.add(name)
        names.append(name)
    return names


def export(lp: LabelledLp, path: Path, ending: str) -> None:
    """Write the LP, in units of the plan, maximising; the ending decides the format."""
    solver = Solver(lp, scaled=False)
    for row, name in enumerate(readable(lp.rows)):
        solver.highs.passRowName(row, name)
    for column, name in enumerate(readable(lp.columns)):
        solver.highs.passColName(column, name)
    solver.highs.changeObjectiveOffset(lp.offset)
    with_ending = path.with_name(path.name + ending)
    try:
        if solver.highs.writeModel(str(with_ending)) == highspy.HighsStatus.kError:
            raise OSError(f"HiGHS could not write {ending}")
        with_ending.replace(path)
    finally:
        with_ending.unlink(missing_ok=True)
