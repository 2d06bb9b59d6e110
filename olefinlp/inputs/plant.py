"""A plant: its file and its tables as frozen objects, every row with its place."""

from __future__ import annotations

import os
from dataclasses import dataclass, replace
from pathlib import Path

from olefinlp.inputs.findings import Finding, Findings, Place
from olefinlp.inputs.plant_file import PlantFile
from olefinlp.inputs.units import Quantity, dims
from olefinlp.inputs.validate import validate
from olefinlp.inputs.yaml_files import Document, read_yaml

Key = tuple[str, ...]
CHARGE_RATE = dims(mass=1, time=-1)
HEAT_PER_TONNE = dims(energy=1, mass=-1)


@dataclass(frozen=True, slots=True)
class Component:
    """What the yields count. Blank cells are None: allowed where the number is not needed."""

    name: str
    carbon_atoms: float | None
    hydrogen_atoms: float | None
    molar_mass: float | None
    lower_heating_value: float | None
    burnt_co2: float | None
    place: Place

    @property
    def hydrogen_share(self) -> float | None:
        """Hydrogen, t per t, from the formula."""
        return self._element_share(self.hydrogen_atoms, 1.008)

    @property
    def carbon_share(self) -> float | None:
        """Carbon, t per t, from the formula."""
        return self._element_share(self.carbon_atoms, 12.011)

    def _element_share(self, atoms: float | None, atomic_mass: float) -> float | None:
        if self.carbon_atoms is None or self.hydrogen_atoms is None or atoms is None:
            return None
        whole = 12.011 * self.carbon_atoms + 1.008 * self.hydrogen_atoms
        return atomic_mass * atoms / whole if whole else None


@dataclass(frozen=True, slots=True)
class YieldRow:
    """What one tonne of a feed gives at one severity: t per t by component."""

    table: str
    feed: str
    severity: str
    shares: dict[str, float]
    written: dict[str, str]
    place: Place
    source: str


@dataclass(frozen=True, slots=True)
class SlopeRow:
    """Change of a feed's yields, t per t by component, per unit of one property."""

    table: str
    feed: str
    property: str
    reference: float
    valid_min: float
    valid_max: float
    shares: dict[str, float]
    place: Place


@dataclass(frozen=True, slots=True)
class Mode:
    """One feed at one severity in one furnace group.

    `charge` t/h of one furnace, `run_length` h, `decoke` h, `fired_heat` GJ LHV per t;
    `utilities` and `loads` per t charged (uses positive, makes negative).
    """

    group: str
    feed: str
    severity: str
    coil_outlet: float | None
    charge: float | None
    run_length: float | None
    decoke: float
    fired_heat: float | None
    utilities: dict[str, Quantity]
    loads: dict[str, Quantity]
    place: Place

    @property
    def key(self) -> Key:
        """Group, feed, severity."""
        return (self.group, self.feed, self.severity)

    @property
    def name(self) -> str:
        """The mode in words."""
        return f"{self.group}.{self.feed}.{self.severity}"


@dataclass(frozen=True, slots=True)
class RecoveryUnit:
    """A limit of the recovery train: capacity per hour (None: unlimited) in `rate_unit`."""

    name: str
    capacity: Quantity | None
    rate_unit: str
    measure: str
    min_load: float
    place: Place


@dataclass(frozen=True, slots=True)
class UnitLoad:
    """Load of a recovery unit per tonne of one item."""

    unit: str
    of: str
    item: str
    load: Quantity
    place: Place


@dataclass(frozen=True, slots=True)
class UtilityUse:
    """A utility used (sign +1) or made (-1) per unit of one item."""

    utility: str
    sign: int
    of: str
    item: str
    amount: Quantity
    place: Place


@dataclass(frozen=True)
class Plant:
    """What a plant is. Read it with `read_plant`."""

    folder: Path
    document: Document
    file: PlantFile
    components: dict[str, Component]
    yields: dict[tuple[str, str, str], YieldRow]
    slopes: tuple[SlopeRow, ...]
    modes: tuple[Mode, ...]
    recovery: dict[str, dict[str, float]]
    recovery_places: dict[str, Place]
    units: dict[str, RecoveryUnit]
    unit_loads: tuple[UnitLoad, ...]
    utility_uses: tuple[UtilityUse, ...]
    files: tuple[str, ...]
    warnings: tuple[Finding, ...] = ()

    @property
    def name(self) -> str:
        """The plant's name."""
        return self.file.name

    def place(self, *path: str | int) -> Place:
        """Where something in plant.yaml is written."""
        return self.document.place(path)

    def trades(self) -> dict[str, tuple[str, str]]:
        """Every import, export and emission: its utility and its kind."""
        return {
            name: (utility, kind)
            for utility, written in self.file.utilities.items()
            for kind in ("imports", "exports", "emissions")
            for name in getattr(written, kind)
        }

    def recycle_feeds(self) -> dict[str, str]:
        """Recycle feeds and the cuts they come from."""
        return {name: feed.recycle_of for name, feed in self.file.feeds.items() if feed.recycle_of}


def read_plant(path: str | os.PathLike[str]) -> Plant:
    """Read and check a plant from its folder (or its plant.yaml).

    Raises `InputError` with everything that is wrong, all at once; warnings stay on the plant.

    >>> from olefinlp import read_plant
    >>> read_plant("models/thermal_cracker").file.main_product
    'ethylene'
    """
    findings = Findings()
    plant = load_plant(path, findings)
    findings.stop_on_errors()
    assert plant is not None
    return plant


def load_plant(path: str | os.PathLike[str], findings: Findings) -> Plant | None:
    """As `read_plant`, with all findings added to the list given and none raised."""
    before = len(findings.errors)
    plant = plant_even_if_wrong(path, findings)
    return plant if len(findings.errors) == before else None


def plant_even_if_wrong(path: str | os.PathLike[str], findings: Findings) -> Plant | None:
    """As `load_plant`, but a plant whose tables could be read is given back although checks found errors.

    With it a scenario can be checked in the same run as its plant; it must not be planned with.
    """
    from olefinlp.inputs.plant_checks import check_plant
    from olefinlp.inputs.plant_tables import TableReader

    folder = Path(path)
    file = folder if folder.suffix in (".yaml", ".yml") else folder / "plant.yaml"
    folder = file.parent
    document = read_yaml(file, findings)
    if document is None:
        return None
    written = validate(document, PlantFile, findings)
    before = len(findings.errors)
    tables = TableReader(folder, document, findings)
    plant = None
    if written:
        plant = tables.plant(written)
    else:
        tables.only_read()
    if plant is None or len(findings.errors) > before:
        return None
    own = Findings()
    check_plant(plant, own)
    findings.items += [item for item in own if item not in findings.items]
    return replace(plant, warnings=findings.warnings)
