"""The numbers that a sweep names, and the values written for them: lists, steps, changes in per cent."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction

import numpy as np

from olefinlp.inputs.findings import Findings, Place, near_name
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.units import UnitError, parse_quantity, parse_unit
from olefinlp.inputs.varied import NoNumber, Varied, find_varied
from olefinlp.inputs.yaml_files import Path_

MOST_CASES = 1_000_000
"""More than this are refused: they would not be planned in a working day."""
Where = Callable[[Path_], Place]
"""Where something of a sweep is written: its path in the sweep → its place."""
NUMBER_TEXT = re.compile(r"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?", re.ASCII)
_NAMED = re.compile(r"^(?P<path>[^\s@%]+)\s*(?:@\s*(?P<month>[^%]*?)\s*)?(?P<percent>%)?$")
_STEPS = ("from", "to", "step", "count")
_FORMS = ("values", "percent", *_STEPS, "month")


@dataclass(frozen=True, slots=True)
class Percent:
    """Changes in per cent of today's number."""

    changes: tuple[float, ...]


def percent(*changes: float) -> Percent:
    """Values written as changes in per cent of today's number.

    >>> percent(-10, 0, 10).changes
    (-10, 0, 10)
    """
    return Percent(changes)


# ---------------------------------------------------------------------------------- numbers that vary


@dataclass(frozen=True, slots=True)
class Number:
    """A number named in a sweep, as written there, and whether its values are changes in per cent."""

    written: str
    varied: Varied
    percent: bool
    place: Place


def path_and_month(written: str) -> tuple[str, str] | None:
    """The two parts of `path @ month`, the month empty where there is none; None for something else.

    >>> path_and_month("feeds.ethane.contract @ 2031-05")
    ('feeds.ethane.contract', '2031-05')
    """
    found = _NAMED.match(written.strip())
    return (found["path"], found["month"] or "") if found else None


def named_number(scenario: Scenario, written: object, place: Place, findings: Findings, month: str = "") -> Number | None:
    """The number that a heading or name means: `path`, `path @ month`, `path %`; None with a finding."""
    found = _NAMED.match(written.strip()) if isinstance(written, str) else None
    if not found:
        findings.error(place, str(written), "is not the path of a number", "write `path`, or `path @ month`")
        return None
    beside = found["month"] or ""
    if month and beside and month != beside:
        findings.error(place, str(written), f"names two months, `{beside}` and `{month}`", "write one of them")
        return None
    try:
        varied = find_varied(scenario, found["path"], month or beside)
    except NoNumber as error:
        findings.error(place, str(written), error.message, error.hint)
        return None
    return Number(str(written), varied, bool(found["percent"]), place)


def refuse_twice(numbers: Iterable[Number], findings: Findings) -> None:
    """A finding for each number that varies twice: by another name, or in a month and in all of them."""
    seen: dict[str, list[Number]] = {}
    for number in numbers:
        for other in seen.setdefault(number.varied.path, []):
            months = {number.varied.month, other.varied.month}
            if len(months) == 1 or "" in months:
                text = f"is varied twice, the other time as `{other.written}`"
                findings.error(number.place, number.written, text, "take one away")
                break
        seen[number.varied.path].append(number)


def refuse_percent_of_nothing(number: Number, findings: Findings) -> None:
    """A finding where today's number is nothing, so that no change in per cent changes it."""
    if number.percent and not any(value for _, value in number.varied.today):
        text = "is 0 today: a change in per cent of it changes nothing"
        findings.error(number.place, number.written, text, "write values in its unit")


# ---------------------------------------------------------------------------------- values


@dataclass(frozen=True, slots=True)
class Entry:
    """What is written for one number: reads values in its unit (None where the number is not known)."""

    name: str
    unit: str | None
    at: Path_
    where: Where
    findings: Findings

    def error(self, below: Path_, message: str, hint: str = "") -> None:
        """Add a finding at a place below this entry."""
        self.findings.error(self.where((*self.at, *below)), self.name, message, hint)

    def number(self, value: object, below: Path_, what: str = "") -> float | None:
        """A finite number, or a text with the number's own unit; None with a finding."""
        head = f"`{what}`: " if what else ""
        if isinstance(value, str):
            return self._quantity(value, below, head)
        number = plain_number(value)
        if number is None:
            self.error(below, head + ("a value is empty" if value is None else f"`{value}` is not a number"))
        return number

    def _quantity(self, text: str, below: Path_, head: str) -> float | None:
        try:
            quantity = parse_quantity(text)
        except UnitError as error:
            known = bool(NUMBER_TEXT.match(text.strip())) and not NUMBER_TEXT.fullmatch(text.strip())
            self.error(below, head + (str(error) if known else f"`{text}` is not a number"), error.hint if known else "")
            return None
        if self.unit is not None and (not self.unit or quantity.unit.text != parse_unit(self.unit).text):
            written = f"is written in {self.unit}" if self.unit else "has no unit"
            hint = "write the number alone, or with that unit" if self.unit else "write the number alone"
            if quantity.unit.text == "%":
                hint += "; for changes in per cent write `percent: [...]`"
            self.error(below, f"{head}`{text}`: this number {written}", hint)
            return None
        return quantity.number

    def only(self, written: Mapping[object, object], known: Sequence[str], below: Path_ = ()) -> bool:
        """Whether all names are known ones; a finding for each that is not."""
        unknown = [str(name) for name in written if name not in known]
        for name in unknown:
            near = near_name(name, known)
            hint = near if near.startswith("did") else ""
            self.error((*below, name), f"unknown name `{name}`; here it takes: {', '.join(known)}", hint)
        return not unknown

    def values(self, written: object) -> list[float] | None:
        """All values, whichever way they are written; None with findings."""
        if isinstance(written, Percent):
            return self._list(written.changes, ())
        if not isinstance(written, Mapping):
            return self._list(written, ())
        if not self.only(written, _FORMS):
            return None
        forms = [form for form in ("values", "percent") if form in written]
        stepped = {name: value for name, value in written.items() if name in _STEPS}
        if len(forms) + bool(stepped) != 1:
            self.error((), "needs one of: `values`, `percent`, or `from` and `to`")
            return None
        if stepped:
            return self._steps(stepped, ())
        inside = written[forms[0]]
        return self._steps(inside, (forms[0],)) if isinstance(inside, Mapping) else self._list(inside, (forms[0],))

    def _list(self, written: object, below: Path_) -> list[float] | None:
        if isinstance(written, np.ndarray) and written.ndim > 1:
            self.error(below, f"a list of values is needed, not a table of {' × '.join(map(str, written.shape))}")
            return None
        one = isinstance(written, str) or not isinstance(written, Iterable) or getattr(written, "ndim", 1) == 0
        if isinstance(written, Sequence | np.ndarray) and len(written) > MOST_CASES:
            self.error(below, too_many(len(written)))
            return None
        items: list[object] = [written] if one else list(written)  # type: ignore[call-overload]
        if not items:
            self.error(below, "has no values")
            return None
        read = [self.number(item, below if one else (*below, index)) for index, item in enumerate(items)]
        values = [value for value in read if value is not None]
        return values if len(values) == len(items) else None

    def _steps(self, written: Mapping[object, object], below: Path_) -> list[float] | None:
        """Equal steps from one end to the other, each worked out from the ends, so that no rounding adds up."""
        if not self.only(written, _STEPS, below):
            return None
        missing = [name for name in ("from", "to") if name not in written]
        for name in missing:
            self.error(below, f"`{name}` is missing")
        if ("step" in written) == ("count" in written):
            self.error(below, "needs `step` or `count`, one of them")
            return None
        read = {name: self._end_or_step(written[name], (*below, name), name) for name in _STEPS if name in written}
        if missing or any(value is None for value in read.values()):
            return None
        exact = {name: Fraction(Decimal(repr(value))) for name, value in read.items()}
        count = self._count(exact, below)
        if count is None:
            return None
        start, step = exact["from"], (exact["to"] - exact["from"]) / max(count - 1, 1)
        return [float(start + number * step) for number in range(count)]

    def _end_or_step(self, value: object, below: Path_, name: str) -> float | None:
        if name != "count" or not isinstance(value, str):
            return self.number(value, below, name)
        self.error(below, f"`{name}`: `{value}` is not a number")
        return None

    def _count(self, exact: Mapping[str, Fraction], below: Path_) -> int | None:
        """How many values there are, both ends included; None with a finding."""
        start, end = exact["from"], exact["to"]
        if "count" in exact:
            count = exact["count"]
            if count.denominator != 1 or count < 2:
                self.error((*below, "count"), f"`count` is {_text(count)}: a whole number from 2 up is needed")
                return None
            steps = count - 1
        elif not exact["step"]:
            self.error((*below, "step"), "`step` is 0")
            return None
        else:
            steps = (end - start) / exact["step"]
        if steps < 0:
            text = f"goes from {_text(start)} to {_text(end)} in steps of {_text(exact['step'])}: that never arrives"
            self.error((*below, "step"), text, f"write `step: {_text(-exact['step'])}`, or change the ends over")
        elif steps >= MOST_CASES:
            self.error(below, too_many(int(steps) + 1))
        elif steps.denominator != 1:
            last = start + int(steps) * exact["step"]
            text = f"{_text(end)} is no whole number of steps of {_text(exact['step'])} from {_text(start)}"
            hint = f"end at {_text(last)} or {_text(last + exact['step'])}, or write `count` in place of `step`"
            self.error((*below, "step"), text, hint)
        else:
            return int(steps) + 1
        return None


def plain_number(value: object) -> float | None:
    """A finite number of any numeric type that is no truth value; else None."""
    if isinstance(value, bool | np.bool_ | str) or value is None:
        return None
    try:
        number = float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError, OverflowError):
        return None
    return number if math.isfinite(number) and abs(number) <= 1e15 else None


def _text(number: Fraction) -> str:
    return f"{float(number):.12g}"


def too_many(count: int) -> str:
    """What to say of more cases than are planned in one sweep."""
    return f"makes {count:,} cases; at most {MOST_CASES:,} are planned in one sweep"
