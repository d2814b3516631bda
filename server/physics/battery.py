"""Bank voltage in charge and at rest. A voltage for each stage; state of charge is not in it."""

from dataclasses import dataclass
from typing import Literal

from server.errors import InputError

Chemistry = Literal["flooded", "agm", "gel", "lifepo4", "li_ion", "nicd", "nimh"]


@dataclass(frozen=True, slots=True)
class ChemistryFacts:
    """Voltages of one cell at 25 °C, and what shifts them.

    `rest_v` is a night's rest with some surface charge left, `day_v` bulk charge at mid-day, `absorption_v` the end of
    charge, `highest_v` the highest stage any charger applies (equalisation where there is one).
    """

    label: str
    cell_v: float
    rest_v: float
    day_v: float
    absorption_v: float
    highest_v: float
    v_per_c: float
    lead_acid: bool
    usual_cells: tuple[tuple[float, int], ...]


# Stage voltages: the middle of the trade's ranges for a 12 V bank, divided by its cells (common practice; float, charge
# limit and shift of lead-acid as battery makers' tables give them: 2.30 V, about 2.40 V, −3 mV/K per cell).
CHEMISTRIES: dict[Chemistry, ChemistryFacts] = {
    "flooded": ChemistryFacts(
        "Flooded lead-acid", 2.0, 12.7 / 6, 13.3 / 6, 14.4 / 6, 15.5 / 6, -0.003, True, ((12, 6), (24, 12), (48, 24))
    ),
    "agm": ChemistryFacts(
        "AGM lead-acid", 2.0, 12.8 / 6, 13.4 / 6, 14.4 / 6, 14.7 / 6, -0.003, True, ((12, 6), (24, 12), (48, 24))
    ),
    "gel": ChemistryFacts(
        "Gel lead-acid", 2.0, 12.8 / 6, 13.4 / 6, 14.2 / 6, 14.4 / 6, -0.003, True, ((12, 6), (24, 12), (48, 24))
    ),
    "lifepo4": ChemistryFacts(
        "LiFePO4", 3.2, 13.3 / 4, 13.5 / 4, 14.4 / 4, 14.6 / 4, 0.0, False, ((12, 4), (24, 8), (36, 12), (48, 16))
    ),
    "li_ion": ChemistryFacts(
        "Li-ion (NMC)",
        3.7,
        3.85,
        3.95,
        4.2,
        4.2,
        0.0,
        False,
        ((3.7, 1), (7.4, 2), (12, 3), (24, 7), (36, 10), (48, 13)),
    ),
    "nicd": ChemistryFacts("NiCd", 1.2, 1.29, 1.41, 1.5, 1.65, -0.003, False, ((12, 10), (24, 20), (48, 40))),
    "nimh": ChemistryFacts("NiMH", 1.2, 1.29, 1.38, 1.43, 1.45, -0.003, False, ((12, 10), (24, 20), (48, 40))),
}


def compensated_v(cell_v: float, v_per_c: float, battery_c: float) -> float:
    """A stage voltage shifted from its 25 °C value. Source: charge-voltage shift per lead-acid cell, battery makers."""
    return cell_v + v_per_c * (battery_c - 25.0)


@dataclass(frozen=True, slots=True)
class Bank:
    """The bank as the loop sees it: a voltage by stage, and its size. Stage voltages left out follow from chemistry."""

    chemistry: Chemistry
    nominal_v: float
    capacity_ah: float | None = None
    night_v: float | None = None
    day_v: float | None = None
    absorption_v: float | None = None
    highest_v: float | None = None
    internal_ohm: float = 0.0

    def __post_init__(self) -> None:
        """Refuse what is not a bank."""
        if self.chemistry not in CHEMISTRIES:
            raise InputError("chemistry", f"{self.chemistry!r} is not one of {', '.join(CHEMISTRIES)}")
        for field, value, low, high, unit in (
            ("battery_nominal_v", self.nominal_v, 1.2, 1000.0, "V"),
            ("battery_ah", 1.0 if self.capacity_ah is None else self.capacity_ah, 0.001, 1e6, "Ah"),
            ("battery_internal_ohm", self.internal_ohm, 0.0, 100.0, "ohm"),
        ):
            if not low <= value <= high:
                raise InputError(field, f"{value:g} {unit} is outside {low:g} to {high:g} {unit}")
        for name in ("night_v", "day_v", "absorption_v", "highest_v"):
            value = getattr(self, name)
            if value is not None and not 0.5 * self.nominal_v <= value <= 2.0 * self.nominal_v:
                raise InputError(
                    f"battery_{name}",
                    f"{value:g} V does not belong to a {self.nominal_v:g} V bank; "
                    f"{0.5 * self.nominal_v:g} to {2.0 * self.nominal_v:g} V is taken",
                )

    @property
    def facts(self) -> ChemistryFacts:
        """The chemistry's voltages per cell."""
        return CHEMISTRIES[self.chemistry]

    @property
    def cells(self) -> int:
        """Cells in series: the usual count for a nominal voltage, else the nearest by cell voltage."""
        for nominal, count in self.facts.usual_cells:
            if abs(self.nominal_v - nominal) < 0.02 * nominal:
                return count
        return max(1, round(self.nominal_v / self.facts.cell_v))

    @property
    def at_night_v(self) -> float:
        """Voltage at rest by night."""
        return self.night_v if self.night_v is not None else self.cells * self.facts.rest_v

    @property
    def by_day_v(self) -> float:
        """Voltage while charging, before the end of charge."""
        return self.day_v if self.day_v is not None else self.cells * self.facts.day_v

    @property
    def full_v(self) -> float:
        """Voltage at the end of charge, at 25 °C."""
        return self.absorption_v if self.absorption_v is not None else self.cells * self.facts.absorption_v

    def top_v(self, battery_c: float) -> float:
        """The highest voltage the bank is ever charged to, shifted for cold; a stated value is taken as it is."""
        if self.highest_v is not None:
            return self.highest_v
        cold_c = min(battery_c, 25.0)
        cell_v = compensated_v(self.facts.highest_v, self.facts.v_per_c, cold_c)
        return max(self.cells * cell_v, self.full_v, self.by_day_v, self.at_night_v)
