"""Sweeps with numbers made up for tests around a real plan, so that every answer has an independent one."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from olefinlp.answers.plan import Plan
from olefinlp.answers.sweep import Sweep
from olefinlp.answers.sweep_readings import read_out
from olefinlp.inputs.sweep_cases import TABLE, SweepCases, Values
from olefinlp.inputs.varied import find_varied
from olefinlp.lp.sweep import IMPOSSIBLE, OPTIMAL

NAPHTHA, ETHYLENE = "feeds.full_range_naphtha.spot_cargo", "outlets.ethylene_spot"
CONTRACT = "outlets.ethylene_contract.min"


def made(
    base: Plan,
    values: Sequence[Sequence[float]],
    margin: Sequence[float],
    *,
    paths: Sequence[str] = (NAPHTHA,),
    how: str = TABLE,
    held: Sequence[float] | None = None,
    failed: Mapping[int, str] | None = None,
    readings: Mapping[str, Sequence[float]] | None = None,
    percent: bool = False,
    note: str = "",
) -> Sweep:
    """A sweep with these values and margins; `failed` maps cases without a plan to their reason (empty: none is known)."""
    varied = tuple(find_varied(base.scenario, path) for path in paths)
    cases = SweepCases(base.scenario, varied, (percent,) * len(paths), np.array(values, dtype=float), how, note=note)
    read = read_out(base.quantities.case, base.lp)
    status = np.full(len(cases), OPTIMAL, dtype=np.int8)
    margins, helds = np.array(margin, dtype=float), np.array(margin if held is None else held, dtype=float)
    table: Values = np.zeros((len(cases), len(read.names)))
    for name, column in (readings or {}).items():
        table[:, read.names.index(name)] = column
    for number in failed or {}:
        status[number], margins[number], helds[number], table[number] = IMPOSSIBLE, np.nan, np.nan, np.nan
    if any(one.kind != "price" for one in varied):
        helds[:] = np.nan
    return Sweep(cases, base, read, status, margins, helds, table, {n: why for n, why in (failed or {}).items() if why})
