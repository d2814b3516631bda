"""The form's fields: each field of a job once, with its words, its default and where that default comes from."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from server.physics.battery import CHEMISTRIES
from server.physics.climate import MOUNTINGS, PRESETS
from server.physics.thermal import BOXES
from server.web.schemas import JobIn

Kind = Literal["number", "text", "choice", "radio", "area"]
Choices = tuple[tuple[str, str], ...]


@dataclass(frozen=True, slots=True)
class Field:
    """One field: `name` is the schema's. `placeholder` shows what serves where the field is left empty."""

    name: str
    label: str
    unit: str = ""
    kind: Kind = "number"
    hint: str = ""
    choices: Choices = ()
    placeholder: str = ""
    required: bool = False

    @property
    def default(self) -> str:
        """What the form starts from: the schema's own default, as text."""
        value = JobIn.model_fields[self.name].default
        return (
            ""
            if value is None or self.required or isinstance(value, list)
            else f"{value:g}"
            if isinstance(value, float)
            else str(value)
        )


@dataclass(frozen=True, slots=True)
class Group:
    """Fields that belong together. A folded group is opened only where one of its fields is at fault."""

    title: str
    fields: tuple[Field, ...]
    intro: str = ""
    folded: bool = False
    key: str = ""


def _one_of(table: Mapping[str, str]) -> Choices:
    return tuple(table.items())


CONTROLLERS = _one_of(
    {
        "direct": "There is no controller: the panel goes straight to the battery.",
        "shunt": "When the bank is full, the panel’s own terminals read near 0 V. (It shorts the panel: shunt type.)",
        "series": "When the bank is full, the panel’s terminals rise towards open-circuit voltage. (It disconnects: "
        "series or PWM type, relay types too.)",
        "mppt": "It accepts panel voltages far above the battery’s and converts. (MPPT type.)",
    }
)

LABEL = Group(
    "The module’s label",
    (
        Field("module_voc_v", "Voc, open circuit", "V", required=True),
        Field("module_isc_a", "Isc, short circuit", "A", required=True),
        Field("module_vmp_v", "Vmp, at maximum power", "V", required=True),
        Field("module_imp_a", "Imp, at maximum power", "A", required=True),
        Field("modules_in_series", "Modules in series"),
        Field("strings", "Strings side by side"),
    ),
    "Four figures from the back of one module, at 1000 W/m² and 25 °C.",
)
BANK = Group(
    "The battery",
    (
        Field(
            "chemistry",
            "Chemistry",
            kind="choice",
            choices=_one_of({key: facts.label for key, facts in CHEMISTRIES.items()}),
            required=True,
        ),
        Field("battery_nominal_v", "Nominal voltage", "V", required=True),
        Field("battery_ah", "Capacity", "Ah", hint="For the check without a regulator."),
    ),
)
CONTROLLER = Group(
    "The charge controller",
    (
        Field(
            "controller",
            "Which of these is true?",
            kind="radio",
            choices=CONTROLLERS,
            required=True,
            hint="A voltmeter across the panel’s terminals at a full bank in sun tells the first three apart.",
        ),
        Field(
            "blocks_at_night",
            "Does it stop current from flowing back at night?",
            kind="choice",
            choices=_one_of(
                {
                    "": "as its family usually does",
                    "yes": "yes, the manual says so",
                    "no": "no",
                    "unknown": "I do not know",
                }
            ),
            hint="Left alone: no without a controller or with a shunt type, unknown for a series type, yes for MPPT.",
        ),
    ),
)
PLACE = Group(
    "The place",
    (
        Field(
            "preset",
            "A place with a climate like yours",
            kind="choice",
            choices=(
                ("", "none of these; I fill in what follows"),
                *sorted(((key, item.name) for key, item in PRESETS.items()), key=lambda pair: pair[1]),
            ),
            hint="Monthly sunlight and temperature; used unless a latitude with months or a stated day is given below.",
        ),
    ),
)
GRID = Group(
    "Or latitude and longitude, or one stated day",
    (
        Field(
            "climate",
            "Which of them counts",
            kind="choice",
            choices=_one_of(
                {
                    "": "whichever is filled in",
                    "preset": "the place chosen above",
                    "grid": "latitude and longitude, rough world grid",
                    "monthly": "latitude, longitude and my own months",
                    "stated_day": "one stated day",
                }
            ),
            hint="Left alone: a stated day before months, months before the place above, the place before the grid.",
        ),
        Field("lat_deg", "Latitude, north positive", "°"),
        Field("lon_deg", "Longitude, east positive", "°"),
        Field("altitude_m", "Altitude", "m", placeholder="from a coarse map"),
        Field("peak_sun_h", "Peak sun hours on the module", "h", hint="A stated day: kWh/m² in one day."),
        Field("daylight_h", "Daylight", "h"),
        Field("day_air_c", "Air by day", "°C"),
        Field("night_air_c", "Air at night", "°C"),
        Field("h_kwh_m2_monthly", "Sunlight on the horizontal, January to December", "kWh/m² a day", "text"),
        Field("kt_monthly", "or clearness index, January to December", "", "text", "Twelve values, 0 to 0.85."),
        Field("air_min_c_monthly", "Mean daily minimum of the air", "°C", "text", "Twelve values parted by spaces."),
        Field("air_max_c_monthly", "Mean daily maximum of the air", "°C", "text"),
        Field("record_low_c", "Record low", "°C", hint="Sets the cold Voc. Left empty: estimated from the months."),
        Field("record_high_c", "Record high", "°C", hint="Sets the hottest box. Left empty: estimated."),
        Field(
            "dark_days_per_month", "Days a month without light", "days", hint="Snow on the module, a covered vehicle."
        ),
    ),
    folded=True,
    key="place",
)
PLANE = Group(
    "How the module lies",
    (
        Field("tilt_deg", "Tilt from the horizontal", "°", placeholder="the latitude, 10 to 60"),
        Field("azimuth_deg", "Azimuth, clockwise from north", "°", placeholder="towards the equator"),
        Field(
            "mounting",
            "Mounting",
            kind="choice",
            choices=_one_of({key: item.label for key, item in MOUNTINGS.items()}),
            hint="Default: open rack, the coolest of the three.",
        ),
        Field("wind_m_s", "Mean wind", "m/s", hint="Default 1 m/s: a cautious value where nobody knows."),
        Field("albedo_frac", "Light reflected by the ground, 0 to 1", hint="Default 0.2, grass; fresh snow about 0.6."),
        Field("soiling_frac", "Light lost to dirt, 0 to 1", hint="Default 0."),
        Field("mismatch_frac", "Current lost to mismatch, 0 to 1", hint="Default 0."),
    ),
    folded=True,
    key="plane",
)
MODULE = Group(
    "More about the module, and its current in the dark",
    (
        Field("cells", "Cells in one module", placeholder="counted from Voc"),
        Field(
            "cell_type",
            "Cell type",
            kind="choice",
            choices=_one_of(
                {
                    "mono": "monocrystalline",
                    "poly": "polycrystalline",
                    "heterojunction": "heterojunction",
                    "thin_film": "thin film",
                }
            ),
            hint="Gives the temperature coefficients where the label prints none.",
        ),
        Field("voc_pct_per_c", "Temperature coefficient of Voc", "%/°C", placeholder="class value of the cell type"),
        Field("isc_pct_per_c", "Temperature coefficient of Isc", "%/°C", placeholder="class value of the cell type"),
        Field("max_series_fuse_a", "Maximum series fuse on the label", "A"),
        Field(
            "dark_current",
            "Estimated current back into the unlit module",
            kind="choice",
            choices=_one_of({"low": "low", "middle": "middle", "high": "high"}),
            hint="An estimate from cell area; all three are computed, this one ranks. One night reading replaces it:",
        ),
        Field("night_reading_a", "Read at night: current into one string", "A"),
        Field("night_reading_v", "at a bank voltage of", "V"),
        Field("night_reading_c", "at a module temperature of", "°C"),
        Field(
            "single_diode",
            "Single-diode parameters of one module",
            kind="area",
            hint='For those who have them, as JSON: {"photo_a": …, "saturation_a": …, "slope_v": …, "series_ohm": …, '
            '"shunt_ohm": …}',
        ),
    ),
    folded=True,
    key="module",
)
VOLTS = Group(
    "Battery voltages and controller details",
    (
        Field("battery_night_v", "Bank at rest by night", "V", placeholder="usual for the chemistry"),
        Field("battery_day_v", "Bank while charging", "V", placeholder="usual for the chemistry"),
        Field("battery_absorption_v", "End of charge", "V", placeholder="usual for the chemistry"),
        Field("battery_highest_v", "Highest stage ever used", "V", placeholder="usual, raised for cold"),
        Field("battery_internal_ohm", "Internal resistance", "Ω", hint="Default 0."),
        Field(
            "controller_night_a", "Controller’s own current at night", "A", hint="Default 0: it is spent either way."
        ),
        Field(
            "converter_efficiency_frac",
            "Converter efficiency, 0 to 1",
            hint="MPPT only. Default 0.96, common practice.",
        ),
    ),
    folded=True,
    key="volts",
)
CABLE = Group(
    "The cable",
    (
        Field("cable_one_way_m", "Length one way", "m", placeholder="5"),
        Field("cable_mm2", "Cross-section", "mm²", placeholder="4"),
        Field("cable_awg", "or gauge", "AWG", "text"),
        Field(
            "conductor",
            "Conductor",
            kind="choice",
            choices=_one_of({"copper": "copper", "aluminium": "aluminium"}),
        ),
        Field("cable_c", "Temperature of the cable", "°C", placeholder="40"),
        Field("terminals_ohm", "Terminals and fuse holders, all", "Ω", hint="Default 0."),
        Field("loop_ohm", "or the whole loop’s resistance", "Ω", hint="Takes the place of everything above."),
        Field(
            "cable_ampacity_a",
            "What the string cable may carry",
            "A",
            placeholder="not judged",
            hint="By your code’s table, where it lies; fault currents are held against it.",
        ),
    ),
    "Left empty: 5 m of 4 mm² copper at 40 °C, an assumption.",
    folded=True,
    key="cable",
)
DIODE = Group(
    "Which diodes, where, how cooled, by which rule",
    (
        Field(
            "candidates",
            "Types to compare",
            "",
            "text",
            "Names from the catalogue parted by commas. Left empty: the whole catalogue.",
            placeholder="all",
        ),
        Field(
            "own_diodes",
            "Parts of your own",
            kind="area",
            hint="A JSON list, as the API takes it; the page about the API has an example.",
        ),
        Field(
            "in_hand",
            "Parts in hand, as measured",
            kind="area",
            hint=(
                "A JSON list such as [{“type”: “MBR1045”, “forward”: [{“current_a”: 5, “voltage_v”: 0.5}], “reverse”: "
                "[{“bank_v”: 12.7, “meter_v”: 5}]}]: the drop at a current, the leakage through a 10 MΩ voltmeter."
            ),
        ),
        Field(
            "earthing",
            "Earthing of the system",
            kind="choice",
            choices=_one_of(
                {
                    "negative": "negative earth",
                    "positive": "positive earth, as in −48 V telecom",
                    "floating": "neither pole earthed",
                }
            ),
            hint="Default: negative. Decides which lead the diode goes into, and where a live tab stands.",
        ),
        Field(
            "other_source_v",
            "Second source: highest bank voltage",
            "V",
            placeholder="no other source",
            hint="Wind, hydro or a generator on the same bank.",
        ),
        Field(
            "placement",
            "Placement",
            kind="choice",
            choices=_one_of({"per_string": "one diode in each string", "array": "one diode for the whole array"}),
            hint="Default: one in each string.",
        ),
        Field(
            "legs",
            "Packages with two diodes",
            kind="choice",
            choices=_one_of({"one": "use one leg", "both": "use both legs side by side"}),
            hint="Default: one leg. Both legs leak twice as much.",
        ),
        Field(
            "box",
            "Where the diode sits",
            kind="choice",
            choices=(*((key, item.label) for key, item in BOXES.items()), ("stated", "stated below")),
            hint="Default: in the shade. Sets the air around it, an engineering estimate.",
        ),
        Field("box_day_c", "Air around it by day", "°C"),
        Field("box_night_c", "Air around it at night", "°C", placeholder="outside air"),
        Field(
            "box_area_m2",
            "Outer area of a closed box",
            "m²",
            placeholder="open",
            hint="The diodes’ own heat then warms its air.",
        ),
        Field(
            "heat_path",
            "How it is cooled",
            kind="choice",
            choices=_one_of(
                {
                    "as_packaged": "as its package usually is",
                    "free_air": "free air, no help",
                    "pcb": "soldered to a board like its data sheet’s",
                    "leads": "leads held cool",
                    "heatsink": "on a heatsink",
                    "stated": "stated resistance",
                }
            ),
        ),
        Field("sink_c_per_w", "Heatsink to air", "°C/W"),
        Field(
            "sink_quoted_rise_c",
            "Heatsink figure quoted at a rise of",
            "°C",
            placeholder="as it stands",
            hint="Extrusions are quoted at about 75 °C of rise; a smaller rise moves less air. Left empty: the figure "
            "holds as it stands.",
        ),
        Field(
            "one_sink",
            "All diodes on one heatsink",
            kind="choice",
            choices=_one_of({"no": "no, one each", "yes": "yes, they share its rise"}),
            hint="In positive leads their live tabs stand at one voltage; in negative leads insulate each.",
        ),
        Field("interface_c_per_w", "Case to heatsink", "°C/W", hint="Default 1 °C/W: an insulating pad."),
        Field("rth_c_per_w", "Junction to air, stated", "°C/W"),
        Field("junction_limit_c", "Junction limit of your own", "°C", placeholder="the part’s"),
        Field("heat_current_factor", "Worst-case current over Isc, for heat", hint="Default 1.25."),
        Field(
            "rule_profile",
            "Margins to hold the ratings to",
            kind="choice",
            choices=_one_of(
                {
                    "stress_only": "what the part really meets",
                    "double_voc": "2 × cold Voc and 1.4 × Isc",
                    "cold_table": "cold-Voc table and 1.56 × Isc",
                    "double_voc_max": "2 × highest Voc and 1.1 × highest Isc",
                }
            ),
            hint="Default: the real stress. Your local code may ask for more.",
        ),
        Field("voc_factor", "Voltage factor of your own", placeholder="the rule’s"),
        Field("current_factor", "Current factor of your own", placeholder="the rule’s"),
    ),
    folded=True,
    key="diode",
)

OPEN_GROUPS = (LABEL, BANK, CONTROLLER, PLACE)
FOLDED_GROUPS = (GRID, CABLE, DIODE, VOLTS, MODULE, PLANE)
# Where a field is spoken of elsewhere: its label, but for those whose label is a question.
LABELS = {field.name: field.label for group in OPEN_GROUPS + FOLDED_GROUPS for field in group.fields} | {
    "controller": "Charge controller",
    "blocks_at_night": "Blocks at night",
    "dark_current": "Estimated dark current",
    "climate": "Source of the climate",
    "kt_monthly": "Clearness index by month",
    "night_reading_v": "Bank voltage of the night reading",
    "night_reading_c": "Module temperature of the night reading",
    "cable_awg": "Cable gauge",
    "loop_ohm": "Resistance of the whole loop",
    "sink_quoted_rise_c": "Rise at which the heatsink is quoted",
    "other_source_v": "Second source",
    "box_area_m2": "Outer area of the box",
}
