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
    from olefinlp.answers.balances import BalanceError as BalanceError
    from olefinlp.answers.plan import NoPlan as NoPlan
    from olefinlp.answers.plan import Plan as Plan
    from olefinlp.answers.plan import make_plan as make_plan
    from olefinlp.answers.tables import Table as Table
    from olefinlp.inputs.findings import Finding as Finding
    from olefinlp.inputs.findings import InputError as InputError
    from olefinlp.inputs.plant import Plant as Plant
    from olefinlp.inputs.plant import read_plant as read_plant
    from olefinlp.inputs.scenario import Scenario as Scenario
    from olefinlp.inputs.scenario import read_scenario as read_scenario
    from olefinlp.lp.certificate import CertificateError as CertificateError
    from olefinlp.outputs import write_csv as write_csv
    from olefinlp.outputs import write_json as write_json
    from olefinlp.outputs import write_lp as write_lp
    from olefinlp.outputs import write_workbook as write_workbook

__version__ = "0.1.0"

_HOMES = {
    "BalanceError": "olefinlp.answers.balances",
    "CertificateError": "olefinlp.lp.certificate",
    "Finding": "olefinlp.inputs.findings",
    "InputError": "olefinlp.inputs.findings",
    "NoPlan": "olefinlp.answers.plan",
    "Plan": "olefinlp.answers.plan",
    "Plant": "olefinlp.inputs.plant",
    "Scenario": "olefinlp.inputs.scenario",
    "Table": "olefinlp.answers.tables",
    "make_plan": "olefinlp.answers.plan",
    "read_plant": "olefinlp.inputs.plant",
    "read_scenario": "olefinlp.inputs.scenario",
    "write_csv": "olefinlp.outputs",
    "write_json": "olefinlp.outputs",
    "write_lp": "olefinlp.outputs",
    "write_workbook": "olefinlp.outputs",
}

__all__ = [
    "BalanceError",
    "CertificateError",
    "Finding",
    "InputError",
    "NoPlan",
    "Plan",
    "Plant",
    "Scenario",
    "Table",
    "__version__",
    "make_plan",
    "read_plant",
    "read_scenario",
    "write_csv",
    "write_json",
    "write_lp",
    "write_workbook",
]


def __getattr__(name: str) -> Any:
    """Load a public name when it is first used, so that importing the package costs nothing."""
    if name not in _HOMES:
        raise AttributeError(f"module 'olefinlp' has no attribute {name!r}")
    if _HOMES[name].startswith("olefinlp.answers"):
        import pyomo.environ  # noqa: F401  # first: it is three times slower to load after scipy or pint
    return getattr(importlib.import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return __all__
