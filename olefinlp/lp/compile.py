"""The Pyomo model as labelled arrays, compiled once.

Everything after this file works on arrays: the solver, the certificate, exports, cases.
"""

from __future__ import annotations

import functools
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pyomo.environ as pyo
from numpy.typing import NDArray
from pyomo.common.gc_manager import PauseGC
from pyomo.core.base.enums import SortComponents
from pyomo.core.expr.visitor import evaluate_expression
from pyomo.repn.linear import LinearRepnVisitor
from pyomo.repn.util import OrderedVarRecorder

Floats = NDArray[np.float64]
Integers = NDArray[np.int32]
Label = tuple[str, ...]


@dataclass(frozen=True)
class LabelledLp:
    """max cost·x + offset, row_low ≤ A x ≤ row_high, low ≤ x ≤ high.

    A is stored by rows: `starts` (rows + 1), `index` and `value` (non-zeros). `rows` and `columns`
    hold labels such as `("furnace_hours_limit", "gas_furnaces", "2031-03")`.
    """

    rows: tuple[Label, ...]
    columns: tuple[Label, ...]
    starts: Integers
    index: Integers
    value: Floats
    row_low: Floats
    row_high: Floats
    low: Floats
    high: Floats
    cost: Floats
    offset: float
    row_at: dict[Label, int] = field(repr=False)
    column_at: dict[Label, int] = field(repr=False)

    @functools.cached_property
    def row_of(self) -> NDArray[np.intp]:
        """The row of each non-zero."""
        return np.repeat(np.arange(len(self.rows)), np.diff(self.starts))

    @functools.cached_property
    def _filled(self) -> NDArray[np.intp]:
        """Rows that have a non-zero."""
        return np.flatnonzero(np.diff(self.starts))

    @functools.cached_property
    def _starts(self) -> NDArray[np.intp]:
        """Where the rows that have a non-zero start."""
        return self.starts[self._filled].astype(np.intp)

    def by_row(self, terms: Floats) -> Floats:
        """Terms of the non-zeros (last axis) summed by row."""
        sums: Floats = np.zeros((*terms.shape[:-1], len(self.rows)))
        if len(self._filled):
            sums[..., self._filled] = np.add.reduceat(terms, self._starts, axis=-1)
        return sums

    def by_column(self, terms: Floats) -> Floats:
        """Terms of the non-zeros (last axis) summed by column."""
        width = len(self.columns)
        lines = terms.reshape(-1, len(self.index))
        place = np.arange(0, len(lines) * width, width)[:, None] + self.index
        sums = np.bincount(place.ravel(), weights=lines.ravel(), minlength=len(lines) * width).astype(float, copy=False)
        return sums.reshape(*terms.shape[:-1], width)

    def activity(self, x: Floats) -> Floats:
        """A x, by row."""
        return self.by_row(self.value * x[self.index])

    def gathered(self, y: Floats) -> Floats:
        """Aᵀ y, by column."""
        return self.by_column(self.value * y[self.row_of])

    def sizes(self, x: Floats) -> Floats:
        """Σ |a x| of each row: the size that its residual is compared with."""
        return self.by_row(np.abs(self.value * x[self.index]))


def compile_model(model: pyo.ConcreteModel) -> LabelledLp:
    """Labelled arrays of a linear model.

    Raises `ValueError` if an expression is not linear, which no rule of the algebra is.
    """
    with PauseGC():
        columns, variables = _columns(model)
        at = {id(v): j for j, v in enumerate(variables)}
        visitor = LinearRepnVisitor({}, var_recorder=OrderedVarRecorder({}, {}, SortComponents.unsorted))
        rows, starts, index, value, low, high = [], [0], [], [], [], []
        for container in model.component_objects(pyo.Constraint, active=True):
            for key, constraint in container.items():
                repn = _linear(visitor, constraint.body, constraint.name)
                for number, coefficient in repn.linear.items():
                    if coefficient:
                        index.append(at[number])
                        value.append(coefficient)
                starts.append(len(index))
                rows.append(_label(container.local_name, key))
                low.append(_bound(constraint.lower, -np.inf) - repn.constant)
                high.append(_bound(constraint.upper, np.inf) - repn.constant)
        cost = np.zeros(len(columns))
        repn = _linear(visitor, model.margin.expr, "margin")
        for number, coefficient in repn.linear.items():
            cost[at[number]] += coefficient
        return LabelledLp(
            rows=tuple(rows),
            columns=tuple(columns),
            starts=np.array(starts, dtype=np.int32),
            index=np.array(index, dtype=np.int32),
            value=np.array(value, dtype=float),
            row_low=np.array(low, dtype=float),
            row_high=np.array(high, dtype=float),
            low=np.array([_bound(v.lower, -np.inf) for v in variables], dtype=float),
            high=np.array([_bound(v.upper, np.inf) for v in variables], dtype=float),
            cost=cost,
            offset=float(repn.constant),
            row_at={label: i for i, label in enumerate(rows)},
            column_at={label: j for j, label in enumerate(columns)},
        )


PriceMap = dict[tuple[str, str], tuple[Integers, Floats]]
"""(price item, month) → columns, and what one unit of the item's rate adds to the cost of each."""


def compile_prices(model: pyo.ConcreteModel) -> PriceMap:
    """How each price enters the objective, from the same lines that the algebra sums.

    With it a change of prices is a change of the cost vector, and nothing else.
    """
    from olefinlp.lp.algebra import money_of_month

    with PauseGC():
        _, variables = _columns(model)
        at = {id(v): j for j, v in enumerate(variables)}
        visitor = LinearRepnVisitor({}, var_recorder=OrderedVarRecorder({}, {}, SortComponents.unsorted))
        sums: dict[tuple[str, str], dict[int, float]] = {}
        for month in model.case.months:
            for item, sign, amount in money_of_month(model, model.case, month):
                into = sums.setdefault((item, month), {})
                for number, coefficient in _linear(visitor, sign * amount, item).linear.items():
                    into[at[number]] = into.get(at[number], 0.0) + coefficient
        return {
            key: (np.array(list(into), dtype=np.int32), np.array(list(into.values()), dtype=float)) for key, into in sums.items()
        }


def _columns(model: pyo.ConcreteModel) -> tuple[list[Label], list[Any]]:
    labels: list[Label] = []
    variables: list[Any] = []
    for container in model.component_objects(pyo.Var, active=True):
        for key, variable in container.items():
            labels.append(_label(container.local_name, key))
            variables.append(variable)
    return labels, variables


def _label(name: str, key: Any) -> Label:
    if key is None:
        return (name,)
    return (name, *map(str, key)) if isinstance(key, tuple) else (name, str(key))


def _linear(visitor: Any, expression: Any, name: str) -> Any:
    repn = visitor.walk_expression(expression)
    if repn.nonlinear is not None:
        raise ValueError(f"{name} is not linear")
    return repn


def _bound(value: Any, missing: float) -> float:
    return missing if value is None else float(evaluate_expression(value))


__all__ = ["Floats", "Integers", "Label", "LabelledLp", "PriceMap", "compile_model", "compile_prices"]
