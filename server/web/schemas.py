"""JobIn and StudyOut: the boundary's records. pydantic stays in here."""

import json
from typing import Annotated, Any, Literal
from urllib.parse import urlencode

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field

from server.catalog import fit, parts
from server.catalog.datasheet import ForwardPoint, ReversePoint
from server.catalog.in_hand import ForwardReading, ReverseReading, refit, through_voltmeter
from server.catalog.part import Part
from server.errors import InputError
from server.physics import wire
from server.physics.battery import Bank
from server.physics.diode import ActiveLaw, JunctionLaw
from server.physics.pv import CLASS_COEFFICIENTS, ModuleLabel, SingleDiode
from server.selection.job import (
    Array,
    Charge,
    ClimateChoice,
    Heat,
    Job,
    NightReading,
    PlaneChoice,
    Rule,
)
from server.selection.result import (
    Assumption,
    Audit,
    Candidate,
    Caution,
    Check,
    Crossover,
    DarkBand,
    DayTrace,
    FaultStudy,
    FieldTest,
    Ledger,
    Note,
    ReverseHeat,
    SecondSource,
    SiteFacts,
    Standing,
    Study,
    Verdict,
)


def number_text(value: object) -> object:
    """A decimal comma is a decimal comma: "0,31" is 0.31. An empty field is a field left out."""
    if isinstance(value, str):
        text = value.strip()
        if not text:
            return None
        if text.count(",") == 1 and "." not in text:
            return text.replace(",", ".")
        return text
    if isinstance(value, bool):
        raise ValueError("a number is wanted, not true or false")
    return value


def _twelve(value: object) -> object:
    """Twelve numbers from a JSON list, or from text parted by spaces or semicolons (or commas, with decimal points)."""
    if value is None or (isinstance(value, str) and not value.strip()):
        return None
    if isinstance(value, list) and len(value) == 1 and isinstance(value[0], str):
        value = value[0]
    if isinstance(value, str):
        text = value.replace(";", " ")
        pieces = text.split() if len(text.split()) > 1 else text.split(",")
        value = [piece.strip().rstrip(",") for piece in pieces if piece.strip()]
    return [number_text(piece) for piece in value] if isinstance(value, list) else value


def _names(value: object) -> object:
    """Type names from a JSON list, repeated query parameters, or text parted by commas."""
    if isinstance(value, str):
        value = [value]
    if isinstance(value, list):
        return [piece.strip() for item in value for piece in str(item).split(",") if piece.strip()]
    return value


def _own(value: object) -> object:
    """Own diodes from a JSON list, or from the same list as text in a query."""
    if isinstance(value, list) and len(value) == 1 and isinstance(value[0], str):
        value = value[0]
    if isinstance(value, str):
        if not value.strip():
            return []
        try:
            return json.loads(value)
        except ValueError as bad:
            raise ValueError("this is not a JSON list of diodes") from bad
    return value


def _record(value: object) -> object:
    """One record as it is, or as JSON text in a query."""
    if isinstance(value, str):
        if not value.strip():
            return None
        try:
            return json.loads(value)
        except ValueError as bad:
            raise ValueError("this is not a JSON object") from bad
    return value


def _empty_is_none(value: object) -> object:
    return None if isinstance(value, str) and not value.strip() else value


Number = Annotated[float, BeforeValidator(number_text), Field(allow_inf_nan=False)]
Optional = Annotated[Annotated[float, Field(allow_inf_nan=False)] | None, BeforeValidator(number_text)]
# Bounded here, because a whole number of 400 digits cannot even be printed as a float in a sentence.
Whole = Annotated[int, BeforeValidator(number_text), Field(ge=-(10**9), le=10**9)]
OptionalWhole = Annotated[Annotated[int, Field(ge=-(10**9), le=10**9)] | None, BeforeValidator(number_text)]
Twelve = Annotated[list[float] | None, BeforeValidator(_twelve)]
Text = Annotated[Annotated[str, Field(max_length=80)] | None, BeforeValidator(_empty_is_none)]


class Strict(BaseModel):
    """Unknown names are refused, numbers are finite, records do not change."""

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)


class ForwardPointIn(Strict):
    """A forward point: volts at amperes, with the junction at `junction_c`."""

    current_a: Number
    voltage_v: Number
    junction_c: Number = 25.0
    kind: Literal["typ", "max"] = "typ"


class ReversePointIn(Strict):
    """A leakage point: amperes at volts in reverse, with the junction at `junction_c`."""

    reverse_v: Number
    current_a: Number
    junction_c: Number = 25.0
    kind: Literal["typ", "max"] = "typ"


class ActiveIn(Strict):
    """An active rectifier's figures: `regulated_v` at light load, then `rds_on_ohm`."""

    regulated_v: Number = 0.02
    rds_on_ohm: Number
    rds_on_per_k: Number = 0.004
    leakage_a: Number = 1e-6
    leakage_max_a: Optional = None
    leakage_ref_v: Number
    leakage_exponent: Number = 1.0
    leakage_ev: Number = 0.6
    supply_a: Number = 0.0
    turnoff_v: Number = -0.011


class OwnDiodeIn(Strict):
    """A part of one's own: ratings, and either points for the fit or an active rectifier's figures."""

    name: Annotated[str, Field(min_length=1, max_length=60)]
    technology: Literal["pn_silicon", "schottky", "trench_schottky", "super_barrier", "sic_schottky", "active"]
    vrrm_v: Number
    forward: Annotated[list[ForwardPointIn], Field(max_length=40)] = []
    reverse: Annotated[list[ReversePointIn], Field(max_length=40)] = []
    ideality: Optional = None
    forward_slope_v_per_k: Optional = None
    leakage_exponent: Optional = None
    active: ActiveIn | None = None
    if_av_a: Optional = None
    if_av_at: Literal["case", "lead", "ambient"] | None = None
    if_av_at_c: Optional = None
    ifsm_a: Optional = None
    tj_max_c: Number = 150.0
    rth_ja_c_per_w: Optional = None
    rth_jl_c_per_w: Optional = None
    rth_jc_c_per_w: Optional = None
    package: Text = None
    tab_live: bool | None = None

    def to_part(self, index: int) -> Part:
        """The part, its laws fitted. Raises InputError naming the entry."""
        where = f"own_diodes[{index}]"
        for name, low, high, unit in (
            ("vrrm_v", 1.0, 10_000.0, "V"),
            ("if_av_a", 0.001, 10_000.0, "A"),
            ("if_av_at_c", -60.0, 300.0, "°C"),
            ("ifsm_a", 0.01, 1e6, "A"),
            ("tj_max_c", 40.0, 400.0, "°C"),
            ("rth_ja_c_per_w", 0.01, 2000.0, "°C/W"),
            ("rth_jl_c_per_w", 0.001, 2000.0, "°C/W"),
            ("rth_jc_c_per_w", 0.001, 2000.0, "°C/W"),
            ("ideality", 0.8, 4.0, ""),
            ("forward_slope_v_per_k", -0.005, 0.005, "V/K"),
            ("leakage_exponent", 0.1, 5.0, ""),
        ):
            value = getattr(self, name)
            if value is not None and not low <= value <= high:
                raise InputError(f"{where}.{name}", f"{value:g} {unit} is outside {low:g} to {high:g} {unit}".strip())
        typical: JunctionLaw | ActiveLaw
        maximum: JunctionLaw | ActiveLaw
        fitted = None
        try:
            if self.technology == "active":
                if self.active is None:
                    raise InputError("active", "an active rectifier needs its figures under this name")
                given = self.active.model_dump()
                worst_a = given.pop("leakage_max_a")
                typical = ActiveLaw(**given)
                maximum = ActiveLaw(**{**given, "leakage_a": worst_a or given["leakage_a"]})
            else:
                fitted = fit.fit_points(
                    self.technology,
                    tuple(ForwardPoint(p.current_a, p.voltage_v, p.junction_c, p.kind) for p in self.forward),
                    tuple(ReversePoint(p.reverse_v, p.current_a, p.junction_c, p.kind) for p in self.reverse),
                    vrrm_v=self.vrrm_v,
                    ideality=self.ideality,
                    forward_slope_v_per_k=self.forward_slope_v_per_k,
                    leakage_exponent=self.leakage_exponent,
                )
                typical, maximum = fitted.typical, fitted.maximum
        except InputError as bad:
            raise InputError(f"{where}.{bad.field}", bad.sentence) from bad
        return Part(
            type=self.name,
            technology=self.technology,
            package=self.package,
            dies=1,
            vrrm_v=self.vrrm_v,
            if_av_a=self.if_av_a,
            if_av_at=self.if_av_at,
            if_av_at_c=self.if_av_at_c,
            if_av_per="package",
            ifsm_a=self.ifsm_a,
            tj_max_c=self.tj_max_c,
            tj_max_forward_only_c=None,
            rth_ja_c_per_w=self.rth_ja_c_per_w,
            rth_jl_c_per_w=self.rth_jl_c_per_w,
            rth_jc_c_per_w=self.rth_jc_c_per_w,
            tab_live=self.tab_live,
            sheets=(),
            fit=fitted,
            typical=typical,
            maximum=maximum,
            assumed=fitted.assumed if fitted else (),
            warnings=fitted.warnings if fitted else (),
            note="own part",
        )


class DropReadingIn(Strict):
    """Read in hand: volts across the part at a current, its body at about `junction_c`."""

    current_a: Number
    voltage_v: Number
    junction_c: Number = 25.0


class LeakReadingIn(Strict):
    """Read in hand: current at a reverse voltage, or what a voltmeter in series shows on a bank of `bank_v`."""

    reverse_v: Optional = None
    current_a: Optional = None
    bank_v: Optional = None
    meter_v: Optional = None
    meter_ohm: Number = 10e6
    junction_c: Number = 25.0

    def to_reading(self, where: str) -> ReverseReading:
        """The reading, whichever way it was taken. Raises InputError."""
        if self.bank_v is not None and self.meter_v is not None:
            return through_voltmeter(self.bank_v, self.meter_v, self.meter_ohm, self.junction_c)
        if self.reverse_v is None or self.current_a is None:
            raise InputError(where, "a leakage reading needs reverse_v and current_a, or bank_v and meter_v")
        return ReverseReading(self.reverse_v, self.current_a, self.junction_c)


class InHandIn(Strict):
    """A catalogue type as measured with a multimeter: two to four readings shrink its band."""

    type: Annotated[str, Field(min_length=1, max_length=60)]
    forward: Annotated[list[DropReadingIn], Field(max_length=8)] = []
    reverse: Annotated[list[LeakReadingIn], Field(max_length=8)] = []

    def to_part(self, index: int) -> Part:
        """The catalogue's part moved through the readings. Raises InputError naming the entry."""
        where = f"in_hand[{index}]"
        try:
            leaks = [leak.to_reading("reverse") for leak in self.reverse]
            drops = [ForwardReading(r.current_a, r.voltage_v, r.junction_c) for r in self.forward]
            return refit(parts.part(self.type), drops, leaks)
        except InputError as bad:
            field = "type" if bad.field == "candidates" else bad.field
            raise InputError(f"{where}.{field}", bad.sentence) from bad


class SingleDiodeIn(Strict):
    """De Soto parameters of one module at STC, where they are known better than the label."""

    photo_a: Number
    saturation_a: Number
    slope_v: Number
    series_ohm: Number = 0.0
    shunt_ohm: Number = 1e9
    isc_a_per_k: Number = 0.0

    def to_module(self) -> SingleDiode:
        """The physics' record."""
        return SingleDiode(**self.model_dump())


# Defaults that `to_job` fills in and names, so that the page can say where each comes from.
CABLE_C = 40.0
DEFAULT_CABLE_M, DEFAULT_CABLE_MM2 = 5.0, 4.0


class JobIn(Strict):
    """A job as it arrives, by query string or JSON body: the same names either way. Text takes a decimal comma."""

    # the modules
    module_voc_v: Annotated[Number, Field(description="Open-circuit voltage of one module at STC, from its label")]
    module_isc_a: Annotated[Number, Field(description="Short-circuit current of one module at STC")]
    module_vmp_v: Annotated[Number, Field(description="Voltage at maximum power, one module at STC")]
    module_imp_a: Annotated[Number, Field(description="Current at maximum power, one module at STC")]
    cells: Annotated[OptionalWhole, Field(description="Cells of one module; counted from Voc where left out")] = None
    cell_type: Literal["mono", "poly", "heterojunction", "thin_film"] = "mono"
    voc_pct_per_c: Annotated[Optional, Field(description="Temperature coefficient of Voc, % per °C, negative")] = None
    isc_pct_per_c: Annotated[Optional, Field(description="Temperature coefficient of Isc, % per °C")] = None
    max_series_fuse_a: Annotated[Optional, Field(description="Maximum series fuse on the label")] = None
    cable_ampacity_a: Annotated[Optional, Field(description="What the string cable may carry where it lies")] = None
    modules_in_series: Whole = 1
    strings: Whole = 1
    soiling_frac: Number = 0.0
    mismatch_frac: Number = 0.0
    dark_current: Literal["low", "middle", "high"] = "middle"
    night_reading_a: Annotated[Optional, Field(description="Current from the bank into one string, read at night")] = (
        None
    )
    night_reading_v: Optional = None
    night_reading_c: Optional = None
    single_diode: Annotated[SingleDiodeIn | None, BeforeValidator(_record)] = None

    # the place
    climate: Literal["preset", "grid", "monthly", "stated_day"] | None = None
    preset: Text = None
    lat_deg: Optional = None
    lon_deg: Optional = None
    altitude_m: Optional = None
    kt_monthly: Twelve = None
    h_kwh_m2_monthly: Twelve = None
    air_min_c_monthly: Twelve = None
    air_max_c_monthly: Twelve = None
    peak_sun_h: Optional = None
    daylight_h: Optional = None
    day_air_c: Optional = None
    night_air_c: Optional = None
    record_low_c: Optional = None
    record_high_c: Optional = None
    dark_days_per_month: Number = 0.0
    tilt_deg: Optional = None
    azimuth_deg: Optional = None
    albedo_frac: Number = 0.2
    mounting: Literal["open_rack", "roof_gap", "flat_insulated"] = "open_rack"
    wind_m_s: Number = 1.0

    # the bank and its controller
    chemistry: Literal["flooded", "agm", "gel", "lifepo4", "li_ion", "nicd", "nimh"]
    battery_nominal_v: Number
    battery_ah: Optional = None
    battery_night_v: Optional = None
    battery_day_v: Optional = None
    battery_absorption_v: Optional = None
    battery_highest_v: Optional = None
    battery_internal_ohm: Number = 0.0
    controller: Literal["direct", "shunt", "series", "mppt"]
    blocks_at_night: Literal["yes", "no", "unknown"] | None = None
    controller_night_a: Number = 0.0
    converter_efficiency_frac: Number = 0.96

    # the cable
    cable_one_way_m: Optional = None
    cable_mm2: Optional = None
    cable_awg: Text = None
    conductor: Literal["copper", "aluminium"] = "copper"
    cable_c: Optional = None
    terminals_ohm: Number = 0.0
    loop_ohm: Annotated[
        Optional, Field(description="Resistance out and back; takes the place of the cable's fields")
    ] = None

    # the diode
    candidates: Annotated[
        Annotated[list[Annotated[str, Field(max_length=60)]], Field(max_length=200)] | None, BeforeValidator(_names)
    ] = None
    own_diodes: Annotated[list[OwnDiodeIn], BeforeValidator(_own), Field(max_length=20)] = []
    in_hand: Annotated[
        list[InHandIn],
        BeforeValidator(_own),
        Field(max_length=10, description="Catalogue types as measured: readings that refit them"),
    ] = []
    legs: Literal["one", "both"] = "one"
    placement: Literal["per_string", "array"] = "per_string"
    earthing: Literal["negative", "positive", "floating"] = "negative"
    other_source_v: Annotated[
        Optional, Field(description="Highest bus voltage a second source on the bank may reach: wind, hydro, generator")
    ] = None
    heat_path: Literal["as_packaged", "free_air", "pcb", "leads", "heatsink", "stated"] = "as_packaged"
    rth_c_per_w: Optional = None
    sink_c_per_w: Optional = None
    sink_quoted_rise_c: Annotated[Optional, Field(description="Rise at which the sink's figure is quoted")] = None
    one_sink: Annotated[Literal["no", "yes"], Field(description="All diodes on one sink")] = "no"
    interface_c_per_w: Number = 1.0
    box: Literal["open_shade", "light_box", "dark_box", "junction_box", "engine_room", "stated"] = "open_shade"
    box_day_c: Optional = None
    box_night_c: Optional = None
    box_area_m2: Annotated[Optional, Field(description="Outer area of a closed box, warmed by the diodes in it")] = None
    junction_limit_c: Optional = None
    heat_current_factor: Number = 1.25
    rule_profile: Literal["stress_only", "double_voc", "cold_table", "double_voc_max"] = "stress_only"
    voc_factor: Optional = None
    current_factor: Optional = None

    def to_job(self) -> Job:
        """The frozen Job, with what was not given filled in and named. Raises InputError."""
        assumed: list[tuple[str, str, str]] = []
        label = ModuleLabel(
            self.module_voc_v,
            self.module_isc_a,
            self.module_vmp_v,
            self.module_imp_a,
            self.cells,
            self.cell_type,
            self.voc_pct_per_c,
            self.isc_pct_per_c,
        )
        if self.cells is None:
            assumed.append(("cells", f"{label.series_cells}", "nearest common count by Voc"))
        for index, name in enumerate(("voc_pct_per_c", "isc_pct_per_c")):
            if getattr(self, name) is None:
                value = CLASS_COEFFICIENTS[self.cell_type][index]
                assumed.append(
                    (name, f"{value:+.3f} %/°C", f"class value for {self.cell_type.replace('_', ' ')} cells")
                )
        reading = None
        if self.night_reading_a is not None:
            if self.night_reading_v is None or self.night_reading_c is None:
                missing = "night_reading_v" if self.night_reading_v is None else "night_reading_c"
                raise InputError(
                    missing, "it is missing; a night reading needs its current, its voltage and its temperature"
                )
            reading = NightReading(self.night_reading_a, self.night_reading_v, self.night_reading_c)
        else:
            assumed.append(
                ("dark_current", self.dark_current, "estimate from cell area; one night reading replaces it")
            )
        bank = Bank(
            self.chemistry,
            self.battery_nominal_v,
            self.battery_ah,
            self.battery_night_v,
            self.battery_day_v,
            self.battery_absorption_v,
            self.battery_highest_v,
            self.battery_internal_ohm,
        )
        for name, given, value in (
            ("battery_night_v", self.battery_night_v, bank.at_night_v),
            ("battery_day_v", self.battery_day_v, bank.by_day_v),
            ("battery_absorption_v", self.battery_absorption_v, bank.full_v),
        ):
            if given is None:
                assumed.append((name, f"{value:.2f} V", f"{bank.facts.label}, {bank.cells} cells, common practice"))
        return Job(
            climate=self._climate(),
            plane=PlaneChoice(self.tilt_deg, self.azimuth_deg, self.albedo_frac, self.mounting, self.wind_m_s),
            array=Array(
                label,
                self.single_diode.to_module() if self.single_diode else None,
                self.modules_in_series,
                self.strings,
                self.soiling_frac,
                self.mismatch_frac,
                self.dark_current,
                reading,
                self.max_series_fuse_a,
                self.cable_ampacity_a,
            ),
            bank=bank,
            charge=self._charge(assumed),
            loop_ohm=self._ohm(assumed),
            parts=self._parts(),
            heat=Heat(
                self.heat_path,
                self.rth_c_per_w,
                self.sink_c_per_w,
                self.sink_quoted_rise_c,
                self.one_sink == "yes",
                self.interface_c_per_w,
                self.box,
                self.box_day_c,
                self.box_night_c,
                self.box_area_m2,
                self.junction_limit_c,
                self.heat_current_factor,
            ),
            rule=Rule(self.rule_profile, self.voc_factor, self.current_factor),
            placement=self.placement,
            legs=self.legs,
            earthing=self.earthing,
            other_source_v=self.other_source_v,
            assumptions=tuple(assumed),
        )

    def _climate(self) -> ClimateChoice:
        """The climate asked for, or the one the given fields can only mean."""
        source = self.climate
        if source is None:
            if self.peak_sun_h is not None:
                source = "stated_day"
            elif self.kt_monthly is not None or self.h_kwh_m2_monthly is not None:
                source = "monthly"
            elif self.preset is not None:
                source = "preset"
                for name in ("lat_deg", "lon_deg"):
                    if getattr(self, name) is not None:
                        raise InputError(
                            name,
                            f"{getattr(self, name):g} is given and the place {self.preset!r} too; clear one of them",
                        )
            elif self.lat_deg is not None or self.lon_deg is not None:
                source = "grid"
            else:
                raise InputError(
                    "preset", "no place is given; name a preset, a latitude and longitude, or a stated day"
                )
        names = [name for name in ClimateChoice.__slots__ if name != "source"]
        values = {name: getattr(self, name) for name in names}
        for name in ("kt_monthly", "h_kwh_m2_monthly", "air_min_c_monthly", "air_max_c_monthly"):
            values[name] = None if values[name] is None else tuple(values[name])
        return ClimateChoice(source, **values)

    def _charge(self, assumed: list[tuple[str, str, str]]) -> Charge:
        """The controller, with what its family usually does where the job does not say."""
        blocks = self.blocks_at_night
        if blocks is None:
            usual: dict[str, Literal["yes", "no", "unknown"]] = {
                "direct": "no",
                "shunt": "no",
                "series": "unknown",
                "mppt": "yes",
            }
            blocks = usual[self.controller]
            origin = {
                "direct": "no controller is there to block",
                "shunt": "this family relies on a series diode",
                "series": "this family comes both ways; read the manual or measure",
                "mppt": "most of this family block; read the manual",
            }[self.controller]
            assumed.append(("blocks_at_night", blocks, f"{origin} (common practice)"))
        return Charge(self.controller, blocks, self.controller_night_a, self.converter_efficiency_frac)

    def _ohm(self, assumed: list[tuple[str, str, str]]) -> float:
        """Loop resistance, from the cable unless it is stated."""
        if self.loop_ohm is not None:
            return self.loop_ohm
        length_m, mm2 = self.cable_one_way_m, self.cable_mm2
        if length_m is None:
            length_m = DEFAULT_CABLE_M
            assumed.append(("cable_one_way_m", f"{length_m:g} m", "assumed"))
        if mm2 is None and self.cable_awg is None:
            mm2 = DEFAULT_CABLE_MM2
            assumed.append(("cable_mm2", f"{mm2:g} mm²", "assumed"))
        temp_c = self.cable_c
        if temp_c is None:
            temp_c = CABLE_C
            assumed.append(("cable_c", f"{temp_c:g} °C", "assumed"))
        elif not -60.0 <= temp_c <= 150.0:
            raise InputError("cable_c", f"{temp_c:g} °C is outside -60 to 150 °C")
        return wire.loop_ohm(
            length_m,
            temp_c,
            area_mm2=mm2,
            awg=self.cable_awg,
            conductor=self.conductor,
            terminals_ohm=self.terminals_ohm,
        )

    def _parts(self) -> tuple[Part, ...]:
        """The types asked for (all of the catalogue where none is), then the job's own."""
        own = tuple(entry.to_part(index) for index, entry in enumerate(self.own_diodes))
        own += tuple(entry.to_part(index) for index, entry in enumerate(self.in_hand))
        if self.candidates is None:
            return own if own else parts.load_parts()
        chosen = tuple(parts.part(name) for name in dict.fromkeys(self.candidates))
        return chosen + own


# --- the answer -------------------------------------------------------------------------------------------------------

MAX_ADDRESS_BYTES = 32_768


class RatingsOut(BaseModel):
    """What is printed about a part, merged on the safe side over its sheets. None: not printed."""

    model_config = ConfigDict(from_attributes=True)

    package: str | None
    dies: int
    vrrm_v: float
    if_av_a: float | None
    if_av_at: str | None
    if_av_at_c: float | None
    if_av_per: str
    ifsm_a: float | None
    tj_max_c: float
    tj_max_forward_only_c: float | None
    rth_ja_c_per_w: float | None
    rth_jl_c_per_w: float | None
    rth_jc_c_per_w: float | None
    tab_live: bool | None


class PartOut(BaseModel):
    """A part as a study names it."""

    key: str
    type: str
    technology: str
    ratings: RatingsOut

    @classmethod
    def of(cls, part: Part) -> "PartOut":
        """From the catalogue's record."""
        return cls(key=part.key, type=part.type, technology=part.technology, ratings=RatingsOut.model_validate(part))


class CandidateOut(BaseModel):
    """One candidate, judged; `part` is null for the two references."""

    key: str
    title: str
    technology: str
    part: PartOut | None
    standing: Standing
    rank: int | None
    typical: Ledger
    maximum: Ledger
    dark_typical: DarkBand
    dark_maximum: DarkBand
    checks: tuple[Check, ...]
    hottest_junction_c: float | None
    worst_power_w: float | None
    rth_c_per_w: float | None
    rth_origin: str
    sink_needed_c_per_w: float | None
    sink_to_buy_c_per_w: float | None
    reverse_heat: ReverseHeat | None
    tied: bool
    reasons: tuple[str, ...]

    @classmethod
    def of(cls, item: Candidate) -> "CandidateOut":
        """From the study's record."""
        values: dict[str, Any] = {name: getattr(item, name) for name in cls.model_fields}
        values["part"] = PartOut.of(item.part) if item.part else None
        return cls(**values)


class LinksOut(BaseModel):
    """The same job's other views; null where the job is too long for an address."""

    page: str | None
    sheet: str | None
    json_: Annotated[str | None, Field(serialization_alias="json")]


class StudyOut(BaseModel):
    """The whole answer. Numbers that do not exist (not converged, no stable point) are null."""

    engine_version: str
    inputs: dict[str, Any]
    verdict: Verdict
    facts: SiteFacts
    candidates: list[CandidateOut]
    site_checks: tuple[Check, ...]
    cautions: tuple[Caution, ...]
    warnings: tuple[Note, ...]
    assumptions: tuple[Assumption, ...]
    audit: Audit
    faults: FaultStudy
    field_test: FieldTest | None
    second_source: SecondSource | None
    crossover: Crossover | None
    day: DayTrace
    links: LinksOut

    @classmethod
    def of(cls, given: JobIn, study: Study) -> "StudyOut":
        """From the study, with the job as it was given."""
        kept = {name: getattr(study, name) for name in cls.model_fields if hasattr(study, name)}
        kept["candidates"] = [CandidateOut.of(item) for item in study.candidates]
        return cls(**kept, inputs=inputs_of(given), links=links_of(given))


def inputs_of(given: JobIn) -> dict[str, Any]:
    """The job's inputs as given, what was left out left out."""
    return given.model_dump(mode="json", exclude_unset=True, exclude_none=True)


def query_of(given: JobIn) -> str:
    """The job as a query string, as short as it can be: no defaults, lists as text, records as JSON."""
    pairs = []
    for name, value in given.model_dump(mode="json", exclude_unset=True, exclude_defaults=True).items():
        if name in ("own_diodes", "in_hand", "single_diode"):
            value = json.dumps(value, separators=(",", ":"))
        elif isinstance(value, list):
            value = (", " if name == "candidates" else " ").join(str(piece) for piece in value)
        elif isinstance(value, float) and value.is_integer() and abs(value) < 1e15:
            value = int(value)
        pairs.append((name, value))
    return urlencode(pairs)


def links_of(given: JobIn) -> LinksOut:
    """Addresses of the job's views."""
    query = query_of(given)
    if len(query) > MAX_ADDRESS_BYTES:
        return LinksOut(page=None, sheet=None, json_=None)
    return LinksOut(page=f"/job?{query}", sheet=f"/sheet?{query}", json_=f"/job.json?{query}")


# --- the catalogue ----------------------------------------------------------------------------------------------------


class SheetOut(BaseModel):
    """The document that printed values come from."""

    model_config = ConfigDict(from_attributes=True)

    manufacturer: str
    part_number: str
    title: str
    document_number: str | None
    revision: str | None
    date: str | None
    url: str | None
    read: bool
    note: str | None


class MisfitOut(BaseModel):
    """A printed point beside ours: volts at `at` amperes (forward), amperes at `at` volts (reverse)."""

    model_config = ConfigDict(from_attributes=True)

    quantity: str
    at: float
    junction_c: float
    kind: str
    printed: float
    ours: float


class CatalogPartOut(PartOut):
    """A part with all that stands behind it."""

    family: str | None
    note: str | None
    sheets: list[SheetOut]
    points: list[MisfitOut]
    forward_misfit_v: float | None
    leakage_misfit_log: float | None
    assumed: list[str]
    warnings: list[Note]

    @classmethod
    def of(cls, part: Part) -> "CatalogPartOut":
        """From the catalogue's record."""
        fitted = part.fit
        return cls(
            **dict(PartOut.of(part)),
            family=part.family,
            note=part.note,
            sheets=[SheetOut.model_validate(sheet) for sheet in part.sheets],
            points=[MisfitOut.model_validate(m) for m in fitted.misfits] if fitted else [],
            forward_misfit_v=fitted.forward_misfit_v if fitted else None,
            leakage_misfit_log=fitted.leakage_misfit_log if fitted else None,
            assumed=list(part.assumed),
            warnings=[Note(w.code, w.sentence) for w in part.warnings],
        )


class UnfittedOut(BaseModel):
    """A type that cannot be computed with, and why."""

    model_config = ConfigDict(from_attributes=True)

    type: str
    technology: str
    reason: str


class CatalogOut(BaseModel):
    """Every part, and every type that is none."""

    engine_version: str
    parts: list[CatalogPartOut]
    unfitted: list[UnfittedOut]
