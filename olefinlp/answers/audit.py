"""What proves a plan: versions, options, residuals, balances, files with their hashes."""

from __future__ import annotations

from typing import TYPE_CHECKING

from olefinlp.answers.balances import check_loads
from olefinlp.answers.tables import Column, Table
from olefinlp.lp.solver import OPTIONS, solver_version

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

CAUTIONS = (
    "Planning aid: estimates from the yields, limits and prices supplied; good to about ±1 % of margin at best.",
    "Not for operating limits, alarms, trips or furnace conditions.",
    "The plant's own engineering limits, management of change, local codes and licensed practice always win.",
    "Shipped yields and prices are invented: replace them with data you have the right to use.",
    "Not in the plan: furnace-by-furnace scheduling, coil metal temperatures, transients, off-specification product, "
    "logistics within the month, tax.",
)


def audit_table(plan: Plan) -> Table:
    """One line a fact."""
    from olefinlp import __version__

    c, scenario = plan.certificate, plan.scenario
    rows = [
        _row("what", "plant", scenario.plant.name, scenario.plant.file.source),
        _row("what", "scenario", scenario.title, f"price case {scenario.price_case or 'in the scenario'}"),
        _row("what", "tool", f"olefinlp {__version__}", ""),
        _row("solve", "status", plan.status, "only a proven optimum is a plan"),
        _row("solve", "solver", solver_version(), ", ".join(f"{k}={v}" for k, v in OPTIONS.items())),
        _row("solve", "size", f"{len(plan.lp.rows)} rows, {len(plan.lp.columns)} columns, {len(plan.lp.value)} non-zeros", ""),
        _row("solve", "simplex iterations", str(plan.solution.iterations), ""),
        _row("proof", "primal residual", f"{c.primal:.1e}", f"allowed {c.tolerance:.0e}, relative to each row's size"),
        _row("proof", "dual residual", f"{c.dual:.1e}", f"allowed {c.tolerance:.0e}, relative to each column's size"),
        _row("proof", "complementarity", f"{c.complementarity:.1e}", f"allowed {c.tolerance:.0e}, relative to money moved"),
        _row("proof", "duality gap", f"{c.gap:.1e}", f"allowed {c.tolerance:.0e}, relative to money moved"),
        _row("proof", "loads, components and cuts again from the tables", f"{check_loads(plan.recomputed):.1e}", "allowed 1e-06"),
    ]
    worst: dict[str, tuple[float, str]] = {}
    for record in plan.closures.rows:
        if record["relative"] is None:
            rows.append(_row("balance", record["balance"], "not balanced", record["closes"]))
        elif record["relative"] >= worst.get(record["balance"], (-1.0, ""))[0]:
            worst[record["balance"]] = (record["relative"], f"allowed {record['tolerance']:.0e}, {record['month']}")
    rows += [_row("balance", name, f"{value:.1e}", text) for name, (value, text) in worst.items()]
    rows += [_row("file", name, sha, "SHA-256") for name, sha in plan.file_hashes().items()]
    rows += [_row("warning", str(w.place), w.message, w.hint) for w in plan.warnings]
    rows += [_row("caution", "", text, "") for text in CAUTIONS]
    columns = (Column("part", "Part"), Column("name", "Name"), Column("value", "Value"), Column("note", "Note"))
    return Table("audit", "Audit", columns, rows)


def _row(part: str, name: str, value: str, note: str) -> dict[str, str]:
    return {"part": part, "name": name, "value": value, "note": note}
