"""What amounts and prices are counted in."""

from __future__ import annotations

from dataclasses import dataclass

from olefinlp.inputs.units import Dimensions, EnergyKind, dims


@dataclass(frozen=True, slots=True)
class Measure:
    """What a price or an amount is counted in: base unit in words, and its dimensions."""

    unit: str
    dimensions: Dimensions
    energy: EnergyKind = "heat"

    @property
    def per(self) -> Dimensions:
        """Dimensions of money per unit of this."""
        return dims(currency=1, **{name: -power for name, power in self.dimensions})


MASS = Measure("t", dims(mass=1))
HEAT = Measure("GJ LHV", dims(energy=1))
POWER = Measure("MWh", dims(energy=1), "power")
EACH = Measure("each", ())
ANY = Measure("any", dims(temperature=1))
MEASURES = {"mass": MASS, "heat": HEAT, "power": POWER}
