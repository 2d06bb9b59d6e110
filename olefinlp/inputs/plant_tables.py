"""The tables that a plant names, read into its objects; every fault of every table is found at once."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from pathlib import Path
from typing import Any

from olefinlp.inputs.findings import Findings, Place, near_name
from olefinlp.inputs.plant import (
    CHARGE_RATE,
    HEAT_PER_TONNE,
    Component,
    Key,
    Mode,
    Plant,
    RecoveryUnit,
    SlopeRow,
    UnitLoad,
    UtilityUse,
    YieldRow,
)
from olefinlp.inputs.plant_file import PlantFile
from olefinlp.inputs.tables import Row, Table, read_table
from olefinlp.inputs.units import SHARES, Quantity, UnitError, celsius, convert, dims, parse_unit, share
from olefinlp.inputs.yaml_files import Document


class TableReader:
    """Reads the tables that a plant names."""

    def __init__(self, folder: Path, document: Document, findings: Findings) -> None:
        self.folder = folder
        self.document = document
        self.findings = findings
        self.files: list[str] = [str(folder / "plant.yaml")]

    def only_read(self) -> None:
        """Read what can be read although plant.yaml is wrong, so that all faults show at once."""
        data = self.document.data
        readers: dict[str, Callable[[Table], Any]] = {"components": self._components}
        for key, reader in readers.items():
            if isinstance(data.get(key), str):
                reader_table = self._open(data[key], ("component",), others=True)
                if reader_table:
                    reader(reader_table)
        yields = data.get("yields")
        for name, entry in yields.items() if isinstance(yields, dict) else ():
            if isinstance(entry, dict) and isinstance(entry.get("table"), str):
                opened = self._open(entry["table"], ("feed", "severity", "source"), others=True)
                if opened:
                    self._yield_rows(str(name), opened, {})

    def plant(self, file: PlantFile) -> Plant | None:
        """All tables of a valid plant.yaml."""
        components = self._read(file.components, self._components, ("component", "source"), _COMPONENT_COLUMNS)
        yields: dict[tuple[str, str, str], YieldRow] = {}
        for name, entry in file.yields.items():
            opened = self._open(entry.table, ("feed", "severity", "source"), others=True)
            for row in self._yield_rows(name, opened, components or {}) if opened else ():
                self._once(yields, (name, row.feed, row.severity), row, row.place)
        slopes = self._read(file.quality_slopes, self._slopes, _SLOPE_COLUMNS, others=True) or ()
        modes = self._read(file.modes, self._modes, _MODE_COLUMNS, others=True)
        recovery = self._read(file.recovery, self._recovery, ("component", "source"), others=True)
        units = self._read(file.recovery_units, self._units, _UNIT_COLUMNS) or {}
        loads = self._read(file.unit_loads, self._unit_loads, ("unit", "of", "item", "load", "load_unit", "source")) or ()
        uses = self._read(file.utility_uses, self._uses, _USE_COLUMNS) or ()
        if components is None or modes is None or recovery is None:
            return None
        return Plant(
            folder=self.folder,
            document=self.document,
            file=file,
            components=components,
            yields=yields,
            slopes=tuple(slopes),
            modes=tuple(modes),
            recovery=recovery[0],
            recovery_places=recovery[1],
            units=units,
            unit_loads=tuple(loads),
            utility_uses=tuple(uses),
            files=tuple(self.files),
        )

    def _open(self, name: str, required: tuple[str, ...], optional: tuple[str, ...] = (), others: bool = False) -> Table | None:
        path = self.folder / name
        self.files.append(str(path))
        return read_table(path, self.findings, required=required, optional=optional, others=others)

    def _read(
        self,
        name: str | None,
        reader: Callable[[Table], Any],
        required: tuple[str, ...],
        optional: tuple[str, ...] = (),
        others: bool = False,
    ) -> Any:
        if name is None:
            return None
        table = self._open(name, required, optional, others)
        return reader(table) if table else None

    def _once(self, into: dict[Any, Any], key: Any, value: Any, place: Place) -> None:
        """Keep the first of equal keys and say where the second is."""
        if key in into:
            first = into[key].place
            name = ".".join(key) if isinstance(key, tuple) else key
            self.findings.error(place, "", f"`{name}` is written twice, first in line {first.line}")
        else:
            into[key] = value

    def _quantity(self, row: Row, column: str) -> Quantity | None:
        """A cell with its column's unit; a number without one is a finding, never passed over."""
        if row.table.unit(column) is None:
            if row.cells[column]:
                self.findings.error(row.place(column), "", "the column does not carry its unit", f"write `{column} [unit]`")
            return None
        return row.quantity(column, self.findings)

    def _value(self, row: Row, column: str, want: Any, **kind: Any) -> float | None:
        """A cell in base units, through its column's unit."""
        quantity = self._quantity(row, column)
        if quantity is None:
            return None
        try:
            return convert(quantity, want, **kind)
        except UnitError as error:
            self.findings.error(row.place(column), "", str(error), error.hint)
            return None

    def _components(self, table: Table) -> dict[str, Component]:
        result: dict[str, Component] = {}
        for row in table:

            def cell(column: str, want: Any, row: Row = row) -> float | None:
                return self._value(row, column, want) if column in table.columns else None

            atoms = {
                name: row.number(name, self.findings) if name in table.columns else None
                for name in ("carbon_atoms", "hydrogen_atoms")
            }
            molar_mass = cell("molar_mass", dims(mass=1, substance=-1))
            component = Component(
                row.text("component"),
                **atoms,
                molar_mass=None if molar_mass is None else 1e6 * molar_mass,
                lower_heating_value=cell("lower_heating_value", HEAT_PER_TONNE),
                burnt_co2=cell("burnt_co2", ()),
                place=row.place(),
            )
            self._once(result, component.name, component, component.place)
        return result

    def _share_columns(self, table: Table, texts: tuple[str, ...]) -> dict[str, float]:
        """The columns of shares and their factor; all must have one unit."""
        columns = {c.name: c for c in table.columns.values() if c.name not in texts}
        units = {c.unit.share if c.unit else "" for c in columns.values()}
        if len(units) > 1 or not units <= {"wt%", "fraction", "mol%"}:
            self.findings.error(
                Place(table.file, 1),
                "",
                f"component columns must all carry one unit of wt%, mol% or fraction, found: {', '.join(sorted(units))}",
                "write for example `<component> [wt%]`",
            )
            return {}
        return {name: SHARES[column.unit.share] for name, column in columns.items() if column.unit}

    def _shares(self, row: Row, columns: dict[str, float]) -> dict[str, float] | None:
        shares: dict[str, float] = {}
        for name, factor in columns.items():
            value = row.number(name, self.findings)
            if value is None:
                if not row.cells[name]:
                    self.findings.error(row.place(name), "", "is blank", "write 0 where there is none")
                return None
            shares[name] = value * factor
        return shares

    def _by_weight(self, row: Row, shares: dict[str, float], components: dict[str, Component]) -> dict[str, float]:
        """Shares by mole as shares by weight: x M / sum(x M), times sum(x): what does not close stays so."""
        masses: dict[str, float] = {}
        for name, value in shares.items():
            part = components.get(name)
            if value and part and part.molar_mass is None:
                message = f"the molar_mass is blank, but mol% becomes wt% with it ({row.place()})"
                self.findings.error(part.place, f"components.{name}", message)
            masses[name] = value * ((part.molar_mass if part else None) or 0.0)
        whole, total = sum(masses.values()), sum(shares.values())
        return {name: total * mass / whole for name, mass in masses.items()} if whole else shares

    def _yield_rows(self, name: str, table: Table, components: dict[str, Component]) -> list[YieldRow]:
        columns = self._share_columns(table, ("feed", "severity", "source"))
        rows: list[YieldRow] = []
        for row in table if columns else ():
            shares = self._shares(row, columns)
            if shares is not None:
                if _in_moles(table, columns) and components:
                    shares = self._by_weight(row, shares, components)
                written = {c: f"{row.text(c)} {table.unit(c).text}" for c in columns}  # type: ignore[union-attr]
                rows.append(
                    YieldRow(name, row.text("feed"), row.text("severity"), shares, written, row.place(), row.text("source"))
                )
        return rows

    def _slopes(self, table: Table) -> list[SlopeRow]:
        columns = self._share_columns(table, (*_SLOPE_COLUMNS,))
        if _in_moles(table, columns):
            self.findings.error(Place(table.file, 1), "", "slopes in mol% have no meaning by weight", "write them in wt%")
        rows = []
        for row in table if columns else ():
            shares = self._shares(row, columns)
            reference, low, high = (row.number(c, self.findings) for c in ("reference", "valid_min", "valid_max"))
            if reference is None or low is None or high is None:
                self.findings.error(row.place(), "", "reference, valid_min and valid_max must all be numbers")
            elif shares is not None:
                names = (row.text("yields"), row.text("feed"), row.text("property"))
                rows.append(SlopeRow(*names, reference, low, high, shares, row.place()))
        return rows

    def _modes(self, table: Table) -> list[Mode]:
        uses: dict[str, tuple[str, int]] = {}
        loads: dict[str, str] = {}
        known = {*_MODE_COLUMNS, "coil_outlet", "charge", "run_length", "decoke", "fired_heat"}
        for column in table.columns:
            verb, _, name = column.partition(" ")
            if column in known:
                continue
            if verb in ("uses", "makes") and name:
                if any(name == other for other, _ in uses.values()):
                    self.findings.error(Place(table.file, 1, column), "", f"`{name}` is used and made: keep one column")
                uses[column] = (name, 1 if verb == "uses" else -1)
            elif verb == "load" and name:
                loads[column] = name
            else:
                hint = near_name(column, known) or "or `uses <utility>`, `makes <utility>`, `load <recovery unit>`"
                self.findings.error(Place(table.file, 1), "", f"unknown column `{column}`", hint)
        result: dict[Key, Mode] = {}
        for row in table:
            mode = self._mode(row, uses, loads)
            self._once(result, mode.key, mode, mode.place)
        return list(result.values())

    def _mode(self, row: Row, uses: dict[str, tuple[str, int]], loads: dict[str, str]) -> Mode:
        def cell(column: str, want: Any) -> float | None:
            return self._value(row, column, want) if column in row.cells else None

        utilities: dict[str, Quantity] = {}
        for column, (name, sign) in uses.items():
            quantity = self._quantity(row, column)
            if quantity:
                utilities[name] = Quantity(sign * quantity.number, quantity.unit, quantity.text)
        unit_loads = {name: self._quantity(row, column) for column, name in loads.items()}
        return Mode(
            group=row.text("group"),
            feed=row.text("feed"),
            severity=row.text("severity"),
            coil_outlet=self._coil_outlet(row) if "coil_outlet" in row.cells else None,
            charge=cell("charge", CHARGE_RATE),
            run_length=cell("run_length", dims(time=1)),
            decoke=cell("decoke", dims(time=1)) or 0.0,
            fired_heat=cell("fired_heat", HEAT_PER_TONNE),
            utilities=utilities,
            loads={name: load for name, load in unit_loads.items() if load},
            place=row.place(),
        )

    def _coil_outlet(self, row: Row) -> float | None:
        quantity = self._quantity(row, "coil_outlet")
        try:
            return celsius(quantity) if quantity else None
        except UnitError as error:
            self.findings.error(row.place("coil_outlet"), "", str(error), error.hint)
            return None

    def _recovery(self, table: Table) -> tuple[dict[str, dict[str, float]], dict[str, Place]]:
        columns = {c.name: c for c in table.columns.values() if c.name not in ("component", "source")}
        for column in columns.values():
            if column.unit is None or (column.unit.dimensions or column.unit.factor != 1.0):
                self.findings.error(Place(table.file, 1), "", f"the column `{column.name}` must carry [t/t]")
        result: dict[str, dict[str, float]] = {}
        places: dict[str, Place] = {}
        for row in table:
            shares = self._shares(row, dict.fromkeys(columns, 1.0))
            name = row.text("component")
            if name in result:
                self.findings.error(row.place(), "", f"`{name}` is written twice, first in line {places[name].line}")
            elif shares is not None:
                result[name], places[name] = shares, row.place()
        return result, places

    def _unit_quantity(self, row: Row, value: str, unit: str) -> Quantity | None:
        try:
            return row.quantity(value, self.findings, parse_unit(row.text(unit)))
        except UnitError as error:
            self.findings.error(row.place(unit), "", str(error), error.hint)
            return None

    def _units(self, table: Table) -> dict[str, RecoveryUnit]:
        result: dict[str, RecoveryUnit] = {}
        for row in table:
            unlimited = row.text("capacity") == "unlimited"
            if not row.text("capacity"):
                self.findings.error(row.place("capacity"), "", "is blank", "write the capacity, or `unlimited`")
            capacity = None if unlimited else self._unit_quantity(row, "capacity", "capacity_unit")
            low = self._quantity(row, "min_load")
            min_load = 0.0
            if low:
                try:
                    min_load = share(low)
                except UnitError as error:
                    self.findings.error(row.place("min_load"), "", str(error), error.hint)
            name = row.text("unit")
            unit = RecoveryUnit(name, capacity, row.text("capacity_unit"), row.text("measure"), min_load, row.place())
            self._once(result, name, unit, unit.place)
        return result

    def _unit_loads(self, table: Table) -> list[UnitLoad]:
        kinds = ("component", "charge", "cut", "outlet", "ingredient", "side_stream")
        result = []
        for row in table:
            load = self._unit_quantity(row, "load", "load_unit")
            if self._word(row, "of", kinds) and load:
                result.append(UnitLoad(row.text("unit"), row.text("of"), row.text("item"), load, row.place()))
        return result

    def _uses(self, table: Table) -> list[UtilityUse]:
        result = []
        for row in table:
            amount = self._unit_quantity(row, "amount", "unit")
            good = self._word(row, "of", USE_KINDS) & self._word(row, "direction", ("uses", "makes"))
            if amount and good:
                sign = 1 if row.text("direction") == "uses" else -1
                names = (row.text("utility"), sign, row.text("of"), row.text("item"))
                result.append(UtilityUse(*names, amount, row.place()))
        return result

    def _word(self, row: Row, column: str, allowed: tuple[str, ...]) -> bool:
        text = row.text(column)
        if text in allowed:
            return True
        self.findings.error(row.place(column), "", f"`{text}` is not one of: {', '.join(allowed)}", near_name(text, allowed))
        return False


def _in_moles(table: Table, columns: Iterable[str]) -> bool:
    units = [table.unit(column) for column in columns]
    return any(unit is not None and unit.share == "mol%" for unit in units)


USE_KINDS = (
    *("charge", "component", "cut", "cut_heat", "cut_burnt_co2", "outlet", "ingredient"),
    *("unit_load", "import", "export", "loss", "fixed"),
)
_COMPONENT_COLUMNS = ("carbon_atoms", "hydrogen_atoms", "molar_mass", "lower_heating_value", "burnt_co2")
_SLOPE_COLUMNS = ("yields", "feed", "property", "reference", "valid_min", "valid_max", "source")
_MODE_COLUMNS = ("group", "feed", "severity", "source")
_UNIT_COLUMNS = ("unit", "capacity", "capacity_unit", "measure", "min_load", "source")
_USE_COLUMNS = ("utility", "direction", "of", "item", "amount", "unit", "source")
