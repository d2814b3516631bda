"""Job: one site's question, as the records of the physics put together. No HTTP, no defaults that a form would show."""

import math
from dataclasses import dataclass, field
from typing import Literal

from server.catalog.part import Part
from server.errors import InputError
from server.physics.battery import Bank
from server.physics.climate import MOUNTINGS
from server.physics.pv import DarkCurrent, ModuleLabel, SingleDiode
from server.physics.thermal import Box

Controller = Literal["direct", "shunt", "series", "mppt"]
Blocks = Literal["yes", "no", "unknown"]
ClimateSource = Literal["preset", "grid", "monthly", "stated_day"]
HeatPath = Literal["as_packaged", "free_air", "pcb", "leads", "heatsink", "stated"]
Placement = Literal["per_string", "array"]
Earthing = Literal["negative", "positive", "floating"]
RuleProfile = Literal["stress_only", "double_voc", "cold_table", "double_voc_max"]

MAX_CANDIDATES = 200


def check(name: str, value: float, low: float, high: float, unit: str) -> None:
    """Refuse a number outside its bounds, or no number at all, with a sentence."""
    if not low <= value <= high:
        raise InputError(name, f"{value:g} {unit} is outside {low:g} to {high:g} {unit}".replace("  ", " "))


@dataclass(frozen=True, slots=True)
class ClimateChoice:
    """Where the days come from. Only the fields of the chosen source are read; monthly tables have twelve values."""

    source: ClimateSource
    preset: str | None = None
    lat_deg: float | None = None
    lon_deg: float | None = None
    altitude_m: float | None = None
    kt_monthly: tuple[float, ...] | None = None
    h_kwh_m2_monthly: tuple[float, ...] | None = None
    air_min_c_monthly: tuple[float, ...] | None = None
    air_max_c_monthly: tuple[float, ...] | None = None
    peak_sun_h: float | None = None
    daylight_h: float | None = None
    day_air_c: float | None = None
    night_air_c: float | None = None
    record_low_c: float | None = None
    record_high_c: float | None = None
    dark_days_per_month: float = 0.0

    def __post_init__(self) -> None:
        """Refuse a choice that lacks what it needs."""
        needed = {
            "preset": ("preset",),
            "grid": ("lat_deg", "lon_deg"),
            "monthly": ("lat_deg", "lon_deg", "air_min_c_monthly", "air_max_c_monthly"),
            "stated_day": ("peak_sun_h", "daylight_h", "day_air_c", "night_air_c"),
        }[self.source]
        for name in needed:
            if getattr(self, name) is None:
                raise InputError(name, f"it is missing, and the climate by {self.source.replace('_', ' ')} needs it")
        if self.source == "monthly" and (self.kt_monthly is None) == (self.h_kwh_m2_monthly is None):
            raise InputError("kt_monthly", "give the twelve months either as kt_monthly or as h_kwh_m2_monthly")
        for name in ("kt_monthly", "h_kwh_m2_monthly", "air_min_c_monthly", "air_max_c_monthly"):
            table = getattr(self, name)
            if table is not None and len(table) != 12:
                raise InputError(name, f"{len(table)} values are given; twelve are needed, January to December")
        check("dark_days_per_month", self.dark_days_per_month, 0.0, 28.0, "days")
        if self.source == "stated_day" and self.dark_days_per_month > 0:
            raise InputError(
                "dark_days_per_month",
                f"{self.dark_days_per_month:g} days do not go with one stated day, which stands for every day; choose "
                "a climate by month, or 0",
            )
        for name in ("record_low_c", "record_high_c"):
            value = getattr(self, name)
            if value is not None:
                check(name, value, -90.0, 65.0, "°C")


@dataclass(frozen=True, slots=True)
class PlaneChoice:
    """How the modules lie. None: towards the equator, tilted by the latitude within 10° to 60°."""

    tilt_deg: float | None = None
    azimuth_deg: float | None = None
    albedo_frac: float = 0.2
    mounting: str = "open_rack"
    wind_m_s: float = 1.0

    def __post_init__(self) -> None:
        """Refuse what is no plane."""
        if self.mounting not in MOUNTINGS:
            raise InputError("mounting", f"{self.mounting!r} is not one of {', '.join(MOUNTINGS)}")


@dataclass(frozen=True, slots=True)
class NightReading:
    """One current read at night, panel connected: replaces the estimated dark shunt. The current is a magnitude."""

    reading_a: float
    terminal_v: float
    cell_c: float

    def __post_init__(self) -> None:
        """Refuse what no meter shows."""
        check("night_reading_a", self.reading_a, 1e-9, 50.0, "A")
        check("night_reading_v", self.terminal_v, 0.1, 1000.0, "V")
        check("night_reading_c", self.cell_c, -60.0, 60.0, "°C")


@dataclass(frozen=True, slots=True)
class Array:
    """The modules: a label, or single-diode parameters where they are known, and how they are wired."""

    label: ModuleLabel
    single_diode: SingleDiode | None = None
    modules_in_series: int = 1
    strings: int = 1
    soiling_frac: float = 0.0
    mismatch_frac: float = 0.0
    dark_current: DarkCurrent = "middle"
    night_reading: NightReading | None = None
    max_series_fuse_a: float | None = None
    cable_ampacity_a: float | None = None

    def __post_init__(self) -> None:
        """Refuse what is no array."""
        check("strings", self.strings, 1, 1000, "strings")
        check("modules_in_series", self.modules_in_series, 1, 100, "modules")
        check("soiling_frac", self.soiling_frac, 0.0, 0.9, "")
        check("mismatch_frac", self.mismatch_frac, 0.0, 0.5, "")
        if self.max_series_fuse_a is not None:
            check("max_series_fuse_a", self.max_series_fuse_a, 0.1, 500.0, "A")
        if self.cable_ampacity_a is not None:
            check("cable_ampacity_a", self.cable_ampacity_a, 0.1, 5000.0, "A")


@dataclass(frozen=True, slots=True)
class Charge:
    """What stands between string and bank, and whether it keeps current from flowing back by night."""

    controller: Controller
    blocks_at_night: Blocks
    night_a: float = 0.0
    efficiency_frac: float = 0.96

    def __post_init__(self) -> None:
        """Refuse what is no controller."""
        check("controller_night_a", self.night_a, 0.0, 10.0, "A")
        check("converter_efficiency_frac", self.efficiency_frac, 0.3, 1.0, "")
        if self.controller == "direct" and self.blocks_at_night == "yes":
            raise InputError(
                "blocks_at_night", "nothing stands between string and bank, so nothing can block; answer no"
            )
        if self.controller == "shunt" and self.blocks_at_night == "yes":
            raise InputError(
                "blocks_at_night",
                "a regulator that shorts the panel cannot block by itself: what blocks is the series diode in "
                "question; answer no or unknown",
            )


@dataclass(frozen=True, slots=True)
class Heat:
    """How the diode is cooled and what air it stands in."""

    path: HeatPath = "as_packaged"
    rth_c_per_w: float | None = None
    sink_c_per_w: float | None = None
    sink_quoted_rise_c: float | None = None
    """The rise at which the sink's figure is quoted; None takes the figure as it stands."""
    one_sink: bool = False
    """All diodes of the array on one sink (or plate), which then sees the heat of all."""
    interface_c_per_w: float = 1.0
    box: Box = "open_shade"
    box_day_c: float | None = None
    box_night_c: float | None = None
    box_area_m2: float | None = None
    """Outer area of a closed box: the diodes' own heat then warms its air."""
    junction_limit_c: float | None = None
    current_factor: float = 1.25

    def __post_init__(self) -> None:
        """Refuse what is no mounting."""
        for name, value, low, high, unit in (
            ("rth_c_per_w", self.rth_c_per_w, 0.01, 1000.0, "°C/W"),
            ("sink_c_per_w", self.sink_c_per_w, 0.0, 200.0, "°C/W"),
            ("sink_quoted_rise_c", self.sink_quoted_rise_c, 1.0, 200.0, "°C"),
            ("interface_c_per_w", self.interface_c_per_w, 0.0, 20.0, "°C/W"),
            ("box_area_m2", self.box_area_m2, 0.001, 100.0, "m²"),
            ("box_day_c", self.box_day_c, -60.0, 120.0, "°C"),
            ("box_night_c", self.box_night_c, -60.0, 120.0, "°C"),
            ("junction_limit_c", self.junction_limit_c, 40.0, 300.0, "°C"),
            ("heat_current_factor", self.current_factor, 1.0, 3.0, ""),
        ):
            if value is not None:
                check(name, value, low, high, unit)
        if self.box == "stated" and self.box_day_c is None:
            raise InputError("box_day_c", "it is missing, and a stated box needs its air temperature by day")
        if self.path == "stated" and self.rth_c_per_w is None:
            raise InputError("rth_c_per_w", "it is missing, and a stated heat path needs it, junction to air")


@dataclass(frozen=True, slots=True)
class Rule:
    """Which margins the ratings are held to. Factors left out follow from the profile."""

    profile: RuleProfile = "stress_only"
    voc_factor: float | None = None
    current_factor: float | None = None

    def __post_init__(self) -> None:
        """Refuse factors that are none."""
        for name, value in (("voc_factor", self.voc_factor), ("current_factor", self.current_factor)):
            if value is not None:
                check(name, value, 1.0, 5.0, "")


@dataclass(frozen=True, slots=True)
class Job:
    """One site, its candidates, and everything the answer hangs on."""

    climate: ClimateChoice
    plane: PlaneChoice
    array: Array
    bank: Bank
    charge: Charge
    loop_ohm: float
    parts: tuple[Part, ...]
    heat: Heat = field(default_factory=Heat)
    rule: Rule = field(default_factory=Rule)
    placement: Placement = "per_string"
    legs: Literal["one", "both"] = "one"
    earthing: Earthing = "negative"
    other_source_v: float | None = None
    """Highest bus voltage that a second source on the bank (wind, hydro, generator) may reach."""
    assumptions: tuple[tuple[str, str, str], ...] = ()
    """Field, value and origin of what was not given."""

    def __post_init__(self) -> None:
        """Refuse what cannot be answered."""
        if not math.isfinite(self.loop_ohm) or not 0.0 <= self.loop_ohm <= 1000.0:
            raise InputError("loop_ohm", f"{self.loop_ohm:g} ohm is outside 0 to 1000 ohm")
        if self.other_source_v is not None:
            check("other_source_v", self.other_source_v, 0.5 * self.bank.nominal_v, 4.0 * self.bank.nominal_v, "V")
        if len(self.parts) > MAX_CANDIDATES:
            raise InputError("candidates", f"{len(self.parts)} types are asked for; at most {MAX_CANDIDATES} are taken")
        string_voc_v = self.array.label.voc_v * self.array.modules_in_series
        if string_voc_v <= self.bank.at_night_v:
            raise InputError(
                "module_voc_v",
                f"a string of {string_voc_v:g} V open circuit cannot charge a bank that rests at "
                f"{self.bank.at_night_v:g} V",
            )
