"""The Pyomo model as labelled arrays, compiled once.

Everything after this file works on arrays: the solver, the certificate, exports, cases.
"""

from __future__ import annotations

import functools
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
import pyomo.core as pyo
from numpy.typing import NDArray
from pyomo.common.gc_manager import PauseGC
from pyomo.common.numeric_types import native_numeric_types
from pyomo.core.expr import MonomialTermExpression, NegationExpression, ProductExpression, SumExpression

if TYPE_CHECKING:
    from olefinlp.inputs.case import Case

Floats = NDArray[np.float64]
Integers = NDArray[np.int32]
Label = tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Lines:
    """A matrix by its lines (rows, or columns): the non-zeros of one after another, and where each line starts.

    Vectors may be several at once: sums run along their last axis.
    """

    count: int
    filled: NDArray[np.intp]
    """Lines that have a non-zero."""
    starts: NDArray[np.intp]
    """Where those lines start."""
    across: NDArray[np.intp]
    """Where each non-zero stands in its line."""
    value: Floats

    def sums(self, x: Floats) -> Floats:
        """Σ a x of each line."""
        return self._summed(x.take(self.across, axis=-1) * self.value)

    def sums_and_sizes(self, x: Floats) -> tuple[Floats, Floats]:
        """Σ a x and Σ |a x| of each line."""
        terms = x.take(self.across, axis=-1) * self.value
        return self._summed(terms), self._summed(np.abs(terms))

    def line(self, at: int) -> tuple[NDArray[np.intp], Floats]:
        """Where the non-zeros of one line stand, and what they are."""
        place = int(np.searchsorted(self.filled, at))
        if place == len(self.filled) or self.filled[place] != at:
            return self.across[:0], self.value[:0]
        end = self.starts[place + 1] if place + 1 < len(self.starts) else len(self.value)
        return self.across[self.starts[place] : end], self.value[self.starts[place] : end]

    def _summed(self, terms: Floats) -> Floats:
        if len(self.filled) == self.count:
            return np.add.reduceat(terms, self.starts, axis=-1)
        sums: Floats = np.zeros((*terms.shape[:-1], self.count))
        if len(self.filled):
            sums[..., self.filled] = np.add.reduceat(terms, self.starts, axis=-1)
        return sums


def _lines(count: int, along: NDArray[np.intp], across: NDArray[np.intp], value: Floats) -> Lines:
    """Lines from non-zeros in the order of their lines, `along` being the line of each."""
    sizes = np.bincount(along, minlength=count)
    filled = np.flatnonzero(sizes)
    return Lines(count, filled, (np.cumsum(sizes) - sizes)[filled], across, value)


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

    def __post_init__(self) -> None:
        for name in ("starts", "index", "value", "row_low", "row_high", "low", "high", "cost"):
            getattr(self, name).setflags(write=False)  # shared by plans: nobody may sort or change them in place

    @functools.cached_property
    def by_row(self) -> Lines:
        """The matrix by rows."""
        rows = np.repeat(np.arange(len(self.rows)), np.diff(self.starts))
        return _lines(len(self.rows), rows, self.index.astype(np.intp), self.value.copy())

    @functools.cached_property
    def by_column(self) -> Lines:
        """The matrix by columns."""
        rows = np.repeat(np.arange(len(self.rows)), np.diff(self.starts))
        order = np.argsort(self.index, kind="stable")
        return _lines(len(self.columns), self.index[order].astype(np.intp), rows[order], self.value[order])

    def activity(self, x: Floats) -> Floats:
        """A x, by row."""
        return self.by_row.sums(x)

    def gathered(self, y: Floats) -> Floats:
        """Aᵀ y, by column."""
        return self.by_column.sums(y)

    def sizes(self, x: Floats) -> Floats:
        """Σ |a x| of each row: the size that its residual is compared with."""
        return self.by_row.sums_and_sizes(x)[1]


def compile_model(model: pyo.ConcreteModel) -> LabelledLp:
    """Labelled arrays of a linear model.

    Raises `ValueError` if an expression is no sum of multiples of variables, which each rule of the algebra is.
    """
    with PauseGC():
        columns, variables = _columns(model)
        at = {id(v): j for j, v in enumerate(variables)}
        rows, starts, index, value = list[Label](), [0], list[int](), list[float]()
        low, high = list[float](), list[float]()
        for container in model.component_objects(pyo.Constraint, active=True):
            name = container.local_name
            for key, constraint in container.items():
                below, body, above = constraint.to_bounded_expression(evaluate_bounds=True)
                terms: dict[int, float] = {}
                constant = _add(body, 1.0, terms, at)
                if 0.0 in terms.values():
                    terms = {column: coefficient for column, coefficient in terms.items() if coefficient}
                index += terms
                value += terms.values()
                starts.append(len(index))
                rows.append(_label(name, key))
                low.append((-np.inf if below is None else below) - constant)
                high.append((np.inf if above is None else above) - constant)
        cost = np.zeros(len(columns))
        terms = {}
        offset = _add(model.margin.expr, 1.0, terms, at)
        cost[list(terms)] = list(terms.values())
        bounds = [v.bounds for v in variables]
        return LabelledLp(
            rows=tuple(rows),
            columns=tuple(columns),
            starts=np.array(starts, dtype=np.int32),
            index=np.array(index, dtype=np.int32),
            value=np.array(value, dtype=float),
            row_low=np.array(low, dtype=float),
            row_high=np.array(high, dtype=float),
            low=np.array([-np.inf if least is None else least for least, _ in bounds], dtype=float),
            high=np.array([np.inf if most is None else most for _, most in bounds], dtype=float),
            cost=cost,
            offset=float(offset),
            row_at={label: i for i, label in enumerate(rows)},
            column_at={label: j for j, label in enumerate(columns)},
        )


def program_of(case: Case) -> LabelledLp:
    """The arrays of a case: its model built, compiled and let go.

    The model of many periods is millions of small objects that point at each other. Its rules are taken apart here, so
    that its memory is free before anything is solved, and never looked through for garbage.

    >>> from olefinlp import read_scenario
    >>> len(program_of(read_scenario("scenarios/thermal_cracker.yaml").case).rows) > 10
    True
    """
    from olefinlp.lp.algebra import build_model

    with PauseGC():
        model = build_model(case)
        lp = compile_model(model)
        for container in model.component_objects((pyo.Constraint, pyo.Objective)):
            container.clear()
    return lp


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
        sums: dict[tuple[str, str], dict[int, float]] = {}
        for month in model.case.months:
            for item, sign, amount in money_of_month(model, model.case, month):
                _add(amount, sign, sums.setdefault((item, month), {}), at)
        return {
            key: (np.array(list(into), dtype=np.int32), np.array(list(into.values()), dtype=float)) for key, into in sums.items()
        }


def _columns(model: pyo.ConcreteModel) -> tuple[list[Label], list[Any]]:
    labels: list[Label] = []
    variables: list[Any] = []
    for container in model.component_objects(pyo.Var, active=True):
        name = container.local_name
        for key, variable in container.items():
            labels.append(_label(name, key))
            variables.append(variable)
    return labels, variables


def _label(name: str, key: Any) -> Label:
    if key is None:
        return (name,)
    return (name, *map(str, key)) if isinstance(key, tuple) else (name, str(key))


def _add(expression: Any, times: float, terms: dict[int, float], at: dict[int, int]) -> float:
    """Add a multiple of a linear expression to terms by column; gives what it has of a constant."""
    kind = expression.__class__
    if kind in native_numeric_types:
        return times * float(expression)
    if isinstance(expression, SumExpression):
        constant = 0.0
        for term in expression.args:
            if term.__class__ is MonomialTermExpression:  # nearly all of them, so done here
                coefficient, variable = term.args
                column = at[id(variable)]
                terms[column] = terms.get(column, 0.0) + times * coefficient
            else:
                constant += _add(term, times, terms, at)
        return constant
    if isinstance(expression, ProductExpression):
        factor, rest = sorted(expression.args, key=lambda part: part.__class__ not in native_numeric_types)
        if factor.__class__ in native_numeric_types:
            return _add(rest, times * factor, terms, at)
    if isinstance(expression, NegationExpression):
        return _add(expression.args[0], -times, terms, at)
    if id(expression) not in at:
        raise ValueError(f"{expression} is no sum of multiples of variables")
    terms[at[id(expression)]] = terms.get(at[id(expression)], 0.0) + times
    return 0.0


__all__ = ["Floats", "Integers", "Label", "LabelledLp", "PriceMap", "compile_model", "compile_prices", "program_of"]
