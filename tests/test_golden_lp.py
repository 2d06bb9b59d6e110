"""Every rule of the algebra as text, on the smallest plant that shows it, against a file that a person has read.

The files in `golden/lp/` are never written by a test. To make one, `python tests/test_golden_lp.py FAMILY` prints its text: put
it there and read it against the rule. A period has 100 hours; numbers as %.6g; terms in the order of their names.
"""

from __future__ import annotations

import math
import sys
import tempfile
from pathlib import Path
from typing import Any

import pyomo.environ as pyo
import pytest
from plants import merged, read

from olefinlp.lp.algebra import TEXTS, build_model
from olefinlp.lp.compile import LabelledLp, compile_model

GOLDEN = Path(__file__).resolve().parent / "golden" / "lp"

BASE: dict[str, Any] = {
    "yields": "feed, severity, ethylene, rest\nnaphtha, base, 40, 60",
    "modes": "group, feed, severity, charge\nfurnaces, naphtha, base, 10",
    "plant": {},
    "scenario": {"months": [{"name": "m", "hours": 100}], "feeds": {"naphtha": {"spot": {"max": "9 kt", "price": "500 USD/t"}}}},
    "prices": {"ethylene": 1000, "rest": 200},
}
STEPS = [{"up_to": f"{end} kt", "price": f"{price} USD/t"} for end, price in ((1, 250), (3, 240), (4, 230))]
TWO = [{"name": "m1", "hours": 100}, {"name": "m2", "hours": 100}]
TANK = {"opening": "1 kt", "min": "0.5 kt", "max": "3 kt", "holding": "0.1 USD/t/h", "end": "at least opening"}
DECOKED = "group, feed, severity, charge, run_length, decoke\nfurnaces, naphtha, base, 10, 20, 48"
STREAM = {
    "plant": {"side_streams": {"stream": {"composition": {"ethylene": "30 wt%", "rest": "70 wt%"}}}},
    "scenario": {"side_streams": {"stream": {"pipe": {"max": "2 kt", "price": "300 USD/t"}}}},
}
SPLITTER = {
    "recovery_units": "unit, capacity, capacity_unit, measure, min_load\nsplitter, 50, t/h, ethylene, 40",
    "unit_loads": "unit, of, item, load, load_unit\nsplitter, component, ethylene, 1, t/t",
}
BLEND = {"from": ["ethylene", "rest"], "to": "sale", "specifications": {"purity": {"values": {"ethylene": 0.9, "rest": 0.1}}}}
BOILER = {
    "plant": {
        "furnace_groups": {"furnaces": {"fired_with": "fuel"}},
        "utilities": {"fuel": {"measured_in": "heat", "imports": {"gas": {}}}, "steam": {"measured_in": "mass"}},
        "conversions": {"boiler": {"makes": {"steam": "1 t"}, "uses": {"fuel": "3 GJ LHV"}, "max": "80 t/h"}},
    },
    "modes": "group, feed, severity, charge, fired_heat, uses steam [t/t]\nfurnaces, naphtha, base, 10, 6, 0.5",
    "utility_uses": "utility, direction, of, item, amount, unit\nfuel, uses, fixed, all, 20, GJ/h LHV",
    "scenario": {"utilities": {"gas": {"min": "1 TJ LHV", "max": "9 TJ LHV", "price": "5 USD/GJ LHV"}}},
}
HEATED = {
    "components": "component, lower_heating_value\nethylene, 47\nrest, 50",
    "plant": {
        "cuts": {"rest": {"balanced_as": "heat"}},
        "outlets": {"export": {"from": "rest", "to": "sale"}, "flared": {"from": "rest", "to": "flare", "max": "5 TJ LHV"}},
    },
    "scenario": {"outlets": {"export": {"max": "9 TJ LHV", "price": "4 USD/GJ LHV"}}},
}
RECYCLE = {
    "yields": "feed, severity, ethylene, rest\nnaphtha, base, 40, 60\nagain, base, 70, 30",
    "modes": "group, feed, severity, charge\nfurnaces, naphtha, base, 10\nfurnaces, again, base, 8",
    "plant": {"feeds": {"again": {"recycle_of": "rest"}}, "outlets": {"rest_sale": {"from": "rest", "to": "sale"}}},
}
CONTENT = {
    "plant": {
        "cuts": {"rest": {"valued_by": "content", "content_items": {"all_of_it": ["rest"]}}},
        "outlets": {"lesser": {"from": "rest", "to": "sale"}},
        "utilities": {
            "power": {"measured_in": "power", "imports": {"grid": {}}},
            "steam": {"measured_in": "mass", "exports": {"surplus": {}}},
            "co2": {"measured_in": "mass", "emissions": {"carbon": {}}},
        },
    },
    "utility_uses": "utility, direction, of, item, amount, unit\npower, uses, charge, all, 0.1, MWh/t\n"
    "steam, makes, charge, all, 0.5, t/t\nco2, makes, charge, all, 0.2, t/t",
    "scenario": {
        "utilities": {
            "grid": {"max": "5 MW", "price": "72 USD/MWh"},
            "surplus": {"max": "unlimited", "price": "3 USD/t"},
            "carbon": {"max": "unlimited", "price": "30 USD/t"},
        },
        "outlets": {
            "lesser": {"max": "9 kt", "price": None, "deduction": "50 USD/t"},
            "ethylene_sale": {"max": None, "price": None, "tiers": STEPS},
        },
        "contents": {"rest": {"all_of_it": {"price": "250 USD/t"}}},
        "variable_costs": {
            "chemicals": {"of": "charge", "item": "all", "cost": "5 USD/t"},
            "decoking": {"of": "decoke", "item": "all", "cost": "24000 USD"},
        },
        "stocks": {"naphtha": {**TANK, "end": {"value": "400 USD/t"}}},
    },
    "modes": DECOKED,
}


def spot(**terms: Any) -> dict[str, Any]:
    return {"scenario": {"feeds": {"naphtha": {"spot": terms}}}}


TANKED = {"scenario": {"months": TWO, "stocks": {"naphtha": TANK}}}
SMALLEST: dict[str, tuple[dict[str, Any], ...]] = {
    "feed_balance": (TANKED,),
    "purchase_limit": (spot(min="0.5 kt"),),
    "take_or_pay_limit": (spot(take_or_pay="6 kt", shortfall_pays="40 %"),),
    "furnace_hours_limit": (
        {"modes": DECOKED, "plant": {"furnace_groups": {"furnaces": {"furnaces": 2, "unplanned_loss": "5 %"}}}},
        {"scenario": {"outages": [{"month": "m", "group": "furnaces", "hours": "40 h", "reason": "tubes"}]}},
    ),
    "decoke_crew_hours_limit": ({"modes": DECOKED, "plant": {"decoke_crews": {"crews": 1}}},),
    "component_balance": (STREAM, {"plant": {"loss": {"share": "1 wt%"}}}),
    "cut_balance": ({"recovery": "component, ethylene, rest\nethylene, 0.98, 0.02\nrest, -0.1, 1.1"},),
    "cut_disposal": (RECYCLE, {"scenario": {"stocks": {"rest": TANK}}}),
    "heat_disposal": (HEATED,),
    "outlet_balance": ({"scenario": {"outlets": {"rest_sale": {"max": None, "price": None, "tiers": STEPS}}}},),
    "outlet_limit": (HEATED, {"scenario": {"outlets": {"ethylene_sale": {"min": "1 kt", "max": "30 t/h"}}}}),
    "unit_load_balance": (
        SPLITTER,
        STREAM,
        {"plant": {"outlets": {"blend": BLEND | {"specifications": {}}, "rest_sale": {"from": "rest", "to": "sale"}}}},
        {
            "unit_loads": "unit, of, item, load, load_unit\n"
            + "\n".join(
                f"splitter, {of}, {item}, 0.{load}, t/t"
                for load, of, item in (
                    (1, "component", "ethylene"),
                    (2, "charge", "naphtha"),
                    (3, "cut", "rest"),
                    (4, "outlet", "rest_sale"),
                    (5, "ingredient", "blend.rest"),
                    (6, "side_stream", "stream"),
                )
            )
        },
    ),
    "unit_load_limit": (
        SPLITTER,
        {"scenario": {"unit_factors": [{"month": "m", "unit": "splitter", "factor": 0.9, "reason": "hot"}]}},
    ),
    "ratio_limit": (
        {
            "plant": {
                "ratio_limits": {"r": {"of": [{"cut": "rest"}], "to": [{"cut": "ethylene"}], "at_most": 1.2, "at_least": 0.3}}
            }
        },
    ),
    "specification_limit": (
        {"plant": {"outlets": {"blend": merged(BLEND, {"specifications": {"purity": {"min": 0.5, "max": 0.8}}})}}},
    ),
    "named_limit": (
        {"plant": {"limits": {"jetty": {"sum": [{"bought": "naphtha"}, {"sold": "rest_sale", "times": 0.5}], "max": "84 t/h"}}}},
        {"scenario": {"limits": {"least": {"sum": [{"charged": "all"}], "min": "1 kt"}}}},
    ),
    "utility_balance": (BOILER,),
    "trade_limit": (BOILER,),
    "conversion_limit": (BOILER,),
    "stock_limit": (TANKED,),
    "end_stock_limit": (TANKED,),
    "margin": (CONTENT, spot(take_or_pay="6 kt", shortfall_pays="40 %")),
}


def compiled(folder: Path, family: str) -> LabelledLp:
    parts = BASE
    for changes in SMALLEST[family]:
        parts = merged(parts, changes)
    return compile_model(build_model(read(folder, **parts).case))


def name_of(label: tuple[str, ...]) -> str:
    return label[0] + (f"[{', '.join(label[1:])}]" if len(label) > 1 else "")


def sum_text(terms: dict[str, float]) -> str:
    text = " ".join(f"{'+' if value >= 0 else '-'} {abs(value):.6g} {name}" for name, value in sorted(terms.items()))
    return text.removeprefix("+ ")


def between(low: float, text: str, high: float) -> str:
    if low == high:
        return f"{text} = {low:.6g}"
    least = f"{low:.6g} <= " if math.isfinite(low) else ""
    return least + text + (f" <= {high:.6g}" if math.isfinite(high) else "")


def text_of(lp: LabelledLp, family: str) -> str:
    """The rows of a family; for `margin` the objective and the bounds of the columns."""
    lines = []
    if family == "margin":
        lines.append(f"margin: {sum_text({name_of(c): v for c, v in zip(lp.columns, lp.cost, strict=True) if v})}")
        lines += sorted(between(low, name_of(c), high) for c, low, high in zip(lp.columns, lp.low, lp.high, strict=True))
    for row, label in enumerate(lp.rows):
        if label[0] == family:
            span = slice(lp.starts[row], lp.starts[row + 1])
            terms = {name_of(lp.columns[j]): v for j, v in zip(lp.index[span], lp.value[span], strict=True)}
            lines.append(f"{name_of(label)}: {between(lp.row_low[row], sum_text(terms), lp.row_high[row])}")
    return "\n".join(lines) + "\n"


@pytest.mark.parametrize("family", [*TEXTS, "margin"])
def test_rule_is_as_its_golden_file(family: str, tmp_path: Path) -> None:
    file = GOLDEN / f"{family}.txt"
    assert family in SMALLEST, f"no smallest plant shows {family}"
    assert file.exists(), f"{file} is missing: print it with `python {Path(__file__).name} {family}`, and read it"
    found = text_of(compiled(tmp_path, family), family)
    assert found == file.read_text(encoding="utf-8")


def test_every_golden_file_has_its_rule() -> None:
    assert {file.stem for file in GOLDEN.glob("*.txt")} == {*TEXTS, "margin"}


def test_texts_are_those_of_the_model(tmp_path: Path) -> None:
    """Every rule of the model has its text, and every text its rule; each says `unit | sentence`."""
    model = build_model(read(tmp_path, **BASE).case)
    rules = {constraint.local_name for constraint in model.component_objects(pyo.Constraint)}
    assert rules == set(TEXTS)
    for text in TEXTS.values():
        unit, bar, sentence = text.partition(" | ")
        assert unit
        assert bar
        assert sentence.endswith(".")


def test_shipped_plans_have_no_other_rows(every_plan: Any) -> None:
    assert {label[0] for label in every_plan.lp.rows} <= set(TEXTS)


if __name__ == "__main__":
    for wanted in sys.argv[1:]:
        print(text_of(compiled(Path(tempfile.mkdtemp()), wanted), wanted), end="")
