"""The cases of a sweep: which numbers vary, and one row of values a case."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from olefinlp.inputs.varied import Varied

if TYPE_CHECKING:
    from olefinlp.inputs.scenario import Scenario

LIST, GRID, ONE_AT_A_TIME, TABLE, DRAWS = "list", "grid", "one at a time", "table", "draws"
Values = NDArray[np.float64]


@dataclass(frozen=True)
class SweepCases:
    """Cases of one scenario: `values` has a row a case and a column a varied number; not a number: as today.

    Values are in the unit in which the number is written, or changes in per cent where `percent` says so.
    `how` is how the cases came about; `labels` names them where they have names. `note` says what a reader
    must know (the seed of draws).
    """

    scenario: Scenario
    varied: tuple[Varied, ...]
    percent: tuple[bool, ...]
    values: Values
    how: str
    labels: tuple[str, ...] = ()
    note: str = ""

    def __len__(self) -> int:
        return len(self.values)

    def of_case(self, number: int) -> dict[Varied, float]:
        """What one case changes (from 0)."""
        row = self.values[number]
        return {varied: float(value) for varied, value in zip(self.varied, row, strict=True) if not np.isnan(value)}

    def scenario_of(self, number: int) -> Scenario:
        """One case as a scenario of its own, validated. Raises `InputError` when it is no valid one."""
        from olefinlp.inputs.varied import scenario_at

        by_percent = [varied for varied, percent in zip(self.varied, self.percent, strict=True) if percent]
        return scenario_at(self.scenario, self.of_case(number), by_percent)
