"""The cases of a sweep as prices, limits and coefficients of one program.

Prices are worked out by the same rules as a price book, for all cases at once. Every other number is tried: the
scenario is built with some of its values, and what it changes in the program is noted. A number whose effect is a
straight line is carried along that line, any other is tabulated value by value. At the end some cases are built
whole and compared, entry by entry; where numbers act on each other so that their effects do not add, every case
gets a program of its own.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.sweep_refused import in_a_line, refused_prices
from olefinlp.inputs.findings import InputError
from olefinlp.inputs.prices import AMOUNT, NUMBER, Price, typed_of
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.sweep_cases import SweepCases
from olefinlp.inputs.varied import PRICE, scenario_at
from olefinlp.lp.compile import Floats, Integers, LabelledLp, program_of
from olefinlp.lp.sweep import CHOOSE, DUAL, PRIMAL, Block, same_shape

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

MOST_TABULATED = 400
"""Distinct values that are built one by one, where the effect of a number is no straight line."""
COMPARED = 6
"""Cases that are built whole and compared with what was put together."""
STRAIGHT, AGREES = 1e-12, 1e-9
PARTS = ("cost", "row_low", "row_high", "low", "high", "value")
Effect = dict[str, Floats]
"""Part of the program → its whole array, for one value of one number."""


def _there(found: dict[float, Effect | None]) -> Iterator[tuple[float, Effect]]:
    """Values that make a valid scenario, with what they do."""
    return ((value, effect) for value, effect in found.items() if effect is not None)


def _not_above(low: Floats, high: Floats) -> Floats:
    """Minima that meet their maximum, and are above it by rounding alone, are put back onto it."""
    with np.errstate(invalid="ignore"):
        return np.where((low > high) & (low - high <= AGREES * np.abs(high)), high, low)


class OwnPrograms(Exception):
    """The cases do not share a program; the message says why."""


def lp_of(scenario: Scenario) -> LabelledLp:
    """The program of a scenario."""
    return program_of(scenario.case)


@dataclass(frozen=True)
class Moved:
    """What one number does to one part of the program: at which places, and their contents by value.

    Along a straight line: base + slope × (value − start); otherwise a line of `table` for each of `values`.
    """

    part: str
    places: Integers
    base: Floats
    start: float
    slope: Floats | None
    values: Floats
    table: Floats

    @property
    def bounds(self) -> bool:
        """Whether the places are rows."""
        return self.part in ("row_low", "row_high")

    def put(self, contents: Floats, values: Floats) -> None:
        """Add to the contents of some cases (cases × places) what this number changes; nothing where it has no value."""
        there = ~np.isnan(values)
        if self.slope is None:
            there &= np.isin(values, self.values)  # others make no valid scenario
        if self.slope is not None:
            contents[there] += (values[there] - self.start)[:, None] * self.slope
            return
        new = self.table[np.searchsorted(self.values, values[there])]
        endless = np.isinf(self.base) | np.isinf(new)
        with np.errstate(invalid="ignore"):
            contents[there] = np.where(endless, new, contents[there] + (new - self.base))


class SweepTerms:
    """Puts the cases of a sweep together on the program of the base plan.

    Raises `OwnPrograms` where that cannot be done, and says why.
    """

    def __init__(self, cases: SweepCases, plan: Plan) -> None:
        self.cases, self.plan, self.lp = cases, plan, plan.lp
        self.case = plan.quantities.case
        self.prices = [at for at, varied in enumerate(cases.varied) if varied.kind == PRICE]
        self.others = [at for at, varied in enumerate(cases.varied) if varied.kind != PRICE]
        self.invalid: dict[int, dict[float, str]] = {}
        """Varied number → its values that make no valid scenario, and why."""
        self.moved: dict[int, tuple[Moved, ...]] = {at: self._tried(at) for at in self.others}
        self.paid_and_most = self._paid_and_most()
        self.order = self._price_order()
        self._compare()

    @property
    def strategy(self) -> int:
        """The simplex strategy that suits what moves."""
        if not self.others:
            return PRIMAL
        parts = {moved.part for several in self.moved.values() for moved in several}
        return DUAL if not self.prices and parts <= {"row_low", "row_high", "low", "high"} else CHOOSE

    # ------------------------------------------------------------------------------ what a number moves

    def _tried(self, at: int) -> tuple[Moved, ...]:
        """What one number that is no price does to the program, from building it with some of its values."""
        varied, percent = self.cases.varied[at], self.cases.percent[at]
        column = self.cases.values[:, at]
        values = np.unique(column[~np.isnan(column)])
        if not len(values):
            return ()
        start = 0.0 if percent else varied.first
        alike = percent or len({value for _, value in varied.today}) == 1
        middle = values[len(values) // 2] if len(values) > 2 else (values[0] + values[-1]) / 2
        found = {float(value): self._built(at, float(value)) for value in dict.fromkeys((values[0], values[-1], middle))}
        straight = alike and not self.invalid.get(at) and self._straight(dict(_there(found)), start)
        if not straight:
            if len(values) > MOST_TABULATED:
                raise OwnPrograms(f"{varied.path} does not act along a straight line, and has {len(values)} values")
            found |= {value: self._built(at, value) for value in values.tolist() if value not in found}
            found = {value: effect for value, effect in found.items() if value in values}
        effects = dict(_there(found))
        return tuple(moved for part in PARTS if (moved := self._moved(part, effects, start, straight)) is not None)

    def _built(self, at: int, value: float) -> Effect | None:
        """The parts of the program with one value of one number; None, and noted, where that is no valid scenario."""
        varied, percent = self.cases.varied[at], self.cases.percent[at]
        try:
            lp = lp_of(scenario_at(self.cases.scenario, {varied: value}, [varied] if percent else []))
        except InputError as error:
            self.invalid.setdefault(at, {})[value] = in_a_line(error)
            return None
        if not same_shape(self.lp, lp):
            raise OwnPrograms(f"{varied.path} at {value:g} changes what is in the program at all")
        return {part: getattr(lp, part) for part in PARTS}

    def _straight(self, found: dict[float, Effect], start: float) -> bool:
        """Whether all built values, today's among them, lie on one line."""
        points = {**found, start: {part: getattr(self.lp, part) for part in PARTS}}
        low, high = min(points), max(points)
        if low == high:
            return True
        for part in PARTS:
            first, last = points[low][part], points[high][part]
            finite = np.isfinite(first) & np.isfinite(last)
            for value, effect in points.items():
                here = effect[part]
                if not np.array_equal(np.isfinite(here), finite):
                    return False
                share = (value - low) / (high - low)
                line = first[finite] + share * (last[finite] - first[finite])
                size = np.maximum(np.abs(first[finite]), np.abs(last[finite]))
                if np.any(np.abs(here[finite] - line) > STRAIGHT * size + 1e-300):
                    return False
        return True

    def _moved(self, part: str, effects: dict[float, Effect], start: float, straight: bool) -> Moved | None:
        """What changes of one part; None where nothing does."""
        base = getattr(self.lp, part)
        known = np.array(sorted(effects))
        if not len(known):
            return None
        table = np.array([effects[value][part] for value in known.tolist()])
        places = np.flatnonzero((table != base).any(axis=0)).astype(np.int32)
        if not len(places):
            return None
        own, slope = base[places], None
        if straight:
            far = max(known.tolist(), key=lambda value: abs(value - start))
            slope = (effects[far][part][places] - own) / (far - start) if far != start else np.zeros(len(places))
        return Moved(part, places, own, start, slope, known, table[:, places])

    # ------------------------------------------------------------------------------ prices

    def _price_order(self) -> list[tuple[str, str]]:
        """Prices that move, each after the one that it leans on."""
        moving = {(self.cases.varied[at].path, month) for at in self.prices for month, _ in self.cases.varied[at].today}
        prices = self.case.prices
        grown = True
        while grown:
            more = {key for key, price in prices.items() if key not in moving and (price.of, price.month) in moving}
            grown = bool(more)
            moving |= more
        order: list[tuple[str, str]] = []

        def place(key: tuple[str, str]) -> None:
            if key in order or key not in moving:
                return
            place((prices[key].of, key[1]))
            order.append(key)

        for key in prices:
            place(key)
        return order

    def effective(self, values: Floats) -> dict[tuple[str, str], Floats]:
        """Effective prices that move, by item and month, for some cases (rows of values)."""
        typed: dict[tuple[str, str], Floats] = {}
        for at in self.prices:
            varied, percent = self.cases.varied[at], self.cases.percent[at]
            column = values[:, at]
            for month, today in varied.today:
                new = today * (1 + column / 100) if percent else column
                typed[varied.path, month] = np.where(np.isnan(column), today, new)
        found: dict[tuple[str, str], Floats] = {}
        for key in self.order:
            price = self.case.prices[key]
            base = found.get((price.of, price.month)) if price.of else None
            found[key] = self._effective(price, typed.get(key), base, len(values))
        return found

    def _effective(self, price: Price, typed: Floats | None, base: Floats | None, count: int) -> Floats:
        """One effective price: number × factor, or times × the price it leans on + plus."""
        kind = typed_of(price)[0]
        if not price.of:
            return (typed if typed is not None else np.full(count, price.number)) * price.factor
        under = base if base is not None else np.full(count, self.case.prices[price.of, price.month].value)
        if typed is None or kind == NUMBER:
            return price.times * under + price.plus
        return price.times * under + typed if kind == AMOUNT else typed * under + price.plus

    def _costs(self, values: Floats) -> tuple[Integers, Floats]:
        """Columns whose price moves, and their costs by case."""
        prices = self.effective(values)
        maps = {key: self.plan.price_map[key] for key in prices if key in self.plan.price_map}
        columns = np.unique(np.concatenate([c for c, _ in maps.values()] or [np.zeros(0, dtype=np.int32)])).astype(np.int32)
        cost = np.broadcast_to(self.lp.cost[columns], (len(values), len(columns))).copy()
        for key, (at, coefficients) in maps.items():
            scale = self.case.per_unit(*key)
            change = scale * (prices[key] - self.case.prices[key].value)
            cost[:, np.searchsorted(columns, at)] += change[:, None] * coefficients
        return columns, cost

    # ------------------------------------------------------------------------------ blocks

    def block(self, first: int, count: int) -> Block:
        """Some cases, ready to be solved."""
        values = self.cases.values[first : first + count]
        columns, cost = self._costs(values)
        parts = {part: self._part(part, values) for part in PARTS}
        if len(parts["cost"][0]):
            columns, cost = self._joined(columns, cost, *parts["cost"])
        rows = np.union1d(parts["row_low"][0], parts["row_high"][0]).astype(np.int32)
        bounded = np.union1d(parts["low"][0], parts["high"][0]).astype(np.int32)
        row_high, high = self._spread(rows, "row_high", parts), self._spread(bounded, "high", parts)
        entries, entry_values = parts["value"]
        return Block(
            first=first,
            count=len(values),
            cost_columns=columns,
            cost=cost,
            rows=rows,
            row_low=_not_above(self._spread(rows, "row_low", parts), row_high),
            row_high=row_high,
            columns=bounded,
            low=_not_above(self._spread(bounded, "low", parts), high),
            high=high,
            entries=entries,
            entry_values=entry_values,
        )

    def _part(self, part: str, values: Floats) -> tuple[Integers, Floats]:
        """Places of one part that move, and their contents by case."""
        found = [(at, moved) for at in self.others for moved in self.moved[at] if moved.part == part]
        places = np.unique(np.concatenate([moved.places for _, moved in found] or [np.zeros(0, dtype=np.int32)])).astype(np.int32)
        base = getattr(self.lp, part)[places]
        contents = np.broadcast_to(base, (len(values), len(places))).copy()
        for at, moved in found:
            own = np.searchsorted(places, moved.places)
            changed = contents[:, own]
            moved.put(changed, values[:, at])
            contents[:, own] = changed
        return places, contents

    def _spread(self, places: Integers, part: str, parts: dict[str, tuple[Integers, Floats]]) -> Floats:
        """Contents of one part at more places than move in it."""
        own, contents = parts[part]
        count = len(contents)
        spread = np.broadcast_to(getattr(self.lp, part)[places], (count, len(places))).copy()
        spread[:, np.searchsorted(places, own)] = contents
        return spread

    def _joined(self, columns: Integers, cost: Floats, more: Integers, costs: Floats) -> tuple[Integers, Floats]:
        """Costs that move with prices and with other numbers: both changes on top of the base."""
        both = np.union1d(columns, more).astype(np.int32)
        joined = np.broadcast_to(self.lp.cost[both], (len(cost), len(both))).copy()
        joined[:, np.searchsorted(both, columns)] += cost - self.lp.cost[columns]
        joined[:, np.searchsorted(both, more)] += costs - self.lp.cost[more]
        return both, joined

    def _compare(self) -> None:
        """Some cases built whole: every entry must be what was put together."""
        for number in self._to_compare():
            if self._alone(self.cases.values[number : number + 1]):
                continue  # not put together at all
            try:
                whole = lp_of(self.cases.scenario_of(number))
            except InputError:
                continue  # no valid case: it is judged before it is given out
            if not same_shape(self.lp, whole):
                raise OwnPrograms(f"case {number + 1} changes what is in the program at all")
            block = self.block(number, 1)
            for part, places, contents in (
                ("cost", block.cost_columns, block.cost),
                ("row_low", block.rows, block.row_low),
                ("row_high", block.rows, block.row_high),
                ("low", block.columns, block.low),
                ("high", block.columns, block.high),
                ("value", block.entries, block.entry_values),
            ):
                made, there = getattr(self.lp, part).copy(), getattr(whole, part)
                made[places] = contents[0]
                size = np.maximum(np.abs(made), np.abs(there))
                with np.errstate(invalid="ignore"):
                    apart = ~((made == there) | (np.abs(made - there) <= AGREES * size))
                if apart.any():
                    raise OwnPrograms("the varied numbers act on each other, so that their effects do not add")

    def _to_compare(self) -> list[int]:
        """The first and last case, some others, and for every two numbers that act together somewhere the case
        in which both are farthest from today: a rare pair is not left to chance.
        """
        count = len(self.cases)
        if not count:
            return []
        chosen = {0, count - 1, *np.random.default_rng(0).integers(0, count, min(count, COMPARED)).tolist()}
        away = self._away(self.cases.values)
        covered = np.eye(away.shape[1], dtype=bool)
        for number in sorted(chosen):
            covered |= np.outer(away[number] > 0, away[number] > 0)
        for one in self.others:
            for other in range(away.shape[1]):
                together = np.minimum(away[:, one], away[:, other])
                if covered[one, other] or not together.any():
                    continue
                number = int(together.argmax())
                chosen.add(number)
                covered |= np.outer(away[number] > 0, away[number] > 0)
        return sorted(chosen)

    def _away(self, values: Floats) -> Floats:
        """How far each number of each case is from today, as a share of the farthest; 0 where it is as today."""
        today = np.array([0.0 if p else v.first for v, p in zip(self.cases.varied, self.cases.percent, strict=True)])
        away = np.abs(np.nan_to_num(values - today, nan=0.0))
        size = away.max(axis=0, initial=0.0)
        shares: Floats = away / np.where(size > 0, size, 1.0)
        return shares

    # ------------------------------------------------------------------------------ cases that cannot be

    def judged(self, first: int, count: int) -> tuple[dict[int, str], list[int]]:
        """Cases that are no valid scenario, although a program could be solved, and why; cases to be solved by themselves.

        A number of a case may be none that goes with today's other numbers (a maximum below today's minimum). Where
        others of them vary too, the case is built whole to see whether they go together.
        """
        values = self.cases.values[first : first + count]
        refused = {first + at: why for at, why in refused_prices(self.case, self.effective(values), len(values)).items()}
        apart: list[int] = []
        for at, why in sorted((self._too_much_to_take(first, count) | self._alone(values)).items()):
            number = first + at
            if number in refused:
                continue
            if why and np.count_nonzero(self._away(values[at : at + 1])[0, self.others]) < 2:
                refused[number] = why
                continue
            try:
                self.cases.scenario_of(number)
            except InputError as error:
                refused[number] = in_a_line(error)
            else:
                apart += [number] if why else []
        return refused, apart

    def _alone(self, values: Floats) -> dict[int, str]:
        """Cases (from 0 in the block) with a number that is not valid while all others are as today."""
        found: dict[int, str] = {}
        for at, wrong in self.invalid.items():
            for value, why in wrong.items():
                found |= dict.fromkeys(np.flatnonzero(values[:, at] == value).tolist(), why)
        return found

    def _too_much_to_take(self, first: int, count: int) -> dict[int, str]:
        """Cases (from 0 in the block) that take or pay for more than can be bought: a program has a plan even then."""
        if not self.paid_and_most:
            return {}
        block = self.block(first, count)
        place = {row: at for at, row in enumerate(block.rows.tolist())}
        wrong = [block.row_low[:, place[paid]] > block.row_high[:, place[most]] for paid, most in self.paid_and_most]
        return dict.fromkeys(np.flatnonzero(np.any(wrong, axis=0)).tolist(), "")

    def _paid_and_most(self) -> list[tuple[int, int]]:
        """Rows of take-or-pay and of the most that can be bought, where both move."""
        moving = {row for several in self.moved.values() for moved in several for row in moved.places.tolist() if moved.bounds}
        keys = [(label, month) for label, source in self.case.sources.items() if source.take_or_pay for month in self.case.months]
        at = self.lp.row_at
        pairs = [(at.get(("take_or_pay_limit", *key), -1), at.get(("purchase_limit", *key), -1)) for key in keys]
        return [pair for pair in pairs if moving.issuperset(pair)]
