"""Random cases of a sweep: each number with its own spread, moving together as their correlation or their history says."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from statistics import NormalDist
from typing import Any

import numpy as np

from olefinlp.inputs.findings import Findings
from olefinlp.inputs.prices import NUMBER, typed_of
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.sweep_cases import DRAWS, SweepCases, Values
from olefinlp.inputs.sweep_correlation import Correlation, correlated, read_correlation
from olefinlp.inputs.sweep_history import History, read_history
from olefinlp.inputs.sweep_numbers import MOST_CASES, Entry, Number, Where, named_number, refuse_twice
from olefinlp.inputs.units import UnitError, parse_quantity
from olefinlp.inputs.varied import CALLED, PRICE
from olefinlp.inputs.yaml_files import Path_

NORMAL, LOGNORMAL, TRIANGULAR, UNIFORM = "normal", "lognormal", "triangular", "uniform"
TAKES: dict[str, tuple[str, ...]] = {
    NORMAL: ("sd",),
    LOGNORMAL: ("sd",),
    TRIANGULAR: ("low", "mode", "high"),
    UNIFORM: ("low", "high"),
}
"""What is written for each distribution; the mode is today's number where it is not written."""
_HISTORY = "the rows of the history"
_DIGITS = 12
_AT: Path_ = ("draws",)
_NORMAL = NormalDist()


@dataclass(frozen=True)
class Draws:
    """What is written of draws, before any of it is read: `numbers` maps paths to spreads, or lists paths."""

    numbers: object
    count: object
    seed: object
    correlation: object = None
    history: object = None
    antithetic: bool = False


@dataclass(frozen=True)
class Spread:
    """How one number is drawn: `middle`, `low` and `high` in its unit, or in per cent of today with today at 100.

    Without a distribution it comes from the history.
    """

    number: Number
    today: float
    distribution: str = ""
    sd: float = 0.0
    low: float = 0.0
    mode: float = 0.0
    high: float = 0.0

    def at(self, scores: Values) -> Values:
        """The values at normal scores."""
        if self.distribution == NORMAL:
            return self.today + self.sd * scores
        if self.distribution == LOGNORMAL:
            size = log_sd(self.sd / self.today)
            return np.array([self.today * math.exp(size * score) for score in scores.tolist()])
        shares = np.array([0.5 * math.erfc(-score / math.sqrt(2)) for score in scores.tolist()])
        if self.distribution == UNIFORM:
            return self.low + (self.high - self.low) * shares
        width = self.high - self.low
        rising = self.low + np.sqrt(shares * width * (self.mode - self.low))
        falling = self.high - np.sqrt((1 - shares) * width * (self.high - self.mode))
        return np.where(shares * width < self.mode - self.low, rising, falling)

    @property
    def text(self) -> str:
        """The spread in words."""
        name, unit = self.number.varied.name, "% of today" if self.number.percent else self.number.varied.unit
        if not self.distribution:
            return f"{name}: from the history"
        values = {"sd": self.sd, "low": self.low, "mode": self.mode, "high": self.high}
        middle = {LOGNORMAL: "median ", NORMAL: "mean "}.get(self.distribution)
        parts = [f"{middle}{self.today:.6g}"] if middle else []
        parts += [f"{word} {values[word]:.6g}" for word in TAKES[self.distribution]]
        return f"{name}: {self.distribution}, {', '.join(parts)} {unit}".rstrip()


def draw_cases(
    scenario: Scenario,
    spreads: Mapping[str, Mapping[str, object] | None] | Sequence[str],
    count: int,
    seed: int,
    correlation: object = None,
    history: object = None,
    antithetic: bool = False,
) -> SweepCases:
    """Random cases: `count` draws of the numbers of `spreads`.

    `spreads` maps each number (`path`, or `path @ month`) to its spread:

    * `{"sd": "10 %"}` of today's value, or `{"sd": 52}` in the unit of the number. A price above zero that
      leans on no other price is lognormal, with today's value as its median; any other number is normal, with
      today's value as its mean. `"distribution"` says otherwise. The standard deviation is that of the values
      themselves, also of lognormal ones.
    * `{"distribution": "uniform", "low": 480, "high": 600}`, or `"triangular"` with `"mode"` (today's value
      where it is not written). `"low": "-10 %"` is ten per cent below today's value.
    * nothing (`None` or `{}`): it comes from the history. All numbers of a list do.

    A number that is not the same in all months takes percentages only, and changes in all months alike.

    `correlation` is a matrix or pairs of the numbers with a spread (see `read_correlation`). It is the
    correlation of normal scores, from which each number is then worked out by its own distribution (a Gaussian
    copula): what is written of each number stays exact, while the correlation of the values themselves, and
    their rank correlation, differ slightly from that of the normal scores. Without it, numbers are drawn
    independently of each other, which makes the spread of a margin too wide or too narrow.

    `history` is a table of past prices by date (see `read_history`). Changes from each row to the next are drawn,
    whole rows at a time with replacement, and applied to today's values: all numbers keep what they did together,
    and the rows' distance in time is how far the draws look ahead. No trend is taken out.

    `antithetic` makes pairs of mirrored draws: the first above its median where the second is below.

    Bits come from PCG64 with a stream for each number, named by the number: without correlation a number's draws
    stay the same when another number is added, with it when the other is written after it; and the first draws
    stay the same when more are drawn. Values are kept to twelve digits, so that the last bits of a machine's
    mathematics do not show. Raises `InputError` with everything that is wrong.

    >>> from olefinlp import read_scenario
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> cases = draw_cases(march, {"feeds.ethane.contract": {"sd": "10 %"}}, count=200, seed=7)
    >>> len(cases), cases.note
    (200, '200 draws, seed 7. feeds.ethane.contract: lognormal, median 41, sd 4.1 USc/gal.')
    """
    findings = Findings()
    written = Draws(spreads, count, seed, correlation, history, antithetic)
    cases = drawn_cases(scenario, written, lambda _: CALLED, findings)
    findings.stop_on_errors()
    assert cases is not None
    return cases


def drawn_cases(scenario: Scenario, written: Draws, where: Where, findings: Findings) -> SweepCases | None:
    """Random cases as written; None with findings. `where` is asked for `("draws", …)`."""
    count = _whole(written.count, "count", 1, MOST_CASES, where, findings)
    seed = _whole(written.seed, "seed", 0, 2**64 - 1, where, findings)
    if written.antithetic and count and count % 2:
        findings.error(where((*_AT, "count")), "count", f"`{count}` is odd: mirrored draws come in pairs")
    named = _named(scenario, written, where, findings)
    own = [one.number for one in named if one.spread is None or one.spread.distribution]
    past = [one.number for one in named if one.spread and not one.spread.distribution]
    spreads = [one.spread for one in named if one.spread]
    correlation = None if written.correlation is None else read_correlation(written.correlation, own, where, findings)
    history = None if written.history is None or not past else read_history(written.history, past, where, findings)
    if findings.errors or count is None or seed is None:
        return None
    columns = _drawn(spreads, count, seed, correlation, history, written.antithetic)
    return SweepCases(
        scenario,
        tuple(spread.number.varied for spread in spreads),
        tuple(spread.number.percent for spread in spreads),
        columns,
        DRAWS,
        (),
        _note(spreads, count, seed, correlation, history, written.antithetic),
    )


def _whole(value: object, name: str, low: int, high: int, where: Where, findings: Findings) -> int | None:
    """A whole number from `low` to `high`; None with a finding."""
    if value is None:
        hint = "any whole number; with the same one the draws are the same" if name == "seed" else ""
        findings.error(where(_AT), "draws", f"`{name}` is missing", hint)
    elif isinstance(value, bool) or not isinstance(value, int | np.integer):
        findings.error(where((*_AT, name)), name, f"`{value}` is not a whole number")
    elif not low <= value <= high:
        text = f"`{value}` must be at least {low}" if value < low else f"`{value}` must be at most {high:,}"
        findings.error(where((*_AT, name)), name, text)
    else:
        return int(value)
    return None


# ---------------------------------------------------------------------------------- spreads


@dataclass(frozen=True, slots=True)
class _Named:
    """A number that is drawn, and its spread (None with findings)."""

    number: Number
    spread: Spread | None


def _named(scenario: Scenario, written: Draws, where: Where, findings: Findings) -> list[_Named]:
    """The numbers that are drawn, those that are none left out with a finding."""
    listed: Mapping[Any, object]
    if isinstance(written.numbers, Mapping):
        listed = written.numbers
    elif isinstance(written.numbers, Sequence) and not isinstance(written.numbers, str):
        listed = dict.fromkeys(written.numbers)
    else:
        findings.error(where((*_AT, "numbers")), "numbers", "needs `path: {sd: 10 %}` lines")
        return []
    if not listed:
        findings.error(where((*_AT, "numbers")), "numbers", "no number varies")
    found = [_spread(scenario, name, spread, where, findings) for name, spread in listed.items()]
    named = [one for one in found if one]
    refuse_twice((one.number for one in named), findings)
    _check_history(written, named, len(named) < len(listed), where, findings)
    return named


def _check_history(written: Draws, named: Sequence[_Named], some_unknown: bool, where: Where, findings: Findings) -> None:
    """A history is for numbers without a spread, and they need one."""
    past = [one.number for one in named if one.spread and not one.spread.distribution]
    if written.history is None:
        for number in past:
            text = "has neither a spread nor a history"
            findings.error(number.place, number.written, text, "write for example `{sd: 10 %}`")
        return
    if not past and not some_unknown:
        text = "no number comes from the history: each has a spread of its own"
        hint = "name a number without a spread, or take the history away"
        findings.error(where((*_AT, "history")), "history", text, hint)
    if written.antithetic:
        findings.error(where(_AT), "antithetic", f"{_HISTORY} have no mirrored draws", "take `antithetic` away")


def _spread(scenario: Scenario, name: Any, written: object, where: Where, findings: Findings) -> _Named | None:
    """One number and its spread; None with a finding where there is no such number."""
    at: Path_ = (*_AT, "numbers", name)
    fields: dict[object, object] = dict(written) if isinstance(written, Mapping) else {}
    number = named_number(scenario, name, where(at), findings, str(fields.pop("month", None) or ""))
    entry = Entry(str(name), number.varied.unit if number else None, at, where, findings)
    if written is not None and not isinstance(written, Mapping):
        entry.error((), "needs `name: value` pairs", "for example `{sd: 10 %}`")
        return _Named(number, None) if number else None
    if number is None:
        return None
    if number.percent:
        entry.error((), "is written with `%`: that is for values, not for draws", "write for example `{sd: 10 %}`")
        return _Named(number, None)
    today = [value for _, value in number.varied.today]
    if len(set(today)) > 1:
        number = replace(number, percent=True)  # each month from its own value
    plain = Spread(number, 100.0 if number.percent else today[0])
    return _Named(number, _with_levels(scenario, plain, fields, entry) if fields else plain)


def _with_levels(scenario: Scenario, plain: Spread, fields: dict[object, object], entry: Entry) -> Spread | None:
    """A spread with its distribution and what belongs to it; None with findings."""
    given = fields.pop("distribution", None)
    distribution = given or _usual(scenario, plain)
    if not isinstance(distribution, str) or distribution not in TAKES:
        entry.error(("distribution",), f"`{distribution}` is not one of: {', '.join(TAKES)}")
        return None
    takes = TAKES[distribution]
    if given is None and "sd" not in fields:
        entry.error((), "has no `sd`", "write `sd`, or `distribution` and what belongs to it")
        return None
    if not entry.only(fields, (*takes, "distribution", "month")):
        return None
    needed = [word for word in takes if word not in fields and word != "mode"]
    for word in needed:
        entry.error((), f"`{word}` is missing: a {distribution} spread takes {', '.join(takes)}")
    levels = {word: _level(plain, word, fields[word], entry) for word in takes if word in fields}
    if needed or any(level is None for level in levels.values()):
        return None
    known = {"mode": plain.today} | {word: level for word, level in levels.items() if level is not None}
    sd, low, mode, high = (known.get(word, 0.0) for word in ("sd", "low", "mode", "high"))
    spread = Spread(plain.number, plain.today, distribution, sd, low, mode, high)
    return spread if _possible(spread, entry) else None


def _usual(scenario: Scenario, plain: Spread) -> str:
    """The distribution where none is written."""
    varied = plain.number.varied
    if varied.kind != PRICE or min(value for _, value in varied.today) <= 0:
        return NORMAL
    own = all(typed_of(scenario.case.prices[varied.path, month])[0] == NUMBER for month, _ in varied.today)
    return LOGNORMAL if own else NORMAL


def _level(plain: Spread, word: str, value: object, entry: Entry) -> float | None:
    """A standard deviation above zero, or an end; None with a finding."""
    level = _in_unit(plain, word, value, entry)
    if word == "sd" and level is not None and level <= 0:
        entry.error((word,), f"`sd`: `{value}` is not above zero")
        return None
    return level


def _in_unit(plain: Spread, word: str, value: object, entry: Entry) -> float | None:
    """A level in the unit of the number, or in per cent with today at 100; None with a finding."""
    share = _percentage(value)
    if share is None:
        level = entry.number(value, (word,), word)
        if level is not None and plain.number.percent:
            hint = "write it in per cent of today, or vary one month: `path @ month`"
            entry.error((word,), f"`{word}`: this number is not the same in every month", hint)
            return None
        return level
    if entry.unit == "%":
        text = f"`{word}`: `{value}` may mean per cent of today, or the unit of this number, which is %"
        entry.error((word,), text, "write the number alone: it is in the unit")
        return None
    if not any(value for _, value in plain.number.varied.today):
        entry.error((word,), f"`{word}`: this number is 0 today, so a percentage of it is nothing", "write it in its unit")
        return None
    return abs(plain.today) * share if word == "sd" else plain.today + abs(plain.today) * share


def _percentage(value: object) -> float | None:
    """The fraction that `10 %` is; None for anything else."""
    if not isinstance(value, str):
        return None
    try:
        quantity = parse_quantity(value)
    except UnitError:
        return None
    return quantity.number / 100 if quantity.unit.text == "%" else None


def _possible(spread: Spread, entry: Entry) -> bool:
    """Whether there is such a distribution; a finding where there is not."""
    before = len(entry.findings.errors)
    lowest = min(value for _, value in spread.number.varied.today)
    if spread.distribution == LOGNORMAL and lowest <= 0:
        text = f"is {lowest:.6g} today: a lognormal spread is of a number above zero"
        entry.error(("distribution",), text, f"write `distribution: {NORMAL}`")
    if "low" in TAKES[spread.distribution] and not spread.low < spread.high:
        entry.error(("low",), f"`low` {spread.low:.6g} is not below `high` {spread.high:.6g}")
    elif spread.distribution == TRIANGULAR and not spread.low <= spread.mode <= spread.high:
        text = f"the mode {spread.mode:.6g} is not between `low` {spread.low:.6g} and `high` {spread.high:.6g}"
        entry.error(("mode",), text, "the mode is today's number where it is not written")
    return len(entry.findings.errors) == before


def log_sd(share: float) -> float:
    """The standard deviation of the logarithm of a lognormal number whose own is `share` times its median.

    With w = exp(s²) the variance is median² w (w − 1), so that w is the root of w² − w − share² = 0.

    >>> round(log_sd(0.1), 5)
    0.09926
    """
    return math.sqrt(math.log((1 + math.sqrt(1 + 4 * share * share)) / 2))


# ---------------------------------------------------------------------------------- drawing


def _drawn(
    spreads: Sequence[Spread], count: int, seed: int, correlation: Correlation | None, history: History | None, mirrored: bool
) -> Values:
    """The values, a row a case; in per cent of today where the number's column is."""
    own = [spread for spread in spreads if spread.distribution]
    scores = np.column_stack([_scores(s.number.varied.name, count, seed, mirrored) for s in own]) if own else np.zeros((count, 0))
    if correlation is not None:
        scores = correlated(scores, correlation.matrix)
    columns = {spread.number: spread.at(scores[:, column]) for column, spread in enumerate(own)}
    if history is not None:
        rows = (_shares(_HISTORY, count, seed) * len(history.ratios)).astype(int)
        past = [spread for spread in spreads if not spread.distribution]
        columns |= {spread.number: spread.today * history.ratios[rows, column] for column, spread in enumerate(past)}
    changes = [columns[spread.number] - (100.0 if spread.number.percent else 0.0) for spread in spreads]
    return np.column_stack([_kept(column) for column in changes])


def _shares(name: str, count: int, seed: int) -> Values:
    """Numbers above 0 and below 1, the stream of one name: raw bits, whose meaning no version of a library changes."""
    digest = hashlib.sha256(name.encode()).digest()
    key = tuple(int.from_bytes(digest[start : start + 4], "little") for start in range(0, 16, 4))
    raw = np.random.PCG64(np.random.SeedSequence(seed, spawn_key=key)).random_raw(count)
    return ((raw >> np.uint64(11)).astype(float) + 0.5) * 2.0**-53


def _scores(name: str, count: int, seed: int, mirrored: bool) -> Values:
    """Independent normal scores of one number; mirrored ones stand in pairs."""
    shares = _shares(name, count // 2 if mirrored else count, seed)
    inverse: Callable[[float], float] = _NORMAL.inv_cdf
    scores = np.array([inverse(share) for share in shares.tolist()])
    return np.column_stack([scores, -scores]).ravel() if mirrored else scores


def _kept(values: Values) -> Values:
    """Values to twelve digits, without minus zero."""
    return np.array([float(f"{value:.{_DIGITS}g}") for value in values.tolist()]) + 0.0


def _note(
    spreads: Sequence[Spread], count: int, seed: int, correlation: Correlation | None, history: History | None, mirrored: bool
) -> str:
    """What a reader must know of the draws."""
    parts = [f"{count:,} draws, seed {seed}" + (", in mirrored pairs" if mirrored else "")]
    parts.append("; ".join(spread.text for spread in spreads))
    own = sum(bool(spread.distribution) for spread in spreads)
    if correlation is not None:
        parts.append(f"Correlated as in {correlation.source}" if correlation.source else "Correlated as written with them")
    elif own > 1 or (own and history):
        parts.append("Those with a distribution are drawn independently: no correlation is written")
    if history is not None:
        changes = f"{len(history.ratios):,} changes from row to row, {history.first} to {history.last}"
        parts.append(f"History: {changes}" + (f" ({history.source})" if history.source else ""))
    return ". ".join(parts) + "."
