"""olefinlp: the monthly plan of a light-olefins (steam cracking) plant.

Read a scenario, make its plan, look at its tables:

>>> from olefinlp import make_plan, read_scenario
>>> plan = make_plan(read_scenario("scenarios/brackwater_2031_03.yaml"))
>>> round(plan.margin / 1e6, 2)
26.81
>>> plan.feeds.where(feed="ethane", source="contract")[0]["bought"]
30.0
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from olefinlp.answers.answer import Answer as Answer
    from olefinlp.answers.balances import BalanceError as BalanceError
    from olefinlp.answers.break_even import break_even_prices as break_even_prices
    from olefinlp.answers.bridge import bridge as bridge
    from olefinlp.answers.buying import buying_plan as buying_plan
    from olefinlp.answers.case_answers import case_answers as case_answers
    from olefinlp.answers.cash_cost import cash_cost as cash_cost
    from olefinlp.answers.comparison import Comparison as Comparison
    from olefinlp.answers.comparison import compare_cases as compare_cases
    from olefinlp.answers.curves import step_curve as step_curve
    from olefinlp.answers.default import default_answers as default_answers
    from olefinlp.answers.frontier import two_goal_curve as two_goal_curve
    from olefinlp.answers.impossible import explain_impossible as explain_impossible
    from olefinlp.answers.margin_owners import who_earns_the_margin as who_earns_the_margin
    from olefinlp.answers.plan import NoPlan as NoPlan
    from olefinlp.answers.plan import Plan as Plan
    from olefinlp.answers.plan import make_plan as make_plan
    from olefinlp.answers.price_ranges import price_ranges as price_ranges
    from olefinlp.answers.ratio_curve import ratio_curve as ratio_curve
    from olefinlp.answers.regret import regret_table as regret_table
    from olefinlp.answers.room import room_to_move as room_to_move
    from olefinlp.answers.sweep import Sweep as Sweep
    from olefinlp.answers.sweep import sweep as sweep
    from olefinlp.answers.sweep_answers import distribution as distribution
    from olefinlp.answers.sweep_answers import heat_map as heat_map
    from olefinlp.answers.sweep_answers import steps_of_sweep as steps_of_sweep
    from olefinlp.answers.sweep_answers import tornado as tornado
    from olefinlp.answers.tables import Table as Table
    from olefinlp.answers.why_not import why_not_feed as why_not_feed
    from olefinlp.answers.why_not import why_not_mode as why_not_mode
    from olefinlp.answers.worth import worth_of_limits as worth_of_limits
    from olefinlp.inputs.case_files import read_cases as read_cases
    from olefinlp.inputs.cases import CaseSet as CaseSet
    from olefinlp.inputs.findings import Finding as Finding
    from olefinlp.inputs.findings import InputError as InputError
    from olefinlp.inputs.plant import Plant as Plant
    from olefinlp.inputs.plant import read_plant as read_plant
    from olefinlp.inputs.scenario import Scenario as Scenario
    from olefinlp.inputs.scenario import read_scenario as read_scenario
    from olefinlp.inputs.sweep_draws import draw_cases as draw_cases
    from olefinlp.inputs.sweep_file import read_sweep_file as read_sweep_file
    from olefinlp.inputs.sweep_values import percent as percent
    from olefinlp.lp.certificate import CertificateError as CertificateError
    from olefinlp.outputs import read_sweep as read_sweep
    from olefinlp.outputs import sweep_into as sweep_into
    from olefinlp.outputs import write_answer as write_answer
    from olefinlp.outputs import write_bridge as write_bridge
    from olefinlp.outputs import write_case_sheet as write_case_sheet
    from olefinlp.outputs import write_comparison as write_comparison
    from olefinlp.outputs import write_csv as write_csv
    from olefinlp.outputs import write_json as write_json
    from olefinlp.outputs import write_lp as write_lp
    from olefinlp.outputs import write_sweep as write_sweep
    from olefinlp.outputs import write_workbook as write_workbook
    from olefinlp.outputs.files import OutputError as OutputError

__version__ = "0.1.0"

_HOMES = {
    "Answer": "olefinlp.answers.answer",
    "BalanceError": "olefinlp.answers.balances",
    "CaseSet": "olefinlp.inputs.cases",
    "CertificateError": "olefinlp.lp.certificate",
    "Comparison": "olefinlp.answers.comparison",
    "Finding": "olefinlp.inputs.findings",
    "InputError": "olefinlp.inputs.findings",
    "NoPlan": "olefinlp.answers.plan",
    "OutputError": "olefinlp.outputs.files",
    "Plan": "olefinlp.answers.plan",
    "Plant": "olefinlp.inputs.plant",
    "Scenario": "olefinlp.inputs.scenario",
    "Sweep": "olefinlp.answers.sweep",
    "Table": "olefinlp.answers.tables",
    "break_even_prices": "olefinlp.answers.break_even",
    "bridge": "olefinlp.answers.bridge",
    "buying_plan": "olefinlp.answers.buying",
    "case_answers": "olefinlp.answers.case_answers",
    "cash_cost": "olefinlp.answers.cash_cost",
    "compare_cases": "olefinlp.answers.comparison",
    "default_answers": "olefinlp.answers.default",
    "distribution": "olefinlp.answers.sweep_answers",
    "draw_cases": "olefinlp.inputs.sweep_draws",
    "explain_impossible": "olefinlp.answers.impossible",
    "heat_map": "olefinlp.answers.sweep_answers",
    "make_plan": "olefinlp.answers.plan",
    "percent": "olefinlp.inputs.sweep_values",
    "price_ranges": "olefinlp.answers.price_ranges",
    "ratio_curve": "olefinlp.answers.ratio_curve",
    "read_cases": "olefinlp.inputs.case_files",
    "read_plant": "olefinlp.inputs.plant",
    "read_scenario": "olefinlp.inputs.scenario",
    "read_sweep": "olefinlp.outputs",
    "read_sweep_file": "olefinlp.inputs.sweep_file",
    "regret_table": "olefinlp.answers.regret",
    "room_to_move": "olefinlp.answers.room",
    "step_curve": "olefinlp.answers.curves",
    "steps_of_sweep": "olefinlp.answers.sweep_answers",
    "sweep": "olefinlp.answers.sweep",
    "sweep_into": "olefinlp.outputs",
    "tornado": "olefinlp.answers.sweep_answers",
    "two_goal_curve": "olefinlp.answers.frontier",
    "who_earns_the_margin": "olefinlp.answers.margin_owners",
    "why_not_feed": "olefinlp.answers.why_not",
    "why_not_mode": "olefinlp.answers.why_not",
    "worth_of_limits": "olefinlp.answers.worth",
    "write_answer": "olefinlp.outputs",
    "write_bridge": "olefinlp.outputs",
    "write_case_sheet": "olefinlp.outputs",
    "write_comparison": "olefinlp.outputs",
    "write_csv": "olefinlp.outputs",
    "write_json": "olefinlp.outputs",
    "write_lp": "olefinlp.outputs",
    "write_sweep": "olefinlp.outputs",
    "write_workbook": "olefinlp.outputs",
}

__all__ = [
    "Answer",
    "BalanceError",
    "CaseSet",
    "CertificateError",
    "Comparison",
    "Finding",
    "InputError",
    "NoPlan",
    "OutputError",
    "Plan",
    "Plant",
    "Scenario",
    "Sweep",
    "Table",
    "__version__",
    "break_even_prices",
    "bridge",
    "buying_plan",
    "case_answers",
    "cash_cost",
    "compare_cases",
    "default_answers",
    "distribution",
    "draw_cases",
    "explain_impossible",
    "heat_map",
    "make_plan",
    "percent",
    "price_ranges",
    "ratio_curve",
    "read_cases",
    "read_plant",
    "read_scenario",
    "read_sweep",
    "read_sweep_file",
    "regret_table",
    "room_to_move",
    "step_curve",
    "steps_of_sweep",
    "sweep",
    "sweep_into",
    "tornado",
    "two_goal_curve",
    "who_earns_the_margin",
    "why_not_feed",
    "why_not_mode",
    "worth_of_limits",
    "write_answer",
    "write_bridge",
    "write_case_sheet",
    "write_comparison",
    "write_csv",
    "write_json",
    "write_lp",
    "write_sweep",
    "write_workbook",
]


def __getattr__(name: str) -> Any:
    """Load a public name when it is first used, so that importing the package costs nothing."""
    if name not in _HOMES:
        raise AttributeError(f"module 'olefinlp' has no attribute {name!r}")
    if _HOMES[name].startswith("olefinlp.answers"):
        import pyomo.core  # noqa: F401  # first: it is three times slower to load after scipy or pint
    return getattr(importlib.import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return __all__
