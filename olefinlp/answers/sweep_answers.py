"""The answers around a sweep, and which of them suits it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer
from olefinlp.answers.sweep_distribution import distribution
from olefinlp.answers.sweep_figures import FEW, figures, money_words, planned, short_names, stays, value_words, varied_unit
from olefinlp.answers.sweep_heat_map import heat_grid, heat_map
from olefinlp.answers.sweep_steps import step_values, steps_of_sweep
from olefinlp.answers.sweep_tornado import tornado, tornado_bars
from olefinlp.inputs.sweep_cases import DRAWS, ONE_AT_A_TIME

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep

DISTRIBUTION, TORNADO, STEPS, HEAT_MAP = "distribution", "tornado", "steps", "heat map"


def suits(sweep: Sweep) -> str:
    """Which answer suits a sweep: `distribution`, `tornado`, `steps` or `heat map`.

    Draws make a distribution, one number at a time a tornado, one number steps, a full grid of two a heat map; all other
    cases are counted alike in a distribution.
    """
    if sweep.cases.how == DRAWS:
        return DISTRIBUTION
    if len(sweep.cases.varied) == 1:
        return STEPS
    if sweep.cases.how == ONE_AT_A_TIME and _can(tornado_bars, sweep):
        return TORNADO
    return HEAT_MAP if _can(heat_grid, sweep) else DISTRIBUTION


def _can(find: Callable[[Sweep], object], sweep: Sweep) -> bool:
    try:
        find(sweep)
    except ValueError:
        return False
    return True


def sweep_answer(sweep: Sweep, readings: Sequence[str] | None = None) -> Answer:
    """The answer that suits a sweep. `readings` are shown along the steps; the first of them in a second heat map.

    Raises `ValueError` for a reading that was not read out.

    >>> from olefinlp import read_scenario
    >>> from olefinlp.answers.sweep import sweep
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> sweep_answer(sweep(march, {"outlets.ethylene_spot": [30, 36]})).name
    'steps'
    """
    which = suits(sweep)
    if which == DISTRIBUTION:
        return distribution(sweep)
    if which == TORNADO:
        return tornado(sweep)
    return steps_of_sweep(sweep, readings) if which == STEPS else heat_map(sweep, readings[0] if readings else None)


def message(sweep: Sweep) -> str:
    """What a sweep says, in one line.

    >>> from olefinlp import read_scenario
    >>> from olefinlp.answers.sweep import sweep
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> message(sweep(march, {"outlets.ethylene_spot": [30, 36]}))
    'the margin goes from 25.80 to 27.85 MUSD along ethylene spot, 30 to 36 USc/lb'
    """
    margins = sweep.margin[planned(sweep)]
    if not len(margins):
        return "no case has a plan"
    which = suits(sweep)
    if stays(sweep):
        return f"the margin stays at {money_words(float(margins[0]), sweep.currency)} in every case that has a plan"
    if which == TORNADO:
        bar = tornado_bars(sweep)[0]
        name = short_names(sweep)[bar.number]
        return f"{name} moves the margin most, by {money_words(bar.swing, sweep.currency)} between its ends"
    if which == DISTRIBUTION:
        found = figures(margins)
        mean = money_words(found.mean or 0.0, sweep.currency)
        if found.count < FEW:
            return f"the margin lies between {_span(sweep, found.low, found.high)}, {mean} on average"
        return f"the margin is {mean} on average, eight cases in ten between {_span(sweep, found.p10, found.p90)}"
    if which == HEAT_MAP:
        return f"the margin lies between {_span(sweep, margins.min(), margins.max())} over {' and '.join(short_names(sweep))}"
    span = _span(sweep, margins.min(), margins.max()).replace(" and ", " to ")
    values = step_values(sweep)
    low, high = (value_words(float(end), varied_unit(sweep, 0)) for end in (values.min(), values.max()))
    return f"the margin goes from {span} along {short_names(sweep)[0]}, {low.partition(' ')[0]} to {high}"


def _span(sweep: Sweep, low: float | None, high: float | None) -> str:
    """Two amounts of money, the unit said once where it is the same."""
    ends = [money_words(float(end or 0.0), sweep.currency) for end in (low, high)]
    (first, unit), (_, other) = (end.split(" ", 1) for end in ends)
    return f"{first if unit == other else ends[0]} and {ends[1]}"


__all__ = ["distribution", "heat_map", "message", "steps_of_sweep", "suits", "sweep_answer", "tornado"]
